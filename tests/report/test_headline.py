"""The one sentence: terminations, what grows beside the band, what may grow, and why."""

from dataclasses import replace

import pytest

from polefit.estimates import Estimate
from polefit.modes import Evidence
from polefit.report import headline
from polefit.report.html import identification_html
from polefit.report.text import identification_text


def as_quantity(result, quantity, reference_ohm=None):
    responses = tuple(
        replace(r, quantity=quantity, reference_ohm=reference_ohm, termination="")
        for r in result.responses
    )
    return replace(result, responses=responses)


def beside(result, unstable, **changes):
    """The result with the growing mode of another one, beside the band."""
    mode = replace(unstable.modes[0], in_band=False, **changes)
    return replace(result, modes=(*result.modes[1:], mode), loops=())


def test_what_grows_beside_the_band_is_in_the_sentence(stable, unstable):
    odd = beside(stable, unstable)
    words = "BUT a growing mode at 1.504 GHz at the edge of the band is not judged: widen the sweep"
    sentence = headline.verdict_sentence(odd)
    assert sentence.startswith("STABLE: no unstable mode between")
    assert sentence.split("; ")[1] == words
    assert f'<strong class="but">{words.replace(" GHz", chr(160) + "GHz")}' in identification_html(
        odd
    )
    assert "BUT" not in headline.verdict_sentence(stable)


def test_several_beside_the_band_are_counted(undecided, unstable):
    odd = beside(undecided, unstable)
    odd = replace(odd, modes=(undecided.modes[0], *odd.modes, odd.modes[-1]))
    assert (
        "2 growing modes at 1.504 GHz at the edge of the band are not judged: widen the sweep"
        in headline.verdict_sentence(odd)
    )


@pytest.mark.parametrize(
    ("significance", "low", "told"), [(50.0, 1.0, True), (5.0, 1.0, False), (50.0, -1.0, False)]
)
def test_only_sure_growth_beside_the_band_is_told(stable, unstable, significance, low, told):
    """Where its own evidence is not complete: it must stand out and surely grow."""
    odd = beside(
        stable,
        unstable,
        verdict="undecided",
        significance=significance,
        growth_rate_per_s=Estimate(2.0, 0.5, low, 3.0),
    )
    assert ("BUT" in headline.verdict_sentence(odd)) is told


@pytest.mark.parametrize(
    ("quantity", "reference", "words"),
    [
        ("admittance", None, "with every port shorted (for open ports: --quantity impedance)"),
        ("scattering", (50.0,), "with every port loaded with 50 Ω (for open ports: --quantity"),
        ("scattering", None, "with every port loaded with its reference resistance (for open"),
        ("hybrid", None, "with port 1 open and port 2 shorted; "),
    ],
)
def test_loads_of_the_probe_are_in_the_sentence(stable, unstable, quantity, reference, words):
    assert words in headline.verdict_sentence(as_quantity(stable, quantity, reference))
    unstable = headline.verdict_sentence(as_quantity(unstable, quantity, reference))
    assert words.partition(" (")[0].rstrip("; ") in unstable


@pytest.mark.parametrize("quantity", ["impedance", "transfer"])
def test_probes_that_add_no_load_say_nothing(stable, quantity):
    assert headline.loads(as_quantity(stable, quantity)) == ""


def test_undecided_names_mode_node_and_reason(undecided):
    long = "x" * 50 + " " + "y" * 100 + "; and more"
    for name, detail, words in (
        ("growth rate", "0.3 standard uncertainties", "its growth rate cannot be told from zero."),
        ("persistence over orders", "it moves", "it does not stay where it is in a larger model."),
        ("another test", "short; and more", "short."),
        ("another test", long, "…"),
    ):
        mode = replace(undecided.modes[0], evidence=(Evidence(name, False, detail),))
        odd = replace(undecided, modes=(mode, *undecided.modes[1:]), next_points_hz=())
        sentence = headline.verdict_sentence(odd)
        assert sentence.startswith("UNDECIDED: a mode near 1.5 GHz at drain1 may grow; ")
        assert words in sentence
        assert len(sentence) < 200


def test_undecided_without_a_mode_gives_the_reason(undecided):
    odd = replace(undecided, modes=undecided.modes[1:], loops=(), next_points_hz=())
    odd = replace(odd, reason="the data are mostly noise")
    assert headline.verdict_sentence(odd) == "UNDECIDED: the data are mostly noise."


@pytest.mark.parametrize("reason", ["the data are mostly noise", "a mode may grow: its rate is 1"])
def test_the_page_says_nothing_twice(undecided, reason):
    odd = replace(undecided, modes=undecided.modes[1:], loops=(), next_points_hz=(), reason=reason)
    page = identification_html(odd)
    assert page[page.index("<main") :].count(reason) == 1


def test_a_result_at_the_prompt_takes_one_short_line(build):
    result = build("unstable", nodes=tuple(f"a_long_node_name_{i}" for i in range(40)), points=31)
    assert repr(result) == (
        "<Identification: unstable; 3 modes, 1 growing; 40 channels of impedance, "
        "10 MHz to 2.5 GHz>"
    )


def test_one_channel_is_one(build):
    text = identification_text(build("stable", nodes=("gate2",), points=31))
    assert "gate2 (1 channel, impedance)" in text


def test_reasons_use_the_notation_of_the_tables(undecided):
    odd = replace(undecided, reason="it lies 9.15e+09 rad/s off, 2e-08 of run1e-05.s1p")
    assert "9.15e9 rad/s off, 2e-8 of run1e-05.s1p." in identification_text(odd)
