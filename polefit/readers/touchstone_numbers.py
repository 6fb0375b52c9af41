"""The numbers of a Touchstone file, read block by block, with the line each came from.

Comments and later option lines are dropped, keyword lines cut the numbers into sections.
Lines are counted throughout, so that an error can name one although nothing is kept of them.
"""

from __future__ import annotations

import re
from collections.abc import Sequence
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from polefit.errors import FormatError
from polefit.readers.large_files import Growing
from polefit.readers.text_blocks import Text
from polefit.readers.touchstone_header import PORT_IMPEDANCE
from polefit.responses import FloatArray

IntArray = NDArray[np.int64]

_COMMENT = re.compile(r"![^\n]*")
_OPTION_LINE = re.compile(r"^[ \t]*#[^\n]*", re.MULTILINE)
_KEYWORD_LINE = re.compile(r"^[ \t]*\[[^\n]*", re.MULTILINE)
# Numbers whose printed form is kept from the first block and from each later one: enough to see
# every digit count.
_SAMPLE = (1500, 200)
_COMMENTS_KEPT = 100


@dataclass(frozen=True, eq=False)
class Section:
    """Numbers between two keyword lines.

    Parameters
    ----------
    keyword : str
        The keyword line above, empty before the first one.
    line : int
        Line at which the section begins.
    numbers : (M,) float ndarray
        All numbers, in order.
    lines, counts : (L,) int ndarray
        Line number of each line that holds numbers, and how many it holds.
    sample : tuple of (int, str)
        Index and printed form of some of the numbers, spread over all of them.
    """

    keyword: str
    line: int
    numbers: FloatArray
    lines: IntArray
    counts: IntArray
    sample: tuple[tuple[int, str], ...]

    def line_of(self, index: int) -> int:
        """Return the line number of number `index`."""
        ends = np.cumsum(self.counts)
        return int(self.lines[np.searchsorted(ends, index, side="right")])

    @property
    def last_line(self) -> int:
        """Number of the last line that holds numbers."""
        return int(self.lines[-1]) if self.lines.size else self.line


@dataclass(frozen=True)
class Scan:
    """What a file holds below its header.

    Parameters
    ----------
    sections : tuple of Section
        At least one.
    reference_comments : tuple of (int, str)
        Comments that state port impedances, by line, with what they say; each text once.
    """

    sections: tuple[Section, ...]
    reference_comments: tuple[tuple[int, str], ...]


@dataclass
class _Collector:
    keyword: str
    line: int
    numbers: Growing = field(default_factory=lambda: Growing(None, np.float64))
    lines: list[IntArray] = field(default_factory=list)
    counts: list[IntArray] = field(default_factory=list)
    sample: list[tuple[int, str]] = field(default_factory=list)
    total: int = 0

    def add(self, piece: str, line: int, share: float) -> None:
        """Take the numbers of `piece`, which begins in line `line`.

        `share` is the part of the file that has been read with it.
        """
        try:
            raw = piece.encode("ascii")
            tokens = raw.split()
            numbers = np.fromiter(map(float, tokens), np.float64, len(tokens))
        except ValueError:
            raise _bad_number(piece, line) from None
        if b"_" in raw or not np.all(np.isfinite(numbers)):  # float() allows 1_000
            raise _bad_number(piece, line)
        if not tokens:
            return
        counts = _numbers_per_line(raw)
        full = np.flatnonzero(counts)
        self.lines.append(full + line)
        self.counts.append(counts[full])
        self.numbers.add(numbers, share)
        chosen: Sequence[int] = range(len(tokens))
        sample = _SAMPLE[bool(self.total)]
        if len(tokens) > 2 * sample:
            random = np.random.default_rng(self.total)
            chosen = random.integers(0, len(tokens), sample).tolist()
        self.sample += [(self.total + i, tokens[i].decode("ascii")) for i in chosen]
        self.total += len(tokens)

    def section(self) -> Section:
        """Close the section."""
        none = np.zeros(0, np.int64)
        return Section(
            keyword=self.keyword,
            line=self.line,
            numbers=self.numbers.finished(),
            lines=np.concatenate([none, *self.lines]),
            counts=np.concatenate([none, *self.counts]),
            sample=tuple(self.sample),
        )


def scan(text: Text, first_line: int) -> Scan:
    """Read all numbers from line `first_line` on.

    Parameters
    ----------
    text : Text
        The file.
    first_line : int
        First line below the header, counted from 1.

    Returns
    -------
    Scan

    Raises
    ------
    FormatError
        If something there is not a finite number; the line is named.
    """
    collectors = [_Collector("", first_line)]
    comments: dict[str, int] = {}
    line = 1
    seen = 0
    for block in text.blocks():
        count = block.count("\n")
        seen += len(block)
        if line + count > first_line:
            body = _without_head(block, first_line - line)
            for found in PORT_IMPEDANCE.finditer(body) if "!" in body else ():
                if found[1] not in comments and len(comments) < _COMMENTS_KEPT:
                    comments[found[1]] = line + body.count("\n", 0, found.start())
            share = min(1.0, seen * (1 + text.wide) / len(text.content))
            _collect(_without_comments(body), line, share, collectors)
        line += count
    told = tuple((at, said) for said, at in comments.items())
    return Scan(tuple(c.section() for c in collectors), told)


def _collect(body: str, line: int, share: float, collectors: list[_Collector]) -> None:
    at = 0
    for found in _KEYWORD_LINE.finditer(body) if "[" in body else ():
        collectors[-1].add(body[at : found.start()], line, share)
        line += body.count("\n", at, found.start())
        collectors.append(_Collector(found.group().strip(), line))
        at = found.end()
    collectors[-1].add(body[at:], line, share)


def _without_head(block: str, count: int) -> str:
    """Empty the first `count` lines."""
    if count <= 0:
        return block
    at = -1
    for _ in range(count):
        at = block.index("\n", at + 1)
    return "\n" * count + block[at + 1 :]


def _without_comments(body: str) -> str:
    if "!" in body:
        body = _COMMENT.sub("", body)
    if "#" in body:  # option lines after the first one are ignored
        body = _OPTION_LINE.sub("", body)
    return body


def _numbers_per_line(raw: bytes) -> IntArray:
    """Count the tokens of each line; the last line may lack its line end."""
    codes = np.frombuffer(raw, np.uint8)
    ink = codes > ord(" ")
    begins = np.flatnonzero(ink & ~np.concatenate(([False], ink[:-1])))
    ends = np.append(np.flatnonzero(codes == ord("\n")), len(raw))
    return np.diff(np.searchsorted(begins, ends), prepend=0)


def _bad_number(piece: str, line: int) -> FormatError:
    """Find the first token of `piece` that is not a finite number."""
    for offset, content in enumerate(piece.split("\n")):
        for token in content.split():
            try:
                if not token.isascii() or "_" in token:
                    raise ValueError
                good = bool(np.isfinite(float(token)))
            except ValueError:
                remedy = "write numbers with a decimal point, comments behind '!'"
                return FormatError(f"{token!r} is not a number", remedy, line=line + offset)
            if not good:
                what = f"{token!r} is not a finite number"
                return FormatError(what, "remove or mend that point", line=line + offset)
    return FormatError("unreadable characters", "save the file as plain ASCII text", line=line)
