"""What speaks for and against a growing mode, and the company it keeps."""

import re

import numpy as np
import pytest
from rational import complex_noise, nearest_mode, partial_fractions, response_set

import polefit
from polefit.analysis.candidate import Candidate
from polefit.analysis.evidence import (
    COLOURED_MISFIT,
    COMPANION_MISFIT,
    STABLE_MODEL_RISE,
    Comparison,
    _against_stable,
)
from polefit.engine.stable_model import StableModel
from polefit.engine.whiteness import Whiteness

HZ = np.linspace(0.5e9, 1.5e9, 301)
GROWING = 2 * np.pi * 1e9 * (0.01 + 1j)


CANDIDATE = Candidate(0, GROWING, np.zeros((2, 2)), 1e4, in_band=True, near_band=True)


class Estimated:
    """As much of an estimation as the comparison looks at."""

    def __init__(self, white=True, inflation=1.0):
        self.whiteness = Whiteness(white, 0.5 if white else 0.0, 0.0, inflation)


def outcome(ratio, rise=1e3, companions=0, distorted=False, **more):
    stable = StableModel(ratio, rise, 4)
    against = Comparison(stable, {0: stable}, {0: companions}, distorted, noisy=False)
    return _against_stable(CANDIDATE, against, Estimated(**more))


@pytest.mark.parametrize(
    ("more", "asked"),
    [
        ({}, COMPANION_MISFIT[0]),
        ({"companions": 1}, COMPANION_MISFIT[1]),
        ({"companions": 2}, COMPANION_MISFIT[2]),
        ({"companions": 5}, COMPANION_MISFIT[2]),
        ({"distorted": True}, COMPANION_MISFIT[2]),
        ({"white": False}, COLOURED_MISFIT),
        ({"white": False, "companions": 1}, COLOURED_MISFIT * COMPANION_MISFIT[1]),
    ],
)
def test_doubt_asks_for_a_larger_misfit(more, asked):
    assert outcome(1.01 * asked, **more).passed
    failed = outcome(0.99 * asked, **more)
    assert not failed.passed
    if more:
        assert f"{asked:g} times are asked for" in failed.detail


def test_a_rise_that_noise_explains_is_no_evidence():
    assert outcome(1.5, rise=1.01 * STABLE_MODEL_RISE).passed
    assert not outcome(1.5, rise=0.99 * STABLE_MODEL_RISE).passed
    # correlated samples tell less: the rise counts for as much less
    assert not outcome(100, rise=4 * STABLE_MODEL_RISE, white=False, inflation=5.0).passed
    assert outcome(100, rise=6 * STABLE_MODEL_RISE, white=False, inflation=5.0).passed


def identified(poles, residues, seed=1):
    clean = partial_fractions(HZ, poles, residues, constant=0.2)
    noise = complex_noise(np.random.default_rng(seed), HZ.size, 1e-3**2)
    return polefit.identify(response_set(HZ, clean + noise))


def evidence(result, name):
    return next(e for e in nearest_mode(result, GROWING).evidence if e.name == name)


def test_a_lone_growing_mode_has_everything_for_it():
    result = identified([GROWING], [1e8])
    assert result.verdict == "unstable"
    mode = nearest_mode(result, GROWING)
    assert {e.name: e.passed for e in mode.evidence} == dict.fromkeys(
        (
            "growth rate",
            "residue",
            "persistence over orders",
            "persistence over starts",
            "persistence over windows",
            "projection on unstable functions",
            "stable-model misfit",
        ),
        True,
    )
    assert "resonance curve" not in evidence(result, "stable-model misfit").detail


def test_a_weak_growing_mode_on_a_strong_ones_curve_is_asked_for_more():
    """A stronger pair within three half-widths and less than five times as wide."""
    neighbour = 2 * np.pi * 1.01e9 * (-0.02 + 1j)
    result = identified([GROWING, neighbour], [1e8, 1e9])
    detail = evidence(result, "stable-model misfit").detail
    assert "on the resonance curve of a stronger one" in detail
    assert f"{COMPANION_MISFIT[1]:g} times are asked for" in detail


@pytest.mark.parametrize(
    ("neighbour", "residue"),
    [
        (2 * np.pi * 1.2e9 * (-0.02 + 1j), 1e9),  # ten half-widths away
        (2 * np.pi * 1.01e9 * (-0.2 + 1j), 1e9),  # twenty times as wide
        (2 * np.pi * 1.01e9 * (-0.02 + 1j), 2e7),  # weaker
    ],
)
def test_other_company_casts_no_doubt(neighbour, residue):
    result = identified([GROWING, neighbour], [1e8, residue])
    assert "resonance curve" not in evidence(result, "stable-model misfit").detail
    assert result.verdict == "unstable"


def test_each_growing_mode_is_tested_with_the_others_left_alone():
    """A strong growing pair must not lend its evidence to a second one."""
    second = 2 * np.pi * 1.3e9 * (0.02 + 1j)
    result = identified([GROWING, second], [1e8, 3e8])
    assert [m.verdict for m in result.modes] == ["unstable", "unstable"]
    details = [
        next(e for e in m.evidence if e.name == "stable-model misfit").detail for m in result.modes
    ]
    ratios = [float(re.search(r"data ([\d.e+]+) times", d).group(1)) for d in details]
    assert all("without this right-half-plane pole" in d for d in details)
    # each has a misfit of its own, and no stable model fits better than with one pole spared
    assert ratios[0] != ratios[1]
    assert all(1 < r <= 1.01 * result.fit.stable_model_misfit for r in ratios)


def test_stable_modes_are_not_compared():
    result = identified([GROWING - 2 * GROWING.real], [1e8])
    names = {e.name for e in result.modes[0].evidence}
    assert "stable-model misfit" not in names
    assert result.fit.stable_model_misfit is None
