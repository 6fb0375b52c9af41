"""The look of every figure: colours, marks, axes, thinning, files. No pyplot state is touched.

The colours are those of Okabe and Ito (2008), chosen for readers with any colour vision; every
meaning also has a mark of its own.
"""

from __future__ import annotations

import io
import re
import warnings
from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass
from itertools import pairwise
from typing import Any

import matplotlib as mpl
import numpy as np
from matplotlib.axes import Axes
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.figure import Figure
from numpy.typing import NDArray

from polefit.modes import Identification
from polefit.report import units

INK = "#1b1f24"
FAINT = "#868d96"
GRID = "#d9dde2"
SKY = "#56b4e9"
BLUE = "#0072b2"
GREEN = "#009e73"
ORANGE = "#e69f00"
VERMILLION = "#d55e00"
SMALL = 8.0
MOST_POINTS = 1200  # of one curve; more cannot be told apart on paper


@dataclass(frozen=True)
class Look:
    """Colour, mark and caption of one verdict."""

    colour: str
    marker: str
    caption: str
    size: float = 9.0


LOOKS = {
    "unstable": Look(VERMILLION, "^", "unstable", 10.0),
    "undecided": Look(ORANGE, "D", "undecided", 8.0),
    "stable": Look(BLUE, "o", "stable", 8.0),
}
BACKGROUND = Look(FAINT, "+", "not claimed", 7.0)


def new_figure(width: float, height: float, *, fixed: bool = False) -> Figure:
    """Make a figure of `width` by `height` inches on an Agg canvas of its own.

    With `fixed` the caller sets the margins; otherwise they follow from the labels, which
    takes as long again as drawing.
    """
    figure = Figure(figsize=(width, height), layout=None if fixed else "constrained")
    FigureCanvasAgg(figure)
    return figure


def axes_or_new(ax: Axes | None, width: float, height: float) -> Axes:
    """Return `ax`, or the axes of a new figure."""
    return ax if ax is not None else new_figure(width, height).add_subplot()


def dress(ax: Axes, title: str = "", pad: float = 6.0) -> None:
    """Give axes the common look; `pad` is the room under the title in points."""
    for side in ("top", "right"):
        ax.spines[side].set_visible(False)
    for side in ("left", "bottom"):
        ax.spines[side].set_color(FAINT)
    ax.tick_params(which="both", colors=INK, labelsize=SMALL, color=FAINT)
    ax.xaxis.label.set(color=INK, fontsize=SMALL + 1)
    ax.yaxis.label.set(color=INK, fontsize=SMALL + 1)
    ax.grid(True, which="major", color=GRID, linewidth=0.6)
    ax.set_axisbelow(True)
    ax.patch.set_alpha(0.0)
    if title:
        ax.set_title(
            title,
            loc="left",
            pad=pad,
            fontsize=SMALL + 2,
            fontweight="bold",
            color=INK,
            parse_math=False,
        )


def frequency_axis(
    ax: Axes, low_hz: float, high_hz: float, name: str = "frequency", *, most: int = 9
) -> bool:
    """Set limits, scale and at most so many ticks; return whether it is logarithmic."""
    wide = units.is_wide(low_hz, high_hz)
    if wide:
        ax.set_xscale("log")
        ax.set_xlim(low_hz, high_hz)
        units.log_axis(ax.xaxis, low_hz, high_hz, name, "Hz", most=most)
    else:
        ax.set_xlim(low_hz, high_hz)
        units.linear_axis(ax.xaxis, high_hz, name, "Hz", most=most)
    return wide


def shown_band(result: Identification) -> tuple[float, float]:
    """Return the frequencies that all data cover, the lowest of them positive, in Hz."""
    low = min(
        float(r.frequency_hz[r.frequency_hz > 0].min(initial=np.inf)) for r in result.responses
    )
    high = max(r.band_hz[1] for r in result.responses)
    if not np.isfinite(low):
        return 0.0, 1.0
    return (low, high) if low < high else (0.9 * low, 1.1 * high)


def text(ax: Axes, x: float, y: float, words: str, **how: Any) -> Any:
    """Write `words` literally: a name from a file is never read as mathematics."""
    settings: dict[str, Any] = {"fontsize": SMALL, "color": INK, "parse_math": False} | how
    return ax.text(x, y, words, **settings)


def legend_below(ax: Axes, handles: list[Any], columns: int = 5, below: float = -0.16) -> None:
    """Place a frameless legend under the axes, `below` in heights of the axes."""
    legend = ax.legend(
        handles=handles,
        loc="upper center",
        bbox_to_anchor=(0.5, below),
        ncols=min(columns, max(len(handles), 1)),
        frameon=False,
        fontsize=SMALL,
        labelcolor=INK,
        handletextpad=0.6,
        columnspacing=1.4,
    )
    for entry in legend.get_texts():
        entry.set_parse_math(False)


def thin(
    x: NDArray[np.float64], y: NDArray[np.float64], most: int = MOST_POINTS
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Keep the lowest and the highest point of every bin, so that no peak is lost.

    Parameters
    ----------
    x, y : (N,) float ndarray
        A curve.
    most : int
        Points to keep at most.

    Returns
    -------
    x, y : (M,) float ndarray, M <= most
    """
    if x.size <= most:
        return x, y
    edges = np.linspace(0, x.size, most // 2 + 1).astype(int)
    keep: set[int] = set()
    for start, stop in pairwise(edges):
        part = y[start:stop]
        keep.update((start + int(part.argmin()), start + int(part.argmax())))
    index = np.array(sorted(keep))
    return x[index], y[index]


@contextmanager
def quiet_drawing() -> Iterator[None]:
    """Draw without warnings about letters that the font lacks: names may hold any letter."""
    with warnings.catch_warnings():
        warnings.filterwarnings("ignore", message="Glyph .* missing from")
        warnings.filterwarnings("ignore", message="Matplotlib currently does not support")
        yield


def figure_bytes(figure: Figure, kind: str, dpi: float = 150.0) -> bytes:
    """Render a figure as PNG, SVG or PDF, the same bytes each time.

    Parameters
    ----------
    figure : matplotlib.figure.Figure
        What to render.
    kind : {"png", "svg", "pdf"}
        The format.
    dpi : float
        Dots per inch of a PNG.

    Returns
    -------
    bytes
    """
    stamp = {"png": {"Software": None}, "svg": {"Date": None}, "pdf": {"CreationDate": None}}[kind]
    settings: Any = {"svg.hashsalt": "polefit", "svg.fonttype": "none", "pdf.fonttype": 42}
    buffer = io.BytesIO()
    with quiet_drawing(), mpl.rc_context(settings):
        figure.savefig(buffer, format=kind, dpi=dpi, metadata=stamp)
    return buffer.getvalue()


_THEMED = {
    INK: "ink",
    FAINT: "faint",
    GRID: "grid",
    SKY: "sky",
    BLUE: "blue",
    GREEN: "green",
    ORANGE: "orange",
    VERMILLION: "vermillion",
}
_TAG = re.compile(r"<[^>]*>")
_COLOUR = re.compile("|".join(_THEMED))
_IDENTITY = re.compile(r'(\bid="|href="#|url\(#)')
_UNWANTED = re.compile(
    r"<!--.*?-->|<metadata>.*?</metadata>|<defs>\s*<style.*?</style>\s*</defs>", re.DOTALL
)
_NUMBER = re.compile(r"(\d+\.\d\d)\d+")
_MARKS = re.compile(r'(?:<use href="[^"]*" x="[^"]*" y="[^"]*" style="[^"]*"/>\s*){2,}')
_FONT = re.compile(r"'DejaVu Sans'[^;\"]*sans-serif")


def inline_svg(figure: Figure, prefix: str, caption: str) -> str:
    """Render a figure as an ``<svg>`` element for a page with light and dark colours.

    Parameters
    ----------
    figure : matplotlib.figure.Figure
        What to render; its background is left out.
    prefix : str
        Made part of every id, so that several figures can live in one page.
    caption : str
        Text for readers who do not see it; must already be escaped for HTML.

    Returns
    -------
    str
        Its colours are CSS variables ``--pf-…`` with the printed colours as fallback.
    """
    figure.patch.set_alpha(0.0)
    whole = figure_bytes(figure, "svg").decode("utf-8")
    body = _UNWANTED.sub("", whole[whole.index("<svg") :])

    def themed(match: re.Match[str]) -> str:
        tag = _COLOUR.sub(lambda m: f"var(--pf-{_THEMED[m[0]]}, {m[0]})", match[0])
        tag = _FONT.sub("var(--pf-font, sans-serif)", tag).replace("xlink:href=", "href=")
        tag = _NUMBER.sub(r"\g<1>", tag)  # a hundredth of a point is finer than any screen
        return _IDENTITY.sub(rf"\g<1>{prefix}-", tag)

    body = _MARKS.sub(_hoisted, _TAG.sub(themed, body))
    opening = body[: body.index(">")]
    box = re.search(r'viewBox="[^"]*"', opening)
    kept = f'<svg class="pf-figure" role="img" aria-label="{caption}" {box[0] if box else ""}'
    return kept + body[len(opening) :]


def _hoisted(match: re.Match[str]) -> str:
    """Give a run of equal marks their style once, which halves the size of a page."""
    run = match[0]
    styles = set(re.findall(r'style="([^"]*)"', run))
    if len(styles) > 1:
        return run
    bare = re.sub(r' style="[^"]*"', "", re.sub(r"/>\s+", "/>", run))
    return f'<g style="{styles.pop()}">{bare}</g>'
