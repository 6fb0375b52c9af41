"""Figures of an identification: poles, responses, nodes, detection limit.

Each ``plot_…`` function draws into the axes it is given, or into a new figure of its own, and
returns the axes; none touches pyplot's state.
"""

from __future__ import annotations

import re
from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path

from matplotlib.axes import Axes
from matplotlib.figure import Figure

from polefit.atomic import whole_file
from polefit.errors import ArgumentError
from polefit.modes import Identification
from polefit.report import drawing, nodes, phrases, units
from polefit.report.detection_plot import plot_detection
from polefit.report.pole_map import plot_poles
from polefit.report.response_plot import plot_overview, plot_response

FORMATS = ("png", "svg", "pdf")
_MOST_BARS = 12

__all__ = [
    "FORMATS",
    "plot_detection",
    "plot_nodes",
    "plot_overview",
    "plot_poles",
    "plot_response",
    "save_figures",
]


def plot_nodes(result: Identification, loop_index: int, *, ax: Axes | None = None) -> Axes:
    """Draw the nodes of a suspect loop, strongest first, with 95 % error bars.

    Parameters
    ----------
    result : Identification
        The answer.
    loop_index : int
        Index into ``result.loops``.
    ax : matplotlib.axes.Axes, optional
        Where; by default a new figure, which may hold second axes below.

    Returns
    -------
    matplotlib.axes.Axes

    Raises
    ------
    ArgumentError
        If there is no such loop.

    Notes
    -----
    From driving-point impedances the bars are the damping ratio that 1 mS to ground adds, to
    first order. Where only transfers are known they are residues relative to the strongest. Of
    nodes of both kinds a figure of its own shows the leverages above and the residues below;
    axes that were given show the leverages.
    """
    if not -len(result.loops) <= loop_index < len(result.loops):
        raise ArgumentError(
            f"loop_index: {loop_index} is not one of the {len(result.loops)} suspect loops"
        )
    loop = result.loops[loop_index]
    mode = result.modes[loop.mode]
    title = f"Nodes of mode {loop.mode + 1}, {phrases.label(mode)}"
    found = nodes.loop_strengths(result, loop_index)
    levers, residues = _leverages(found), _residues(found)
    if not levers.bars:
        return _draw_bars(ax, residues, title)
    if ax is not None or len(levers.bars) == len(found):
        return _draw_bars(ax, levers, title)
    heights = [max(len(_shown(part)), 2) for part in (levers, residues)]
    figure = drawing.new_figure(7.2, 1.9 + 0.34 * sum(heights))
    upper, lower = figure.subplots(2, 1, height_ratios=heights)
    _draw_bars(lower, residues, "")
    return _draw_bars(upper, levers, title)


@dataclass(frozen=True)
class _Bars:
    """What bars show: (name, value, half width at 95 %, whether it makes the mode worse)."""

    caption: str
    bars: tuple[tuple[str, float, float, bool], ...]


def _leverages(found: Sequence[nodes.NodeStrength]) -> _Bars:
    bars = []
    for strength in found:
        added = strength.damping_per_ms
        if added is None:
            continue
        half = 1.96 * (added.std or 0.0)
        worse = added.value + half < 0 and strength.relative >= nodes.NOTHING
        bars.append((strength.name, added.value, half, worse))
    return _Bars("damping ratio added by 1 mS to ground, first order", _sorted(bars))


def _residues(found: Sequence[nodes.NodeStrength]) -> _Bars:
    strongest = max((s.size for s in found), default=0.0) or 1.0
    bars = [(s.name, s.size / strongest, 0.0, False) for s in found]
    return _Bars("residue relative to the strongest", _sorted(bars))


def _sorted(
    bars: list[tuple[str, float, float, bool]],
) -> tuple[tuple[str, float, float, bool], ...]:
    return tuple(sorted(bars, key=lambda bar: -abs(bar[1])))


def _reach(part: _Bars) -> float:
    return max((abs(value) + half for _, value, half, _ in part.bars), default=0.0) or 1.0


def _shown(part: _Bars) -> tuple[tuple[str, float, float, bool], ...]:
    """Leave out nodes that hardly see the mode, and all but the strongest."""
    seen = [bar for bar in part.bars if abs(bar[1]) >= nodes.HARDLY_SEEN * _reach(part)]
    return tuple(seen[:_MOST_BARS]) if len(seen) >= nodes.ALWAYS else part.bars[: nodes.ALWAYS]


def _draw_bars(ax: Axes | None, part: _Bars, title: str) -> Axes:
    shown, reach = _shown(part), _reach(part)
    ax = drawing.axes_or_new(ax, 7.2, 1.2 + 0.34 * max(len(shown), 2))
    drawing.dress(ax, title)
    for y, (_, value, half, _) in enumerate(shown):
        ax.barh(
            y,
            value,
            height=0.62,
            color=drawing.VERMILLION if value < 0 else drawing.SKY,
            edgecolor=drawing.INK,
            linewidth=0.6,
            hatch="////" if value < 0 else None,
            xerr=half if half > 0 else None,
            error_kw={"ecolor": drawing.INK, "capsize": 3, "elinewidth": 1.0},
        )
    labels = [f"{phrases.plain(name, 26)}{' (worse)' if w else ''}" for name, _, _, w in shown]
    ax.set_yticks(range(len(shown)), labels, parse_math=False)
    ax.set_ylim(max(len(shown), 1) - 0.4, -0.6)
    ax.axvline(0, color=drawing.INK, linewidth=1.0)
    ax.grid(visible=False, axis="y")
    units.powers_of_ten(ax.xaxis, reach, part.caption)
    ax.set_xlim(
        min(0.0, *(1.08 * (v - h) for _, v, h, _ in shown), 0.0),
        max(0.0, *(1.08 * (v + h) for _, v, h, _ in shown), 0.0) or 0.05 * reach,
    )
    if len(part.bars) > len(shown):
        drawing.text(
            ax,
            1.0,
            1.02,
            f"and {len(part.bars) - len(shown)} weaker",
            transform=ax.transAxes,
            ha="right",
        )
    return ax


def save_figures(
    result: Identification, directory: str | Path, formats: Sequence[str] = ("png",)
) -> tuple[Path, ...]:
    """Write all figures of a result, each file whole or not at all.

    Parameters
    ----------
    result : Identification
        The answer.
    directory : str or pathlib.Path
        Where; made if missing.
    formats : sequence of {"png", "svg", "pdf"}
        One file for each.

    Returns
    -------
    tuple of pathlib.Path
        The files written: ``poles``, ``overview``, ``nodes-…``, ``response-…``, ``detection``.

    Raises
    ------
    ArgumentError
        If a format is not known.
    FileError
        If a file cannot be written.
    """
    unknown = [kind for kind in formats if kind not in FORMATS]
    if unknown or not formats:
        wrong = repr(unknown[0]) if unknown else "none"
        raise ArgumentError(f"formats: {wrong} is not known; use {', '.join(FORMATS)}")
    folder = Path(directory)
    written: list[Path] = []
    for name, figure in figures_of(result):
        for kind in formats:
            path = folder / f"{name}.{kind}"
            with whole_file(path) as temporary:
                temporary.write_bytes(drawing.figure_bytes(figure, kind))
            written.append(path)
    return tuple(written)


def figures_of(result: Identification) -> list[tuple[str, Figure]]:
    """Return all figures with the names of their files, in the order of a report."""
    with drawing.quiet_drawing():
        figures = [("poles", _figure(plot_poles(result)))]
        figures += [
            (f"nodes-{i + 1}", _figure(plot_nodes(result, i))) for i in range(len(result.loops))
        ]
        if len(result.channels) > 1:
            figures.append(("overview", plot_overview(result)))
        width = len(str(len(result.channels)))
        for k, channel in enumerate(result.channels):
            name = f"response-{k + 1:0{width}d}-{_slug(str(channel))}"
            figures.append((name, _figure(plot_response(result, k)[0])))
        if result.detection is not None:
            figures.append(("detection", _figure(plot_detection(result))))
    return figures


def _figure(ax: Axes) -> Figure:
    figure = ax.get_figure(root=True)
    assert isinstance(figure, Figure), "axes made here belong to a figure"
    return figure


def _slug(name: str) -> str:
    """Turn a channel name into part of a file name that every system accepts."""
    return re.sub(r"[^A-Za-z0-9_-]+", "_", name).strip("_")[:40] or "channel"
