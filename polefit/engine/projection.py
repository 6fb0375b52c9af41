"""Variable projection: misfit and its derivatives with residues and direct terms eliminated.

G. H. Golub, V. Pereyra, "The differentiation of pseudo-inverses and nonlinear least squares
problems whose variables separate", SIAM J. Numer. Anal. 10(2), 413-432, 1973, with L. Kaufman's
form of the Jacobian, BIT 15, 49-57, 1975 (both cited from memory). With Kaufman's form JᵀJ is the
exact Fisher information of the poles with all linear parameters marginalised.

Of the tall matrix [basis, derivative functions] of each channel only the triangular factor is
kept. It comes from the Cholesky factor of the normal equations, and the solution is corrected
once with an explicit residual (A. Björck, "Stability analysis of the method of seminormal
equations for linear least squares problems", Linear Algebra Appl. 88/89, 31-48, 1987, from
memory); where columns are too nearly dependent for that, from an orthogonal factorisation.
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from typing import NamedTuple, cast

import numpy as np

from polefit.engine.blocks import (
    Block,
    ComplexArray,
    FloatArray,
    pieces,
    pulled_back,
    weighted,
    weighted_parts,
)
from polefit.engine.pole_set import PoleSet

TIE = 1e-6
"""A column that lies so close to the span of those before it is left to orthogonalisation: the
normal equations would know its distance to 1e-16/1e-12 only."""


class Projected(NamedTuple):
    """The linear least-squares solution of one block at given poles.

    Attributes
    ----------
    coefficients : (K, m) float ndarray
        Linear parameters.
    factor : (K, m, m) float ndarray
        Triangular factor of the weighted basis.
    coupling : (K, m, order) float ndarray
        Derivative functions along the orthonormalised basis.
    inner : (K, order, order) float ndarray
        Triangular factor of what remains of the derivative functions.
    pull : (K, order) float ndarray
        Inner products of that remainder with the residual.
    misfit : float
        Sum of squared weighted residuals.
    """

    coefficients: FloatArray
    factor: FloatArray
    coupling: FloatArray
    inner: FloatArray
    pull: FloatArray
    misfit: float


class Solution(NamedTuple):
    """All blocks at given poles.

    Attributes
    ----------
    sections : PoleSet
        The poles.
    direct : int
        Number of direct terms for each channel.
    parts : tuple of Projected
        One for each block.
    misfit : float
        χ², the sum of squared weighted residuals; infinite where the model is.
    """

    sections: PoleSet
    direct: int
    parts: tuple[Projected, ...]
    misfit: float


def solve(blocks: Sequence[Block], sections: PoleSet, direct: int) -> Solution:
    """Solve for the residues and direct terms of every channel."""
    parts = []
    for block in blocks:
        part = _by_cholesky(block, sections, direct)
        parts.append(part or _by_orthogonalisation(block, sections, direct))
    return Solution(sections, direct, tuple(parts), sum(part.misfit for part in parts))


def _by_cholesky(block: Block, sections: PoleSet, direct: int) -> Projected | None:
    """Solve by normal equations with one correction; None where columns nearly tie."""
    m = sections.order + sections.direct_columns(direct)
    cut = pieces(block)
    kept: list[ComplexArray] = []
    gram, cross = None, None
    for piece in cut:
        columns = sections.evaluate_with_slopes(piece.s, direct)
        if len(cut) == 1:
            kept.append(columns)
        rows = weighted(piece, columns)
        turned = rows.transpose(0, 2, 1)
        more, across = turned @ rows, (turned @ piece.target[:, :, np.newaxis])[:, :, 0]
        gram = more if gram is None else gram + more
        cross = across if cross is None else cross + across
    assert gram is not None
    assert cross is not None
    factor = cholesky(gram)
    if factor is None:
        return None
    basis = factor[:, :m, :m]
    coefficients = _normal_solve(basis, cross[:, :m])
    again = np.zeros_like(cross)
    misfit = 0.0
    for index, piece in enumerate(cut):
        columns = kept[index] if kept else sections.evaluate_with_slopes(piece.s, direct)
        rest = piece.target - weighted_parts(piece, coefficients @ columns[:, :m].T)
        misfit += float(np.vdot(rest, rest))
        again += (pulled_back(piece, rest) @ columns).real
    correction = _normal_solve(basis, again[:, :m])
    misfit -= float(np.vdot(correction, again[:, :m]))
    pull = again[:, m:] - (gram[:, m:, :m] @ correction[:, :, np.newaxis])[:, :, 0]
    return Projected(
        coefficients + correction, basis, factor[:, :m, m:], factor[:, m:, m:], pull, misfit
    )


def cholesky(gram: FloatArray) -> FloatArray | None:
    """Return the upper triangular factors of Gram matrices, or None where columns nearly tie."""
    size = np.sqrt(np.diagonal(gram, axis1=1, axis2=2))
    if not np.all(size > 0) or not np.all(np.isfinite(size)):
        return None
    try:
        lower = np.linalg.cholesky(gram / size[:, :, np.newaxis] / size[:, np.newaxis, :])
    except np.linalg.LinAlgError:
        return None
    if np.diagonal(lower, axis1=1, axis2=2).min() < TIE:
        return None
    upper = lower.transpose(0, 2, 1) * size[:, np.newaxis, :]
    return cast(FloatArray, upper)


def _normal_solve(factor: FloatArray, right: FloatArray) -> FloatArray:
    half = np.linalg.solve(factor.transpose(0, 2, 1), right[:, :, np.newaxis])
    solved: FloatArray = np.linalg.solve(factor, half)[:, :, 0]
    return solved


def _by_orthogonalisation(block: Block, sections: PoleSet, direct: int) -> Projected:
    n = sections.order
    m = n + sections.direct_columns(direct)
    r = orthogonal_triangle(
        np.concatenate(
            (
                weighted(piece, sections.evaluate_with_slopes(piece.s, direct)),
                piece.target[:, :, np.newaxis],
            ),
            axis=2,
        )
        for piece in pieces(block)
    )
    misfit = float(np.sum(r[:, m:, -1] ** 2))
    if not np.isfinite(r).all():  # a sample on a pole, or a pole far out of range
        r, misfit = np.zeros_like(r), np.inf
    basis = regular(r[:, :m, :m])
    coefficients = cast(FloatArray, np.linalg.solve(basis, r[:, :m, -1:])[:, :, 0])
    inner, reach = r[:, m : m + n, m : m + n], r[:, m : m + n, -1:]
    pull = (inner.transpose(0, 2, 1) @ reach)[:, :, 0]
    return Projected(coefficients, basis, r[:, :m, m : m + n], inner, pull, misfit)


def orthogonal_triangle(rows: Iterable[FloatArray]) -> FloatArray:
    """Return the triangular factors, (K, m, m), of tall matrices given in pieces (K, rows, m)."""
    factor: FloatArray | None = None
    for piece in rows:
        stacked = piece if factor is None else np.concatenate((factor, piece), axis=1)
        factor = cast(FloatArray, np.linalg.qr(stacked, mode="r"))
    assert factor is not None
    return factor


def regular(r: FloatArray) -> FloatArray:
    """Keep triangular factors invertible where poles coincide or lie so far out that they tie.

    The dependent direction gets a pivot that makes its coefficient negligible; the misfit,
    taken from the orthogonal factor, does not change.
    """
    norms = np.sqrt(np.sum(r**2, axis=1))
    pivots = np.abs(np.diagonal(r, axis1=1, axis2=2))
    weak = pivots <= 1e-11 * norms
    if not weak.any():
        return r
    mended = r.copy()
    k, i = np.nonzero(weak)
    mended[k, i, i] = np.where(norms[k, i] > 1e-150, norms[k, i], 1.0)
    return mended


def model_values(s: ComplexArray, solution: Solution, part: Projected) -> ComplexArray:
    """Return the fitted responses of one block, (K, N)."""
    values: ComplexArray = part.coefficients @ solution.sections.evaluate(s, solution.direct).T
    return values


def residual(block: Block, solution: Solution, part: Projected) -> FloatArray:
    """Return weighted data minus model, (K, 2N)."""
    return block.target - weighted_parts(block, model_values(block.s, solution, part))


def residuals(blocks: Sequence[Block], solution: Solution) -> list[FloatArray]:
    """Return weighted data minus model of every block."""
    pairs = zip(blocks, solution.parts, strict=True)
    return [residual(block, solution, part) for block, part in pairs]


def normal_equations(solution: Solution) -> tuple[FloatArray, FloatArray]:
    """Return Fisher information JᵀJ and gradient Jᵀr of the pole parameters."""
    n = solution.sections.order
    information = np.zeros((n, n))
    gradient = np.zeros(n)
    for part in solution.parts:
        slopes, _ = solution.sections.chain(part.coefficients)
        flat = (part.inner @ slopes).reshape(part.coefficients.shape[0] * n, n)
        information += flat.T @ flat
        gradient += np.einsum("kdj,kd->j", slopes, part.pull)
    return information, gradient
