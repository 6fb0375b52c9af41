"""Output files that appear whole or not at all."""

from __future__ import annotations

import os
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
        The file to appear. Missing parent directories are made.

    Yields
    ------
    pathlib.Path
        Write here.

    Raises
    ------
    FileError
        If the file cannot be written there.
    """
    target = Path(path)
    try:
        target.parent.mkdir(parents=True, exist_ok=True)
        if target.is_dir():
            raise IsADirectoryError(21, "Is a directory")
        handle, name = tempfile.mkstemp(
            dir=target.parent, prefix=f".{target.stem[:40]}-", suffix=target.suffix
        )
    except OSError as error:
        reason = error.strerror or type(error).__name__
        raise FileError(f"cannot be written: {reason}", "choose another path", file=path) from error
    os.close(handle)
    temporary = Path(name)
    try:
        yield temporary
        temporary.chmod(0o666 & ~_umask())
        temporary.replace(target)
    except OSError as error:
        reason = error.strerror or type(error).__name__
        raise FileError(f"cannot be written: {reason}", "choose another path", file=path) from error
    finally:
        temporary.unlink(missing_ok=True)


def write_text(path: str | Path, text: str) -> None:
    """Write `text` as UTF-8, whole or not at all."""
    with whole_file(path) as temporary:
        temporary.write_text(text, encoding="utf-8")


def _umask() -> int:
    mask = os.umask(0)
    os.umask(mask)
    return mask
