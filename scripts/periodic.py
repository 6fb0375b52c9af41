"""Small circuits under a periodic drive: Floquet exponents and responses, for tests and trials.

    d/dt[C(t)·x] + G(t)·x = b·u,   C(t) = C + 2·Re(C₁·e^{jω₀t}),   G(t) likewise.

Element values are invented. The exponents come from the monodromy matrix, the responses from the
conversion matrices between harmonics, and each can be held against the other.

    >>> tank = PeriodicCircuit.from_cards(["L1 a 0 1", "C1 a 0 1", "R1 a 0 50"], pump_hz=1 / np.pi)
    >>> pumped = tank.pumped(capacitance=[("a", "a", 0.1)])
    >>> bool(pumped.exponents()[0].real > 0)  # twice the resonance, depth 0.2 above 2/Q = 0.04
    True
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass, replace
from typing import NamedTuple

import numpy as np
import scipy.linalg
from circuits import Circuit, ComplexArray, FloatArray
from numpy.typing import ArrayLike
from scipy.integrate import solve_ivp

import polefit

HARMONICS = 40
"""Sidebands on either side; the elements vary by half at most, so that they fade as 0.27ⁿ."""

Entries = Sequence[tuple[str, str, complex]]


@dataclass(frozen=True, eq=False)
class PeriodicCircuit:
    """A linear circuit whose elements vary at one frequency.

    Parameters
    ----------
    circuit : Circuit
        Its mean.
    pump_hz : float
        Frequency at which elements vary.
    conductance, susceptance : (n, n) complex ndarray
        Phasors G₁ and C₁ of the variation.
    """

    circuit: Circuit
    pump_hz: float
    conductance: ComplexArray
    susceptance: ComplexArray

    @classmethod
    def from_cards(cls, cards: Sequence[str], pump_hz: float) -> PeriodicCircuit:
        """Build a circuit that does not vary yet."""
        circuit = Circuit.from_cards(*cards)
        still = np.zeros(circuit.conductance.shape, dtype=np.complex128)
        return cls(circuit, pump_hz, still, still)

    def pumped(self, capacitance: Entries = (), conductance: Entries = ()) -> PeriodicCircuit:
        """Add phasors at (row, column), named by nodes; each is half the peak deviation."""
        G, C = self.conductance.copy(), self.susceptance.copy()
        index = self.circuit.nodes.index
        for matrix, entries in ((G, conductance), (C, capacitance)):
            for row, column, phasor in entries:
                matrix[index(row), index(column)] += phasor
        return replace(self, conductance=G, susceptance=C)

    def exponents(self) -> ComplexArray:
        """Return the Floquet exponents in rad/s, 0 ≤ Im ≤ ω₀/2, the fastest growing first.

        From the monodromy matrix of the charges and fluxes C·x. Real multipliers have exponents
        whose imaginary part is exactly 0 or ω₀/2.
        """
        size, omega = len(self.circuit.conductance), 2 * np.pi * self.pump_hz

        def slope(phase: float, flat: FloatArray) -> FloatArray:
            turn = np.exp(1j * phase)
            G = self.circuit.conductance + 2 * (self.conductance * turn).real
            C = self.circuit.susceptance + 2 * (self.susceptance * turn).real
            step: FloatArray = -G @ np.linalg.solve(C, flat.reshape(size, size)) / omega
            return step.ravel()

        run = solve_ivp(
            slope, (0, 2 * np.pi), np.eye(size).ravel(), method="DOP853", rtol=1e-12, atol=1e-14
        )
        multipliers = scipy.linalg.eigvals(run.y[:, -1].reshape(size, size))
        found: ComplexArray = np.log(multipliers[multipliers.imag >= 0] + 0j) * self.pump_hz
        return found[np.argsort(-found.real)]

    def exponents_by_harmonics(self, harmonics: int = HARMONICS) -> ComplexArray:
        """Return the same from the eigenvalues of the truncated harmonic balance.

        Every exponent appears once for each harmonic; those nearest the middle are kept, and
        folded into 0 ≤ Im ≤ ω₀/2.
        """
        size, omega = len(self.circuit.conductance), 2 * np.pi * self.pump_hz
        count = 2 * harmonics + 1
        shift = np.kron(np.diag(1j * omega * np.arange(-harmonics, harmonics + 1)), np.eye(size))
        upper, lower = np.eye(count, k=-1), np.eye(count, k=1)

        def spread(mean: FloatArray, phasor: ComplexArray) -> ComplexArray:
            whole: ComplexArray = (
                np.kron(np.eye(count), mean)
                + np.kron(upper, phasor)
                + np.kron(lower, phasor.conj())
            )
            return whole

        G = spread(self.circuit.conductance, self.conductance)
        C = spread(self.circuit.susceptance, self.susceptance)
        found = scipy.linalg.eigvals(-G - shift @ C, C)
        found = found[np.abs(found.imag) <= omega / 2 * (1 + 1e-9)]
        folded: ComplexArray = found.real + 1j * np.abs(found.imag)
        return folded[np.argsort(-folded.real)]

    def response(
        self,
        frequency_hz: ArrayLike,
        pairs: Iterable[tuple[str, str]],
        sideband: int = 0,
        harmonics: int = HARMONICS,
    ) -> ComplexArray:
        """Transfer impedances from the frequency f to f + `sideband`·f₀.

        Parameters
        ----------
        frequency_hz : (N,) array_like
            Frequency f of the driving current, of either sign; or complex, s/(2πj).
        pairs : iterable of (str, str)
            K pairs (output, input).
        sideband : int
            At which harmonic the voltage is taken.
        harmonics : int
            Sidebands kept on either side.

        Returns
        -------
        (N, K) complex ndarray

        Notes
        -----
        The sidebands are coupled to their neighbours only: a continued fraction of matrices.
        """
        s = 2j * np.pi * np.atleast_1d(np.asarray(frequency_hz, dtype=np.complex128))
        upward = self._towards(s, 1, harmonics)
        downward = self._towards(s, -1, harmonics)
        here = self._block(s, 0, 0)
        for side, chain in ((1, upward), (-1, downward)):
            here = here + self._block(s, 0, side) @ chain[0]
        answer = np.linalg.inv(here)
        chain = upward if sideband > 0 else downward
        for step in range(abs(sideband)):
            answer = chain[step] @ answer
        index = self.circuit.nodes.index
        return np.stack([answer[:, index(out), index(drive)] for out, drive in pairs], axis=1)

    def _block(self, s: ComplexArray, row: int, column: int) -> ComplexArray:
        """Return the coupling from harmonic `column` into the equation of harmonic `row`."""
        at = (s + 2j * np.pi * row * self.pump_hz)[:, np.newaxis, np.newaxis]
        if row == column:
            return at * self.circuit.susceptance + self.circuit.conductance
        if row > column:
            return at * self.susceptance + self.conductance
        return at * self.susceptance.conj() + self.conductance.conj()

    def _towards(self, s: ComplexArray, side: int, harmonics: int) -> list[ComplexArray]:
        """Return the transfers from each harmonic to the next one outward, innermost first."""
        chain: list[ComplexArray] = []
        beyond: ComplexArray | None = None
        for m in range(harmonics, 0, -1):
            here = self._block(s, side * m, side * m)
            if beyond is not None:
                here = here + self._block(s, side * m, side * (m + 1)) @ beyond
            inward = self._block(s, side * m, side * (m - 1))
            beyond = np.asarray(-np.linalg.solve(here, inward), dtype=np.complex128)
            chain.append(beyond)
        return chain[::-1]


class PumpedCase(NamedTuple):
    """An invented case with its truth.

    Attributes
    ----------
    responses : polefit.ResponseSet
        Noisy data, ``pump_hz`` set.
    exponents : (n,) complex ndarray
        Floquet exponents in rad/s, folded into 0 ≤ Im ≤ ω₀/2, the fastest growing first.
    circuit : PeriodicCircuit
        What was simulated.
    noise : float
        Standard deviation of the noise over the response, both parts together.
    kind : str
        Which circuit.
    """

    responses: polefit.ResponseSet
    exponents: ComplexArray
    circuit: PeriodicCircuit
    noise: float
    kind: str

    @property
    def unstable(self) -> bool:
        """Whether an exponent grows."""
        return bool(self.exponents[0].real > 0)

    @property
    def divides(self) -> bool:
        """Whether the fastest growing exponent is at half the frequency of the drive."""
        omega = 2 * np.pi * self.circuit.pump_hz
        return self.unstable and bool(abs(self.exponents[0].imag - omega / 2) < 1e-9 * omega)


SWEEPS = (
    (0.005, 1.0),
    (0.1, 0.45),
    (0.2, 1.3),
    (0.05, 0.95),
    (0.3, 0.7),
    (0.55, 1.45),
    (0.02, 0.6),
)
"""Bands over the frequency of the drive."""
POINTS = (101, 201, 401, 801)


def pumped_case(seed: int, noise: float | None = None) -> PumpedCase:
    """Invent a circuit, a sweep and its noise.

    Parameters
    ----------
    seed : int
        Of everything. Every other case is stable; of three unstable ones one divides the
        frequency of the drive.
    noise : float, optional
        Over the response, both parts together; 1e-5 to 3e-3 by default.

    Returns
    -------
    PumpedCase
    """
    wanted = ("stable", "grows", "stable", "divides", "stable", "grows")[seed % 6]
    generator = np.random.default_rng([20, seed])
    while True:
        kind, circuit = _circuit(generator, wanted)
        exponents = circuit.exponents()
        case = PumpedCase(_NOTHING, exponents, circuit, 0.0, kind)
        found = "divides" if case.divides else "grows" if case.unstable else "stable"
        if found == wanted and exponents[0].real < 0.3 * circuit.pump_hz:
            break
    share = float(np.exp(generator.uniform(*np.log([1e-5, 3e-3])))) if noise is None else noise
    nodes = [n for n in circuit.circuit.nodes if n in ("a", "b", "c")]
    picked = generator.permutation(nodes)[: generator.integers(1, len(nodes) + 1)]
    low, high = _sweep(generator, circuit, exponents)
    hz = np.linspace(low, high, int(generator.choice(POINTS)))
    values = circuit.response(hz, [(n, n) for n in picked])
    rough = generator.standard_normal((2, *values.shape)) * share * np.abs(values) / np.sqrt(2)
    responses = polefit.ResponseSet.from_arrays(
        hz,
        values + rough[0] + 1j * rough[1],
        channels=[str(n) for n in picked],
        quantity="impedance",
        pump_hz=circuit.pump_hz,
    )
    return PumpedCase(responses, exponents, circuit, share, kind)


_NOTHING = polefit.ResponseSet.from_arrays(
    [1.0, 2.0], [1.0, 2.0], channels=["a"], quantity="transfer"
)


def _sweep(
    generator: np.random.Generator, circuit: PeriodicCircuit, exponents: ComplexArray
) -> tuple[float, float]:
    """Pick a band in which a line of the exponent in question lies, well off the edges."""
    f0, at = circuit.pump_hz, exponents[0].imag / (2 * np.pi)
    while True:
        low, high = (float(edge) * f0 for edge in generator.choice(SWEEPS))
        edge = 0.05 * (high - low)
        if any(low + edge < line < high - edge for line in (at, f0 - at, f0 + at)):
            return low, high


def _circuit(generator: np.random.Generator, wanted: str) -> tuple[str, PeriodicCircuit]:
    """Draw one of the circuits; more often than not as wanted."""
    f0 = float(np.exp(generator.uniform(*np.log([5e6, 5e9]))))
    ohm = float(np.exp(generator.uniform(*np.log([20.0, 300.0]))))
    kinds = {"divides": (_one_tank, _pumped_conductance), "grows": (_two_tanks, _stage)}
    every = (_one_tank, _pumped_conductance, _two_tanks, _stage)
    options = kinds.get(wanted, every)
    make = options[int(generator.integers(len(options)))]
    off = 10 ** generator.uniform(-2.2, 0.1)  # by which share the threshold is passed, or not
    above = 1 - min(off, 0.9) if wanted == "stable" else 1 + off
    return make.__name__.strip("_").replace("_", " "), make(generator, f0, ohm, float(above))


def _tank(node: str, hz: float, ohm: float, q: float) -> list[str]:
    """Return the cards of a parallel resonator with the given reactance and quality factor."""
    omega = 2 * np.pi * hz
    return [
        f"L{node} {node} 0 {ohm / omega:.12e}",
        f"C{node} {node} 0 {1 / (ohm * omega):.12e}",
        f"R{node} {node} 0 {ohm * q:.12e}",
    ]


def _bystander(generator: np.random.Generator, f0: float, ohm: float) -> list[str]:
    """Return a passive resonator that hangs on node a by a small capacitor."""
    hz = f0 * generator.uniform(0.12, 0.9)
    q = float(np.exp(generator.uniform(np.log(8), np.log(60))))
    link = generator.uniform(0.02, 0.1) / (2 * np.pi * f0 * ohm)
    return [*_tank("c", hz, ohm * generator.uniform(0.5, 2), q), f"Cac a c {link:.12e}"]


def _one_tank(
    generator: np.random.Generator, f0: float, ohm: float, above: float
) -> PeriodicCircuit:
    """Resonator near half the pump with a pumped capacitor: grows at depths above 2/Q."""
    q = float(np.exp(generator.uniform(np.log(12), np.log(80))))
    hz = f0 / 2 * (1 + generator.uniform(-0.5, 0.5) / q)
    cards = _tank("a", hz, ohm, q) + _bystander(generator, f0, ohm)
    depth = min(2 / q * above, 0.45)
    farad = 1 / (ohm * 2 * np.pi * hz)
    phase = np.exp(2j * np.pi * generator.uniform())
    return PeriodicCircuit.from_cards(cards, f0).pumped([("a", "a", farad * depth / 2 * phase)])


def _pumped_conductance(
    generator: np.random.Generator, f0: float, ohm: float, above: float
) -> PeriodicCircuit:
    """Resonator whose conductance varies by more than twice its mean: negative at times."""
    q = float(np.exp(generator.uniform(np.log(10), np.log(60))))
    hz = f0 / 2 * (1 + generator.uniform(-0.4, 0.4) / q)
    cards = _tank("a", hz, ohm, q) + _bystander(generator, f0, ohm)
    siemens = 2 * above / (ohm * q)
    phase = np.exp(2j * np.pi * generator.uniform())
    circuit = PeriodicCircuit.from_cards(cards, f0)
    return circuit.pumped(conductance=[("a", "a", siemens / 2 * phase)])


def _two_tanks(
    generator: np.random.Generator, f0: float, ohm: float, above: float
) -> PeriodicCircuit:
    """Two resonators whose frequencies add up to the pump, coupled by a pumped capacitor."""
    first = generator.uniform(0.15, 0.42)
    q = np.exp(generator.uniform(np.log(15), np.log(80), 2))
    skew = generator.uniform(-0.4, 0.4) / q.max()
    ohms = ohm * generator.uniform(0.6, 1.6, 2)
    cards = _tank("a", first * f0 * (1 + skew), ohms[0], q[0])
    cards += _tank("b", (1 - first) * f0 * (1 + skew), ohms[1], q[1])
    farad = 1 / (ohms * 2 * np.pi * f0 * np.array([first, 1 - first]))
    depth = min(2 / np.sqrt(q[0] * q[1]) * above, 0.4)
    mutual = np.sqrt(farad[0] * farad[1]) * depth / 2 * np.exp(2j * np.pi * generator.uniform())
    circuit = PeriodicCircuit.from_cards(cards, f0)
    entries = [("a", "b", -mutual), ("b", "a", -mutual), ("a", "a", mutual), ("b", "b", mutual)]
    return circuit.pumped(entries)


def _stage(generator: np.random.Generator, f0: float, ohm: float, above: float) -> PeriodicCircuit:
    """Driven stage: input and output resonators, feedback through a capacitor, pumped gain."""
    hz = f0 * generator.uniform(0.12, 0.8)
    q = np.exp(generator.uniform(np.log(6), np.log(30), 2))
    cards = _tank("a", hz * generator.uniform(1.02, 1.12), ohm, q[0])
    cards += _tank("b", hz, ohm * generator.uniform(0.5, 1.5), q[1])
    feedback = generator.uniform(0.05, 0.15) / (2 * np.pi * hz * ohm)
    gain = above * 2 / (ohm * q[0] * q[1] * feedback * 2 * np.pi * hz * ohm)
    cards += [f"Cab a b {feedback:.12e}", f"G1 b 0 a 0 {gain:.12e}"]
    circuit = PeriodicCircuit.from_cards(cards, f0)
    swing = gain * generator.uniform(0.2, 0.9) / 2 * np.exp(2j * np.pi * generator.uniform())
    return circuit.pumped(conductance=[("b", "a", swing)])
