"""Random lumped circuits as netlists, and their exact modes by nodal analysis."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from itertools import pairwise

import numpy as np
from circuits import Circuit, ComplexArray, FloatArray

from proving.case import Exact
from proving.cramer_rao import Known

Generator = np.random.Generator
MISMATCH = 1e-7
"""Residues and nodal analysis must agree to this share of the largest response."""


def uniform_log(generator: Generator, low: float, high: float) -> float:
    """Draw evenly in the logarithm."""
    return float(np.exp(generator.uniform(np.log(low), np.log(high))))


@dataclass(frozen=True)
class Netlist:
    """A random circuit; the transconductances scale with a common drive.

    Parameters
    ----------
    cards : tuple of str
        SPICE cards; ``{gm:1.2e-2}`` marks a value that scales with the drive.
    nodes : tuple of str
        Nodes worth probing.
    centre_hz : float
        Frequency for which it was drawn.
    """

    cards: tuple[str, ...]
    nodes: tuple[str, ...]
    centre_hz: float

    def driven(self, drive: float) -> tuple[str, ...]:
        """Return plain cards at one drive."""
        plain = []
        for card in self.cards:
            head, mark, tail = card.partition("{gm:")
            plain.append(f"{head}{float(tail[:-1]) * drive:.12e}" if mark else card)
        return tuple(plain)

    def circuit(self, drive: float) -> Circuit:
        """Return the circuit at one drive."""
        return Circuit.from_cards(*self.driven(drive))

    def with_cards(self, *cards: str) -> Netlist:
        """Return the circuit with elements added."""
        return Netlist((*self.cards, *cards), self.nodes, self.centre_hz)


class Builder:
    """Collects cards with values for a frequency and an impedance level."""

    def __init__(self, generator: Generator, centre_hz: float, ohm: float) -> None:
        self.generator, self.centre_hz, self.ohm = generator, centre_hz, ohm
        self.cards: list[str] = []

    def add(self, kind: str, a: str, b: str, value: float) -> None:
        """Add an R, L or C."""
        self.cards.append(f"{kind}{len(self.cards)} {a} {b} {value:.12e}")

    def spread(self, low: float, high: float) -> float:
        """Draw evenly in the logarithm."""
        return uniform_log(self.generator, low, high)

    def resistor(self, a: str, b: str, low: float, high: float) -> None:
        """Add a resistor between `low` and `high` times the impedance level."""
        self.add("R", a, b, self.ohm * self.spread(low, high))

    def capacitor(self, a: str, b: str, low: float, high: float) -> None:
        """Add a capacitor of reactance level/`low` … level/`high` at the centre."""
        self.add("C", a, b, self.spread(low, high) / (2 * np.pi * self.centre_hz * self.ohm))

    def inductor(self, a: str, b: str, low: float, high: float) -> None:
        """Add an inductor of reactance `low` … `high` times the level at the centre, with loss."""
        value = self.spread(low, high)
        middle = f"{a}_{b}_{len(self.cards)}"
        self.add("L", a, middle, value * self.ohm / (2 * np.pi * self.centre_hz))
        self.add("R", middle, b, value * self.ohm / self.spread(8, 120))

    def transistor(self, gate: str, drain: str, source: str) -> None:
        """Add a transconductance with input and output R and C and a feedback capacitor."""
        name = f"G{len(self.cards)}"
        gm = self.spread(0.5, 6) / self.ohm
        self.cards.append(f"{name} {drain} {source} {gate} {source} {{gm:{gm:.12e}}}")
        self.capacitor(gate, source, 0.1, 1.5)
        self.resistor(gate, source, 2, 60)
        self.capacitor(drain, source, 0.05, 0.8)
        self.resistor(drain, source, 1, 12)
        self.capacitor(gate, drain, 0.005, 0.25)

    def bias(self, node: str, label: str, lower: float) -> None:
        """Feed `node` through a choke and a decoupling network for frequencies `lower` times up."""
        self.inductor(node, label, 0.8, 12)
        g = self.generator
        kind = g.integers(3)
        self.add("C", label, "0", self.spread(0.5, 8) / (2 * np.pi * self.centre_hz * lower
                                                         * self.ohm))  # fmt: skip
        supply = f"{label}s"
        self.add("L", label, supply, self.ohm * self.spread(0.3, 3)
                 / (2 * np.pi * self.centre_hz * lower))  # fmt: skip
        self.resistor(supply, "0", 0.02, 1)
        if kind == 1:
            self.add("C", supply, "0", self.spread(1, 30) / (2 * np.pi * self.centre_hz * lower
                                                             * self.ohm))  # fmt: skip
        if kind == 2:
            self.resistor(label, "0", 0.3, 20)


def amplifier(generator: Generator, centre_hz: float, lower: float = 0.1) -> Netlist:
    """Draw a chain of two to four transistor stages with feedback and bias networks.

    Parameters
    ----------
    generator : numpy.random.Generator
        Source of chance.
    centre_hz : float
        Where it amplifies.
    lower : float
        Frequency of the bias networks over `centre_hz`.
    """
    b = Builder(generator, centre_hz, uniform_log(generator, 8, 300))
    stages = int(generator.integers(2, 5))
    nodes = []
    b.resistor("in", "0", 0.5, 3)
    last = "in"
    for i in range(1, stages + 1):
        gate, drain = f"g{i}", f"d{i}"
        _between(b, last, gate)
        source = "0"
        if generator.random() < 0.3:
            source = f"s{i}"
            b.inductor(source, "0", 0.01, 0.2)
        b.transistor(gate, drain, source)
        if generator.random() < 0.7:
            b.bias(drain, f"b{i}", lower * b.spread(0.3, 3))
            nodes.append(f"b{i}")
        else:
            b.inductor(drain, "0", 0.5, 5)
        nodes += [gate, drain]
        last = drain
    _between(b, last, "out")
    b.resistor("out", "0", 0.5, 3)
    nodes.append("out")
    if generator.random() < 0.4:  # an unwanted path around several stages
        b.capacitor(f"d{stages}", "g1", 0.001, 0.05)
    if generator.random() < 0.25 and stages > 2:
        b.resistor(f"d{stages - 1}", "g1", 5, 60)
    return Netlist(tuple(b.cards), tuple(nodes), centre_hz)


def _between(b: Builder, first: str, second: str) -> None:
    kind = b.generator.integers(4)
    if kind == 0:
        b.inductor(first, second, 0.1, 2)
        b.capacitor(second, "0", 0.02, 0.5)
    elif kind == 1:
        b.capacitor(first, second, 0.5, 20)
        b.inductor(second, "0", 0.4, 6)
    elif kind == 2:
        b.capacitor(first, second, 1, 30)
        b.resistor(second, "0", 1, 20)
    else:
        middle = f"{first}{second}"
        b.inductor(first, middle, 0.1, 1)
        b.capacitor(middle, "0", 0.1, 1.5)
        b.inductor(middle, second, 0.1, 1)


def resonators(generator: Generator, centre_hz: float, zeta: tuple[float, float]) -> Netlist:
    """Draw two to seven lossy tanks, coupled by small capacitors and coils, a few gyrating.

    Parameters
    ----------
    generator : numpy.random.Generator
        Source of chance.
    centre_hz : float
        Geometric middle of their frequencies.
    zeta : (float, float)
        Range of the damping ratios before coupling.
    """
    b = Builder(generator, centre_hz, uniform_log(generator, 5, 500))
    count = int(generator.integers(2, 8))
    nodes = [f"n{i}" for i in range(count)]
    spread = uniform_log(generator, 1.05, 4)
    for node in nodes:
        hz = centre_hz * b.spread(1 / spread, spread)
        level = b.ohm * b.spread(0.3, 3)
        b.add("L", node, "0", level / (2 * np.pi * hz))
        b.add("C", node, "0", 1 / (2 * np.pi * hz * level))
        b.add("R", node, "0", level / (2 * b.spread(*zeta)))
    for first, second in pairwise(nodes):
        kind = generator.integers(4)
        if kind == 0:
            b.capacitor(first, second, 0.003, 0.3)
        elif kind == 1:
            b.inductor(first, second, 5, 300)
        elif kind == 2:
            b.resistor(first, second, 30, 3000)
        else:
            b.capacitor(first, second, 0.003, 0.1)
            gm = b.spread(0.001, 0.1) / b.ohm
            b.cards.append(f"G{len(b.cards)} {second} 0 {first} 0 {{gm:{gm:.12e}}}")
    return Netlist(tuple(b.cards), tuple(nodes), centre_hz)


def exact_response(
    netlist: Netlist,
    drive: float,
    frequency_hz: FloatArray,
    pairs: Sequence[tuple[str, str]],
    port_ohm: float | None = None,
) -> Exact | None:
    """Sample a circuit exactly; None where poles and residues do not give its response again.

    Parameters
    ----------
    netlist : Netlist
        The circuit.
    drive : float
        Factor of its transconductances.
    frequency_hz : (N,) float ndarray
        Hertz.
    pairs : sequence of (str, str)
        Output and input nodes.
    port_ohm : float, optional
        Give the reflection of a port of this resistance at the one node instead.
    """
    cards = netlist.driven(drive)
    if port_ohm is not None:
        cards = (*cards, f"Rport {pairs[0][0]} 0 {port_ohm:.12e}")
    circuit = Circuit.from_cards(*cards)
    values = circuit.impedances(frequency_hz, pairs)
    poles = np.array([p for p in circuit.poles() if p.imag >= 0])
    residues = np.array([circuit.residues(p, pairs) for p in poles])
    if not _agree(frequency_hz, values, poles, residues):
        return None
    if port_ohm is not None:
        values, residues = 2 * values / port_ohm - 1, 2 * residues / port_ohm
    channels = tuple(a if a == b else (a, b) for a, b in pairs)
    return Exact(
        Known(frequency_hz, values, poles, residues),
        channels,
        "\n".join(cards),
        "impedance" if port_ohm is None else "scattering",
    )


def _agree(
    hz: FloatArray, values: ComplexArray, poles: ComplexArray, residues: ComplexArray
) -> bool:
    """Tell whether partial fractions and two direct terms are the response."""
    s = 2j * np.pi * hz
    pair = poles.imag > 0
    rest = values - (1 / (s[:, None] - poles)) @ residues
    rest = rest - (1 / (s[:, None] - poles[pair].conj())) @ residues[pair].conj()
    basis = np.stack([np.ones_like(s), s / np.abs(s[-1])], axis=1)
    stacked = np.vstack([basis.real, basis.imag])
    target = np.vstack([rest.real, rest.imag])
    left = target - stacked @ np.linalg.lstsq(stacked, target, rcond=None)[0]
    return bool(np.all(np.abs(left).max(axis=0) < MISMATCH * np.abs(values).max(axis=0)))


def growing_in(
    netlist: Netlist, drive: float, band_hz: tuple[float, float], *, polish: bool = True
) -> tuple[int, int]:
    """Count the growing modes of a circuit: those well inside a band, and all others."""
    found = netlist.circuit(drive).poles(polish=polish)
    poles = np.array([p for p in found if p.imag >= 0 and p.real > 0])
    at = np.where(poles.imag > 0, poles.imag, np.abs(poles)) / (2 * np.pi) if poles.size else poles
    inside = (at.real > band_hz[0] * 1.2) & (at.real + 0.5 * np.abs(poles.real) / 6.3
                                            < band_hz[1] * 0.9)  # fmt: skip
    return int(inside.sum()), int(poles.size - inside.sum())


def drive_for(
    netlist: Netlist, unstable: bool, band_hz: tuple[float, float], generator: Generator
) -> float | None:
    """Find a drive at which the circuit grows in the band, and nowhere else; or nowhere at all.

    Half of the drives found lie within a few percent of where a mode crosses.
    """

    def fits(drive: float) -> bool:
        inside, other = growing_in(netlist, drive, band_hz)
        return other == 0 and (inside > 0) == unstable

    drives = np.geomspace(0.1, 8, 9)
    counts = [growing_in(netlist, d, band_hz, polish=False) for d in drives]
    wanted = [
        i for i, (inside, other) in enumerate(counts)
        if other == 0 and (inside > 0) == unstable
    ]  # fmt: skip
    if not wanted:
        return None
    i = int(generator.choice(wanted))
    if not fits(float(drives[i])):
        return None
    near = [j for j in (i - 1, i + 1) if 0 <= j < len(drives) and j not in wanted]
    if not near or generator.random() < 0.5:
        return float(drives[i])

    good, bad = _bisected(fits, float(drives[i]), float(drives[near[0]]))
    away = good * (good / bad) ** generator.uniform(0, 1)
    away *= 1 + np.sign(good - bad) * uniform_log(generator, 3e-3, 0.1)
    return away if fits(away) else good


def _bisected(fits: Callable[[float], bool], good: float, bad: float) -> tuple[float, float]:
    for _ in range(9):
        middle = float(np.sqrt(good * bad))
        good, bad = (middle, bad) if fits(middle) else (good, middle)
    return good, bad


def probes(netlist: Netlist, generator: Generator, count: int) -> list[tuple[str, str]]:
    """Choose driving points and, sometimes, transfers."""
    nodes = list(generator.permutation(list(netlist.nodes)))
    if count == 1:
        node = str(nodes[0])
        other = str(nodes[1]) if len(nodes) > 1 and generator.random() < 0.2 else node
        return [(other, node)]
    chosen = [str(n) for n in nodes[:count]]
    pairs = [(n, n) for n in chosen]
    if len(pairs) > 2 and generator.random() < 0.3:
        pairs[-1] = (chosen[1], chosen[0])
    while len(pairs) < count:
        pairs.append((chosen[0], chosen[1]) if len(pairs) == 2 else (chosen[1], chosen[0]))
    return pairs
