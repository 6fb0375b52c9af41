"""Refinement of poles that are tied to each other: fewer parameters than the poles have.

The parameters of the poles are an affine function of those that are free, as for the images of one
Floquet exponent. The same damped Gauss-Newton method as in :mod:`polefit.engine.refinement`, with
the Fisher information and the gradient carried over by the chain rule.
"""

from __future__ import annotations

from collections.abc import Sequence
from typing import NamedTuple

import numpy as np

from polefit.engine.blocks import Block, FloatArray, samples
from polefit.engine.pole_set import PoleSet
from polefit.engine.projection import Solution, normal_equations, solve
from polefit.engine.refinement import damped_step


class Tie(NamedTuple):
    """Parameters of a pole set as `matrix` · free parameters + `offset`.

    Attributes
    ----------
    matrix : (order, Q) float ndarray
        Of full column rank.
    offset : (order,) float ndarray
        In the unit of the parameters.
    """

    matrix: FloatArray
    offset: FloatArray


class Tied(NamedTuple):
    """Outcome of a tied fit.

    Attributes
    ----------
    solution : Solution
        With all poles.
    free : (Q,) float ndarray
        The free parameters.
    information : (Q, Q) float ndarray
        Their Fisher information for unit variance, linear parameters marginalised.
    """

    solution: Solution
    free: FloatArray
    information: FloatArray


def refine_tied(
    blocks: Sequence[Block],
    kind: PoleSet,
    tie: Tie,
    start: FloatArray,
    direct: int,
    *,
    iterations: int = 30,
    tolerance: float = 1e-4,
) -> Tied:
    """Minimise the misfit over the free parameters.

    Parameters
    ----------
    blocks : sequence of Block
        Data.
    kind : PoleSet
        Poles of the kinds that the tied parameters are of; its own parameters do not matter.
    tie : Tie
        How the parameters hang together.
    start : (Q,) float ndarray
        Free parameters to start from.
    direct : int
        Direct terms for each channel.
    iterations : int
        Most accepted or rejected steps.
    tolerance : float
        Stop when the expected decrease falls below this many standard deviations squared, in
        units of the misfit per degree of freedom.

    Returns
    -------
    Tied
    """

    def at(free: FloatArray) -> Solution:
        return solve(blocks, kind.with_vector(tie.matrix @ free + tie.offset), direct)

    free, best, damping = start, at(start), 1e-3
    everything = np.ones(start.size, dtype=bool)
    information, gradient = _carried(best, tie)
    for _ in range(iterations):
        step, expected = damped_step(information, gradient, everything, damping)
        if not expected > tolerance * best.misfit / samples(blocks) or damping > 1e6:
            break
        trial = at(free + step)
        if trial.misfit < best.misfit:
            free, best, damping = free + step, trial, max(0.1 * damping, 1e-12)
            information, gradient = _carried(best, tie)
        else:
            damping = max(10.0 * damping, 1e-6)
    return Tied(best, free, information)


def _carried(solution: Solution, tie: Tie) -> tuple[FloatArray, FloatArray]:
    information, gradient = normal_equations(solution)
    return tie.matrix.T @ information @ tie.matrix, tie.matrix.T @ gradient
