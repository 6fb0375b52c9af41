"""The text report: exact layout by golden files, and every way in which a number can be missing."""

import math
from dataclasses import replace

import pytest
from golden import check_golden, lines_fit
from invented_results import with_pole

from polefit.estimates import Estimate
from polefit.report import headline, nodes, phrases
from polefit.report.text import identification_text


def scattering(result):
    """The same result as if it came from scattering data: no leverage anywhere."""
    modes = tuple(
        replace(m, nodes=tuple(replace(v, leverage=None) for v in m.nodes)) for m in result.modes
    )
    responses = tuple(
        replace(r, quantity="scattering", reference_ohm=(50.0,), termination="")
        for r in result.responses
    )
    return replace(result, modes=modes, responses=responses)


@pytest.mark.parametrize("verdict", ["unstable", "stable", "undecided"])
def test_layout(build, verdict):
    text = str(build(verdict))
    assert lines_fit(text)
    check_golden(verdict, text)


def test_layout_without_leverage(unstable):
    text = identification_text(scattering(unstable))
    assert lines_fit(text)
    assert "every port loaded with its reference resistance (50 Ω)" in text
    check_golden("scattering", text)


def test_verdict_comes_first_in_one_sentence(unstable, stable, undecided):
    first = headline.verdict_sentence(unstable)
    assert first == (
        "UNSTABLE: a mode at 1.5043 GHz grows with time constant 8.60 ns "
        "(damping ratio −0.01230 ± 0.00020); strongest at drain1."
    )
    # 1/σ: σ = 0.0123 · 2π · 1.504321e9 /s up to terms of order ζ² = 1.5e-4
    assert 1 / (0.0123 * 2 * math.pi * 1.504321e9) == pytest.approx(8.60e-9, rel=1e-3)
    assert headline.verdict_sentence(stable).startswith(
        "STABLE: no unstable mode between 10 MHz and 2.5 GHz at nodes gate2, drain1, drain2, out "
        "and 1 more; lightest damped mode: 1.504 GHz, damping ratio 0.01450 ± 0.00020; a mode"
    )
    assert headline.verdict_sentence(undecided) == (
        "UNDECIDED: a mode near 1.5 GHz at drain1 may grow; a model without it is not ruled out; "
        "next: simulate 9 points from 1.49 GHz to 1.52 GHz."
    )


def test_several_growing_modes_and_a_real_one(unstable):
    growing = replace(unstable.modes[0], verdict="unstable")
    real = replace(with_pole(growing, 2e6 + 0j, ((1e8, 0.0), (0.0, 0.0))), nodes=())
    two = replace(unstable, modes=(growing, real), loops=())
    assert headline.verdict_sentence(two).startswith(
        "UNSTABLE: 2 modes grow; the most dangerous: a mode at 1.5043 GHz grows"
    )
    alone = replace(unstable, modes=(real,), loops=())
    assert headline.verdict_sentence(alone) == (
        "UNSTABLE: a real pole grows without ringing, time constant 500 ns."
    )
    text = identification_text(alone)
    assert "318.31 kHz, real pole" in text
    assert "|p|/2π 318.3 ± 1.6 kHz" in text  # 2e6/2π Hz, 1e4/2π Hz
    assert lines_fit(text)


def test_undecided_time_constant_is_a_lower_limit(undecided):
    mode = undecided.modes[0]
    growth = mode.growth_rate_per_s
    fastest = max(abs(growth.low), abs(growth.high))
    assert growth.low < 0 < growth.high
    words = phrases.time_constant(mode)
    assert words.startswith("longer than ")
    assert float(words.split()[2]) * 1e-9 == pytest.approx(1 / fastest, rel=5e-3)


def test_unknown_uncertainties_are_said(unstable):
    nan = ((math.nan, math.nan), (math.nan, math.nan))
    mode = with_pole(unstable.modes[0], unstable.modes[0].pole_rad_per_s, nan)
    mode = replace(mode, probability_unstable=math.nan)
    text = identification_text(replace(unstable, modes=(mode,), detection=None))
    assert "1.50432 GHz (± not known)" in text
    assert "P(unstable) not known" in text
    assert "was not computed" in text
    assert "nan" not in text.lower().replace("resonan", "")
    assert lines_fit(text)


def test_nothing_found(stable):
    empty = replace(stable, modes=(), loops=(), background=(), detection=None, notes=())
    text = identification_text(empty)
    assert "none was found in the data" in text
    assert text.startswith("STABLE: no unstable mode between 10 MHz and 2.5 GHz")
    assert "Notes" not in text


def test_damping_per_millisiemens_against_moving_the_pole(unstable):
    """First order against −Re/|p| of the pole moved by −r·G, G = 1 µS: second order is 1e-6."""
    mode = unstable.modes[0]
    view = mode.nodes[0]
    moved = mode.pole_rad_per_s - view.residue * 1e-6
    change = -moved.real / abs(moved) - mode.damping_ratio.value
    strength = nodes.node_strengths(mode)[0]
    assert strength.damping_per_ms.value == pytest.approx(1000 * change, rel=1e-3)


def test_many_channels_and_long_names_stay_within_the_page(build):
    names = tuple(f"a_rather_long_node_name_of_stage_{i}_behind_the_choke" for i in range(30))
    text = str(build("unstable", nodes=names))
    assert lines_fit(text)
    assert "and 26 more" in text
    assert "and 22 more nodes at which it shows less" in text
    assert text.count("\n") < 120


def test_names_cannot_drive_the_terminal(build):
    text = str(build("unstable", nodes=("in\x1b[31m\x07", "a\nb", "\u202eevil")))
    assert all(c.isprintable() or c == "\n" for c in text)
    assert "\ufffd[31m\ufffd" in text


def test_noise_free_numbers_fit_the_table(unstable):
    pole = unstable.modes[0].pole_rad_per_s
    sharp = with_pole(unstable.modes[0], pole, ((1e-8, 0.0), (0.0, 1e-8)))
    text = identification_text(replace(unstable, modes=(sharp,)))
    assert lines_fit(text)
    assert "1.504321 GHz  −0.01230000  " in text
    assert "< 1 ppm" not in text
    assert text.count(phrases.SHARP_NOTE) == 1
    assert phrases.SHARP_NOTE not in identification_text(unstable)
    assert "grows with time constant 8.60 ns (damping ratio −0.01230);" in text


@pytest.mark.parametrize(
    ("value", "words"),
    [
        (0.99991, "> 0.9999"),
        (0.9999, "1"),
        (0.62, "0.62"),
        (0.00009, "< 0.0001"),
        (math.nan, "not known"),
    ],
)
def test_probabilities(value, words):
    assert phrases.probability(value) == words


@pytest.mark.parametrize(
    ("share", "words"),
    [(1.0, "100 %"), (0.784, "78 %"), (0.0004, "< 0.1 %"), (0.0, "0 %"), (math.nan, "not known")],
)
def test_percent(share, words):
    assert phrases.percent(share) == words


def test_long_names_are_cut_in_the_middle():
    assert phrases.plain("a" * 50 + "end", 11) == "aaaaa…aaend"
    assert len(phrases.plain("x" * 500, 60)) == 60
    assert phrases.listed(["a", "b", "a", "c"], most=2) == "a, b and 1 more"


def test_growth_of_zero_has_no_time_constant(unstable):
    still = replace(unstable.modes[0], growth_rate_per_s=Estimate(0.0))
    assert phrases.time_constant(still) == "without bound"


def test_what_lies_outside_the_band_is_marked(stable):
    modes = (*stable.modes[:2], replace(stable.modes[2], in_band=False))
    text = identification_text(replace(stable, modes=modes))
    assert "stable*" in text
    assert "* at the edge of the band or outside: it does not decide the verdict." in text
    assert "*" not in identification_text(stable)


def test_many_harmless_modes_take_a_line_each(stable):
    many = replace(stable, modes=stable.modes[:1] + stable.modes[1:2] * 9, loops=stable.loops)
    table = identification_text(many).split("\n\n")[1].splitlines()
    assert len(table) == 2 + 1 + 10 + 1  # title, headings, one second line, ten modes, the note


def test_assumptions_are_not_repeated_among_the_notes(stable):
    assumption = stable.sources[0].assumptions[0]
    text = identification_text(replace(stable, notes=(assumption, "and this")))
    assert text.count(assumption) == 1
    assert "  - and this" in text


def test_nodes_that_hardly_see_the_mode_are_counted_only(unstable):
    """The bias node has 4e-4 of the strongest residue in the example."""
    block = identification_text(unstable).split("Suspect loop 1")[1].split("\n\n")[0]
    assert "bias" not in block
    assert "and 1 more node at" in block
