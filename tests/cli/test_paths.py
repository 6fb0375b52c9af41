"""Output options never destroy the user's data; what polefit wrote before may be replaced."""

import pytest
from invented_results import example

from polefit.report.hdf5 import write_identification

DATA = "freq,re,im\n1e6,1,0\n"


@pytest.fixture
def here(tmp_path, monkeypatch):
    monkeypatch.chdir(tmp_path)
    for name in ("in.z2p", "notes.json", "page.html"):
        (tmp_path / name).write_text(DATA)
    (tmp_path / "link.z2p").symlink_to("in.z2p")
    (tmp_path / "own.json").write_text('{"name": "a project of mine"}')
    return tmp_path


@pytest.mark.parametrize("command", ["identify", "inspect"])
@pytest.mark.parametrize("path", ["in.z2p", "./in.z2p", "link.z2p", "../{0}/in.z2p"])
def test_inputs_are_never_outputs(polefit_command, here, command, path):
    """The link names the input; so does each spelling."""
    run = polefit_command(command, "in.z2p", "--json", path.format(here.name))
    assert run.status == 2
    assert "is a file to be read and would be overwritten" in run.err
    assert (here / "in.z2p").read_text() == DATA


@pytest.mark.parametrize(
    ("option", "path"),
    [
        ("--html", "in.z2p"),
        ("--html", "page.html"),
        ("--json", "notes.json"),
        ("--json", "own.json"),
        ("--hdf5", "in.z2p"),
    ],
)
def test_files_of_another_making_stay(polefit_command, here, option, path):
    before = (here / path).read_bytes()
    run = polefit_command("identify", "other.s1p", option, path)
    assert run.status == 2
    assert f"polefit: error: {option}: {path} exists and is no {option[2:].upper()}" in run.err
    assert (here / path).read_bytes() == before
    assert not polefit_command.identified


def test_what_polefit_wrote_is_replaced(polefit_command, here):
    arguments = "identify", "a", "--json", "r.json", "--html", "r.html", "--figures", "fig"
    assert polefit_command(*arguments).status == 0
    polefit_command.verdict = "unstable"
    run = polefit_command(*arguments)
    assert run.status == 1
    assert run.err == ""
    assert '"verdict": "unstable"' in (here / "r.json").read_text(encoding="utf-8")
    assert "UNSTABLE:" in (here / "r.html").read_text(encoding="utf-8")


def test_lists_of_separate_results_are_replaced_too(polefit_command, here):
    arguments = "identify", "a", "b", "--separately", "--json", "r.json"
    assert [polefit_command(*arguments).status for _ in range(2)] == [0, 0]


def test_an_empty_file_may_be_filled(polefit_command, here):
    (here / "r.json").touch()
    assert polefit_command("identify", "a", "--json", "r.json").status == 0


def test_figures_need_a_directory(polefit_command, here):
    run = polefit_command("identify", "a", "--figures", "in.z2p")
    assert run.status == 2
    assert "--figures: in.z2p is a file; give a directory" in run.err


def test_hdf5_of_results_only(polefit_command, here):
    import h5py

    with h5py.File(here / "data.h5", "w") as file:
        file["mine"] = 1.0
    write_identification(here / "r.h5", example("stable", nodes=("a",), points=31))
    assert polefit_command("identify", "a", "--hdf5", "data.h5").status == 2
    assert polefit_command("identify", "a", "--hdf5", "r.h5").status == 0


def test_separate_hdf5_files_are_checked_by_their_own_names(polefit_command, here):
    (here / "r-gate2.h5").write_text(DATA)
    run = polefit_command("identify", "a", "--separately", "--hdf5", "r.h5")
    assert run.status == 2
    assert "r-gate2.h5 exists" in run.err


def test_the_demonstration_leaves_other_files_alone(polefit_command, here):
    (here / "out.s1p").write_text(DATA)
    run = polefit_command("demo", "--output", ".")
    assert run.status == 2
    assert "out.s1p: exists and is not that of the example; give another --output" in run.err
    assert (here / "out.s1p").read_text() == DATA
    (here / "result.json").write_text(DATA)
    assert "result.json exists" in polefit_command("demo", "--output", ".").err
