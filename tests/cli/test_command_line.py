"""The command line: statuses, streams, options, refusals. The engine behind it is a stand-in."""

import io
import json
import os
import subprocess
import sys
import warnings

import click
import jsonschema
import pytest

import polefit
from polefit.cli import commands, main
from polefit.cli.options import QUANTITY_NAMES, as_frequency, names, on_command_line
from polefit.cli.output import encodable
from polefit.cli.progress import Progress
from polefit.errors import ArgumentError, FormatError
from polefit.report.json import identification_schema
from polefit.responses import QUANTITIES


def one_line(text):
    return text.count("\n") == 1 and text.endswith("\n")


@pytest.mark.parametrize(("verdict", "status"), [("stable", 0), ("unstable", 1), ("undecided", 3)])
def test_status_is_the_verdict(polefit_command, verdict, status):
    polefit_command.verdict = verdict
    run = polefit_command("identify", "gate2.s1p")
    assert run.status == status
    assert run.out.startswith(verdict.upper() + ":")
    assert "Modes, most dangerous first" in run.out
    assert run.err == ""


def test_quiet_leaves_the_verdict_alone(polefit_command):
    run = polefit_command("identify", "gate2.s1p", "--quiet")
    assert one_line(run.out)
    assert run.out.startswith("STABLE:")


def test_json_on_standard_output_is_alone_there(polefit_command):
    polefit_command.verdict = "unstable"
    run = polefit_command("identify", "gate2.s1p", "--json", "-")
    document = json.loads(run.out)
    jsonschema.Draft202012Validator(identification_schema()).validate(document)
    assert document["verdict"] == "unstable"
    assert run.out.isascii()
    assert run.status == 1


def test_files_are_written_and_the_report_too(polefit_command, tmp_path):
    run = polefit_command(
        "identify", "gate2.s1p", "--json", tmp_path / "r.json", "--html", tmp_path / "r.html",
        "--hdf5", tmp_path / "r.h5", "--figures", tmp_path / "fig", "--figure-format", "svg",
    )  # fmt: skip
    assert json.loads((tmp_path / "r.json").read_text(encoding="utf-8"))["verdict"] == "stable"
    assert (tmp_path / "r.html").read_text(encoding="utf-8").startswith("<!DOCTYPE html>")
    assert (tmp_path / "fig" / "poles.svg").exists()
    assert not list(tmp_path.glob("fig/*.png"))
    assert polefit_command.saved == [tmp_path / "r.h5"]
    assert run.out.startswith("STABLE:")


def test_several_files_are_probes_of_one_circuit(polefit_command):
    polefit_command("identify", "a.s1p", "b.s1p", "--quiet")
    assert [c[0] for c in polefit_command.identified] == [
        ["responses of a.s1p", "responses of b.s1p"]
    ]


def test_separately_treats_each_on_its_own(polefit_command, tmp_path):
    polefit_command.verdict = ["stable", "undecided"]
    run = polefit_command(
        "identify", "a.s1p", "b.s1p", "--separately", "--json", tmp_path / "r.json",
        "--html", tmp_path / "r.html", "--hdf5", tmp_path / "r.h5",
    )  # fmt: skip
    assert run.status == 3
    document = json.loads((tmp_path / "r.json").read_text(encoding="utf-8"))
    assert [d["verdict"] for d in document["identifications"]] == ["stable", "undecided"]
    assert "STABLE:" in run.out
    assert "UNDECIDED:" in run.out
    # both stand-in results carry the file gate2.csv: names stay distinct
    assert [p.name for p in polefit_command.saved] == ["r-gate2.h5", "r-gate2-2.h5"]
    assert (tmp_path / "r.html").read_text(encoding="utf-8").count("<main") == 2


def test_the_sets_of_one_file_are_probes_of_one_circuit(polefit_command, monkeypatch):
    monkeypatch.setattr("polefit.readers.read_all", lambda file, **_: (f"1 of {file}", "2"))
    polefit_command("identify", "all.h5", "--quiet")
    polefit_command("identify", "all.h5", "b.h5", "--quiet", "--separately")
    assert [c[0] for c in polefit_command.identified] == [
        ["1 of all.h5", "2"], ["1 of all.h5", "2"], ["1 of b.h5", "2"]]  # fmt: skip


def test_unstable_outweighs_undecided(polefit_command):
    polefit_command.verdict = ["undecided", "unstable", "stable"]
    assert polefit_command("identify", "a", "b", "c", "--separately").status == 1


def test_reading_options_reach_the_reader(polefit_command):
    polefit_command(
        "identify", "run.raw", "--quantity", "impedance", "--driven", "gate2",
        "--select", "gate2,v(a,b)", "--select", "drain1", "--node", "n1", "--decimal", ",",
        "--delimiter", "semicolon", "--frequency-unit", "GHz", "--form", "decibel-angle",
        "--angle-unit", "rad", "--scaling", "absolute", "--reference-ohm", "75", "--pump", "2GHz",
    )  # fmt: skip
    assert polefit_command.read == [
        (
            "run.raw",
            {
                "quantity": "impedance",
                "driven": "gate2",
                "select": ("gate2", "v(a,b)", "drain1"),
                "node": "n1",
                "decimal": ",",
                "delimiter": "semicolon",
                "frequency_unit": "GHz",
                "form": "decibel-angle",
                "angle_unit": "rad",
                "scaling": "absolute",
                "reference_ohm": 75.0,
                "pump_hz": 2e9,
            },
        )
    ]
    polefit_command("identify", "run.raw")
    assert polefit_command.read[-1] == ("run.raw", {})


def test_node_and_driven_go_with_the_files(polefit_command):
    polefit_command("identify", "a", "b", "--node", "x", "--node", "y", "--driven", "d")
    assert [o for _, o in polefit_command.read] == [
        {"node": "x", "driven": "d"},
        {"node": "y", "driven": "d"},
    ]
    run = polefit_command("identify", "a", "b", "--node", "x")
    assert run.status == 2
    assert "--node: given once for 2 files" in run.err


def test_band_and_confidence_reach_the_engine(polefit_command):
    polefit_command("identify", "a", "--band", "10MHz", "1.5e9", "--confidence", "0.99")
    assert polefit_command.identified[-1][1:] == ((10e6, 1.5e9), 0.99)
    polefit_command("identify", "a")
    assert polefit_command.identified[-1][1:] == (None, 0.95)


@pytest.mark.parametrize("command", [["identify"], ["confirm", "--near", "1.5GHz"]])
def test_noise_and_detection_damping_reach_the_engine(polefit_command, command):
    polefit_command(
        *command, "a", "--noise-relative", "0.003", "--noise-absolute", "2e-6",
        "--detection-damping", "-0.002",
    )  # fmt: skip
    polefit_command(*command, "a")
    assert polefit_command.how == [
        {"noise_relative": 0.003, "noise_absolute": 2e-6, "detection_damping": -0.002},
        {"noise_relative": None, "noise_absolute": None, "detection_damping": -0.01},
    ]


@pytest.mark.parametrize(
    ("text", "hertz"),
    [
        ("1.5e9", 1.5e9),
        ("1.5GHz", 1.5e9),
        ("1500 MHz", 1.5e9),
        ("10khz", 1e4),
        (".5THz", 5e11),
        ("0", 0.0),
        ("50Hz", 50.0),
        ("+2.GHZ", 2e9),
        ("0.1G", 1e8),
        ("6000M", 6e9),
        ("3 k", 3e3),
        ("2meg", 2e6),
    ],
)
def test_frequencies(text, hertz):
    assert as_frequency(text) == hertz


@pytest.mark.parametrize(
    "text", ["", "GHz", "1.5Q", "-1GHz", "nan", "1,5GHz", "1e999", "1.5 d", "1..5", "0x10", "1_0"]
)
def test_what_is_no_frequency(text):
    with pytest.raises(ArgumentError, match="frequency"):
        as_frequency(text)


@pytest.mark.parametrize("text", ["5mHz", "5m", "5 mhz"])
def test_a_thousandth_of_a_hertz_is_not_guessed(text):
    with pytest.raises(ArgumentError, match="write MHz"):
        as_frequency(text)


def test_name_lists():
    assert names(("a, b", "v(c,d),e", "")) == ("a", "b", "v(c,d)", "e")


@pytest.mark.parametrize(
    ("argv", "words"),
    [
        (["identify"], "Missing argument"),
        (["identify", "a", "--nonsense"], "see polefit identify --help"),
        (["nonsense"], "No such command"),
        (["identify", "a", "--band", "1GHz"], "--band"),
        (["identify", "a", "--band", "2GHz", "1GHz"], "2 GHz to 1 GHz is empty; give LO, then HI"),
        (["identify", "a", "--band", "1Gz", "2GHz"], "is not a frequency"),
        (["identify", "a", "--confidence", "1.5"], "--confidence"),
        (["identify", "a", "--confidence", "0.5"], "not in the range 0.5<x<1"),
        (["identify", "a", "--detection-damping", "-1"], "not in the range -1<x<1"),
        (["identify", "a", "--noise-relative", "0"], "'--noise-relative': 0.0 is not in the range"),
        (["identify", "a", "--noise-absolute", "-1e-3"], "not in the range x>0"),
        (["identify", "a", "--noise-absolute", "inf"], "--noise-absolute"),
        (["identify", "a", "--quantity", "loop-gain"], "'loop-gain' is not one of 'impedance'"),
        (["identify", "a", "--figure-format", "svg"], "give --figures DIR, too"),
        (["identify", "a", "--json", "--html", "x.html"], "'--html' would be its path"),
        (["identify", "a", "--confidence", "nan"], "--confidence"),
        (["identify", "a", "--reference-ohm", "nan"], "--reference-ohm"),
        (["identify", "a", "--reference-ohm", "-3"], "--reference-ohm"),
        (["identify", "a", "--quantity", "charm"], "--quantity"),
        (["identify", "a", "--html", "-"], "only --json can go to standard output"),
        (["identify", "a", "--json", "x", "--html", "./x"], "already given to --json"),
        (["inspect"], "Missing argument"),
        (["inspect", "a", "b"], "unexpected extra argument"),
    ],
)
def test_usage_errors_take_one_line_and_status_2(polefit_command, argv, words):
    run = polefit_command(*argv)
    assert run.status == 2
    assert run.out == ""
    assert one_line(run.err)
    assert run.err.startswith("polefit: error: ")
    assert words in run.err
    assert not polefit_command.identified


def test_no_command_shows_the_help(polefit_command):
    run = polefit_command()
    assert (run.status, run.out) == (2, "")
    assert run.err.startswith("Usage: polefit [OPTIONS] COMMAND")
    assert all(f"\n  {name}  " in run.err for name in commands.commands)


def test_errors_of_the_package_take_one_line(polefit_command):
    polefit_command.error = FormatError("row has 3 fields", "give 2", file="a.csv", line=7)
    run = polefit_command("identify", "a.csv")
    assert (run.status, run.out) == (2, "")
    assert run.err == "polefit: error: a.csv: line 7: row has 3 fields; give 2\n"


@pytest.mark.parametrize(
    ("error", "status", "words"),
    [
        (KeyboardInterrupt(), 130, "interrupted"),
        (MemoryError(), 2, "not enough memory"),
        (PermissionError(13, "Permission denied", "a.s1p"), 2, "a.s1p: Permission denied"),
        (ArgumentError("two\nlines"), 2, "two lines"),
        (ZeroDivisionError("oh"), 2, "fault in polefit, please report it: ZeroDivisionError: oh"),
    ],
)
def test_other_ends(polefit_command, error, status, words):
    polefit_command.error = error
    run = polefit_command("identify", "a.s1p")
    assert run.status == status
    assert one_line(run.err.lstrip("\n"))  # click ends the line on which ^C was typed
    assert words in run.err


def test_unwritable_output_is_named(polefit_command, tmp_path):
    (tmp_path / "file").write_text("")
    run = polefit_command("identify", "a", "--json", tmp_path / "file" / "r.json")
    assert run.status == 2
    assert one_line(run.err)
    assert "cannot be written" in run.err
    assert run.out == ""


def test_warnings_do_not_leak(polefit_command, monkeypatch):
    monkeypatch.setattr(sys, "warnoptions", [])

    def warned(*args, **kwargs):
        warnings.warn("seen by nobody", RuntimeWarning, stacklevel=1)
        return polefit_command.answer()

    monkeypatch.setattr(sys.modules["polefit.analysis.identify"], "identify", warned)
    with warnings.catch_warnings():
        warnings.simplefilter("always")
        run = polefit_command("identify", "a")
    assert run.err == ""


def test_choices_are_those_of_the_package():
    assert QUANTITY_NAMES == QUANTITIES


def test_every_command_and_option_explains_itself():
    for command in commands.commands.values():
        assert command.help
        for parameter in command.params:
            if isinstance(parameter, click.Option):
                assert parameter.help, f"{command.name} {parameter.name}"


def test_help_and_version(capsys):
    assert main(["--help"]) == 0
    assert "identify" in capsys.readouterr().out
    assert main(["--version"]) == 0
    assert capsys.readouterr().out == f"polefit {polefit.__version__}\n"
    assert main(["identify", "-h"]) == 0
    assert "--separately" in capsys.readouterr().out


@pytest.mark.parametrize("encoding", ["ascii", "latin-1", "cp1252", None, "no-such-encoding"])
def test_no_sign_is_lost_on_plain_terminals(encoding):
    text = encodable("ζ −0.0123 ± 0.0002, 50 Ω, 日", encoding)
    assert text == "zeta -0.0123 +/- 0.0002, 50 ohm, \\u65e5"
    assert encodable("ζ −0.0123", "utf-8") == "ζ −0.0123"


class Terminal(io.StringIO):
    """Standard error that says it is a terminal."""

    encoding = "utf-8"

    def isatty(self):
        return True


@pytest.mark.parametrize(
    ("terminal", "quiet", "patience", "shown"),
    [(True, False, 0.01, True), (True, True, 0.01, False), (False, False, 0.01, False),
     (True, False, 60.0, False)],
)  # fmt: skip
def test_progress_on_a_patient_terminal_only(monkeypatch, terminal, quiet, patience, shown):
    stream = Terminal() if terminal else io.StringIO()
    monkeypatch.setattr(sys, "stderr", stream)
    monkeypatch.setattr("polefit.cli.progress.PATIENCE_S", patience)
    with Progress(quiet) as progress:
        progress("fitting order 8")
        for _ in range(200):
            if "fitting order 8" in stream.getvalue():
                break
            progress._done.wait(0.005)
    assert ("fitting order 8" in stream.getvalue()) is shown
    if shown:  # the line is wiped at the end
        assert stream.getvalue().rstrip("\r").rpartition("\r")[2].strip() == ""


def python(*arguments, **how):
    how.setdefault("capture_output", True)
    environment = {**os.environ, **how.pop("env", {})}
    return subprocess.run(
        [sys.executable, *arguments], text=True, check=False, env=environment, **how
    )


def test_help_loads_nothing_heavy():
    heavy = "numpy", "scipy", "matplotlib", "skrf", "h5py", "jinja2"
    code = (
        "import sys; from polefit.cli import main; main(['--help']); "
        f"sys.exit(bool(set({heavy}) & set(sys.modules)))"
    )
    assert python("-c", code).returncode == 0


def test_module_ends_with_the_status():
    run = python("-m", "polefit", "identify", "no-such-file.s1p")
    assert run.returncode == 2
    assert one_line(run.stderr)
    assert "no-such-file.s1p" in run.stderr
    assert run.stdout == ""


def test_a_reader_that_goes_away_is_no_error():
    """``polefit … | head -0``: the status is still that of the work; no traceback."""
    code = "import sys; from polefit.cli import run; sys.argv = ['polefit', '--help']; run()"
    reading, writing = os.pipe()
    os.close(reading)
    with os.fdopen(writing, "w") as closed:
        run = python("-c", code, capture_output=False, stdout=closed, stderr=subprocess.PIPE)
    assert "Traceback" not in run.stderr
    code = (
        "import sys; from polefit.cli.output import put; put('x' * 100000); put('y'); sys.exit(3)"
    )
    reading, writing = os.pipe()
    os.close(reading)
    with os.fdopen(writing, "w") as closed:
        run = python("-c", code, capture_output=False, stdout=closed, stderr=subprocess.PIPE)
    assert (run.returncode, run.stderr) == (3, "")


# -- options in messages ------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("text", "told"),
    [
        ("a.csv: driven: no node; save it", "a.csv: --driven: no node; save it"),
        ("reference_ohm: needed; say it", "--reference-ohm: needed; say it"),
        ("a.csv: pump_hz: states it; leave it out", "a.csv: --pump: states it; leave it out"),
        ("band_hz: no point; the data", "--band: no point; the data"),
        ("noise_relative: 0 is none; give", "--noise-relative: 0 is none; give"),
        ("noise_absolute: 0 is none; give", "--noise-absolute: 0 is none; give"),
        ("detection_damping: 0 is none; give", "--detection-damping: 0 is none; give"),
        ("a; say quantity= (--quantity)", "a; say --quantity"),
        ("a; say form= (--form) decibel-angle", "a; say --form decibel-angle"),
        ("a; say decimal=',' (--decimal ,) for b", "a; say --decimal , for b"),
        ('a; say quantity="transfer" (--quantity), or', "a; say --quantity transfer, or"),
        ('a; say quantity="scattering" too', "a; say --quantity scattering too"),
        ("a (quantity='impedance', --quantity impedance), b", "a (--quantity impedance), b"),
        ("name the nodes (node=, --node), or", "name the nodes (--node), or"),
        ("a with delimiter=',' and decimal='.': b", "a with --delimiter , and --decimal .: b"),
        ("a.csv: line 3: text: 'select: x'; mend", "a.csv: line 3: text: 'select: x'; mend"),
    ],
)
def test_messages_name_the_options_of_the_command_line(text, told):
    assert on_command_line(text) == told


def test_refusals_name_file_and_option(capsys, tmp_path):
    path = tmp_path / "a.csv"
    rows = "".join(f"{f}e9,1,{f % 7}\n" for f in range(1, 30))
    path.write_text("freq (Hz),Re(V(g)),Im(V(g))\n" + rows)
    for options, told in (
        (["--driven", "g1"], "--driven: the file holds no node voltage called 'g1'; it holds g"),
        (["--driven", "g", "--band", "50GHz", "60GHz"],
         "--band: no point between 50 GHz and 60 GHz; the data cover 1 GHz to 29 GHz"),
    ):  # fmt: skip
        status = main(["identify", str(path), *options])
        assert status == 2
        assert capsys.readouterr().err.startswith(f"polefit: error: {path}: {told}")


def test_ports_of_one_file_are_named_by_a_list_or_one_by_one(capsys, tmp_path):
    path = tmp_path / "a.s2p"
    path.write_text("# Hz S RI R 50\n" + "".join(f"{f} 1 0 2 0 3 0 4 {f}\n" for f in range(1, 9)))
    for options in (["--node", "gate2,drain1"], ["--node", "gate2", "--node", "drain1"]):
        assert main(["inspect", str(path), *options, "--json", "-"]) == 0
        channels = json.loads(capsys.readouterr().out)["channels"]
        assert channels[1] == ["gate2", "drain1"]
