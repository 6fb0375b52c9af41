"""Whether a growing mode is still there in other fits: other orders, other starts, other windows.

Each is asked of growing modes in the band only: they are what an alarm would rest on.
"""

from __future__ import annotations

import math
from collections.abc import Sequence

import numpy as np

from polefit.analysis.candidate import Candidate, nearest
from polefit.engine.blocks import Block, ComplexArray, window
from polefit.engine.estimation import Estimation
from polefit.engine.order import first_model, largest_order
from polefit.engine.projection import Solution, solve
from polefit.engine.refinement import refine
from polefit.engine.unstable_part import project
from polefit.modes import Evidence

CAPPED = 10
"""A search that the number of points stopped at this many poles or more has not come to rest: its
growing modes do not count. Below it, a few points may show a simple circuit."""
OTHER_DAMPING = 0.1
"""Damping ratio of the poles of the other start; the usual one is ten times less."""
WORSE = 10.8
"""A fit from another start whose χ² is so much larger (p = 0.001, one degree) got stuck: it has no
opinion."""
CUT = 1 / 3
"""Share of the band on either side of a mode that a window leaves out."""
FEWEST = 3.0
"""Samples for each parameter that a window must hold."""
CLEAR = 5.0
"""Times its error by which an unstable part must be expected to stand out for the test to count."""
SEEN = 0.5
"""Share of the expected unstable part that must be seen."""


def over_orders(c: Candidate, estimation: Estimation, scale: float) -> Evidence:
    """Check that the pole is there, on the same side, at a higher order."""
    name = "persistence over orders"
    pole, order = c.pole / scale, estimation.past.sections.order
    if order == estimation.solution.sections.order:
        reached = estimation.richest.sections.order >= CAPPED
        too_few = "too few points for a model of higher order"
        return Evidence(name, False if reached and c.pole.real > 0 else None, too_few)
    other = nearest(pole, estimation.past.sections.poles())
    if other is not None and other == pole:
        return Evidence(name, None, "a model of higher order could not be fitted any better")
    return _compared(
        name,
        c,
        scale,
        other,
        f"with {order} poles instead of {estimation.solution.sections.order}",
        side=False,
    )


def over_starts(c: Candidate, estimation: Estimation, scale: float) -> Evidence:
    """Check that a search from quite other poles comes to the same one."""
    name = "persistence over starts"
    solution, blocks = estimation.solution, estimation.blocks
    order = min(solution.sections.order + 2, largest_order(blocks))
    start = first_model(blocks, order, kind=solution.sections, damping=OTHER_DAMPING)
    found = refine(blocks, start, iterations=8, tolerance=0.5)
    if not found.misfit < solution.misfit + WORSE * estimation.level:
        return Evidence(name, None, "a search from other poles ended at a worse fit: no opinion")
    other = nearest(c.pole / scale, found.sections.poles())
    return _compared(name, c, scale, other, "found anew from broader starting poles")


def over_windows(c: Candidate, estimation: Estimation, scale: float) -> Evidence:
    """Check that either side of the band may be cut without losing the pole."""
    name = "persistence over windows"
    at = c.pole.imag / scale
    low = min(float(block.s[0].imag) for block in estimation.blocks)
    high = max(float(block.s[-1].imag) for block in estimation.blocks)
    outcomes = []
    for bottom, top in ((low + CUT * (at - low), high), (low, high - CUT * (high - at))):
        fitted = _within(estimation, bottom, top)
        if fitted is not None:
            other = nearest(c.pole / scale, fitted.sections.poles())
            outcomes.append(_compared(name, c, scale, other, "with a third of one side cut off"))
    if not outcomes:
        return Evidence(name, None, "too few points in a part of the band")
    return next((one for one in outcomes if one.passed is False), outcomes[0])


def _within(estimation: Estimation, low: float, high: float) -> Solution | None:
    """Fit the part of the data between two frequencies, starting from the poles there are."""
    blocks = [cut for b in estimation.blocks if (cut := window(b, low, high)) is not None]
    solution = estimation.solution
    if len(blocks) < len(estimation.blocks):
        return None
    per_channel = 2 * solution.sections.order + solution.direct
    if min(2 * block.s.size for block in blocks) < FEWEST * per_channel:
        return None
    start = solve(blocks, solution.sections, solution.direct)
    return refine(blocks, start, iterations=8, tolerance=0.5)


def _compared(
    name: str, c: Candidate, scale: float, other: complex | None, how: str, side: bool = True
) -> Evidence:
    """Compare with the pole of another fit: near, and on the same side where `side` asks for it."""
    pole = c.pole / scale
    std = math.sqrt(float(np.trace(c.covariance))) / scale
    allowed = 5 * std + 0.5 * abs(pole.real)
    shift = math.inf if other is None else abs(other - pole)
    share = shift / max(abs(pole.real), 1e-300)
    moves = f"{share:.2g} half-widths" if share > 1e-6 else "less than a millionth half-width"
    passed = shift <= allowed
    detail = f"{how} it " + ("is not found" if other is None else f"moves by {moves}")
    if passed and side and other is not None and other.real <= 0 < pole.real:
        passed, detail = False, f"{detail} and decays"
    return Evidence(name, passed, detail)


def unstable_part(c: Candidate, estimation: Estimation, scale: float) -> Evidence:
    """Check that the data have the unstable part that the mode would give them."""
    name = "projection on unstable functions"
    block, values, std, residue = _best_channel(c, estimation, scale)
    found = project(block.s.imag, values, std, c.pole / scale, residue)
    if found is None or not found.expected > CLEAR * found.error:
        return Evidence(
            name, None, "the sweep is too coarse, too narrow or too noisy around the mode"
        )
    share = found.seen / found.expected
    return Evidence(
        name,
        share > SEEN,
        f"of the unstable part that the mode would give the data {share:.0%} is seen, "
        f"give or take {found.error / found.expected:.0%}; half of it is needed",
    )


def _best_channel(
    c: Candidate, estimation: Estimation, scale: float
) -> tuple[Block, ComplexArray, np.ndarray, complex]:
    """Return axis, response, its noise and the residue where the mode shows best."""
    listed: list[tuple[float, int, int, complex]] = []
    sections = estimation.solution.sections
    for b, part in enumerate(estimation.solution.parts):
        residues = sections.own_residues(part.coefficients)[c.index]
        noise = np.sqrt(np.mean(estimation.noise[b].sum(axis=1), axis=1))
        listed += [
            (abs(r) / max(float(noise[k]), 1e-300), b, k, complex(r))
            for k, r in enumerate(residues)
        ]
    _, b, k, residue = max(listed, key=lambda one: one[0])
    block = estimation.blocks[b]
    return block, block.values[k], np.sqrt(estimation.noise[b][k].sum(axis=0)), residue


def persistence(
    c: Candidate, estimation: Estimation, scale: float, questioned: bool
) -> Sequence[Evidence]:
    """Collect these tests of one mode; all of them only where an alarm would rest on it."""
    orders = over_orders(c, estimation, scale)
    if not questioned or c.pole.imag <= 0:
        return (orders,)
    tests = (over_starts, over_windows, unstable_part)
    return (orders, *(test(c, estimation, scale) for test in tests))
