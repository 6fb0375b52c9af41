"""A delay in front of a port: a factor exp(−sτ) of one channel, which moves no pole.

Rational functions describe it at the price of many poles, of which noise may turn some into the
right half-plane. To first order in τ a change of delay alters residues and direct terms only, so
it need not be known well, and poles lose nothing by its being estimated.
"""

from __future__ import annotations

import functools
import math
from collections.abc import Callable, Sequence
from typing import NamedTuple

import numpy as np
import scipy.optimize
from numpy.typing import NDArray

from polefit.engine.blocks import Block, FloatArray, make_block, samples
from polefit.engine.order import Found, criterion, first_model, largest_order, search
from polefit.engine.pole_set import PoleSet
from polefit.engine.projection import Solution, solve
from polefit.engine.refinement import refine
from polefit.engine.sections import NONE
from polefit.engine.weighting import Measured

SUSPECT_TURN = 1.5 * np.pi
"""Net phase over the band, rad, from which a delay is tried: less costs a pair or two only."""
UNREADABLE_STEP = 2.0
"""Typical phase step, rad, from which the turns of the phase can no longer be counted."""
EARLIER, LATER, STEP = 21.0, 6.0, 1.5
"""Delays tried, as phase over the band in rad around the mean one: resonances delay as well."""
REACH = 2.0
"""How far the delay is refined at the order found, in the same measure."""
LOOK_ORDERS = (6, 12, 20)
LOOK_POINTS = 120
WORTH = 10.0
"""How much lower the criterion must be with the delays than without."""
MORE_POLES, NO_MATCH = 4, 1.5
"""A model without delays and so many more poles that misses the data so many times as far needs
no search of its own."""
BEYOND, BROAD = 1.2, 0.3
"""Distance from the origin and damping, over the top of the band, from which poles may stand in
for a delay."""
FINE = 0.01
"""Phase over the band to which the delay is refined, rad."""


class Delayed(NamedTuple):
    """Data with delays taken out, and the model found.

    Attributes
    ----------
    data : sequence of Measured
        Turned back.
    blocks : tuple of Block
        The same, weighted.
    found : Found
        Outcome of the search.
    delays : tuple of (K,) float ndarray
        What was taken out, over the normalised angular frequency; mostly zero.
    """

    data: Sequence[Measured]
    blocks: tuple[Block, ...]
    found: Found
    delays: tuple[FloatArray, ...]


def turned_back(m: Measured, delay: FloatArray) -> Measured:
    """Take a delay out of every channel: values times exp(sτ), parts as they were measured."""
    if not delay.any():
        return m
    forth = np.exp(m.s * delay[:, np.newaxis])
    back = forth.conj() if m.turn is None else m.turn * forth.conj()
    circular = m.turn is None and np.array_equal(m.known[:, 0], m.known[:, 1])
    return m._replace(values=m.values * forth, turn=None if circular else back)


def turned_block(block: Block, delay: FloatArray) -> Block:
    """Do the same to weighted data."""
    forth = np.exp(block.s * delay[:, np.newaxis])
    back = forth.conj() if block.turn is None else block.turn * forth.conj()
    return make_block(block.s, block.values * forth, block.weight, back)


def take_out(
    data: Sequence[Measured],
    blocks: tuple[Block, ...],
    weigh: Callable[[Sequence[Measured]], tuple[Block, ...]],
    kind: PoleSet = NONE,
) -> Delayed:
    """Search the order, with delays taken out where the data ask for it.

    Parameters
    ----------
    data : sequence of Measured
        As measured.
    blocks : tuple of Block
        The same, weighted.
    weigh : callable
        Weighs data once more.
    kind : PoleSet
        The kind of poles to look for.

    Returns
    -------
    Delayed
    """
    none = tuple(np.zeros(block.channels) for block in blocks)
    looks = [mean_delay(block) for block in blocks]
    if not any(suspected for _, suspected in looks):
        return Delayed(data, blocks, search(blocks, kind=kind), none)
    delays = tuple(
        find_delay(block, mean, kind) if suspected else np.zeros(block.channels)
        for block, (mean, suspected) in zip(blocks, looks, strict=True)
    )
    number = sum(np.unique(delay[delay != 0]).size for delay in delays)
    moved = [turned_back(m, delay) for m, delay in zip(data, delays, strict=True)]
    with_delay = weigh(moved)
    found = search(with_delay, kind=kind)
    order = found.solution.sections.order + MORE_POLES
    plain = refine(blocks, first_model(blocks, order, kind=kind), iterations=5, tolerance=1.0)
    if plain.misfit < NO_MATCH * found.solution.misfit:
        without = search(blocks, kind=kind)
        asked = criterion(with_delay, found.solution) + number * math.log(samples(blocks))
        if criterion(blocks, without.solution) < asked + WORTH:
            return Delayed(data, blocks, without, none)
    return Delayed(moved, with_delay, found, delays)


def polish(before: Delayed) -> Delayed:
    """Refine the delays that were taken out, first without the poles that stand in for the rest."""
    sections = before.found.solution.sections
    beyond, broad = _stand_ins(sections)
    kept = [~beyond, ~(beyond | broad), np.ones(sections.number, dtype=bool)]
    trials = [_polished(before, sections.keep(mask)) for mask in kept if mask.any()]
    return min(trials, key=lambda one: criterion(one.blocks, one.found.solution))


def _stand_ins(sections: PoleSet) -> tuple[NDArray[np.bool_], NDArray[np.bool_]]:
    """Tell which sections lie beyond the top of the band, and which are broad."""
    return sections.sizes() > BEYOND, sections.half_widths() > BROAD


def _polished(before: Delayed, sections: PoleSet) -> Delayed:
    data, blocks = list(before.data), list(before.blocks)
    delays = [delay.copy() for delay in before.delays]
    solution = solve(blocks, sections, before.found.solution.direct)
    for which, taken in enumerate(before.delays):
        for shared in np.unique(taken[taken != 0]):
            step = np.where(taken == shared, _change(blocks, solution, which, taken == shared), 0.0)
            delays[which] += step
            data[which] = turned_back(data[which], step)
            blocks[which] = turned_block(blocks[which], step)
            solution = solve(blocks, solution.sections, solution.direct)
    solution = refine(blocks, solution, iterations=10, tolerance=0.1)
    return Delayed(data, tuple(blocks), before.found._replace(solution=solution), tuple(delays))


def mean_delay(block: Block) -> tuple[FloatArray, bool]:
    """Return the mean delay, (K,), of every channel, and whether one of them calls for a trial."""
    angle = np.unwrap(np.angle(block.values), axis=1)
    step = np.median(np.abs(np.diff(angle, axis=1)), axis=1)
    turn = angle[:, -1] - angle[:, 0]
    readable = step < UNREADABLE_STEP
    suspected = bool(np.any(readable & (np.abs(turn) > SUSPECT_TURN)))
    return np.where(readable, -turn / _width(block), 0.0), suspected


def find_delay(block: Block, mean: FloatArray, kind: PoleSet = NONE) -> FloatArray:
    """Look for the delays with which models of low order miss the data least.

    Parameters
    ----------
    block : Block
        Data.
    mean : (K,) float ndarray
        From :func:`mean_delay`.
    kind : PoleSet
        The kind of poles.

    Returns
    -------
    (K,) float ndarray
        Of each channel alone or, if that serves all of them better, the same for all.
    """
    thin = _thinned(block)
    width, channels = _width(block), block.channels
    score = functools.partial(_score, thin, kind)
    alone = [functools.partial(_score, _only(thin, k), kind) for k in range(channels)]
    own = np.array([_scanned(one, mean[k : k + 1], width) for k, one in enumerate(alone)])
    if channels == 1:
        return own
    ones = np.ones(channels)
    common = ones * _scanned(lambda one: score(one * ones), np.append(mean, own), width)
    return min((own, common), key=score)


def _scanned(score: Callable[[FloatArray], float], means: FloatArray, width: float) -> float:
    """Return the delay of lowest score, looked for around the means and refined."""
    low, high = float(means.min()) - EARLIER / width, float(means.max()) + LATER / width
    tried = np.append(np.arange(low, high, STEP / width), 0.0)
    best = float(tried[int(np.argmin([score(np.array([one])) for one in tried]))])
    return _bounded(lambda one: score(np.array([one])), best, STEP / width, FINE / width)


def _width(block: Block) -> float:
    return float(block.s[-1].imag - block.s[0].imag)


def _change(
    blocks: Sequence[Block], solution: Solution, which: int, shared: NDArray[np.bool_]
) -> float:
    """Return the change of the delay of some channels that lowers the misfit most, if any."""
    width = _width(blocks[which])

    def miss(change: float) -> float:
        moved = list(blocks)
        moved[which] = turned_block(blocks[which], np.where(shared, change, 0.0))
        start = solve(moved, solution.sections, solution.direct)
        return math.log(refine(moved, start, iterations=3, tolerance=1.0).misfit)

    change = _bounded(miss, 0.0, REACH / width, FINE / width)
    return change if miss(change) < miss(0.0) else 0.0


def _bounded(score: Callable[[float], float], centre: float, reach: float, fine: float) -> float:
    """Minimise a score within `reach` of `centre`."""
    outcome = scipy.optimize.minimize_scalar(
        score,
        bounds=(centre - reach, centre + reach),
        method="bounded",
        options={"xatol": fine, "maxiter": 14},
    )
    return float(outcome.x)


def _thinned(block: Block) -> Block:
    """Return fewer points, with the same weight for both parts."""
    points = block.s.size
    at = np.unique(np.linspace(0, points - 1, min(points, LOOK_POINTS)).astype(int))
    weight = np.sqrt(np.mean(block.weight**2, axis=1, keepdims=True))[:, :, at]
    return make_block(block.s[at], block.values[:, at], np.repeat(weight, 2, axis=1))


def _only(block: Block, k: int) -> Block:
    return make_block(block.s, block.values[k : k + 1], block.weight[k : k + 1])


def _score(block: Block, kind: PoleSet, delay: FloatArray) -> float:
    """Sum the logarithms of the misfit over several orders: the right delay needs the fewest."""
    forth = np.exp(block.s * delay[:, np.newaxis])
    moved = make_block(block.s, block.values * forth, block.weight)
    total = 0.0
    for order in LOOK_ORDERS:
        if order > largest_order([block]):
            break
        total += math.log(max(first_model([moved], order, 2, kind).misfit, 1e-300))
    return total
