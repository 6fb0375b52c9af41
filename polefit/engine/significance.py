"""How much each section of the model matters, and what a further one would bring.

Wald statistics with the section's own poles held and everything else free: under the hypothesis
that the section is not there, its poles mean nothing, so they must not be marginalised; instead
the number of places at which it could have been found is counted (look-elsewhere effect:
R. B. Davies, "Hypothesis testing when a nuisance parameter is present only under the
alternative", Biometrika 64(2), 247-254, 1977, from memory).
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from typing import NamedTuple

import numpy as np
import scipy.stats

from polefit.engine.blocks import Block, ComplexArray, FloatArray, weighted
from polefit.engine.projection import Solution, jacobian, raw_jacobian
from polefit.engine.sections import Sections, evaluate, from_poles, section_columns


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
    jacobians : tuple of (K, 2N, order) float ndarray
        Projected Jacobians.
    """

    poles: FloatArray
    linear: tuple[Linear, ...]
    jacobians: tuple[FloatArray, ...]


def information(blocks: Sequence[Block], solution: Solution) -> Information:
    """Collect the Fisher information of a solution."""
    n = solution.sections.order
    total = np.zeros((n, n))
    linear = []
    jacobians = jacobian(blocks, solution)
    for block, part, projected in zip(blocks, solution.parts, jacobians, strict=True):
        flat = projected.reshape(part.residual.size, n)
        total += flat.T @ flat
        identity = np.broadcast_to(np.eye(part.r.shape[1]), part.r.shape)
        inverse = np.linalg.solve(part.r, identity)
        raw = raw_jacobian(block, solution.sections, part)
        slope = inverse @ (part.q.transpose(0, 2, 1) @ raw)
        linear.append(Linear(inverse, slope))
    return Information(total, tuple(linear), tuple(jacobians))


def invert(matrix: FloatArray) -> FloatArray:
    """Invert a symmetric positive (semi)definite matrix after scaling its diagonal to one."""
    scale = np.sqrt(np.maximum(np.diag(matrix), 0.0))
    scale[scale == 0] = 1.0
    inverse = np.linalg.pinv(matrix / np.outer(scale, scale), rcond=1e-15, hermitian=True)
    result: FloatArray = inverse / np.outer(scale, scale)
    return result


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


def section_scores(solution: Solution, info: Information) -> Scores:
    """Return how much each section stands out of the noise, with and without its best samples."""
    count = solution.sections.count
    full, spared = np.zeros(count), np.zeros(count)
    for index in range(count):
        full[index] = _section_score(solution, info, index)
        spared[index] = full[index]
        if _narrow(solution, index):
            spared[index] *= 1 - _concentration(solution, info, index)
    return Scores(full, spared)


def _narrow(solution: Solution, index: int) -> bool:
    """Tell whether a pair is so narrow that a few samples alone could have made it."""
    sections = solution.sections
    if index >= sections.c1.size:
        return False
    omega = math.sqrt(max(sections.c0[index] - sections.c1[index] ** 2 / 4, 0.0))
    width = abs(sections.c1[index])
    steps = []
    for part in solution.parts:
        axis = part.basis.s.imag
        at = int(np.clip(np.searchsorted(axis, omega), 1, axis.size - 1))
        steps.append(axis[at] - axis[at - 1])
    return width < NARROW_STEPS * float(min(steps))


def _concentration(solution: Solution, info: Information, index: int) -> float:
    """Share of a section's evidence that its most telling samples carry."""
    columns = section_columns(solution.sections, index)
    energies = []
    for part, linear in zip(solution.parts, info.linear, strict=True):
        rows = linear.inverse[:, columns, :]
        covariance = rows @ rows.transpose(0, 2, 1)
        covariance = covariance + 1e-14 * np.trace(covariance, axis1=1, axis2=2)[
            :, np.newaxis, np.newaxis
        ] * np.eye(len(columns))
        solved = np.linalg.solve(covariance, part.coefficients[:, columns, np.newaxis])
        seen = (part.q @ (rows.transpose(0, 2, 1) @ solved))[:, :, 0]
        points = seen.shape[1] // 2
        energies.append(np.sum(seen[:, :points] ** 2 + seen[:, points:] ** 2, axis=0))
    energy = np.concatenate(energies)
    total = float(energy.sum())
    if not total > 0 or energy.size <= SPARED_SAMPLES:
        return 1.0
    top = np.partition(energy, -SPARED_SAMPLES)[-SPARED_SAMPLES:]
    return float(top.sum()) / total


def _section_score(solution: Solution, info: Information, index: int) -> float:
    columns = section_columns(solution.sections, index)
    others = np.setdiff1d(np.arange(solution.sections.order), columns)
    direct = 0.0
    pull = np.zeros(others.size)
    stiffness = info.poles[np.ix_(others, others)].copy()
    for part, linear in zip(solution.parts, info.linear, strict=True):
        rows = linear.inverse[:, columns, :]
        covariance = rows @ rows.transpose(0, 2, 1)
        size = np.sqrt(np.diagonal(covariance, axis1=1, axis2=2))
        c = part.coefficients[:, columns] / size
        scaled = covariance / size[:, :, np.newaxis] / size[:, np.newaxis, :]
        scaled = scaled + 1e-14 * np.eye(len(columns))
        slope = linear.slope[:, columns][:, :, others] / size[:, :, np.newaxis]
        solved = np.linalg.solve(scaled, np.concatenate((c[:, :, np.newaxis], slope), axis=2))
        direct += float(np.sum(c * solved[:, :, 0]))
        pull += np.einsum("kij,ki->j", slope, solved[:, :, 0])
        stiffness += np.einsum("kia,kib->ab", slope, solved[:, :, 1:])
    if others.size == 0:
        return direct
    return max(direct - float(pull @ invert(stiffness) @ pull), 0.0)


def threshold(channels: int, places: int, chance: float, columns: int = 2) -> float:
    """Return the χ² that pure noise exceeds with probability `chance` over all `places`."""
    return float(scipy.stats.chi2.isf(chance / max(places, 1), columns * channels))


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
    trial: Sections = from_poles(trial_poles)
    scale = trial.weights()
    # residue r = x + jy  ->  2x·s/q − 2(x·Re p + y·Im p)/q
    gain = np.zeros(count)
    rows: list[FloatArray] = []
    pole_covariance = invert(info.poles)
    for block, part, projected in zip(blocks, solution.parts, info.jacobians, strict=True):
        columns = evaluate(trial, block.s, 0).columns
        along, across = columns[:, :count], columns[:, count:] / scale
        real = 2 * along - 2 * trial_poles.real * across
        imaginary = -2 * trial_poles.imag * across
        for k in range(block.channels):
            one = _channel(block, k)
            both = weighted(one, np.concatenate((real, imaginary), axis=1))[0]
            both -= part.q[k] @ (part.q[k].T @ both)
            shared = projected[k].T @ both
            gram = np.einsum("ri,ri->i", both, both)
            cross = np.einsum("ri,ri->i", both[:, :count], both[:, count:])
            tied = pole_covariance @ shared
            gram = gram - np.einsum("ai,ai->i", shared, tied)
            cross = cross - np.einsum("ai,ai->i", shared[:, :count], tied[:, count:])
            slope = both.T @ part.residual[k]
            matrix = np.empty((count, 2, 2))
            matrix[:, 0, 0], matrix[:, 1, 1] = gram[:count], gram[count:]
            matrix[:, 0, 1] = matrix[:, 1, 0] = cross
            rows.append(matrix)
            gain += _gain(matrix, slope[:count], slope[count:])
    return Scan(gain, np.stack(rows))


def _channel(block: Block, k: int) -> Block:
    turn = None if block.turn is None else block.turn[k : k + 1]
    pick = slice(k, k + 1)
    return Block(block.s, block.values[pick], block.weight[pick], turn, block.target[pick])


def _gain(matrix: FloatArray, x: FloatArray, y: FloatArray) -> FloatArray:
    a, b, c = matrix[:, 0, 0], matrix[:, 1, 1], matrix[:, 0, 1]
    determinant = a * b - c * c
    good = determinant > 1e-9 * np.abs(a * b)
    safe = np.where(good, determinant, 1.0)
    result: FloatArray = np.where(good, (b * x * x - 2 * c * x * y + a * y * y) / safe, 0.0)
    return result
