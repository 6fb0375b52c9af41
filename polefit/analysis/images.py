"""The modes of a driven circuit once more, with all images of every exponent in the model.

A line that is too weak to be fitted by itself still biases those that it overlaps. Where one image
of an exponent is known, the places of the others are: they are put into the model, tied to it, and
only their residues are free.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import replace

import numpy as np
import scipy.special

from polefit.analysis.folding import DIFFER, Claim, images_in
from polefit.engine.blocks import ComplexArray, FloatArray
from polefit.engine.complex_poles import standing_alone
from polefit.engine.estimation import Estimation
from polefit.engine.order import largest_order
from polefit.engine.significance import invert
from polefit.engine.tied import Tie, Tied, refine_tied
from polefit.modes import Evidence

LOST = 10.0
"""Where images leave a growth rate known so many times worse, two claims contend for a place."""
WINDOW = 0.05
"""Images up to this share of the drive's frequency outside the band are put in as well."""


def with_images(
    claims: Sequence[Claim],
    estimation: Estimation,
    scale: float,
    band_hz: tuple[float, float],
    pump_hz: float,
) -> list[Claim]:
    """Estimate the claimed exponents with all their images in the model.

    Parameters
    ----------
    claims : sequence of Claim
        As folded from the lines of a free fit.
    estimation : Estimation
        The free fit.
    scale : float
        Angular frequency of the normalisation, rad/s.
    band_hz : (float, float)
        Of the sweep.
    pump_hz : float
        Frequency of the drive.

    Returns
    -------
    list of Claim
        With pole and covariance from the tied fit; as they were where that describes the data
        worse than noise explains.
    """
    if not claims:
        return list(claims)
    drive = 2 * math.pi * pump_hz / scale
    edges = [2 * math.pi * f / scale for f in band_hz]
    window = max(edges[0] - WINDOW * drive, -drive), edges[1] + WINDOW * drive
    layout = _Layout(drive, window)
    for claim in claims:
        layout.add(claim.pole / scale, claim.covariance[1, 1] == 0)
    for pole in _others(estimation, claims, layout.poles):
        layout.add_free(pole)
    if 2 * len(layout.rows) > largest_order(estimation.blocks):
        return list(claims)
    tie, start = layout.tie()
    kind = standing_alone(np.zeros(len(layout.rows), dtype=np.complex128))
    tied = refine_tied(estimation.blocks, kind, tie, start, estimation.solution.direct)
    lines = sum(len(claim.seen_hz) for claim in claims)
    if _worse(tied, estimation, lines):
        return list(claims)
    covariance = invert(tied.information) * estimation.factor
    told = [
        _updated(claim, tied.free[at], covariance[np.ix_(at, at)], scale)
        for claim, at in zip(claims, layout.places, strict=True)
    ]
    return list(claims) if any(map(_lost, told, claims)) else told


class _Layout:
    """Collects lines with the free parameters that they depend on."""

    def __init__(self, drive: float, window: tuple[float, float]) -> None:
        self.drive, self.window = drive, window
        self.start: list[float] = []
        # for each line: place of −Re, place of Im or None, sign of Im, offset of Im
        self.rows: list[tuple[int, int | None, float, float]] = []
        self.places: list[list[int]] = []
        self.poles: list[complex] = []

    def add(self, pole: complex, pinned: bool) -> None:
        """Add an exponent with its images; a pinned one has its growth rate only."""
        first = len(self.start)
        self.start += [-pole.real] if pinned else [-pole.real, pole.imag]
        self.places.append(list(range(first, len(self.start))))
        for at in images_in(pole.imag, self.drive, self.window):
            turns = round(at / self.drive)
            sign = math.copysign(1.0, at - turns * self.drive)
            second, offset = (None, at) if pinned else (first + 1, turns * self.drive)
            self.rows.append((first, second, sign, offset))
            self.poles.append(complex(pole.real, at))

    def add_free(self, pole: complex) -> None:
        """Add a pole that is tied to no other."""
        first = len(self.start)
        self.start += [-pole.real, pole.imag]
        self.rows.append((first, first + 1, 1.0, 0.0))

    def tie(self) -> tuple[Tie, FloatArray]:
        """Return the tie of all lines, and where to start."""
        count = len(self.rows)
        matrix, offset = np.zeros((2 * count, len(self.start))), np.zeros(2 * count)
        for i, (damping, omega, sign, at) in enumerate(self.rows):
            matrix[i, damping], offset[count + i] = 1.0, at
            if omega is not None:
                matrix[count + i, omega] = sign
        return Tie(matrix, offset), np.array(self.start)


def _others(
    estimation: Estimation, claims: Sequence[Claim], images: Sequence[complex]
) -> ComplexArray:
    """Return the poles of the free model for which no image stands."""
    poles = estimation.solution.sections.own_poles()
    claimed = {index for claim in claims for index in claim.lines}
    placed = np.array(images, dtype=np.complex128)
    kept = [
        p
        for i, p in enumerate(poles)
        if i not in claimed and not np.any(np.abs(placed - p) < np.abs(placed.real))
    ]
    return np.array(kept, dtype=np.complex128)


def _worse(tied: Tied, estimation: Estimation, lines: int) -> bool:
    """Tell whether the tied model misses more than the constraints explain."""
    constraints = max(2 * lines - tied.free.size, 1)
    limit = float(scipy.special.chdtri(constraints, DIFFER))
    rise = tied.solution.misfit - estimation.solution.misfit
    return not rise < limit * estimation.factor


def _lost(after: Claim, before: Claim) -> bool:
    """Tell whether a mode is no longer the one that it was: much less certain, or far off."""
    std = math.sqrt(before.covariance[0, 0])
    allowed = 5 * std + 0.5 * abs(before.pole.real)
    moved = abs(after.pole - before.pole) > allowed
    return moved or bool(after.covariance[0, 0] > (LOST * std) ** 2)


def _updated(claim: Claim, free: FloatArray, covariance: FloatArray, scale: float) -> Claim:
    """Put the outcome into a claim; what the order moves a pole by stays in its variance."""
    own = np.zeros((2, 2))
    own[: free.size, : free.size] = covariance * scale**2
    own[0, 1] = own[1, 0] = -own[0, 1]
    own[0, 0] += claim.spread[0]
    if free.size > 1:
        own[1, 1] += claim.spread[1]
    omega = claim.pole.imag if free.size == 1 else abs(free[1]) * scale
    pole = complex(-free[0] * scale, omega)
    evidence = claim.evidence
    if pole.real > 0 > claim.line.pole.real:
        told = "its line alone decays, and grows only where its images are taken into account"
        evidence = (*evidence, Evidence("images", False, told))
    return replace(claim, pole=pole, covariance=own, evidence=evidence)
