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
from polefit.engine.pole_set import PoleSet
from polefit.engine.significance import information, invert

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
    moved : (S, 2, 2) float ndarray
        The same with the shift between the models, but without the uncertainty of the richer one.
    own : (S, 2, 2) float ndarray
        The same in the model itself.
    """

    poles: ComplexArray
    covariance: FloatArray
    moved: FloatArray
    own: FloatArray


def known_poles(estimation: Estimation) -> KnownPoles:
    """Return the poles of the model, widened by what a richer model says of them."""
    own = _at(estimation.solution.sections, joint_covariance(estimation))
    past = estimation.past
    if past.sections.order == estimation.solution.sections.order or own.poles.size < 2:
        return own  # one mode alone: nothing hides behind others
    joint = invert(information(past).poles) * estimation.factor
    return _widened(own, _at(past.sections, joint))


def joint_covariance(estimation: Estimation) -> FloatArray:
    """Return the covariance of the pole parameters in the model itself."""
    return invert(estimation.info.poles) * estimation.factor


def _at(sections: PoleSet, joint: FloatArray) -> KnownPoles:
    covariance = np.empty((sections.number, 2, 2))
    for index in range(sections.number):
        rows, slope = sections.columns(index), sections.pole_gradient(index)
        covariance[index] = slope @ joint[np.ix_(rows, rows)] @ slope.T
    return KnownPoles(sections.own_poles(), covariance, covariance, covariance)


def _widened(own: KnownPoles, past: KnownPoles) -> KnownPoles:
    covariance, moved = own.covariance.copy(), own.covariance.copy()
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
        far = np.abs([shift.real, shift.imag])
        moved[i] = _stretched(own.covariance[i], std, far)
        wide = np.sqrt(np.maximum(np.diag(past.covariance[j]), 0.0))
        covariance[i] = _stretched(own.covariance[i], std, np.maximum(far, wide))
    return KnownPoles(own.poles, covariance, moved, own.covariance)


def _stretched(covariance: FloatArray, std: FloatArray, wanted: FloatArray) -> FloatArray:
    """Raise standard deviations where more is wanted, correlation kept."""
    if not np.isfinite(wanted).all():
        return covariance
    stretch = np.where(std > 0, np.maximum(wanted, std) / np.where(std > 0, std, 1.0), 1.0)
    stretched: FloatArray = covariance * np.outer(stretch, stretch)
    return stretched
