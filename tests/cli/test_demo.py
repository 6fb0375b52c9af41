"""The whole way with nothing replaced: the bundled example through the real command."""

import json
import subprocess
import sys
from pathlib import Path

import jsonschema
import pytest

from polefit.cli import main
from polefit.cli.demo import copy_example
from polefit.errors import FileError
from polefit.report.json import identification_schema

EXAMPLE = Path(__file__).resolve().parents[2] / "datasets" / "three_stage_amplifier"
TRUTH = json.loads((EXAMPLE / "truth.json").read_text(encoding="utf-8"))
ODD = next(m for m in TRUTH["modes"] if m["damping_ratio"] < 0)


def command(*arguments):
    return subprocess.run(
        [sys.executable, "-m", "polefit", *map(str, arguments)],
        capture_output=True,
        text=True,
        encoding="utf-8",
        check=False,
    )


@pytest.fixture(scope="module")
def demonstration(tmp_path_factory):
    folder = tmp_path_factory.mktemp("demo") / "new" / "polefit-demo"
    return folder, command("demo", "--output", folder)


def test_it_ends_with_status_0_although_the_example_is_unstable(demonstration):
    _, run = demonstration
    assert run.returncode == 0, run.stderr
    assert run.stdout.startswith("UNSTABLE:")
    assert "Traceback" not in run.stderr
    assert "Warning" not in run.stderr


def test_it_writes_everything(demonstration):
    folder, _ = demonstration
    names = {p.name for p in folder.iterdir()}
    assert {"report.html", "figures", "result.json", "result.h5"} <= names
    assert {p.name for p in EXAMPLE.iterdir()} <= names
    for path in EXAMPLE.iterdir():
        assert (folder / path.name).read_bytes() == path.read_bytes()
    figures = {p.name for p in (folder / "figures").iterdir()}
    assert {"poles.png", "overview.png", "nodes-1.png"} <= figures
    assert not [n for n in names | figures if n.startswith(".")]


def test_its_answer_is_the_truth(demonstration):
    folder, _ = demonstration
    document = json.loads((folder / "result.json").read_text(encoding="utf-8"))
    jsonschema.Draft202012Validator(identification_schema()).validate(document)
    growing = [m for m in document["modes"] if m["verdict"] == "unstable" and m["in_band"]]
    assert len(growing) == 1
    for name in ("frequency_hz", "damping_ratio"):
        found = growing[0][name]
        # five standard uncertainties: once in a million
        assert abs(found["value"] - ODD[name]) < 5 * found["std"]
    assert sorted(document["channels"]) == sorted([n, n] for n in TRUTH["nodes"])


def test_a_second_run_changes_nothing(demonstration):
    folder, first = demonstration
    kept = {p: p.read_bytes() for p in folder.rglob("*") if p.suffix in {".json", ".html", ".png"}}
    again = command("demo", "--output", folder)
    assert again.stdout == first.stdout
    assert [p.name for p, content in kept.items() if p.read_bytes() != content] == []


def test_one_file_from_the_outside(tmp_path):
    run = command("identify", EXAMPLE / "gate2a.s1p", "--json", "-")
    assert run.returncode == 1, run.stderr
    document = json.loads(run.stdout)
    assert document["source"]["file"].endswith("gate2a.s1p")
    assert document["channels"] == [["gate2a", "gate2a"]]


def test_inspect_from_the_outside():
    run = command("inspect", EXAMPLE / "gate2a.s1p")
    assert run.returncode == 0, run.stderr
    assert "gate2a" in run.stdout
    assert "Touchstone" in run.stdout
    assert json.loads(command("inspect", EXAMPLE / "gate2a.s1p", "--json", "-").stdout)


@pytest.mark.parametrize(
    "content", [b"", b"# nonsense\n1 2\n", b"\x00" * 4096, b"# Hz Z RI R 1\n1 2"]
)
def test_bad_files_take_one_line(tmp_path, capsys, content):
    path = tmp_path / "bad.s1p"
    path.write_bytes(content)
    for name in ("identify", "inspect"):
        assert main([name, str(path)]) == 2
        out, err = capsys.readouterr()
        assert out == ""
        assert err.count("\n") == 1
        assert "bad.s1p" in err
        assert "fault" not in err


def test_a_folder_that_cannot_be_written_is_named(tmp_path):
    (tmp_path / "file").write_text("")
    with pytest.raises(FileError, match="cannot be written"):
        copy_example(tmp_path / "file")
