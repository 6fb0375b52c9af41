"""SI prefixes on axes, and when a frequency axis is logarithmic."""

from __future__ import annotations

import math
from collections.abc import Callable
from typing import Any

from matplotlib.axis import Axis
from matplotlib.ticker import FuncFormatter, LogLocator, MaxNLocator, NullLocator

from polefit.estimates import PREFIXES, si, takes_prefix

WIDE_DECADES = 1.5  # a frequency axis that spans more is logarithmic


def is_wide(low: float, high: float) -> bool:
    """Whether positive limits span so much that a logarithmic axis reads better."""
    return 0 < low < high and math.log10(high / low) > WIDE_DECADES


def prefix_for(size: float) -> tuple[float, str]:
    """Return (factor, prefix) that brings `size` between 1 and 1000."""
    if not (math.isfinite(size) and size > 0):
        return 1.0, ""
    power = 3 * math.floor(math.log10(size) / 3 + 1e-12)
    power = min(max(power, min(PREFIXES)), max(PREFIXES))
    return 10.0**power, PREFIXES[power]


def linear_axis(axis: Axis, size: float, name: str, unit: str, *, most: int = 9) -> None:
    """Label a linear axis whose largest value is `size` with one prefix for all ticks.

    The data stay in the unit without prefix, so that more can be drawn over them.
    """
    factor, prefix = prefix_for(size) if takes_prefix(unit) else (1.0, "")
    axis.set_major_formatter(FuncFormatter(_tick(lambda value: f"{value / factor:.6g}")))
    axis.set_major_locator(MaxNLocator(nbins=max(most - 2, 2), steps=[1, 2, 2.5, 5, 10]))
    axis.set_label_text(f"{name} in {prefix}{unit}" if name and unit else name, parse_math=False)


def log_axis(axis: Axis, low: float, high: float, name: str, unit: str, *, most: int = 9) -> None:
    """Label a logarithmic axis between `low` and `high`; every tick carries its prefix.

    Axes of less than `most`/3 decades have ticks at 1, 2, 5; longer ones at decades only.
    """
    decades = math.log10(high / low) if 0 < low < high else 1.0
    subs = (1.0, 2.0, 5.0) if 3 * decades <= most else (1.0,)
    axis.set_major_locator(LogLocator(base=10, subs=subs, numticks=most))
    axis.set_minor_locator(NullLocator())
    axis.set_major_formatter(FuncFormatter(_tick(lambda value: si(value, unit, 3))))
    axis.set_label_text(name, parse_math=False)


def powers_of_ten(axis: Axis, size: float, name: str) -> None:
    """Label a linear axis of a ratio with one power of ten, given in the label."""
    power = math.floor(math.log10(size)) if math.isfinite(size) and size > 0 else 0
    if -2 <= power <= 2:
        power = 0
    scale = 10.0**power
    axis.set_major_formatter(FuncFormatter(_tick(lambda value: f"{value / scale:.4g}")))
    axis.set_major_locator(MaxNLocator(nbins=5, steps=[1, 2, 2.5, 5, 10]))
    axis.set_label_text(name if power == 0 else f"{name} (×1e{power})", parse_math=False)


def _tick(write: Callable[[float], str]) -> Callable[[float, Any], str]:
    def formatted(value: float, _position: Any = None) -> str:
        return write(value if abs(value) > 1e-300 else 0.0).replace("-", "−")

    return formatted
