"""What is refused before any fit, and what is left out of one, each in one line."""

import numpy as np
import pytest

import polefit
from polefit.analysis.preparation import FEWEST_POINTS, node_names, prepare
from polefit.channels import as_channel
from polefit.errors import ArgumentError, DataError, NotSupportedError
from polefit.precision import Precision, Printed
from polefit.responses import QUANTITIES, ResponseSet

HZ = np.linspace(1e9, 2e9, 21)


def values(seed=1, channels=1):
    parts = np.random.default_rng(seed).normal(size=(2, HZ.size, channels))
    return parts[0] + 1j * parts[1]


def one(name="a", quantity="impedance", seed=1, frequency_hz=HZ, **more):
    return polefit.ResponseSet.from_arrays(
        frequency_hz, values(seed)[: len(frequency_hz)], channels=[name], quantity=quantity, **more
    )


def three(columns):
    return polefit.ResponseSet.from_arrays(
        HZ, np.stack(columns, axis=1), channels=["a", ("b", "a"), "c"], quantity="impedance"
    )


def refused(error, *arguments):
    """The message, which must fit on one line and end in a remedy."""
    with pytest.raises(error) as caught:
        prepare(*arguments)
    message = str(caught.value)
    assert "\n" not in message
    assert len(message) < 400
    return message


@pytest.mark.parametrize("given", [[], (), [None], ["a.s1p"], [one(), 3]])
def test_anything_but_response_sets_is_refused(given):
    assert "give a ResponseSet or a sequence of them" in refused(ArgumentError, given, None)


def test_too_few_points_are_refused_with_the_channel_and_the_number():
    message = refused(DataError, one(frequency_hz=HZ[: FEWEST_POINTS - 1]), None)
    assert message.startswith(f"a: {FEWEST_POINTS - 1} points")
    assert f"at least {FEWEST_POINTS}" in message
    assert prepare(one(frequency_hz=HZ[:FEWEST_POINTS]), None).responses[0].points == FEWEST_POINTS


def test_a_band_with_too_few_points_is_refused():
    message = refused(DataError, one(), (1.0e9, 1.2e9))
    assert "5 points" in message
    assert "in the band" in message


@pytest.mark.parametrize(
    ("band", "text"),
    [
        ((2e9, 1e9), "give the lower edge first"),
        ((1e9, 1e9), "give the lower edge first"),
        ((-1e9, 1e9), "no band"),
        ((np.nan, 1e9), "no band"),
        ((3e9, 4e9), "the data cover"),
        (1e9, "not a pair of frequencies"),
        ((1e9,), "not a pair of frequencies"),
        (("low", "high"), "not a pair of frequencies"),
    ],
)
def test_a_band_without_points_is_refused(band, text):
    message = refused(ArgumentError, one(), band)
    assert message.startswith("band_hz:")
    assert text in message


def test_different_drives_are_refused():
    message = refused(ArgumentError, [one(pump_hz=3e9), one(pump_hz=2e9)], None)
    assert "different pump_hz" in message
    message = refused(ArgumentError, [one(pump_hz=3e9), one()], None)
    assert "different pump_hz" in message


@pytest.mark.parametrize("quantity", ["return-difference", "loop-gain"])
def test_zeros_are_not_looked_for_yet(quantity):
    message = refused(NotSupportedError, one(quantity=quantity), None)
    assert quantity in message
    assert "driving-point impedance" in message


@pytest.mark.parametrize(
    "quantity", [q for q in QUANTITIES if q not in ("return-difference", "loop-gain")]
)
def test_every_other_quantity_is_taken_alone(quantity):
    assert prepare(one(quantity=quantity), None).responses[0].quantity == quantity


def test_mixed_quantities_are_refused():
    message = refused(ArgumentError, [one("a"), one("b", "admittance")], None)
    assert "different quantities" in message
    assert "--separately" in message


@pytest.mark.parametrize("quantity", ["scattering", "admittance", "hybrid", "inverse-hybrid"])
def test_several_sets_that_load_the_circuit_differently_are_refused(quantity):
    message = refused(ArgumentError, [one("a", quantity), one("b", quantity)], None)
    assert quantity in message
    assert "--separately" in message


@pytest.mark.parametrize("quantity", ["impedance", "transfer"])
def test_several_sets_that_share_their_modes_are_taken(quantity):
    found = prepare([one("a", quantity), one("b", quantity, seed=2)], None)
    assert len(found.measured) == 2


def test_a_channel_given_twice_is_refused_by_name():
    message = refused(ArgumentError, [one("gate2"), one("gate2", seed=2)], None)
    assert "gate2 is given twice" in message
    assert "--node" in message


def test_a_zero_channel_is_left_out_and_said():
    first, _, last = values(channels=3).T
    found = prepare(three([first, 0 * first, last]), None)
    assert [str(c) for c in found.responses[0].channels] == ["a", "c"]
    assert np.array_equal(found.measured[0].values, [first, last])
    assert found.notes == ("channel b ← a is zero throughout and was left out",)


def test_a_repeated_channel_is_left_out_and_said():
    first, _, last = values(channels=3).T
    found = prepare(three([first, last, first]), None)
    assert [str(c) for c in found.responses[0].channels] == ["a", "b ← a"]
    assert found.notes == ("channel c repeats a and was left out",)


def test_nearly_equal_channels_are_both_kept():
    first, _, last = values(channels=3).T
    found = prepare(three([first, first * (1 + 1e-15), last]), None)
    assert len(found.responses[0].channels) == 3
    assert found.notes == ()


def test_uncertainties_leave_with_their_channel():
    first, _, last = values(channels=3).T
    std = np.arange(1.0, 4.0) * np.ones((HZ.size, 1))
    given = ResponseSet.from_arrays(
        HZ, np.stack([first, 0 * first, last], axis=1), channels=["a", "b", "c"],
        quantity="impedance", sample_std=std,
    )  # fmt: skip
    found = prepare(given, None)
    assert np.array_equal(found.measured[0].known[:, :, 0], [[1.0, 1.0], [9.0, 9.0]])


def test_a_set_of_nothing_but_zeros_leaves_the_others_alone():
    zero = polefit.ResponseSet.from_arrays(HZ, 0j * HZ, channels=["z"], quantity="impedance")
    found = prepare([zero, one("a")], None)
    assert [str(c) for r in found.responses for c in r.channels] == ["a"]
    assert "nothing to fit" in refused(DataError, [zero], None)


def test_scale_is_the_highest_frequency_of_all_sets():
    upper = one("b", seed=2, frequency_hz=HZ * 2)
    found = prepare([one("a"), upper], None)
    assert found.scale_rad_per_s == pytest.approx(2 * np.pi * 4e9, rel=1e-15)
    assert found.measured[0].s == pytest.approx(1j * HZ / 4e9)
    assert found.measured[1].s[-1] == pytest.approx(1j)


def test_band_restricts_every_set():
    found = prepare([one("a"), one("b", seed=2)], (1.2e9, 1.8e9))
    assert [r.band_hz for r in found.responses] == [(1.2e9, 1.8e9)] * 2
    assert found.scale_rad_per_s == pytest.approx(2 * np.pi * 1.8e9)


def with_precision(form):
    from dataclasses import replace

    precision = Precision(form, Printed(significant=4), Printed(significant=3))
    return replace(one(), precision=precision), precision


def test_rounding_of_real_and_imaginary_parts_is_known():
    given, precision = with_precision("real-imaginary")
    found = prepare(given, None).measured[0]
    assert found.turn is None
    first, second, polar = precision.rounding_std(given.values)
    assert not polar
    assert np.array_equal(found.known[0], [first[:, 0] ** 2, second[:, 0] ** 2])


@pytest.mark.parametrize("form", ["magnitude-angle", "decibel-angle"])
def test_rounding_of_magnitude_and_angle_turns_with_the_sample(form):
    given, precision = with_precision(form)
    found = prepare(given, None).measured[0]
    # turned samples are real and positive: their parts lie along and across the phasor
    assert np.allclose(found.values * found.turn, np.abs(found.values), rtol=1e-14)
    first, second, _ = precision.rounding_std(given.values)
    assert np.array_equal(found.known[0], [first[:, 0] ** 2, second[:, 0] ** 2])


def test_uncertainty_given_with_the_data_adds_to_rounding():
    from dataclasses import replace

    given, precision = with_precision("real-imaginary")
    std = np.full(given.values.shape, 0.1)
    found = prepare(replace(given, sample_std=std), None).measured[0]
    first, _, _ = precision.rounding_std(given.values)
    assert np.allclose(found.known[0, 0], first[:, 0] ** 2 + 0.01, rtol=1e-14)


def test_a_sample_of_exactly_zero_has_a_turn_all_the_same():
    from dataclasses import replace

    given, _ = with_precision("magnitude-angle")
    table = given.values.copy()
    table[3] = 0
    turn = prepare(replace(given, values=table), None).measured[0].turn
    assert turn[0, 3] == 1
    assert np.allclose(np.abs(turn), 1)


def test_nodes_are_named_once():
    channels = [as_channel(c) for c in ("b", ("a", "b"), ("b", "a"), "c")]
    assert node_names(channels) == ("b", "a", "c")
