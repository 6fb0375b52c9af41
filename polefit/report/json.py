"""An identification as plain data, in the layout of the schema ``polefit.identification``."""

from __future__ import annotations

import json
import math
from collections.abc import Sequence
from importlib import resources
from typing import Any

import numpy as np
from numpy.typing import NDArray

from polefit.modes import BackgroundPole, Detection, FitQuality, Identification, Mode, NodeView
from polefit.responses import Channel, ResponseSet

SCHEMA = "polefit.identification"
VERSION = 1


def identification_dict(result: Identification) -> dict[str, Any]:
    """Return `result` as dictionaries, lists, strings and numbers only.

    Parameters
    ----------
    result : Identification
        The answer.

    Returns
    -------
    dict
        Valid against the schema that :func:`identification_schema` returns. What is NaN or
        infinite is None, since JSON has no word for it.
    """
    sources = [_source(r) for r in result.responses if r.source is not None]
    document = {
        "schema": SCHEMA,
        "version": VERSION,
        "verdict": result.verdict,
        "reason": result.reason,
        "confidence": result.confidence,
        "quantity": result.quantity,
        "pump_hz": result.pump_hz,
        "band_hz": list(result.band_hz),
        "channels": [channel_pair(c) for c in result.channels],
        "termination": result.termination,
        "source": sources[0] if len(sources) == len(result.responses) == 1 else None,
        "sources": sources,
        "fit": _fit(result.fit),
        "modes": [mode_dict(m) for m in result.modes],
        "background": [_background(p) for p in result.background],
        "loops": [{"mode": loop.mode, "nodes": list(loop.nodes)} for loop in result.loops],
        "detection": None
        if result.detection is None
        else _detection(result.detection, result.channels),
        "next_points_hz": list(result.next_points_hz),
        "notes": list(result.notes),
    }
    plain: dict[str, Any] = plain_data(document)
    return plain


def identification_json(result: Identification, *, ascii_only: bool = False) -> str:
    """Return :func:`identification_dict` as JSON text that ends with a newline."""
    return dumped(identification_dict(result), ascii_only)


def identifications_json(results: Sequence[Identification], *, ascii_only: bool = False) -> str:
    """Return several separate identifications as one JSON document with a newline at its end."""
    return documents_json([identification_dict(r) for r in results], ascii_only=ascii_only)


def documents_json(documents: Sequence[dict[str, Any]], *, ascii_only: bool = False) -> str:
    """Return several separate answers of one kind as one JSON document, a list of their kind."""
    kind = documents[0]["schema"]
    plural = f"{kind.removeprefix('polefit.')}s"
    return dumped(
        {"schema": f"{kind}-list", "version": VERSION, plural: list(documents)}, ascii_only
    )


def identification_schema() -> dict[str, Any]:
    """Return the JSON Schema (draft 2020-12) of an identification."""
    return schema_named("identification")


def schema_named(name: str) -> dict[str, Any]:
    """Return one of the schemas of the package as it is written there."""
    file = resources.files("polefit.report") / "schemas" / f"{name}.schema.json"
    schema: dict[str, Any] = json.loads(file.read_text(encoding="utf-8"))
    return schema


def dumped(document: dict[str, Any], ascii_only: bool = False) -> str:
    """Return plain data as JSON text that ends with a newline."""
    return json.dumps(document, indent=2, ensure_ascii=ascii_only, allow_nan=False) + "\n"


def plain_data(value: Any) -> Any:
    """Turn NumPy scalars into Python ones and every non-finite number into None."""
    if isinstance(value, dict):
        return {key: plain_data(item) for key, item in value.items()}
    if isinstance(value, list | tuple):
        return [plain_data(item) for item in value]
    if isinstance(value, np.generic):
        value = value.item()
    if isinstance(value, float) and not math.isfinite(value):
        return None
    return value


def channel_pair(channel: Channel) -> list[str]:
    """Return output and input."""
    return [channel.output, channel.input]


def _complex(value: complex) -> dict[str, float]:
    return {"real": value.real, "imag": value.imag}


def _source(responses: ResponseSet) -> dict[str, Any]:
    source = responses.source
    assert source is not None, "callers pass sets that were read from a file"
    return {
        "file": source.file,
        "sha256": source.sha256,
        "points": responses.points,
        "format": source.format,
        "assumptions": list(source.assumptions),
    }


def _fit(fit: FitQuality) -> dict[str, Any]:
    return {
        "order": fit.order,
        "order_reason": fit.order_reason,
        "rms_relative": fit.rms_relative,
        "noise_relative": fit.noise_relative,
        "noise_origin": fit.noise_origin,
        "residual_white": fit.residual_white,
        "stable_model_misfit": fit.stable_model_misfit,
    }


def mode_dict(mode: Mode) -> dict[str, Any]:
    """Return a mode as dictionaries, lists, strings and numbers; not all need be finite."""
    folded: dict[str, Any] = {}
    if mode.subharmonic is not None:
        folded = {"subharmonic": mode.subharmonic, "seen_hz": list(mode.seen_hz)}
    return {
        "frequency_hz": mode.frequency_hz.to_dict(),
        "natural_frequency_hz": mode.natural_frequency_hz.to_dict(),
        "damping_ratio": mode.damping_ratio.to_dict(),
        "growth_rate_per_s": mode.growth_rate_per_s.to_dict(),
        "pole_rad_per_s": _complex(mode.pole_rad_per_s),
        "covariance_rad_per_s": [list(row) for row in mode.covariance],
        "verdict": mode.verdict,
        "probability_unstable": mode.probability_unstable,
        "significance": mode.significance,
        "in_band": mode.in_band,
        "evidence": [str(e) for e in mode.evidence],
        "evidence_details": [
            {"name": e.name, "passed": e.passed, "detail": e.detail} for e in mode.evidence
        ],
        "nodes": [_node(view) for view in mode.nodes],
        **folded,
    }


def _node(view: NodeView) -> dict[str, Any]:
    return {
        "channel": channel_pair(view.channel),
        "residue": _complex(view.residue),
        "residue_std": view.residue_std,
        "share": view.share,
        "leverage": None if view.leverage is None else view.leverage.to_dict(),
    }


def _background(pole: BackgroundPole) -> dict[str, Any]:
    return {"pole_rad_per_s": _complex(pole.pole_rad_per_s), "reason": pole.reason}


def _detection(found: Detection, channels: Sequence[Channel]) -> dict[str, Any]:
    def column(values: NDArray[np.float64], k: int) -> list[float]:
        listed: list[float] = np.asarray(values[:, k], dtype=float).tolist()
        return listed

    peak, relative = found.peak, found.relative
    return {
        "frequency_hz": np.asarray(found.frequency_hz, dtype=float).tolist(),
        "damping_ratio": found.damping_ratio,
        "power": found.power,
        "limits": [
            {
                "channel": channel_pair(channel),
                "residue": column(found.residue, k),
                "peak": column(peak, k),
                "peak_over_response": column(relative, k),
                "leverage": None
                if np.isnan(found.leverage[:, k]).all()
                else column(found.leverage, k),
                "blind_hz": [list(stretch) for stretch in found.blind_hz[k]],
            }
            for k, channel in enumerate(channels)
        ],
        "blind_hz": [list(stretch) for stretch in found.blind_everywhere_hz],
        "blind_share": found.blind_share,
    }
