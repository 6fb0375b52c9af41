"""How the numbers of a Touchstone file make matrices: versions 1.x by lines, 2.x by counts."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from polefit.errors import FormatError
from polefit.readers.touchstone_header import Header, Keyword, resistances
from polefit.readers.touchstone_numbers import Section
from polefit.responses import FloatArray

_NOISE_COLUMNS = 5
_CUT = "the file may be cut; export it again"


@dataclass(frozen=True, eq=False)
class Layout:
    """One row of printed numbers for each frequency, and what they are.

    Parameters
    ----------
    section : Section
        Where the numbers came from.
    ports : int
        Number of ports n.
    table : (N, 1 + 2 m) float ndarray
        Frequency and m pairs, as printed.
    pairs : tuple of int
        For each of the n² matrix elements, row by row, the pair that holds it.
    references : tuple of float
        Reference resistance of each port in ohm.
    port_order : tuple of int
        Port number of each row and column, from 1.
    noise_points : int
        Lines of noise parameters, which are not used.
    warnings : tuple of str
        What is unusual about the layout.
    """

    section: Section
    ports: int
    table: FloatArray
    pairs: tuple[int, ...]
    references: tuple[float, ...]
    port_order: tuple[int, ...]
    noise_points: int = 0
    warnings: tuple[str, ...] = ()

    def line_of(self, row: int) -> int:
        """Return the line number at which row `row` begins."""
        return self.section.line_of(row * self.table.shape[1])


def full_pairs(ports: int, *, order_21_12: bool = False) -> tuple[int, ...]:
    """Pair of each element of a full matrix, row by row."""
    if ports == 2 and order_21_12:
        return (0, 2, 1, 3)
    return tuple(range(ports * ports))


def triangle_pairs(ports: int, *, lower: bool) -> tuple[int, ...]:
    """Pair of each element, row by row, where only one triangle of a symmetric matrix is given.

    Parameters
    ----------
    ports : int
        Number of ports.
    lower : bool
        Lower triangle, row by row, or upper one, row by row.

    Returns
    -------
    tuple of int
    """
    rows, columns = np.tril_indices(ports) if lower else np.triu_indices(ports)
    pair = np.empty((ports, ports), dtype=np.int64)
    pair[rows, columns] = pair[columns, rows] = np.arange(rows.size)
    return tuple(int(i) for i in pair.ravel())


def layout_v1(sections: Sequence[Section], header: Header, ports: int | None) -> Layout:
    """Lay out a file of version 1.0 or 1.1.

    A line with an odd count of numbers begins a frequency, one with an even count continues it.

    Parameters
    ----------
    sections : sequence of Section
        One section; keywords are not allowed.
    header : Header
        For the references.
    ports : int or None
        Number of ports by the file name; None to tell it from the layout.

    Returns
    -------
    Layout

    Raises
    ------
    FormatError
        If the layout is none of Touchstone, or contradicts the file name.
    """
    section = sections[0]
    if len(sections) > 1:
        what = f"{sections[1].keyword!r} in a file without [Version]"
        remedy = "begin the file with '[Version] 2.0', or remove the keyword"
        raise FormatError(what, remedy, line=sections[1].line)
    begins = np.flatnonzero(section.counts % 2 == 1)
    if not begins.size or begins[0] != 0:
        what = f"{section.counts[0]} numbers, where a frequency and pairs begin a point"
        raise FormatError(what, "check this line", line=int(section.lines[0]))
    totals = np.add.reduceat(section.counts, begins)
    starts = np.concatenate(([0], np.cumsum(totals)[:-1]))
    frequency = section.numbers[starts]
    lines = section.lines[begins]
    ports = _ports_v1(int(totals[0]), int(lines[0]), ports)
    width = 2 * ports * ports + 1
    noise = _noise_start(totals, frequency) if ports == 2 else totals.size
    wrong = np.flatnonzero(totals[:noise] != width)
    if wrong.size:
        raise _wrong_point(section, begins, int(wrong[0]), ports)
    _check_noise_v1(totals[noise:], frequency[noise:], lines[noise:])
    warnings = []
    if np.any(section.counts[: begins[noise] if noise < begins.size else None] > 9):
        warnings.append("more than four pairs on a line: not as the standard asks, but clear")
    return Layout(
        section=section,
        ports=ports,
        table=section.numbers[: noise * width].reshape(noise, width),
        pairs=full_pairs(ports, order_21_12=True),
        references=_per_port(header.option.references, ports, header.option.line),
        port_order=tuple(range(1, ports + 1)),
        noise_points=int(totals.size - noise),
        warnings=tuple(warnings),
    )


def layout_v2(sections: Sequence[Section], header: Header, ports: int | None) -> Layout:
    """Lay out a file of version 2.0 or 2.1: the numbers are counted, line breaks do not matter.

    Parameters
    ----------
    sections : sequence of Section
        Network data, perhaps noise data, and what follows [End].
    header : Header
        Keywords and references.
    ports : int or None
        Number of ports by the file name, if it tells.

    Returns
    -------
    Layout

    Raises
    ------
    FormatError
        If a keyword is missing, has the wrong argument, or the counts do not fit.
    """
    count = _number(header, "Number of Ports")
    if ports not in (None, count):
        line = header.keywords["number of ports"].line
        what = f"[Number of Ports] is {count}, the file name says {ports}"
        raise FormatError(what, "rename the file, or mend the keyword", line=line)
    points = _number(header, "Number of Frequencies")
    pairs, width = _matrix_v2(header, count)
    section = sections[0]
    noise_points = _check_ending(sections, header, count)
    _check_total(section, points, width)
    return Layout(
        section=section,
        ports=count,
        table=section.numbers.reshape(points, width),
        pairs=pairs,
        references=_references_v2(header, count),
        port_order=_port_order(header, count),
        noise_points=noise_points,
    )


def _ports_v1(total: int, line: int, ports: int | None) -> int:
    told = math.isqrt((total - 1) // 2)
    fits = total > 1 and 2 * told * told + 1 == total
    if ports is None:
        if not fits:
            what = f"{total} numbers for one frequency fit no number of ports"
            raise FormatError(what, "check this line; n ports take 2 n² + 1 numbers", line=line)
        return told
    if fits and told != ports:
        raise _wrong_count(total, line, ports, told)
    return ports


def _wrong_point(section: Section, begins: np.ndarray, row: int, ports: int) -> FormatError:
    """Tell which line makes point `row` too long, or that the point is too short."""
    needed = 2 * ports * ports + 1
    counts = np.split(section.counts, begins[1:])[row]
    lines = section.lines[begins[row] :]
    within = np.cumsum(counts)
    spare = int(np.argmax(within > needed))
    if within[-1] > needed and spare > 0 and within[spare - 1] == needed:
        what = f"{counts[spare]} numbers behind a whole point, where the next should begin"
        return FormatError(what, _CUT, line=int(lines[spare]))
    return _wrong_count(int(within[-1]), int(lines[0]), ports)


def _wrong_count(total: int, line: int, ports: int, told: int | None = None) -> FormatError:
    needed = 2 * ports * ports + 1
    what = f"{total} numbers for one frequency, {ports} port{'s' * (ports > 1)} take {needed}"
    remedy = "mend or remove this point"
    if told is not None:
        remedy = f"this is the layout of {told} port{'s' * (told > 1)}: rename the file if so"
    return FormatError(what, remedy, line=line)


def _noise_start(totals: np.ndarray, frequency: FloatArray) -> int:
    """Index of the first noise line: five numbers, at or below the last network frequency."""
    back = np.flatnonzero(
        (frequency[1:] <= frequency[:-1]) & (totals[1:] == _NOISE_COLUMNS) & (totals[:-1] == 9)
    )
    return int(back[0]) + 1 if back.size else int(totals.size)


def _check_noise_v1(totals: np.ndarray, frequency: FloatArray, lines: np.ndarray) -> None:
    wrong = np.flatnonzero(totals != _NOISE_COLUMNS)
    if wrong.size:
        what = f"{totals[wrong[0]]} numbers among the noise parameters, which take 5"
        raise FormatError(what, "mend or remove this line", line=int(lines[wrong[0]]))
    back = np.flatnonzero(np.diff(frequency) <= 0)
    if back.size:
        what = f"noise frequency {frequency[back[0] + 1]:g} does not rise"
        raise FormatError(what, "sort the noise parameters", line=int(lines[back[0] + 1]))


def _per_port(references: tuple[float, ...], ports: int, line: int) -> tuple[float, ...]:
    if len(references) not in (1, ports):
        what = f"{len(references)} reference resistances for {ports} ports"
        raise FormatError(what, "give one, or one for each port", line=line)
    return references * ports if len(references) == 1 else references


def _need(header: Header, name: str) -> Keyword:
    keyword = header.keywords.get(name.lower())
    if keyword is None:
        line = header.keywords["network data"].line
        raise FormatError(f"no [{name}] above [Network Data]", "add it", line=line)
    return keyword


def _number(header: Header, name: str) -> int:
    keyword = _need(header, name)
    words = keyword.arguments
    if len(words) != 1 or not (words[0].isascii() and words[0].isdigit() and len(words[0]) < 10):
        what = f"[{name}] {' '.join(words)!r} is not a count"
        raise FormatError(what, "give a whole number", line=keyword.line)
    if int(words[0]) < 1:
        raise FormatError(f"[{name}] is zero", "nothing to read", line=keyword.line)
    return int(words[0])


def _one_of(header: Header, name: str, allowed: tuple[str, ...], default: str | None) -> str:
    if default is not None and name.lower() not in header.keywords:
        return default
    keyword = _need(header, name)
    word = " ".join(keyword.arguments).lower()
    if word not in allowed:
        what = f"[{name}] {word!r} is not known"
        raise FormatError(what, f"use {' or '.join(allowed)}", line=keyword.line)
    return word


def _matrix_v2(header: Header, ports: int) -> tuple[tuple[int, ...], int]:
    """Pairs of the elements, and numbers for each frequency."""
    shape = _one_of(header, "Matrix Format", ("full", "lower", "upper"), "full")
    order = _one_of(
        header, "Two-Port Data Order", ("12_21", "21_12"), None if ports == 2 else "12_21"
    )
    if "two-port data order" in header.keywords and ports != 2:
        line = header.keywords["two-port data order"].line
        what = f"[Two-Port Data Order] in a file of {ports} port{'s' * (ports > 1)}"
        raise FormatError(what, "remove it", line=line)
    width = 2 * ports * ports + 1 if shape == "full" else ports * ports + ports + 1
    if ports > 1000:  # the pairs below take memory before the count of numbers is checked
        line = header.keywords["number of ports"].line
        raise FormatError(f"{ports} ports", "at most 1000 are read", line=line)
    if shape == "full":
        return full_pairs(ports, order_21_12=order == "21_12"), width
    return triangle_pairs(ports, lower=shape == "lower"), width


def _references_v2(header: Header, ports: int) -> tuple[float, ...]:
    keyword = header.keywords.get("reference")
    if keyword is None:
        if len(header.option.references) != 1:
            what = "several reference resistances in the option line of a version 2 file"
            raise FormatError(what, "put them into [Reference]", line=header.option.line)
        return header.option.references * ports
    listed = resistances(keyword.arguments, keyword.line)
    if len(listed) != ports:
        what = f"[Reference] gives {len(listed)} resistances for {ports} ports"
        raise FormatError(what, "give one for each port", line=keyword.line)
    return listed


def _port_order(header: Header, ports: int) -> tuple[int, ...]:
    keyword = header.keywords.get("mixed-mode order")
    if keyword is None:
        return tuple(range(1, ports + 1))
    words = [word.lower() for word in keyword.arguments]
    order = tuple(int(w[1:]) for w in words if w[:1] == "s" and w[1:].isdecimal() and len(w) < 8)
    if len(order) != len(words):
        what = "mixed-mode data (differential and common modes)"
        remedy = "export single-ended parameters, one for each port"
        raise FormatError(what, remedy, line=keyword.line)
    if sorted(order) != list(range(1, ports + 1)):
        what = "[Mixed-Mode Order] does not name each port once"
        raise FormatError(what, "mend it", line=keyword.line)
    return order


def _check_ending(sections: Sequence[Section], header: Header, ports: int) -> int:
    """Check what follows the network data; return the number of noise points."""
    names = [" ".join(s.keyword.lower().split()) for s in sections[1:]]
    stated = header.keywords.get("number of noise frequencies")
    noise_points = 0
    if names[:1] == ["[noise data]"]:
        noise_points = _check_noise_v2(sections[1], header, ports)
        names = names[1:]
    elif stated is not None:
        remedy = "add [Noise Data], or remove the keyword"
        raise FormatError("noise frequencies without [Noise Data]", remedy, line=stated.line)
    if not names:
        raise FormatError("no [End]", _CUT, line=sections[-1].last_line)
    at = len(sections) - len(names)
    if names[0] != "[end]":
        what = f"{sections[at].keyword!r} below [Network Data]"
        raise FormatError(what, "only [Noise Data] and [End] may follow", line=sections[at].line)
    if len(names) > 1 or sections[at].numbers.size:
        line = sections[at + 1].line if len(names) > 1 else int(sections[at].lines[0])
        raise FormatError("text below [End]", "keep one data set in a file", line=line)
    return noise_points


def _check_noise_v2(section: Section, header: Header, ports: int) -> int:
    if ports != 2:
        what = f"[Noise Data] in a file of {ports} port{'s' * (ports > 1)}"
        raise FormatError(what, "only two-ports have noise parameters", line=section.line)
    points = _number(header, "Number of Noise Frequencies")
    _check_total(section, points, _NOISE_COLUMNS)
    if np.any(np.diff(section.numbers[::_NOISE_COLUMNS]) <= 0):
        what = "noise frequencies do not rise"
        raise FormatError(what, "sort the noise parameters", line=section.line)
    return points


def _check_total(section: Section, points: int, width: int) -> None:
    if section.numbers.size == points * width:
        return
    what = (
        f"{section.numbers.size} numbers, where {points} frequencies of {width} numbers "
        f"each take {points * width}"
    )
    raise FormatError(what, _CUT, line=_suspect_line(section, width))


def _suspect_line(section: Section, width: int) -> int:
    """Line at which points stop beginning with a line of their own, else the last one."""
    starts = np.concatenate(([0], np.cumsum(section.counts)))
    whole, rest = divmod(section.numbers.size, width)
    torn = np.flatnonzero(~np.isin(np.arange(whole + (rest > 0)) * width, starts))
    if torn.size:
        return section.line_of(int(torn[0]) * width - 1)
    return section.last_line
