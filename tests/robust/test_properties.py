"""What must not change the answer, and what must change it in step, on circuits drawn at random.

Few examples, the same in every run: each costs some identifications. Tolerances: the optimiser
stops within about a thousandth of a standard uncertainty, and noise weights are found anew.
"""

import numpy as np
import pytest
from abuse import FREQUENCY, measured, response
from hypothesis import given, settings
from hypothesis import strategies as st

import polefit

few = settings(max_examples=6, deadline=None, derandomize=True, database=None)
circuits = st.tuples(st.booleans(), st.integers(0, 10**6))
CHANNELS = 3


def columns(circuit):
    """Three responses of one circuit, of random strength and angle."""
    grows, seed = circuit
    rng = np.random.default_rng(seed)
    size = 1e10 * np.exp(rng.normal(0, 0.7, (CHANNELS, 3)) + 1j * rng.normal(0, 0.4, (CHANNELS, 3)))
    return np.stack(
        [response(grows=grows, residues=r, seed=seed + k) for k, r in enumerate(size)], axis=1
    )


def same(first, second, scale=1.0, sign=1.0):
    """The same modes, growth rates and frequencies scaled, within a share of their uncertainty."""
    a, b = ([m for m in r.modes if m.in_band] for r in (first, second))
    assert len(a) == len(b)
    a, b = (sorted(ms, key=lambda m: m.natural_frequency_hz.value) for ms in (a, b))
    for one, other in zip(a, b, strict=True):
        for name, turn in (("frequency_hz", 1.0), ("growth_rate_per_s", sign)):
            before, after = getattr(one, name), getattr(other, name)
            allowed = 0.2 * (before.std or 0.0) + 1e-9 * abs(before.value)
            assert after.value == pytest.approx(turn * scale * before.value, abs=scale * allowed)


@few
@given(circuits, st.floats(-6, 9))
def test_scaling_the_frequency_scales_the_modes(circuit, decades):
    values, scale = columns(circuit), 10**decades
    first = polefit.identify(measured(values))
    second = polefit.identify(measured(values, FREQUENCY * scale))
    assert first.verdict == second.verdict == ("unstable" if circuit[0] else "stable")
    same(first, second, scale)


@few
@given(circuits, st.floats(-20, 20), st.booleans())
def test_scaling_and_negating_the_values_changes_no_mode(circuit, decades, negate):
    values = columns(circuit)
    first = polefit.identify(measured(values))
    second = polefit.identify(measured(values * 10**decades * (-1 if negate else 1)))
    assert first.verdict == second.verdict
    same(first, second)


@few
@given(circuits)
def test_conjugate_data_mirror_the_modes(circuit):
    values = columns(circuit)
    first = polefit.identify(measured(values))
    second = polefit.identify(measured(values.conj()))
    assert second.verdict != "stable"
    same(first, second, sign=-1.0)


@few
@given(circuits, st.permutations(range(CHANNELS)))
def test_the_order_of_the_channels_does_not_matter(circuit, order):
    values, names = columns(circuit), [f"n{k}" for k in range(CHANNELS)]
    first = polefit.identify(measured(values, channels=names))
    second = polefit.identify(measured(values[:, order], channels=[names[k] for k in order]))
    assert first.verdict == second.verdict
    same(first, second)


@few
@given(circuits)
def test_a_channel_added_twice_tells_nothing_new(circuit):
    values = columns(circuit)
    first = polefit.identify(measured(values))
    second = polefit.identify(measured(np.c_[values, values[:, 1]]))
    assert first.verdict == second.verdict
    same(first, second)


@few
@given(circuits, st.integers(1, CHANNELS - 1))
def test_channels_may_come_in_one_set_or_in_two(circuit, at):
    values, names = columns(circuit), [f"n{k}" for k in range(CHANNELS)]
    first = polefit.identify(measured(values, channels=names))
    second = polefit.identify(
        [
            measured(values[:, :at], channels=names[:at]),
            measured(values[:, at:], channels=names[at:]),
        ]
    )
    assert first.verdict == second.verdict
    same(first, second)


@few
@given(circuits)
def test_real_factors_between_channels_cost_nothing(circuit):
    values = columns(circuit)
    first = polefit.identify(measured(values))
    second = polefit.identify(measured(values * np.array([1e-6, 1.0, -1e6])))
    assert first.verdict == second.verdict
    same(first, second)


@given(st.permutations(range(9)).filter(lambda order: list(order) != sorted(order)))
@settings(max_examples=5, deadline=None, derandomize=True, database=None)
def test_shuffled_points_are_refused(order):
    axis = FREQUENCY[:9]
    with pytest.raises(polefit.DataError, match=r"frequency_hz"):
        measured(response(axis)[list(order)], axis[list(order)])
