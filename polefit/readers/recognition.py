"""Which format a file is of: by its first bytes, by its name only where they leave it open."""

from __future__ import annotations

import re
from dataclasses import dataclass
from typing import Literal

from polefit.errors import FormatError
from polefit.readers.hdf5_safely import is_hdf5
from polefit.readers.large_files import Content
from polefit.readers.text_blocks import numbered_lines, open_text

HEAD_BYTES = 1 << 16
_TOUCHSTONE_NAME = re.compile(r"\.(?:[syzhg]\d+p|ts)", re.IGNORECASE)
_OPTION_WORDS = {"hz", "khz", "mhz", "ghz", "s", "y", "z", "h", "g", "ma", "db", "ri", "r"}
_NUMBER = re.compile(r"[+-]?\.?\d")
_EXPORT_AGAIN = "the export may have failed; export it again"


@dataclass(frozen=True)
class Format:
    """A recognised format.

    Parameters
    ----------
    module : {"touchstone", "delimited", "spice_raw", "hdf5"}
        The reader's module.
    assumptions : tuple of str
        What the recognition rests on, where the file name speaks against it.
    """

    module: Literal["touchstone", "delimited", "spice_raw", "hdf5"]
    assumptions: tuple[str, ...] = ()


def recognise(content: Content, suffix: str) -> Format:
    """Tell the format of a file.

    Parameters
    ----------
    content : bytes-like
        The whole file, of which the first 64 KiB are looked at.
    suffix : str
        File name extension with its dot.

    Returns
    -------
    Format

    Raises
    ------
    FormatError
        If the file is of none of the formats.
    """
    if is_hdf5(content):
        return Format("hdf5")
    head = bytes(content[:HEAD_BYTES])
    if not head.strip(b"\0"):
        raise FormatError("nothing but zero bytes at its beginning", _EXPORT_AGAIN)
    if _is_raw(head, suffix):
        return Format("spice_raw")
    return _text_format(head, suffix)


def _is_raw(head: bytes, suffix: str) -> bool:
    """Whether a SPICE raw header begins here, be it in wide characters."""
    plain = head.replace(b"\0", b"").lower()
    begins = plain.removeprefix(b"\xff\xfe").removeprefix(b"\xef\xbb\xbf").lstrip()
    return begins.startswith(b"title:") and (b"plotname:" in plain or suffix.lower() == ".raw")


def _text_format(head: bytes, suffix: str) -> Format:
    named = bool(_TOUCHSTONE_NAME.fullmatch(suffix))
    first = _first_line(head)
    lowered = first.lower()
    if re.match(r"\[\s*version\s*\]", lowered):
        return Format("touchstone")
    if first.startswith("#") and (named or _is_option_line(lowered)):
        return Format("touchstone")
    if not named:
        return Format("delimited")
    if not first or first.startswith("[") or _NUMBER.match(first):
        return Format("touchstone")
    told = f"named {suffix}, but begins with a heading: read as delimited text, not Touchstone"
    return Format("delimited", (told,))


def _first_line(head: bytes) -> str:
    """Return the first line that is neither blank nor a comment of Touchstone."""
    for _, line in numbered_lines(open_text(head)):
        content = line.strip()
        if content and not content.startswith("!"):
            return content
    return ""


def _is_option_line(line: str) -> bool:
    """Whether every word is one of an option line, and enough of them to be no heading."""
    words = line[1:].partition("!")[0].split()
    if "r" in words:
        words = words[: words.index("r") + 1]
    return len(words) >= 3 and set(words) <= _OPTION_WORDS
