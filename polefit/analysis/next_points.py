"""What to simulate next: the frequencies that tell most of a growth rate in question.

Each further sample adds to the Fisher information of all parameters of the model; those are
taken one after the other that lower the variance of the growth rate most (D. V. Lindley's
sequential design by information, as in V. V. Fedorov, Theory of Optimal Experiments, 1972, from
memory: c-optimality).
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from polefit.engine.blocks import Block, FloatArray, make_block, one_channel, shared_axis, weighted
from polefit.engine.estimation import Estimation
from polefit.engine.noise import variance
from polefit.engine.projection import Projected, Solution, model_values
from polefit.engine.significance import invert
from polefit.estimates import si
from polefit.modes import Detection, Mode, Verdict

FEWEST_POINTS, MOST_POINTS = 5, 24
WANTED = 6.0
"""Growth rate over its expected uncertainty at which no more points are asked for: twice what a
verdict needs, since estimates and expectations err."""
SATURATED = 0.01
"""Relative gain of one more point below which none is worth simulating."""
AROUND = np.linspace(-10.0, 10.0, 81)
"""Where points are tried, in half-widths from the mode."""
ACROSS = 60
"""Points tried over the band, which hold down everything else."""
CLOSEST = 0.05
"""Share of the half-width that separates a further point from any other."""
CHANNELS = 4
"""Channels that are counted: those that show the mode best."""
FEW_PER_WIDTH = 2.0
"""Samples in the 3-dB width of a mode below which it is under-sampled (common practice)."""
SURE = 10.0
"""Growth rates known so well need no more points, however few there are in the width."""
MODES = 3
MOST_IN_STRETCH, MOST_IN_ALL = 200, 1000


@dataclass(frozen=True)
class Plan:
    """Points to simulate and what they are expected to bring.

    Parameters
    ----------
    points_hz : tuple of float
        Rising.
    note : str
        The expected gain in a sentence.
    """

    points_hz: tuple[float, ...]
    note: str


def next_plans(
    estimation: Estimation,
    modes: Sequence[Mode],
    detection: Detection | None,
    verdict: Verdict,
    scale: float,
) -> list[Plan]:
    """Plan further points where the run is undecided or modes are under-sampled.

    Parameters
    ----------
    estimation : Estimation
        The model.
    modes : sequence of Mode
        Most dangerous first; at most three are planned for.
    detection : Detection or None
        What would have gone unnoticed.
    verdict : str
        Of the run.
    scale : float
        rad/s in the normalised frequency unit.

    Returns
    -------
    list of Plan
        One for each mode that more points would help; one for the blind stretches where they
        leave a run undecided.
    """
    ringing = [m for m in modes if m.in_band and (m.pole_rad_per_s.imag > 0 or m.seen_hz)]
    asked = [m for m in ringing if m.verdict == "undecided"]
    asked += [m for m in ringing if m not in asked and _sparse(m, estimation, scale)]
    plans = [_plan(estimation, mode, scale) for mode in asked[:MODES]]
    found = [plan for plan in plans if plan is not None]
    if verdict == "undecided" and not found and detection is not None:
        found += _into_blind_stretches(detection)
    return found


def _into_blind_stretches(detection: Detection) -> list[Plan]:
    """Plan points evenly over the stretches where every node is blind, a mode's width apart."""
    stretches = detection.blind_everywhere_hz
    points: list[float] = []
    for low, high in stretches:
        step = abs(detection.damping_ratio) * max(low, high / 100)
        count = min(max(math.ceil((high - low) / step), 2), MOST_IN_STRETCH)
        points += np.linspace(low, high, count).tolist()
    if not points or len(points) > MOST_IN_ALL:
        return []
    listed = tuple(sorted({float(f"{point:.12g}") for point in points}))
    note = (
        f"{len(listed)} points fill the stretches where every node is blind to a mode with damping "
        f"ratio {detection.damping_ratio:g}, half its width apart or as near to that as fits"
    )
    return [Plan(listed, note)]


def _centre(mode: Mode) -> complex:
    """Return where the strongest line of a mode lies in the sweep, rad/s."""
    pole = mode.pole_rad_per_s
    return complex(pole.real, 2 * math.pi * mode.seen_hz[0]) if mode.seen_hz else pole


def _sparse(mode: Mode, estimation: Estimation, scale: float) -> bool:
    """Tell whether too few samples lie within the width of a mode that is not yet sure."""
    pole, std = _centre(mode) / scale, mode.growth_rate_per_s.std
    if std is not None and abs(mode.pole_rad_per_s.real) > SURE * std:
        return False
    axis = shared_axis(estimation.blocks)
    inside = np.sum(np.abs(axis - pole.imag) < abs(pole.real))
    return bool(inside < FEW_PER_WIDTH)


def _plan(estimation: Estimation, mode: Mode, scale: float) -> Plan | None:
    solution = estimation.solution
    pole = _centre(mode) / scale
    index = int(np.argmin(np.abs(solution.sections.own_poles() - pole)))
    which = _best_channels(estimation, index)
    tried = _candidates(estimation, pole, mode)
    if tried.size == 0:
        return None
    design = _Design(estimation, which)
    rows = design.rows(1j * tried)
    covariance = design.covariance()
    direction = np.zeros(len(covariance))
    direction[solution.sections.columns(index)] = solution.sections.pole_gradient(index)[0]
    before = math.sqrt(max(float(direction @ covariance @ direction), 0.0))
    chosen, after = _greedy(rows, covariance, direction, abs(pole.real), tried)
    if not chosen or before == 0:
        return None
    points = tuple(sorted(float(f"{tried[i] * scale / (2 * math.pi):.12g}") for i in chosen))
    note = (
        f"further points ({len(points)}) around {si(mode.frequency_hz.value, 'Hz')} are expected "
        "to lower the standard uncertainty of that mode's growth rate from "
        f"{si(before * scale, '1/s', 3)} to {si(after * scale, '1/s', 3)}, in the model as it is; "
        "simulate them at the same nodes and add them to the sweep"
    )
    return Plan(points, note)


def _best_channels(estimation: Estimation, index: int) -> list[tuple[int, int]]:
    """Return (block, channel) of those that show a section best over their noise."""
    sections = estimation.solution.sections
    listed = []
    for b, (block, part) in enumerate(
        zip(estimation.blocks, estimation.solution.parts, strict=True)
    ):
        strength = np.abs(sections.own_residues(part.coefficients)[index])
        strength = strength * np.sqrt(np.mean(block.weight**2, axis=(1, 2)))
        listed += [(float(strength[k]), b, k) for k in range(block.channels)]
    listed.sort(reverse=True)
    return [(b, k) for _, b, k in listed[:CHANNELS]]


def _candidates(estimation: Estimation, pole: complex, mode: Mode) -> FloatArray:
    """Return frequencies to try: around the mode and over the band, where none is yet."""
    axis = shared_axis(estimation.blocks)
    width = max(abs(pole.real), 1e-9 * abs(pole))
    tried = np.concatenate(
        (pole.imag + width * AROUND, np.linspace(axis[0], axis[-1], ACROSS + 2)[1:-1])
    )
    tried = np.unique(tried[(tried > axis[0]) & (tried < axis[-1])])
    near = np.clip(np.searchsorted(axis, tried), 1, axis.size - 1)
    distance = np.minimum(np.abs(tried - axis[near]), np.abs(tried - axis[near - 1]))
    fresh: FloatArray = tried[distance > CLOSEST * width]
    return fresh


class _Design:
    """Joint Fisher information of the poles and the linear parameters of some channels."""

    def __init__(self, estimation: Estimation, which: Sequence[tuple[int, int]]) -> None:
        self.estimation, self.which = estimation, which
        sections = estimation.solution.sections
        self.poles = sections.order
        self.linear = sections.order + sections.direct_columns(estimation.solution.direct)
        self.size = self.poles + self.linear * len(which)

    def covariance(self) -> FloatArray:
        """Return that of all parameters, from the samples there are."""
        total = np.zeros((self.size, self.size))
        for at, (b, k) in enumerate(self.which):
            jacobian = self._jacobian(one_channel(self.estimation.blocks[b], k), b, k, at)
            total += jacobian.T @ jacobian
        factor = self.estimation.level * self.estimation.whiteness.inflation
        return invert(total) * factor

    def rows(self, s: np.ndarray) -> FloatArray:
        """Return what each new point would add, (C, 2·channels, parameters), in units of noise."""
        parts = []
        for at, (b, k) in enumerate(self.which):
            block = self._expected(s, b, k)
            jacobian = self._jacobian(block, b, k, at).reshape(2, s.size, self.size)
            parts.append(jacobian.transpose(1, 0, 2))
        return np.concatenate(parts, axis=1) / math.sqrt(self.estimation.level)

    def _jacobian(self, block: Block, b: int, k: int, at: int) -> FloatArray:
        solution = self.estimation.solution
        coefficients = solution.parts[b].coefficients[k : k + 1]
        slopes, along = solution.sections.chain(coefficients)
        columns = weighted(block, solution.sections.evaluate_with_slopes(block.s, solution.direct))[
            0
        ]
        jacobian = np.zeros((columns.shape[0], self.size))
        m = self.linear
        jacobian[:, : self.poles] = columns[:, m:] @ slopes[0] + columns[:, :m] @ along[0]
        start = self.poles + at * m
        jacobian[:, start : start + m] = columns[:, :m]
        return jacobian

    def _expected(self, s: np.ndarray, b: int, k: int) -> Block:
        """Return new points of one channel as the model expects them, with the noise law's weight.

        Known parts of the noise are those of the nearest samples.
        """
        block, law = self.estimation.blocks[b], self.estimation.laws[b]
        values = model_values(
            s, self.estimation.solution, _channel_of(self.estimation.solution, b, k)
        )
        own = law._replace(relative=law.relative[k : k + 1], absolute=law.absolute[k : k + 1])
        least = variance(own, np.abs(values), np.zeros((1, 2, s.size)))
        nearest = np.abs(block.s.imag[np.newaxis] - s.imag[:, np.newaxis]).argmin(axis=1)
        seen = 1 / block.weight[k : k + 1][:, :, nearest] ** 2
        size = np.abs(block.values[k, nearest])
        explained = variance(own, size[np.newaxis], np.zeros((1, 2, s.size)))
        known = np.maximum(seen - explained, 0.0)
        return make_block(s, values, 1 / np.sqrt(least + known))


def _channel_of(solution: Solution, b: int, k: int) -> Projected:
    part = solution.parts[b]
    return part._replace(coefficients=part.coefficients[k : k + 1])


def _greedy(
    rows: FloatArray,
    covariance: FloatArray,
    direction: FloatArray,
    size: float,
    tried: FloatArray,
) -> tuple[list[int], float]:
    """Choose points one after the other; also the standard deviation that is left."""
    covariance = covariance.copy()
    left = float(direction @ covariance @ direction)
    chosen: list[int] = []
    free = np.ones(len(rows), dtype=bool)
    gap = CLOSEST * size
    while len(chosen) < MOST_POINTS and free.any():
        if len(chosen) >= FEWEST_POINTS and size > WANTED * math.sqrt(left):
            break
        seen = rows @ (covariance @ direction)
        spread = rows @ covariance @ rows.transpose(0, 2, 1) + np.eye(rows.shape[1])
        gain = np.einsum("cr,cr->c", seen, np.linalg.solve(spread, seen[..., np.newaxis])[..., 0])
        best = int(np.argmax(np.where(free, gain, -1.0)))
        if gain[best] < SATURATED * left:
            break
        chosen.append(best)
        free &= np.abs(tried - tried[best]) > gap
        tall = covariance @ rows[best].T
        covariance -= tall @ np.linalg.solve(spread[best], tall.T)
        left = max(float(direction @ covariance @ direction), 0.0)
    return chosen, math.sqrt(max(left, 0.0))
