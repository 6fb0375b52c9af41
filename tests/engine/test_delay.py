"""Delays in front of ports: found, taken out, and no pole moved."""

import numpy as np
import pytest
from problems import POLES, RESIDUES, axis, block, noise, response

from polefit.engine.delay import SUSPECT_TURN, find_delay, mean_delay, turned_back, turned_block
from polefit.engine.estimation import estimate_model
from polefit.engine.weighting import Measured

S = axis(201)
NOISE = 1e-4


def behind(delays, seed=5, residues=RESIDUES):
    """Responses behind lines, with relative noise."""
    clean = response(S, residues=residues) * np.exp(-S * np.asarray(delays)[:, np.newaxis])
    return clean * (1 + noise(np.random.default_rng(seed), clean.shape, NOISE))


def measured(values, known=None):
    known = np.zeros((len(values), 2, S.size)) if known is None else known
    return Measured(S, values, known, None)


def pole_errors(found):
    poles = found.solution.sections.poles()
    return [np.abs(poles - true).min() for true in POLES[:3]]  # the pairs


@pytest.mark.parametrize(("delays", "spare"), [((9.0, 9.0), 1), ((9.0, 12.0), 4)])
def test_delays_are_found_and_no_pole_moves(delays, spare):
    """Nine radians over the band, the same or not: the model needs its own poles, or few more."""
    found = estimate_model([measured(behind(delays))])
    plain = estimate_model([measured(behind((0.0, 0.0)))])
    assert plain.solution.sections.order == 7
    assert found.solution.sections.order <= 7 + spare
    # what is left, poles far beyond the band may stand for: a radian or two
    assert found.delays[0] == pytest.approx(delays, abs=2.0)
    # errors as without a delay: of the same size, from other noise; five times at most
    assert max(pole_errors(found)) < 5 * max(*pole_errors(plain), 1e-5)


def test_without_a_delay_none_is_taken_out():
    found = estimate_model([measured(behind((0.0, 0.0)))])
    assert not found.delays[0].any()


def test_phase_that_poles_explain_is_no_delay():
    """Four pairs in a chain turn the phase by four half turns; that is not a line."""
    chain = np.prod([1 / (S**2 + 0.02 * S + w**2) for w in (0.2, 0.4, 0.6, 0.8)], axis=0)
    values = chain[np.newaxis] * (1 + noise(np.random.default_rng(6), (1, S.size), NOISE))
    one = block(S, values)
    assert mean_delay(one).turn > SUSPECT_TURN
    found = estimate_model([measured(values)])
    assert not found.delays[0].any()
    assert found.solution.sections.order == 8


def test_what_is_taken_out_comes_back():
    values = behind((4.0, -3.0))
    m = measured(values, known=np.ones((2, 2, S.size)) * [[[1.0], [2.0]]])
    there = turned_back(m, np.array([4.0, -3.0]))
    back = turned_back(there, -np.array([4.0, -3.0]))
    assert back.values == pytest.approx(values, rel=1e-12)
    assert back.turn == pytest.approx(np.ones(values.shape), rel=1e-12)
    # parts with different uncertainty stay those that were measured
    assert there.values * there.turn == pytest.approx(values, rel=1e-12)
    assert turned_back(measured(values), np.array([4.0, 0.0])).turn is None
    assert turned_back(m, np.zeros(2)) is m


def test_a_common_delay_is_shared():
    """Three channels behind one line of nine radians are read together."""
    residues = np.concatenate((RESIDUES, RESIDUES[:, :1] * 1j), axis=1)
    one = block(S, behind((9.0,) * 3, residues=residues))
    found = find_delay(one, mean_delay(one).mean)
    assert np.ptp(found) == 0
    assert found[0] == pytest.approx(9.0, abs=0.3)


def test_turning_keeps_the_weighted_size():
    one = block(S, behind((2.0, 2.0)))
    turned = turned_block(one, np.array([2.0, -1.0]))
    assert np.sum(turned.target**2) == pytest.approx(np.sum(one.target**2), rel=1e-12)
