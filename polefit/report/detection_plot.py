"""The figure of what would have gone unnoticed: how high a hidden mode's peak had to be."""

from __future__ import annotations

from typing import Any

import numpy as np
from matplotlib.axes import Axes
from matplotlib.lines import Line2D
from matplotlib.patches import Patch
from numpy.typing import NDArray

from polefit.errors import ArgumentError
from polefit.estimates import si
from polefit.modes import Detection, Identification, Mode
from polefit.report import drawing, phrases, wording

_MOST_NAMED = 6
_STYLES: tuple[Any, ...] = ("-", "--", "-.", ":", (0, (5, 1, 1, 1, 1, 1)), (0, (1, 3)))
_HATCHED: dict[str, Any] = {
    "facecolor": "none",
    "edgecolor": drawing.ORANGE,
    "hatch": "///",
    "linewidth": 0.0,
}
_ABOVE = 12.0  # decibels above the response that are shown at least
_MARGIN = 6.0
_BARE = 200.0  # decibels below the response: no number a computer makes is finer


def plot_detection(result: Identification, *, ax: Axes | None = None) -> Axes:
    """Draw how high the peak of a hidden mode had to be to be found, over frequency.

    Parameters
    ----------
    result : Identification
        The answer; its `detection` must be given.
    ax : matplotlib.axes.Axes, optional
        Where; by default a new figure.

    Returns
    -------
    matplotlib.axes.Axes

    Raises
    ------
    ArgumentError
        If the result has no detection limit.

    Notes
    -----
    Heights are over the response of the same channel, in decibels: at 0 dB the peak is as high as
    the response, and above a node is blind. The modes that were found stand at their own height,
    at the node where it is largest; the distance to the line is the margin.
    """
    found = result.detection
    if found is None:
        raise ArgumentError("result: it holds no detection limit; there is nothing to draw")
    ax = drawing.axes_or_new(ax, 7.2, 3.8)
    drawing.dress(
        ax,
        f"Found with {phrases.percent(found.power)} probability above the line: a mode with "
        f"damping ratio {si(found.damping_ratio, '', 2)}",
    )
    low, high = drawing.shown_band(result)
    curves = _decibels(found.relative)
    handles = _draw_channels(ax, result, curves)
    marks = [(i, mode, _own_height(result, found, mode)) for i, mode in enumerate(result.modes)]
    marks = [(i, mode, y) for i, mode, y in marks if np.isfinite(y) and not mode.real]
    drawing.frequency_axis(ax, low, high)
    _set_heights(ax, curves, [y for _, _, y in marks])
    handles += _draw_modes(ax, marks, (low, high)) + _shade(ax, found)
    ax.set_ylabel(f"peak over |{wording.SYMBOL[result.quantity]}| in dB", parse_math=False)
    drawing.legend_below(ax, handles, 4)
    return ax


def _decibels(ratio: NDArray[np.float64]) -> NDArray[np.float64]:
    with np.errstate(divide="ignore", invalid="ignore"):
        level = 20 * np.log10(ratio)
    return np.where(np.isfinite(level), level, np.nan)


def _draw_channels(
    ax: Axes, result: Identification, curves: NDArray[np.float64]
) -> list[Line2D | Patch]:
    """Draw every channel, and the lowest of them where there are several."""
    assert result.detection is not None, "the caller has looked"
    frequency = result.detection.frequency_hz
    names = [str(channel) for channel in result.channels]
    named, single = len(names) <= _MOST_NAMED, len(names) == 1
    handles: list[Line2D | Patch] = []
    for k, name in enumerate(names):
        style: Any = _STYLES[k % len(_STYLES)] if named else "-"
        colour = drawing.INK if single else drawing.BLUE if named else drawing.FAINT
        width = 2.0 if single else 1.2 if named else 0.6
        ax.plot(frequency, curves[:, k], color=colour, linestyle=style, linewidth=width)
        if named:
            label = phrases.plain(name, 20)
            handles.append(Line2D([], [], color=colour, linestyle=style, label=label))
    if not named:
        handles.append(Line2D([], [], color=drawing.FAINT, linewidth=0.6, label="single nodes"))
    if not single:
        best = np.fmin.reduce(curves, axis=1)
        (line,) = ax.plot(frequency, best, color=drawing.INK, linewidth=2.2, label="the best node")
        handles.append(line)
    return handles


def _own_height(result: Identification, found: Detection, mode: Mode) -> float:
    """Height of the peak of a mode over the response, in dB, at the node where it is largest."""
    if found.frequency_hz.size == 0:
        return float("nan")
    at = int(np.argmin(np.abs(found.frequency_hz - mode.frequency_hz.value)))
    order = {channel: k for k, channel in enumerate(result.channels)}
    sigma = max(abs(mode.pole_rad_per_s.real), 1e-300)
    heights = [
        abs(view.residue) / sigma / float(found.response[at, order[view.channel]])
        for view in mode.nodes
        if view.channel in order and found.response[at, order[view.channel]] > 0
    ]
    return float(_decibels(np.array([max(heights, default=np.nan)]))[0])


def _set_heights(ax: Axes, curves: NDArray[np.float64], marks: list[float]) -> None:
    shown = np.concatenate((curves[np.isfinite(curves)], marks, [0.0]))
    bottom = max(float(shown.min()) - _MARGIN, -_BARE - _MARGIN)
    top = max(_ABOVE, min(float(shown.max()), 40.0) + _MARGIN, *(y + _MARGIN for y in marks), 0.0)
    ax.set_ylim(bottom, top)


def _draw_modes(
    ax: Axes, marks: list[tuple[int, Mode, float]], band: tuple[float, float]
) -> list[Line2D | Patch]:
    """Mark the modes found with their numbers, and their verdicts in the legend."""
    handles: list[Line2D | Patch] = []
    told = set()
    for i, mode, y in marks:
        at = mode.frequency_hz.value
        if not band[0] <= at <= band[1]:
            continue
        look = drawing.LOOKS[mode.verdict]
        how: dict[str, Any] = {
            "marker": look.marker,
            "linestyle": "none",
            "markersize": look.size - 1,
            "markerfacecolor": look.colour,
            "markeredgecolor": drawing.INK,
        }
        ax.plot([at], [y], **how, zorder=4)
        ax.annotate(
            str(i + 1),
            (at, y),
            xytext=(7, 0),
            textcoords="offset points",
            va="center",
            fontsize=drawing.SMALL,
            color=drawing.INK,
            zorder=5,
        )
        if mode.verdict not in told:
            told.add(mode.verdict)
            handles.append(Line2D([], [], **how, label=f"mode found, {look.caption}"))
    return handles


def _shade(ax: Axes, found: Detection) -> list[Line2D | Patch]:
    """Shade what is above the response, and hatch the stretches where every node is blind."""
    top = ax.get_ylim()[1]
    ax.axhspan(0.0, top, color=drawing.ORANGE, alpha=0.12, linewidth=0, zorder=0)
    ax.axhline(0.0, color=drawing.ORANGE, linewidth=1.0, zorder=1)
    drawing.text(
        ax,
        0.992,
        0.975,
        "blind: only what is higher than the response would be found",
        transform=ax.transAxes,
        ha="right",
        va="top",
    )
    for low, high in found.blind_everywhere_hz:
        # a hatch of its own: in SVG it takes on the opacity of the face
        ax.axvspan(low, high, color=drawing.ORANGE, alpha=0.2, linewidth=0, zorder=1)
        ax.axvspan(low, high, **_HATCHED, zorder=1)
    if not found.blind_everywhere_hz:
        return []
    return [Patch(**_HATCHED, label="every node blind")]
