"""Inspection of a file, and the warnings of what will limit a verdict."""

import json
from dataclasses import replace

import numpy as np
import pytest

import polefit
from polefit.analysis.data_quality import known_uncertainty, limits, visible_noise
from polefit.analysis.inspection import inspect, inspect_all, step_of
from polefit.cli import main
from polefit.errors import ArgumentError, FormatError
from polefit.precision import FrequencyPrecision, Precision, Printed


def resonance(frequency, centre=1.5e9):
    return 50 / (1 + 40j * (frequency / centre - centre / frequency))


FINE = np.linspace(4e6, 4e9, 4001)


def responses(frequency=FINE, values=None, **more):
    values = resonance(frequency) if values is None else values
    return polefit.ResponseSet.from_arrays(
        frequency, values, channels=more.pop("channels", "gate2"), quantity="impedance", **more
    )


@pytest.fixture
def touchstone(tmp_path):
    path = tmp_path / "gate2.s1p"
    lines = [f"{f / 1e6:.6f} {z.real / 50:.8e} {z.imag / 50:.8e}" for f, z in
             zip(FINE, resonance(FINE), strict=True)]  # fmt: skip
    path.write_text("# MHz Z RI R 50\n" + "\n".join(lines) + "\n", encoding="utf-8")
    return path


# -- the report ---------------------------------------------------------------------------------


def test_a_file_is_told_as_it_was_read(touchstone):
    text = str(inspect(touchstone))
    rows = {line[2:16].strip(): line[16:] for line in text.splitlines() if line[:2] == "  "}
    assert text.startswith(str(touchstone))
    assert rows["format"] == "Touchstone 1.0"
    assert rows["quantity"] == "impedance in Ω"
    assert rows["frequency"] == "in MHz, printed to 6 decimal places: its grid, exactly"
    assert rows["scaling"] == "printed numbers × 50 = Ω"
    assert rows["decimal mark"] == "point"
    assert rows["digits"] == "9 significant (real part and imaginary part)"
    assert rows["channels"] == "1: gate2"
    assert rows["band"] == "4 MHz to 4 GHz"
    assert rows["points"] == "4001"
    assert rows["step"].startswith("uniform, 999 kHz")
    assert rows["termination"].startswith("every probed port open")
    assert "normalised to 50 Ω" in text
    assert all(len(line) <= 96 for line in text.splitlines()[1:])


def test_the_same_as_plain_data(touchstone):
    document = json.loads(json.dumps(inspect(touchstone).to_dict()))
    assert document["schema"] == "polefit.inspection"
    assert document["source"]["points"] == 4001
    assert len(document["source"]["sha256"]) == 64
    assert document["channels"] == [["gate2", "gate2"]]
    assert document["step"]["spacing"] == "uniform"
    assert document["frequency_unit"] == "MHz"


def test_every_set_of_a_file(tmp_path, capsys):
    path = tmp_path / "probes.h5"
    polefit.write_hdf5(path, [responses(channels="a"), responses(channels="b")])
    assert [str(one.responses.channels[0]) for one in inspect_all(path)] == ["a", "b"]
    assert main(["inspect", str(path), "--quiet", "--json", "-"]) == 0
    document = json.loads(capsys.readouterr().out)
    assert [one["channels"] for one in document["inspections"]] == [[["a", "a"]], [["b", "b"]]]


def test_what_conversion_leaves_of_few_digits(tmp_path):
    path = tmp_path / "gate2.s1p"
    path.write_text("# GHz Z RI R 1\n" + "".join(f"{f} 10.00 0.25\n" for f in range(1, 99)))
    as_read, converted = inspect(path), inspect(path, quantity="admittance")
    assert "significant" in as_read.digits
    assert converted.digits.startswith("uncertain by about 0.0004 of the response")
    for found in (as_read, converted):
        assert any(w.startswith("few digits") for w in found.warnings)


@pytest.mark.parametrize(
    ("frequency", "text"),
    [
        ([1e9], "single point"),
        (np.linspace(1e9, 2e9, 11), "uniform, 100 MHz"),
        (np.round(np.linspace(1e9, 2e9, 9) + 3e4, -5), "uniform, 125 MHz"),
        (np.logspace(6, 9, 31), "logarithmic, 10 points per decade (258.9 kHz to 205.7 MHz)"),
        ([1e9, 2e9, 2.5e9], "uneven, 500 MHz to 1 GHz"),
        ([0.0, 1.0, 2.0], "uniform, 1 Hz"),
    ],
)
def test_steps(frequency, text):
    assert str(step_of(np.array(frequency))) == text


# -- warnings -----------------------------------------------------------------------------------


def warned(data):
    return " | ".join(limits(data))


def test_good_data_raise_no_warning():
    assert limits(responses()) == ()


@pytest.mark.parametrize(
    ("data", "word"),
    [
        (responses(np.linspace(1e6, 4e9, 30)), "few points: 30"),
        (responses(np.r_[np.linspace(4e6, 1e9, 1000), np.linspace(3e9, 4e9, 30_000)]),
         "uneven step: between 1 GHz and 3 GHz"),
        (responses(np.r_[np.linspace(4e6, 1e9, 3000), np.linspace(1.02e9, 4e9, 150)]),
         "uneven step: 332.1 kHz to 20 MHz; narrow modes may be missed"),
        (responses(np.linspace(1e9, 4e9, 500)), "no points below 1 GHz"),
        (responses(np.r_[1e6, np.linspace(1e8, 4e9, 500)]), "low end thinly sampled: 1 point"),
        (responses(values=np.zeros(4001)), "gate2: zero at every point"),
        (responses(values=np.full(4001, 50)), "gate2: constant over frequency"),
        (responses(values=np.where(FINE == 4e6, 0, resonance(FINE))), "zero at 1 point"),
        (replace(responses(), precision=Precision(
            "real-imaginary", Printed(significant=4), Printed(significant=4))), "few digits"),
        (responses(sample_std=np.full(4001, 1e-3)), "few digits or stated noise"),
    ],
)  # fmt: skip
def test_each_limit_is_named(data, word):
    assert word in warned(data)


def test_many_channels_with_one_fault_take_one_line():
    values = np.ones((4001, 9))
    data = responses(values=values, channels=[f"n{i}" for i in range(9)])
    (only,) = limits(data)
    assert only == "n0, n1, n2, n3 and 5 more: constant over frequency; shows no mode"


def test_copies_are_told_but_not_reciprocal_pairs():
    z = resonance(FINE)
    same = responses(values=np.column_stack((z, z, z)), channels=["a", "b", "c"])
    assert "a, b, c hold the same numbers" in warned(same)
    pair = responses(values=np.column_stack((z, z)), channels=[("a", "b"), ("b", "a")])
    assert limits(pair) == ()


def test_noise_is_seen_and_measured():
    random = np.random.default_rng(3)
    noise = random.normal(size=(4001, 2)) @ [1, 1j] * np.abs(resonance(FINE)) * 1e-4
    data = responses(values=resonance(FINE) + noise)
    assert "noise shows" in warned(data)
    # Both parts together: sqrt(2) · 1e-4. A median of 4001 correlated errors: within a tenth.
    found = visible_noise(FINE, data.values[:, 0])
    assert found == pytest.approx(np.sqrt(2) * 1e-4, rel=0.1)
    assert visible_noise(FINE, resonance(FINE)) < 1e-9
    assert visible_noise(FINE[:10], resonance(FINE[:10])) == 0


def test_known_uncertainty():
    assert known_uncertainty(responses()) == 0
    data = responses(values=np.full(4001, 5 + 0j), sample_std=np.full(4001, 0.01))
    assert known_uncertainty(data) == pytest.approx(np.sqrt(2) * 0.002)


# -- digits of the frequency --------------------------------------------------------------------


def rounded(frequency, digits):
    return np.array([float(f"{f:.{digits - 1}e}") for f in frequency])


@pytest.fixture
def steep(tmp_path):
    """Write a resonance of Q = 40 with 12 digits, its frequencies with fewer."""

    def write(frequency, digits):
        path = tmp_path / "gate2.csv"
        rows = (
            f"{f:.{digits - 1}e},{z.real:.11e},{z.imag:.11e}"
            for f, z in zip(frequency, resonance(frequency), strict=True)
        )
        path.write_text("freq (Hz),Re(Z) (Ohm),Im(Z) (Ohm)\n" + "\n".join(rows) + "\n")
        return inspect(path)

    return write


def test_few_digits_of_the_frequency_are_told_and_warned_of(steep):
    found = steep(np.geomspace(4e6, 4e9, 2001), 6)
    assert "in Hz, printed to 6 digits\n" in str(found)
    assert found.to_dict()["frequency_digits"] == "6 digits"
    told = next(w for w in found.warnings if w.startswith("frequency printed to 6 digits"))
    # |H'/H| is 2 Q / f = 80 / 1.5 GHz at most half a bandwidth away (over sqrt(2) there); six
    # digits leave 10 kHz / sqrt(12): 1.1e-4 to 1.5e-4.
    assert "up to 0.0001 where it is steep (at 1.5 GHz)" in told or "up to 0.0002" in told
    assert not any(w.startswith("noise shows") for w in found.warnings)


@pytest.mark.parametrize(
    ("frequency", "digits"),
    [(np.linspace(1e9, 2e9, 401), 6), (np.geomspace(4e6, 4e9, 2001), 12)],
    ids=["grid", "digits"],
)
def test_digits_that_hold_the_frequency_are_not_warned_of(steep, frequency, digits):
    found = steep(frequency, digits)
    assert found.frequency_digits == f"{digits} digits"
    assert not any(w.startswith("frequency printed") for w in found.warnings)


def test_rounded_frequencies_are_no_visible_noise():
    """Rounding of the frequency alone scatters the samples; it is told as such, not as noise."""
    frequency = 1.4e9 + 1.03456e5 * np.arange(2001)
    read = rounded(frequency, 6)
    data = polefit.ResponseSet.from_arrays(
        read, resonance(frequency), channels="a", quantity="impedance"
    )
    assert any(w.startswith("noise shows") for w in limits(data))
    known = replace(data, frequency_precision=FrequencyPrecision(Printed(significant=6)))
    assert not any(w.startswith("noise shows") for w in limits(known))
    assert any(w.startswith("frequency printed to 6 digits") for w in limits(known))


# -- what a file leaves open --------------------------------------------------------------------


def rows_of(text):
    return {line[2:16].strip(): line[16:] for line in text.splitlines() if line[:2] == "  "}


@pytest.fixture
def text_file(tmp_path):
    def write(head, name="gate2.dat"):
        path = tmp_path / name
        body = "".join(f"{f:.6e} {z.real:.9e} {z.imag:.9e}\n" for f, z in
                       zip(FINE[::10], resonance(FINE[::10]), strict=True))  # fmt: skip
        path.write_text(head + body)
        return path

    return write


def test_a_file_without_quantity_is_told_all_the_same(text_file, capsys):
    path = text_file("freq Re(x) Im(x)\n")
    assert main(["inspect", str(path)]) == 0
    text = capsys.readouterr().out
    rows = rows_of(text)
    assert rows["format"] == "delimited text"
    assert rows["points"] == "401"
    assert rows["band"] == "4 MHz to 4 GHz"
    assert rows["channels"] == "1: x"
    assert rows["quantity"] == rows["termination"] == "not stated, see below"
    assert "Not stated:\n  - quantity: nothing says whether" in text
    assert "say quantity= (--quantity)" in text
    document = inspect(path).to_dict()
    assert list(document["questions"]) == ["quantity"]
    assert document["quantity"] is None
    assert document["termination"] is None
    settled = inspect(path, quantity="impedance")
    assert settled.questions == {}
    assert "Not stated" not in str(settled)


def test_node_voltages_are_told_before_it_is_said_what_was_driven(text_file):
    found = inspect(text_file("freq Re(V(g)) Im(V(g))\n"))
    assert list(found.questions) == ["driven"]
    assert found.to_dict()["channels"] == [["g", None]]
    assert "source" not in rows_of(str(found))["channels"]
    assert not any("transfer" in told for told in found.assumptions)
    assert not any("←" in told for told in found.warnings)


def test_numbers_of_unknown_form_are_not_judged(text_file):
    found = inspect(text_file(""), quantity="impedance", frequency_unit="Hz")
    assert list(found.questions) == ["form"]
    assert found.warnings == (
        "what will limit the verdict can be told once these questions are settled",
    )
    assert found.digits == "10 significant (first number and second number)"
    both = inspect(text_file(""), frequency_unit="Hz")
    assert list(both.questions) == ["form", "quantity"]


def test_other_refusals_stay(tmp_path, text_file):
    letter = tmp_path / "letter.txt"
    letter.write_text("Dear colleague,\n")
    with pytest.raises(FormatError, match="no row of numbers"):
        inspect(letter)
    with pytest.raises(ArgumentError, match="no node voltage called 'q'"):
        inspect(text_file("freq Re(V(g)) Im(V(g))\n"), driven="q")
