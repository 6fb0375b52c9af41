"""The report of a confirmation: text by golden files, JSON by its schema, the page by its words."""

import json
import math
from dataclasses import replace

import h5py
import jsonschema
import numpy as np
import pytest
from golden import check_golden, lines_fit
from invented_results import example, pole_of, with_pole
from pages import HOSTILE, Page

import polefit
from polefit.analysis.confirm import checked_range, hold_against
from polefit.report.confirmation import verdict_sentence
from polefit.report.confirmation_json import confirmation_json, confirmation_schema
from polefit.report.confirmation_page import (
    confirmation_fragment,
    confirmation_html,
    confirmations_html,
    plot_range,
)
from polefit.report.hdf5 import write_confirmation
from polefit.report.json import documents_json

VALIDATOR = jsonschema.Draft202012Validator(confirmation_schema())
ANSWERS = {
    "confirmed": ("unstable", 1.5e9),
    "refuted": ("stable", 1.5e9),
    "unsettled": ("undecided", 1.5e9),
    "elsewhere": ("unstable", 0.6e9),
    "beyond": ("stable", 2.4e9),
}


def answer_to(name, **how):
    run, near_hz = ANSWERS[name]
    return hold_against(example(run, **how), checked_range(near_hz, 0.1))


@pytest.mark.parametrize("name", ["confirmed", "refuted", "beyond"])
def test_layout(name):
    text = str(answer_to(name))
    assert lines_fit(text)
    check_golden(f"confirmation_{name}", text)


def test_the_answer_comes_first_in_one_sentence():
    assert verdict_sentence(answer_to("confirmed")) == (
        "CONFIRMED: a mode at 1.5043 GHz grows with time constant 8.60 ns "
        "(damping ratio −0.01230 ± 0.00020), as predicted near 1.5 GHz ± 10 %; strongest at drain1."
    )
    assert verdict_sentence(answer_to("refuted")).startswith(
        "REFUTED: nothing grows near 1.5 GHz ± 10 %; the resonance at 1.504 GHz with damping ratio "
        "0.01450 ± 0.00020 decays; in the range a mode with damping ratio −0.01 "
        "would have been found with 95 % probability from a peak of "
    )
    assert verdict_sentence(answer_to("unsettled")).startswith(
        "UNDECIDED: whether a mode grows near 1.5 GHz ± 10 % cannot be told: the mode at 1.504 GHz "
        "may grow: "
    )
    assert verdict_sentence(answer_to("beyond")).endswith(
        "the range reaches beyond the band (10 MHz to 2.5 GHz): widen the sweep; next: simulate "
        "29 points from 2.5 GHz to 2.78 GHz."
    )


def test_what_grows_elsewhere_is_never_left_out():
    assert (
        "; no resonance was found there; BUT a mode elsewhere (1.504 GHz) grows; "
        in verdict_sentence(answer_to("elsewhere"))
    )
    result = example("unstable")
    moved = with_pole(result.modes[0], pole_of(0.3e9, -0.01), ((1e10, 0.0), (0.0, 1e10)))
    two = replace(result, modes=(*result.modes, moved))
    assert "; a mode elsewhere (300 MHz) grows" in verdict_sentence(
        hold_against(two, checked_range(1.5e9, 0.1))
    ), "no BUT where the prediction is confirmed"
    doubted = replace(moved, verdict="undecided")
    both = replace(result, modes=(*result.modes, moved, doubted))
    text = verdict_sentence(hold_against(both, checked_range(0.6e9, 0.1)))
    assert "BUT 2 modes grow elsewhere (300 MHz, 1.504 GHz)" in text
    assert "BUT a mode elsewhere (300 MHz) may grow" in text
    edge = replace(result.modes[0], in_band=False)
    outside = replace(result, modes=(edge,), verdict="stable")
    assert "BUT a growing mode at 1.504 GHz at the edge of the band is not judged" in (
        verdict_sentence(hold_against(outside, checked_range(0.6e9, 0.1)))
    )


def test_several_that_decay():
    found = hold_against(example("stable"), checked_range(1.2e9, 0.5))
    assert "decays, and so does 1 other" in verdict_sentence(found)


def test_short_form():
    fine = hold_against(example("stable"), checked_range(1.5e9, 0.0125))
    assert repr(fine) == "<Confirmation: refuted; 1 mode near 1.5 GHz ± 1.25 %>"
    assert repr(answer_to("refuted")) == "<Confirmation: refuted; 1 mode near 1.5 GHz ± 10 %>"


def test_evidence_is_that_of_the_modes_in_question():
    text = str(answer_to("elsewhere"))
    assert "Mode 1, 1.504 GHz\n    passed: stable-model misfit" in text
    assert "Mode 2, 812 MHz\n" not in text
    assert "none was found there" in text


# -- JSON and HDF5 ------------------------------------------------------------------------------


def test_the_schema_itself_is_valid():
    jsonschema.Draft202012Validator.check_schema(confirmation_schema())


@pytest.mark.parametrize("name", ANSWERS)
def test_every_answer_is_valid(name):
    answer = answer_to(name)
    document = json.loads(confirmation_json(answer, ascii_only=True))
    VALIDATOR.validate(document)
    assert document == json.loads(json.dumps(answer.to_dict()))
    assert {"verdict", "mode", "next_points_hz"} <= document.keys(), "the public contract"
    assert document["schema"] == "polefit.confirmation"
    assert document["identification"]["schema"] == "polefit.identification"
    assert document["overall_verdict"] == answer.overall


def test_the_schema_names_every_member_that_is_written():
    document, schema = answer_to("refuted").to_dict(), confirmation_schema()
    assert document.keys() == schema["properties"].keys()
    view = schema["$defs"]["range_view"]["properties"]
    assert document["range_view"].keys() == view.keys()
    assert (
        document["range_view"]["limits"][0].keys() == view["limits"]["items"]["properties"].keys()
    )


def test_the_schema_is_no_rubber_stamp():
    document = answer_to("confirmed").to_dict()
    for member, wrong in (
        ("verdict", "maybe"),
        ("mode", {"frequency_hz": 1.5e9}),
        ("next_points_hz", None),
        ("identification", {}),
    ):
        with pytest.raises(jsonschema.ValidationError):
            VALIDATOR.validate({**document, member: wrong})


def test_indices_point_into_the_identification():
    document = answer_to("refuted").to_dict()
    modes = document["identification"]["modes"]
    assert modes[document["modes_in_range"][0]] == document["mode"]
    assert modes[document["modes_elsewhere"][0]]["frequency_hz"]["value"] == pytest.approx(0.812e9)


def test_blind_nodes_are_null_and_named():
    result = example("stable")
    band = (result.band_hz,)
    blind = replace(
        result.detection,
        residue=np.full_like(result.detection.residue, math.inf),
        blind_hz=(band,) * len(result.channels),
        blind_everywhere_hz=band,
        blind_share=1.0,
    )
    answer = hold_against(replace(result, detection=blind), checked_range(1.5e9, 0.1))
    document = answer.to_dict()
    VALIDATOR.validate(document)
    first = document["range_view"]["limits"][0]
    assert (first["peak"], first["blind_hz"]) == (None, [pytest.approx([1.35e9, 1.65e9])])
    assert document["range_view"]["blind_hz"] == [pytest.approx([1.35e9, 1.65e9])]
    assert document["range_view"]["blind_share"] == 1.0
    assert str(answer).count("  blind  ") == 5
    assert str(answer).count("  everywhere\n") == 5


def test_several_answers_in_one_document():
    listed = [answer_to(name).to_dict() for name in ("confirmed", "refuted")]
    document = json.loads(documents_json(listed))
    assert document["schema"] == "polefit.confirmation-list"
    assert [d["verdict"] for d in document["confirmations"]] == ["confirmed", "refuted"]


def test_hdf5_holds_the_answer_beside_the_identification(tmp_path):
    answer = answer_to("refuted", points=61)
    path = tmp_path / "answer.h5"
    write_confirmation(path, answer)
    with h5py.File(path) as file:
        document = json.loads(file["confirmation/json"].asstr()[()])
        assert file["confirmation"].attrs["verdict"] in (b"refuted", "refuted")
        assert file["identification"].attrs["verdict"] in (b"stable", "stable")
    assert document == json.loads(json.dumps(answer.to_dict()))
    again = polefit.read_all(path)
    assert np.array_equal(again[0].values, answer.identification.responses[0].values)


# -- page ---------------------------------------------------------------------------------------


def test_the_page_says_what_the_text_says():
    page = confirmation_html(answer_to("refuted", points=151))
    parsed = Page(page)
    assert parsed.references <= set(parsed.ids)
    assert len(parsed.ids) == len(set(parsed.ids))
    text = parsed.text.replace("\N{NO-BREAK SPACE}", " ")
    for words in (
        "REFUTED: nothing grows near 1.5 GHz ± 10 %; the resonance at 1.504 GHz",
        "Modes in the range, 1.35 GHz to 1.65 GHz",
        "Modes elsewhere, nearest first",
        "1 mode was found between 1.35 GHz and 1.65 GHz, and it decays",
        "What would have been found in the range, of a mode with damping ratio −0.01",
        "The identification behind it",
        "STABLE: no unstable mode between 10 MHz and 2.5 GHz",
        "Radio-frequency power burns",
    ):
        assert words in text, words
    assert not {"script", "link", "img"} & set(parsed.tags)


def test_what_is_open_asks_for_more_and_numbers_stay_those_of_the_identification():
    text = Page(confirmation_html(answer_to("beyond", points=151))).text
    assert "None was found there." in text
    assert "What to simulate next" in text
    assert "start 2500000000 stop" in text, "evenly spaced, to paste"
    elsewhere = Page(confirmation_html(answer_to("elsewhere", points=151))).text
    table = elsewhere.split("Modes elsewhere, nearest first")[1].split("What the answer")[0]
    assert table.index("812.00") < table.index("1.50432"), "nearest first"
    assert "BUT a mode elsewhere" in elsewhere


def test_hostile_names_stay_text():
    answer = answer_to("confirmed", nodes=HOSTILE, points=151)
    answer = replace(answer, notes=("<b>note</b>",), reasons=("<i>reason</i>",))
    for markup in (confirmation_html(answer), confirmation_fragment(answer)):
        parsed = Page(markup)
        assert not {"script", "img", "i", "b>note"} & set(parsed.tags)
        assert "\x1b" not in markup
        assert "\u202e" not in markup
    assert all(c.isprintable() or c == "\n" for c in str(answer))


def test_the_fragment_of_a_notebook():
    markup = answer_to("confirmed", points=151)._repr_html_()
    assert markup.startswith('<div class="pf">')
    assert markup.count("<svg") == 1
    assert "CONFIRMED:" in Page(markup).text
    assert "The identification behind it" not in markup


def test_separate_answers_share_a_page():
    markup = confirmations_html([answer_to("confirmed", points=61), answer_to("beyond", points=61)])
    assert markup.count("<main") == 2
    parsed = Page(markup)
    assert len(parsed.ids) == len(set(parsed.ids))


def test_the_figure_is_about_the_range():
    """One and a half widths of the range are drawn on both sides; all where samples are few."""
    axes = plot_range(answer_to("refuted"), "gate2")
    step = 2.49e9 / 300
    assert axes[0].get_xlim() == pytest.approx((0.9e9, 2.1e9), abs=step)
    assert [ax.get_xlabel() for ax in axes] == ["", "", "frequency in GHz"]
    for ax in axes:
        box = ax.patches[-1].get_extents().transformed(ax.transData.inverted())
        assert (box.x0, box.x1) == pytest.approx((1.35e9, 1.65e9))
    few = plot_range(answer_to("beyond", points=21), 0)
    assert few[0].get_xlim() == pytest.approx((0.01e9, 2.5e9))
    with pytest.raises(polefit.ArgumentError, match="is not among gate2"):
        plot_range(answer_to("refuted"), "nowhere")
