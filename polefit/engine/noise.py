"""The noise law: how the standard deviation of a sample depends on its size.

The variance of each part of a sample is relative²·|H|² + absolute² + (known part)². The two
coefficients are estimated for each channel from the residuals of a fit by maximum likelihood
for normal noise, as iteratively reweighted least squares on the squared residuals; the known part
is the rounding of printed numbers or an uncertainty stated with the data.
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np

from polefit.engine.blocks import FloatArray

RELATIVE_FLOOR = 1e-13
"""Below this share of |H| double precision itself is the noise: no order may chase it."""
ABSOLUTE_FLOOR = 1e-15
"""The same for samples near zero, as a share of the channel's largest |H|."""
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
    squared = size**2
    top = np.maximum(squared.max(axis=1, keepdims=True), 1e-280)
    share = (law.relative**2 + RELATIVE_FLOOR**2)[:, np.newaxis]
    level = (law.absolute**2)[:, np.newaxis] + ABSOLUTE_FLOOR**2 * top
    total: FloatArray = known + (share * squared + level)[:, np.newaxis, :]
    return total


def first_guess(size: FloatArray) -> NoiseLaw:
    """Return the law for a first fit: what is known, else relative noise with a floor.

    Only the shape matters: the first fit leaves the level free, down to the floor of
    double precision, which is relative with a hundredth of the top below small samples.
    """
    channels = size.shape[0]
    return NoiseLaw(np.zeros(channels), np.zeros(channels))


def estimate(residual: FloatArray, size: FloatArray, known: FloatArray, spent: float) -> NoiseLaw:
    """Estimate the law from the residuals of a fit.

    Parameters
    ----------
    residual : (K, 2, N) float ndarray
        Unweighted residuals, in the two parts.
    size : (K, N) float ndarray
        |H| of the model.
    known : (K, 2, N) float ndarray
        Variance known beforehand.
    spent : float
        Degrees of freedom that the fit took from each channel.

    Returns
    -------
    NoiseLaw
        With one coefficient for each channel unless two are clearly better.
    """
    channels, _, points = residual.shape
    deflation = 2 * points / max(2 * points - spent, 1.0)
    squares = residual**2 * deflation
    relative, absolute = np.zeros(channels), np.zeros(channels)
    for k in range(channels):
        relative[k], absolute[k] = _channel_law(squares[k], size[k], known[k])
    return NoiseLaw(relative, absolute)


def _channel_law(squares: FloatArray, size: FloatArray, known: FloatArray) -> tuple[float, float]:
    squared = size**2
    shapes = np.stack((squared, np.ones_like(squared)))
    floor = RELATIVE_FLOOR**2 * squared + ABSOLUTE_FLOOR**2 * squared.max() + 1e-300
    fixed = known + floor
    best: tuple[float, FloatArray] | None = None
    for used in ([0], [1], [0, 1]):
        x = _reweighted(squares, shapes[used], fixed)
        total = np.tensordot(x, shapes[used], 1) + fixed
        cost = float(np.sum(np.log(total) + squares / total)) + LAW_GAIN * len(used)
        if best is None or cost < best[0]:
            full = np.zeros(2)
            full[used] = x
            best = cost, full
    assert best is not None
    nothing = float(np.sum(np.log(fixed) + squares / fixed))
    if nothing <= best[0]:
        return 0.0, 0.0
    return float(np.sqrt(best[1][0])), float(np.sqrt(best[1][1]))


def _reweighted(squares: FloatArray, shapes: FloatArray, fixed: FloatArray) -> FloatArray:
    """Fisher scoring for non-negative coefficients of the variance."""
    excess = np.maximum(squares - fixed, 0.0)
    x = np.array([excess.mean() / shape.mean() / len(shapes) for shape in shapes])
    for _ in range(25):
        weight = 1.0 / (np.tensordot(x, shapes, 1) + fixed) ** 2
        weight_sum, data_sum = weight.sum(axis=0), (weight * (squares - fixed)).sum(axis=0)
        matrix = (shapes * weight_sum) @ shapes.T
        right = shapes @ data_sum
        scale = np.sqrt(np.diag(matrix))
        scale[scale == 0] = 1.0
        system = matrix / np.outer(scale, scale) + 1e-12 * np.eye(len(x))
        new = np.linalg.solve(system, right / scale) / scale
        if len(x) == 2 and new.min() < 0:
            keep = int(np.argmax(new * scale))
            new = np.zeros(2)
            new[keep] = right[keep] / matrix[keep, keep]
        new = np.maximum(new, 0.0)
        done = np.allclose(new, x, rtol=1e-3, atol=0)
        x = new
        if done:
            break
    return x
