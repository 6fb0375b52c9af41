"""Families of random cases, each made from one seed."""

from __future__ import annotations

import tempfile
from collections.abc import Callable, Iterator
from dataclasses import replace
from importlib import import_module
from importlib.util import find_spec
from pathlib import Path

import numpy as np

import polefit
from proving.case import DETECTABLE, Case, Exact, Noise, finished, noisy_case
from proving.cramer_rao import FloatArray, Known, Spread, bounds
from proving.distributed import distributed
from proving.lumped import (
    Generator,
    Netlist,
    amplifier,
    drive_for,
    exact_response,
    growing_in,
    probes,
    resonators,
    uniform_log,
)

ATTEMPTS = 400
PATIENCE, REDRAWS = 0.8, 12
"""Share of the seeds that are drawn again until the verdict is not open, and how often."""
PUMPED = "proving.pumped"
POINTS = (101, 201, 301, 401, 701)


def cases(family: str, count: int, seed: int) -> Iterator[Case]:
    """Make cases of one family, with consecutive seeds.

    Parameters
    ----------
    family : str
        One of `FAMILIES`.
    count : int
        How many.
    seed : int
        Of the first.

    Yields
    ------
    Case
    """
    for i in range(seed, seed + count):
        yield FAMILIES[family](i)


def _generator(family: str, seed: int) -> Generator:
    return np.random.default_rng([seed, *family.encode()])


def _preferring_answers(
    make: Callable[[Generator], Case], generator: Generator, redraws: int = REDRAWS
) -> Case:
    """Draw again, mostly, while nothing can be expected of a verdict."""
    patient = generator.random() < PATIENCE
    case = make(generator)
    for _ in range(redraws if patient else 0):
        if case.answer != "open":
            break
        case = make(generator)
    return case


def _band(generator: Generator, centre_hz: float) -> tuple[float, float]:
    return centre_hz * uniform_log(generator, 0.02, 0.3), centre_hz * uniform_log(generator, 1.8, 6)


def _centre(generator: Generator) -> float:
    return uniform_log(generator, 3e4, 1e10)


def _count(generator: Generator) -> int:
    return int(generator.choice([1, 1, 3]))


def driven_amplifier(
    generator: Generator, unstable: bool, lower: float | None = None, decades: float | None = None
) -> tuple[Netlist, float, tuple[float, float]]:
    """Draw an amplifier, its drive and a band in which it grows, or nothing grows anywhere.

    Parameters
    ----------
    generator : numpy.random.Generator
        Source of chance.
    unstable : bool
        Whether a mode in the band is to grow.
    lower : float, optional
        Frequency of the bias networks over that of the stages.
    decades : float, optional
        Width of the band.
    """
    for _ in range(ATTEMPTS):
        centre = _centre(generator) if decades is None else uniform_log(generator, 1e7, 1e10)
        netlist = amplifier(generator, centre, lower or uniform_log(generator, 0.05, 0.5))
        band = _band(generator, centre)
        if decades is not None:
            band = (band[1] * 10**-decades, band[1])
        drive = drive_for(netlist, unstable, band, generator)
        if drive is not None:
            return netlist, drive, band
    raise RuntimeError("no such amplifier was drawn")


def _sampled(
    generator: Generator, unstable: bool, axis: Callable[[float, float, int], FloatArray],
    points: int, lower: float | None = None, decades: float | None = None,
) -> Exact:  # fmt: skip
    while True:
        netlist, drive, band = driven_amplifier(generator, unstable, lower, decades)
        pairs = probes(netlist, generator, _count(generator))
        exact = exact_response(netlist, drive, axis(*band, points), pairs)
        if exact is not None:
            return exact


def _even(low: float, high: float, points: int) -> FloatArray:
    return np.linspace(low, high, points)


def _logarithmic(low: float, high: float, points: int) -> FloatArray:
    return np.geomspace(low, high, points)


def lumped(seed: int) -> Case:
    """Amplifier chains, about half of them growing, relative noise 1e-5 to 1e-2."""
    return _preferring_answers(lambda g: _lumped(seed, g), _generator("lumped", seed))


def _lumped(seed: int, g: Generator) -> Case:
    exact = _sampled(g, seed % 2 == 1, _even, int(g.choice(POINTS)))
    return noisy_case("lumped", seed, exact, Noise(uniform_log(g, 1e-5, 1e-2)), g)


def damped(seed: int) -> Case:
    """Stable resonators, damping ratio 0.001 to 0.02, noise up to 1 %."""
    g = _generator("damped", seed)
    while True:
        netlist = resonators(g, _centre(g), (1e-3, 2e-2))
        low, high = (
            netlist.centre_hz * uniform_log(g, 0.15, 0.5),
            netlist.centre_hz * uniform_log(g, 2, 5),
        )
        if sum(growing_in(netlist, 1.0, (low, high))):
            continue
        pairs = probes(netlist, g, min(_count(g), len(netlist.nodes) + 1))
        exact = exact_response(netlist, 1.0, _even(low, high, int(g.choice(POINTS))), pairs)
        if exact is not None:
            return noisy_case("damped", seed, exact, Noise(uniform_log(g, 1e-4, 1e-2)), g)


def coarse(seed: int) -> Case:
    """Grids with 0.3 to 5 points in the 3-dB width of the narrowest mode in the band."""
    return _preferring_answers(lambda g: _coarse(seed, g), _generator("coarse", seed))


def _coarse(seed: int, g: Generator) -> Case:
    while True:
        if seed % 4 == 0:
            netlist, drive = resonators(g, _centre(g), (2e-3, 3e-2)), 1.0
            band = (0.3 * netlist.centre_hz, 3 * netlist.centre_hz)
            if sum(growing_in(netlist, drive, band)):
                continue
        else:
            netlist, drive, band = driven_amplifier(g, seed % 2 == 1)
        circuit = netlist.circuit(drive)
        inside = [p for p in circuit.poles() if band[0] < p.imag / (2 * np.pi) < band[1]]
        if not inside:
            continue
        narrowest = min(inside, key=lambda p: abs(p.real))
        width, wanted = abs(narrowest.real) / np.pi, uniform_log(g, 0.3, 5)
        points = round((band[1] - band[0]) / width * wanted) + 1
        if points > 801:  # a narrower sweep about it
            half = 400 * width / wanted
            middle = narrowest.imag / (2 * np.pi)
            band = (max(band[0], middle - half), middle + half)
            points = round((band[1] - band[0]) / width * wanted) + 1
        pairs = probes(netlist, g, min(_count(g), len(netlist.nodes) + 1))
        exact = exact_response(netlist, drive, _even(*band, max(points, 31)), pairs)
        if exact is not None:
            return noisy_case("coarse", seed, exact, Noise(uniform_log(g, 1e-5, 1e-2)), g)


def weak(seed: int) -> Case:
    """Growing or decaying tanks beside a stable host, |σ| over its bound from 0.1 to 1000."""
    g = _generator("weak", seed)
    noise, wanted = Noise(uniform_log(g, 1e-5, 1e-2)), uniform_log(g, 0.1, 1000)
    if seed % 2 == 1 or wanted < DETECTABLE:
        return _weak(seed, g, noise, wanted)
    return _preferring_answers(lambda g: _weak(seed, g, noise, wanted), g, redraws=2)


def _weak(seed: int, g: Generator, noise: Noise, wanted: float) -> Case:
    while True:
        netlist, drive, band = driven_amplifier(g, False)
        hz = uniform_log(g, band[0] * 1.5, band[1] * 0.8)
        level, zeta = uniform_log(g, 10, 1000), uniform_log(g, 2e-3, 5e-2)
        growing = -1.0 if seed % 2 == 1 else 1.0
        node = str(g.choice(list(netlist.nodes)))
        axis, pairs = _even(*band, int(g.choice(POINTS))), probes(netlist, g, _count(g))
        tank = (
            f"Lx x 0 {level / (2 * np.pi * hz):.12e}",
            f"Cx x 0 {1 / (2 * np.pi * hz * level):.12e}",
            f"Rx x 0 {growing * level / (2 * zeta):.12e}",
        )

        def coupled(
            share: float, netlist: Netlist = netlist, tank: tuple[str, ...] = tank,
            node: str = node, hz: float = hz, level: float = level, drive: float = drive,
            axis: FloatArray = axis, pairs: list[tuple[str, str]] = pairs,
        ) -> tuple[Exact | None, float]:  # fmt: skip
            capacitor = f"Cxx x {node} {share / (2 * np.pi * hz * level):.12e}"
            exact = exact_response(netlist.with_cards(*tank, capacitor), drive, axis, pairs)
            if exact is None:
                return None, np.nan
            near = int(np.argmin(np.abs(exact.known.poles - 2j * np.pi * hz)))
            found = bounds(exact.known, noise.spread(exact.known.values))
            return exact, float(abs(exact.known.poles[near].real) / found.growth[near])

        chosen = _coupling(coupled, wanted)
        if chosen is None:
            continue
        growing_poles = chosen.known.poles[chosen.known.poles.real > 0]
        if len(growing_poles) == (1 if growing < 0 else 0):
            return noisy_case("weak", seed, chosen, noise, g)


def _coupling(
    coupled: Callable[[float], tuple[Exact | None, float]], wanted: float
) -> Exact | None:
    """Couple until the detectability is as wanted; it goes with the square of a weak coupling.

    Below 10 it is extrapolated, since a mode that is buried has no bound.
    """
    share, target = 1e-2, max(wanted, 10.0)
    for _ in range(10):
        exact, found = coupled(share)
        if exact is None or not np.isfinite(found):
            return None
        if found > 0 and abs(np.log(found / target)) < 0.1:
            return coupled(share * float(np.sqrt(wanted / target)))[0]
        share *= float(np.clip(np.sqrt(target / max(found, 1e-3)), 0.1, 10))
        if share > 0.5:
            return None
    return None


def wide(seed: int) -> Case:
    """Five decades on a logarithmic grid: bias networks and stages in one sweep."""
    return _preferring_answers(lambda g: _wide(seed, g), _generator("wide", seed))


def _wide(seed: int, g: Generator) -> Case:
    exact = _sampled(
        g, seed % 2 == 1, _logarithmic, int(g.choice([201, 301, 501, 701])),
        uniform_log(g, 1e-4, 1e-2), 5.0,
    )  # fmt: skip
    return noisy_case("wide", seed, exact, Noise(uniform_log(g, 1e-5, 1e-2)), g)


def laws(seed: int) -> Case:
    """Absolute noise, relative noise, both; no cable."""
    return _preferring_answers(lambda g: _laws(seed, g), _generator("laws", seed))


def _laws(seed: int, g: Generator) -> Case:
    exact = _sampled(g, seed % 2 == 1, _even, int(g.choice(POINTS)))
    absolute, relative = uniform_log(g, 1e-5, 1e-2), uniform_log(g, 1e-5, 1e-2)
    law = (Noise(0, absolute), Noise(relative / 3, absolute), Noise(relative, relative))[seed % 3]
    return noisy_case("laws", seed, exact, law, g)


def cable(seed: int) -> Case:
    """Cables in front of the port: values times exp(−sτ), τ·(2π·band) from 0.3 to 30 rad."""
    return _preferring_answers(lambda g: _cable(seed, g), _generator("cable", seed))


def _cable(seed: int, g: Generator) -> Case:
    while True:
        netlist, drive, band = driven_amplifier(g, seed % 2 == 1)
        node = str(g.choice(list(netlist.nodes)))
        axis = _even(*band, int(g.choice(POINTS)))
        port = 50.0 if seed % 4 >= 2 else None
        exact = exact_response(netlist, drive, axis, [(node, node)], port)
        if exact is None or (exact.known.poles.real > 0).any() != (seed % 2 == 1):
            continue
        tau = uniform_log(g, 0.3, 30) / (2 * np.pi * (band[1] - band[0]))
        factor = np.exp(-2j * np.pi * axis * tau)
        delayed = replace(exact.known, values=exact.known.values * factor[:, None], factor=factor)
        relative = uniform_log(g, 1e-5, 1e-2)
        law = (Noise(relative), Noise(0, relative), Noise(relative, relative / 3))[seed % 3]
        text = f"{exact.circuit}\n* in front: a delay of {tau:.6g} s"
        return noisy_case("cable", seed, replace(exact, known=delayed, circuit=text), law, g)


def lines(seed: int) -> Case:
    """Lossy lines and transit delays; see :mod:`proving.distributed`."""
    return _preferring_answers(lambda g: distributed(seed, g), _generator("lines", seed))


def printed(seed: int) -> Case:
    """Numbers printed with 4, 6 or 8 digits, re/im or dB/deg, read again; little other noise."""
    return _preferring_answers(lambda g: _printed(seed, g), _generator("printed", seed))


def _printed(seed: int, g: Generator) -> Case:
    exact = _sampled(g, seed % 2 == 1, _even, int(g.choice(POINTS)))
    digits, polar = int((4, 6, 8)[seed % 3]), seed % 4 >= 2
    noise = Noise(0.0 if seed % 5 else 0.1 * 10.0**-digits)
    known = exact.known
    kind = "delimited" if len(exact.channels) > 1 or seed % 2 else "Touchstone"
    text = print_responses(
        known.frequency_hz, noise.drawn(known.values, g), exact.channels, digits, polar, kind
    )
    read = _read(text, exact, "csv" if kind == "delimited" else "s1p")
    assert read.precision is not None
    first, second, turned = read.precision.rounding_std(read.values)
    own = noise.spread(known.values)
    spread = Spread(np.hypot(first, own.first), np.hypot(second, own.second), turned)
    known = Known(read.frequency_hz, known.values, known.poles, known.residues)
    told = f"printed with {digits} digits, {'dB/deg' if polar else 're/im'}, {kind}; {noise} beside"
    return finished("printed", seed, replace(exact, known=known), read, spread, told)


def print_responses(
    frequency_hz: FloatArray,
    values: np.ndarray[tuple[int, ...], np.dtype[np.complex128]],
    channels: tuple[str | tuple[str, str], ...],
    digits: int,
    polar: bool,
    kind: str,
) -> str:
    """Print responses as delimited text or as a Touchstone one-port, in ohm."""
    names = [c if isinstance(c, str) else f"{c[0]},{c[1]}" for c in channels]
    if polar:
        parts = np.stack([20 * np.log10(np.abs(values)), np.angle(values, deg=True)], axis=2)
    else:
        parts = np.stack([values.real, values.imag], axis=2)
    rows = [
        [f"{hz:.15g}", *(f"{x:.{digits - 1}e}" for x in row.ravel())]
        for hz, row in zip(frequency_hz, parts, strict=True)
    ]
    if kind == "Touchstone":
        head = [f"# Hz Z {'DB' if polar else 'RI'} R 1"]
        return "\n".join(head + [" ".join(r) for r in rows]) + "\n"
    units = ("dB(Z({}))", "phase(Z({})) [deg]") if polar else ("re(Z({}))", "im(Z({}))")
    heads = ["frequency [Hz]"] + [u.format(n) for n in names for u in units]
    return "\n".join(";".join(r) for r in [heads, *rows]) + "\n"


def _read(text: str, exact: Exact, suffix: str) -> polefit.ResponseSet:
    with tempfile.TemporaryDirectory() as folder:
        path = Path(folder) / f"printed.{suffix}"
        path.write_text(text, encoding="utf-8")
        read = polefit.read(path, quantity="impedance")
    channels = [polefit.Channel(*((c, c) if isinstance(c, str) else c)) for c in exact.channels]
    return replace(read, channels=tuple(channels))


def pumped(seed: int) -> Case:
    """Periodically driven circuits, where ``proving/pumped.py`` offers ``case(seed)``.

    It returns a `Case` whose responses carry ``pump_hz`` and whose modes are folded to
    Im p between 0 and half the pump, each with its place as seen after folding;
    ``Known(complex_coefficients=True)`` gives the bounds.
    """
    made: Case = import_module(PUMPED).case(seed)
    return made


FAMILIES: dict[str, Callable[[int], Case]] = {
    "lumped": lumped,
    "printed": printed,
    "damped": damped,
    "coarse": coarse,
    "weak": weak,
    "wide": wide,
    "distributed": lines,
    "laws": laws,
    "cable": cable,
}
if find_spec(PUMPED) is not None:
    FAMILIES["pumped"] = pumped
