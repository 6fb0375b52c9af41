"""A growing mode in other fits: real ones stay, those of a poor search do not."""

from dataclasses import replace

import numpy as np
import pytest
from problems import POLES, axis, noise, response

from polefit.analysis.candidate import Candidate
from polefit.analysis.persistence import over_starts, over_windows, persistence, unstable_part
from polefit.engine.estimation import estimate_model
from polefit.engine.weighting import Measured

S = axis(301)
GROWING = 1


@pytest.fixture(scope="module")
def estimation():
    clean = response(S)
    values = clean * (1 + noise(np.random.default_rng(31), clean.shape, 1e-3))
    return estimate_model([Measured(S, values, np.zeros((2, 2, S.size)), None)])


def candidate(estimation, pole=None):
    own = estimation.solution.sections.own_poles()
    index = int(np.argmin(np.abs(own - POLES[GROWING])))
    there = complex(own[index]) if pole is None else pole
    return Candidate(index, there, 1e-10 * np.eye(2), 1e6, True, True)


@pytest.mark.parametrize("test", [over_starts, over_windows, unstable_part])
def test_a_real_mode_persists(test, estimation):
    found = test(candidate(estimation), estimation, 1.0)
    assert found.passed is True


@pytest.mark.parametrize("test", [over_starts, over_windows])
def test_a_mode_that_other_fits_do_not_find_fails(test, estimation):
    """As if the model had a growing pole where the data have nothing."""
    found = test(candidate(estimation, 0.01 + 0.42j), estimation, 1.0)
    assert found.passed is False
    assert "half-widths" in found.detail


@pytest.mark.parametrize("test", [over_starts, over_windows])
def test_one_that_decays_in_other_fits_fails(test, estimation):
    """Within the allowed distance of the true decaying pole, but on the other side."""
    decaying = Candidate(0, 0.001 + 0.3j, np.diag([1e-3, 1e-3]), 1e6, True, True)
    found = test(decaying, estimation, 1.0)
    assert found.passed is False
    assert found.detail.endswith("and decays")


def test_a_growing_pole_without_unstable_part_fails(estimation):
    """The residue of the decaying pole at 0.3, asked for as if it grew."""
    own = estimation.solution.sections.own_poles()
    index = int(np.argmin(np.abs(own - POLES[0])))
    mirrored = Candidate(index, complex(0.02 + 0.3j), 1e-10 * np.eye(2), 1e6, True, True)
    found = unstable_part(mirrored, estimation, 1.0)
    assert found.passed is False


def test_only_growing_modes_are_asked_everything(estimation):
    asked = persistence(candidate(estimation), estimation, 1.0, questioned=True)
    assert [e.name for e in asked] == [
        "persistence over orders",
        "persistence over starts",
        "persistence over windows",
        "projection on unstable functions",
    ]
    assert len(persistence(candidate(estimation), estimation, 1.0, questioned=False)) == 1
    real = replace(candidate(estimation), pole=0.4 + 0j)
    assert len(persistence(real, estimation, 1.0, questioned=True)) == 1
