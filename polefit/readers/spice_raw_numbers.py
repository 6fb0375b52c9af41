"""The numbers of one plot of a SPICE raw file, ASCII or binary.

Complex plots have a complex frequency column of which only the real part counts: simulators
leave its imaginary part as uninitialised memory.
"""

from __future__ import annotations

import re
from collections.abc import Callable, Iterator, Sequence
from dataclasses import dataclass
from typing import Protocol

import numpy as np

from polefit.errors import FormatError
from polefit.readers.large_files import Content, Growing, release
from polefit.readers.text_blocks import BLOCK_BYTES
from polefit.responses import ComplexArray, FloatArray

_AGAIN = "run the simulation again and save its raw file"
_HIGHEST_HZ = 1e15  # a byte order that gives more is the wrong one
_TITLE = re.compile(rb"^[ \t]*[A-Za-z][A-Za-z. ]*:", re.MULTILINE)
_SEPARATORS = bytes.maketrans(b",\t\r\n", b"    ")
_ROWS_AT_ONCE = 8192
_PAIR = re.compile(r"\s([^\s,]+),[ \t]*([^\s,]+)")
_BEGINS_POINT = re.compile(r"[ \t]*\d+[ \t]")  # its index, then the frequency


class Header(Protocol):
    """What the numbers need to know of the header."""

    @property
    def complex_numbers(self) -> bool:
        """Whether numbers are complex."""

    @property
    def names(self) -> tuple[str, ...]:
        """The vectors, the first of which is the axis."""

    @property
    def points(self) -> int:
        """Declared number of points."""

    @property
    def start(self) -> int:
        """Byte at which the numbers begin."""

    @property
    def line(self) -> int:
        """Line of the first number, for ASCII."""


@dataclass(frozen=True, eq=False)
class Numbers:
    """Numbers of one plot.

    Parameters
    ----------
    frequency : (N,) float ndarray
        Real part of the first vector.
    values : (N, K) complex ndarray
        The vectors wanted.
    columns : tuple of int
        Index of each among the vectors behind the first.
    end, end_line : int
        Byte and line behind the plot.
    place_of : callable
        Place of a row for messages: text, and line number or None.
    tokens : (list of str, list of str, list of str)
        Samples of the printed real parts, imaginary parts and frequencies; empty for binary.
    assumptions : tuple of str
        How binary numbers were read.
    """

    frequency: FloatArray
    values: ComplexArray
    columns: tuple[int, ...]
    end: int
    end_line: int
    place_of: Callable[[int], tuple[str, int | None]]
    tokens: tuple[Sequence[str], Sequence[str], Sequence[str]] = ((), (), ())
    assumptions: tuple[str, ...] = ()


def binary_numbers(content: Content, plot: Header, wanted: tuple[int, ...]) -> Numbers:
    """Read the binary numbers of a plot: 64-bit, variables fastest, complex interleaved.

    Parameters
    ----------
    content : bytes-like
        The whole file.
    plot : Header
        Header of the plot.
    wanted : tuple of int
        Vectors to keep, counted behind the first.

    Returns
    -------
    Numbers

    Raises
    ------
    FormatError
        If the file is cut, in another number format, or holds numbers that are not finite.
    """
    count = len(plot.names)
    row_bytes = count * (16 if plot.complex_numbers else 8)
    available = len(content) - plot.start
    if plot.points == 0 or available < plot.points * row_bytes:
        raise _cut_or_narrow(content, plot, row_bytes, available)
    end = plot.start + plot.points * row_bytes
    if not (plot.complex_numbers and plot.names[0].lower().startswith(("freq", "hertz"))):
        empty = np.empty((0, 0), dtype=np.complex128)
        return Numbers(np.empty(0), empty, (), end, plot.line, _nowhere)
    order, assumption = _byte_order(content, plot, count)
    view = np.frombuffer(content, f"{order}c16", plot.points * count, plot.start)
    table = view.reshape(plot.points, count)
    frequency = table[:, 0].real.astype(np.float64)
    values = np.empty((plot.points, len(wanted)), dtype=np.complex128)
    columns = [i + 1 for i in wanted]
    for start in range(0, plot.points, _ROWS_AT_ONCE):
        rows = slice(start, start + _ROWS_AT_ONCE)
        values[rows] = table[rows, columns]
        release(content, plot.start + start * row_bytes, plot.start + rows.stop * row_bytes)
    del view, table  # they would keep a mapped file from being closed
    _refuse_not_finite(frequency, values, _point)
    return Numbers(frequency, values, wanted, end, plot.line, _point, ([], [], []), (assumption,))


def _point(row: int) -> tuple[str, int | None]:
    return f"point {row + 1}: ", None


def _nowhere(row: int) -> tuple[str, int | None]:
    return "", None


def _cut_or_narrow(content: Content, plot: Header, row_bytes: int, available: int) -> FormatError:
    """Tell a cut file from one with 32-bit numbers."""
    count = len(plot.names)
    narrow = {row_bytes // 2, 8 + (count - 1) * (8 if plot.complex_numbers else 4)}
    if plot.points and available in {plot.points * n for n in narrow}:
        return FormatError(
            "the size fits numbers of 32 bits, which are not read",
            "save the raw file in double precision or in ASCII",
        )
    return FormatError(
        f"the file is cut: {plot.points} points are declared, {available // row_bytes} present",
        f"{_AGAIN}, to its end",
    )


def _byte_order(content: Content, plot: Header, count: int) -> tuple[str, str]:
    """Choose the byte order in which the frequency column makes sense.

    Raises
    ------
    FormatError
        If it makes sense in neither.
    """
    sense = {}
    for order in "<>":
        view = np.frombuffer(content, f"{order}f8", plot.points * count * 2, plot.start)
        axis = view[:: 2 * count].astype(np.float64)
        del view
        with np.errstate(all="ignore"):
            size = np.abs(axis)
            ordinary = np.isfinite(axis) & (size <= _HIGHEST_HZ) & ((size > 1e-12) | (size == 0))
            rising = axis[0] >= 0 and bool(np.all(np.diff(axis) > 0))
        sense[order] = (float(ordinary.mean()), rising)
    best = max("<>", key=lambda order: sense[order])  # the first, little-endian, if equal
    if sense[best][0] < 0.5:
        raise FormatError(
            "the frequency column makes no sense in either byte order",
            "save the raw file in double precision or in ASCII",
        )
    name = {"<": "little", ">": "big"}[best]
    return best, f"binary numbers taken as 64-bit, {name}-endian, by the frequency column"


def ascii_numbers(content: Content, plot: Header, wanted: tuple[int, ...]) -> Numbers:
    """Read the ASCII numbers of a plot: the index of each point, then one value per vector.

    Parameters
    ----------
    content : bytes-like
        The whole file.
    plot : Header
        Header of the plot.
    wanted : tuple of int
        Vectors to keep, counted behind the first.

    Returns
    -------
    Numbers

    Raises
    ------
    FormatError
        With the line, if the file is cut or damaged.
    """
    parts = 2 if plot.complex_numbers else 1
    width = 1 + parts * len(plot.names)
    reader = _AsciiReader(content, plot, width)
    frequency = Growing(None, np.float64)
    values = Growing(len(wanted), np.complex128)
    firsts = [1 + parts * (i + 1) for i in wanted]
    for rows in reader.rows():
        share = (reader.end - plot.start) / (len(content) - plot.start)
        frequency.add(rows[:, 1], share)
        piece = np.zeros((len(rows), len(firsts)), dtype=np.complex128)
        piece.real = rows[:, firsts]
        if parts == 2:
            piece.imag = rows[:, [f + 1 for f in firsts]]
        values.add(piece, share)
    axis, joined = frequency.finished(), values.finished()

    def place_of(row: int) -> tuple[str, int | None]:
        return "", reader.line_of(row)

    _refuse_not_finite(axis, joined, place_of)
    return Numbers(
        axis, joined, wanted, reader.end, reader.end_line, place_of, reader.tokens(parts)
    )


class _AsciiReader:
    """Reads points block by block and knows where it stopped."""

    def __init__(self, content: Content, plot: Header, width: int) -> None:
        self.content = content
        self.plot = plot
        self.width = width
        self.end = plot.start
        self.end_line = plot.line
        self.samples: list[bytes] = []

    def rows(self) -> Iterator[FloatArray]:
        """Yield the points in pieces of (n, width) numbers, index first."""
        rest = np.empty(0)
        count = 0
        more = True
        while more:
            block, more = self._block()
            numbers = self._parse(block)
            stream = np.concatenate((rest, numbers))
            whole = len(stream) // self.width
            points = stream[: whole * self.width].reshape(whole, self.width)
            rest = stream[whole * self.width :].copy()
            self._check_index(points, count)
            count += whole
            yield points
            self.samples.append(block[: 64 * self.width])
            if count > self.plot.points:
                break
        if count != self.plot.points or len(rest) or not count:
            raise self._wrong_count(count)
        if bytes(self.content[self.end - 1 : self.end]) not in (b"\n", b"\r"):
            # 1.5e-0 of 1.5e-09 would be taken for 1.5.
            raise FormatError(
                "the last line has no line end: its last number may be cut",
                f"{_AGAIN}, or add a line end if it is whole",
                line=self.end_line,
            )

    def _block(self) -> tuple[bytes, bool]:
        """Return the next whole lines of the plot, and whether more may follow."""
        piece = bytes(self.content[self.end : self.end + BLOCK_BYTES])
        last = self.end + len(piece) >= len(self.content)
        if not last:
            cut = piece.rfind(b"\n") + 1
            if not cut:
                raise FormatError("a line without end", _AGAIN, line=self.end_line)
            piece = piece[:cut]
        title = _TITLE.search(piece)
        if title:
            piece, last = piece[: title.start()], True
        release(self.content, self.end, self.end + len(piece))
        self.end += len(piece)
        return piece, not last

    def _parse(self, block: bytes) -> FloatArray:
        plain = block.translate(_SEPARATORS)
        numbers = _floats(plain) if b",," not in block else None
        if numbers is None:
            raise self._odd_line(block)
        self.end_line += block.count(b"\n")
        return numbers

    def _check_index(self, points: FloatArray, before: int) -> None:
        expected = np.arange(before, before + len(points))
        wrong = points[:, 0] != expected
        if wrong.any():
            row = before + int(np.flatnonzero(wrong)[0])
            raise FormatError(
                f"the numbers of point {row} do not follow its index: a value is missing or "
                "spare hereabouts",
                _AGAIN,
                line=self.line_of(row),
            )

    def _odd_line(self, block: bytes) -> FormatError:
        for number, line in enumerate(block.split(b"\n"), self.end_line):
            if b",," in line or _floats(line.translate(_SEPARATORS)) is None:
                shown = line.decode("latin-1").strip()[:60]
                return FormatError(f"text where numbers should be: {shown!r}", _AGAIN, line=number)
        return FormatError("text where numbers should be", _AGAIN, line=self.end_line)

    def _wrong_count(self, count: int) -> FormatError:
        declared = self.plot.points
        if count > declared > 0:
            return FormatError(
                f"more points than the {declared} declared",
                _AGAIN,
                line=self.line_of(declared),
            )
        return FormatError(
            f"the file is cut: {declared} points are declared, {count} present",
            f"{_AGAIN}, to its end",
            line=self.end_line,
        )

    def line_of(self, row: int) -> int:
        """Find the line at which the point of index `row` begins; slow."""
        piece = bytes(self.content[self.plot.start : self.plot.start + (1 << 28)])
        for number, line in enumerate(piece.split(b"\n"), self.plot.line):
            if re.match(rb"\s*%d\s" % row, line) and b"," not in line.split()[0]:
                return number
        return self.plot.line

    def tokens(self, parts: int) -> tuple[list[str], list[str], list[str]]:
        """Return samples of the printed real parts, imaginary parts and frequencies."""
        if parts != 2:
            return [], [], []
        pairs = []
        axis = []
        for sample in self.samples:
            for line in sample.decode("latin-1").split("\n")[:-1]:  # the last may be cut
                pair = _PAIR.search(line)
                if pair and _BEGINS_POINT.match(line):
                    axis.append(pair[1])
                elif pair:
                    pairs.append(pair)
        stride = max(1, len(pairs) // 2000)
        return [p[1] for p in pairs[::stride]], [p[2] for p in pairs[::stride]], axis


def _floats(text: bytes) -> FloatArray | None:
    """Parse blank-separated numbers; None if there is anything else."""
    tokens = text.split()
    try:
        numbers = np.fromiter(map(float, tokens), np.float64, len(tokens))
    except ValueError:
        return None
    return None if b"_" in text else numbers  # float() allows 1_000


def _refuse_not_finite(
    frequency: FloatArray, values: ComplexArray, place_of: Callable[[int], tuple[str, int | None]]
) -> None:
    bad = ~(np.isfinite(frequency) & np.isfinite(values).all(axis=1))
    if bad.any():
        where, line = place_of(int(np.flatnonzero(bad)[0]))
        raise FormatError(
            f"{where}a number that is not finite", "mend the circuit or that point", line=line
        )
