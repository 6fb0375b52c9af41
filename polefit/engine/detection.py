"""What would have gone unnoticed: the smallest residue found with a given power.

At each frequency the Fisher information of a further pair's residue, everything else free, gives
the noncentrality of the test that would have found it (S. M. Kay, Fundamentals of Statistical
Signal Processing: Detection Theory, 1998, from memory: generalised likelihood ratio).
"""

from __future__ import annotations

from collections.abc import Sequence
from typing import NamedTuple

import numpy as np
import scipy.special
from numpy.typing import NDArray

from polefit.engine.blocks import Block, ComplexArray, FloatArray, shared_axis
from polefit.engine.order import TRIALS, trial_grid
from polefit.engine.projection import Solution
from polefit.engine.significance import (
    Information,
    scan,
    step_at,
)

MASKED = 3.0
"""Factor by which a narrow pair may raise the noise level against which it is judged. The first
fit takes its weights from differences: they do not see it, but were seen to be off by 2.5."""
LEAST_CAUGHT = 0.03
"""What a scan shows even of a pair between samples, which takes hold of one of them at least."""
ALIKE = 2.0
"""Neighbouring steps that differ by no more than this are looked at together."""


class Trials(NamedTuple):
    """Where a hidden mode is supposed: cells of the axis, each tried at a sample and between two.

    Attributes
    ----------
    edges : (M, 2) float ndarray
        Lower and upper end of each cell, Im s; the next one begins where one ends.
    sample, between : (M,) float ndarray
        A sample of the cell, and the middle of its widest step: a mode much narrower than a step
        shows least at one or the other.
    step : (M,) float ndarray
        The widest step.
    points : (M,) int ndarray
        Steps in each cell.
    """

    edges: FloatArray
    sample: FloatArray
    between: FloatArray
    step: FloatArray
    points: NDArray[np.intp]


def trial_cells(blocks: Sequence[Block], most: int) -> Trials | None:
    """Divide the steps of the frequency axis into about `most` cells; None where there are none.

    A step much wider than its neighbours, a gap of the sweep, makes a cell of its own. Within a
    step of an end of the band no mode is judged: the outermost cells reach there, but are tried
    further in.
    """
    axis = shared_axis(blocks)
    axis = axis[axis > 0]
    if axis.size < 4:
        return None
    steps = np.diff(axis[1:-1])
    even = np.linspace(0, steps.size, min(most, steps.size) + 1).astype(int)
    ratio = steps[1:] / steps[:-1]
    breaks = 1 + np.flatnonzero(np.maximum(ratio, 1 / ratio) > ALIKE)
    if breaks.size > most:  # an axis without any order: its widest steps
        widest = np.argsort(steps)[-most // 2 :]
        breaks = np.concatenate((widest, widest + 1))
    bounds = np.unique(np.concatenate((even, breaks)))
    first, last = bounds[:-1], bounds[1:]
    wide = np.array([i + int(np.argmax(steps[i:j])) for i, j in zip(first, last, strict=True)])
    edges = np.stack((axis[1 + first], axis[1 + last]), axis=1)
    edges[0, 0], edges[-1, 1] = axis[0], axis[-1]
    return Trials(
        edges, axis[1 + wide], axis[1 + wide] + steps[wide] / 2, steps[wide], last - first
    )


def residue_limits(
    blocks: Sequence[Block],
    solution: Solution,
    info: Information,
    frequencies: FloatArray,
    *,
    damping_ratio: float,
    power: float,
    threshold: float,
    level: float,
) -> FloatArray:
    """Return the smallest |residue| of a hidden pair that would have been found.

    Parameters
    ----------
    frequencies : (C,) float ndarray
        Im of the pole, normalised rad/s.
    damping_ratio : float
        Of the hidden pair; negative grows.
    power : float
        Probability of finding it.
    threshold : float
        χ² over all channels together above which a pair is claimed.
    level : float
        Noise variance of the weighted samples.

    Returns
    -------
    (C, K) float ndarray
        For a mode that shows at one channel only, with the least favourable phase of its residue;
        infinite where the samples say nothing of it.
    """
    tilt = -damping_ratio / np.sqrt(1 - damping_ratio**2)
    poles = frequencies * (tilt + 1j)
    found = scan(blocks, solution, info, poles).information
    a, b, c = found[..., 0, 0], found[..., 1, 1], found[..., 0, 1]
    smallest = (a + b) / 2 - np.sqrt(((a - b) / 2) ** 2 + c**2)
    counted = np.broadcast_to(_caught(blocks, poles), smallest.shape)
    usable = (smallest > 1e-9 * np.maximum((a + b) / 2, 1e-300)) & (counted > 1e-6)
    freedom = 2 * sum(block.channels for block in blocks)
    needed = _needed(
        noncentrality(threshold, freedom, power),
        freedom,
        np.where(usable, counted, 1.0),
        _own_freedom(blocks, solution),
    )
    limits = np.sqrt(needed * level / np.where(usable, smallest, 1.0))
    result: FloatArray = np.where(usable, limits, np.inf).T
    return result


def _caught(blocks: Sequence[Block], poles: ComplexArray) -> FloatArray:
    """Share, (C,), of the evidence for narrow pairs that a scan of the residual shows.

    The search tries pairs one gap wide on a grid. Two Lorentzian curves of half-widths a and b,
    δ apart, have 4ab/((a + b)² + δ²) of their energy in common; at worst a pair lies half a gap
    from the grid. Wider pairs the first fit finds by itself.
    """
    grid = trial_grid(blocks, TRIALS)
    if grid.size < 2:
        return np.ones(poles.size)
    gap = step_at(grid, poles.imag)
    own = np.abs(poles.real)
    shared: FloatArray = 4 * own * gap / ((own + gap) ** 2 + (gap / 2) ** 2)
    return np.where(own < gap, np.maximum(shared, LEAST_CAUGHT), 1.0)


def _needed(plain: float, freedom: int, counted: FloatArray, own: FloatArray) -> FloatArray:
    """Noncentrality needed of a pair of whose evidence only the share `counted` counts.

    The search may catch a narrow pair by its skirts only, and what it has not found yet it takes
    for noise: of a channel with `own` degrees of freedom, noncentrality λ raises the level by
    1 + λ/own, so that λ·counted / (1 + λ/own) is to reach `plain`.
    """
    spared = (plain + freedom) / counted - freedom
    masked = 1 / np.maximum(1 - plain / (counted * own[:, np.newaxis]), 1 / MASKED)
    result: FloatArray = spared * masked
    return result


def _own_freedom(blocks: Sequence[Block], solution: Solution) -> FloatArray:
    """Degrees of freedom of the residual of each channel."""
    left = [
        np.full(block.channels, max(2.0 * block.s.size - part.factor.shape[1], 1.0))
        for block, part in zip(blocks, solution.parts, strict=True)
    ]
    return np.concatenate(left)


def noncentrality(threshold: float, freedom: int, power: float) -> float:
    """Return λ for which a non-central χ² exceeds `threshold` with probability `power`."""
    return float(scipy.special.chndtrinc(threshold, freedom, 1 - power))
