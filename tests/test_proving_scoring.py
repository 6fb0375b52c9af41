"""The scorer of the proving ground, on invented truths and invented answers."""

import numpy as np
import pytest
from proving.case import Case, TrueMode
from proving.scoring import Answer, Claim, score
from proving.summary import Summary

import polefit

HZ = np.linspace(1e8, 1e9, 50)
RESPONSES = polefit.ResponseSet.from_arrays(
    HZ, np.ones(50) + 0.1j, channels=["n"], quantity="impedance"
)


def true(megahertz, growth, detectability=100.0, place="inside", std=None):
    """A mode; `growth` in 1e6/s. `std` overrides what the detectability makes of it."""
    bound = abs(growth) * 1e6 / detectability if std is None else std
    return TrueMode(complex(growth * 1e6, 2e6 * np.pi * megahertz), bound, bound, place, 1e4)


def claim(megahertz, growth, std=0.01):
    """A claim with intervals of ± 2 standard deviations; all in 1e6 but the frequency."""
    angular = 2 * np.pi * megahertz
    return Claim(
        complex(growth * 1e6, angular * 1e6),
        std * 1e6,
        std * 1e6,
        ((growth - 2 * std) * 1e6, (growth + 2 * std) * 1e6),
        ((angular - 2 * std) * 1e6, (angular + 2 * std) * 1e6),
    )


def case_of(*modes, infinite=False):
    return Case("invented", "invented", 1, RESPONSES, modes, "none", "", infinite=infinite)


BURIED = true(700, -50, std=np.inf)


@pytest.mark.parametrize(
    ("modes", "answer"),
    [
        ([true(500, 3), true(300, -5)], "unstable"),
        ([true(500, 3, 6.0)], "unstable"),
        ([true(500, 3, 5.9)], "open"),
        ([true(500, 3, std=np.inf)], "open"),
        ([true(500, -3), true(300, -5)], "stable"),
        ([true(500, -3), true(300, -5, 5.9)], "open"),
        ([true(500, -3), BURIED], "stable"),
        ([true(500, -3), true(1100, 4, place="edge")], "open"),
        ([true(500, -3), true(1100, -4, 0.1, place="edge")], "stable"),
        ([true(500, -3), true(5000, 4, place="outside")], "stable"),
        ([true(500, 3), true(1100, 4, place="edge")], "unstable"),
    ],
)
def test_what_can_be_expected(modes, answer):
    assert case_of(*modes).answer == answer


@pytest.mark.parametrize(
    ("modes", "verdict", "flag"),
    [
        ([true(500, -3)], "unstable", "false_unstable"),
        ([BURIED], "unstable", "false_unstable"),
        ([true(500, 3, 2.0)], "unstable", None),
        ([true(500, 3)], "stable", "false_stable"),
        ([true(500, 3, 5.0)], "stable", None),
        ([true(500, 3)], "undecided", "undecided"),
        ([true(500, -3)], "undecided", "undecided"),
        ([true(500, -3, 2.0)], "undecided", None),
        ([true(500, -3), true(1100, 4, place="edge")], "unstable", "edge"),
        ([true(500, 3)], "unstable", None),
        ([true(500, -3)], "stable", None),
    ],
)
def test_verdicts(modes, verdict, flag):
    judged = score(case_of(*modes), Answer(verdict))
    flags = ("false_unstable", "false_stable", "undecided", "edge")
    assert [name for name in flags if getattr(judged, name)] == ([flag] if flag else [])


def test_claims_meet_the_nearest_modes_once():
    modes = (true(500, -3), true(510, -3.2), true(800, 1))
    answer = Answer("unstable", claims=(claim(510, -3.21), claim(500, -2.99), claim(800, 1.015)))
    judged = score(case_of(*modes), answer)
    assert not judged.spare
    assert not judged.missed
    assert [h.growth_error for h in judged.hits] == pytest.approx([0.01 / 0.03, -0.01 / 0.032, 1.5])
    assert [h.growth_covered for h in judged.hits] == [True, True, True]
    assert [h.claimed for h in judged.hits] == pytest.approx([0.01 / 0.03, 0.01 / 0.032, 1.0])


def test_a_second_claim_of_the_same_mode_is_spare():
    answer = Answer("stable", claims=(claim(500, -3.0), claim(500.01, -3.01)))
    assert len(score(case_of(true(500, -3)), answer).spare) == 1


@pytest.mark.parametrize(
    ("megahertz", "growth", "std", "met"),
    [
        (500, -3.29, 1e-3, True),  # within a tenth of |σ|
        (500, -3.31, 1e-3, False),
        (500, -3.31, 0.04, True),  # within eight standard deviations of both parts
        (500 + 5 / (2 * np.pi), -3, 0.1, False),
        (500 + 5 / (2 * np.pi), -3, 1.0, True),
    ],
)
def test_how_far_a_claim_may_lie(megahertz, growth, std, met):
    judged = score(
        case_of(true(500, -3, 1e6)), Answer("stable", claims=(claim(megahertz, growth, std),))
    )
    assert bool(judged.hits) == met
    assert bool(judged.spare) != met
    assert bool(judged.missed) != met


def test_no_uncertainty_is_large_enough_to_claim_a_mode_elsewhere():
    judged = score(case_of(true(300, -3)), Answer("stable", claims=(claim(700, -3, 1e6),)))
    assert len(judged.spare) == len(judged.missed) == 1


def test_intervals_that_miss_are_counted():
    answer = Answer("unstable", claims=(claim(500, 3.03, 0.01),))
    (hit,) = score(case_of(true(500, 3)), answer).hits
    assert hit.growth_error == pytest.approx(1.0)
    assert hit.growth_covered is False
    assert hit.angular_covered is True


def test_real_modes_have_no_frequency_to_cover():
    real = TrueMode(complex(-2e9), 1e7, 0.0, "inside", 1e4)
    meets = Claim(complex(-2.01e9), 1e7, 0.0, (-2.03e9, -1.99e9), (0.0, 0.0))
    (hit,) = score(case_of(real), Answer("stable", claims=(meets,))).hits
    assert hit.angular_covered is None
    assert np.isnan(hit.angular_error)
    assert hit.growth_error == pytest.approx(-1.0)


def test_claims_amid_unresolved_poles_are_no_inventions():
    blurred = true(500, -300, 1.0), true(505, -250, 2.0)
    between = Answer("stable", claims=(claim(520, -150, 1.0), claim(900, -1, 0.01)))
    judged = score(case_of(*blurred), between)
    assert [c.pole.imag for c in judged.spare] == pytest.approx([2e6 * np.pi * 900])
    assert len(judged.blended) <= 1  # met one of them, or neither

    twins = true(500, -30, std=2e7), true(502, -30, std=2e7)  # two bounds apart
    three = tuple(claim(f, -30, 0.1) for f in (500, 502, 501))
    judged = score(case_of(*twins), Answer("stable", claims=three))
    assert len(judged.blended) == 1
    assert not judged.spare


def test_smooth_claims_where_no_order_is_exact():
    smooth = Answer("stable", claims=(claim(400, -2e3, 1.0),))
    assert score(case_of(true(800, -3)), smooth).spare
    infinite = score(case_of(true(800, -3), infinite=True), smooth)
    assert infinite.blended
    assert not infinite.spare
    growing = Answer("unstable", claims=(claim(400, 2e3, 1.0),))
    assert score(case_of(true(800, -3), infinite=True), growing).spare


def test_modes_mentioned_at_the_edge():
    """They may meet a mode, are never spare, and raise an alarm if they grow without cause."""
    modes = (true(500, -3), true(1050, 4, place="edge"))
    mentioned = Answer("stable", claims=(), outside=(claim(500, -3), claim(1050, 4)))
    judged = score(case_of(*modes), mentioned)
    assert not judged.spare
    assert not judged.missed
    assert not judged.alarms
    assert len(judged.hits) == 1
    alarm = score(case_of(true(500, -3)), mentioned)
    assert [c.pole.real for c in alarm.alarms] == [4e6]
    assert not alarm.spare


def test_the_worst_come_first_and_say_why():
    stable = case_of(true(500, -3))
    wrong = score(stable, Answer("unstable", claims=(claim(700, 1), claim(500, -3))))
    assert wrong.wrong().startswith("FALSE UNSTABLE; spare 7e+08 Hz")
    missed = score(stable, Answer("stable"))
    assert "missed 5e+08 Hz" in missed.wrong()
    fine = score(stable, Answer("stable", claims=(claim(500, -3),)))
    assert fine.wrong() == ""
    assert wrong.badness > missed.badness > fine.badness == 0


def test_rows_add_up():
    growing = case_of(true(500, 3, 50.0), true(300, -3))
    scores = (
        score(growing, Answer("unstable", claims=(claim(500, 3.06), claim(300, -3.0))), 2.0),
        score(growing, Answer("stable", claims=(claim(300, -3.06, 0.02),)), 8.0),
        score(case_of(true(500, -3)), Answer("undecided", claims=(claim(700, 1),))),
    )
    summary = Summary(scores)
    assert summary.answers("unstable") == 2
    assert summary.answers("stable") == 1
    assert [summary.count(n) for n in ("false_stable", "undecided", "missed", "spare", "hits")] == [
        1, 1, 2, 1, 3
    ]  # fmt: skip
    assert summary.ratios == (pytest.approx(4.0), 8.0)
    # errors of one, none and two bounds
    assert summary.accuracy.rms == pytest.approx(np.sqrt(5 / 3))
    assert summary.accuracy.robust == pytest.approx(1 / 0.6745)
    assert summary.accuracy.coverage("growth_covered") == pytest.approx(1 / 3)
    assert summary.by_damping()["growing"].rms == pytest.approx(1.0)
    verdicts = summary.by_detectability()["12 to 100"]
    assert verdicts == {"unstable": 1, "undecided": 0, "stable": 1}
    assert sum(sum(v.values()) for v in summary.by_detectability().values()) == 2
