"""Output files that appear whole or not at all."""

from __future__ import annotations

import os
import stat
import tempfile
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path

from polefit.errors import FileError


@contextmanager
def whole_file(path: str | Path) -> Iterator[Path]:
    """Yield a temporary path beside `path`; move it into place only if the block succeeds.

    Parameters
    ----------
    path : str or pathlib.Path
        The file to appear. Missing parent directories are made. A symbolic link stays, and the
        file it names is written; a pipe or device is written to and stays what it is.

    Yields
    ------
    pathlib.Path
        Write here.

    Raises
    ------
    FileError
        If the file cannot be written there.
    """
    try:
        target, mode = _place(Path(path))
        # beside a device nothing may appear: its folder belongs to the system
        folder = target.parent if mode is None or stat.S_ISREG(mode) else None
        handle, name = tempfile.mkstemp(
            dir=folder, prefix=f".{target.stem[:40]}-", suffix=target.suffix
        )
    except OSError as error:
        raise _unwritable(path, error) from error
    os.close(handle)
    temporary = Path(name)
    try:
        yield temporary
        if folder is None:
            with target.open("wb", buffering=0) as node:
                _pour(temporary.read_bytes(), node.fileno())
        else:
            temporary.chmod(0o666 & ~_umask() if mode is None else stat.S_IMODE(mode))
            temporary.replace(target)
    except OSError as error:
        raise _unwritable(path, error) from error
    finally:
        temporary.unlink(missing_ok=True)


def write_text(path: str | Path, text: str) -> None:
    """Write `text` as UTF-8, whole or not at all."""
    with whole_file(path) as temporary:
        temporary.write_text(text, encoding="utf-8")


def _place(target: Path) -> tuple[Path, int | None]:
    """Return where to write and the mode of what is there; make missing folders."""
    try:
        mode = target.stat().st_mode
    except FileNotFoundError:
        target = target.resolve()
        target.parent.mkdir(parents=True, exist_ok=True)
        return target, None
    if stat.S_ISDIR(mode):
        raise IsADirectoryError(21, "Is a directory")
    if not os.access(target, os.W_OK):
        raise PermissionError(13, "Permission denied")
    return (target.resolve() if stat.S_ISREG(mode) else target), mode


def _pour(content: bytes, handle: int) -> None:
    """Write everything: a pipe takes part of it at a time."""
    while content:
        content = content[os.write(handle, content) :]


def _unwritable(path: str | Path, error: OSError) -> FileError:
    reason = error.strerror or type(error).__name__
    return FileError(f"cannot be written: {reason}", "choose another path", file=path)


def _umask() -> int:
    mask = os.umask(0)
    os.umask(mask)
    return mask
