"""Circuits with lossy lines and transit delays: no finite order, yet exactly known modes.

The nodal matrix M(s) is entire but for √s, since each line enters by its chain equations with
its end currents as unknowns; the modes are the zeros of det M(s). They are found by Newton's method
on the logarithmic derivative, d/ds log det M = tr(M⁻¹M'), known ones divided out, and counted by
the winding number of det M around the region (argument principle).
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from itertools import pairwise

import numpy as np
from circuits import Circuit, ComplexArray, FloatArray

from proving.case import Case, Exact, Noise, noisy_case
from proving.cramer_rao import Known
from proving.lumped import Builder, Generator, uniform_log

STEP = 1e-5
"""Relative step of the central difference for M'."""
TURN = 0.8
"""Largest step of phase between neighbours on a contour, rad."""


@dataclass(frozen=True)
class Line:
    """A line with skin-effect loss: θ = sT√(1 + k√(ω₀/s)), Z = Z₀√(1 + k√(ω₀/s)).

    Parameters
    ----------
    first, second : str
        End nodes; ``0`` shorts an end.
    ohm, delay_s, loss, corner : float
        Z₀, T, k, and ω₀ in rad/s.
    """

    first: str
    second: str
    ohm: float
    delay_s: float
    loss: float
    corner: float


@dataclass(frozen=True)
class Delayed:
    """A transconductance with transit delay: i(drain) = gm·exp(−sτ)·v(gate).

    Parameters
    ----------
    drain, gate : str
        Nodes.
    siemens, delay_s : float
        gm and τ.
    """

    drain: str
    gate: str
    siemens: float
    delay_s: float


@dataclass(frozen=True)
class DistributedCircuit:
    """A lumped circuit with lines and delayed transconductances.

    Parameters
    ----------
    lumped : Circuit
        Must know every node.
    lines : tuple of Line
        Lines.
    delayed : tuple of Delayed
        Transconductances.
    """

    lumped: Circuit
    lines: tuple[Line, ...] = ()
    delayed: tuple[Delayed, ...] = ()

    def matrix(self, s: ComplexArray) -> ComplexArray:
        """Return M(s), (…, n, n), the end currents of the lines scaled by their impedance."""
        s = np.asarray(s, dtype=np.complex128)
        own = len(self.lumped.conductance)
        size = own + 2 * len(self.lines)
        at = {name: i for i, name in enumerate(self.lumped.nodes)} | {"0": size}
        m = np.zeros((*s.shape, size + 1, size + 1), dtype=np.complex128)
        m[..., :own, :own] = self.lumped.conductance + s[..., None, None] * self.lumped.susceptance
        for one in self.delayed:
            m[..., at[one.drain], at[one.gate]] += one.siemens * np.exp(-s * one.delay_s)
        for i, line in enumerate(self.lines):
            root = np.sqrt(1 + line.loss * np.sqrt(line.corner / s))
            cosh, sinh = np.cosh(s * line.delay_s * root), np.sinh(s * line.delay_s * root)
            a, b, j, k = at[line.first], at[line.second], own + 2 * i, own + 2 * i + 1
            m[..., a, j] += 1 / line.ohm
            m[..., b, k] += 1 / line.ohm
            m[..., j, a] += cosh
            m[..., j, j] -= root * sinh
            m[..., j, b] -= 1
            m[..., k, a] += sinh / root
            m[..., k, j] -= cosh
            m[..., k, k] -= 1
        return m[..., :size, :size]

    def slope(self, s: ComplexArray) -> ComplexArray:
        """Return M'(s) by a central difference."""
        s = np.asarray(s, dtype=np.complex128)
        h = STEP * np.abs(s)
        rise: ComplexArray = self.matrix(s + h) - self.matrix(s - h)
        return rise / (2 * h)[..., None, None]

    def logarithmic_slope(self, s: ComplexArray) -> ComplexArray:
        """Return d/ds log det M."""
        try:
            ratio = np.linalg.solve(self.matrix(s), self.slope(s))
        except np.linalg.LinAlgError:  # exactly on a zero: step off by rounding
            return self.logarithmic_slope(s * (1 + 1e-14))
        return np.asarray(np.trace(ratio, axis1=-2, axis2=-1))

    def impedances(
        self, frequency_hz: FloatArray, pairs: Sequence[tuple[str, str]]
    ) -> ComplexArray:
        """Return transfer impedances v(output)/i(input), (N, K), in ohm."""
        s = np.asarray(2j * np.pi * frequency_hz, dtype=np.complex128)
        matrices = self.matrix(s)
        inverse = np.linalg.solve(matrices, np.eye(matrices.shape[-1], dtype=np.complex128))
        index = self.lumped.nodes.index
        return np.stack([inverse[:, index(a), index(b)] for a, b in pairs], axis=1)

    def residues(self, pole: complex, pairs: Sequence[tuple[str, str]]) -> ComplexArray:
        """Return the residues at a simple pole: x·yᵀ/(yᵀM'x)."""
        m = self.matrix(np.array(pole))
        row = 1 / np.abs(m).max(axis=1)
        u, _, vh = np.linalg.svd(row[:, None] * m)
        x, y = vh[-1].conj(), row * u[:, -1].conj()
        weight = y @ self.slope(np.array(pole)) @ x
        index = self.lumped.nodes.index
        return np.array([x[index(a)] * y[index(b)] / weight for a, b in pairs])


def winding_number(circuit: DistributedCircuit, corners: Sequence[complex]) -> int | None:
    """Count the zeros of det M inside a polygon.

    Parameters
    ----------
    circuit : DistributedCircuit
        The circuit.
    corners : sequence of complex
        Counter-clockwise, rad/s; no zero may lie on the sides.

    Returns
    -------
    int or None
        None where the phase could not be followed.
    """
    ends = [*corners, corners[0]]
    path = np.concatenate([np.linspace(a, b, 65)[:-1] for a, b in pairwise(ends)] + [[ends[-1]]])
    phase = np.linalg.slogdet(circuit.matrix(path))[0]
    for _ in range(14):
        turn = np.angle(phase[1:] / phase[:-1])
        wide = np.flatnonzero(np.abs(turn) > TURN)
        if wide.size == 0:
            total = float(turn.sum()) / (2 * np.pi)
            return round(total) if abs(total - round(total)) < 1e-3 else None
        middle = (path[wide] + path[wide + 1]) / 2
        between = np.linalg.slogdet(circuit.matrix(middle))[0]
        path, phase = np.insert(path, wide + 1, middle), np.insert(phase, wide + 1, between)
    return None


def rectangle(left: float, right: float, low: float, high: float) -> tuple[complex, ...]:
    """Return the corners of a rectangle, counter-clockwise."""
    return (
        complex(left, low), complex(right, low), complex(right, high), complex(left, high),
    )  # fmt: skip


def zeros_inside(
    circuit: DistributedCircuit, box: tuple[float, float, float, float], generator: Generator
) -> ComplexArray | None:
    """Find all zeros of det M in a rectangle above the real axis.

    Parameters
    ----------
    circuit : DistributedCircuit
        The circuit.
    box : (float, float, float, float)
        Left, right, lower and upper side, rad/s.
    generator : numpy.random.Generator
        Draws starting points.

    Returns
    -------
    (n,) complex ndarray or None
        None where fewer or more were found than the winding number tells.
    """
    _, right, low, high = box
    count = winding_number(circuit, rectangle(*box))
    if count is None:
        return None
    found: list[complex] = []
    for _ in range(8):
        spread = generator.uniform(size=(2, 40))
        ring = -np.geomspace(1e-4, 0.5, 40)[generator.permutation(40)]
        im = low + (high - low) * spread[0]
        starts = np.where(spread[1] < 0.7, ring * im, right * 0.3 * spread[1]) + 1j * im
        for p in _newton(circuit, starts, np.array(found, dtype=np.complex128), box):
            if all(abs(p - q) > 1e-7 * abs(p) for q in found):
                found.append(complex(p))
        if len(found) >= count:
            break
    return np.array(found) if len(found) == count else None


def _newton(
    circuit: DistributedCircuit,
    starts: ComplexArray,
    known: ComplexArray,
    box: tuple[float, float, float, float],
) -> ComplexArray:
    """Return the zeros inside a box that starting points lead to, polished without deflation."""
    left, right, low, high = box
    s = starts
    for sweep in range(60):
        slope = circuit.logarithmic_slope(s)
        if sweep < 45 and known.size:  # divide known zeros out, then polish without them
            near = s[:, None] - known
            slope = slope - (1 / np.where(near == 0, 1e-300, near)).sum(axis=1)
        step = 1 / slope
        limit = 0.2 * np.abs(s)
        step *= np.minimum(1.0, limit / np.maximum(np.abs(step), 1e-300))
        s = s - step
        inside = (s.real > left) & (s.real < right) & (s.imag > low) & (s.imag < high)
        s = s[inside & np.isfinite(s)]
        if s.size == 0:
            return s
    step = 1 / circuit.logarithmic_slope(s)
    return np.asarray(s[np.abs(step) < 1e-9 * np.abs(s)])


def _drawn(generator: Generator, centre_hz: float) -> tuple[DistributedCircuit, tuple[str, ...]]:
    """Draw one to three stages joined and fed by lines."""
    b = Builder(generator, centre_hz, uniform_log(generator, 15, 120))
    corner = 2 * np.pi * centre_hz
    lines: list[Line] = []
    delayed: list[Delayed] = []

    def line(first: str, second: str, low: float, high: float) -> None:
        turns = b.spread(low, high) / centre_hz
        ohm = b.ohm * b.spread(0.4, 2.5)
        lines.append(Line(first, second, ohm, turns, b.spread(5e-3, 0.1), corner))

    b.resistor("in", "0", 0.5, 3)
    last, nodes = "in", ["in"]
    for i in range(1, int(generator.integers(1, 4)) + 1):
        gate, drain = f"g{i}", f"d{i}"
        line(last, gate, 0.02, 0.35)
        b.capacitor(gate, "0", 0.1, 1.2)
        b.resistor(gate, "0", 1.5, 40)
        b.capacitor(drain, "0", 0.05, 0.6)
        b.resistor(drain, "0", 1, 10)
        b.capacitor(gate, drain, 0.005, 0.2)
        siemens, delay = b.spread(0.5, 5) / b.ohm, b.spread(0.003, 0.15) / centre_hz
        delayed.append(Delayed(drain, gate, siemens, delay))
        if generator.random() < 0.7:  # fed through a line, decoupled at its far end
            line(drain, f"b{i}", 0.1, 0.4)
            b.capacitor(f"b{i}", "0", 1, 20)
            b.resistor(f"b{i}", "0", 0.05, 5)
        else:
            b.inductor(drain, "0", 0.5, 5)
        if generator.random() < 0.3:  # an open stub
            line(gate, f"o{i}", 0.05, 0.25)
            b.capacitor(f"o{i}", "0", 0.005, 0.05)
        nodes += [gate, drain]
        last = drain
    line(last, "out", 0.02, 0.5)
    b.resistor("out", "0", 0.5, 3)
    if generator.random() < 0.4 and last != "d1":
        b.capacitor(last, "g1", 0.002, 0.05)
    circuit = DistributedCircuit(Circuit.from_cards(*b.cards), tuple(lines), tuple(delayed))
    text = "\n".join([*b.cards, *map(str, lines), *map(str, delayed)])
    return circuit, (text, *nodes, "out")


def distributed(seed: int, generator: Generator) -> Case:
    """Draw a circuit with lines and delays; odd seeds grow in the band, even ones nowhere.

    Parameters
    ----------
    seed : int
        Seed of the case.
    generator : numpy.random.Generator
        Source of chance.
    """
    while True:
        centre = uniform_log(generator, 1e6, 2e10)
        circuit, (text, *nodes) = _drawn(generator, centre)
        band = centre * uniform_log(generator, 0.05, 0.3), centre * uniform_log(generator, 1.3, 2.5)
        high = 2 * np.pi * band[1]
        # half the right half-plane; the conjugates are not counted
        growing = winding_number(circuit, rectangle(0.0, 2 * high, 1e-5 * high, 1.3 * high))
        if growing is None or (growing > 0) == (seed % 2 == 0):
            continue
        poles = zeros_inside(circuit, (-0.6 * high, high, np.pi * band[0], 1.3 * high), generator)
        if poles is None or not poles.size or int((poles.real > 0).sum()) != growing:
            continue
        at = poles[poles.real > 0].imag / (2 * np.pi)
        if growing and not np.all((at > 1.2 * band[0]) & (at < 0.9 * band[1])):
            continue
        count = int(generator.choice([1, 1, 3]))
        pairs = [(str(n), str(n)) for n in generator.permutation(nodes)[:count]]
        hz = np.linspace(*band, int(generator.choice([201, 401, 701])))
        known = Known(
            hz,
            circuit.impedances(hz, pairs),
            poles,
            np.array([circuit.residues(p, pairs) for p in poles]),
        )
        exact = Exact(known, tuple(n for n, _ in pairs), text, infinite=True)
        return noisy_case(
            "distributed", seed, exact, Noise(uniform_log(generator, 1e-5, 1e-2)), generator
        )
