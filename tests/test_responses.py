"""The data model: what is accepted, what is refused, and that nobody can change it afterwards."""

import dataclasses

import numpy as np
import pytest

import polefit
from polefit.channels import as_channel, port_channels
from polefit.errors import ArgumentError, DataError, PolefitError
from polefit.responses import QUANTITIES, Channel, ResponseSet

F = [1e9, 2e9, 3e9]
Z = [1 + 1j, 2, 3j]


def build(frequency=F, values=Z, **more):
    more = {"channels": "gate2", "quantity": "impedance", **more}
    return ResponseSet.from_arrays(frequency, values, **more)


# -- channels -----------------------------------------------------------------------------------


def test_channels():
    own, across = as_channel("gate2"), as_channel(("drain1", "gate2"))
    assert (own.output, own.input, own.driving_point) == ("gate2", "gate2", True)
    assert not across.driving_point
    assert str(own) == "gate2"
    assert str(across) == "drain1 ← gate2"
    assert as_channel(["drain1", " gate2 "]) == across
    assert as_channel(own) is own


@pytest.mark.parametrize("wrong", ["", "  ", ("a",), ("a", "b", "c"), ("a", ""), 3, None, ("a", 1)])
def test_what_is_no_channel(wrong):
    with pytest.raises(ArgumentError, match=r"channels: .* is not a channel"):
        as_channel(wrong)


def test_channels_between_ports_come_row_by_row():
    assert port_channels(["a", "b"]) == (
        Channel("a", "a"), Channel("a", "b"), Channel("b", "a"), Channel("b", "b"))  # fmt: skip


# -- building -----------------------------------------------------------------------------------


def test_one_response():
    found = build()
    assert found.values.shape == (3, 1)
    assert found.values.dtype == np.complex128
    assert found.points == 3
    assert found.band_hz == (1e9, 3e9)
    assert found.unit == "Ω"
    assert found.channels == (Channel("gate2", "gate2"),)
    assert repr(found) == "<ResponseSet impedance: 3 points, 1e+09 to 3e+09 Hz, 1 channels>"


def test_several_responses_with_pairs():
    found = build(values=np.ones((3, 2)), channels=["gate2", ("drain1", "gate2")])
    assert found.channels == (Channel("gate2", "gate2"), Channel("drain1", "gate2"))


def test_nothing_is_shared_with_the_caller():
    frequency, values = np.array(F), np.array(Z)[:, np.newaxis]
    found = build(frequency, values)
    frequency[0], values[0] = 5, 99
    assert found.frequency_hz[0] == 1e9
    assert found.values[0, 0] == 1 + 1j


def test_nothing_can_be_changed():
    found = build(sample_std=[1, 2, 3])
    for array in (found.frequency_hz, found.values, found.sample_std):
        with pytest.raises(ValueError, match="read-only"):
            array[0] = 1
    with pytest.raises(dataclasses.FrozenInstanceError):
        found.quantity = "admittance"


def test_views_of_a_writeable_array_are_copied():
    """A read-only view of an array that its owner can still write to is no protection."""
    base = np.array(F)
    view = base[:]
    view.flags.writeable = False
    found = build(view)
    base[0] = 0
    assert found.frequency_hz[0] == 1e9


def test_plain_numbers_of_any_kind():
    found = build([1, 2, 3], [1, 2, 3])
    assert found.frequency_hz.dtype == np.float64
    assert build(np.float32(F), np.complex64(Z)).values[0, 0] == 1 + 1j
    assert build([0, 1, 2]).frequency_hz[0] == 0  # DC is a frequency
    assert build([5], [1j]).points == 1


@pytest.mark.parametrize("quantity", QUANTITIES)
def test_every_quantity_states_its_termination(quantity):
    assert build(quantity=quantity).termination


def test_scattering_states_its_load():
    assert "(50, 75 Ω)" in build(
        values=np.ones((3, 4)), channels=port_channels("ab"), quantity="scattering",
        reference_ohm=[50, 75],
    ).termination  # fmt: skip


@pytest.mark.parametrize(
    ("arguments", "word"),
    [
        ({"frequency": []}, "non-empty"),
        ({"frequency": [[1, 2, 3]]}, "one-dimensional"),
        ({"frequency": [1, 2]}, "does not fit 2 frequencies"),
        ({"frequency": [1, 3, 2]}, r"frequency_hz\[2\] = 2 Hz is falling"),
        ({"frequency": [1, 1, 2]}, r"frequency_hz\[1\] = 1 Hz is repeated"),
        ({"frequency": [-1, 1, 2]}, "negative"),
        ({"frequency": [1, np.nan, 2]}, r"frequency_hz\[1\] is not finite"),
        ({"frequency": [1, 2, np.inf]}, r"frequency_hz\[2\] is not finite"),
        ({"frequency": [1j, 2j, 3j]}, "frequency_hz: complex numbers"),
        ({"frequency": ["a", "b", "c"]}, "not an array of numbers"),
        ({"values": [1, np.nan, 3]}, r"values\[1, 0\] \(gate2\) is not finite"),
        ({"values": [1, 2, complex(0, np.inf)]}, r"values\[2, 0\]"),
        ({"values": np.ones((3, 2))}, "1 given for 2 responses"),
        ({"values": np.ones((3, 1, 1))}, "does not fit"),
        ({"values": ["x", "y", "z"]}, "not an array of numbers"),
        ({"values": np.ones((3, 0)), "channels": []}, "no response; give"),
        ({"values": np.ones((3, 2)), "channels": ["a", "a"]}, "a is given twice"),
        ({"sample_std": [1, 2]}, "sample_std"),
        ({"sample_std": [1, 2, -1]}, "sample_std"),
        ({"sample_std": [1, 2, np.nan]}, "sample_std"),
        ({"sample_std": [1j, 2, 3]}, "sample_std: complex"),
    ],
)
def test_arrays_that_cannot_be_responses(arguments, word):
    with pytest.raises(DataError, match=word):
        build(**arguments)


@pytest.mark.parametrize(
    ("arguments", "word"),
    [
        ({"quantity": "voltage"}, "quantity: 'voltage' is not known; use one of impedance"),
        ({"pump_hz": 0}, "pump_hz"),
        ({"pump_hz": -1e9}, "pump_hz"),
        ({"pump_hz": np.nan}, "pump_hz"),
        ({"pump_hz": "fast"}, "pump_hz"),
        ({"reference_ohm": 0}, "reference_ohm"),
        ({"reference_ohm": [50, -1]}, "reference_ohm"),
        ({"reference_ohm": []}, "reference_ohm"),
        ({"reference_ohm": "high"}, "reference_ohm"),
        ({"channels": ["", ""]}, "is not a channel"),
    ],
)
def test_arguments_that_make_no_sense(arguments, word):
    with pytest.raises(ArgumentError, match=word):
        build(**arguments)


def test_every_refusal_is_of_the_package():
    assert issubclass(DataError, PolefitError)
    assert issubclass(DataError, ValueError)


# -- parts --------------------------------------------------------------------------------------


def two():
    return build(
        values=np.arange(6).reshape(3, 2), channels=["a", ("b", "a")],
        sample_std=np.arange(6).reshape(3, 2) + 1.0,
    )  # fmt: skip


def test_in_band_includes_both_ends():
    found = two().in_band(1e9, 2e9)
    assert found.frequency_hz.tolist() == [1e9, 2e9]
    assert found.values[:, 1].tolist() == [1, 3]
    assert found.sample_std[:, 1].tolist() == [2, 4]


@pytest.mark.parametrize(("low", "high"), [(2e9, 1e9), (1e9, 1e9), (4e9, 5e9), (np.nan, 1)])
def test_bands_without_points(low, high):
    with pytest.raises(ArgumentError, match="band_hz"):
        two().in_band(low, high)


def test_select_in_the_order_asked_for():
    data = two()
    assert [str(c) for c in data.select(["b", "a"]).channels] == ["b ← a", "a"]
    assert data.select(["b", "a"]).values[0].tolist() == [1, 0]
    assert data.select("b").sample_std[:, 0].tolist() == [2, 4, 6]
    assert data.select(["b ← a", "b"]).channels == (Channel("b", "a"),)
    with pytest.raises(ArgumentError, match="select: no channel 'c'; the data hold a, b"):
        data.select(["c"])
    with pytest.raises(ArgumentError, match="names no channel"):
        data.select([])


# -- scikit-rf networks -------------------------------------------------------------------------


def network(z0=50, names=None):
    skrf = pytest.importorskip("skrf")
    s = np.array([[[0.1, 0.2], [0.3, 0.4]], [[0.5, 0.6j], [0.7, 0.8]]])
    made = skrf.Network(f=[1e9, 2e9], s=s, z0=z0, f_unit="hz")
    made.port_names = names
    return made


def test_from_network():
    found = ResponseSet.from_network(network())
    assert found.values.tolist() == [[0.1, 0.2, 0.3, 0.4], [0.5, 0.6j, 0.7, 0.8]]
    assert found.channels == port_channels(["port1", "port2"])
    assert found.reference_ohm == (50, 50)
    assert found.quantity == "scattering"
    named = ResponseSet.from_network(network(names=["in", "out"]))
    assert named.channels[1] == Channel("in", "out")
    assert ResponseSet.from_network(network(), ports=["x", "y"]).channels[0] == Channel("x", "x")
    assert ResponseSet.from_network(network([[50, 75], [50, 75]])).reference_ohm == (50, 75)


def test_networks_without_one_real_reference_are_refused():
    for z0 in (50 + 1j, [[50, 50], [50, 60]]):
        with pytest.raises(DataError, match=r"renormalise .*Network\.renormalize"):
            ResponseSet.from_network(network(z0))
    with pytest.raises(DataError, match="ports"):
        ResponseSet.from_network(network(), ports=["x", "x"])


def test_the_public_names():
    assert polefit.ResponseSet is ResponseSet
    assert polefit.Channel is Channel
