"""A confirmation as plain data, in the layout of the schema ``polefit.confirmation``."""

from __future__ import annotations

from dataclasses import asdict
from typing import Any

from polefit.confirmation import Confirmation, RangeView
from polefit.report.json import (
    channel_pair,
    dumped,
    identification_dict,
    identification_schema,
    mode_dict,
    plain_data,
    schema_named,
)

SCHEMA = "polefit.confirmation"
VERSION = 1


def confirmation_dict(answer: Confirmation) -> dict[str, Any]:
    """Return `answer` as dictionaries, lists, strings and numbers only.

    Parameters
    ----------
    answer : Confirmation
        The answer.

    Returns
    -------
    dict
        Valid against the schema that :func:`confirmation_schema` returns. What is NaN or infinite
        is None, since JSON has no word for it.
    """
    document = {
        "schema": SCHEMA,
        "version": VERSION,
        "verdict": answer.verdict,
        "overall_verdict": answer.overall,
        "reasons": list(answer.reasons),
        "near_hz": answer.near_hz,
        "within": answer.within,
        "range_hz": list(answer.range_hz),
        "mode": None if answer.mode is None else mode_dict(answer.mode),
        "modes_in_range": list(answer.in_range),
        "modes_elsewhere": list(answer.elsewhere),
        "range_view": None if answer.view is None else _view(answer.view),
        "next_points_hz": list(answer.next_points_hz),
        "notes": list(answer.notes),
        "identification": identification_dict(answer.identification),
    }
    plain: dict[str, Any] = plain_data(document)
    return plain


def _view(view: RangeView) -> dict[str, Any]:
    limits = [{**asdict(limit), "channel": channel_pair(limit.channel)} for limit in view.limits]
    return {
        "points": view.points,
        "step_hz": view.step_hz,
        "step_at_hz": view.step_at_hz,
        "damping_ratio": view.detection.damping_ratio,
        "power": view.detection.power,
        "limits": limits,
        "blind_hz": view.detection.blind_everywhere_hz,
        "blind_share": view.detection.blind_share,
    }


def confirmation_json(answer: Confirmation, *, ascii_only: bool = False) -> str:
    """Return :func:`confirmation_dict` as JSON text that ends with a newline."""
    return dumped(confirmation_dict(answer), ascii_only)


def confirmation_schema() -> dict[str, Any]:
    """Return the JSON Schema (draft 2020-12) of a confirmation, with that of its parts inside."""
    schema = schema_named("confirmation")
    schema["$defs"]["identification"] = identification_schema()
    return schema
