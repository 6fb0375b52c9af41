"""Whether the residual looks like noise, and if not, how much less the samples tell.

Portmanteau test of G. M. Ljung and G. E. P. Box, "On a measure of lack of fit in time series
models", Biometrika 65(2), 297-303, 1978 (from memory), along the frequency axis of each channel.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from typing import NamedTuple

import numpy as np
import scipy.special

from polefit.engine.blocks import FloatArray

CHANCE = 1e-4
"""Probability with which white noise would be called coloured, over all channels."""


class Whiteness(NamedTuple):
    """Colour of the residual.

    Attributes
    ----------
    white : bool
        Whether white noise would look like this.
    probability : float
        Of so much correlation in white noise.
    tendency : float
        Sum of the first correlations over its standard deviation: what a model leaves out makes
        it positive, too many parameters make it negative.
    inflation : float
        Factor >= 1 by which correlated residuals raise the variance of estimates; 1 when white.
    """

    white: bool
    probability: float
    tendency: float
    inflation: float


def judge_whiteness(residuals: Sequence[FloatArray]) -> Whiteness:
    """Test the weighted residuals of all channels.

    Parameters
    ----------
    residuals : sequence of (K, 2N) float ndarray
        One for each block.

    Returns
    -------
    Whiteness
    """
    statistic, freedom = 0.0, 0
    first, first_variance = 0.0, 0.0
    factors: list[float] = []
    for residual in residuals:
        channels, rows = residual.shape
        points = rows // 2
        lags = min(10, points // 5)
        if lags < 1:
            continue
        series = residual.reshape(channels, 2, points)
        parts = np.sum(series**2, axis=2)
        energy = parts.sum(axis=1)
        energy[energy == 0] = 1.0
        # 2 where real and imaginary part are equally noisy, 1 where only one of them is
        independent = energy**2 / np.maximum(np.sum(parts**2, axis=1), 1e-300)
        lag = np.arange(1, lags + 1)
        correlation = np.stack(
            [np.sum(series[..., k:] * series[..., :-k], axis=(1, 2)) / energy for k in lag], axis=1
        )
        # each lag sums the independent parts: variance about 1 / (2 N)
        count = np.clip(independent, 1.0, 2.0)[:, np.newaxis] * points
        scaled = correlation**2 * count * (points + 2) / (points - lag)
        statistic += float(scaled.sum())
        freedom += channels * lags
        first += float(correlation[:, :3].sum())
        first_variance += float(np.sum(min(3, lags) / count))
        weight = 1 - lag / (lags + 1)
        factors.extend(1 + 2 * correlation @ weight)
    if freedom == 0:
        return Whiteness(True, 1.0, 0.0, 1.0)
    probability = float(scipy.special.chdtrc(freedom, statistic))
    white = probability > CHANCE
    inflation = 1.0 if white else max(1.0, float(np.mean(factors)))
    return Whiteness(white, probability, first / math.sqrt(first_variance), inflation)
