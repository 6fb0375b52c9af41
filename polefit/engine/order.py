"""The order of the model: up in a few large steps, then down by pruning from one rich fit.

Ascending one pair at a time spends most of the work on orders that are thrown away and can stop
at a local optimum; descending goes from a good optimum to a good optimum. Sections leave when
the misfit rises by less than noise alone would explain, counting the places at which a spare
pair could have settled.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from typing import NamedTuple

import numpy as np
import scipy.special
from numpy.typing import NDArray

from polefit.engine.blocks import Block, FloatArray, samples, shared_axis, sketch
from polefit.engine.pole_set import PoleSet
from polefit.engine.projection import Solution, residuals, solve
from polefit.engine.refinement import refine
from polefit.engine.sections import NONE
from polefit.engine.significance import (
    Information,
    information,
    joint_score,
    scan,
    section_scores,
    threshold,
)
from polefit.engine.vector_fitting import relocate, starting_poles
from polefit.engine.whiteness import judge_whiteness

KEEP_CHANCE = 0.01
"""Chance per run that a section fitted to pure noise is kept in the model."""
PLACES_PER_WIDTH = 8.0
"""Independent places of a pair in its half-width, its width being free as well."""
FIRST_ORDER = 20
LADDER = (32, 48, 72, 96)
LARGEST_ORDER = 96
LOOKS_WHITE = 0.01
SMALL = 1e-3
"""Share of the weighted data that a residual may have to be taken for noise at a glance: of sweeps
that miss narrow modes, poor fits look white."""
RELOCATIONS = 5
FAR_OFF = 10.0
"""Rise of χ² over what noise explains at which a trial counts as far from its optimum."""
GROWTH_TRIALS = 8
TRIALS = 64
"""Frequencies at which a further pair is tried."""


class Found(NamedTuple):
    """Outcome of the search.

    Attributes
    ----------
    solution : Solution
        The refined model.
    richest : Solution
        The rich model from which it was pruned.
    reason : str
        Why this order was taken.
    glitches : tuple of complex
        Poles that left though they stand out of the noise, since a few samples alone say so.
    """

    solution: Solution
    richest: Solution
    reason: str
    glitches: tuple[complex, ...] = ()


def count_places(blocks: Sequence[Block]) -> int:
    """Return the number of frequencies at which a spare pair could settle."""
    return int(shared_axis(blocks).size)


def search(blocks: Sequence[Block], start: Solution | None = None, kind: PoleSet = NONE) -> Found:
    """Find order and poles for data whose noise level is free but whose noise shape is known.

    Parameters
    ----------
    blocks : sequence of Block
        Data.
    start : Solution, optional
        A rich model from a search with other weights, to be taken up again.
    kind : PoleSet
        The kind of poles to look for.

    Returns
    -------
    Found
    """
    if start is None:
        richest = _rich_fit(blocks, kind)
    else:
        richest = refine(blocks, solve(blocks, start.sections, 2), iterations=10, tolerance=0.1)
    places = count_places(blocks)
    glitches: list[complex] = []
    final = drop_direct(blocks, prune(blocks, richest, places, glitches))
    reason = (
        f"pruned from {richest.sections.poles().size} poles; removing any further one raises the "
        f"misfit more than noise explains (chance {KEEP_CHANCE:g} over {places} places)"
    )
    return Found(final, richest, reason, tuple(glitches))


def take_up(blocks: Sequence[Block], found: Found) -> Found:
    """Adapt the outcome of a search to new weights, and add what it may have missed."""
    places = count_places(blocks)
    start = solve(blocks, found.solution.sections, found.solution.direct)
    start = refine(blocks, start, iterations=10, tolerance=0.1)
    glitches = list(found.glitches)
    pruned = prune(blocks, start, places, glitches)
    grown = grow(blocks, pruned, places, glitches)
    settled = prune(blocks, grown, places, glitches) if grown is not pruned else pruned
    return found._replace(solution=settled, glitches=tuple(glitches))


def parameters(blocks: Sequence[Block], solution: Solution) -> int:
    """Return the number of real parameters: poles, and residues and direct terms per channel."""
    channels = sum(block.channels for block in blocks)
    n = solution.sections.order
    return n + channels * (n + solution.sections.direct_columns(solution.direct))


def variance_factor(blocks: Sequence[Block], solution: Solution) -> float:
    """Return χ² per degree of freedom, at least 1: weights never understate the known noise."""
    freedom = samples(blocks) - parameters(blocks, solution)
    return max(solution.misfit / max(freedom, 1), 1.0)


def criterion(blocks: Sequence[Block], solution: Solution) -> float:
    """Return BIC with the noise level free (G. Schwarz, Ann. Statist. 6, 461, 1978)."""
    count = samples(blocks)
    level = max(solution.misfit / count, 1.0)
    return count * math.log(level) + parameters(blocks, solution) * math.log(count)


def largest_order(blocks: Sequence[Block]) -> int:
    """Return the largest order that leaves at least as many samples as parameters, halved."""
    points = min(block.s.size for block in blocks)
    return max(1, min(LARGEST_ORDER, (2 * points - 3) // 4))


def first_model(
    blocks: Sequence[Block],
    order: int,
    relocations: int = RELOCATIONS,
    kind: PoleSet = NONE,
    damping: float = 0.01,
) -> Solution:
    """Fit a model of given order from poles spread over the band."""
    low, high = _edges(blocks)
    start = kind.like(starting_poles(low, high, min(order, largest_order(blocks)), damping))
    return _vector_fit(blocks, start, relocations)


def _edges(blocks: Sequence[Block]) -> tuple[float, float]:
    low = min(float(block.s[0].imag) for block in blocks)
    low = low or min(float(block.s[min(1, block.s.size - 1)].imag) for block in blocks)
    return low, max(float(block.s[-1].imag) for block in blocks)


def _rich_fit(blocks: Sequence[Block], kind: PoleSet) -> Solution:
    """Raise the order in large steps until the criterion no longer improves."""
    everything, blocks = blocks, [sketch(block) for block in blocks]
    low, high = _edges(blocks)
    most = largest_order(blocks)
    first = first_model(blocks, FIRST_ORDER, kind=kind)
    best = refine(blocks, first, iterations=5, tolerance=1.0)
    for richer_order in LADDER:
        order = min(richer_order, most)
        if order <= best.sections.order or _explained(blocks, best):
            break
        extra = kind.like(starting_poles(low, high, order - best.sections.order))
        richer = _vector_fit(blocks, best.sections.join(extra), RELOCATIONS)
        if criterion(blocks, richer) >= criterion(blocks, best):
            break
        best = refine(blocks, richer, iterations=5, tolerance=1.0)
    if all(few is all_ for few, all_ in zip(blocks, everything, strict=True)):
        return best
    whole = solve(everything, best.sections, best.direct)
    return refine(everything, whole, iterations=2, tolerance=1.0)


def _explained(blocks: Sequence[Block], solution: Solution) -> bool:
    """Tell whether the residual is at the known noise, or small and quite like noise."""
    if solution.misfit < samples(blocks) - parameters(blocks, solution):
        return True
    if solution.misfit > SMALL * sum(float(np.vdot(b.target, b.target)) for b in blocks):
        return False
    whiteness = judge_whiteness(residuals(blocks, solution))
    return whiteness.probability > LOOKS_WHITE or whiteness.tendency < 2.0


def _vector_fit(blocks: Sequence[Block], start: PoleSet, relocations: int) -> Solution:
    """Relocate a few times and keep the best."""
    sections = start
    best: Solution | None = None
    for _ in range(relocations):
        sections = relocate(blocks, sections, 2)
        trial = solve(blocks, sections, 2)
        if best is None or trial.misfit < best.misfit:
            improved = best is None or trial.misfit < 0.98 * best.misfit
            best = trial
            if not improved:
                break
    assert best is not None
    return split(blocks, best)


def split(blocks: Sequence[Block], solution: Solution) -> Solution:
    """Let real poles of second-order sections stand alone, so that each may be judged."""
    flat = solution.sections.split()
    if flat is solution.sections:
        return solution
    return solve(blocks, flat, solution.direct)


def prune(
    blocks: Sequence[Block],
    start: Solution,
    places: int,
    glitches: list[complex] | None = None,
) -> Solution:
    """Remove sections that noise alone explains, weakest first, refining after each step.

    Poles that a few samples alone speak for leave as well, and are added to `glitches`.
    """
    current = split(blocks, start)
    kept = np.zeros(current.sections.number, dtype=bool)
    largest_batch = current.sections.number
    while current.sections.number:
        limit = keep_limits(blocks, current.sections, places)
        level = variance_factor(blocks, current)
        info = information(current)
        scores = section_scores(blocks, current, info, least=level * float(limit.min()))
        score = scores.spared / level / limit
        glitch = scores.full / level > limit
        score[kept] = np.inf
        weak = np.argsort(score)
        weak = weak[score[weak] < 1.0]
        if weak.size == 0:
            break
        take = weak[: max(1, largest_batch)]
        allowed = _allowed(blocks, current.sections, take, limit)
        while take.size > 1 and joint_score(current, info, take.tolist()) >= allowed * level:
            take = take[:-1]
            allowed = _allowed(blocks, current.sections, take, limit)
        mask = np.ones(current.sections.number, dtype=bool)
        mask[take] = False
        trial = solve(blocks, current.sections.keep(mask), current.direct)
        if trial.misfit - current.misfit > FAR_OFF * allowed * level:
            # poles that must move far to stand in get there sooner by relocation
            moved = relocate(blocks, trial.sections, trial.direct)
            relocated = solve(blocks, moved, trial.direct)
            trial = min(trial, relocated, key=lambda one: one.misfit)
        trial = refine(blocks, trial, iterations=6, tolerance=0.1)
        rise = (trial.misfit - current.misfit) / level
        if rise < allowed or (take.size == 1 and glitch[take[0]]):
            if rise >= allowed and glitches is not None:
                glitches.append(complex(current.sections.own_poles()[take[0]]))
            current = split(blocks, trial)
            kept = np.zeros(current.sections.number, dtype=bool)
        elif take.size > 1:
            largest_batch = take.size // 2
        else:
            kept[take] = True
    return refine(blocks, current, iterations=30, tolerance=1e-2)


def keep_limits(blocks: Sequence[Block], sections: PoleSet, places: int) -> FloatArray:
    """Return the χ² that noise alone might give each section, all its places counted.

    A narrow pair could have settled at any frequency of the sweep, a broad one only at as many
    places as its width fits into the band.
    """
    channels = sum(block.channels for block in blocks)
    low, high = _edges(blocks)
    width = np.maximum(sections.half_widths(), 1e-300)
    own = np.minimum(PLACES_PER_WIDTH * (high - low) / width + 1, float(places))
    columns = np.where(np.arange(sections.number) < sections.twofold, 2, 1)
    limits: FloatArray = scipy.special.chdtri(columns * channels, KEEP_CHANCE / own)
    return limits


def _allowed(
    blocks: Sequence[Block], sections: PoleSet, take: NDArray[np.intp], limits: FloatArray
) -> float:
    """Return the rise of χ² that noise alone explains when all of `take` leave at once."""
    if take.size == 1:
        return float(limits[take[0]])
    channels = sum(block.channels for block in blocks)
    columns = np.where(take < sections.twofold, 2, 1) * channels
    chance = scipy.special.chdtrc(columns, limits[take]).min()
    return float(scipy.special.chdtri(columns.sum(), chance))


def trial_grid(blocks: Sequence[Block], count: int) -> FloatArray:
    """Return frequencies at which to try a further mode: where the samples are."""
    axis = shared_axis(blocks)
    axis = axis[axis > 0]
    if axis.size <= count:
        return axis
    picked: FloatArray = axis[np.unique(np.linspace(0, axis.size - 1, count).astype(int))]
    return picked


def grow(
    blocks: Sequence[Block],
    start: Solution,
    places: int,
    glitches: list[complex] | None = None,
) -> Solution:
    """Add pairs where the residual still holds one, until none stands out of the noise."""
    channels = sum(block.channels for block in blocks)
    limit = threshold(channels, places, KEEP_CHANCE)
    current = start
    frequencies = trial_grid(blocks, TRIALS)
    info = information(current)
    for _ in range(GROWTH_TRIALS):
        if current.sections.order + 2 > largest_order(blocks) or frequencies.size < 2:
            break
        level = variance_factor(blocks, current)
        place, gain = _best_place(blocks, current, info, frequencies)
        if gain < limit * level:
            break
        more = current.sections.like(np.array([place]))
        trial = solve(blocks, current.sections.join(more), current.direct)
        trial = refine(blocks, trial, iterations=20, tolerance=0.1)
        trial_info = information(trial)
        own = trial.sections.twofold - 1
        scores, least = section_scores(blocks, trial, trial_info), variance_factor(blocks, trial)
        if scores.spared[own] < limit * least:
            if scores.full[own] > limit * least and glitches is not None:
                glitches.append(complex(trial.sections.own_poles()[own]))
            frequencies = frequencies[np.abs(frequencies - place.imag) > 3 * _gap(frequencies)]
            continue
        flat = split(blocks, trial)
        info = trial_info if flat is trial else information(flat)
        current = flat
    return current


def _gap(frequencies: FloatArray) -> float:
    return float(np.median(np.diff(frequencies)))


def _best_place(
    blocks: Sequence[Block], current: Solution, info: Information, frequencies: FloatArray
) -> tuple[complex, float]:
    gap = np.gradient(frequencies) if frequencies.size > 1 else frequencies
    narrow, wide = (np.minimum(width * gap, 0.5 * frequencies) for width in (1.0, 4.0))
    # a growing pair turns the phase the other way: it must be tried for itself
    places = np.concatenate((frequencies, frequencies, frequencies[::2]))
    poles = np.concatenate((-narrow, narrow, -wide[::2])) + 1j * places
    gain = scan(blocks, current, info, poles).gain
    at = int(np.argmax(gain))
    return complex(poles[at]), float(gain[at])


def drop_direct(blocks: Sequence[Block], start: Solution) -> Solution:
    """Leave out the s-proportional term when no channel needs it."""
    if start.direct < 2:
        return start
    channels = sum(block.channels for block in blocks)
    trial = solve(blocks, start.sections, 1)
    trial = refine(blocks, trial, iterations=8, tolerance=0.1)
    level = variance_factor(blocks, start)
    rise = trial.misfit - start.misfit
    if rise < level * threshold(channels, 1, KEEP_CHANCE, columns=start.sections.direct_columns(1)):
        return trial
    return start
