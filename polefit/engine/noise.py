"""The noise law: how the standard deviation of a sample depends on its size.

The variance of each part of a sample is relative²·|H|² + absolute² + (known part)². The two
coefficients are estimated for each channel from the residuals of a fit by maximum likelihood
for normal noise; the known part is the rounding of printed numbers or an uncertainty stated with
the data.
"""

from __future__ import annotations

from collections.abc import Sequence
from typing import NamedTuple

import numpy as np

from polefit.engine.blocks import ComplexArray, FloatArray

RELATIVE_FLOOR = 1e-13
"""Below this share of |H| double precision itself is the noise: no order may chase it."""
ABSOLUTE_FLOOR = 1e-15
"""The same for samples near zero, as a share of the channel's largest |H|."""
FIRST_LEVEL = 1e-12
"""Relative standard deviation at the top of the quietest channel in the first fit."""
STEPS = 60
SMALL_GAIN = 0.01
"""Twice the gain in log-likelihood below which no further step is taken."""
LEAST_FREEDOM = 0.1
"""Samples of which the fit follows more than the rest of this say next to nothing of the noise."""
LAW_GAIN = 8.0
"""Likelihood gain 2·Δln L that a second coefficient must bring (χ² with one degree, p = 0.005)."""


class NoiseLaw(NamedTuple):
    """Coefficients for each of K channels.

    Attributes
    ----------
    relative : (K,) float ndarray
        Standard deviation of each part over |H|.
    absolute : (K,) float ndarray
        Standard deviation of each part in the unit of H.
    """

    relative: FloatArray
    absolute: FloatArray


def variance(law: NoiseLaw, size: FloatArray, known: FloatArray) -> FloatArray:
    """Return the variance of the two parts of each sample.

    Parameters
    ----------
    law : NoiseLaw
        Coefficients of K channels.
    size : (K, N) float ndarray
        |H|.
    known : (K, 2, N) float ndarray
        Variance known beforehand.

    Returns
    -------
    (K, 2, N) float ndarray
        Strictly positive.
    """
    own = law.relative[:, np.newaxis] ** 2 * size**2 + law.absolute[:, np.newaxis] ** 2
    total: FloatArray = known + (own + _floor(size))[:, np.newaxis, :]
    return total


def _floor(size: FloatArray) -> FloatArray:
    """Variance that double precision itself brings."""
    squared = size**2
    top = np.maximum(squared.max(axis=1, keepdims=True), 1e-280)
    floor: FloatArray = RELATIVE_FLOOR**2 * squared + ABSOLUTE_FLOOR**2 * top
    return floor


def first_guess(values: Sequence[ComplexArray]) -> list[NoiseLaw]:
    """Return the shape of the law from fourth differences along frequency, before any fit.

    Differences leave noise and little of a smooth response. From bins of |H|, the smallest ratio
    of the median difference to |H| is the relative part, and the smallest bin's the absolute one.
    Where the response itself rules the differences the shape is rough, and later estimates mend
    it. The level is brought near double precision, since the first fit leaves it free.

    Parameters
    ----------
    values : sequence of (K, N) complex ndarray
        Responses, one set for each frequency axis.

    Returns
    -------
    list of NoiseLaw
    """
    laws = [_from_differences(one) for one in values]
    levels = []
    for law, one in zip(laws, values, strict=True):
        top = np.abs(one).max(axis=1)
        levels.append(np.hypot(law.relative, law.absolute / np.where(top > 0, top, 1.0)))
    smallest = float(np.min(np.concatenate(levels)))
    if not smallest > FIRST_LEVEL:
        return [NoiseLaw(np.zeros(len(one)), np.zeros(len(one))) for one in values]
    scale = FIRST_LEVEL / smallest
    return [NoiseLaw(law.relative * scale, law.absolute * scale) for law in laws]


def _from_differences(values: ComplexArray) -> NoiseLaw:
    relative, absolute = np.zeros(len(values)), np.zeros(len(values))
    points = values.shape[1]
    bins = min(8, points // 6)
    if bins < 2:
        return NoiseLaw(relative, absolute)
    spread = np.abs(np.diff(values, 4, axis=1)) / np.sqrt(2 * 70)
    size = np.abs(values[:, 2:-2])
    for k in range(len(values)):
        order = np.argsort(size[k])
        levels = [
            (float(np.median(spread[k, part])), float(np.median(size[k, part])))
            for part in np.array_split(order, bins)
        ]
        relative[k] = min(level / max(at, 1e-290) for level, at in levels)
        absolute[k] = levels[0][0]
    return NoiseLaw(relative, absolute)


def estimate(
    residual: FloatArray, size: FloatArray, known: FloatArray, followed: FloatArray
) -> NoiseLaw:
    """Estimate the law from the residuals of a fit.

    Parameters
    ----------
    residual : (K, 2, N) float ndarray
        Unweighted residuals, in the two parts.
    size : (K, N) float ndarray
        |H| of the model.
    known : (K, 2, N) float ndarray
        Variance known beforehand.
    followed : (K, 2, N) float ndarray
        Share of each sample's noise variance that the fit followed. Resonances take most of
        their samples' freedom: without this the noise there would be understated.

    Returns
    -------
    NoiseLaw
        With one coefficient for each channel unless two are clearly better.
    """
    squares = residual**2 / np.maximum(1 - followed, LEAST_FREEDOM)
    squared = size**2
    fixed = known + _floor(size)[:, np.newaxis, :]
    shapes = np.stack((squared, np.ones_like(squared)), axis=1)
    best = np.zeros((size.shape[0], 2))
    best_cost = _cost(squares, fixed)
    for used in ([0], [1], [0, 1]):
        x = _reweighted(squares, shapes[:, used], fixed)
        total = np.einsum("kj,kjn->kn", x, shapes[:, used])[:, np.newaxis, :] + fixed
        cost = _cost(squares, total) + LAW_GAIN * len(used)
        better = cost < best_cost
        full = np.zeros_like(best)
        full[:, used] = x
        best[better], best_cost[better] = full[better], cost[better]
    return NoiseLaw(np.sqrt(best[:, 0]), np.sqrt(best[:, 1]))


def _cost(squares: FloatArray, total: FloatArray) -> FloatArray:
    """Return −2·ln L of each channel, but for a constant."""
    cost: FloatArray = np.sum(np.log(total) + squares / total, axis=(1, 2))
    return cost


def _reweighted(squares: FloatArray, shapes: FloatArray, fixed: FloatArray) -> FloatArray:
    """Maximise the likelihood over non-negative coefficients, (K, J), of K channels.

    Multiplicative updates, which keep the sign and raise the likelihood (C. Févotte, N. Bertin,
    J.-L. Durrieu, Neural Computation 21(3), 793-830, 2009, from memory: the same function).
    """
    excess = np.maximum(squares - fixed, 0.0).mean(axis=(1, 2))[:, np.newaxis]
    x: FloatArray = excess / shapes.mean(axis=2) / shapes.shape[1]
    for _ in range(STEPS):
        total = np.einsum("kj,kjn->kn", x, shapes)[:, np.newaxis, :] + fixed
        wanted = np.einsum("kjn,kn->kj", shapes, (squares / total**2).sum(axis=1))
        present = np.einsum("kjn,kn->kj", shapes, (1.0 / total).sum(axis=1))
        step = wanted / present
        # what the step brings in 2·Δln L: a coefficient that fades away need not be followed
        gain = x * present * (step - 1) ** 2
        x = x * step
        if gain.max() < SMALL_GAIN:
            break
    return x
