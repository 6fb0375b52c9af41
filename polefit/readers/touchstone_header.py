"""What a Touchstone file states above its numbers: option line, keywords, port names."""

from __future__ import annotations

import math
import re
from collections.abc import Iterable, Iterator
from dataclasses import dataclass, replace
from typing import Literal

from polefit.errors import FormatError

_UNITS = {"hz": 1.0, "khz": 1e3, "mhz": 1e6, "ghz": 1e9}
_FORMS = ("ma", "db", "ri")
_PORT_NAME = re.compile(r"!\s*port\s*[\[(]?\s*(\d{1,6})\s*[\])]?\s*[=:]\s*(\S.*)", re.IGNORECASE)
PORT_IMPEDANCE = re.compile(r"!\s*port\s+impedance\b([^\n]*)", re.IGNORECASE)
_KEYWORD = re.compile(r"\[\s*([^\]]*?)\s*\](.*)")
_KNOWN = {
    "version",
    "number of ports",
    "two-port data order",
    "number of frequencies",
    "number of noise frequencies",
    "reference",
    "matrix format",
    "mixed-mode order",
    "begin information",
    "end information",
    "network data",
}
_EXAMPLE = "write one such as '# GHz S MA R 50'"

Parameter = Literal["S", "Y", "Z", "H", "G"]


@dataclass(frozen=True)
class OptionLine:
    """The line that begins with ``#``.

    Parameters
    ----------
    line : int
        Its line number.
    unit_hz : float
        Frequency unit in hertz.
    parameter : {"S", "Y", "Z", "H", "G"}
        What the numbers are.
    form : {"ma", "db", "ri"}
        Magnitude and angle, decibel and angle, or real and imaginary.
    references : tuple of float
        One reference resistance in ohm, or in version 1.1 one for each port.
    """

    line: int
    unit_hz: float = 1e9
    parameter: Parameter = "S"
    form: str = "ma"
    references: tuple[float, ...] = (50.0,)


@dataclass(frozen=True)
class Keyword:
    """A keyword of version 2 with its arguments.

    Parameters
    ----------
    name : str
        In small letters, without brackets.
    arguments : tuple of str
        Words behind it, those on continued lines included.
    line : int
        Its line number.
    """

    name: str
    arguments: tuple[str, ...]
    line: int


@dataclass(frozen=True)
class Header:
    """Everything above the numbers.

    Parameters
    ----------
    version : str
        "1" where no ``[Version]`` is given, else "2.0" or "2.1".
    option : OptionLine
        The option line.
    keywords : dict
        Keywords of version 2 by name.
    first_line : int
        Line at which the numbers begin.
    port_names : dict
        Names that comments give to ports, by number from 1.
    reference_comments : tuple of (int, str)
        Comments that state port impedances, by line, with what they say.
    """

    version: str
    option: OptionLine
    keywords: dict[str, Keyword]
    first_line: int
    port_names: dict[int, str]
    reference_comments: tuple[tuple[int, str], ...]


def read_header(lines: Iterable[tuple[int, str]]) -> Header:
    """Read up to the first number.

    Parameters
    ----------
    lines : iterable of (int, str)
        Lines with their numbers.

    Returns
    -------
    Header

    Raises
    ------
    FormatError
        If the header breaks the rules or no number follows.
    """
    option: OptionLine | None = None
    keywords: dict[str, Keyword] = {}
    names: dict[int, str] = {}
    comments: dict[str, int] = {}
    number = 1
    last: str | None = None
    rows = _outside_information(iter(lines))
    for number, row in rows:
        if found := _PORT_NAME.match(row.strip()):
            names.setdefault(int(found[1]), found[2].strip())
        if found := PORT_IMPEDANCE.match(row.strip()):
            comments.setdefault(found[1], number)
        content = row.partition("!")[0].strip()
        if not content:
            continue
        if content.startswith("#"):
            option = option or parse_option_line(content, number)
        elif content.startswith("["):
            keyword = _keyword(content, number, keywords, option is not None)
            keywords[keyword.name] = keyword
            last = keyword.name
            if keyword.name == "network data":
                number += 1
                break
        elif last == "reference":
            held = keywords["reference"]
            words = (*held.arguments, *content.split())
            keywords["reference"] = replace(held, arguments=words)
        else:
            break
    else:
        raise FormatError("no data below the header", "export the file again", line=number)
    if option is None:
        what = "no option line above the data"
        raise FormatError(what, f"{_EXAMPLE} as the exporter meant it", line=number)
    if keywords and "network data" not in keywords:
        remedy = "put [Network Data] above the numbers"
        raise FormatError("numbers outside [Network Data]", remedy, line=number)
    version = keywords["version"].arguments[0] if keywords else "1"
    told = tuple((line, text) for text, line in comments.items())
    return Header(version, option, keywords, number, names, told)


def parse_option_line(content: str, line: int) -> OptionLine:
    """Read an option line; its fields may stand in any order.

    Parameters
    ----------
    content : str
        The line without comment, ``#`` first.
    line : int
        Its number, for errors.

    Returns
    -------
    OptionLine

    Raises
    ------
    FormatError
        If a field is unknown, repeated or lacks its number.
    """
    words = content.lower()[1:].split()
    option = OptionLine(line)
    seen: set[str] = set()
    at = 0
    while at < len(words):
        word = words[at]
        at += 1
        if word in _UNITS:
            kind, option = "frequency unit", replace(option, unit_hz=_UNITS[word])
        elif word in ("s", "y", "z", "h", "g"):
            parameter: Parameter = word.upper()  # type: ignore[assignment]
            kind, option = "parameter", replace(option, parameter=parameter)
        elif word in _FORMS:
            kind, option = "form", replace(option, form=word)
        elif word == "r":
            end = at
            while end < len(words) and not _is_field(words[end]):
                end += 1
            listed = resistances(words[at:end], line)
            kind, option = "reference", replace(option, references=listed)
            at = end
        else:
            known = "Hz kHz MHz GHz, S Y Z H G, DB MA RI, R with ohms"
            what = f"option line: {word!r} is not one of its fields"
            raise FormatError(what, f"use {known}; rename the file if no Touchstone", line=line)
        if kind in seen:
            raise FormatError(f"option line: more than one {kind}", "leave one", line=line)
        seen.add(kind)
    return option


def resistances(words: Iterable[str], line: int) -> tuple[float, ...]:
    """Read reference resistances.

    Parameters
    ----------
    words : iterable of str
        As printed.
    line : int
        Line number, for errors.

    Returns
    -------
    tuple of float
        At least one, in ohm.

    Raises
    ------
    FormatError
        If one is missing, complex or not positive.
    """
    listed = []
    for word in words:
        try:
            value = float(word) if word.isascii() and "_" not in word else math.nan
        except ValueError:
            if re.search(r"[ij(,]", word):
                what = f"complex reference impedance {word!r}"
                remedy = "export with real reference resistances, as the standard demands"
                raise FormatError(what, remedy, line=line) from None
            value = math.nan
        if not 0 < value < math.inf:
            what = f"reference resistance {word!r} is not a positive number"
            raise FormatError(what, "give ohms", line=line)
        listed.append(value)
    if not listed:
        raise FormatError("no reference resistance", "give ohms", line=line)
    return tuple(listed)


def _is_field(word: str) -> bool:
    return word in _UNITS or word in _FORMS or word in ("s", "y", "z", "h", "g", "r")


def _outside_information(lines: Iterator[tuple[int, str]]) -> Iterator[tuple[int, str]]:
    """Leave out what stands between [Begin Information] and [End Information]."""
    begin = 0
    for number, row in lines:
        content = row.strip().lower()
        if begin:
            if content.startswith("[end information]"):
                begin = 0
        elif content.startswith("[begin information]"):
            begin = number
        else:
            yield number, row
    if begin:
        remedy = "add it, or export the file again"
        raise FormatError("[Begin Information] without [End Information]", remedy, line=begin)


def _keyword(content: str, line: int, held: dict[str, Keyword], option: bool) -> Keyword:
    found = _KEYWORD.fullmatch(content)
    name = " ".join(found[1].lower().split()) if found else ""
    if found is None or name not in _KNOWN:
        remedy = "check its spelling against the Touchstone standard"
        raise FormatError(f"{content!r} is not a keyword that may stand here", remedy, line=line)
    if name in held:
        raise FormatError(f"[{found[1]}] stands twice", "leave one", line=line)
    words = tuple(found[2].split())
    if name == "version":
        if words not in (("2.0",), ("2.1",)):
            what = f"version {' '.join(words)!r} is not known"
            raise FormatError(what, "2.0 and 2.1 are read; older files state no version", line=line)
        if held or option:
            raise FormatError("[Version] is not the first line", "put it first", line=line)
    elif "version" not in held:
        what = f"[{found[1]}] without [Version] above it"
        raise FormatError(what, "begin the file with '[Version] 2.0'", line=line)
    elif not option:
        what = f"[{found[1]}] above the option line"
        raise FormatError(what, "put the option line below [Version]", line=line)
    return Keyword(name, words, line)
