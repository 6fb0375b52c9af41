"""From responses to a fitted model with its noise law: everything before judgement.

The noise law and the model are found in turn: a first fit with the shape of the noise guessed,
the law from its residuals, the search again with proper weights.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from typing import NamedTuple

import numpy as np

from polefit.engine.blocks import Block, ComplexArray, FloatArray, make_block, samples
from polefit.engine.noise import NoiseLaw, estimate, first_guess, variance
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
from polefit.engine.projection import Solution, model_values, residuals, solve
from polefit.engine.refinement import refine
from polefit.engine.sections import from_poles
from polefit.engine.significance import Information, information, scan, section_scores
from polefit.engine.whiteness import Whiteness, judge_whiteness

RESHAPED = 2.0
"""Weights that change by more than this among themselves call for a new search of the order."""
ALTERED = 1.3
"""Weights that change by more may show what was not seen before."""
RAISES = 3
"""How often the order is raised by two pairs while the residual is not noise-like."""

BELOW = 0.25
"""χ² per degree of freedom below which the residual says nothing: the noise was overstated, as the
floor of double precision is for data of a closed form."""


class Measured(NamedTuple):
    """Responses on one frequency axis, as the engine takes them.

    Attributes
    ----------
    s : (N,) complex ndarray
        Normalised complex frequency.
    values : (K, N) complex ndarray
        Responses.
    known : (K, 2, N) float ndarray
        Known noise variance of the two parts of each sample.
    turn : (K, N) complex ndarray or None
        Unit phasors, where the parts lie along and across the sample.
    shift : (N,) float ndarray or None
        Standard deviation of Im s, where frequencies are rounded.
    """

    s: ComplexArray
    values: ComplexArray
    known: FloatArray
    turn: ComplexArray | None
    shift: FloatArray | None = None


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


def estimate_model(
    data: Sequence[Measured], progress: Callable[[str], None] = lambda _: None
) -> Estimation:
    """Fit order, poles, residues and noise law.

    Parameters
    ----------
    data : sequence of Measured
        One for each frequency axis.
    progress : callable
        Told what is being done.

    Returns
    -------
    Estimation
    """
    laws = tuple(first_guess([m.values for m in data]))
    blocks = _weigh(data, laws, _by_data(data))
    progress("searching the order")
    found = search(blocks)
    for turn in range(4):
        progress("estimating the noise")
        seen = _by_model(data, found.solution)
        spent = parameters(blocks, found.solution) / sum(block.channels for block in blocks)
        laws = tuple(_law(m, sight, spent) for m, sight in zip(data, seen, strict=True))
        before, blocks = blocks, _weigh(data, laws, seen)
        change = _change(before, blocks)
        if turn > 0 and change < ALTERED:
            break  # the refinement below is all that such a change calls for
        if change > RESHAPED:
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
    raised = settled.solution.sections.order - solution.sections.order
    return Estimation(
        blocks=blocks,
        laws=laws,
        noise=tuple(
            level * variance(law, sight.size, sight.known)
            for law, sight in zip(laws, _by_model(data, settled.solution), strict=True)
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


def _change(before: Sequence[Block], after: Sequence[Block]) -> float:
    """Return the factor by which weights typically changed relative to each other."""
    steps = [np.log(new.weight / old.weight) for old, new in zip(before, after, strict=True)]
    return float(np.exp(np.std(np.concatenate([step.ravel() for step in steps]))))


class _Sight(NamedTuple):
    """One set of responses as the data or a model show it: values, |H|, known variance."""

    values: ComplexArray
    size: FloatArray
    known: FloatArray


def _by_data(data: Sequence[Measured]) -> list[_Sight]:
    """Look at the responses before there is a model."""
    seen = []
    for m in data:
        moved = None if m.shift is None else np.gradient(m.values, m.s.imag, axis=1) * m.shift
        seen.append(_Sight(m.values, np.abs(m.values), _known(m, moved)))
    return seen


def _by_model(data: Sequence[Measured], solution: Solution) -> list[_Sight]:
    """Look at the responses through the model: the data are noisy."""
    seen = []
    for m, part in zip(data, solution.parts, strict=True):
        values, moved = model_values(m.s, solution, part), None
        if m.shift is not None:
            above, below = m.s + 1j * m.shift, m.s - 1j * m.shift
            moved = model_values(above, solution, part) - model_values(below, solution, part)
            moved = moved / 2
        seen.append(_Sight(values, np.abs(values), _known(m, moved)))
    return seen


def _known(m: Measured, moved: ComplexArray | None) -> FloatArray:
    """Return the known variance; a frequency off by δ has `moved` the response by δ·dH/df.

    All channels share δ: together they must tell no more than one.
    """
    if moved is None:
        return m.known
    moved = moved * np.sqrt(len(m.values))
    moved = moved if m.turn is None else moved * m.turn
    total: FloatArray = m.known + np.stack((moved.real**2, moved.imag**2), axis=1)
    return total


def _weigh(
    data: Sequence[Measured], laws: Sequence[NoiseLaw], seen: Sequence[_Sight]
) -> tuple[Block, ...]:
    """Weight by the law, at the size that is seen."""
    return tuple(
        make_block(m.s, m.values, 1.0 / np.sqrt(variance(law, sight.size, sight.known)), m.turn)
        for m, law, sight in zip(data, laws, seen, strict=True)
    )


def _law(m: Measured, sight: _Sight, spent: float) -> NoiseLaw:
    """Estimate the law of one set from what the model leaves; `spent` freedom of each channel."""
    rest = m.values - sight.values
    if m.turn is not None:
        rest = rest * m.turn
    parts = np.stack((rest.real, rest.imag), axis=1)
    return estimate(parts, sight.size, sight.known, spent)


def go_past(blocks: Sequence[Block], solution: Solution, info: Information) -> Solution:
    """Add two pairs where they help most, wanted or not, to see what depends on the order."""
    frequencies = trial_grid(blocks, TRIALS // 2)
    if solution.sections.order + 4 > largest_order(blocks) or frequencies.size < 4:
        return solution
    gap = np.gradient(frequencies)
    poles = -np.minimum(2 * gap, 0.5 * frequencies) + 1j * frequencies
    gain = scan(blocks, solution, info, poles).gain
    first = int(np.argmax(gain))
    away = np.abs(np.arange(gain.size) - first) > gain.size // 10
    second = int(np.argmax(np.where(away, gain, -1.0)))
    richer = solution.sections.join(from_poles(poles[[first, second]]))
    return split(
        blocks, refine(blocks, solve(blocks, richer, solution.direct), iterations=5, tolerance=0.5)
    )


def freedom(estimation: Estimation) -> int:
    """Return the degrees of freedom of the residual."""
    return samples(estimation.blocks) - parameters(estimation.blocks, estimation.solution)
