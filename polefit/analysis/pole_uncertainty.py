"""How well each pole is known: its covariance, and what a richer model says of that.

A model pruned to what the data ask for is more certain than they are: modes too weak to be worth
their parameters still move the others. The same pole in a model with two pairs more carries the
uncertainty that they bring, so the larger of the two uncertainties and of the shift between
the models is taken for each part. (Model uncertainty as in C. Chatfield, "Model uncertainty, data
mining and statistical inference", J. R. Stat. Soc. A 158(3), 419-466, 1995, from memory.)
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np

from polefit.engine.blocks import ComplexArray, FloatArray
from polefit.engine.estimation import Estimation
from polefit.engine.projection import Solution
from polefit.engine.sections import Sections
from polefit.engine.significance import Information, information, invert

SAME_WIDTHS = 0.5
SAME_DEVIATIONS = 10.0
"""A pole of the richer model is another one if it lies further off than this share of the
half-width and so many standard deviations."""


class KnownPoles(NamedTuple):
    """One pole of each section, upper or real, with its covariance.

    Attributes
    ----------
    poles : (S,) complex ndarray
        Normalised.
    covariance : (S, 2, 2) float ndarray
        Of real and imaginary part.
    """

    poles: ComplexArray
    covariance: FloatArray


def known_poles(estimation: Estimation) -> KnownPoles:
    """Return the poles of the model, widened by what a richer model says of them."""
    factor = estimation.level * estimation.whiteness.inflation
    own = _at(estimation.solution, estimation.info, factor)
    if estimation.past.sections.order == estimation.solution.sections.order:
        return own
    return _widened(own, _at(estimation.past, information(estimation.past), factor))


def _at(solution: Solution, info: Information, factor: float) -> KnownPoles:
    sections, joint = solution.sections, invert(info.poles) * factor
    p = sections.c1.size
    upper = _upper(sections)
    slope = np.zeros((p, 2, 2))
    with np.errstate(divide="ignore", invalid="ignore"):
        slope[:, 0, 0] = -0.5
        slope[:, 1, 0] = -sections.c1 / (4 * upper[:p].imag)
        slope[:, 1, 1] = 1 / (2 * upper[:p].imag)
    covariance = np.zeros((sections.number, 2, 2))
    one, two = np.arange(p), np.arange(p, 2 * p)
    rows = np.stack((one, two), axis=1)
    own = joint[rows[:, :, np.newaxis], rows[:, np.newaxis, :]]
    covariance[:p] = slope @ own @ slope.transpose(0, 2, 1)
    covariance[p:, 0, 0] = np.diag(joint)[2 * p :]
    return KnownPoles(upper, np.nan_to_num(covariance, nan=np.inf, posinf=np.inf))


def _upper(sections: Sections) -> ComplexArray:
    omega = np.sqrt(np.maximum(sections.c0 - sections.c1**2 / 4, 0.0))
    return np.concatenate((-sections.c1 / 2 + 1j * omega, -sections.c.astype(np.complex128)))


def _widened(own: KnownPoles, past: KnownPoles) -> KnownPoles:
    covariance = own.covariance.copy()
    for i, pole in enumerate(own.poles):
        same = (past.poles.imag == 0) == (pole.imag == 0)
        distance = np.where(same, np.abs(past.poles - pole), np.inf)
        if not np.isfinite(distance).any():
            continue
        j = int(np.argmin(distance))
        std = np.sqrt(np.maximum(np.diag(covariance[i]), 0.0))
        reach = SAME_WIDTHS * abs(pole.real) + SAME_DEVIATIONS * float(np.hypot(*std))
        if distance[j] > reach:
            continue  # another pole altogether: persistence fails instead
        shift = past.poles[j] - pole
        wide = np.diag(past.covariance[j])
        square = np.maximum(np.array([shift.real**2, shift.imag**2]), wide)
        covariance[i] = _stretched(covariance[i], std, np.sqrt(square))
    return KnownPoles(own.poles, covariance)


def _stretched(covariance: FloatArray, std: FloatArray, wanted: FloatArray) -> FloatArray:
    """Raise standard deviations where more is wanted, correlation kept."""
    if not np.isfinite(wanted).all():
        return covariance
    stretch = np.where(std > 0, np.maximum(wanted, std) / np.where(std > 0, std, 1.0), 1.0)
    stretched: FloatArray = covariance * np.outer(stretch, stretch)
    return stretched
