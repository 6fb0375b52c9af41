"""The best model without right-half-plane poles, its order free: what stability would cost."""

from __future__ import annotations

import math
from collections.abc import Sequence
from typing import NamedTuple

import numpy as np

from polefit.engine.blocks import Block
from polefit.engine.order import parameters, samples, split
from polefit.engine.projection import Solution, solve
from polefit.engine.refinement import BOUND, refine
from polefit.engine.sections import Sections

FAR = 100.0
"""χ² so many times that of the free model needs no polish: nobody would call it a tie."""
COARSE = 0.02
"""Share of χ² below which a further step is not worth while as long as the model is far off."""


class StableModel(NamedTuple):
    """Comparison of the best confined model with the free one.

    Attributes
    ----------
    misfit_ratio : float
        Root of χ² confined over χ² free.
    rise : float
        Increase of χ² in units of the noise variance, corrected for the numbers of parameters.
    order : int
        Order of the confined model.
    """

    misfit_ratio: float
    rise: float
    order: int


def reflected(sections: Sections) -> Sections:
    """Return the sections with every coefficient made positive: a start, not an answer."""
    return Sections(*(np.maximum(np.abs(part), BOUND) for part in sections))


def on_axis(sections: Sections) -> Sections:
    """Return the sections with right-half-plane pairs moved to the axis: another start."""
    return Sections(
        np.maximum(sections.c1, 1e-9 * np.sqrt(np.abs(sections.c0))),
        np.maximum(np.abs(sections.c0), BOUND),
        np.maximum(sections.c, BOUND),
    )


def compare_with_stable(
    blocks: Sequence[Block], free: Solution, richer: Sequence[Solution], level: float
) -> StableModel:
    """Fit models confined to the left half-plane.

    Parameters
    ----------
    blocks : sequence of Block
        Data.
    free : Solution
        The free model.
    richer : sequence of Solution
        Models of higher order, whose poles serve as further starts: a stable model may be
        allowed more poles than the free one if it pays for them.
    level : float
        Noise variance of the weighted samples.

    Returns
    -------
    StableModel
    """
    best: tuple[float, Solution] | None = None
    starts = [reflected(free.sections), on_axis(free.sections)]
    starts += [reflected(solution.sections) for solution in richer]
    for number, start in enumerate(starts):
        if best is not None and best[1].misfit > (FAR**3, FAR)[number > 1] * free.misfit:
            break  # the starts that took part already say how far off a stable model is
        confined = _confine(blocks, start, free)
        # each further parameter lowers χ² by one in the mean, whether it is needed or not
        cost = confined.misfit / level + parameters(blocks, confined)
        if best is None or cost < best[0]:
            best = cost, confined
    assert best is not None
    rise = best[0] - free.misfit / level - parameters(blocks, free)
    ratio = math.sqrt(best[1].misfit / max(free.misfit, 1e-300))
    return StableModel(ratio, rise, best[1].sections.order)


def _confine(blocks: Sequence[Block], start: Sections, free: Solution) -> Solution:
    """Fit with bounds; finely only where the confined model comes near the free one."""
    confined = split(blocks, solve(blocks, start, free.direct))
    coarse = COARSE * samples(blocks)
    confined = refine(blocks, confined, iterations=25, tolerance=coarse, left_half_plane=True)
    if confined.misfit > FAR * free.misfit:
        return confined
    return refine(blocks, confined, iterations=20, tolerance=0.1, left_half_plane=True)
