"""Responses with the model drawn through them: magnitude, phase and what is left over."""

from __future__ import annotations

import math
from dataclasses import dataclass, replace
from typing import Any

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure
from matplotlib.lines import Line2D
from matplotlib.ticker import MultipleLocator
from numpy.typing import NDArray

from polefit.errors import ArgumentError
from polefit.modes import Identification, RationalModel
from polefit.report import drawing, phrases, units, wording
from polefit.responses import UNITS, Channel

FloatArray = NDArray[np.float64]
ComplexArray = NDArray[np.complex128]

DECIBEL = ("scattering", "transfer", "hybrid", "inverse-hybrid", "return-difference", "loop-gain")
_FINER = 6  # points of the model drawn for each point of the data
_BROAD = 0.3  # modes damped more than this shape no peak worth a mark
_NUMBER_WIDTH = 0.025  # of the axis
_DENSE = 4000  # points from which the model is drawn at the data's own frequencies


@dataclass(frozen=True)
class Trace:
    """One channel: data, model and noise at the data's frequencies, and the model between them."""

    channel: Channel
    frequency_hz: FloatArray
    data: ComplexArray
    model: ComplexArray
    noise_std: FloatArray
    fine_hz: FloatArray
    fine: ComplexArray


def trace_of(result: Identification, channel: int | str | Channel) -> Trace:
    """Collect what a drawing of one channel needs.

    Parameters
    ----------
    result : Identification
        The answer.
    channel : int or str or Channel
        Its index, the printed name, or the channel itself.

    Returns
    -------
    Trace

    Raises
    ------
    ArgumentError
        If there is no such channel.
    """
    index = _index(result, channel)
    at, column = _home(result, index)
    responses = result.responses[at]
    frequency, data = responses.frequency_hz, responses.values[:, column]
    model = _one_channel(result.model, index)
    if result.noise_std:
        noise = np.asarray(result.noise_std[at])[:, column]
    else:
        noise = result.fit.noise_relative * np.abs(data)
    fine_hz = _finer(frequency)
    return Trace(
        channel=responses.channels[column],
        frequency_hz=frequency,
        data=data,
        model=model.response(frequency)[:, 0],
        noise_std=noise,
        fine_hz=fine_hz,
        fine=model.response(fine_hz)[:, 0],
    )


def _index(result: Identification, channel: int | str | Channel) -> int:
    channels = result.channels
    if isinstance(channel, int) and -len(channels) <= channel < len(channels):
        return channel % len(channels)
    for i, known in enumerate(channels):
        if channel == known or channel == str(known):
            return i
    listed = phrases.listed((str(c) for c in channels), 8)
    raise ArgumentError(f"channel: {channel!r} is not among {listed}")


def _home(result: Identification, index: int) -> tuple[int, int]:
    """Return which response set a channel is in, and its column there."""
    for at, responses in enumerate(result.responses):
        if index < len(responses.channels):
            return at, index
        index -= len(responses.channels)
    raise ArgumentError(f"channel: {index} is past the last channel")


def _one_channel(model: RationalModel, index: int) -> RationalModel:
    keep = slice(index, index + 1)
    return replace(
        model,
        residues=model.residues[:, keep],
        constant=model.constant[keep],
        proportional=model.proportional[keep],
        delay_s=None if model.delay_s is None else model.delay_s[keep],
        channels=model.channels[keep],
    )


def _finer(frequency: FloatArray) -> FloatArray:
    """Points between those of the data, so that a sharp mode is drawn as it is modelled."""
    if frequency.size < 2 or frequency.size > _DENSE:
        return frequency
    steps = np.arange(_FINER) / _FINER
    between = frequency[:-1, np.newaxis] + np.diff(frequency)[:, np.newaxis] * steps
    return np.append(between.ravel(), frequency[-1])


def plot_response(
    result: Identification,
    channel: int | str | Channel,
    *,
    axes: tuple[Axes, Axes, Axes] | None = None,
) -> tuple[Axes, Axes, Axes]:
    """Draw magnitude, phase and residual of one channel, data and model.

    Parameters
    ----------
    result : Identification
        The answer.
    channel : int or str or Channel
        Index into ``result.channels``, printed name, or the channel itself.
    axes : three matplotlib.axes.Axes, optional
        Where; by default a new figure with a common frequency axis.

    Returns
    -------
    three matplotlib.axes.Axes
        Magnitude, phase, residual.

    Raises
    ------
    ArgumentError
        If there is no such channel.
    """
    trace = trace_of(result, channel)
    if axes is None:
        figure = drawing.new_figure(7.2, 5.6, fixed=True)
        figure.subplots_adjust(left=0.105, right=0.985, top=0.92, bottom=0.135, hspace=0.09)
        grid = figure.subplots(3, 1, sharex=True, height_ratios=(3, 2, 2))
        axes = (grid[0], grid[1], grid[2])
    magnitude, phase, residual = axes
    drawing.dress(magnitude, phrases.plain(str(trace.channel), 60), pad=14)
    for ax in (phase, residual):
        drawing.dress(ax)
    _magnitude(magnitude, trace, result.quantity)
    _phase(phase, trace)
    _residual(residual, trace)
    low, high = drawing.shown_band(result)
    for ax in axes:
        drawing.frequency_axis(ax, low, high, "")
    drawing.frequency_axis(residual, low, high)
    for ax in (magnitude, phase):
        ax.tick_params(labelbottom=False)
    for ax in axes:
        mark_modes(ax, result, low, high, numbers=ax is magnitude)
    _legend(residual)
    return axes


def _size(values: ComplexArray, quantity: str) -> FloatArray:
    size = np.abs(values)
    size = np.where(size > 0, size, np.nan)
    return 20 * np.log10(size) if quantity in DECIBEL else size


def _magnitude(ax: Axes, trace: Trace, quantity: str, *, small: bool = False) -> list[float]:
    """Draw the magnitude and scale its axis; return its lowest and highest positive value."""
    data, fine = _size(trace.data, quantity), _size(trace.fine, quantity)
    _dots(ax, trace.frequency_hz, data, small=small)
    good = np.isfinite(fine)
    x, y = drawing.thin(trace.fine_hz[good], fine[good], 400 if small else drawing.MOST_POINTS)
    ax.plot(x, y, color=drawing.INK, linewidth=0.9 if small else 1.1, zorder=3)
    symbol = f"|{wording.SYMBOL[quantity]}|"
    if quantity in DECIBEL:
        if not small:
            ax.set_ylabel(f"{symbol} in dB")
        return []
    seen = data[np.isfinite(data) & (data > 0)]
    if seen.size == 0:
        return []
    top = max(float(seen.max()), float(y.max(initial=0.0)))
    low, high = float(seen.min()) / 1.5, top * 1.3
    ax.set_yscale("log")
    if not small:
        ax.set_ylim(low, high)
        units.log_axis(ax.yaxis, low, high, symbol, UNITS.get(quantity, ""))
    return [float(seen.min()), top]


def _dots(ax: Axes, x: FloatArray, y: FloatArray, *, small: bool = False) -> None:
    """Draw data as dots, no more of them than can be told apart."""
    good = np.isfinite(y)
    x, y = drawing.thin(x[good], y[good], 200 if small else 600)
    ax.plot(
        x,
        y,
        linestyle="none",
        marker="o",
        markersize=1.8 if small else 3.2,
        markeredgewidth=0,
        color=drawing.SKY,
        zorder=2,
    )


def _phase(ax: Axes, trace: Trace) -> None:
    fine = np.unwrap(np.angle(trace.fine))
    at_data = np.interp(trace.frequency_hz, trace.fine_hz, fine)
    with np.errstate(divide="ignore", invalid="ignore"):
        apart = np.angle(trace.data * np.conj(trace.model))
    _dots(ax, trace.frequency_hz, np.degrees(at_data + apart))
    x, y = drawing.thin(trace.fine_hz, np.degrees(fine))
    ax.plot(x, y, color=drawing.INK, linewidth=1.1, zorder=3)
    ax.set_ylabel("phase in °")
    span = float(np.ptp(y)) if y.size else 0.0
    if 60 < span < 3000:
        ax.yaxis.set_major_locator(
            MultipleLocator(45 * max(1, 2 ** math.ceil(math.log2(span / 270))))
        )


def _residual(ax: Axes, trace: Trace) -> None:
    """Draw both parts of (model − data)/|data| against the 95 % band of the noise."""
    size = np.abs(trace.data)
    good = size > 0
    x = trace.frequency_hz[good]
    left = (trace.model[good] - trace.data[good]) / size[good]
    half = 1.96 / math.sqrt(2) * trace.noise_std[good] / size[good]
    spread = float(np.median(half)) if half.size else 0.0
    parts = np.concatenate([left.real, left.imag])
    reach = float(np.quantile(np.abs(parts), 0.995)) if parts.size else 0.0
    limit = max(1.25 * reach, 2.2 * spread) or 1.0
    bx, upper = drawing.thin(x, half)
    ax.fill_between(bx, -upper, upper, color=drawing.FAINT, alpha=0.25, linewidth=0, zorder=1)
    ax.axhline(0, color=drawing.INK, linewidth=0.8, zorder=2)
    for part, marker, fill in ((left.real, "o", drawing.SKY), (left.imag, "s", "none")):
        px, py = drawing.thin(x, np.clip(part, -limit, limit), 700)
        ax.plot(
            px,
            py,
            linestyle="none",
            marker=marker,
            markersize=2.6,
            markerfacecolor=fill,
            markeredgecolor=drawing.SKY if fill != "none" else drawing.BLUE,
            markeredgewidth=0 if fill != "none" else 0.6,
            zorder=3,
        )
    outside = int(np.count_nonzero(np.abs(parts) > limit))
    if outside:
        drawing.text(
            ax, 0.995, 0.96, f"{outside} beyond", transform=ax.transAxes, ha="right", va="top"
        )
    ax.set_ylim(-1.05 * limit, 1.05 * limit)
    units.powers_of_ten(ax.yaxis, limit, "residual")


def mark_modes(ax: Axes, result: Identification, low: float, high: float, *, numbers: bool) -> None:
    """Draw a line at the frequency of every lightly damped mode, with its number where asked.

    The most dangerous come last and so lie on top; numbers that would touch one of theirs are
    left out.
    """
    suspects = wording.suspects(result)
    taken: list[float] = []
    marked = []
    for i, mode in enumerate(result.modes):
        if i not in suspects and mode.damping_ratio.value > _BROAD:
            continue
        # under a periodic drive a mode shows elsewhere than at its folded frequency, and more often
        for frequency in mode.seen_hz or (() if mode.real else (mode.frequency_hz.value,)):
            if not low <= frequency <= high:
                continue
            point = ax.transData.transform((frequency, 1))
            place = float(ax.transAxes.inverted().transform(point)[0])
            free = all(abs(place - other) > _NUMBER_WIDTH for other in taken)
            taken += [place] if free else []
            marked.append((i, mode, frequency, free))
    for i, mode, frequency, free in reversed(marked):
        look = drawing.LOOKS[mode.verdict]
        ax.axvline(frequency, color=look.colour, linewidth=0.9, linestyle=(0, (3, 2)), zorder=1)
        if numbers and free:
            ax.annotate(
                str(i + 1),
                (frequency, 1.0),
                xycoords=ax.get_xaxis_transform(),
                textcoords="offset points",
                xytext=(0, 2),
                ha="center",
                va="bottom",
                fontsize=drawing.SMALL,
                fontweight="bold" if mode.verdict != "stable" else "normal",
                color=look.colour,
                annotation_clip=False,
            )


def _legend(ax: Axes) -> None:
    dots: dict[str, Any] = {"linestyle": "none", "markersize": 5}
    handles = [
        Line2D([], [], marker="o", color=drawing.SKY, label="data; real part of residual", **dots),
        Line2D([], [], marker="s", markerfacecolor="none", markeredgecolor=drawing.BLUE,
               label="imaginary part", **dots),
        Line2D([], [], color=drawing.INK, linewidth=1.2, label="model"),
        Line2D([], [], color=drawing.FAINT, alpha=0.35, linewidth=6, label="95 % of the noise"),
        Line2D([], [], color=drawing.INK, linewidth=0.9, linestyle=(0, (3, 2)), label="mode"),
    ]  # fmt: skip
    drawing.legend_below(ax, handles, below=-0.42)


def plot_overview(result: Identification, *, figure: Figure | None = None) -> Figure:
    """Draw the magnitude of every channel in a grid of small plots on common axes.

    Parameters
    ----------
    result : Identification
        The answer.
    figure : matplotlib.figure.Figure, optional
        Where; by default a new figure.

    Returns
    -------
    matplotlib.figure.Figure
    """
    count = len(result.channels)
    columns = min(count, 5 if count > 12 else 4 if count > 6 else 3)
    rows = math.ceil(count / columns)
    if figure is None:
        figure = drawing.new_figure(7.2, 0.6 + 1.25 * rows)
    grid = figure.subplots(rows, columns, sharex=True, sharey=True, squeeze=False)
    low, high = drawing.shown_band(result)
    reach: list[float] = []
    for k, ax in enumerate(grid.ravel()):
        if k >= count:
            ax.set_visible(False)
            continue
        trace = trace_of(result, k)
        drawing.dress(ax)
        reach += _magnitude(ax, trace, result.quantity, small=True)
        ax.set_title(
            phrases.plain(str(trace.channel), 22),
            loc="left",
            fontsize=drawing.SMALL,
            color=drawing.INK,
            parse_math=False,
        )
        ax.tick_params(labelsize=drawing.SMALL - 1, labelbottom=k + columns >= count)
    drawing.frequency_axis(grid[0, 0], low, high, "", most=4)
    for ax in grid.ravel()[:count]:
        mark_modes(ax, result, low, high, numbers=False)
    _overview_labels(figure, grid[0, 0], result.quantity, reach)
    return figure


def _overview_labels(figure: Figure, ax: Axes, quantity: str, reach: list[float]) -> None:
    """Scale the shared magnitude axis and label the figure once for all its plots."""
    how: dict[str, Any] = {"fontsize": drawing.SMALL + 1, "color": drawing.INK}
    figure.supxlabel("frequency", **how)
    symbol = f"|{wording.SYMBOL[quantity]}|"
    if quantity in DECIBEL:
        figure.supylabel(f"{symbol} in dB", **how)
    elif reach:
        low, high = min(reach) / 1.3, max(reach) * 1.3
        ax.set_ylim(low, high)
        units.log_axis(ax.yaxis, low, high, "", UNITS.get(quantity, ""), most=5)
        figure.supylabel(symbol, **how)
