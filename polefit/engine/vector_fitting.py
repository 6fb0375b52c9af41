"""Relaxed vector fitting: starting poles from linear least squares, no pole ever flipped.

B. Gustavsen, "Improving the pole relocating properties of vector fitting", IEEE Trans. Power
Delivery 21(3), 1587-1592, 2006, doi 10.1109/TPWRD.2005.860281; QR form for many responses with
shared poles: D. Deschrijver, M. Mrozowski, T. Dhaene, D. De Zutter, "Macromodeling of multiport
systems using a fast implementation of the vector fitting method", IEEE Microwave and Wireless
Components Letters 18(6), 383-385, 2008.
"""

from __future__ import annotations

from collections.abc import Sequence
from typing import TypeVar

import numpy as np
import scipy.linalg

from polefit.engine.blocks import Block, ComplexArray, FloatArray, pieces, weighted
from polefit.engine.pole_set import PoleSet
from polefit.engine.projection import cholesky, orthogonal_triangle
from polefit.engine.sections import Sections, from_poles

Poles = TypeVar("Poles", bound=PoleSet)


def starting_sections(low: float, high: float, order: int, damping: float = 0.01) -> Sections:
    """Return lightly damped pairs spread over a band; see :func:`starting_poles`."""
    return from_poles(starting_poles(low, high, order, damping))


def starting_poles(low: float, high: float, order: int, damping: float = 0.01) -> ComplexArray:
    """Spread lightly damped poles over a band.

    Parameters
    ----------
    low, high : float
        Band edges, normalised rad/s.
    order : int
        Twice the number of upper poles; an odd one adds a real pole.
    damping : float
        Damping ratio of the poles.

    Returns
    -------
    (n,) complex ndarray
        Evenly spaced upper poles; half of them logarithmically when the band spans over a decade.
    """
    pairs = max(order // 2, 0)
    low = max(low, high * 1e-7)
    spread = np.linspace(max(low, high / (4 * pairs + 4)), high, pairs)
    if high > 10 * low and pairs > 1:
        logarithmic = np.geomspace(low, high, pairs)
        spread = np.sort(np.concatenate((spread[::2], logarithmic[::2])))[:pairs]
        # where both kinds coincide, poles would be defective
        spread = spread * (1 + 1e-3 * np.arange(pairs) / max(pairs, 1))
    poles = spread * (-damping + 1j)
    real = [-high / 2] if order % 2 else []
    return np.concatenate((poles, np.asarray(real, dtype=np.complex128)))


def relocate(blocks: Sequence[Block], sections: Poles, direct: int) -> Poles:
    """Move the poles once: the new poles are the zeros of the relaxed weighting function.

    Parameters
    ----------
    blocks : sequence of Block
        Data.
    sections : PoleSet
        Current poles.
    direct : int
        0, 1 or 2 direct terms for each channel.

    Returns
    -------
    PoleSet
        As many poles as before, wherever they fall.
    """
    unknowns = sections.order + 1
    triangles = [_reduced(block, sections, direct) for block in blocks]
    constraint = np.zeros(unknowns)
    total = 0.0
    for block in blocks:
        for piece in pieces(block):
            constraint[:-1] += sections.evaluate(piece.s, 0).real.sum(axis=0)
        constraint[-1] += block.s.size
        total += float(np.vdot(block.target, block.target))
    stacked = np.concatenate(triangles, axis=0)
    scale = np.sqrt(total) / constraint[-1]
    system = np.concatenate((stacked, scale * constraint[np.newaxis]), axis=0)
    right = np.zeros(system.shape[0])
    right[-1] = scale * constraint[-1]
    norms = np.linalg.norm(system, axis=0)
    norms[norms == 0] = 1.0
    solution = scipy.linalg.lstsq(system / norms, right, lapack_driver="gelsy", check_finite=False)
    weights = solution[0] / norms
    if abs(weights[-1]) < 1e-8:  # the constant must not vanish (section IV of the 2006 paper)
        weights[-1] = 1e-8 if weights[-1] >= 0 else -1e-8
    return zeros_of_weighting(sections, weights)


def _reduced(block: Block, sections: PoleSet, direct: int) -> FloatArray:
    """Triangular factors that remain of the shared unknowns, channels stacked."""
    first = sections.order + sections.direct_columns(direct)
    grams, parts = None, pieces(block)
    for piece in parts:
        rows = _rows(piece, sections, direct)
        more = rows.transpose(0, 2, 1) @ rows
        grams = more if grams is None else grams + more
    assert grams is not None
    factor = cholesky(grams)
    if factor is None:
        factor = orthogonal_triangle(_rows(piece, sections, direct) for piece in parts)
    return factor[:, first:, first:].reshape(-1, sections.order + 1)


def _rows(block: Block, sections: PoleSet, direct: int) -> FloatArray:
    """Weighted rows of the basis and of −H times the weighting function's columns."""
    basis = sections.evaluate(block.s, direct)
    m = basis.shape[1]
    columns = np.empty((block.channels, block.s.size, m + sections.order + 1), dtype=np.complex128)
    columns[:, :, :m] = basis
    minus = -block.values[:, :, np.newaxis]
    np.multiply(minus, basis[:, : sections.order], out=columns[:, :, m:-1])
    columns[:, :, -1:] = minus
    return weighted(block, columns)


def zeros_of_weighting(sections: Poles, weights: FloatArray) -> Poles:
    """Return the zeros of Σ weights·basis + constant as sections."""
    return sections.like(scipy.linalg.eigvals(sections.companion(weights), check_finite=False))
