"""The report as one self-contained page, and as a fragment for notebooks."""

from __future__ import annotations

import math
from collections.abc import Sequence
from functools import cache
from importlib import resources
from typing import Any

import numpy as np
from jinja2 import Environment, FunctionLoader, StrictUndefined, Template
from markupsafe import Markup, escape
from matplotlib.axes import Axes
from matplotlib.figure import Figure

from polefit import __version__
from polefit.estimates import si, with_uncertainty
from polefit.modes import Identification, Mode
from polefit.report import drawing, glossary, headline, limits, nodes, phrases, wording
from polefit.report.figures import plot_detection, plot_nodes, plot_overview, plot_poles
from polefit.report.response_plot import plot_response, trace_of

SIGNS = {"unstable": "▲", "undecided": "◆", "stable": "●"}
_OPEN = 3  # channels whose figures are open when there are many
_MANY = 6
_FEW = 4  # modes that are all shown with their nodes
_ROWS = 12  # nodes in the table of a loop
_NAME = 60


def identification_html(result: Identification) -> str:
    """Return the report as one HTML page that needs no other file and no network.

    Parameters
    ----------
    result : Identification
        The answer.

    Returns
    -------
    str
        Figures are inline SVG. Names from files are escaped, and the page forbids scripts.
    """
    return identifications_html([result])


def identifications_html(results: Sequence[Identification]) -> str:
    """Return one page with several separate identifications, one after the other."""
    with drawing.quiet_drawing():
        views = [{"asked": None, **view_of(result, f"r{i}")} for i, result in enumerate(results)]
    return page(views, f"{views[0]['verdict']}: {views[0]['heading']}")


def page(views: Sequence[dict[str, Any]], title: str) -> str:
    """Return the whole page; what it holds of each answer is in a view, `asked` what was asked."""
    return template("page.html.j2").render(
        views=views,
        title=phrases.plain(title if len(views) == 1 else "polefit", 80),
        version=__version__,
        style=style(),
        dark=Markup(_file("dark.css")),
    )


def identification_fragment(result: Identification) -> str:
    """Return verdict, modes, pole map and cautions as a ``<div>`` for a notebook."""
    with drawing.quiet_drawing():
        view = {
            **_summary(result),
            "poles": svg(plot_poles(result), "nb", "Pole map"),
        }
    return template("fragment.html.j2").render(view=view, style=style())


def template(name: str) -> Template:
    """Return one of the templates of the package."""
    return _templates().get_template(name)


def style() -> Markup:
    """Return the style sheet of pages and fragments."""
    return Markup(_file("style.css"))


@cache
def _templates() -> Environment:
    return Environment(
        autoescape=True, loader=FunctionLoader(_file), undefined=StrictUndefined, trim_blocks=True
    )


@cache
def _file(name: str) -> str:
    return (resources.files("polefit.report") / "templates" / name).read_text(encoding="utf-8")


def svg(drawn: Axes | Figure, prefix: str, caption: str) -> Markup:
    """Return a figure for a page; `prefix` keeps its ids apart from those of the others."""
    figure = drawn if isinstance(drawn, Figure) else drawn.get_figure(root=True)
    assert isinstance(figure, Figure), "axes made here belong to a figure"
    return Markup(drawing.inline_svg(figure, prefix, str(escape(phrases.plain(caption, 80)))))


def _summary(result: Identification) -> dict[str, Any]:
    """Collect what the top of the page and the notebook fragment share."""
    word, _, sentence = headline.verdict_sentence(result).partition(":")
    full = wording.in_full(result, _FEW)
    warning = headline.edge_warning(result)
    before, _, after = sentence.partition(warning) if warning else (sentence, "", "")
    # a stable verdict says it all; what a sentence already says is not said again
    told = result.verdict == "stable" or result.reason.rstrip(".") in sentence
    return {
        "verdict": result.verdict,
        "sign": SIGNS[result.verdict],
        "word": f"{word}:",
        "sentence": one_line(before),
        "warning": one_line(warning),
        "after": one_line(after),
        "reason": "" if told else phrases.sentence(result.reason),
        "modes": mode_rows(result, range(len(result.modes)), full),
        "node_note": nodes.node_note([result.modes[i] for i in full]),
        "sharp_note": phrases.SHARP_NOTE if any(map(phrases.is_sharp, result.modes)) else "",
        "cautions": wording.CAUTIONS,
    }


def one_line(text: str) -> str:
    """Write a sentence for a page, numbers and units held together."""
    return phrases.glued(phrases.plain(text, 2000))


def mode_rows(
    result: Identification, indices: Sequence[int], full: Sequence[int] = ()
) -> list[dict[str, Any]]:
    """Collect the table of some modes, those of `full` with their nodes."""
    return [
        {"number": i + 1, **_mode(mode, i in full)}
        for i, mode in ((i, result.modes[i]) for i in indices)
    ]


def _mode(mode: Mode, full: bool) -> dict[str, Any]:
    strengths = nodes.node_strengths(mode)
    shown = ", ".join(phrases.plain(s.brief, 40) for s in strengths[:4])
    rest = len(strengths) - 4
    seen = wording.sightings(mode)
    ratio = mode.damping_ratio
    sharp = ratio.std is not None and ratio.std < 1e-4 * abs(ratio.value)
    interval = ""
    if ratio.low is not None and ratio.high is not None and not mode.real and not sharp:
        interval = f"{_limit(ratio.low, ratio.std)} to {_limit(ratio.high, ratio.std)}"
    return {
        "verdict": mode.verdict,
        "sign": SIGNS[mode.verdict],
        "word": mode.verdict,
        "in_band": mode.in_band,
        "frequency": phrases.rings_at(mode),
        "damping": si(ratio.value) if mode.real else phrases.uncrowded(ratio.text()),
        "interval": interval,
        "time": f"{phrases.trend(mode)}, {phrases.time_constant(mode)}",
        "probability": phrases.probability(mode.probability_unstable),
        "full": full,
        "nodes": (f"{seen}; " if seen else "") + shown + (f" and {rest} more" if rest > 0 else ""),
    }


def _limit(value: float, std: float | None) -> str:
    """Write a limit of an interval with as many digits as its estimate has."""
    text = with_uncertainty(value, std)
    return si(value, "", 4) if "(" in text else text.partition(" ± ")[0]


def view_of(result: Identification, prefix: str) -> dict[str, Any]:
    """Collect everything the page shows of one result."""
    names = [phrases.plain(s.file, _NAME) for s in result.sources]
    many = len(result.channels) > _MANY
    return {
        **_summary(result),
        "heading": phrases.listed(names, 3, _NAME) if names else f"{result.quantity} from arrays",
        **next_points(result.next_points_hz),
        "poles": svg(plot_poles(result), f"{prefix}p", "Pole map"),
        "loops": [_loop(result, i, prefix) for i in range(len(result.loops))],
        "overview": svg(plot_overview(result), f"{prefix}o", "All channels") if many else None,
        "channels": _channels(result, prefix),
        "evidence": evidence(result, range(len(result.modes))),
        "glossary": glossary.explained(result.modes),
        "detection": None
        if result.detection is None
        else svg(plot_detection(result), f"{prefix}d", "Detection limit"),
        "limit": phrases.glued(phrases.capital(limits.detection_limit(result) or "")),
        "limits": limits.channel_rows(result),
        "ohms": result.detection is not None and not np.isnan(result.detection.leverage).all(),
        "basis": [(head, phrases.glued(text)) for head, text in wording.basis(result)],
        "notes": [phrases.plain(n, 2000) for n in wording.notes(result)],
        "background": [wording.background_row(p) for p in result.background],
        "sources": [
            {
                "file": phrases.plain(r.source.file, 120),
                "format": phrases.plain(r.source.format),
                "points": r.points,
                "sha256": r.source.sha256,
            }
            for r in result.responses
            if r.source is not None
        ],
        "assumptions": [
            phrases.plain(a, 2000)
            for a in dict.fromkeys(a for s in result.sources for a in s.assumptions)
        ],
    }


def next_points(points: Sequence[float]) -> dict[str, str]:
    """Collect what a page says of the points to simulate next."""
    return {
        "next": phrases.glued(wording.next_points(points)),
        "points": wording.pasteable(points),
        "sweep": wording.as_sweep(points),
    }


def _loop(result: Identification, index: int, prefix: str) -> dict[str, Any]:
    loop = result.loops[index]
    table = nodes.loop_table(result, index, _ROWS)
    rest = len(loop.nodes) - (len(table) - 1)
    return {
        "mode": loop.mode + 1,
        "label": phrases.label(result.modes[loop.mode]),
        # bars compare nodes: one alone says nothing that the table does not
        "figure": svg(
            plot_nodes(result, index), f"{prefix}n{index}", f"Nodes of mode {loop.mode + 1}"
        )
        if len(loop.nodes) > 1
        else None,
        "headings": table[0],
        "rows": table[1:],
        "more": nodes.more_nodes(rest) if rest > 0 else "",
    }


def _channels(result: Identification, prefix: str) -> list[dict[str, Any]]:
    """Channels in the order in which the most dangerous mode shows; the first ones open."""
    order = {str(v.channel): i for i, v in enumerate(result.modes[0].nodes)} if result.modes else {}
    names = [str(c) for c in result.channels]
    ranked = sorted(range(len(names)), key=lambda k: order.get(names[k], len(names)))
    most = _OPEN if len(names) > _MANY else len(names)
    views = []
    for place, k in enumerate(ranked):
        trace = trace_of(result, k)
        size = np.abs(trace.data)
        good = size > 0
        rms = math.sqrt(float(np.mean((np.abs(trace.model - trace.data)[good] / size[good]) ** 2)))
        views.append(
            {
                "name": phrases.plain(names[k], _NAME),
                "note": f"{trace.frequency_hz.size} points, residual {si(rms, '', 2)} (rms)",
                "open": place < most,
                "figure": svg(plot_response(result, k)[0], f"{prefix}c{k}", f"Channel {names[k]}"),
            }
        )
    return views


def evidence(result: Identification, indices: Sequence[int]) -> list[dict[str, Any]]:
    """Collect the tests of some modes."""
    outcome = {True: "passed", False: "failed", None: "not-made"}
    doubtful = wording.suspects(result)
    return [
        {
            "mode": i + 1,
            "suspect": i in doubtful,
            "label": phrases.label(mode),
            "tests": [
                {
                    "name": phrases.plain(test.name),
                    "outcome": outcome[test.passed],
                    "outcome_word": outcome[test.passed].replace("-", " "),
                    "detail": phrases.tidy(phrases.plain(test.detail, 2000)),
                }
                for test in mode.evidence
            ],
        }
        for i, mode in ((i, result.modes[i]) for i in indices)
        if mode.evidence
    ]
