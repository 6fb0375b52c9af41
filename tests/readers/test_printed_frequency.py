"""Digits of the frequency column: recognised, told apart from a grid that they hold exactly."""

import numpy as np
import pytest

from polefit.precision import FrequencyPrecision, Printed
from polefit.readers import read
from polefit.readers.hdf5 import write_hdf5
from polefit.readers.printed_frequency import frequency_precision

LOG = np.geomspace(1.1e6, 7e9, 301)
EVEN = np.linspace(1e9, 2e9, 401)  # steps of 2.5 MHz
ODD = 1e9 + 1.2345678e6 * np.arange(400)  # steps that six digits do not hold


def printed(form, frequency, unit=1.0):
    """Print frequencies in a unit and tell what is seen of it."""
    tokens = [form % float(f / unit) for f in frequency]
    return frequency_precision(tokens, unit * np.array([float(t) for t in tokens]), unit)


@pytest.mark.parametrize("digits", [5, 6, 7, 9, 12])
@pytest.mark.parametrize("frequency", [LOG, ODD], ids=["log", "odd"])
def test_rounded_frequencies_have_the_uncertainty_of_rounding(digits, frequency):
    """Printed, read back and compared: uniform errors, so normalised errors of variance 1.

    The variance of 300 of them scatters by sqrt(0.8 / 300) = 5 %; odd steps are no random ones.
    """
    found = printed(f"%.{digits - 1}e", frequency)
    # At 12 digits the steps of `odd` are held: they have no more than 8.
    if frequency is ODD and digits >= 10:
        assert found.exact
        return
    assert found == FrequencyPrecision(Printed(significant=digits))
    read_back = np.array([float(f"{f:.{digits - 1}e}") for f in frequency])
    std = found.frequency_rounding_std(read_back)
    assert np.mean(((read_back - frequency) / std) ** 2) == pytest.approx(1.0, abs=0.2)


@pytest.mark.parametrize(
    ("form", "unit", "shown"),
    [
        ("%.3f", 1e9, Printed(decimals=3)),
        ("%.5e", 1.0, Printed(significant=6)),
        ("%.1f", 1e6, Printed(decimals=1)),
    ],
)
def test_frequencies_in_a_unit_are_uncertain_in_hertz(form, unit, shown):
    frequency = np.geomspace(1.1e8, 7e9, 101)
    found = printed(form, frequency, unit)
    assert found.printed == shown
    assert not found.exact
    read_back = np.array([unit * float(form % (f / unit)) for f in frequency])
    std = found.frequency_rounding_std(read_back)
    assert np.mean(((read_back - frequency) / std) ** 2) == pytest.approx(1.0, abs=0.35)


SEGMENTS = np.r_[np.arange(1000, 1100), np.arange(1100, 2000, 7)] * 1e6
GAPS = np.delete(np.linspace(1e9, 2e9, 201), [20, 21, 90])
PICKED = np.array([1, 1.05, 1.1, 1.2, 1.3, 1.5, 1.7, 1.75, 2, 2.2, 2.25, 2.5, 3, 3.5, 4]) * 1e9


@pytest.mark.parametrize("frequency", [EVEN, SEGMENTS, GAPS, PICKED])
@pytest.mark.parametrize(("form", "unit"), [("%.4f", 1e9), ("%.5e", 1.0), ("%.6g", 1e6)])
def test_a_grid_that_the_digits_hold_is_exact(frequency, form, unit):
    found = printed(form, frequency, unit)
    assert found.exact
    assert not found.frequency_rounding_std(frequency).any()


def test_a_uniform_sweep_of_three_digits_is_exact_too():
    found = printed("%.3g", np.linspace(1, 2, 101), 1.0)
    assert found == FrequencyPrecision(Printed(significant=3), exact=True)


@pytest.mark.parametrize("form", ["%.15e", "%.17g", "%r"])
def test_double_precision_is_exact(form):
    assert printed(form, LOG) is None
    assert printed(form, np.linspace(1e6, 1.7e9, 301)) is None


def test_whole_hertz_are_rounded_to_one_hertz():
    found = printed("%d", np.geomspace(1e3, 1e6, 61))
    assert found == FrequencyPrecision(Printed(decimals=0))
    assert found.frequency_rounding_std(np.array([1e3, 1e6])) == pytest.approx([12**-0.5] * 2)


def test_digits_that_a_sample_does_not_show_are_found():
    frequency = np.array([1.0, 1.1, 1.2, 1.2345, 1.3])
    found = frequency_precision(["1.0", "1.1", "1.2"], frequency, 1.0)
    assert found.printed == Printed(decimals=4) or found.printed == Printed(significant=5)


def test_decimals_that_a_sample_seems_to_fix_are_dropped_where_one_number_has_more():
    """Seven digits, zeros dropped: the sample shows two decimals throughout, the file three."""
    frequency = 8705.34 + 104.92912 * np.arange(186)
    shown = [f"{f:.7g}" for f in frequency]
    sample = [t for t in shown if len(t.partition(".")[2]) == 2]
    assert len({len(t) for t in sample}) > 1
    found = frequency_precision(sample, np.array([float(t) for t in shown]), 1.0)
    assert found == FrequencyPrecision(Printed(significant=7))


def test_too_few_points_to_tell_a_grid():
    assert not printed("%.2e", np.array([1.01e9, 1.13e9, 1.57e9])).exact
    assert printed("%.2e", np.array([1.01e9])).exact is False
    assert frequency_precision([], np.array([1.0]), 1.0) is None


def value(frequency):
    return 50 / (1 + 1j * frequency / 1e9)


def table(frequency, digits):
    """Invented delimited text, Touchstone, raw and log: frequency with few digits."""
    axis = [f"{f:.{digits - 1}e}" for f in frequency]
    z = value(frequency)
    parts = [f"{x.real:.11e}{{}}{x.imag:.11e}" for x in z]
    two = list(zip(axis, parts, strict=True))
    raw = (
        "Title: invented\nDate: now\nPlotname: AC Analysis\nFlags: complex\n"
        f"No. Variables: 2\nNo. Points: {len(z)}\n"
        "Variables:\n\t0\tfrequency\tfrequency\n\t1\tv(g)\tvoltage\nValues:\n"
    ) + "".join(f" {i}\t{f},0.0\n\t{p.format(',')}\n" for i, (f, p) in enumerate(two))
    log = "Index   frequency       v(g)\n" + "-" * 60 + "\n"
    log += "".join(f"{i}\t{f}\t{p.format(', ')}\t\n" for i, (f, p) in enumerate(two))
    return {
        "t.csv": "freq (Hz),Re(Z(g)),Im(Z(g))\n"
        + "".join(f"{f},{p.format(',')}\n" for f, p in two),
        "t.z1p": "# Hz Z RI R 1\n" + "".join(f"{f} {p.format(' ')}\n" for f, p in two),
        "t.raw": raw,
        "t.log": log,
    }


@pytest.mark.parametrize("name", ["t.csv", "t.z1p", "t.raw", "t.log"])
def test_every_text_reader_fills_it(tmp_path, name):
    file = tmp_path / name
    file.write_text(table(LOG, 6)[name])
    options = {"driven": "g"} if name in ("t.raw", "t.log") else {}
    found = read(file, **options)
    assert found.frequency_precision == FrequencyPrecision(Printed(significant=6))
    std = found.frequency_rounding_std()
    assert std.shape == (found.points,)
    half = found.in_band(1e8, 1e9)
    assert half.frequency_rounding_std(half.frequency_hz).max() == pytest.approx(1e3 / 12**0.5)
    again = tmp_path / "again.h5"
    write_hdf5(again, found)
    assert read(again).frequency_precision == found.frequency_precision
    file.write_text(table(EVEN, 6)[name])
    assert read(file, **options).frequency_precision.exact


def test_a_conversion_keeps_it(tmp_path):
    file = tmp_path / "t.z1p"
    file.write_text(table(LOG, 6)["t.z1p"])
    found = read(file, quantity="admittance")
    assert found.frequency_precision == FrequencyPrecision(Printed(significant=6))
