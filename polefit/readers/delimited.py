"""Delimited text: columns of numbers, with or without headings.

Every reading of the first lines that makes a table is tried; the one that leads to complex
responses is taken, and where several do, the file is refused with the option that settles it.
"""

from __future__ import annotations

import itertools
import re
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from polefit.errors import AmbiguousFileError, ArgumentError, FormatError
from polefit.readers.delimited_channels import meaning
from polefit.readers.delimited_dialect import BLANKS, Dialect, Draft, drafts, is_comment
from polefit.readers.delimited_headings import Heading, parse_headings
from polefit.readers.delimited_layout import Form, Layout, Trace, resolve
from polefit.readers.delimited_table import (
    Table,
    complex_values,
    frequency_axis,
    load,
    precision,
)
from polefit.readers.driven import Responses
from polefit.readers.large_files import Content
from polefit.readers.printed_frequency import frequency_precision
from polefit.readers.reading import Parsed, ReadOptions, unit_name
from polefit.readers.spice_print import is_print, load_print
from polefit.readers.text_blocks import Text, open_text
from polefit.responses import ComplexArray, ResponseSet

_HEAD_LINES = 1500
_USED = ("driven", "node", "decimal", "delimiter", "frequency_unit", "form", "angle_unit")
_UNIT_WORDS = re.compile(r"[\[(]\S*[\])]|/")
# One sign or blank, then %.ne, then a blank, to the end of the line: a simulator's wrdata.
_WRDATA = re.compile(r"(?:[ -]\d\.\d+e[+-]\d\d\d? )+[ \t]*")


@dataclass(frozen=True)
class _Written:
    """Who wrote the file, and with which decimal mark."""

    format: str
    decimal: str
    simulator: bool


def parse(content: Content, options: ReadOptions, *, stem: str) -> Parsed:
    """Read a delimited text file.

    Parameters
    ----------
    content : bytes-like
        The whole file.
    options : ReadOptions
        Whatever the file leaves open.
    stem : str
        Stem of the file name; names the node of a file with one response.

    Returns
    -------
    Parsed

    Raises
    ------
    FormatError
        If the file is no table of complex responses over frequency.
    AmbiguousFileError
        If it can be read in several ways; the remedy names the option.
    ArgumentError
        If an option does not fit the file.
    """
    options.refuse_unused((*_USED, "reference_ohm"), "delimited text")
    _check_options(options)
    text = open_text(content)
    head = _head(text)
    if is_print(head):
        table, layout = load_print(text, options)
        printed = _Written("simulator print table", ".", True)
        return _parsed(table, layout, options, stem, printed)
    draft, headings, simulator = _chosen(text, head, options)
    dialect = draft.dialect
    layout = _layout(draft, headings, options, simulator)
    table = load(text, dialect, layout, draft.first_line)
    name = "simulator data columns" if simulator else "delimited text"
    written = _Written(name, dialect.decimal, simulator)
    notes = [f"read as {dialect}"]
    if text.wide:
        notes.append("characters of 16 bits (UTF-16)")
    return _parsed(table, layout, options, stem, written, tuple(notes))


def _check_options(options: ReadOptions) -> None:
    for name, allowed in (
        ("decimal", (".", ",")),
        ("form", ("real-imaginary", "magnitude-angle", "decibel-angle")),
        ("angle_unit", ("deg", "rad")),
    ):
        value = getattr(options, name)
        if value is not None and value not in allowed:
            raise ArgumentError(f"{name}: {value!r} is not known; use one of {', '.join(allowed)}")


def _head(text: Text) -> list[str]:
    """Collect the first lines of a file."""
    lines: list[str] = []
    for block in text.blocks(1 << 16):
        lines += block.removesuffix("\n").split("\n")
        if len(lines) > _HEAD_LINES:
            break
    return lines[:_HEAD_LINES]


def _chosen(
    text: Text, head: Sequence[str], options: ReadOptions
) -> tuple[Draft, tuple[Heading, ...] | None, bool]:
    """Choose the only reading that leads to responses.

    Raises
    ------
    AmbiguousFileError
        If several do.
    FormatError
        If none does: the reason against the first.
    """
    possible: list[tuple[Draft, tuple[Heading, ...] | None, bool]] = []
    refused: list[tuple[bool, FormatError]] = []
    for draft in drafts(head, options):
        simulator = _is_wrdata(head, draft)
        try:
            _refuse_damaged_rows(head, draft)
            headings = _headings(text, head, draft)
            _layout(draft, headings, options, simulator)
        except FormatError as error:
            # Commas that pair numbers are the least likely reading of them.
            refused.append((draft.dialect.complex_style == "comma", error))
            continue
        except (AmbiguousFileError, ArgumentError):
            headings = _headings(text, head, draft)
        possible.append((draft, headings, simulator))
    if not possible:
        raise min(refused, key=lambda reason: reason[0])[1]
    if len(possible) > 1:
        readings = " or ".join(f"({d.dialect})" for d, _, _ in possible[:3])
        differing = "decimal= (--decimal)"
        if len({d.dialect.delimiter for d, _, _ in possible}) > 1:
            differing = "delimiter= (--delimiter) and " + differing
        raise AmbiguousFileError(
            f"the rows may be read in {len(possible)} ways: {readings}",
            f"say {differing}",
            line=possible[0][0].first_line + 1,
        )
    return possible[0]


def _layout(
    draft: Draft, headings: tuple[Heading, ...] | None, options: ReadOptions, simulator: bool
) -> Layout:
    told: dict[str, Form] = {
        "unit": "real-imaginary",
        "decibels": "decibel-angle",
        "slash": "magnitude-angle",
    }
    return resolve(
        draft.kinds,
        headings,
        draft.rows,
        options,
        simulator=simulator,
        pairs=told.get(draft.dialect.complex_style),
    )


def _is_wrdata(head: Sequence[str], draft: Draft) -> bool:
    rows = head[draft.first_line : draft.first_line + 20]
    return all(_WRDATA.fullmatch(row) for row in rows if row.strip())


def _refuse_damaged_rows(head: Sequence[str], draft: Draft) -> None:
    """Refuse a line above the table that looks like a row: it would be lost as a heading."""
    for number, line in enumerate(head[: draft.first_line]):
        if is_comment(line) or not line.strip():
            continue
        parts = draft.dialect.fields(draft.dialect.plain(line))
        numeric = [_is_number(p) for p in parts]
        if len(parts) > 1 and numeric[0] and 2 * sum(numeric) >= len(parts):
            raise FormatError(
                f"text where numbers should be: {line.strip()[:60]!r}",
                "mend that row, or mark it with # if it is no row of the table",
                line=number + 1,
            )
        if len(parts) == len(draft.kinds) and numeric[0]:
            raise FormatError(
                f"a row without all its numbers: {line.strip()[:60]!r}",
                "mend that row, or mark it with # if it is no row of the table",
                line=number + 1,
            )


def _is_number(token: str) -> bool:
    return re.fullmatch(r"[+-]?(\d+[.,]?\d*|[.,]\d+)([eE][+-]?\d+)?", token) is not None


def _headings(text: Text, head: Sequence[str], draft: Draft) -> tuple[Heading, ...] | None:
    """Find the headings of the columns in the lines just above the table."""
    above = [text.decoded(line) for line in head[: draft.first_line] if line.strip()]
    candidates = [_heading_fields(line, draft) for line in above[-3:]]
    # A comment without headings, or a rule, may follow the line that has them.
    while candidates and candidates[-1] is None and _apart(above[-1]):
        candidates.pop()
        above.pop()
    if not candidates or candidates[-1] is None:
        return None
    lowest = candidates[-1]
    below = parse_headings(lowest)
    if len(candidates) > 1 and (upper := candidates[-2]) is not None and not _named(below):
        filled: list[str] = list(itertools.accumulate(upper, _or_before))
        return parse_headings(
            [
                f"{name} {_bracketed(unit)}".strip()
                for name, unit in zip(filled, lowest, strict=True)
            ]
        )
    return below


def _apart(line: str) -> bool:
    """Whether a line between headings and rows belongs to neither."""
    return is_comment(line) or _is_rule(line)


def _is_rule(line: str) -> bool:
    """Whether a line is drawn with dashes."""
    return not line.strip(" \t-=_+|#")


def _or_before(before: str, name: str) -> str:
    return name or before


def _named(headings: Sequence[Heading]) -> bool:
    """Whether a line of headings is more than units or parts under the names above."""
    return any(
        h.output not in ("", "S", "V", "A") or (h.role == "frequency" and len(h.text) > 4)
        for h in headings
    )


def _bracketed(unit: str) -> str:
    return unit if not unit or _UNIT_WORDS.search(unit) else f"({unit})"


def _heading_fields(line: str, draft: Draft) -> list[str] | None:
    """Split a line of headings like the rows; None if it does not fit them."""
    if _is_rule(line):
        return None
    bare = re.sub(r"^\s*(?:[#!%;*]+|//)", "", line) if is_comment(line) else line
    count = len(draft.kinds)
    for parts in _splits(bare, draft.dialect):
        fields = [p.strip().strip('"').strip() for p in parts]
        if len(fields) == count + 1 and not fields[-1]:
            fields.pop()
        if len(fields) == count and not all(_is_number(f) for f in fields if f) and any(fields):
            return fields
    return None


def _splits(line: str, dialect: Dialect) -> list[list[str]]:
    """All ways in which a line of headings may be split, the likeliest first."""
    if dialect.delimiter != BLANKS:
        outside = rf'{re.escape(dialect.delimiter)}(?=(?:[^"]*"[^"]*")*[^"]*$)(?![^()]*\))'
        return [re.split(outside, line), line.split(dialect.delimiter)]
    joined = re.sub(r"\s+(?=[\[(]\S*[\])])", "\x00", line.strip())
    return [
        line.split(),
        [p.replace("\x00", " ") for p in joined.split()],
        re.split(r"\s{2,}|\t", line.strip()),
        re.split(r"[,;\t]\s*", line.strip()),
    ]


def _parsed(
    table: Table,
    layout: Layout,
    options: ReadOptions,
    stem: str,
    written: _Written,
    notes: tuple[str, ...] = (),
) -> Parsed:
    """Turn the numbers into responses."""
    what = meaning([t.label for t in layout.traces], options, stem)
    frequency, hertz = frequency_axis(table, layout.frequency_scale)
    traces, degrees = complex_values(table, layout.traces)
    printed = precision(table, traces, simulator=written.simulator)
    values = _as_responses(table, what.responses)
    responses = ResponseSet(
        frequency_hz=frequency,
        values=values,
        channels=what.responses.channels,
        quantity=what.responses.quantity,
        reference_ohm=what.reference_ohm,
        precision=printed,
        frequency_precision=frequency_precision(table.axis, frequency, layout.frequency_scale),
    )
    assumptions = (
        *notes,
        *layout.assumptions,
        *hertz,
        *degrees,
        *what.responses.assumptions,
    )
    return Parsed(
        responses,
        written.format,
        assumptions,
        (*layout.warnings, *what.warnings),
        decimal_mark=written.decimal,
        scaling=_scaling(traces, responses.unit),
        frequency_unit=unit_name(layout.frequency_scale),
    )


def _scaling(traces: Sequence[Trace], unit: str) -> str | None:
    """Tell which prefix the printed numbers carried."""
    scales = sorted({t.scale for t in traces} - {1.0})
    if not scales:
        return None
    return ", ".join(
        f"printed numbers × {scale:g}{f' = {unit}' if unit else ''}" for scale in scales
    )


def _as_responses(table: Table, how: Responses) -> ComplexArray:
    """Pick the wanted columns, with sign and divisor."""
    values = table.parts
    if how.driven_by_current is not None:
        how.refuse_driven_by_voltage(values[:, how.driven_by_current])
    if how.columns != tuple(range(values.shape[1])):
        divisor = None if how.divide_by is None else values[:, how.divide_by].copy()
        values = values[:, list(how.columns)]
    else:
        divisor = None if how.divide_by is None else values[:, how.divide_by]
    if divisor is not None:
        values = _divided(values, divisor, table)
    return np.negative(values, out=values) if how.sign < 0 else values


def _divided(values: ComplexArray, divisor: ComplexArray, table: Table) -> ComplexArray:
    with np.errstate(all="ignore"):
        ratio: ComplexArray = values / divisor[:, np.newaxis]
    bad = ~np.isfinite(ratio).all(axis=1)
    if bad.any():
        raise FormatError(
            "the voltage of the driven node is zero or too small to divide by",
            "name another node with driven= (--driven)",
            line=table.line_of(int(np.flatnonzero(bad)[0])),
        )
    return ratio
