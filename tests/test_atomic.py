"""Whole files: links, pipes, devices and modes survive, and a failure leaves nothing behind."""

import os
import stat
import threading
from pathlib import Path

import pytest

from polefit.atomic import whole_file, write_text
from polefit.errors import FileError


def test_a_link_stays_and_its_file_is_written(tmp_path):
    (tmp_path / "real").mkdir()
    (tmp_path / "real" / "r.json").write_text("old")
    link = tmp_path / "r.json"
    link.symlink_to(Path("real") / "r.json")
    write_text(link, "new")
    assert link.is_symlink()
    assert (tmp_path / "real" / "r.json").read_text() == "new"
    assert sorted(p.name for p in tmp_path.rglob("*")) == ["r.json", "r.json", "real"]


def test_a_link_to_nothing_makes_its_file(tmp_path):
    link = tmp_path / "r.json"
    link.symlink_to(Path("later") / "r.json")
    write_text(link, "new")
    assert link.is_symlink()
    assert (tmp_path / "later" / "r.json").read_text() == "new"


def test_a_pipe_takes_more_than_it_can_hold(tmp_path):
    """1 MB: a pipe of Linux holds 64 KiB, so that the reader must be waited for."""
    pipe, text, got = tmp_path / "pipe", "x" * 1_000_000, []
    os.mkfifo(pipe)
    reader = threading.Thread(target=lambda: got.append(pipe.read_text()), daemon=True)
    reader.start()
    write_text(pipe, text)
    reader.join(30)
    assert got == [text]
    assert pipe.is_fifo()
    assert list(tmp_path.iterdir()) == [pipe]


@pytest.mark.skipif(not Path("/dev/full").is_char_device(), reason="a device of Linux")
def test_a_full_device_is_an_error_and_stays_a_device(tmp_path):
    """By way of a link, so that a fault here could only replace the link."""
    full, null = tmp_path / "full", tmp_path / "null"
    full.symlink_to("/dev/full")
    null.symlink_to("/dev/null")
    with pytest.raises(FileError, match="full: cannot be written: No space left"):
        write_text(full, "x")
    write_text(null, "x")
    assert full.is_char_device()
    assert null.is_char_device()
    assert sorted(tmp_path.iterdir()) == [full, null]


def test_the_mode_of_the_old_file_is_kept(tmp_path):
    path = tmp_path / "r.json"
    path.write_text("old")
    path.chmod(0o640)
    write_text(path, "new")
    assert stat.S_IMODE(path.stat().st_mode) == 0o640


def test_a_failure_leaves_the_old_file_and_nothing_else(tmp_path):
    path = tmp_path / "r.json"
    path.write_text("old")

    def write_half():
        with whole_file(path) as temporary:
            temporary.write_text("half")
            raise ZeroDivisionError

    with pytest.raises(ZeroDivisionError):
        write_half()
    assert path.read_text() == "old"
    assert list(tmp_path.iterdir()) == [path]
