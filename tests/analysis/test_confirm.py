"""A prediction held against the data: the rules on invented results, the whole on real fits."""

import math
from dataclasses import replace

import numpy as np
import pytest
from invented_results import example, pole_of, with_pole
from rational import complex_noise, partial_fractions, response_set

import polefit
from polefit.analysis.confirm import checked_range, hold_against
from polefit.analysis.evidence import MOSTLY_NOISE
from polefit.analysis.identify import MOSTLY_NOISE_REASON, POOR_REASON

# The invented example: modes at 1.504 GHz (in doubt), 812 MHz and 38 MHz; band 10 MHz to 2.5 GHz.


def held(result, near_hz=1.5e9, within=0.1):
    return hold_against(result, checked_range(near_hz, within))


def with_mode(result, index, **changed):
    modes = list(result.modes)
    modes[index] = replace(modes[index], **changed)
    return replace(result, modes=tuple(modes))


def elsewhere(result, verdict, frequency_hz=0.3e9):
    """The result with one more in-band mode away from the prediction, and its run verdict."""
    mode = with_pole(result.modes[0], pole_of(frequency_hz, -0.01), ((1e10, 0.0), (0.0, 1e10)))
    mode = replace(mode, verdict=verdict, in_band=True)
    return replace(result, modes=(*result.modes, mode), verdict=verdict)


@pytest.mark.parametrize(
    ("run", "verdict", "overall"),
    [
        ("unstable", "confirmed", "unstable"),
        ("stable", "refuted", "stable"),
        ("undecided", "undecided", "undecided"),
    ],
)
def test_the_three_answers(run, verdict, overall):
    result = example(run)
    answer = held(result)
    assert answer.verdict == verdict
    assert answer.overall == overall
    assert answer.mode is result.modes[0]
    assert answer.in_range == (0,)
    assert answer.elsewhere == (1,), "nothing above, the nearest below"
    assert answer.range_hz == pytest.approx((1.35e9, 1.65e9), rel=1e-12)
    assert answer.identification is result
    assert all(answer.reasons)


def test_what_the_run_asks_for_is_asked_for_where_the_answer_is_open():
    assert held(example("undecided")).next_points_hz == example("undecided").next_points_hz != ()
    asked = replace(example("stable"), next_points_hz=(1e9, 1.1e9))
    assert held(asked).verdict == "refuted"
    assert held(asked).next_points_hz == ()


def test_nothing_there_is_a_refutation_too():
    answer = held(example("stable"), 0.5e9)
    assert (answer.verdict, answer.mode, answer.in_range) == ("refuted", None, ())
    assert answer.elsewhere == (1, 2), "812 MHz is nearer to 500 MHz than 38 MHz is"
    assert "no mode was found between 450 MHz and 550 MHz" in answer.reasons[0]


def test_of_a_refuted_prediction_the_least_damped_mode_is_shown():
    result = example("stable")
    answer = held(result, 1.2e9, 0.5)
    assert answer.in_range == (0, 1)
    assert answer.mode is min(result.modes[:2], key=lambda m: m.damping_ratio.value)


def test_unstable_elsewhere_refutes_and_is_still_told():
    answer = held(example("unstable"), 0.5e9)
    assert answer.verdict == "refuted"
    assert answer.overall == "unstable"
    assert 0 in answer.elsewhere


def test_a_mode_in_doubt_far_away_keeps_the_run_open_but_not_the_prediction():
    answer = held(elsewhere(example("stable"), "undecided"))
    assert answer.verdict == "refuted"
    assert answer.overall == "undecided"
    assert answer.elsewhere == (1, 3)
    assert any("the run as a whole is undecided" in note for note in answer.notes)
    confirmed = held(elsewhere(example("unstable"), "undecided"))
    assert confirmed.verdict == "undecided", "with one that grows the run is only undecided if poor"
    several = replace(elsewhere(example("unstable"), "undecided"), verdict="unstable")
    assert held(several).verdict == "confirmed"


@pytest.mark.parametrize("run", ["unstable", "stable"])
@pytest.mark.parametrize("reason", [POOR_REASON, MOSTLY_NOISE_REASON, "some other reason"])
def test_a_poor_model_carries_neither_answer(run, reason):
    poor = replace(example(run), verdict="undecided", reason=reason)
    answer = held(poor)
    assert answer.verdict == "undecided"
    assert answer.reasons[0] == reason


def test_a_poor_model_with_a_mode_in_doubt_elsewhere():
    """Then the verdicts of the modes alone do not show that the model is poor."""
    poor = replace(elsewhere(example("stable"), "undecided"), reason=POOR_REASON)
    assert held(poor).verdict == "undecided"
    assert held(replace(poor, reason="a mode in the band may grow")).verdict == "refuted"


def test_noise_hides_modes_but_not_one_that_was_found():
    def noisy(run):
        result = example(run)
        return replace(result, fit=replace(result.fit, noise_relative=1.01 * MOSTLY_NOISE))

    assert held(noisy("unstable")).verdict == "confirmed"
    assert held(noisy("stable")).verdict == "undecided"
    assert MOSTLY_NOISE_REASON in held(noisy("stable")).reasons


def test_an_interval_across_the_limit_of_the_range_decides_nothing():
    """Invented: 1.504321 GHz ± 0.30 MHz; half of the 95 % interval is 0.59 MHz."""
    result = example("unstable")
    high = result.modes[0].frequency_hz.high
    for edge, verdict in ((high * (1 + 1e-9), "confirmed"), (high * (1 - 1e-9), "undecided")):
        answer = held(result, edge / 1.1)
        assert answer.verdict == verdict
        assert answer.in_range == (0,)
    assert "ask for a wider one" in answer.reasons[0]
    low = result.modes[0].frequency_hz.low
    assert held(result, low * (1 - 1e-9) / 1.1).verdict == "refuted", "wholly outside"


def test_a_frequency_of_unknown_uncertainty_is_nowhere_for_sure():
    result = example("unstable")
    unknown = with_mode(result, 0, frequency_hz=polefit.Estimate(1.5e9))
    answer = held(unknown)
    assert answer.verdict == "undecided"
    assert "cannot be said" in answer.reasons[0]
    assert held(unknown, 0.5e9).verdict == "undecided", "it may lie there"


def test_a_range_across_the_edge_of_the_band():
    """A mode inside still confirms; its absence refutes nothing; the missing part is swept."""
    narrow = replace(example("unstable"), band_hz=(0.01e9, 1.6e9))
    assert held(narrow).verdict == "confirmed"
    answer = held(replace(example("stable"), band_hz=(0.01e9, 1.6e9)))
    assert answer.verdict == "undecided"
    assert "reaches beyond the band" in answer.reasons[0]
    points = np.array(answer.next_points_hz)
    assert points[0] == pytest.approx(1.6e9, rel=1e-9)
    # beyond the range, so that a mode at its very edge would be judged
    assert points[-1] == pytest.approx(1.65e9 * 1.05, rel=0.005)
    assert np.max(np.diff(points) / points[:-1]) <= 0.01, "a half-width of ζ = −0.01 at most"


@pytest.mark.parametrize(("near_hz", "low", "high"), [(4e9, 3.4e9, 4.7e9), (5e6, 4.2e6, 5.9e6)])
def test_a_range_outside_the_band_is_swept_as_a_whole(near_hz, low, high):
    answer = held(example("stable"), near_hz)
    assert answer.verdict == "undecided"
    assert answer.view is None
    assert "lies beyond the band" in answer.reasons[0]
    assert low < answer.next_points_hz[0] < 0.9 * near_hz
    assert 1.1 * near_hz < answer.next_points_hz[-1] < high


def test_a_growing_mode_at_the_edge_of_the_band_is_not_judged():
    result = with_mode(example("undecided"), 0, in_band=False)
    result = replace(result, band_hz=(0.01e9, 1.51e9), verdict="stable", next_points_hz=())
    answer = held(result, 1.4e9, 0.078)
    assert answer.verdict == "undecided"
    assert "is not judged: widen the sweep" in answer.reasons[0]
    assert answer.next_points_hz[0] <= 1.51e9
    assert answer.next_points_hz[-1] > 1.55e9


def test_a_growing_real_pole_has_no_frequency_to_predict():
    result = example("stable")
    real = with_pole(result.modes[2], 1e8 + 0j, ((1e10, 0.0), (0.0, 0.0)))
    real = replace(real, verdict="unstable")
    result = replace(result, modes=(*result.modes, real), verdict="unstable")
    answer = held(result)
    assert answer.verdict == "refuted"
    assert answer.overall == "unstable"
    assert answer.elsewhere == (1, 3)


def with_blind(result, everywhere, single=(), share=0.1):
    """The result with blind stretches: of all nodes, and of the first one besides."""
    own = ((*everywhere, *single),) + (everywhere,) * (len(result.channels) - 1)
    found = replace(
        result.detection, blind_hz=own, blind_everywhere_hz=everywhere, blind_share=share
    )
    return replace(result, detection=found)


def test_where_every_node_is_blind_nothing_is_refuted():
    result = with_blind(example("stable"), ((1.4e9, 1.6e9),))
    answer = held(result)
    assert answer.verdict == "undecided"
    assert answer.reasons == (
        "every node is blind to a mode with damping ratio −0.01 from 1.4 GHz to 1.6 GHz: one as "
        "high as the response itself could go unnoticed; less noise or more digits would show it",
    )
    assert answer.view.detection.blind_everywhere_hz == ((1.4e9, 1.6e9),)
    assert held(result, 0.6e9).verdict == "refuted", "the stretch is elsewhere"
    assert held(with_blind(example("unstable"), ((1.4e9, 1.6e9),))).verdict == "confirmed"


def test_one_node_that_sees_is_enough():
    result = with_blind(example("stable"), (), ((1.4e9, 1.6e9),))
    assert held(result).verdict == "refuted"


def test_a_band_that_is_mostly_blind_elsewhere_refutes_where_it_sees():
    """Then the run says nothing of the band as a whole, and the overall verdict stays open."""
    reason = "every node is blind to a mode with damping ratio −0.01 at 60 % of the samples"
    result = with_blind(example("stable"), ((0.01e9, 1e9), (1.8e9, 2.5e9)), share=0.6)
    result = replace(result, verdict="undecided", reason=reason)
    assert held(result).verdict == "refuted"
    assert held(result).overall == "undecided"
    assert held(result, 0.6e9).verdict == "undecided"
    poor = replace(result, reason=POOR_REASON)
    assert held(poor).verdict == "undecided"


def test_no_limit_no_refutation():
    answer = held(replace(example("stable"), detection=None))
    assert answer.verdict == "undecided"
    assert answer.reasons == ("what would have gone unnoticed in the range is not known",)


def test_a_blind_gap_is_asked_for():
    """31 points to 2.5 GHz lie 83 MHz apart: six half-widths of ζ = −0.01 at 1.5 GHz."""
    answer = held(with_blind(example("stable", points=31), ((1.41e9, 1.5e9),)))
    assert answer.verdict == "undecided"
    assert "samples lie up to 83 MHz apart there" in answer.reasons[0]
    assert min(answer.next_points_hz) == pytest.approx(1.41e9, rel=0.005)
    assert max(answer.next_points_hz) == pytest.approx(1.5e9, rel=0.005)


def test_a_growing_pole_that_is_not_claimed_is_mentioned():
    """The example has one at 1.9 GHz."""
    notes = held(example("stable"), 1.95e9).notes
    assert any("1.9 GHz is not claimed as a mode: residue 1.2 std" in note for note in notes)
    assert not any("not claimed" in note for note in held(example("stable")).notes)


@pytest.mark.parametrize("near_hz", [0, -1.5e9, math.nan, math.inf, "1.5e9", None, True, 1j])
def test_what_is_no_frequency_is_refused(near_hz):
    with pytest.raises(polefit.ArgumentError, match=r"^near_hz: .* give it in hertz, such as"):
        polefit.confirm([], near_hz)


@pytest.mark.parametrize("within", [0, 1, -0.1, 10, math.nan, math.inf, "10%", None, True])
def test_what_is_no_range_is_refused(within):
    with pytest.raises(polefit.ArgumentError, match=r"^within: .* such as 0.1 for ± 10 %"):
        polefit.confirm([], near_hz=1.5e9, within=within)


def test_numbers_of_numpy_are_numbers():
    asked = checked_range(np.float64(1.5e9), np.float32(0.25))
    assert (asked.low_hz, asked.high_hz) == (1.125e9, 1.875e9)


# -- real fits ----------------------------------------------------------------------------------

NOISE = 1e-3


def measured(damping, frequency_hz, seed=5, noise=NOISE):
    """Invented: a resonance at 1.52 GHz beside a broad one at 0.9 GHz, relative noise on both."""
    poles, residues = [pole_of(1.52e9, damping), pole_of(0.9e9, 0.08)], [2e11, 3e11]
    exact = partial_fractions(frequency_hz, poles, residues, 5.0)
    rng = np.random.default_rng(seed)
    noisy = exact + complex_noise(rng, exact.size, (noise * np.abs(exact)) ** 2)
    return response_set(frequency_hz, noisy, channels=["gate2"])


AXIS = np.linspace(0.2e9, 3e9, 281)


def test_noisy_data_confirm_and_refute():
    grows = polefit.confirm(measured(-0.012, AXIS), near_hz=1.5e9)
    assert grows.verdict == "confirmed"
    assert grows.mode.frequency_hz.low < 1.52e9 < grows.mode.frequency_hz.high
    decays = polefit.confirm(measured(0.012, AXIS), near_hz=1.5e9)
    assert decays.verdict == "refuted"
    assert decays.mode.damping_ratio.low < 0.012 < decays.mode.damping_ratio.high
    assert decays.overall == "stable"
    missed = polefit.confirm(measured(-0.012, AXIS), near_hz=2e9)
    assert (missed.verdict, missed.overall) == ("refuted", "unstable")


@pytest.mark.parametrize("damping", [-0.012, 0.012])
def test_the_points_asked_for_settle_the_question(damping):
    """A sweep that ends below the range leaves it open; with the points asked for it is not."""
    short = measured(damping, AXIS[AXIS < 1.3e9])
    answer = polefit.confirm(short, near_hz=1.5e9)
    assert answer.verdict == "undecided"
    longer = np.union1d(short.frequency_hz, answer.next_points_hz)
    settled = polefit.confirm(measured(damping, longer), near_hz=1.5e9)
    assert settled.verdict == ("confirmed" if damping < 0 else "refuted")


def test_a_node_drowned_in_noise_refutes_nothing():
    rng = np.random.default_rng(8)
    clean = measured(0.012, AXIS, noise=0.0)
    drowned = clean.values[:, 0] + complex_noise(rng, AXIS.size, 3e3**2)
    answer = polefit.confirm(response_set(AXIS, drowned), near_hz=1.5e9)
    assert answer.verdict == "undecided"
    assert answer.reasons


def test_a_gap_of_the_sweep_refutes_nothing_until_it_is_filled():
    """600 MHz without a point around a predicted 1.6 GHz: 19 half-widths of ζ = −0.01 each side.

    With noise of 2 % the skirts of a hidden mode do not show there.
    """
    decaying = [pole_of(1.1e9, 0.03), pole_of(0.9e9, 0.08)]

    def data(axis):
        exact = partial_fractions(axis, decaying, [2e11, 3e11], 5.0)
        rng = np.random.default_rng(4)
        return response_set(axis, exact + complex_noise(rng, exact.size, (0.02 * abs(exact)) ** 2))

    sparse = AXIS[(AXIS < 1.3e9) | (AXIS > 1.9e9)]
    answer = polefit.confirm(data(sparse), near_hz=1.6e9)
    assert answer.verdict == "undecided"
    assert "samples lie up to" in answer.reasons[0]
    filled = np.union1d(sparse, answer.next_points_hz)
    assert polefit.confirm(data(filled), near_hz=1.6e9).verdict == "refuted"
    assert polefit.confirm(data(sparse), near_hz=1.1e9).verdict == "refuted", "seen there"


def test_keywords_are_those_of_the_identification():
    answer = polefit.confirm(
        measured(0.012, AXIS), near_hz=1.5e9, noise_relative=2e-3, noise_absolute=1e-3,
        detection_damping=-0.02,
    )  # fmt: skip
    assert answer.view.detection.damping_ratio == -0.02
    stated = answer.identification.fit.noise_origin
    assert "relative noise of 0.002 as stated and absolute noise of 0.001 as stated" in stated


def test_band_and_confidence_are_those_of_the_identification():
    answer = polefit.confirm(
        measured(-0.012, AXIS), near_hz=1.5e9, band_hz=(0.5e9, 1.4e9), confidence=0.99
    )
    assert answer.verdict == "undecided"
    assert answer.identification.band_hz == (0.5e9, 1.4e9)
    assert answer.identification.confidence == 0.99
