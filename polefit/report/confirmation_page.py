"""A confirmation as a self-contained page, and as a fragment for notebooks."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace
from typing import Any

import numpy as np
from matplotlib.axes import Axes

from polefit.confirmation import Confirmation
from polefit.modes import Identification
from polefit.report import confirmation, drawing, html, nodes, phrases, wording
from polefit.report.response_plot import plot_response
from polefit.responses import Channel

_COLOURED_AS = {"confirmed": "unstable", "refuted": "stable", "undecided": "undecided"}
_MARGIN = 1.5  # widths of the range that are drawn on both sides of it
_FEW_POINTS = 10  # a narrower band with fewer is not worth a drawing


def confirmation_html(answer: Confirmation) -> str:
    """Return the report as one HTML page that needs no other file and no network.

    Parameters
    ----------
    answer : Confirmation
        The answer.

    Returns
    -------
    str
        The answer, then the whole report of the identification behind it.
    """
    return confirmations_html([answer])


def confirmations_html(answers: Sequence[Confirmation]) -> str:
    """Return one page with several separate confirmations, one after the other."""
    with drawing.quiet_drawing():
        views = [
            {**html.view_of(answer.identification, f"r{i}"), "asked": _view(answer, f"a{i}")}
            for i, answer in enumerate(answers)
        ]
    return html.page(views, f"{answers[0].verdict}: {views[0]['heading']}")


def confirmation_fragment(answer: Confirmation) -> str:
    """Return the answer, the modes in the range and the cautions as a ``<div>`` for a notebook."""
    with drawing.quiet_drawing():
        view = _view(answer, "nb")
    return html.template("confirmation_fragment.html.j2").render(view=view, style=html.style())


def _view(answer: Confirmation, prefix: str) -> dict[str, Any]:
    """Collect what the page shows of the answer itself."""
    result = answer.identification
    word, _, sentence = confirmation.verdict_sentence(answer).partition(":")
    warning = confirmation.elsewhere_warning(answer)
    before, _, after = sentence.partition(warning) if warning else (sentence, "", "")
    inside = [result.modes[i] for i in answer.in_range]
    doubtful = [i for i in answer.elsewhere if result.modes[i].verdict != "stable"]
    shown = _channel(answer)
    return {
        "verdict": _COLOURED_AS[answer.verdict],
        "sign": html.SIGNS[_COLOURED_AS[answer.verdict]],
        "word": f"{word}:",
        "sentence": html.one_line(before),
        "warning": html.one_line(warning),
        "after": html.one_line(after),
        "reason": "",
        "range": html.one_line(phrases.band(answer.range_hz)),
        "modes": html.mode_rows(result, answer.in_range, answer.in_range),
        "node_note": nodes.node_note(inside),
        "sharp_note": phrases.SHARP_NOTE if any(map(phrases.is_sharp, inside)) else "",
        "elsewhere": {"modes": html.mode_rows(result, answer.elsewhere)},
        "figure": html.svg(plot_range(answer, shown)[0], f"{prefix}q", f"The range at {shown}"),
        **html.next_points(answer.next_points_hz),
        "rows": [(head, html.one_line(text)) for head, text in confirmation.rows(answer)],
        "evidence": html.evidence(result, [*answer.in_range, *doubtful]),
        "limit_title": confirmation.limit_title(answer),
        "limits": confirmation.limit_rows(answer),
        "notes": [html.one_line(phrases.sentence(note)) for note in answer.notes],
        "cautions": wording.CAUTIONS,
    }


def _channel(answer: Confirmation) -> Channel:
    """Return the channel to show: where the mode in question is strongest, or what sees most."""
    if answer.mode is not None and answer.mode.nodes:
        return answer.mode.nodes[0].channel
    if answer.view is not None and answer.view.limits:
        return answer.view.limits[0].channel
    return answer.identification.channels[0]


def plot_range(answer: Confirmation, channel: int | str | Channel) -> tuple[Axes, Axes, Axes]:
    """Draw one channel around the range of the prediction, which is shaded.

    Parameters
    ----------
    answer : Confirmation
        The answer.
    channel : int or str or Channel
        Which, as :func:`polefit.report.figures.plot_response` takes it.

    Returns
    -------
    three matplotlib.axes.Axes
        Magnitude, phase and residual, in a new figure.
    """
    low, high = answer.range_hz
    margin = _MARGIN * (high - low)
    axes = plot_response(_cut(answer.identification, low - margin, high + margin), channel)
    for ax in axes:
        limits = ax.get_xlim()
        ax.axvspan(low, high, color=drawing.SKY, alpha=0.22, linewidth=0, zorder=0)
        ax.set_xlim(*limits)
    return axes


def _cut(result: Identification, low_hz: float, high_hz: float) -> Identification:
    """Return the result with the data of a narrower band; the whole where few would be left."""
    keep = [(r.frequency_hz >= low_hz) & (r.frequency_hz <= high_hz) for r in result.responses]
    if min(np.count_nonzero(kept) for kept in keep) < _FEW_POINTS:
        return result
    sets = tuple(r.in_band(low_hz, high_hz) for r in result.responses)
    noise = tuple(std[kept] for std, kept in zip(result.noise_std, keep, strict=False))
    return replace(result, responses=sets, noise_std=noise)
