"""Output paths that would destroy something are refused before any work is done."""

from __future__ import annotations

import os
import stat
from collections.abc import Sequence
from pathlib import Path

from polefit.errors import ArgumentError

_HEAD = 4096  # bytes in which an output of ours shows itself
_JSON = b'"schema": "polefit.'
_HTML = b'name="generator" content="polefit'
_HDF5 = b"\x89HDF\r\n\x1a\n"


def check_paths(
    *,
    json: str | None = None,
    html: str | None = None,
    hdf5: str | None = None,
    figures: str | None = None,
    inputs: Sequence[str] = (),
) -> None:
    """Refuse outputs that would overwrite the user's data, or each other.

    Parameters
    ----------
    json, html, hdf5, figures : str, optional
        As given to the options of these names; ``-`` for JSON is standard output.
    inputs : sequence of str
        The files to be read.

    Raises
    ------
    ArgumentError
        If one of them is an input, a file that polefit did not write, the path of another one,
        or looks like an option.
    """
    named = {"--json": json, "--html": html, "--hdf5": hdf5, "--figures": figures}
    taken: dict[Path, str] = {}
    for option, value in named.items():
        if value is None or (option == "--json" and value == "-"):
            continue
        _check_form(option, value)
        if any(_same(value, file) for file in inputs):
            raise ArgumentError(
                f"{option}: {value} is a file to be read and would be overwritten; give another"
            )
        path = Path(value).resolve()
        if path in taken:
            raise ArgumentError(
                f"{option}: {value} is already given to {taken[path]}; give another"
            )
        taken[path] = option
        check_replaceable(option, value)


def check_replaceable(option: str, value: str | Path) -> None:
    """Refuse to overwrite a file that is not an earlier output of the same option.

    Raises
    ------
    ArgumentError
        If it is none. A file that is empty or absent, a pipe or a device may be written.
    """
    path = Path(value)
    try:
        mode = path.stat().st_mode
        if option == "--figures":
            if not stat.S_ISDIR(mode):
                raise ArgumentError(f"{option}: {value} is a file; give a directory")
            return
        if not stat.S_ISREG(mode) or _is_ours(option, path):
            return
    except OSError:
        return  # absent, or writing will say what is wrong
    kind = option.removeprefix("--").upper()
    raise ArgumentError(
        f"{option}: {value} exists and is no {kind} that polefit wrote; "
        "give another path, or remove it"
    )


def _check_form(option: str, value: str) -> None:
    if value == "-":
        raise ArgumentError(f"{option}: only --json can go to standard output; give a path")
    if value.startswith("-") or not value:
        raise ArgumentError(
            f"{option}: {value!r} would be its path; give a path first, with ./ before a name that "
            "starts with -"
        )


def _is_ours(option: str, path: Path) -> bool:
    with path.open("rb") as file:
        head = file.read(_HEAD)
    if not head:
        return True
    if option == "--hdf5":
        return head.startswith(_HDF5) and _holds_identification(path)
    return (_JSON if option == "--json" else _HTML) in head


def _holds_identification(path: Path) -> bool:
    import h5py

    with h5py.File(path) as file:
        return "identification" in file


def _same(one: str, other: str) -> bool:
    """Whether two paths name one file, by whatever links or spelling."""
    try:
        return os.path.samefile(one, other)
    except (OSError, ValueError):
        return Path(one).resolve() == Path(other).resolve()
