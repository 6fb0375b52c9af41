"""The pole map: damping ratio over frequency, with the axis between growth and decay."""

from __future__ import annotations

import math

import numpy as np
from matplotlib.artist import Artist
from matplotlib.axes import Axes
from matplotlib.figure import Figure
from matplotlib.lines import Line2D
from matplotlib.patches import Patch
from matplotlib.ticker import FixedLocator, FuncFormatter, NullLocator
from matplotlib.transforms import Bbox
from numpy.typing import NDArray

from polefit.analysis.folding import coverage
from polefit.estimates import si
from polefit.modes import BackgroundPole, Identification, Mode
from polefit.report import drawing, phrases, units, wording

CHI_SQUARE_95 = 5.991  # two degrees of freedom
_MOST_LABELS = 8
_DAMPED = 1.6  # upper end of the map: a real pole has damping ratio 1


def plot_poles(result: Identification, *, ax: Axes | None = None) -> Axes:
    """Draw every pole as damping ratio over natural frequency.

    Parameters
    ----------
    result : Identification
        The answer.
    ax : matplotlib.axes.Axes, optional
        Where; by default a new figure.

    Returns
    -------
    matplotlib.axes.Axes

    Notes
    -----
    What grows lies below the line ζ = 0, in the hatched part. The damping scale is linear near
    the line and logarithmic beyond, so that poles of very different damping can be read. The
    95 % region of a mode is the image of the ellipse of its pole.
    """
    ax = drawing.axes_or_new(ax, 7.2, 4.4)
    drawing.dress(ax, "Poles")
    low, high = _frequencies(result)
    drawing.frequency_axis(ax, low, high, "natural frequency |p|/2π")
    bottom = _damping_axis(ax, result)
    _sides(ax, bottom)
    _band_limits(ax, result, low, high)
    hidden = 0
    for pole in _spare(result):
        x, y = _place(pole.pole_rad_per_s)
        if low <= x <= high:
            look = drawing.BACKGROUND
            ax.plot(x, y, look.marker, color=look.colour, markersize=look.size, zorder=2)
        else:
            hidden += 1
    for mode in result.modes:
        _draw_mode(ax, mode)
    _label_modes(ax, result)
    _legend(ax, result, hidden)
    return ax


def _spare(result: Identification) -> list[BackgroundPole]:
    """Return the poles that are not claimed; negative frequencies of driven circuits left out."""
    return [p for p in result.background if p.pole_rad_per_s.imag >= 0]


def _place(pole: complex) -> tuple[float, float]:
    size = abs(pole)
    return size / math.tau, (-pole.real / size if size else 0.0)


def _frequencies(result: Identification) -> tuple[float, float]:
    """Limits of the frequency axis: the band and every mode, with a margin."""
    low, high = drawing.shown_band(result)
    places = [_place(m.pole_rad_per_s)[0] for m in result.modes]
    places = [x for x in places if x > 0]
    low, high = min([low, *places]), max([high, *places])
    if units.is_wide(low, high):
        return low / 1.25, high * 1.25
    margin = 0.05 * (high - low)
    return max(low - margin, 0.0), high + margin


def _damping_axis(ax: Axes, result: Identification) -> float:
    """Scale the damping axis to the smallest damping that matters; return its lower end."""
    near = [
        max(abs(m.damping_ratio.value), m.damping_ratio.std or 0.0)
        for m in result.modes
        if not m.real and math.isfinite(m.damping_ratio.value)
    ]
    smallest = min([n for n in near if n > 0], default=0.01)
    inner = 10.0 ** min(max(math.floor(math.log10(smallest)), -9), -2)
    drawn = [m.damping_ratio.value for m in result.modes]
    drawn += [_place(p.pole_rad_per_s)[1] for p in _spare(result)]
    spread = [2.5 * (m.damping_ratio.std or 0.0) for m in result.modes]
    lowest = min([v - s for v, s in zip(drawn, spread + [0.0] * len(drawn), strict=False)] + [0.0])
    bottom = -min(_DAMPED, max(5 * inner, -3 * lowest))
    ax.set_yscale("symlog", linthresh=inner, linscale=0.7)
    ax.set_ylim(bottom, _DAMPED)
    decades = round(-math.log10(inner))
    step = max(1, math.ceil(decades / 4))
    sizes = [10.0**-d for d in range(0, decades + 1, step)]
    if inner not in sizes:
        sizes.append(inner)
    ticks = [-s for s in sizes if -s >= bottom] + [0.0] + sizes
    ax.yaxis.set_major_locator(FixedLocator(sorted(ticks)))
    ax.yaxis.set_minor_locator(NullLocator())
    ax.yaxis.set_major_formatter(FuncFormatter(lambda value, _: si(float(value), "", 2)))
    ax.set_ylabel("damping ratio ζ")
    return bottom


def _sides(ax: Axes, bottom: float) -> None:
    ax.axhspan(bottom, 0, facecolor=drawing.VERMILLION, alpha=0.10, linewidth=0, zorder=0)
    ax.axhline(0, color=drawing.INK, linewidth=1.4, zorder=1)
    border = ax.transAxes.inverted().transform(ax.transData.transform((ax.get_xlim()[0], 0.0)))[1]
    for words, height, colour in (
        ("UNSTABLE: grows", border / 2, drawing.VERMILLION),
        ("stable: decays", (1 + border) / 2, drawing.BLUE),
    ):
        drawing.text(
            ax,
            1.015,
            float(height),
            words,
            transform=ax.transAxes,
            color=colour,
            fontweight="bold",
            rotation=270,
            ha="left",
            va="center",
        )


def _band_limits(ax: Axes, result: Identification, low: float, high: float) -> None:
    pump = result.pump_hz
    for edge in result.band_hz if pump is None else coverage(result.band_hz, pump):
        if low < edge < high:
            ax.axvline(edge, color=drawing.FAINT, linestyle=(0, (4, 3)), linewidth=1.0, zorder=1)


def region(mode: Mode, points: int = 72) -> NDArray[np.float64] | None:
    """Outline of the 95 % region of a mode in (natural frequency in Hz, damping ratio).

    Parameters
    ----------
    mode : Mode
        Its pole and covariance.
    points : int
        Corners of the outline.

    Returns
    -------
    (points, 2) float ndarray or None
        None where the covariance is not known.
    """
    covariance = np.asarray(mode.covariance, dtype=float)
    if not np.all(np.isfinite(covariance)):
        return None
    values, vectors = np.linalg.eigh((covariance + covariance.T) / 2)
    axes = vectors * np.sqrt(np.maximum(values, 0) * CHI_SQUARE_95)
    angle = np.linspace(0, 2 * np.pi, points)
    offset = axes @ np.stack([np.cos(angle), np.sin(angle)])
    poles = mode.pole_rad_per_s + offset[0] + 1j * offset[1]
    size = np.abs(poles)
    with np.errstate(invalid="ignore", divide="ignore"):
        outline = np.stack([size / math.tau, -poles.real / size], axis=1)
    return outline if np.all(np.isfinite(outline)) else None


def _draw_mode(ax: Axes, mode: Mode) -> None:
    look = drawing.LOOKS[mode.verdict]
    x, y = _place(mode.pole_rad_per_s)
    outline = region(mode)
    if outline is not None:
        ax.fill(
            outline[:, 0],
            outline[:, 1],
            facecolor=look.colour,
            alpha=0.25,
            edgecolor=look.colour,
            linewidth=1.0,
            zorder=3,
        )
        ax.plot(outline[:, 0], outline[:, 1], color=look.colour, linewidth=1.0, zorder=3)
    ax.plot(
        x,
        y,
        look.marker,
        markersize=look.size,
        markerfacecolor=look.colour if mode.in_band else "none",
        markeredgecolor=drawing.INK if mode.in_band else look.colour,
        markeredgewidth=0.8,
        zorder=4,
    )


def _label_modes(ax: Axes, result: Identification) -> None:
    """Write the number of each mode beside it, and the frequency of those to look at."""
    modes, suspects = result.modes, wording.suspects(result)
    figure = ax.get_figure(root=True)
    if not isinstance(figure, Figure):
        return
    figure.draw_without_rendering()
    taken = [_marker_box(ax, mode) for mode in modes]
    for i, mode in enumerate(modes):
        named = len(modes) <= _MOST_LABELS or (i in suspects and len(suspects) <= _MOST_LABELS)
        words = f"{i + 1}: {_label(mode)}" if named else f"{i + 1}"
        x, y = _place(mode.pole_rad_per_s)
        note = ax.annotate(
            words,
            (x, y),
            xytext=(8, 0),
            textcoords="offset points",
            fontsize=drawing.SMALL,
            fontweight="bold" if mode.verdict != "stable" else "normal",
            color=drawing.INK,
            zorder=5,
            parse_math=False,
        )
        for dx, dy, ha, va in _OFFSETS:
            note.set(position=(dx, dy), ha=ha, va=va)
            box = note.get_window_extent()
            inside = ax.bbox.x0 <= box.x0 and box.x1 <= ax.bbox.x1
            if inside and not any(box.overlaps(other) for other in taken):
                break
        taken.append(note.get_window_extent())


def _label(mode: Mode) -> str:
    """Frequency of the table; where it is not that of the axis, so that none looks misplaced."""
    natural, rings = mode.natural_frequency_hz.value, mode.frequency_hz.value
    if mode.real or natural - rings < wording.SAME * natural:
        return phrases.label(mode)
    return f"rings at {phrases.label(mode)}"


_OFFSETS = (
    (8, 0, "left", "center"),
    (-8, 0, "right", "center"),
    (0, 8, "center", "bottom"),
    (0, -8, "center", "top"),
    (8, 9, "left", "bottom"),
    (8, -9, "left", "top"),
    (-8, 9, "right", "bottom"),
    (-8, -9, "right", "top"),
    (0, 20, "center", "bottom"),
    (0, -20, "center", "top"),
)


def _marker_box(ax: Axes, mode: Mode) -> Bbox:
    x, y = ax.transData.transform(_place(mode.pole_rad_per_s))
    return Bbox.from_extents(x - 5, y - 5, x + 5, y + 5)


def _legend(ax: Axes, result: Identification, hidden: int) -> None:
    handles: list[Artist] = [
        Line2D(
            [],
            [],
            linestyle="none",
            marker=look.marker,
            markersize=look.size - 1,
            markerfacecolor=look.colour,
            markeredgecolor=drawing.INK,
            label=look.caption,
        )
        for verdict, look in drawing.LOOKS.items()
        if any(m.verdict == verdict for m in result.modes)
    ]
    if any(not m.in_band for m in result.modes):
        handles.append(
            Line2D([], [], linestyle="none", marker="o", markerfacecolor="none",
                   markeredgecolor=drawing.INK, markersize=7, label="band edge or outside")
        )  # fmt: skip
    handles.append(
        Line2D([], [], color=drawing.FAINT, linestyle=(0, (4, 3)), linewidth=1.0, label="band")
    )
    if result.background:
        look = drawing.BACKGROUND
        beyond = f" (+ {hidden} outside)" if hidden else ""
        handles.append(
            Line2D([], [], linestyle="none", marker=look.marker, color=look.colour,
                   markersize=look.size, label=f"{look.caption}{beyond}")
        )  # fmt: skip
    regions = [drawing.LOOKS[m.verdict].colour for m in result.modes if region(m) is not None]
    if regions:
        handles.append(
            Patch(facecolor=(regions[0], 0.25), edgecolor=regions[0], label="95 % region")
        )
    drawing.legend_below(ax, handles, 7)
