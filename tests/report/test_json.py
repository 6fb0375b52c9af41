"""The JSON of an identification: the contract's names, the schema that ships, nothing unsaid."""

import copy
import json
import math
from dataclasses import replace

import jsonschema
import numpy as np
import pytest

from polefit.estimates import Estimate
from polefit.report.json import (
    identification_dict,
    identification_json,
    identification_schema,
    identifications_json,
)

VALIDATOR = jsonschema.Draft202012Validator(identification_schema())

# The public contract of an identification, member by member.
CONTRACT = {
    "": "schema version verdict confidence quantity pump_hz band_hz channels source fit modes "
    "background loops detection next_points_hz notes",
    "fit": "order rms_relative noise_relative noise_origin residual_white stable_model_misfit",
    "modes": "frequency_hz natural_frequency_hz damping_ratio growth_rate_per_s pole_rad_per_s "
    "verdict probability_unstable significance in_band evidence nodes",
    "nodes": "channel residue leverage",
    "loops": "mode nodes",
    "background": "pole_rad_per_s reason",
}


def test_the_schema_itself_is_valid():
    jsonschema.Draft202012Validator.check_schema(identification_schema())


@pytest.mark.parametrize("verdict", ["unstable", "stable", "undecided"])
def test_every_answer_is_valid(build, verdict):
    VALIDATOR.validate(identification_dict(build(verdict)))


def test_contract_members_are_there(unstable):
    document = identification_dict(unstable)
    assert document["schema"] == "polefit.identification"
    assert document["version"] == 1
    parts = {
        "": document,
        "fit": document["fit"],
        "modes": document["modes"][0],
        "nodes": document["modes"][0]["nodes"][0],
        "loops": document["loops"][0],
        "background": document["background"][0],
    }
    for name, members in CONTRACT.items():
        assert set(members.split()) <= parts[name].keys(), name


def test_the_schema_names_every_member_that_is_written(unstable):
    """A member missing from the schema would be unchecked; one missing here would be dead."""
    schema, document = identification_schema(), identification_dict(unstable)
    mode, defs = document["modes"][0], schema["$defs"]
    later = {"subharmonic", "seen_hz"}  # come with pump_hz
    assert document.keys() == schema["properties"].keys()
    assert document["fit"].keys() == defs["fit"]["properties"].keys()
    assert mode.keys() == defs["mode"]["properties"].keys() - later
    node = defs["mode"]["properties"]["nodes"]["items"]["properties"]
    assert mode["nodes"][0].keys() == node.keys()
    assert document["sources"][0].keys() == defs["source"]["properties"].keys()
    limits = defs["detection"]["properties"]
    assert document["detection"].keys() == limits.keys()
    assert (
        document["detection"]["limits"][0].keys() == limits["limits"]["items"]["properties"].keys()
    )


def test_values_are_those_of_the_result(unstable):
    document = json.loads(identification_json(unstable))
    mode = unstable.modes[0]
    written = document["modes"][0]
    assert written["pole_rad_per_s"] == {
        "real": mode.pole_rad_per_s.real,
        "imag": mode.pole_rad_per_s.imag,
    }
    assert written["damping_ratio"] == mode.damping_ratio.to_dict()
    assert written["evidence"] == [
        "stable-model misfit: passed",
        "persistence: passed",
        "rank: not made",
    ]
    assert document["band_hz"] == [0.01e9, 2.5e9]
    assert document["channels"][0] == ["gate2", "gate2"]


def test_source_is_one_file_or_null(build):
    one = identification_dict(build(nodes=("gate2",)))
    assert one["source"]["file"] == "gate2.csv"
    assert one["source"]["points"] == 301
    several = identification_dict(build())
    assert several["source"] is None
    assert [s["file"] for s in several["sources"]][:2] == ["gate2.csv", "drain1.csv"]
    arrays = identification_dict(build(nodes=("gate2",), files=False))
    assert arrays["source"] is None
    assert arrays["sources"] == []


def test_limits_come_as_residue_peak_and_leverage(unstable):
    found = unstable.detection
    blind = ((1e8, 2e8),)
    leverage = found.leverage.copy()
    leverage[:, 1] = np.nan
    found = replace(
        found, leverage=leverage, blind_hz=(blind, (), (), (), ()), blind_everywhere_hz=()
    )
    document = identification_dict(replace(unstable, detection=found))["detection"]
    first, second = document["limits"][:2]
    assert first["leverage"] == first["residue"] == found.residue[:, 0].tolist()
    assert second["leverage"] is None
    assert first["peak"] == found.peak[:, 0].tolist()
    assert first["peak_over_response"] == found.relative[:, 0].tolist()
    assert (first["blind_hz"], second["blind_hz"]) == ([[1e8, 2e8]], [])
    assert (document["blind_hz"], document["blind_share"]) == ([], 0.0)


def test_not_finite_becomes_null(unstable):
    mode = replace(
        unstable.modes[0], damping_ratio=Estimate(math.nan), significance=np.float64("inf")
    )
    blind = replace(unstable.detection, residue=np.full_like(unstable.detection.residue, math.inf))
    document = identification_dict(replace(unstable, modes=(mode,), detection=blind))
    assert document["modes"][0]["damping_ratio"]["value"] is None
    assert document["modes"][0]["significance"] is None
    assert document["detection"]["limits"][0]["residue"][0] is None
    assert document["detection"]["limits"][0]["peak_over_response"][0] is None
    VALIDATOR.validate(document)
    json.dumps(document, allow_nan=False)


def test_several_separate_answers_in_one_document(unstable, stable):
    document = json.loads(identifications_json([unstable, stable], ascii_only=True))
    assert document["schema"] == "polefit.identification-list"
    assert [d["verdict"] for d in document["identifications"]] == ["unstable", "stable"]


def test_ascii_only_is_ascii(unstable):
    named = replace(unstable, notes=("50 Ω",))
    assert identification_json(named, ascii_only=True).isascii()
    assert "50 Ω" in identification_json(named)


def spoil(document, path, value):
    at = document
    for key in path[:-1]:
        at = at[key]
    if value is None:
        del at[path[-1]]
    else:
        at[path[-1]] = value
    return document


@pytest.mark.parametrize(
    ("path", "value"),
    [
        (["verdict"], "fine"),
        (["version"], 2),
        (["schema"], "polefit.fix"),
        (["modes", 0, "verdict"], None),
        (["modes", 0, "frequency_hz"], 1.5e9),
        (["modes", 0, "frequency_hz", "std"], -1.0),
        (["modes", 0, "frequency_hz", "stdev"], 1.0),
        (["modes", 0, "probability_unstable"], 1.5),
        (["modes", 0, "evidence", 0], "rank"),
        (["modes", 0, "nodes", 0, "channel"], ["gate2"]),
        (["modes", 0, "nodes", 0, "leverage"], "strong"),
        (["loops", 0, "mode"], -1),
        (["fit", "order"], 3.5),
        (["fit", "residual_white"], "yes"),
        (["band_hz"], [1.0]),
        (["sources", 0, "sha256"], "abc"),
        (["background", 0, "reason"], None),
        (["next_points_hz"], None),
        (["notes"], "none"),
    ],
)
def test_a_wrong_document_fails(unstable, path, value):
    document = copy.deepcopy(identification_dict(unstable))
    VALIDATOR.validate(document)
    with pytest.raises(jsonschema.ValidationError):
        VALIDATOR.validate(spoil(document, path, value))
