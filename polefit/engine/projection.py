"""Variable projection: misfit, residual and Jacobian with residues and direct terms eliminated.

G. H. Golub, V. Pereyra, "The differentiation of pseudo-inverses and nonlinear least squares
problems whose variables separate", SIAM J. Numer. Anal. 10(2), 413-432, 1973, with L. Kaufman's
form of the Jacobian, BIT 15, 49-57, 1975 (both cited from memory). With Kaufman's form JᵀJ is the
exact Fisher information of the poles with all linear parameters marginalised.
"""

from __future__ import annotations

from collections.abc import Sequence
from typing import NamedTuple

import numpy as np

from polefit.engine.blocks import Block, ComplexArray, FloatArray, weighted
from polefit.engine.sections import Basis, Sections, evaluate


class Projected(NamedTuple):
    """The linear least-squares solution of one block at given poles.

    Attributes
    ----------
    basis : Basis
        Section responses.
    q, r : (K, 2N, m), (K, m, m) float ndarray
        QR factors of the weighted basis.
    coefficients : (K, m) float ndarray
        Linear parameters.
    residual : (K, 2N) float ndarray
        Weighted data minus model.
    """

    basis: Basis
    q: FloatArray
    r: FloatArray
    coefficients: FloatArray
    residual: FloatArray


class Solution(NamedTuple):
    """All blocks at given poles.

    Attributes
    ----------
    sections : Sections
        The poles.
    direct : int
        Number of direct terms for each channel.
    parts : tuple of Projected
        One for each block.
    misfit : float
        χ², the sum of squared weighted residuals.
    """

    sections: Sections
    direct: int
    parts: tuple[Projected, ...]
    misfit: float


def solve(blocks: Sequence[Block], sections: Sections, direct: int) -> Solution:
    """Solve for the residues and direct terms of every channel."""
    parts = tuple(_project(block, sections, direct) for block in blocks)
    misfit = sum(float(np.vdot(part.residual, part.residual)) for part in parts)
    return Solution(sections, direct, parts, misfit)


def _project(block: Block, sections: Sections, direct: int) -> Projected:
    basis = evaluate(sections, block.s, direct)
    q, r = np.linalg.qr(weighted(block, basis.columns))
    onto = np.matmul(block.target[:, np.newaxis, :], q)
    residual = block.target - np.matmul(q, onto.transpose(0, 2, 1))[:, :, 0]
    r = _regular(r)
    coefficients = np.linalg.solve(r, onto.transpose(0, 2, 1))[:, :, 0]
    return Projected(basis, q, r, coefficients, residual)


def _regular(r: FloatArray) -> FloatArray:
    """Keep triangular factors invertible where poles coincide or lie so far out that they tie.

    The dependent direction gets a pivot that makes its coefficient negligible; the residual,
    taken from the orthogonal factor, does not change.
    """
    norms = np.sqrt(np.sum(r**2, axis=1))
    pivots = np.abs(np.diagonal(r, axis1=1, axis2=2))
    weak = pivots < 1e-11 * norms
    if not weak.any():
        return r
    mended = r.copy()
    k, i = np.nonzero(weak)
    mended[k, i, i] = np.maximum(norms[k, i], 1e-300)
    return mended


def raw_jacobian(block: Block, sections: Sections, part: Projected) -> FloatArray:
    """Differentiate the weighted model by the pole parameters, linear parameters held.

    Returns
    -------
    (K, 2N, order) float ndarray
        ∂/∂c1 = −s·g/q, ∂/∂c0 = −g/q, ∂/∂c = −g/(s + c), g being the section's response.
    """
    p, r = sections.c1.size, sections.c.size
    along = part.coefficients[:, np.newaxis, :p]
    across = part.coefficients[:, np.newaxis, p : 2 * p]
    single = part.coefficients[:, np.newaxis, 2 * p : 2 * p + r]
    columns = part.basis.columns
    response = along * columns[:, :p] + across * columns[:, p : 2 * p]
    derivative: ComplexArray = np.empty(
        (block.channels, block.s.size, sections.order), dtype=np.complex128
    )
    by_c0 = derivative[:, :, p : 2 * p]
    np.multiply(response, -part.basis.inverse2, out=by_c0)
    np.multiply(block.s[:, np.newaxis], by_c0, out=derivative[:, :, :p])
    np.multiply(-single, part.basis.inverse1**2, out=derivative[:, :, 2 * p :])
    return weighted(block, derivative)


def jacobian(blocks: Sequence[Block], solution: Solution) -> list[FloatArray]:
    """Projected Jacobians, one (K, 2N, order) array for each block."""
    projected = []
    for block, part in zip(blocks, solution.parts, strict=True):
        raw = raw_jacobian(block, solution.sections, part)
        projected.append(raw - np.matmul(part.q, np.matmul(part.q.transpose(0, 2, 1), raw)))
    return projected


def normal_equations(blocks: Sequence[Block], solution: Solution) -> tuple[FloatArray, FloatArray]:
    """Return Fisher information JᵀJ and gradient Jᵀr of the pole parameters."""
    n = solution.sections.order
    information = np.zeros((n, n))
    gradient = np.zeros(n)
    for part, block_jacobian in zip(solution.parts, jacobian(blocks, solution), strict=True):
        flat = block_jacobian.reshape(part.residual.size, n)
        information += flat.T @ flat
        gradient += flat.T @ part.residual.reshape(-1)
    return information, gradient
