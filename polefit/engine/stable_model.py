"""The best model without right-half-plane poles, its order free: what stability would cost."""

from __future__ import annotations

import math
from collections.abc import Sequence
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from polefit.engine.blocks import Block, samples
from polefit.engine.pole_set import PoleSet
from polefit.engine.projection import Solution, solve
from polefit.engine.refinement import BOUND, refine

FAR = 100.0
"""χ² so many times that of the free model needs no polish: nobody would call it a tie."""
COARSE = 0.02
"""Share of χ² below which a further step is not worth while as long as the model is far off."""


class StableModel(NamedTuple):
    """Comparison of the best confined model with the free one.

    Attributes
    ----------
    misfit_ratio : float
        Root of χ² confined over χ² free, at the same order; the smallest over all starts.
    rise : float
        Smallest increase of χ² in units of the noise variance.
    order : int
        Order of the confined model with the smallest increase.
    """

    misfit_ratio: float
    rise: float
    order: int


def reflected(sections: PoleSet, exempt: NDArray[np.bool_]) -> PoleSet:
    """Return the sections with every growing pole mirrored: a start, not an answer."""
    positive = np.maximum(sections.reflected().vector(), BOUND)
    return sections.with_vector(np.where(_bounded(sections, exempt), positive, sections.vector()))


def on_axis(sections: PoleSet, exempt: NDArray[np.bool_]) -> PoleSet:
    """Return the sections with right-half-plane poles moved to the axis: another start."""
    moved = sections.on_axis(BOUND).vector()
    return sections.with_vector(np.where(_bounded(sections, exempt), moved, sections.vector()))


def _bounded(sections: PoleSet, exempt: NDArray[np.bool_]) -> NDArray[np.bool_]:
    """Tell which parameters are to be kept positive: those of the half-plane, but for `exempt`."""
    pairs = sections.twofold
    spared = np.concatenate((exempt[:pairs], exempt[:pairs], exempt[pairs:]))
    return sections.half_plane() & ~spared


def compare_with_stable(
    blocks: Sequence[Block],
    free: Solution,
    richer: Sequence[Solution],
    level: float,
    exempt: Sequence[complex] = (),
) -> StableModel:
    """Fit models confined to the left half-plane.

    Parameters
    ----------
    blocks : sequence of Block
        Data.
    free : Solution
        The free model.
    richer : sequence of Solution
        Models of higher order, whose poles serve as further starts; each confined model is
        compared with the free one from the same start.
    level : float
        Noise variance of the weighted samples.
    exempt : sequence of complex
        Poles that may stay where they are, so that the others are tested alone.

    Returns
    -------
    StableModel
    """
    rise, ratio, order = math.inf, math.inf, free.sections.poles().size
    starts = [(reflected, free), (on_axis, free), *((reflected, one) for one in richer)]
    for number, (bring, solution) in enumerate(starts):
        if ratio**2 > (FAR**3, FAR)[number > 1] and number > 0:
            break  # the starts that took part already say how far off a stable model is
        sections = solution.sections.split()
        base = free if solution is free else _again(blocks, sections, free.direct)
        spared = _spared(sections, exempt)
        confined = _confine(blocks, bring(sections, spared), spared, base)
        if confined.misfit - base.misfit < rise * level:
            rise = (confined.misfit - base.misfit) / level
            order = confined.sections.poles().size
        ratio = min(ratio, math.sqrt(confined.misfit / max(base.misfit, 1e-300)))
    return StableModel(ratio, rise, order)


def _again(blocks: Sequence[Block], sections: PoleSet, direct: int) -> Solution:
    """Return the free model of the same order, refined alike: more poles fit noise better, too."""
    return refine(blocks, solve(blocks, sections, direct), iterations=20, tolerance=0.1)


def _spared(sections: PoleSet, exempt: Sequence[complex]) -> NDArray[np.bool_]:
    """Tell which sections hold the poles that are exempt, or what is left of them."""
    spared = np.zeros(sections.number, dtype=bool)
    own = sections.own_poles()
    for pole in exempt:
        distance = np.abs(own - pole)
        if distance.size and distance.min() < abs(pole.real):
            spared[int(np.argmin(distance))] = True
    return spared


def _confine(
    blocks: Sequence[Block], start: PoleSet, spared: NDArray[np.bool_], free: Solution
) -> Solution:
    """Fit with bounds; finely only where the confined model comes near the free one."""
    solution = solve(blocks, start, free.direct)
    bounds = _bounded(start, spared)
    coarse = COARSE * samples(blocks)
    solution = refine(blocks, solution, iterations=25, tolerance=coarse, confined=bounds)
    if solution.misfit > FAR * free.misfit:
        return solution
    return refine(blocks, solution, iterations=20, tolerance=0.1, confined=bounds)
