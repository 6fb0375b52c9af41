"""Maximum-likelihood refinement of the poles by a damped Gauss-Newton method.

D. W. Marquardt, "An algorithm for least-squares estimation of nonlinear parameters", J. SIAM
11(2), 431-441, 1963 (from memory), on the variable-projection functional; with bounds it moves in
the free parameters only, as an active-set method does.
"""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
import scipy.linalg
from numpy.typing import NDArray

from polefit.engine.blocks import Block, FloatArray, samples
from polefit.engine.projection import Solution, normal_equations, solve

BOUND = 1e-12
"""Smallest coefficient of a confined model: on the axis itself a sample could fall on a pole."""


def refine(
    blocks: Sequence[Block],
    start: Solution,
    *,
    iterations: int = 30,
    tolerance: float = 1e-4,
    confined: NDArray[np.bool_] | None = None,
) -> Solution:
    """Minimise the misfit over the poles.

    Parameters
    ----------
    blocks : sequence of Block
        Data.
    start : Solution
        Where to start.
    iterations : int
        Most accepted or rejected steps.
    tolerance : float
        Stop when the expected decrease falls below this many standard deviations squared,
        in units of the misfit per degree of freedom.
    confined : (order,) bool ndarray, optional
        Parameters to keep positive, which confines their poles to Re s < 0.

    Returns
    -------
    Solution
        Never worse than `start`.
    """
    if not np.isfinite(start.misfit):
        return start
    best = start
    count = samples(blocks)
    damping = 1e-3
    information, gradient = normal_equations(best)
    for _ in range(iterations):
        theta = best.sections.vector()
        free = np.ones(theta.size, dtype=bool)
        if confined is not None:
            free = ~confined | (theta > BOUND) | (gradient > 0)
        if not free.any():
            break
        step, expected = damped_step(information, gradient, free, damping)
        if expected <= tolerance * best.misfit / count:
            break
        moved = theta + step
        if confined is not None:
            moved = np.where(confined, np.maximum(moved, BOUND), moved)
        trial = solve(blocks, best.sections.with_vector(moved), best.direct)
        if trial.misfit < best.misfit:
            gain = (best.misfit - trial.misfit) / max(expected, 1e-300)
            damping = max(damping * (0.1 if gain > 0.5 else 0.5), 1e-12)
            best = trial
            information, gradient = normal_equations(best)
        else:
            damping = max(damping * 10.0, 1e-6)
            if damping > 1e6:
                break
    return best


def damped_step(
    information: FloatArray, gradient: FloatArray, free: np.ndarray, damping: float
) -> tuple[FloatArray, float]:
    """Solve the damped normal equations; also the decrease of χ² that the model expects."""
    step = np.zeros(gradient.size)
    matrix = information[np.ix_(free, free)]
    scale = np.sqrt(np.diag(matrix))
    scale[scale == 0] = 1.0
    scaled = matrix / np.outer(scale, scale)
    right = gradient[free] / scale
    scaled[np.diag_indices_from(scaled)] += damping + 1e-15
    try:
        part = scipy.linalg.cho_solve(scipy.linalg.cho_factor(scaled, check_finite=False), right)
    except scipy.linalg.LinAlgError:
        scaled[np.diag_indices_from(scaled)] += 1e-10
        part = scipy.linalg.lstsq(scaled, right, check_finite=False)[0]
    step[free] = part / scale
    return step, float(part @ right)
