"""``polefit confirm``: statuses, options, files. The engine behind it is a stand-in."""

import json

import h5py
import jsonschema
import numpy as np
import pytest
from invented_results import pole_of
from rational import partial_fractions

from polefit.cli import main
from polefit.cli.options import on_command_line
from polefit.report.confirmation_json import confirmation_schema


@pytest.mark.parametrize(
    ("run", "near", "word", "status"),
    [
        ("unstable", "1.5GHz", "CONFIRMED", 1),
        ("stable", "1.5GHz", "REFUTED", 0),
        ("undecided", "1.5GHz", "UNDECIDED", 3),
        ("unstable", "0.6GHz", "REFUTED", 1),  # but something is unstable
        ("undecided", "0.6GHz", "REFUTED", 3),  # but whether all is stable is open
        ("stable", "9GHz", "UNDECIDED", 3),
    ],
)
def test_status(polefit_command, run, near, word, status):
    polefit_command.verdict = run
    done = polefit_command("confirm", "gate2.s1p", "--near", near)
    assert done.status == status
    assert done.out.startswith(f"{word}:")
    assert "What was asked" in done.out
    assert done.err == ""


@pytest.mark.parametrize("near", ["1.5e9", "1.5GHz", "1500 MHz"])
def test_the_prediction_reaches_the_analysis(polefit_command, near):
    polefit_command(
        "confirm", "a.s1p", "b.s1p", "--near", near, "--within", "0.05", "--band", "10MHz", "2GHz",
        "--confidence", "0.99", "--quantity", "impedance",
    )  # fmt: skip
    assert polefit_command.asked == [(1.5e9, 0.05)]
    assert polefit_command.identified == [
        (["responses of a.s1p", "responses of b.s1p"], (10e6, 2e9), 0.99)
    ]
    assert polefit_command.read[0] == ("a.s1p", {"quantity": "impedance"})
    polefit_command("confirm", "a.s1p", "--near", near)
    assert polefit_command.asked[-1] == (1.5e9, 0.1)


def test_json_on_standard_output_is_alone_there(polefit_command):
    run = polefit_command("confirm", "gate2.s1p", "--near", "1.5GHz", "--json", "-")
    document = json.loads(run.out)
    jsonschema.Draft202012Validator(confirmation_schema()).validate(document)
    assert document["verdict"] == "refuted"
    assert run.out.isascii()


def test_quiet_leaves_the_sentence(polefit_command):
    run = polefit_command("confirm", "gate2.s1p", "--near", "1.5GHz", "--quiet")
    assert run.out.startswith("REFUTED:")
    assert run.out.count("\n") == 1


def test_files_are_written_and_may_be_written_again(polefit_command, tmp_path):
    arguments = [
        "confirm", "gate2.s1p", "--near", "1.5GHz", "--json", tmp_path / "r.json",
        "--html", tmp_path / "r.html", "--hdf5", tmp_path / "r.h5", "--figures", tmp_path / "fig",
    ]  # fmt: skip
    for _ in range(2):
        assert polefit_command(*arguments).status == 0
    assert json.loads((tmp_path / "r.json").read_text(encoding="utf-8"))["verdict"] == "refuted"
    assert "REFUTED:" in (tmp_path / "r.html").read_text(encoding="utf-8")
    assert (tmp_path / "fig" / "poles.png").exists()
    assert polefit_command.saved == [tmp_path / "r.h5"] * 2


def test_separately_the_worst_decides(polefit_command, tmp_path):
    polefit_command.verdict = ["stable", "unstable", "undecided"]
    run = polefit_command(
        "confirm", "a.s1p", "b.s1p", "c.s1p", "--near", "1.5GHz", "--separately",
        "--json", tmp_path / "r.json",
    )  # fmt: skip
    assert run.status == 1
    document = json.loads((tmp_path / "r.json").read_text(encoding="utf-8"))
    assert document["schema"] == "polefit.confirmation-list"
    answers = [d["verdict"] for d in document["confirmations"]]
    assert answers == ["refuted", "confirmed", "undecided"]


@pytest.mark.parametrize(
    ("argv", "words"),
    [
        (["confirm", "a"], "Missing option '--near'"),
        (["confirm", "--near", "1GHz"], "Missing argument"),
        (["confirm", "a", "--near", "0"], "--near: 0 Hz is no frequency"),
        (["confirm", "a", "--near", "-1GHz"], "is not a frequency"),
        (["confirm", "a", "--near", "nan"], "is not a frequency"),
        (["confirm", "a", "--near", "5mHz"], "write MHz"),
        (["confirm", "a", "--near", "1GHz", "--within", "0"], "not in the range 0<x<1"),
        (["confirm", "a", "--near", "1GHz", "--within", "1"], "not in the range 0<x<1"),
        (["confirm", "a", "--near", "1GHz", "--within", "nan"], "--within"),
        (["confirm", "a", "--near", "1GHz", "--within", "10%"], "--within"),
        (["confirm", "a", "--near", "1GHz", "--quantity", "loop-gain"], "is not one of"),
        (["confirm", "a", "--near", "1GHz", "--noise-relative", "0"], "not in the range x>0"),
        (["confirm", "a", "--near", "1GHz", "--noise-absolute", "nan"], "--noise-absolute"),
        (["confirm", "a", "--near", "1GHz", "--detection-damping", "1"], "not in the range -1<x<1"),
        (["confirm", "a", "--near", "1GHz", "--html", "-"], "only --json can go"),
    ],
)
def test_bad_input_takes_one_line_and_status_2(polefit_command, argv, words):
    run = polefit_command(*argv)
    assert (run.status, run.out) == (2, "")
    assert run.err.startswith("polefit: error: ")
    assert run.err.count("\n") == 1
    assert words in run.err
    assert not polefit_command.identified
    assert not polefit_command.read


def test_messages_name_the_options_of_the_command_line():
    assert on_command_line("near_hz: -1 is none; give it") == "--near: -1 is none; give it"
    assert on_command_line("within: 2 is none; give it") == "--within: 2 is none; give it"


@pytest.mark.parametrize(("damping", "status"), [(-0.012, 1), (0.012, 0)])
def test_the_whole_way_from_a_file(tmp_path, capsys, damping, status):
    """Invented one-mode impedance, printed with eight digits, through the real engine."""
    frequency = np.linspace(0.5e9, 3e9, 251)
    values = partial_fractions(frequency, [pole_of(1.5e9, damping)], [2e11], 5.0)
    rows = [f"{f:.10e},{v.real:.7e},{v.imag:.7e}" for f, v in zip(frequency, values, strict=True)]
    file, saved = tmp_path / "gate2.csv", tmp_path / "r.h5"
    file.write_text("\n".join(["freq_hz,re(Z),im(Z)", *rows]), encoding="utf-8")
    argv = [
        "confirm", str(file), "--near", "1.52GHz", "--quantity", "impedance", "--hdf5", str(saved),
        "--quiet",
    ]  # fmt: skip
    assert main(argv) == status
    out, err = capsys.readouterr()
    assert out.startswith("CONFIRMED:" if status else "REFUTED:")
    assert "1.5 GHz" in out
    assert err == ""
    with h5py.File(saved) as held:
        assert "confirmation" in held
