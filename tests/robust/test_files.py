"""The same abuse through files and the command line: a status and a line, never a traceback."""

import numpy as np
import pytest
from abuse import FREQUENCY, response

from polefit.cli import main

STATUS = {"stable": 0, "unstable": 1, "undecided": 3}


def table(path, values, frequency=FREQUENCY, head="frequency_Hz,re(Z_gate),im(Z_gate)"):
    rows = [f"{f:.12g},{z.real:.12g},{z.imag:.12g}" for f, z in zip(frequency, values, strict=True)]
    path.write_text("\n".join([head, *rows]) + "\n", encoding="utf-8")
    return path


def touchstone(path, angle, size, form="MA"):
    rows = [
        f"{f:.9g} {m:.9g} {a:.9g}" for f, m, a in zip(FREQUENCY / 1e9, size, angle, strict=True)
    ]
    path.write_text("\n".join([f"# GHz S {form} R 50", *rows]) + "\n", encoding="utf-8")
    return path


@pytest.fixture
def ask(tmp_path, capsys):
    """Run ``polefit identify`` on a file; status, standard output, standard error."""

    def run(path, *options):
        status = main(["identify", str(path), "--quiet", *options])
        out, err = capsys.readouterr()
        assert "Traceback" not in out + err
        if status == 2:
            assert err.startswith("polefit: error: ")
            assert err.count("\n") == 1
            assert out == ""
        else:
            assert status == STATUS[out.split(":")[0].lower()]
        return status, out, err

    return run


@pytest.mark.parametrize("grows", [False, True])
@pytest.mark.parametrize("factor", [1e-9, 1e-3, 1e3])
def test_a_frequency_column_in_another_unit(ask, tmp_path, grows, factor):
    file = table(tmp_path / "z.csv", response(grows=grows), FREQUENCY * factor)
    assert ask(file, "--quantity", "impedance")[0] == (1 if grows else 0)


@pytest.mark.parametrize("grows", [False, True])
def test_a_falling_sweep_gives_the_same_answer_or_is_refused(ask, tmp_path, grows):
    file = table(tmp_path / "z.csv", response(grows=grows)[::-1], FREQUENCY[::-1])
    assert ask(file, "--quantity", "impedance")[0] in {1 if grows else 0, 2}


def test_shuffled_rows_give_the_same_answer_or_are_refused(ask, tmp_path):
    order = np.random.default_rng(2).permutation(FREQUENCY.size)
    file = table(tmp_path / "z.csv", response(grows=True)[order], FREQUENCY[order])
    assert ask(file, "--quantity", "impedance")[0] in {1, 2}


def test_magnitudes_with_a_column_of_zeros_for_the_angle(ask, tmp_path):
    z = response()
    size = np.abs((z - 50) / (z + 50))
    status, _, err = ask(touchstone(tmp_path / "s.s1p", 0 * size, size))
    assert status == 2
    assert "no imaginary part" in err
    assert "export real and imaginary part" in err


def test_decibels_declared_as_magnitudes_are_not_unstable(ask, tmp_path):
    z = response()
    gamma = (z - 50) / (z + 50)
    decibels = 20 * np.log10(np.abs(gamma))
    file = touchstone(tmp_path / "s.s1p", np.degrees(np.angle(gamma)), decibels)
    assert ask(file)[0] in {2, 3}


@pytest.mark.parametrize("word", ["nan", "inf", "-", "1,5e3", ""])
def test_a_field_that_is_no_number(ask, tmp_path, word):
    file = table(tmp_path / "z.csv", response())
    lines = file.read_text(encoding="utf-8").splitlines()
    lines[50] = f"{FREQUENCY[49]:.12g},{word},1.0"
    file.write_text("\n".join(lines), encoding="utf-8")
    status, _, err = ask(file, "--quantity", "impedance")
    assert status == 2
    assert "z.csv" in err


@pytest.mark.parametrize("points", [0, 1, 5])
def test_files_with_hardly_a_point(ask, tmp_path, points):
    file = table(tmp_path / "z.csv", response()[:points], FREQUENCY[:points])
    assert ask(file, "--quantity", "impedance")[0] == 2


def test_a_file_cut_off_in_the_middle_of_a_number(ask, tmp_path):
    file = table(tmp_path / "z.csv", response())
    text = file.read_text(encoding="utf-8")
    file.write_text(text[: text.rindex(",") - 3], encoding="utf-8")
    assert ask(file, "--quantity", "impedance")[0] == 2


@pytest.mark.parametrize(("factor", "at"), [(1.05, 100), (1.001, 40)])
def test_joined_sweeps_end_undecided(ask, tmp_path, factor, at):
    values = response() * np.where(np.arange(FREQUENCY.size) >= at, factor, 1.0)
    status, out, _ = ask(table(tmp_path / "z.csv", values), "--quantity", "impedance")
    assert status == 3
    assert out.startswith("UNDECIDED:")


def test_a_band_without_enough_points_is_refused(ask, tmp_path):
    file = table(tmp_path / "z.csv", response())
    status, _, err = ask(file, "--quantity", "impedance", "--band", "1GHz", "1.05GHz")
    assert status == 2
    assert "points" in err
