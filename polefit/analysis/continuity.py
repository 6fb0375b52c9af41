"""Steps and single samples that stand out of an otherwise smooth sweep."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray
from scipy.ndimage import maximum_filter1d

from polefit.estimates import si
from polefit.responses import ComplexArray, FloatArray, ResponseSet

STANDS_OUT = 5.0
"""A place is told where it exceeds everything around it so many times."""
MATCH = 0.15
"""Share of the pattern of a step or a spike that may be left unexplained."""
MOST_NOTES = 3
_AROUND = 10
_PATTERN = 4
_CANDIDATES = 20
_FEWEST = 30
_INNER = slice(3, -3)
_OR_A_MODE = (
    "or a mode narrower than the step of the sweep; simulate that stretch again, with finer steps"
)
_HALF = np.array([15.0, -10.0, 3.0]) / 8.0
# Differences of the parabolas through three samples on either side, half a step from each,
# around a unit step (in the gap in the middle) and around a unit sample.
_STEP = np.array([0.0, -3.0, 7.0, -8.0, 7.0, -3.0, 0.0]) / 8.0
_SPIKE = np.array([-3.0, 10.0, -15.0, 15.0, -10.0, 3.0]) / 8.0


def continuity_notes(sets: Sequence[ResponseSet]) -> list[str]:
    """Tell of steps and single samples that stand out; a few at most.

    Parameters
    ----------
    sets : sequence of ResponseSet
        The data.

    Returns
    -------
    list of str
        One sentence each. A resonance much narrower than the step of the sweep looks alike, so
        they decide nothing.
    """
    found: dict[str, list[str]] = {}
    for one in sets:
        for k, channel in enumerate(one.channels):
            place = _place(one.frequency_hz, one.values[:, k])
            if place is not None:
                found.setdefault(place, []).append(str(channel))
    return [
        f"{', '.join(names[:3])}{f' and {len(names) - 3} more' if len(names) > 3 else ''}: {place}"
        for place, names in list(found.items())[:MOST_NOTES]
    ]


def _place(frequency: FloatArray, values: ComplexArray) -> str | None:
    """Find the first place of one response that stands out; None if none does."""
    if values.size < _FEWEST:
        return None
    jump = _differences(values)
    size = np.abs(jump)
    floor = np.maximum(_around(size), float(np.median(size)))
    candidates = np.flatnonzero(size[_INNER] > STANDS_OUT * floor[_INNER]) + _INNER.start
    for at in candidates[np.argsort(-size[candidates] / floor[candidates])][:_CANDIDATES]:
        step, missed = _match(jump[at - 3 : at + 4], _STEP)
        gap = int(at) + 2  # the gap behind this sample
        if missed < MATCH:
            share = abs(step) / float(np.median(np.abs(values[gap - 2 : gap + 4])))
            return (
                f"the response jumps by {share:.2g} of itself between "
                f"{si(frequency[gap], 'Hz')} and {si(frequency[gap + 1], 'Hz')}: sweeps joined "
                f"with a step, {_OR_A_MODE}"
            )
        for back in (2, 3):
            if _match(jump[at - back : at - back + 6], _SPIKE)[1] < MATCH:
                return (
                    f"the sample at {si(frequency[at - back + 5], 'Hz')} stands out of its "
                    f"neighbours: a faulty point, {_OR_A_MODE}"
                )
    return None


def _around(size: FloatArray) -> FloatArray:
    """Return the largest value near each place, the pattern around it left out."""
    shift = (_AROUND + _PATTERN) // 2 + 1
    width = _AROUND - _PATTERN
    wide = np.pad(maximum_filter1d(size, width, mode="constant"), shift)
    near: FloatArray = np.maximum(wide[: size.size], wide[2 * shift :])
    return near


def _differences(values: ComplexArray) -> NDArray[np.complex128]:
    """Return how far parabolas from the left and from the right miss each other in each gap."""
    left = _HALF[0] * values[2:-3] + _HALF[1] * values[1:-4] + _HALF[2] * values[:-5]
    right = _HALF[0] * values[3:-2] + _HALF[1] * values[4:-1] + _HALF[2] * values[5:]
    difference: NDArray[np.complex128] = left - right
    return difference


def _match(found: ComplexArray, pattern: FloatArray) -> tuple[complex, float]:
    """Fit a pattern; return its size and the share that it leaves unexplained."""
    if found.size < pattern.size:
        return 0.0, 1.0
    size = complex(pattern @ found / (pattern @ pattern))
    left = np.linalg.norm(found - size * pattern) / np.linalg.norm(found)
    return size, float(left)
