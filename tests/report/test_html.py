"""The page: whole, harmless, free of the network, readable with thirty channels."""

from dataclasses import replace

import pytest
from pages import HOSTILE, Page

from polefit.report.html import identification_fragment, identification_html, identifications_html


@pytest.fixture(scope="module")
def page(build):
    return identification_html(build("unstable", points=61))


def test_it_nests_and_references_resolve(page):
    parsed = Page(page)
    assert page.startswith("<!DOCTYPE html>")
    assert parsed.references <= set(parsed.ids)
    assert len(parsed.ids) == len(set(parsed.ids))


def test_it_needs_no_network_and_runs_nothing(page):
    parsed = Page(page)
    assert not {"script", "link", "iframe", "object", "embed", "img", "base"} & set(parsed.tags)
    assert "http" not in page.replace("http-equiv", "")
    assert not [n for n, _ in parsed.attributes if n.startswith("on")]
    assert "default-src 'none'" in page
    assert "@import" not in page


def test_it_says_everything_that_the_text_says(page):
    text = Page(page).text.replace("\N{NO-BREAK SPACE}", " ")
    for words in (
        "UNSTABLE: a mode at 1.5043 GHz grows with time constant 8.60 ns",
        "1.50432 ± 0.00030 GHz",
        "Suspect loop 1: mode 1, 1.504 GHz",
        "stable-model misfit passed",
        "rank not made",
        "What these tests ask",
        "can a model without a growing pole explain the same data?",
        "What would have gone unnoticed",
        "A mode with damping ratio −0.01 would have been found with 95 % probability",
        "Smallest peak found at each node",
        "order 10; lowest BIC",
        "every probed port open",
        "not claimed as modes",
        "Headings name ohm",
        "confirm on the bench",
        "Radio-frequency power burns",
    ):
        assert words in text, words
    assert "00" * 32 in text  # the digest of the first file, in full
    assert page.count("<svg") == 1 + 1 + 5 + 1  # poles, nodes, five channels, detection


@pytest.mark.parametrize("verdict", ["stable", "undecided"])
def test_the_other_verdicts(build, verdict):
    text = Page(identification_html(build(verdict, points=31))).text
    assert f"{verdict.upper()}:" in text
    assert ("What to simulate next" in text) is (verdict == "undecided")
    assert ("1490000000 1493750000 1497500000" in text) is (verdict == "undecided")


def test_hostile_names_stay_text(build):
    result = build("unstable", nodes=HOSTILE, points=31)
    result = replace(result, notes=("<b>note</b>",), reason="<i>reason</i>")
    markup = identification_html(result)
    parsed = Page(markup)
    assert not {"script", "img", "b>note"} & set(parsed.tags)
    assert "<b>note" not in markup
    assert "<i>reason" not in markup
    assert "<script>alert(1)</script>" in parsed.text
    assert "{{ 7 * 7 }}" in parsed.text
    assert "\x1b" not in markup
    assert "\u202e" not in markup
    assert not [n for n, _ in parsed.attributes if n.startswith("on")]
    assert "x" * 100 not in markup


def test_thirty_channels_stay_usable(build):
    markup = identification_html(
        build("stable", nodes=tuple(f"n{i}" for i in range(30)), points=51)
    )
    assert markup.count("<details open>") == 3
    # and the poles not claimed, the modes of no concern, what tests ask, the limits
    assert markup.count("<details>") == 27 + 4
    assert "All channels" in markup
    assert len(markup) < 5_000_000


def test_arrays_without_files(build):
    text = Page(identification_html(build(nodes=("gate2",), files=False, points=31))).text
    assert "Arrays, not files." in text
    assert "impedance from arrays" in text


def test_nothing_found(stable):
    empty = replace(stable, modes=(), loops=(), background=(), detection=None, notes=())
    text = Page(identification_html(empty)).text
    assert "No mode was found" in text
    assert "No test of a mode was recorded" in text


def test_several_results_share_one_page(build):
    results = [build("unstable", nodes=("a",), points=31), build("stable", nodes=("b",), points=31)]
    parsed = Page(identifications_html(results))
    assert parsed.tags.count("main") == 2
    assert len(parsed.ids) == len(set(parsed.ids))
    assert parsed.references <= set(parsed.ids)


def test_notebook_fragment(unstable):
    fragment = unstable._repr_html_()
    assert fragment == identification_fragment(unstable)
    parsed = Page(fragment)
    assert parsed.tags[0] == "div"
    assert not {"html", "body", "script"} & set(parsed.tags)
    assert "UNSTABLE:" in parsed.text
    assert "confirm on the bench" in parsed.text


def test_the_same_result_gives_the_same_page(build):
    result = build(nodes=("gate2",), points=31)
    assert identification_html(result) == identification_html(result)


def test_limits_have_the_digits_of_their_estimate(undecided):
    """ζ = −0.00004 ± 0.00020: 1.96 standard uncertainties to both sides."""
    assert "ζ from −0.00043 to 0.00035 at 95 %" in identification_html(undecided)


def test_one_node_needs_no_bars(build):
    page = identification_html(build("stable", nodes=("gate2",), points=31))
    assert "Suspect loop 1" in page
    assert "Nodes of mode" not in page
    assert "Nodes of mode" in identification_html(build("stable", nodes=("a", "b"), points=31))
