"""The one rule for printing a value with its uncertainty, at its boundaries."""

import math

import pytest
from hypothesis import given
from hypothesis import strategies as st

from polefit.estimates import Estimate, si, with_uncertainty

NAN, INF = math.nan, math.inf


@pytest.mark.parametrize(
    ("value", "std", "expected"),
    [
        (1.0, 0.0994, "1.000 ± 0.099"),
        (1.0, 0.0995, "1.00 ± 0.10"),  # the third digit carries into a new decade
        (1.0, 0.0985, "1.000 ± 0.099"),  # a tie never understates the uncertainty
        (100.0, 9.94, "100.0 ± 9.9"),
        (100.0, 9.95, "100 ± 10"),
        (100.0, 9.9499999, "100.0 ± 9.9"),
        (0.125, 0.10, "0.12 ± 0.10"),  # a tie in the value goes to the even digit
        (0.135, 0.10, "0.14 ± 0.10"),
        (12345.0, 230.0, "12340 ± 230"),
        (-0.0123, 0.0002, "−0.01230 ± 0.00020"),
        (-0.0123, 0.0995, "−0.01 ± 0.10"),  # larger than the value
        (-1e-9, 0.3, "0.00 ± 0.30"),  # no minus before a zero
        (0.0, 0.3, "0.00 ± 0.30"),
        (-1.5e-8, 2e-10, "(−1.500 ± 0.020)e-8"),
        (999999.0, 100.0, "(1.00000 ± 0.00010)e6"),
        (0.05, 2.3e-13, "0.05000000 (± < 1 ppm)"),
        (2.0, 2.1e-6, "2.0000000 ± 0.0000021"),
        (2.0, 1.9e-6, "2.000000 (± < 1 ppm)"),
        (5e-324, 1e300, "(0.0 ± 1.0)e300"),
    ],
)
def test_two_digits_of_the_uncertainty_decide(value, std, expected):
    """GUM (JCGM 100:2008) 7.2.6: at most two significant digits; value to the same place."""
    assert with_uncertainty(value, std) == expected


def test_the_worked_example_of_the_guide():
    """GUM 7.2.2 states ms = 100.021 47 g with uc = 0.35 mg: both end at the same place."""
    assert with_uncertainty(100.02147, 0.35e-3, "g") == "100.02147 ± 0.00035 g"


@pytest.mark.parametrize(
    ("value", "std", "unit", "expected"),
    [
        (1.504321e9, 8.5e5, "Hz", "1.50432 ± 0.00085 GHz"),
        (999.9996e6, 5e4, "Hz", "1.000000 ± 0.000050 GHz"),  # rounding reaches the next prefix
        (9.99999e9, 2e9, "Hz", "10.0 ± 2.0 GHz"),
        (3.0, 2000.0, "Hz", "0.0 ± 2.0 kHz"),  # the larger of the two chooses the prefix
        (12.3e-9, 0.2e-9, "s", "12.30 ± 0.20 ns"),
        (1e9, 2e-3, "Hz", "1.000000 GHz (± < 1 ppm)"),
        (9.9999999e8, 2e-3, "Hz", "1.000000 GHz (± < 1 ppm)"),
        (8.13e7, 5e4, "1/s", "(8.1300 ± 0.0050)e7 1/s"),
        (1e30, 1e28, "Hz", "(1.000 ± 0.010)e30 Hz"),  # no prefix goes so far
        (150.0, 120.0, "Hz", "150 ± 120 Hz"),
    ],
)
def test_one_prefix_for_both(value, std, unit, expected):
    assert with_uncertainty(value, std, unit) == expected


@pytest.mark.parametrize(
    ("value", "std", "expected"),
    [
        (NAN, 1.0, "not known"),
        (INF, 1.0, "infinite"),
        (-INF, None, "−infinite"),
        (1.5e9, None, "1.5 GHz (± not known)"),
        (1.5e9, NAN, "1.5 GHz (± not known)"),
        (1.5e9, INF, "1.5 GHz (± without bound)"),
        (1.5e9, 0.0, "1.5 GHz (± 0)"),
    ],
)
def test_what_cannot_be_given_is_said_in_words(value, std, expected):
    assert with_uncertainty(value, std, "Hz") == expected


@pytest.mark.parametrize(
    ("value", "unit", "expected"),
    [
        (1.5e9, "Hz", "1.5 GHz"),
        (999.96e6, "Hz", "1 GHz"),
        (999.94e6, "Hz", "999.9 MHz"),
        (-12.3456e-9, "s", "−12.35 ns"),
        (4.7e-6, "F", "4.7 µF"),
        (0.0, "Hz", "0 Hz"),
        (-0.0, "", "0"),
        (50.0, "Ω", "50 Ω"),
        (1e-30, "s", "1e-30 s"),
        (0.0123, "", "0.0123"),
        (0.00001234, "", "1.234e-5"),
        (2.5e12, "Ω·rad/s", "2.5e12 Ω·rad/s"),
        (NAN, "Hz", "not known"),
    ],
)
def test_plain_values(value, unit, expected):
    assert si(value, unit) == expected


def test_estimate_prints_by_the_same_rule():
    estimate = Estimate.normal(1.504321e9, 8.5e5)
    assert estimate.text("Hz") == with_uncertainty(1.504321e9, 8.5e5, "Hz")
    assert Estimate.normal(1.0, NAN).text() == "1 (± not known)"


FACTORS = {"": 1.0, "k": 1e3, "M": 1e6, "G": 1e9, "m": 1e-3, "µ": 1e-6, "n": 1e-9, "p": 1e-12}


@given(
    st.floats(1e-9, 9e11).flatmap(lambda v: st.tuples(st.just(v), st.floats(1e-5 * v, 0.9 * v))),
    st.sampled_from([-1.0, 1.0]),
)
def test_read_back_it_is_within_half_a_unit_of_the_last_place(pair, sign):
    """What is printed can be read back: half a unit of the second digit of std is ≤ 5 % of it."""
    value, std = pair
    numbers, _, unit = with_uncertainty(sign * value, std, "Hz").rpartition(" ")
    if unit in ("fHz", "aHz", "THz"):
        return
    factor = FACTORS[unit.removesuffix("Hz")]
    shown, spread = (float(n.replace("−", "-")) * factor for n in numbers.split(" ± "))
    assert abs(spread - std) <= 0.0501 * std
    assert abs(shown - sign * value) <= 0.0501 * std + 1e-12 * value


@given(st.floats(), st.none() | st.floats(), st.sampled_from(["", "Hz", "1/s"]))
def test_any_number_prints_on_one_short_line(value, std, unit):
    text = with_uncertainty(value, std, unit)
    assert text.isprintable()
    assert len(text) <= 60
