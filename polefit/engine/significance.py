"""How much each section of the model matters, and what a further one would bring.

Wald statistics with the section's own poles held and everything else free: under the hypothesis
that the section is not there, its poles mean nothing, so they must not be marginalised; instead
the number of places at which it could have been found is counted (look-elsewhere effect:
R. B. Davies, "Hypothesis testing when a nuisance parameter is present only under the
alternative", Biometrika 64(2), 247-254, 1977, from memory).
"""

from __future__ import annotations

from collections.abc import Sequence
from typing import NamedTuple, cast

import numpy as np
import scipy.special
from numpy.typing import NDArray

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
from polefit.engine.projection import Projected, Solution, normal_equations, residual


class Linear(NamedTuple):
    """Uncertainty of the linear parameters of one block.

    Attributes
    ----------
    inverse : (K, m, m) float ndarray
        R⁻¹: the conditional covariance is R⁻¹R⁻ᵀ.
    slope : (K, m, order) float ndarray
        Change of the coefficients with the pole parameters, sign reversed.
    """

    inverse: FloatArray
    slope: FloatArray


class Information(NamedTuple):
    """Fisher information of a solution, for unit variance of the weighted samples.

    Attributes
    ----------
    poles : (order, order) float ndarray
        Of the pole parameters, linear parameters marginalised.
    linear : tuple of Linear
        One for each block.
    """

    poles: FloatArray
    linear: tuple[Linear, ...]


def information(solution: Solution) -> Information:
    """Collect the Fisher information of a solution."""
    linear = []
    for part in solution.parts:
        slopes, along = solution.sections.chain(part.coefficients)
        identity = np.eye(part.factor.shape[1])[np.newaxis]
        inverse = cast(FloatArray, np.linalg.solve(part.factor, identity))
        linear.append(Linear(inverse, inverse @ (part.coupling @ slopes) + along))
    return Information(normal_equations(solution)[0], tuple(linear))


def invert(matrix: FloatArray) -> FloatArray:
    """Invert a symmetric positive (semi)definite matrix after scaling its diagonal to one."""
    scale = np.sqrt(np.maximum(np.diag(matrix), 0.0))
    scale[scale == 0] = 1.0
    inverse = np.linalg.pinv(matrix / np.outer(scale, scale), rcond=1e-15, hermitian=True)
    result: FloatArray = inverse / np.outer(scale, scale)
    return result


def leverage(blocks: Sequence[Block], solution: Solution, info: Information) -> list[FloatArray]:
    """Return how much of each sample's noise the fit follows: the diagonal of the hat matrix.

    Returns
    -------
    list of (K, 2, N) float ndarray
        Between 0 and 1; the variance of a residual is that of the noise times one minus this.
        They sum to the number of parameters that the data know; where nearly dependent columns
        make it more than there are, that number is spread evenly.

    Notes
    -----
    D. C. Hoaglin, R. E. Welsch, "The hat matrix in regression and ANOVA", Am. Stat. 32(1), 17-22,
    1978 (from memory), for the model linearised at the solution.
    """
    values, vectors = np.linalg.eigh(invert(info.poles))
    spread = vectors * np.sqrt(np.maximum(values, 0.0))
    found = []
    for block, part, linear in zip(blocks, solution.parts, info.linear, strict=True):
        slopes, _ = solution.sections.chain(part.coefficients)
        m = part.factor.shape[1]
        moved = slopes @ spread
        tied = -linear.inverse @ (part.coupling @ moved)
        below = np.zeros((block.channels, slopes.shape[1], m))
        mix = np.block([[linear.inverse, tied], [below, moved]])
        followed = []
        for piece in pieces(block):
            columns = solution.sections.evaluate_with_slopes(piece.s, solution.direct)
            share = np.sum((weighted(piece, columns) @ mix) ** 2, axis=2)
            followed.append(share.reshape(block.channels, 2, -1))
        found.append(np.concatenate(followed, axis=2))
    total, wanted = sum(float(one.sum()) for one in found), _parameters(solution)
    if not total < (1 + UNEVEN) * wanted:
        share = wanted / sum(one.size for one in found)
        return [np.full_like(one, min(share, 1.0)) for one in found]
    return [np.minimum(one, 1.0) for one in found]


def _parameters(solution: Solution) -> int:
    return solution.sections.order + sum(part.coefficients.size for part in solution.parts)


UNEVEN = 0.05
"""Share by which leverages may exceed their known sum."""


SPARED_SAMPLES = 3
"""A pair with its residue passes through any two samples of a channel: what only three
frequencies say is a glitch, not a mode."""


NARROW_STEPS = 6.0
"""Pairs wider than this many steps cannot be a glitch of single samples."""


class Scores(NamedTuple):
    """Wald χ² of each section's residues over all channels, in units of the weights.

    Attributes
    ----------
    full : (P + R,) float ndarray
        2K degrees of freedom for a second-order section, K for a first-order one.
    spared : (P + R,) float ndarray
        What is left of it without the most telling samples.
    """

    full: FloatArray
    spared: FloatArray


def section_scores(
    blocks: Sequence[Block], solution: Solution, info: Information, least: float = 0.0
) -> Scores:
    """Return how much each section stands out of the noise, with and without its best samples.

    Samples are not looked at where the whole score is below `least` already.
    """
    sections = solution.sections
    p, n = sections.twofold, sections.order
    pairs = np.stack((np.arange(p), np.arange(p, 2 * p)), axis=1)
    full = np.concatenate(
        (_wald(solution, info, pairs), _wald(solution, info, np.arange(2 * p, n)[:, np.newaxis]))
    )
    spared = full.copy()
    for index in range(p):
        if full[index] > least and _narrow(blocks, sections, index):
            spared[index] *= 1 - _concentration(blocks, solution, info, index)
    return Scores(full, spared)


def _wald(solution: Solution, info: Information, columns: NDArray[np.intp]) -> FloatArray:
    """Wald χ² of the coefficients in each row of `columns`, (J, w), own poles held.

    With c the coefficients of channel k, V their covariance at given poles and S their slope by
    the other poles: Σ cᵀV⁻¹c less what moving the other poles can explain.
    """
    several, wide = columns.shape
    if several == 0:
        return np.zeros(0)
    n = solution.sections.order
    other = np.ones((several, n))
    other[np.arange(several)[:, np.newaxis], columns] = 0.0
    direct, pull = np.zeros(several), np.zeros((several, n))
    stiffness = info.poles * other[:, :, np.newaxis] * other[:, np.newaxis, :]
    for part, linear in zip(solution.parts, info.linear, strict=True):
        rows = linear.inverse[:, columns, :]
        covariance = rows @ rows.swapaxes(-1, -2)
        size = np.sqrt(np.diagonal(covariance, axis1=-2, axis2=-1))
        size[size == 0] = 1.0
        c = part.coefficients[:, columns] / size
        scaled = covariance / size[..., :, np.newaxis] / size[..., np.newaxis, :]
        scaled = scaled + 1e-14 * np.eye(wide)
        slope = linear.slope[:, columns, :] / size[..., np.newaxis] * other[:, np.newaxis, :]
        solved = np.linalg.solve(scaled, np.concatenate((c[..., np.newaxis], slope), axis=-1))
        direct += np.sum(c * solved[..., 0], axis=(0, 2))
        pull += np.einsum("kjia,kji->ja", slope, solved[..., 0])
        turned = slope.transpose(1, 3, 0, 2).reshape(several, n, -1)
        stiffness += turned @ solved[..., 1:].transpose(1, 0, 2, 3).reshape(several, -1, n)
    diagonal = np.diagonal(stiffness, axis1=1, axis2=2)
    scale = np.sqrt(np.where(diagonal > 0, diagonal, 1.0))
    stiffness = stiffness / scale[:, :, np.newaxis] / scale[:, np.newaxis, :]
    right = (pull / scale)[..., np.newaxis]
    # own poles are empty rows; the small addition also settles what the data leave open
    moved = np.linalg.solve(stiffness + 1e-13 * np.eye(n), right)
    explained = np.sum(right * moved, axis=(1, 2))
    return cast(FloatArray, np.maximum(direct - explained, 0.0))


def joint_score(solution: Solution, info: Information, sections: Sequence[int]) -> float:
    """Return the Wald χ² of the residues of several sections together."""
    columns = [c for index in sections for c in solution.sections.columns(index)]
    return float(_wald(solution, info, np.array([columns]))[0])


def _narrow(blocks: Sequence[Block], sections: PoleSet, index: int) -> bool:
    """Tell whether a pair is so narrow that a few samples alone could have made it."""
    if index >= sections.twofold:
        return False
    omega, width = sections.place(index)
    step = min(float(step_at(block.s.imag, np.array([omega]))[0]) for block in blocks)
    return width < NARROW_STEPS * step


def step_at(axis: FloatArray, omega: FloatArray) -> FloatArray:
    """Return the frequency step around each `omega`; the outermost one beyond the axis."""
    step: FloatArray = np.diff(axis)[np.clip(np.searchsorted(axis, omega) - 1, 0, axis.size - 2)]
    return step


def telling_share(energy: FloatArray) -> FloatArray:
    """Return the share of the most telling samples in the sum along the last axis."""
    top = np.partition(energy, -SPARED_SAMPLES, axis=-1)[..., -SPARED_SAMPLES:]
    share: FloatArray = top.sum(axis=-1) / energy.sum(axis=-1)
    return share


def _concentration(
    blocks: Sequence[Block], solution: Solution, info: Information, index: int
) -> float:
    """Share of a section's evidence that its most telling samples carry."""
    columns = solution.sections.columns(index)
    energies = []
    for block, part, linear in zip(blocks, solution.parts, info.linear, strict=True):
        rows = linear.inverse[:, columns, :]
        covariance = rows @ rows.transpose(0, 2, 1)
        covariance = covariance + 1e-14 * np.trace(covariance, axis1=1, axis2=2)[
            :, np.newaxis, np.newaxis
        ] * np.eye(len(columns))
        solved = np.linalg.solve(covariance, part.coefficients[:, columns, np.newaxis])
        direction = (linear.inverse @ (rows.transpose(0, 2, 1) @ solved))[:, :, 0]
        for piece in pieces(block):
            basis = solution.sections.evaluate(piece.s, solution.direct)
            seen = weighted_parts(piece, direction @ basis.T)
            half = seen.shape[1] // 2
            energies.append(np.sum(seen[:, :half] ** 2 + seen[:, half:] ** 2, axis=0))
    energy = np.concatenate(energies)
    if not energy.sum() > 0 or energy.size <= SPARED_SAMPLES:
        return 1.0
    return float(telling_share(energy))


def threshold(channels: int, places: int, chance: float, columns: int = 2) -> float:
    """Return the χ² that pure noise exceeds with probability `chance` over all `places`."""
    return float(scipy.special.chdtri(columns * channels, chance / max(places, 1)))


class Scan(NamedTuple):
    """What one further pair at each of C trial poles would bring.

    Attributes
    ----------
    gain : (C,) float ndarray
        Decrease of χ², all channels together.
    information : (K, C, 2, 2) float ndarray
        Fisher information of (Re, Im) of the residue, for each channel alone.
    """

    gain: FloatArray
    information: FloatArray


def scan(
    blocks: Sequence[Block], solution: Solution, info: Information, trial_poles: ComplexArray
) -> Scan:
    """Try a further pair at each trial pole, everything else re-optimised to first order.

    Parameters
    ----------
    trial_poles : (C,) complex ndarray
        Normalised, in the upper half plane.

    Returns
    -------
    Scan
    """
    count = trial_poles.size
    trial = solution.sections.like(trial_poles)
    pole_covariance = invert(info.poles)
    gain = np.zeros(count)
    found: list[FloatArray] = []
    for block, part, linear in zip(blocks, solution.parts, info.linear, strict=True):
        products = _products(block, solution, part, trial, trial_poles)
        m = part.factor.shape[1]
        tied = linear.inverse.transpose(0, 2, 1) @ products.with_model[:, :m]
        slopes, _ = solution.sections.chain(part.coefficients)
        free = products.with_model[:, m:] - part.coupling.transpose(0, 2, 1) @ tied
        shared = slopes.transpose(0, 2, 1) @ free
        moved = pole_covariance @ shared
        own = products.own - np.sum(tied**2, axis=1) - np.sum(shared * moved, axis=1)
        first, second = np.s_[:, :, :count], np.s_[:, :, count:]
        cross = (
            products.cross
            - np.sum(tied[first] * tied[second], axis=1)
            - np.sum(shared[first] * moved[second], axis=1)
        )
        matrix = np.empty((block.channels, count, 2, 2))
        matrix[..., 0, 0], matrix[..., 1, 1] = own[:, :count], own[:, count:]
        matrix[..., 0, 1] = matrix[..., 1, 0] = cross
        found.append(matrix)
        slope = products.with_residual
        gain += _gain(matrix, slope[:, :count], slope[:, count:]).sum(axis=0)
    return Scan(gain, np.concatenate(found))


class _Products(NamedTuple):
    """Weighted inner products of trial columns, which stand for Re and Im of C residues."""

    own: FloatArray  # (K, 2C) with themselves
    cross: FloatArray  # (K, C) between the two columns of a residue
    with_model: FloatArray  # (K, m + order, 2C) with the basis and its derivative functions
    with_residual: FloatArray  # (K, 2C)


def _products(
    block: Block, solution: Solution, part: Projected, trial: PoleSet, poles: ComplexArray
) -> _Products:
    """Accumulate the products over the pieces of a block, all channels at once."""
    channels, count = block.channels, trial.number
    inner = part.factor.shape[1] + solution.sections.order
    own, cross = np.zeros((channels, 2 * count)), np.zeros((channels, count))
    with_model = np.zeros((channels, inner, 2 * count))
    with_residual = np.zeros((channels, 2 * count))
    for piece in pieces(block, shared=4 * count):
        x = trial.residue_columns(piece.s, poles)
        model = solution.sections.evaluate_with_slopes(piece.s, solution.direct)
        rest = residual(piece, solution, part)
        # Σ w₁²·Re(t·a)·Re(t·b) + w₂²·Im(t·a)·Im(t·b) = Σ even·Re(ā·b) + Re(odd·a·b)
        even = (piece.weight[:, 0] ** 2 + piece.weight[:, 1] ** 2) / 2
        left, right = x[:, :count], x[:, count:]
        own += even @ (x.real**2 + x.imag**2)
        cross += even @ (left.real * right.real + left.imag * right.imag)
        both = even[:, :, np.newaxis] * model.conj()
        odd = (piece.weight[:, 0] ** 2 - piece.weight[:, 1] ** 2) / 2
        if odd.any():
            turned = odd.astype(np.complex128) if piece.turn is None else odd * piece.turn**2
            own += (turned @ x**2).real
            cross += (turned @ (left * right)).real
            both += turned[:, :, np.newaxis] * model
        stacked = np.concatenate((both.real, -both.imag), axis=1).transpose(0, 2, 1)
        with_model += stacked @ np.concatenate((x.real, x.imag))
        with_residual += (pulled_back(piece, rest) @ x).real
    return _Products(own, cross, with_model, with_residual)


def _gain(matrix: FloatArray, x: FloatArray, y: FloatArray) -> FloatArray:
    a, b, c = matrix[..., 0, 0], matrix[..., 1, 1], matrix[..., 0, 1]
    determinant = a * b - c * c
    good = determinant > 1e-9 * np.abs(a * b)
    safe = np.where(good, determinant, 1.0)
    result: FloatArray = np.where(good, (b * x * x - 2 * c * x * y + a * y * y) / safe, 0.0)
    return result
