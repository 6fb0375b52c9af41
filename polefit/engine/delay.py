"""A delay in front of a port: a factor exp(−sτ) of one channel, which moves no pole.

Rational functions describe it at the price of many poles, of which noise may turn some into the
right half-plane. To first order in τ a change of delay alters residues and direct terms only, so
it need not be known well, and poles lose nothing by its being estimated.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence
from typing import NamedTuple

import numpy as np
import scipy.optimize
from numpy.typing import NDArray

from polefit.engine.blocks import (
    Block,
    FloatArray,
    make_block,
    one_channel,
    samples,
    sketch,
    weighted,
)
from polefit.engine.order import (
    Found,
    count_places,
    criterion,
    first_model,
    largest_order,
    prune,
    search,
)
from polefit.engine.pole_set import PoleSet
from polefit.engine.projection import Solution, residuals, solve
from polefit.engine.refinement import refine
from polefit.engine.sections import NONE
from polefit.engine.vector_fitting import relocate, starting_poles
from polefit.engine.weighting import Measured
from polefit.engine.whiteness import judge_whiteness

SUSPECT_TURN = 1.5 * np.pi
"""Net phase over the band, rad, from which a delay is tried: less costs a pair or two only."""
LONG_TURN = 8 * np.pi
"""Net phase from which the delay is sought first: without it the search would be long."""
MANY_POLES = 16
"""A model of so many poles whose residual is not noise-like may have lost its way in a delay."""
STAND_INS = 3
"""Poles beyond the band or broad that a delay worth taking out would need at least."""
UNREADABLE_STEP = 2.0
"""Typical phase step, rad, from which the turns of the phase can no longer be counted."""
EARLIER, LATER, STEP = 21.0, 6.0, 1.5
"""Delays tried, as phase over the band in rad around the mean one: resonances delay as well."""
REACH = 2.0
"""How far the delay is refined at the order found, in the same measure."""
LOOK_ORDERS = (6, 10, 14, 20)
"""Orders of the models that are tried while a delay is sought, if nothing is known ..."""
BESIDE_CORE = (1, 3, 6)
"""... or beside the poles that resonate in the band."""
LOOK_POINTS = 100
SEPARATE = 4
"""Channels up to which each may have a delay of its own."""
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
    turn = max(look.turn for look in looks)
    if turn < SUSPECT_TURN:
        return Delayed(data, blocks, search(blocks, kind=kind), none)
    plain = Delayed(data, blocks, search(blocks, kind=kind), none) if turn < LONG_TURN else None
    orders: Sequence[int] = LOOK_ORDERS
    if plain is not None:
        core, stand_ins = _stand_in_order(plain.found.solution.sections)
        if stand_ins < STAND_INS and _at_rest(blocks, plain.found.solution):
            return plain
        orders = tuple(core + more for more in BESIDE_CORE)
    delays = tuple(
        find_delay(block, look.mean, orders, kind)
        if look.turn > SUSPECT_TURN
        else np.zeros(block.channels)
        for block, look in zip(blocks, looks, strict=True)
    )
    moved = [turned_back(m, delay) for m, delay in zip(data, delays, strict=True)]
    with_delay = weigh(moved)
    late = polish(Delayed(moved, with_delay, search(with_delay, kind=kind), delays))
    advanced = _advanced(late.found.solution.sections)
    if plain is None:
        order = late.found.solution.sections.order + MORE_POLES
        quick = refine(blocks, first_model(blocks, order, kind=kind), iterations=5, tolerance=1.0)
        if not advanced and quick.misfit > NO_MATCH * late.found.solution.misfit:
            return late
        plain = Delayed(data, blocks, search(blocks, kind=kind), none)
    if advanced and not _advanced(plain.found.solution.sections):
        return plain
    number = sum(np.unique(delay[delay != 0]).size for delay in late.delays)
    asked = criterion(late.blocks, late.found.solution) + number * math.log(samples(blocks))
    return plain if criterion(blocks, plain.found.solution) < asked + WORTH else late


def _at_rest(blocks: Sequence[Block], solution: Solution) -> bool:
    """Tell whether a search ended as one does that no delay has led astray."""
    if solution.sections.order < MANY_POLES:
        return True
    return judge_whiteness(residuals(blocks, solution)).white


def _advanced(sections: PoleSet) -> bool:
    """Tell whether growing poles stand in for a delay: too much of it was taken out."""
    sections = sections.split()
    beyond, broad = _stand_ins(sections)
    return bool(np.any(sections.own_poles()[beyond | broad].real > 0))


def _stand_in_order(sections: PoleSet) -> tuple[int, int]:
    """Count the poles that resonate in the band, and those that could stand in for a delay."""
    beyond, broad = _stand_ins(sections)
    sizes = np.where(np.arange(sections.number) < sections.twofold, 2, 1)
    stand_ins = int(np.sum(sizes[beyond | broad]))
    return sections.order - stand_ins, stand_ins


def polish(before: Delayed) -> Delayed:
    """Refine the delays that were taken out, and leave out the poles that stood in for the rest."""
    sections = before.found.solution.sections
    if not sections.number:
        return before
    beyond, broad = _stand_ins(sections)
    kept = [~beyond, ~(beyond | broad), np.ones(sections.number, dtype=bool)]
    trials = [_polished(before, sections.keep(mask)) for mask in kept if mask.any()]
    best = min(trials, key=lambda one: criterion(one.blocks, one.found.solution))
    pruned = prune(best.blocks, best.found.solution, count_places(best.blocks))
    return best._replace(found=best.found._replace(solution=pruned))


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


class Look(NamedTuple):
    """What the phase says at a glance.

    Attributes
    ----------
    mean : (K,) float ndarray
        Mean delay of every channel.
    turn : float
        Largest net phase over the band, rad.
    """

    mean: FloatArray
    turn: float


def mean_delay(block: Block) -> Look:
    """Look at the phase of every channel, as far as its turns can be counted."""
    angle = np.unwrap(np.angle(block.values), axis=1)
    readable = np.median(np.abs(np.diff(angle, axis=1)), axis=1) < UNREADABLE_STEP
    turn = np.where(readable, angle[:, -1] - angle[:, 0], 0.0)
    return Look(-turn / _width(block), float(np.abs(turn).max()))


def find_delay(
    block: Block, mean: FloatArray, orders: Sequence[int] = LOOK_ORDERS, kind: PoleSet = NONE
) -> FloatArray:
    """Look for the delays with which models of low order miss the data least.

    Parameters
    ----------
    block : Block
        Data.
    mean : (K,) float ndarray
        From :func:`mean_delay`.
    orders : sequence of int
        Of the models that are tried.
    kind : PoleSet
        The kind of poles.

    Returns
    -------
    (K,) float ndarray
        Of each channel alone or, if that serves all of them better, the same for all; always
        the same where channels are many.
    """
    thin, width = _thinned(block), _width(block)

    def scanned(some: Block, means: FloatArray) -> float:
        def score(delay: float, orders: Sequence[int]) -> float:
            return _score(some, orders, kind, np.full(some.channels, delay))

        low, high = float(means.min()) - EARLIER / width, float(means.max()) + LATER / width
        tried = np.append(np.arange(low, high, STEP / width), 0.0)
        middle = orders[len(orders) // 2 :][:1]
        best = float(tried[int(np.argmin([score(float(one), middle) for one in tried]))])
        return _bounded(lambda one: score(one, orders), best, STEP / width, FINE / width)[0]

    if block.channels > SEPARATE:
        return np.full(block.channels, scanned(sketch(thin), mean))
    own = np.array([scanned(one_channel(thin, k), mean[k : k + 1]) for k in range(block.channels)])
    if block.channels == 1:
        return own
    common = np.full(block.channels, scanned(thin, np.append(mean, own)))
    return min((own, common), key=lambda delay: _score(thin, orders, kind, delay))


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
        return math.log(max(refine(moved, start, iterations=3, tolerance=1.0).misfit, 1e-300))

    change, least = _bounded(miss, 0.0, REACH / width, FINE / width)
    return change if least < miss(0.0) else 0.0


def _bounded(
    score: Callable[[float], float], centre: float, reach: float, fine: float
) -> tuple[float, float]:
    """Return where a score is least within `reach` of `centre`, and how much it is there."""
    outcome = scipy.optimize.minimize_scalar(
        score,
        bounds=(centre - reach, centre + reach),
        method="bounded",
        options={"xatol": fine, "maxiter": 10},
    )
    return float(outcome.x), float(outcome.fun)


def _thinned(block: Block) -> Block:
    """Return fewer points, with the same weight for both parts."""
    points = block.s.size
    at = np.unique(np.linspace(0, points - 1, min(points, LOOK_POINTS)).astype(int))
    weight = np.sqrt(np.mean(block.weight**2, axis=1, keepdims=True))[:, :, at]
    return make_block(block.s[at], block.values[:, at], np.repeat(weight, 2, axis=1))


def _score(block: Block, orders: Sequence[int], kind: PoleSet, delay: FloatArray) -> float:
    """Sum the logarithms of the misfit over several orders: the right delay needs the fewest."""
    forth = np.exp(block.s * delay[:, np.newaxis])
    moved = make_block(block.s, block.values * forth, block.weight)
    most = largest_order([block])
    return sum(math.log(max(quick_misfit(moved, min(n, most), kind), 1e-300)) for n in orders)


def quick_misfit(block: Block, order: int, kind: PoleSet) -> float:
    """Return χ² of a linearised fit of given order, two relocations from poles spread evenly."""
    low, high = float(block.s[0].imag), float(block.s[-1].imag)
    poles = kind.like(starting_poles(low or high * 1e-3, high, order))
    for _ in range(2):
        poles = relocate([block], poles, 2)
    rows = weighted(block, poles.evaluate(block.s, 2))
    q = np.linalg.qr(rows)[0]
    along = q.transpose(0, 2, 1) @ block.target[:, :, np.newaxis]
    rest = block.target[:, :, np.newaxis] - q @ along
    misfit = float(np.vdot(rest, rest))
    return misfit if math.isfinite(misfit) else math.inf
