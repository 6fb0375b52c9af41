"""What would have gone unnoticed, in words that text, page and figures share."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from polefit.estimates import si
from polefit.modes import Detection, Identification, Stretch
from polefit.report.phrases import hertz, percent, plain
from polefit.responses import UNITS

NOISELESS = 1e-6  # of the response: a detection limit below is not worth its digits
ALIKE = 1.5  # a typical limit this near to the worst need not be told
FEW = 3


def detection_limit(result: Identification) -> str | None:
    """Say which hidden mode would have been found, at worst and typically over the band.

    At each frequency the node that sees such a mode best counts; stretches where every node is
    blind are named instead. None where nothing was computed.
    """
    found = result.detection
    if found is None or found.frequency_hz.size == 0:
        return None
    ratio = f"a mode with damping ratio {si(found.damping_ratio, '', 2)}"
    best = best_channel(found)
    seen = np.isfinite(best.relative)
    if not seen.any():
        return f"{ratio} would have gone unnoticed: the data are blind to it"
    order = np.flatnonzero(seen)[np.argsort(best.relative[seen])]
    middle, worst = int(order[order.size // 2]), int(order[-1])
    text = f"{ratio} would have been found with {percent(found.power)} probability from a peak of "
    if worst != middle and best.relative[worst] > max(ALIKE * best.relative[middle], NOISELESS):
        bottom = _absolute(float(best.peak[worst]), result.quantity)
        text += f"typically {_height(result, best, middle)} and at worst {bottom} "
        text += f"({decibels(float(best.relative[worst]))}) at {_node(result)}"
    else:
        text += f"{_height(result, best, worst)} at {_node(result)}"
    if found.blind_everywhere_hz:
        text += f", except from {stretches_text(found.blind_everywhere_hz)}, where "
        text += f"{'it' if len(result.channels) == 1 else 'every node'} is blind"
    return text


@dataclass(frozen=True, eq=False)
class Best:
    """The most telling channel at each of M frequencies; NaN where it is blind.

    Parameters
    ----------
    peak, relative : (M,) float ndarray
        Its limit, as the height of a peak and over the response.
    """

    peak: NDArray[np.float64]
    relative: NDArray[np.float64]


def best_channel(found: Detection) -> Best:
    """Return the limits of the channel with the lowest limit relative to its response."""
    relative, rows = found.relative, np.arange(found.frequency_hz.size)
    at = np.argmin(relative, axis=1)
    lowest = relative[rows, at]
    blind = ~np.isfinite(lowest) | within(found.frequency_hz, found.blind_everywhere_hz)
    return Best(np.where(blind, np.nan, found.peak[rows, at]), np.where(blind, np.nan, lowest))


def within(frequency: NDArray[np.float64], blind: Sequence[Stretch]) -> NDArray[np.bool_]:
    """Tell which frequencies lie in one of the stretches."""
    inside = np.zeros(frequency.size, dtype=bool)
    for low, high in blind:
        inside |= (low <= frequency) & (frequency <= high)
    return inside


def stretches_text(blind: Sequence[Stretch], most: int = FEW) -> str:
    """Write stretches of frequency, the first of them."""
    shown = ", ".join(f"{hertz(low)} to {hertz(high)}" for low, high in blind[:most])
    rest = len(blind) - most
    return shown + (f" and {rest} more" if rest > 0 else "")


def decibels(relative: float) -> str:
    """Write a ratio of heights in decibels, whole ones."""
    return si(round(20 * math.log10(relative)) + 0.0, "", 3) + " dB"


def _node(result: Identification) -> str:
    names = list(dict.fromkeys(c.output for c in result.channels))
    return plain(names[0], 30) if len(result.channels) == 1 else "the most telling node"


def _height(result: Identification, best: Best, at: int) -> str:
    """Write one limit; one far below the response, of exact data, only as such."""
    return height(float(best.peak[at]), float(best.relative[at]), result.quantity)


def height(peak: float, relative: float, quantity: str) -> str:
    """Write a limit as the height of a peak, with decibels of the response behind it."""
    if not (math.isfinite(peak) and math.isfinite(relative)):
        return "blind"
    if relative < NOISELESS:
        return "a millionth of the response"
    return f"{_absolute(peak, quantity)} ({decibels(relative)} of the response)"


def _absolute(peak: float, quantity: str) -> str:
    return si(peak, UNITS.get(quantity, ""), 2)


def channel_rows(result: Identification) -> list[tuple[str, str, str, str]]:
    """Tabulate the channels: name, typical and worst limit, blind stretches."""
    found = result.detection
    if found is None or found.frequency_hz.size == 0:
        return []
    rows = []
    peak, relative = found.peak, found.relative
    for k, channel in enumerate(result.channels):
        own = found.blind_hz[k]
        usable = np.isfinite(relative[:, k]) & ~within(found.frequency_hz, own)
        at = np.flatnonzero(usable)[np.argsort(relative[usable, k])]
        cells = ["–", "–"]
        if at.size:
            middle, worst = int(at[at.size // 2]), int(at[-1])
            cells = [
                height(float(peak[i, k]), float(relative[i, k]), result.quantity)
                for i in (middle, worst)
            ]
            cells[1] += f" at {hertz(float(found.frequency_hz[worst]), 3)}"
        blind = stretches_text(own) if own else "nowhere"
        rows.append((plain(str(channel), 40), cells[0], cells[1], blind))
    return rows
