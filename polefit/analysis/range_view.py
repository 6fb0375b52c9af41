"""The range of a prediction, and what the data could have shown in it."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from polefit.confirmation import NodeLimit, RangeView
from polefit.engine.blocks import FloatArray
from polefit.modes import Detection, Identification, Mode

NOTICED = 1.0
"""A growing mode counts as seen if it would have been found when its peak is as high as this many
times the typical response of the node in the range (common practice: it doubles what is there)."""
COARSEST_STEP = 5.0
"""Half-widths of the supposed mode by which samples may lie apart. In trials with noise of 1 % the
detection limit held up to 10, beside a single other mode; half of that is asked for."""
FINE_STEP = 0.5
"""Half-widths between the points of a sweep that is asked for."""
MOST_POINTS = 400
"""A sweep that would take more has its points spaced logarithmically."""
CURVE = 201
"""Points at which the model is looked at for the typical response."""


@dataclass(frozen=True)
class Range:
    """A predicted frequency with its range.

    Parameters
    ----------
    near_hz : float
        The prediction.
    within : float
        Half of the range, relative to it.
    """

    near_hz: float
    within: float

    @property
    def low_hz(self) -> float:
        """Lower limit."""
        return self.near_hz * (1 - self.within)

    @property
    def high_hz(self) -> float:
        """Upper limit."""
        return self.near_hz * (1 + self.within)

    def holds(self, mode: Mode) -> bool:
        """Whether the 95 % interval of the mode's frequency lies inside."""
        low, high = _interval(mode)
        return self.low_hz <= low and high <= self.high_hz

    def may_hold(self, mode: Mode) -> bool:
        """Whether the frequency of the mode may lie inside; a real pole has none."""
        low, high = _interval(mode)
        return not mode.real and low <= self.high_hz and high >= self.low_hz

    def distance(self, mode: Mode) -> float:
        """How far the mode lies from the prediction, as a ratio; real poles are farthest."""
        return math.inf if mode.real else abs(math.log(mode.frequency_hz.value / self.near_hz))


def _interval(mode: Mode) -> tuple[float, float]:
    """Return the interval of the frequency; without bounds where they are not known."""
    low, high = mode.frequency_hz.low, mode.frequency_hz.high
    return (-math.inf if low is None else low), (math.inf if high is None else high)


def view_of(result: Identification, asked: Range) -> RangeView | None:
    """Tell what the data could have shown in the range.

    Parameters
    ----------
    result : Identification
        What was found.
    asked : Range
        Where to look.

    Returns
    -------
    RangeView or None
        For the part of the range inside the band; None if there is none, or if the detection
        limit is not known.
    """
    low, high = max(asked.low_hz, result.band_hz[0]), min(asked.high_hz, result.band_hz[1])
    detection = result.detection
    if not low < high or detection is None or detection.frequency_hz.size == 0:
        return None
    axis = np.unique(np.concatenate([one.frequency_hz for one in result.responses]))
    step, at = _largest_step(axis, low, high)
    grid, residue = _limits(detection, low, high)
    peak = residue / (abs(detection.damping_ratio) * 2 * np.pi * grid[:, np.newaxis])
    curve = np.abs(result.model.response(np.linspace(low, high, CURVE)))
    response = np.median(curve, axis=0)
    with np.errstate(divide="ignore", invalid="ignore"):
        ratio = peak / response
    ratio = np.where(np.isnan(ratio), np.inf, ratio)
    order = np.argsort(ratio.max(axis=0), kind="stable")
    limits = tuple(
        NodeLimit(
            channel=result.channels[k],
            residue=float(residue[:, k].max()),
            peak=float(peak[:, k].max()),
            response=float(response[k]),
        )
        for k in order
    )
    return RangeView(
        points=int(np.count_nonzero((axis >= low) & (axis <= high))),
        step_hz=step,
        step_at_hz=at,
        damping_ratio=detection.damping_ratio,
        power=detection.power,
        limits=limits,
        blind_hz=_stretches(grid, ratio.min(axis=1) > NOTICED),
    )


def _largest_step(axis: FloatArray, low: float, high: float) -> tuple[float, float]:
    """Return the step that is largest relative to its frequency, and that frequency."""
    start, end = axis[:-1], axis[1:]
    inside = (start < high) & (end > low)
    start, end = start[inside], end[inside]
    at = np.clip((start + end) / 2, low, high)
    worst = int(np.argmax((end - start) / at))
    return float((end - start)[worst]), float(at[worst])


def _limits(detection: Detection, low: float, high: float) -> tuple[FloatArray, FloatArray]:
    """Return frequencies from low to high, and the limits there; between two, interpolated."""
    known = np.asarray(detection.frequency_hz, dtype=float)
    grid = np.unique(np.concatenate(([low, high], known[(known > low) & (known < high)])))
    columns = []
    for limit in np.asarray(detection.residue, dtype=float).T:
        blind = ~np.isfinite(limit)
        size = np.log(np.where(blind, 1.0, np.maximum(limit, 1e-300)))
        between = np.exp(np.interp(np.log(grid), np.log(known), size))
        columns.append(np.where(np.interp(grid, known, blind.astype(float)) > 0, np.inf, between))
    return grid, np.array(columns).T


def _stretches(grid: FloatArray, blind: np.ndarray) -> tuple[tuple[float, float], ...]:
    """Return where `blind` holds, each stretch up to the nearest frequency at which it does not."""
    edges = np.flatnonzero(np.diff(np.concatenate(([False], blind, [False])).astype(int)))
    last = grid.size - 1
    return tuple(
        (float(grid[max(first - 1, 0)]), float(grid[min(past, last)]))
        for first, past in zip(edges[::2].tolist(), edges[1::2].tolist(), strict=True)
    )


def coarsest_step(view: RangeView) -> float:
    """Return the step that suffices where the largest one was found, in hertz."""
    return COARSEST_STEP * abs(view.damping_ratio) * view.step_at_hz


def sweep(low_hz: float, high_hz: float, damping_ratio: float) -> tuple[float, ...]:
    """Return frequencies that show a mode of this damping between two limits.

    Parameters
    ----------
    low_hz, high_hz : float
        Limits, which the sweep reaches or goes beyond by less than a step.
    damping_ratio : float
        Of the mode to be seen.

    Returns
    -------
    tuple of float
        Multiples of a round step; or with a constant ratio, where that would take too many.
    """
    widest = FINE_STEP * abs(damping_ratio) * low_hz
    decade = 10.0 ** math.floor(math.log10(widest))
    step = decade * max(digit for digit in (1, 2, 5) if digit * decade <= widest * (1 + 1e-9))
    first, last = math.floor(low_hz / step), math.ceil(high_hz / step)
    if last - first < MOST_POINTS:
        return tuple(float(f"{k * step:.12g}") for k in range(max(first, 1), last + 1))
    count = math.ceil(math.log(high_hz / low_hz) / (FINE_STEP * abs(damping_ratio))) + 1
    return tuple(float(f"{f:.6g}") for f in np.geomspace(low_hz, high_hz, count))
