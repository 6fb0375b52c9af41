"""The part of a response that no stable network could have, without choosing an order.

A stable response is the transform of a signal that starts at zero time; what comes before belongs
to poles in the right half-plane. The sweep, interpolated and multiplied by a stable filter that
fades towards its edges, is taken to the time domain and the part before zero time back again:
the projection on unstable functions of A. Cooman, F. Seyfert, M. Olivi, S. Chevillard,
L. Baratchart, "Model-free closed-loop stability analysis: a linear functional approach",
arXiv:1610.03235, here on the axis itself.
"""

from __future__ import annotations

import math
from typing import NamedTuple

import numpy as np
from scipy.interpolate import CubicSpline

from polefit.engine.blocks import ComplexArray, FloatArray

ORDER = 10
"""Of the filter, a Butterworth low-pass moved to the mode."""
REACH = 0.55
"""Half-width of the filter over the distance from the mode to the nearer edge: 52 dB there."""
FINENESS = 3.0
"""Points of the interpolated sweep in the half-width of the mode: anticausal signals then decay
to exp(−3·2π/2) before they meet the causal ones."""
COARSEST = 1.0
"""Largest step over the half-width of the mode: interpolation would miss more of a narrower one."""
MOST_POINTS = 1 << 16


class UnstablePart(NamedTuple):
    """What the projection shows at the frequency of a mode.

    Attributes
    ----------
    seen : float
        Size of the unstable part, filtered.
    expected : float
        That of the mode in question.
    error : float
        By interpolation, noise and the ends of the sweep.
    """

    seen: float
    expected: float
    error: float


def project(
    omega: FloatArray, values: ComplexArray, noise_std: FloatArray, pole: complex, residue: complex
) -> UnstablePart | None:
    """Project one response on unstable functions around a growing mode.

    Parameters
    ----------
    omega : (N,) float ndarray
        Angular frequency, rising.
    values : (N,) complex ndarray
        The response.
    noise_std : (N,) float ndarray
        Standard deviation of each sample, both parts together.
    pole, residue : complex
        Of the mode in question, Re pole > 0.

    Returns
    -------
    UnstablePart or None
        None where the sweep is too coarse, the mode too near an edge, or the points too many.
    """
    centre, growth = pole.imag, pole.real
    if float(np.interp(centre, omega[:-1], np.diff(omega))) > COARSEST * growth:
        return None
    reach = REACH * min(centre - omega[0], omega[-1] - centre)
    if reach < 2 * growth or (omega[-1] - omega[0]) * FINENESS / growth > MOST_POINTS:
        return None
    count = 1 << math.ceil(math.log2((omega[-1] - omega[0]) * FINENESS / growth + 2))
    grid = np.linspace(omega[0], omega[-1], max(count, 256))
    weight = _filter(1j * grid, centre, reach)

    def at_mode(some: FloatArray, response: ComplexArray) -> complex:
        smooth = CubicSpline(some, response)(grid)
        return complex(np.interp(centre, grid, _anticausal(weight * smooth)))

    seen = at_mode(omega, values)
    coarse = at_mode(omega[::2], values[::2]) if omega.size > 16 else 0j
    near = int(np.argmin(np.abs(omega - centre)))
    edge = np.abs(weight[[0, -1]] * values[[0, -1]]).max()
    # a cubic errs by the fourth power of the step: half as many points make 16 times the error
    error = math.hypot(abs(coarse - seen) / COARSER, float(noise_std[near]), float(edge))
    expected = abs(complex(_filter(np.array([pole]), centre, reach)[0]) * residue / growth)
    return UnstablePart(abs(seen), expected, error)


COARSER = 4.0
"""By how much fewer points overstate the error of interpolation; a quarter of the theory's 16,
which holds for steps well below the width only."""


def _filter(s: ComplexArray, centre: float, width: float) -> ComplexArray:
    angles = np.pi / 2 + np.pi * (2 * np.arange(ORDER) + 1) / (2 * ORDER)
    poles = 1j * centre + width * np.exp(1j * angles)
    size = -1j * np.exp(1j * angles)
    result: ComplexArray = np.prod(width * np.abs(size) / (s[:, np.newaxis] - poles), axis=1)
    return result


def _anticausal(response: ComplexArray) -> ComplexArray:
    """Return the part of a response whose signal lies before zero time."""
    padded = np.concatenate((response, np.zeros(response.size)))
    signal = np.fft.ifft(padded)
    signal[: padded.size // 2] = 0.0
    back: ComplexArray = np.fft.fft(signal)[: response.size]
    return back
