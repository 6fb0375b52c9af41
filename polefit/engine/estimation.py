"""From responses to a fitted model with its noise law: everything before judgement.

The noise law and the model are found in turn: a first fit with the shape of the noise guessed,
the law from its residuals, the search again with proper weights.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from typing import NamedTuple

import numpy as np

from polefit.engine.blocks import Block, FloatArray, samples
from polefit.engine.delay import Delayed, polish, take_out
from polefit.engine.noise import NoiseLaw, first_guess, variance
from polefit.engine.order import (
    TRIALS,
    count_places,
    largest_order,
    parameters,
    search,
    split,
    take_up,
    trial_grid,
    variance_factor,
)
from polefit.engine.pole_set import PoleSet
from polefit.engine.projection import Solution, residuals, solve
from polefit.engine.refinement import refine
from polefit.engine.sections import NONE
from polefit.engine.significance import Information, information, leverage, scan, section_scores
from polefit.engine.weighting import Measured, by_data, by_model, change, law_of, weigh
from polefit.engine.whiteness import Whiteness, judge_whiteness

RESHAPED = 2.0
"""Weights that change by more than this among themselves call for a new search of the order."""
ALTERED = 1.3
"""Weights that change by more may show what was not seen before."""
RAISES = 3
"""How often the order is raised by two pairs while the residual is not noise-like."""

FEW_MODES = 3
PAST_WIDTH = 6.0
"""Half-width of the pairs added to see what depends on the order, in steps of the trial grid."""
BELOW = 0.25
"""χ² per degree of freedom below which the residual says nothing: the noise was overstated, as the
floor of double precision is for data of a closed form."""


class Estimation(NamedTuple):
    """A fitted model and what judgement needs.

    Attributes
    ----------
    blocks : tuple of Block
        Weighted data.
    laws : tuple of NoiseLaw
        Noise law of each block.
    noise : tuple of (K, 2, N) float ndarray
        Variance of the parts, scaled so that χ² per degree of freedom is one.
    solution : Solution
        The model.
    info : Information
        Its Fisher information.
    level : float
        χ² per degree of freedom with the weights used.
    scores : (sections,) float ndarray
        Wald χ² of each section in units of the noise.
    past : Solution
        A model somewhat past the order taken, to see what moves.
    richest : Solution
        The rich model from which the search pruned.
    whiteness : Whiteness
        Of the residual.
    places : int
        Number of places at which a spare pair could settle.
    reason : str
        Why this order was taken.
    delays : tuple of (K,) float ndarray
        Delay taken out of each channel, over the normalised angular frequency.
    glitches : tuple of complex
        Poles left out since a few samples alone speak for them.
    """

    blocks: tuple[Block, ...]
    laws: tuple[NoiseLaw, ...]
    noise: tuple[FloatArray, ...]
    solution: Solution
    info: Information
    level: float
    scores: FloatArray
    past: Solution
    richest: Solution
    whiteness: Whiteness
    places: int
    reason: str
    delays: tuple[FloatArray, ...]
    glitches: tuple[complex, ...] = ()

    @property
    def factor(self) -> float:
        """Variance of the weighted samples, raised where they are correlated."""
        return self.level * self.whiteness.inflation


def estimate_model(
    data: Sequence[Measured],
    progress: Callable[[str], None] = lambda _: None,
    stated: Sequence[NoiseLaw] | None = None,
    kind: PoleSet = NONE,
) -> Estimation:
    """Fit order, poles, residues, delays and noise law.

    Parameters
    ----------
    data : sequence of Measured
        One for each frequency axis.
    progress : callable
        Told what is being done.
    stated : sequence of NoiseLaw, optional
        Noise laws to be taken as given, one for each frequency axis.
    kind : PoleSet
        The kind of poles to look for.

    Returns
    -------
    Estimation
    """
    laws = tuple(stated or first_guess([m.values for m in data]))
    blocks = weigh(data, laws, by_data(data))
    progress("searching the order")
    data, blocks, found, delays = take_out(
        data, blocks, lambda moved: weigh(moved, laws, by_data(moved)), kind
    )
    for turn in range(4):
        progress("estimating the noise")
        if turn == 1 and any(delay.any() for delay in delays):
            data, blocks, found, delays = polish(Delayed(data, blocks, found, delays))
        seen = by_model(data, found.solution)
        if stated is None:
            followed = leverage(blocks, found.solution, information(found.solution))
            laws = tuple(map(law_of, data, seen, followed))
        before, blocks = blocks, weigh(data, laws, seen)
        changed = change(before, blocks)
        if turn > 0 and changed < ALTERED:
            break  # the refinement below is all that such a change calls for
        if changed > RESHAPED:
            found = search(blocks, found.richest)
        found = take_up(blocks, found)
    solution = refine(
        blocks,
        solve(blocks, found.solution.sections, found.solution.direct),
        iterations=40,
        tolerance=1e-5,
    )
    progress("checking what moves with the order")
    settled = _settle_order(blocks, split(blocks, solution))
    level = variance_factor(blocks, settled.solution)
    scores = section_scores(blocks, settled.solution, settled.info)
    raised = settled.solution.sections.poles().size - solution.sections.poles().size
    return Estimation(
        blocks=blocks,
        laws=laws,
        noise=tuple(
            level * variance(law, sight.size, sight.known)
            for law, sight in zip(laws, by_model(data, settled.solution), strict=True)
        ),
        solution=settled.solution,
        info=settled.info,
        level=level,
        scores=scores.spared / level,
        past=settled.past,
        richest=found.richest,
        whiteness=settled.whiteness,
        places=count_places(blocks),
        reason=found.reason
        + (f"; raised by {raised} as the residual was not noise-like" if raised > 0 else ""),
        delays=delays,
        glitches=found.glitches,
    )


class _Settled(NamedTuple):
    solution: Solution
    info: Information
    past: Solution
    whiteness: Whiteness


def _settle_order(blocks: Sequence[Block], solution: Solution) -> _Settled:
    """Raise the order as long as the residual is not noise-like and raising helps.

    Where no finite order is exact, modes too weak to be worth their parameters one by one still
    bias the strong ones; the criterion is then Akaike's, which errs towards more.
    """
    for left in range(RAISES, -1, -1):
        info = information(solution)
        past = go_past(blocks, solution, info)
        whiteness = _whiteness(blocks, solution)
        more = parameters(blocks, past) - parameters(blocks, solution)
        gain = (solution.misfit - past.misfit) / variance_factor(blocks, past)
        if left == 0 or whiteness.white or gain <= 2 * more:
            break
        solution = split(blocks, refine(blocks, past, iterations=20, tolerance=1e-3))
    return _Settled(solution, info, past, whiteness)


def _whiteness(blocks: Sequence[Block], solution: Solution) -> Whiteness:
    """Judge the residual; one well below the known noise needs no judgement."""
    if solution.misfit < BELOW * (samples(blocks) - parameters(blocks, solution)):
        return Whiteness(True, 1.0, 0.0, 1.0)
    return judge_whiteness(residuals(blocks, solution))


def go_past(blocks: Sequence[Block], solution: Solution, info: Information) -> Solution:
    """Add broad pairs where they help most, wanted or not, to see what depends on the order.

    Broad ones, since narrow ones would have been found; two, or one beside few modes.
    """
    more = 2 if solution.sections.number > FEW_MODES else 1
    frequencies = trial_grid(blocks, TRIALS // 2)
    if solution.sections.order + 2 * more > largest_order(blocks) or frequencies.size < 4:
        return solution
    width = np.minimum(PAST_WIDTH * np.gradient(frequencies), 0.5 * frequencies)
    poles = -width + 1j * frequencies
    gain = scan(blocks, solution, info, poles).gain
    first = int(np.argmax(gain))
    away = np.abs(np.arange(gain.size) - first) > gain.size // 10
    second = int(np.argmax(np.where(away, gain, -1.0)))
    richer = solution.sections.join(solution.sections.like(poles[[first, second][:more]]))
    return split(
        blocks, refine(blocks, solve(blocks, richer, solution.direct), iterations=5, tolerance=0.5)
    )


def freedom(estimation: Estimation) -> int:
    """Return the degrees of freedom of the residual."""
    return samples(estimation.blocks) - parameters(estimation.blocks, estimation.solution)
