"""Periodically driven circuits as cases: every line of an exponent is a pole that stands alone."""

from __future__ import annotations

import math

import numpy as np
import periodic
from numpy.typing import NDArray

from proving.case import Case, Place, TrueMode, place
from proving.cramer_rao import Bounds, Known, Spread, bounds

ComplexArray = NDArray[np.complex128]
FloatArray = NDArray[np.float64]

CIRCLE = 8
"""Points around a pole by which its residue is taken."""
PLACES: tuple[Place, ...] = ("inside", "edge", "outside")
SAME = 1e-6
"""Lines nearer than this share of the drive are one: real Floquet multipliers have one each."""


def case(seed: int) -> Case:
    """Make the case of a seed; see :func:`periodic.pumped_case`."""
    made = periodic.pumped_case(seed)
    responses, drive = made.responses, 2 * np.pi * made.circuit.pump_hz
    band = responses.band_hz
    owners, lines = _lines(made.exponents, drive, band)
    residues = _residues(made, lines, drive)
    exact = made.circuit.response(responses.frequency_hz, _pairs(made))
    std: FloatArray = made.noise * np.abs(exact) / math.sqrt(2)
    known = Known(responses.frequency_hz, exact, lines, residues, complex_coefficients=True)
    found = bounds(known, Spread(std, std))
    modes = [
        _mode(exponent, [i for i, o in enumerate(owners) if o == n], lines, found, band)
        for n, exponent in enumerate(made.exponents)
    ]
    return Case(
        name=f"pumped {seed}",
        family="pumped",
        seed=seed,
        responses=responses,
        modes=tuple(m for m in modes if m is not None),
        noise=f"{made.noise:.2g} relative",
        circuit=made.kind,
        noise_relative=made.noise,
    )


def _pairs(made: periodic.PumpedCase) -> list[tuple[str, str]]:
    return [(c.output, c.input) for c in made.responses.channels]


def _lines(
    exponents: ComplexArray, drive: float, band: tuple[float, float]
) -> tuple[list[int], ComplexArray]:
    """Return the images in and around the band, and the exponent to which each belongs."""
    width = 2 * np.pi * (band[1] - band[0])
    low, high = 2 * np.pi * band[0] - width / 2, 2 * np.pi * band[1] + width / 2
    owners: list[int] = []
    listed: list[complex] = []
    for n, exponent in enumerate(exponents):
        for side in (1, -1):
            at = exponent.real + 1j * side * exponent.imag
            for turn in range(math.floor(low / drive) - 1, math.ceil(high / drive) + 2):
                line = complex(at + 1j * turn * drive)
                there = [q for q, o in zip(listed, owners, strict=True) if o == n]
                if low < line.imag < high and all(abs(line - q) > SAME * drive for q in there):
                    owners.append(n)
                    listed.append(line)
    return owners, np.array(listed)


def _residues(made: periodic.PumpedCase, lines: ComplexArray, drive: float) -> ComplexArray:
    """Return the residues by the mean around small circles."""
    turn = np.exp(2j * np.pi * np.arange(CIRCLE) / CIRCLE)
    rows = []
    for line in lines:
        others = np.abs(lines - line)
        radius = min(0.1 * float(np.min(others[others > 0], initial=drive)), 1e-3 * drive)
        s = line + radius * turn
        values = made.circuit.response(s / 2j / np.pi, _pairs(made))
        rows.append(np.mean(values * (radius * turn)[:, np.newaxis], axis=0))
    return np.array(rows)


def _mode(
    exponent: complex,
    own: list[int],
    lines: ComplexArray,
    found: Bounds,
    band: tuple[float, float],
) -> TrueMode | None:
    """Combine the lines of an exponent as if they were independent."""
    if not own:
        return None
    seen = [i for i in own if np.isfinite(found.growth[i])]
    # the innermost of its places
    where = min((place(complex(lines[i]), band) for i in own), key=PLACES.index)

    def together(std: FloatArray) -> float:
        total = sum(1 / float(std[i]) ** 2 for i in seen if std[i] > 0)
        return 1 / math.sqrt(total) if total else math.inf

    return TrueMode(
        complex(exponent),
        together(found.growth),
        together(found.angular),
        where,
        float(sum(found.energy[i] for i in own)),
    )
