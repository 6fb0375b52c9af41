"""The range of a prediction, and what the data could have shown in it."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np

from polefit.confirmation import NodeLimit, RangeView
from polefit.engine.blocks import FloatArray
from polefit.modes import Detection, Identification, Mode, Stretch

COARSE = 2.0
"""Half-widths of the supposed mode from which closer points help: then not even one sample is sure
to lie on the upper half of its peak."""
FINE_STEP = 0.5
"""Half-widths between the points of a sweep that is asked for."""
MOST_POINTS = 400
"""A sweep that would take more has its points spaced logarithmically."""
AT_MOST = 2 * MOST_POINTS
"""No more are asked for at once, even if they do not suffice for so narrow a mode."""


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
    axis = sampled(result)
    step, at = largest_step(axis, low, high)
    inside = axis[(axis >= low) & (axis <= high)]
    cut = _cut(detection, low, high, inside)
    return RangeView(
        points=inside.size,
        step_hz=step,
        step_at_hz=at,
        detection=cut,
        limits=_node_limits(cut, result),
    )


def _cut(detection: Detection, low: float, high: float, inside: FloatArray) -> Detection:
    """Return what is known of the range only; where nothing was tried inside, what is nearest."""
    known = detection.frequency_hz
    rows = np.flatnonzero((known >= low) & (known <= high))
    if rows.size == 0:
        rows = np.array([np.argmin(np.abs(known - np.clip(known, low, high)))])
    everywhere = _overlap(detection.blind_everywhere_hz, low, high)
    blind = [np.any([(a <= f) & (f <= b) for a, b in everywhere]) for f in inside]
    return replace(
        detection,
        frequency_hz=known[rows],
        residue=detection.residue[rows],
        response=detection.response[rows],
        leverage=detection.leverage[rows],
        blind_hz=tuple(_overlap(own, low, high) for own in detection.blind_hz),
        blind_everywhere_hz=everywhere,
        blind_share=float(np.mean(blind)) if blind else float(bool(everywhere)),
    )


def _overlap(blind: Sequence[Stretch], low: float, high: float) -> tuple[Stretch, ...]:
    """Return the parts of stretches that lie in the range."""
    return tuple((max(a, low), min(b, high)) for a, b in blind if a < high and b > low)


def _node_limits(cut: Detection, result: Identification) -> tuple[NodeLimit, ...]:
    """Return what each channel would have shown at its least favourable frequency, best first."""
    relative = cut.relative
    worst = np.argmax(relative, axis=0)
    order = np.argsort(relative.max(axis=0), kind="stable")
    return tuple(
        NodeLimit(
            channel=result.channels[k],
            frequency_hz=float(cut.frequency_hz[worst[k]]),
            residue=float(cut.residue[worst[k], k]),
            peak=float(cut.peak[worst[k], k]),
            response=float(cut.response[worst[k], k]),
            blind_hz=cut.blind_hz[k],
        )
        for k in order.tolist()
    )


def sampled(result: Identification) -> FloatArray:
    """Return all frequencies at which anything was sampled."""
    return np.unique(np.concatenate([one.frequency_hz for one in result.responses]))


def largest_step(axis: FloatArray, low: float, high: float) -> tuple[float, float]:
    """Return the step that is largest relative to its frequency, and that frequency."""
    start, end = axis[:-1], axis[1:]
    inside = (start < high) & (end > low)
    start, end = start[inside], end[inside]
    at = np.clip((start + end) / 2, low, high)
    worst = int(np.argmax((end - start) / at))
    return float((end - start)[worst]), float(at[worst])


def undersampled(result: Identification, view: RangeView) -> tuple[Stretch, ...]:
    """Return the blind stretches of the range in which closer points would help."""
    axis, blind = sampled(result), view.detection.blind_everywhere_hz
    steps = [largest_step(axis, low, high) for low, high in blind]
    width = COARSE * abs(view.detection.damping_ratio)
    return tuple(
        stretch for stretch, (step, at) in zip(blind, steps, strict=True) if step > width * at
    )


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
        Multiples of a round step; or with a constant ratio, where that would take too many; never
        more than :data:`AT_MOST`.
    """
    widest = FINE_STEP * abs(damping_ratio) * low_hz
    decade = 10.0 ** math.floor(math.log10(widest))
    step = decade * max(digit for digit in (1, 2, 5) if digit * decade <= widest * (1 + 1e-9))
    first, last = math.floor(low_hz / step), math.ceil(high_hz / step)
    if last - first < MOST_POINTS:
        return tuple(float(f"{k * step:.12g}") for k in range(max(first, 1), last + 1))
    count = math.ceil(math.log(high_hz / low_hz) / (FINE_STEP * abs(damping_ratio))) + 1
    spaced = np.geomspace(low_hz, high_hz, min(count, AT_MOST))
    return tuple(float(f"{f:.12g}") for f in spaced)
