"""What a few samples alone say: a glitch of the data, or a mode much narrower than the step.

A pair with its residue passes through any two samples, so such pairs are not claimed. One that
may grow must not be passed over either: the run is undecided until the place has been looked at.
"""

from __future__ import annotations

import math
from collections.abc import Sequence

import numpy as np

from polefit.analysis.next_points import Plan
from polefit.engine.blocks import shared_axis
from polefit.engine.estimation import Estimation
from polefit.engine.order import largest_order
from polefit.engine.projection import solve
from polefit.engine.refinement import refine
from polefit.engine.significance import information, invert, section_scores, step_at, threshold
from polefit.estimates import si
from polefit.modes import Mode

CHANCE = 1e-4
"""Chance per run that noise is taken for a suspicion."""
POSSIBLY = 2.5
"""Standard deviations below zero from which growth is ruled out."""
MOST = 5
LOOKS = np.linspace(-1.0, 1.0, 13)
"""Points that settle it, in steps of the sweep around the place."""


def suspicions(estimation: Estimation, modes: Sequence[Mode], scale: float) -> list[float]:
    """Return the angular frequencies, rad/s, at which too few samples tell of growth.

    Parameters
    ----------
    estimation : Estimation
        The model, with what was left out of it.
    modes : sequence of Mode
        Those that are claimed: nothing is suspected within a step of them.
    scale : float
        rad/s that is one in the engine.
    """
    blocks, solution = estimation.blocks, estimation.solution
    axis = shared_axis(blocks)
    channels = sum(block.channels for block in blocks)
    limit = threshold(channels, estimation.places, CHANCE) * estimation.whiteness.inflation
    hertz = 2 * math.pi / scale
    places = [f * hertz for m in modes for f in (m.seen_hz or (m.frequency_hz.value,))]
    found: list[float] = []
    for pole in sorted(set(estimation.glitches), key=lambda p: p.imag)[: 2 * MOST]:
        step = float(step_at(axis, np.array([pole.imag]))[0])
        inside = axis[0] + step < pole.imag < axis[-1] - step
        if not inside or any(abs(pole.imag - at) < step for at in (*places, *found)):
            continue
        if solution.sections.order + 2 > largest_order(blocks):
            break
        with_it = solution.sections.join(solution.sections.like(np.array([pole])))
        trial = solve(blocks, with_it, solution.direct)
        trial = refine(blocks, trial, iterations=8, tolerance=0.5)
        own = solution.sections.twofold
        known = information(trial)
        if section_scores(blocks, trial, known).full[own] < limit * estimation.level:
            continue
        settled = complex(trial.sections.own_poles()[own])
        rows, slope = trial.sections.columns(own), trial.sections.pole_gradient(own)
        variance = (slope @ invert(known.poles)[np.ix_(rows, rows)] @ slope.T)[0, 0]
        if settled.real > -POSSIBLY * math.sqrt(max(float(variance) * estimation.level, 0.0)):
            found.append(pole.imag)
    return [at * scale for at in found[:MOST]]


def looks(at: list[float], estimation: Estimation, scale: float) -> list[Plan]:
    """Plan the points that tell a glitch from a mode at each of these angular frequencies."""
    axis = shared_axis(estimation.blocks) * scale
    plans = []
    for omega in at:
        step = float(step_at(axis, np.array([omega]))[0])
        tried = omega + step * LOOKS
        fresh = [w for w in tried if np.min(np.abs(axis - w)) > 0.02 * step]
        points = tuple(float(f"{w / (2 * math.pi):.12g}") for w in fresh)
        where = si(omega / (2 * math.pi), "Hz")
        note = (
            f"a few samples at {where} alone tell of a mode that may grow, much narrower than the "
            "step, or of a glitch: the points asked for there tell which"
        )
        plans.append(Plan(points, note))
    return plans
