"""Errors whose text a user can act on: where, what, and the remedy, in one line."""

from __future__ import annotations

from pathlib import Path


class PolefitError(Exception):
    """Base class of every error that polefit raises on purpose.

    Parameters
    ----------
    message : str
        What is wrong, and the remedy. Folded into one printable line, since names taken from
        files may hold anything.
    """

    def __init__(self, message: str = "") -> None:
        super().__init__(one_line(message))


class ArgumentError(PolefitError, ValueError):
    """An argument is missing, malformed or contradicts another one."""


class DataError(PolefitError, ValueError):
    """Numbers handed over as arrays cannot be a frequency response."""


class NotSupportedError(PolefitError):
    """The request is understood, but this version cannot carry it out."""


class FileError(PolefitError):
    """A file cannot be read, or could be read in more than one way.

    Parameters
    ----------
    what : str
        What is wrong, without a full stop.
    remedy : str
        What the user can do about it, without a full stop.
    file : str or pathlib.Path, optional
        The file; its name comes first in the message.
    line : int, optional
        Line number in the file, counted from 1.
    """

    def __init__(
        self, what: str, remedy: str, *, file: str | Path | None = None, line: int | None = None
    ) -> None:
        self.what = what
        self.remedy = remedy
        self.file = None if file is None else str(file)
        self.line = line
        super().__init__(self._message())

    def _message(self) -> str:
        place = "".join(
            (
                "" if self.file is None else f"{self.file}: ",
                "" if self.line is None else f"line {self.line}: ",
            )
        )
        return f"{place}{self.what}; {self.remedy}"

    def in_file(self, file: str | Path) -> FileError:
        """Return the same error naming `file`, for parsers that only see text or bytes."""
        return type(self)(self.what, self.remedy, file=file, line=self.line)


class FormatError(FileError):
    """The content breaks the rules of its format."""


class AmbiguousFileError(FileError):
    """Two readings of a file are possible; the remedy names the option that settles it."""


def one_line(text: str, limit: int = 400) -> str:
    """Fold `text` into one printable line of at most `limit` characters."""
    folded = "".join(c if c.isprintable() else " " for c in " ".join(text.split()))
    return folded if len(folded) <= limit else folded[: limit - 1] + "…"
