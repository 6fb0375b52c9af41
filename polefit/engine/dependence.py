"""A solution with what the data cannot tell apart set apart: for uncertainties beside spare poles.

A pole far outside the band is a constant and a slope to the data, and two poles may coincide. What
orthogonalisation leaves of such a column beside the others is made of rounding errors. For the
misfit that is no harm; where it is taken for a direction that the data know, variances of any size
follow.
"""

from __future__ import annotations

from collections.abc import Sequence
from typing import cast

import numpy as np
from numpy.typing import NDArray

from polefit.engine.blocks import Block, FloatArray, pieces, weighted
from polefit.engine.projection import Projected, Solution, orthogonal_triangle
from polefit.engine.significance import Information, information

DEPENDENT = 1e-11
"""A column of which no more is left beside those before it is taken for a sum of them."""
UNRESOLVED = 1e-20
"""Share of a pole parameter's derivative function that the linear parameters leave, as a square:
below it, what is left is rounding."""


def set_apart(blocks: Sequence[Block], solution: Solution) -> tuple[Solution, Information]:
    """Return a solution without dependent columns, and what the data know of its parameters.

    Parameters
    ----------
    blocks : sequence of Block
        Data.
    solution : Solution
        Where the poles have come to rest.

    Returns
    -------
    Solution
        With the same poles. Dependent columns have no coefficient.
    Information
        Zero for pole parameters of which the data know nothing: they are held.
    """
    parts = tuple(_solved(block, solution) for block in blocks)
    apart = solution._replace(parts=parts)
    known = information(apart)
    explained = np.zeros(solution.sections.order)
    for part in parts:
        slopes, _ = solution.sections.chain(part.coefficients)
        explained += np.sum((part.coupling @ slopes) ** 2, axis=(0, 1))
    free = np.diag(known.poles) > UNRESOLVED * explained
    return apart, known._replace(poles=known.poles * np.outer(free, free))


def _solved(block: Block, solution: Solution) -> Projected:
    """Solve one block by an orthogonal factorisation, direct terms first.

    Of a pole far out nothing is left beside them, which is seen; the other way round its rounding
    errors would spread to them.
    """
    sections, n = solution.sections, solution.sections.order
    m = n + sections.direct_columns(solution.direct)
    order = np.concatenate((np.arange(n, m), np.arange(n), np.arange(m, m + n)))
    r = orthogonal_triangle(
        np.concatenate(
            (
                weighted(piece, sections.evaluate_with_slopes(piece.s, solution.direct)[:, order]),
                piece.target[:, :, np.newaxis],
            ),
            axis=2,
        )
        for piece in pieces(block)
    )
    r = independent(r, m)
    basis = np.empty_like(r[:, :m, :m])
    basis[:, :, order[:m]] = r[:, :m, :m]
    coefficients = cast(FloatArray, np.linalg.solve(basis, r[:, :m, -1:])[:, :, 0])
    inner, reach = r[:, m : m + n, m : m + n], r[:, m : m + n, -1:]
    pull = (inner.transpose(0, 2, 1) @ reach)[:, :, 0]
    misfit = float(np.sum(r[:, m:, -1] ** 2))
    return Projected(coefficients, basis, r[:, :m, m : m + n], inner, pull, misfit)


def independent(r: FloatArray, m: int) -> FloatArray:
    """Take directions of dependent columns out of the basis.

    Parameters
    ----------
    r : (K, rows, columns) float ndarray
        Triangular factors of [basis of m columns, derivative functions, target].
    m : int
        Columns of the basis.

    Returns
    -------
    (K, rows, columns) float ndarray
        What other functions have along such a direction stays with them. In its first m columns
        the factor is triangular but for their order.
    """
    norms = np.sqrt(np.sum(r[:, :, :m] ** 2, axis=1))
    weak = np.abs(np.diagonal(r, axis1=1, axis2=2)[:, :m]) <= DEPENDENT * norms
    if not weak.any():
        return r
    mended = r.copy()
    for k in np.flatnonzero(weak.any(axis=1)):
        mended[k] = _dependent_last(r[k], weak[k], norms[k])
    return mended


def _dependent_last(r: FloatArray, weak: NDArray[np.bool_], norms: FloatArray) -> FloatArray:
    """Return one factor whose dependent columns stand for themselves, after all others."""
    m, strong = weak.size, int(np.count_nonzero(~weak))
    order = np.argsort(weak, kind="stable")
    moved = np.concatenate((r[:, :m][:, order], r[:, m:]), axis=1)
    again = orthogonal_triangle([moved[np.newaxis]])[0]
    mended = np.zeros_like(r)
    mended[:strong, order] = again[:strong, :m]
    mended[:strong, m:] = again[:strong, m:]
    last = order[strong:]
    mended[range(strong, m), last] = np.where(norms[last] > 1e-150, norms[last], 1.0)
    rest = orthogonal_triangle([again[np.newaxis, strong:, m:]])[0]
    mended[m : m + rest.shape[0], m:] = rest
    return mended
