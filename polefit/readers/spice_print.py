"""Tables that a circuit simulator prints to its log: paginated, complex numbers as "re, im".

Each table has a heading "Index frequency …", repeated on every page; wide prints come as one
table per vector. Text between the tables is the rest of the log.
"""

from __future__ import annotations

import itertools
import re
from collections.abc import Sequence
from dataclasses import dataclass, field, replace

import numpy as np

from polefit.errors import FormatError
from polefit.readers.delimited_headings import Heading, parse_heading
from polefit.readers.delimited_layout import Layout, resolve
from polefit.readers.delimited_table import Table, as_floats, take
from polefit.readers.reading import ReadOptions
from polefit.readers.text_blocks import Text, numbered_lines
from polefit.responses import FloatArray

_HEADING = re.compile(r"\s*Index\s+(\S.*?)\s*")
_RULE = re.compile(r"\s*-{20,}\s*")
_ROW = re.compile(r"\d+[\t ]")


@dataclass
class _Section:
    """One table, its pages joined."""

    names: tuple[str, ...]
    line: int
    rows: list[str] = field(default_factory=list)
    lines: list[int] = field(default_factory=list)


def is_print(head: Sequence[str]) -> bool:
    """Whether the first lines of a file hold the heading of a printed table."""
    return any(
        _HEADING.fullmatch(line) and _RULE.fullmatch(below)
        for line, below in itertools.pairwise(head)
    )


def load_print(text: Text, options: ReadOptions) -> tuple[Table, Layout]:
    """Read all tables of a log and join those with the same frequencies.

    Parameters
    ----------
    text : Text
        The log.
    options : ReadOptions
        As for any text table.

    Returns
    -------
    Table, Layout

    Raises
    ------
    FormatError
        If rows are missing or damaged, or the tables have different frequencies.
    AmbiguousFileError
        If the columns could be several things.
    """
    sections = _sections(text)
    columns: list[tuple[Heading, int]] = []
    tables: list[FloatArray] = []
    tokens: list[list[str]] = []
    for section in sections:
        kinds, numbers = _section_numbers(section)
        if tables and not np.array_equal(numbers[:, 0], tables[0][:, 0]):
            raise FormatError(
                "a second table with other frequencies",
                "keep the tables of one analysis only",
                line=section.line,
            )
        behind = 1 if tables else 0
        columns += list(zip(_headings(section), kinds, strict=True))[behind:]
        tables.append(numbers[:, behind:])
        tokens.append(_tokens(section, behind))
    headings, kinds_all, kept = _without_repeats(columns, np.hstack(tables))
    layout = resolve(kinds_all, headings, [], options, simulator=True)
    lines = sections[0].lines
    frequency, parts = take(kept, layout, lambda row: lines[row])
    printed = [t for group in tokens for t in group]
    rows = sections[0].rows
    axis = [row.split(None, 2)[1] for row in rows[:: max(1, len(rows) // 200)]]
    return Table(frequency, parts, lambda row: lines[row], printed, printed, axis), layout


def _sections(text: Text) -> list[_Section]:
    found: list[_Section] = []
    for number, line in numbered_lines(text):
        line = line.replace("\f", " ")
        heading = _HEADING.fullmatch(line)
        if heading:
            names = tuple(heading[1].split())
            if not found or found[-1].names != names:
                found.append(_Section(names, number))
        elif found and _ROW.match(line):
            if line.split(None, 1)[0] == "0" and found[-1].rows:
                found.append(_Section(found[-1].names, number))
            found[-1].rows.append(line)
            found[-1].lines.append(number)
    return [s for s in found if s.rows] or _none(found)


def _none(found: list[_Section]) -> list[_Section]:
    raise FormatError(
        "a printed table without rows",
        "print the vectors again",
        line=found[0].line if found else None,
    )


def _section_numbers(section: _Section) -> tuple[list[int], FloatArray]:
    """Numbers of one table without its index column, and how many each field has."""
    if section.names[0].lower() != "frequency":
        raise FormatError(
            f"a printed table over {section.names[0]!r}, not over frequency",
            "print the vectors of an AC analysis",
            line=section.line,
        )
    kinds = [2 if f.endswith(",") else 1 for f in _fields(section.rows[0])[1:]]
    if len(kinds) != len(section.names):
        raise FormatError(
            f"{len(kinds)} columns under {len(section.names)} names",
            "print fewer vectors at a time",
            line=section.line,
        )
    width = 1 + sum(kinds)
    numbers = as_floats([row.replace(",", " ") for row in section.rows])
    if numbers is None or numbers.shape[1] != width:
        raise _damaged(section, width)
    counts = numbers[:, 0] != np.arange(len(numbers))
    if counts.any():
        row = int(np.flatnonzero(counts)[0])
        raise FormatError(
            f"row {row} of the table is missing or damaged",
            "print the vectors again",
            line=section.lines[row],
        )
    return kinds, numbers[:, 1:]


def _fields(row: str) -> list[str]:
    """Split a row into fields, the two parts of a complex number together as "re,"."""
    joined = re.sub(r",\s+\S+", ",", row)
    return joined.split()


def _damaged(section: _Section, width: int) -> FormatError:
    for row, line in zip(section.rows, section.lines, strict=True):
        numbers = as_floats([row.replace(",", " ")])
        if numbers is None or numbers.shape[1] != width:
            return FormatError(
                f"a damaged row: {row.strip()[:60]!r}", "print the vectors again", line=line
            )
    return FormatError("damaged rows", "print the vectors again", line=section.line)


def _headings(section: _Section) -> list[Heading]:
    """Read the names; a bare name is a node voltage."""
    found = [parse_heading(name) for name in section.names]
    return [
        replace(h, kind="voltage") if h.output and not (h.kind or h.role == "frequency") else h
        for h in found
    ]


def _tokens(section: _Section, behind: int) -> list[str]:
    """Sample of the printed numbers, without index and frequency."""
    rows = section.rows[:: max(1, len(section.rows) // 50)]
    return [t for row in rows for t in row.replace(",", " ").split()[2:]]


def _without_repeats(
    columns: list[tuple[Heading, int]], numbers: FloatArray
) -> tuple[list[Heading], list[int], FloatArray]:
    """Drop a vector that was printed again under the same or a shorter name."""
    seen: dict[tuple[str, str, str], FloatArray] = {}
    headings: list[Heading] = []
    kinds: list[int] = []
    keep: list[int] = []
    start = 0
    for heading, count in columns:
        places = list(range(start, start + count))
        start += count
        key = (heading.output, heading.kind, heading.role)
        if key in seen and np.array_equal(seen[key], numbers[:, places]):
            continue
        seen[key] = numbers[:, places]
        headings.append(heading)
        kinds.append(count)
        keep += places
    return headings, kinds, numbers[:, keep]
