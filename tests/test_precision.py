"""Digits of a text file: recognised from its numbers, and the rounding noise that they leave."""

import numpy as np
import pytest

from polefit.precision import Precision, Printed
from polefit.readers.reading import printed_form


@pytest.mark.parametrize(
    ("tokens", "expected"),
    [
        (["1.234", "12.34", "123.4"], Printed(significant=4)),
        (["1.23e+02", "-4.56e-07"], Printed(significant=3)),
        (["1.200", "12.345", "-0.001"], Printed(decimals=3)),
        (["0.001", "0.02"], Printed(significant=1)),
        (["1", "20", "300"], Printed(significant=3)),
        (["1.5D3", "2.25d3"], Printed(significant=3)),
        (["0", "0.0"], None),
        ([], None),
        (["0.123456789012345", "1"], None),  # 15 digits: a double
        (["1.234567890123456e+00"], None),
    ],
)
def test_digits_of_a_column(tokens, expected):
    assert printed_form(tokens) == expected


@pytest.mark.parametrize(
    ("value", "quantum"),
    [(1.0, 0.01), (9.99, 0.01), (10.0, 0.1), (-123.0, 1.0), (0.00456, 1e-5), (0.0, 0.0)],
)
def test_one_unit_of_the_last_of_three_digits(value, quantum):
    assert Printed(significant=3).quantum(np.array([value]))[0] == pytest.approx(quantum, rel=1e-12)


def test_a_power_of_ten_that_scaling_has_made_a_bit_smaller():
    """0.1 · 3 / 3 …: the quantum must not drop tenfold by a rounding of the last bit."""
    barely = np.nextafter(1.0, 0)
    assert Printed(significant=3).quantum(np.array([barely]))[0] == pytest.approx(0.01)


def test_decimals_and_the_unknown():
    values = np.array([0.0, 1e-9, 1e9])
    assert Printed(decimals=2).quantum(values).tolist() == [0.01] * 3
    assert Printed().quantum(values).tolist() == [0.0] * 3


def rounded(values, precision):
    """Print and read back as the precision says."""

    def of(numbers, printed):
        if printed.decimals is not None:
            return np.round(numbers, printed.decimals)
        return np.array([float(f"{x:.{printed.significant - 1}e}") for x in numbers])

    printed = values / precision.scale
    if precision.form == "real-imaginary":
        read = of(printed.real, precision.first) + 1j * of(printed.imag, precision.second)
        return precision.scale * read
    size, angle = np.abs(printed), np.angle(printed, deg=not precision.radians)
    if precision.form == "decibel-angle":
        size = 10 ** (of(20 * np.log10(size), precision.first) / 20)
    else:
        size = of(size, precision.first)
    angle = of(angle, precision.second)
    return precision.scale * size * np.exp(1j * (angle if precision.radians else np.radians(angle)))


@pytest.mark.parametrize(
    "precision",
    [
        Precision("real-imaginary", Printed(significant=4), Printed(significant=3)),
        Precision("real-imaginary", Printed(decimals=3), Printed(decimals=2), scale=50.0),
        Precision("magnitude-angle", Printed(significant=5), Printed(decimals=2)),
        Precision("magnitude-angle", Printed(significant=4), Printed(decimals=3), radians=True),
        Precision("decibel-angle", Printed(decimals=2), Printed(decimals=1), scale=-0.02),
    ],
    ids=lambda p: f"{p.form}-{p.scale:g}",
)
def test_the_uncertainty_is_that_of_printed_numbers(precision):
    """Numbers are printed, read back and compared: uniform rounding, so normalised errors of
    variance 1. Over 20000 of them that variance scatters by 0.6 %.
    """
    random = np.random.default_rng(5)
    size, angle = random.uniform(0.2, 40, 20_000), random.uniform(-np.pi, np.pi, 20_000)
    values = size * np.exp(1j * angle)
    error = rounded(values, precision) - values
    first, second, polar = precision.rounding_std(values)
    assert polar == (precision.form != "real-imaginary")
    if polar:
        error = error * np.exp(-1j * np.angle(values))
    for part, std in ((error.real, first), (error.imag, second)):
        # Second-order terms of coarse decibels and the edges of decades: below 2 % here.
        assert np.mean((part / std) ** 2) == pytest.approx(1.0, abs=0.03)


def test_zero_has_no_rounding():
    precision = Precision("decibel-angle", Printed(decimals=2), Printed(decimals=1))
    first, second, _ = precision.rounding_std(np.zeros((2, 1), complex))
    assert not first.any()
    assert not second.any()
