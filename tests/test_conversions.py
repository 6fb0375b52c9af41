"""Conversions between scattering, impedance and admittance: values, uncertainty, terminations."""

from dataclasses import replace

import numpy as np
import pytest

import polefit
from polefit.conversions import convert
from polefit.errors import ArgumentError, DataError, NotSupportedError
from polefit.precision import Precision, Printed
from polefit.responses import port_channels

FREQUENCY = np.linspace(1e9, 2e9, 5)
# Random 3 x 3 matrices are conditioned to about 1e2; a dozen roundings on top of that.
CLOSE = {"rtol": 1e-11, "atol": 1e-13}


def data(matrices, quantity, reference=None, **more):
    ports = matrices.shape[-1]
    names = ["in", "mid", "out"][:ports]
    return polefit.ResponseSet.from_arrays(
        FREQUENCY, matrices.reshape(len(FREQUENCY), -1), channels=port_channels(names),
        quantity=quantity, reference_ohm=reference, **more,
    )  # fmt: skip


def invented(ports=3, seed=4):
    random = np.random.default_rng(seed)
    return random.normal(size=(len(FREQUENCY), ports, ports, 2)) @ [1, 1j]


def matrices(responses):
    ports = round(len(responses.channels) ** 0.5)
    return responses.values.reshape(-1, ports, ports)


@pytest.mark.parametrize("ports", [1, 2, 3])
def test_agrees_with_scikit_rf(ports):
    skrf = pytest.importorskip("skrf.network")
    s, references = invented(ports), (50.0, 75.0, 12.5)[:ports]
    z0 = np.tile(references, (len(s), 1)).astype(complex)
    ours = data(s, "scattering", references)
    impedance, admittance = convert(ours, "impedance"), convert(ours, "admittance")
    np.testing.assert_allclose(matrices(impedance), skrf.s2z(s, z0), **CLOSE)
    np.testing.assert_allclose(matrices(admittance), skrf.s2y(s, z0), **CLOSE)
    back = convert(impedance, "scattering", 20.0)
    expected = skrf.z2s(skrf.s2z(s, z0), np.full_like(z0, 20))
    np.testing.assert_allclose(matrices(back), expected, **CLOSE)
    other = convert(ours, "scattering", 20.0)
    np.testing.assert_allclose(matrices(other), expected, **CLOSE)


def test_admittance_is_the_inverse_of_impedance():
    z = data(invented(), "impedance")
    y = convert(z, "admittance")
    product = matrices(y) @ matrices(z)
    np.testing.assert_allclose(product, np.broadcast_to(np.eye(3), product.shape), atol=1e-12)


def test_there_and_back():
    s = data(invented(), "scattering", (50.0, 75.0, 12.5))
    again = convert(convert(convert(s, "impedance"), "admittance"), "scattering", 50.0)
    np.testing.assert_allclose(again.values, convert(s, "scattering", 50.0).values, **CLOSE)


def test_known_one_ports():
    """25 ohm on 50 ohm reflects -1/3; its admittance is 40 mS."""
    z = data(np.full((5, 1, 1), 25 + 0j), "impedance")
    np.testing.assert_allclose(convert(z, "scattering", 50.0).values, -1 / 3, rtol=1e-15)
    np.testing.assert_allclose(convert(z, "admittance").values, 0.04, rtol=1e-15)


def test_removing_a_load_moves_the_pole():
    """Z = 1 / (C (s - p)) loaded with R has its pole at p - 1 / (R C): the modes differ."""
    s = 2j * np.pi * FREQUENCY
    p, capacitance, load = 3e9, 1e-12, 50.0
    z = 1 / (capacitance * (s - p))
    loaded = convert(data(z.reshape(-1, 1, 1), "impedance"), "scattering", load)
    shifted = p - 1 / (load * capacitance)
    expected = -(s - p - 1 / (load * capacitance)) / (s - shifted)
    np.testing.assert_allclose(loaded.values[:, 0], expected, rtol=1e-14)
    assert shifted < 0 < p  # with its load the circuit is stable


def test_any_order_of_the_channels_is_kept():
    plain = data(invented(), "scattering", 50.0)
    order = [5, 0, 7, 2, 1, 8, 4, 3, 6]
    mixed = replace(
        plain, values=plain.values[:, order], channels=tuple(plain.channels[i] for i in order)
    )
    one, other = convert(plain, "impedance"), convert(mixed, "impedance")
    assert other.channels == mixed.channels
    # Rows and columns trade places, so that rounding differs.
    np.testing.assert_allclose(other.values, one.values[:, order], **CLOSE)


# -- what is said of the result -----------------------------------------------------------------


@pytest.mark.parametrize(
    ("before", "after", "words"),
    [("scattering", "impedance", ["open", "50 Ω reference loads were removed"]),
     ("scattering", "admittance", ["shorted", "replaced by shorts"]),
     ("impedance", "scattering", ["loaded", "75 Ω", "added by conversion from impedance"]),
     ("impedance", "admittance", ["shorted", "conversion from impedance"]),
     ("scattering", "scattering", ["75 Ω", "in place of the 50 Ω"])],
)  # fmt: skip
def test_the_termination_is_stated(before, after, words):
    start = data(invented(), before, 50.0 if before == "scattering" else None)
    found = convert(start, after, 75.0 if after == "scattering" else None)
    assert all(word in found.termination for word in words), found.termination
    assert found.termination != start.termination
    assert found.reference_ohm == ((75.0,) * 3 if after == "scattering" else None)


def test_nothing_to_do_is_nothing_done():
    z = data(invented(), "impedance")
    assert convert(z, "impedance") is z


def test_an_unstated_reference_can_be_stated():
    s = data(invented(), "scattering")
    found = convert(s, "scattering", 50.0)
    assert found.reference_ohm == (50.0,) * 3
    assert np.array_equal(found.values, s.values)
    assert "50 Ω" in found.termination


# -- uncertainty --------------------------------------------------------------------------------


def test_uncertainty_follows_to_first_order():
    """Against 4000 seeded draws: their standard deviations scatter by 1 / sqrt(2 · 8000) < 1 %."""
    std = 1e-6
    s = data(0.3 * invented(2), "scattering", 50.0,
             sample_std=np.full((5, 4), std))  # fmt: skip
    found = convert(s, "impedance")
    random = np.random.default_rng(11)
    noise = random.normal(size=(4000, 5, 4, 2)) @ [1, 1j] * std
    drawn = np.array([
        convert(data(draw.reshape(5, 2, 2), "scattering", 50.0), "impedance").values
        for draw in s.values + noise])  # fmt: skip
    spread = drawn - drawn.mean(axis=0)
    measured = np.sqrt((np.abs(spread) ** 2).mean(axis=0) / 2)
    # Five standard deviations of the drawn figure.
    np.testing.assert_allclose(found.sample_std, measured, rtol=0.04)


def test_printed_digits_become_an_uncertainty():
    rounding = Precision("real-imaginary", Printed(decimals=4), Printed(decimals=4))
    z = replace(data(np.full((5, 1, 1), 25 + 0j), "impedance"), precision=rounding)
    y = convert(z, "admittance")
    assert y.precision is None
    # dY = -dZ / Z²
    np.testing.assert_allclose(y.sample_std, 1e-4 / np.sqrt(12) / 625, rtol=1e-12)


# -- refusals -----------------------------------------------------------------------------------


def test_a_matrix_without_counterpart_names_the_frequency():
    z = invented(2)
    z[3] = [[1, 2], [2, 4]]
    with pytest.raises(DataError, match=r"at 1\.75e\+09|at 1750000000 Hz .*singular"):
        convert(data(z, "impedance"), "admittance")
    s = invented(1)
    s[2] = 1  # an open end has no impedance
    with pytest.raises(DataError, match="singular"):
        convert(data(s, "scattering", 50.0), "impedance")


def test_numbers_too_large_to_be_converted():
    s = invented(1)
    s[1] = 1.7e308
    with pytest.raises(DataError, match="too large"):
        convert(data(s, "scattering", 50.0), "impedance")
    z = data(np.full((5, 1, 1), 1e-200 + 0j), "impedance", sample_std=np.full(5, 1e-150))
    with pytest.raises(DataError, match="too large"):
        convert(z, "admittance")


def test_missing_responses_are_named():
    part = data(invented(), "scattering", 50.0).select(["in", "mid"])
    with pytest.raises(DataError, match=r"needs all 9 .*missing: out ← in, out ← mid, out"):
        convert(part, "impedance")


@pytest.mark.parametrize(
    ("quantity", "wanted", "reference", "stated", "word"),
    [("transfer", "impedance", None, None, "transfer data cannot be converted"),
     ("impedance", "hybrid", None, None, "cannot be converted"),
     ("impedance", "voltage", None, None, "cannot be converted"),
     ("impedance", "scattering", None, None, "needed for scattering"),
     ("impedance", "scattering", -50, None, "not a positive resistance"),
     ("scattering", "impedance", None, None, "do not state it"),
     ("scattering", "impedance", 75, 50, "the data state 50 Ω"),
     ("impedance", "admittance", 50, None, "no meaning without scattering"),
     ("impedance", "impedance", 50, None, "no meaning without scattering")],
)  # fmt: skip
def test_what_cannot_be_had(quantity, wanted, reference, stated, word):
    with pytest.raises(ArgumentError, match=word):
        convert(data(invented(), quantity, stated), wanted, reference)


def test_pumped_circuits_are_refused():
    with pytest.raises(NotSupportedError, match="pumped"):
        convert(data(invented(), "impedance", pump_hz=1e9), "admittance")
