"""How the rows of a delimited text file are written: separator, decimal mark, complex style.

A dialect turns a piece of text into plain rows of numbers. The same conversion serves the
sample from which the dialect is found and, block by block, the whole file.
"""

from __future__ import annotations

import re
from collections.abc import Iterator, Sequence
from dataclasses import dataclass, field

from polefit.errors import AmbiguousFileError, ArgumentError, FormatError
from polefit.readers.reading import ReadOptions

BLANKS = " "
PAIR = "\x01"  # stands between the two numbers of one field
_NAMED = {"tab": "\t", "\\t": "\t", "comma": ",", "semicolon": ";", "blank": " ", "blanks": " "}
_NAMED |= {"space": " ", "\t": "\t", ",": ",", ";": ";", " ": " "}
_NAMES = {"\t": "tab", ",": "comma", ";": "semicolon", BLANKS: "blanks"}

_UNSIGNED = r"(?:\d+\.?\d*|\.\d+)(?:[eE][+-]?\d+)?"
_SIGNED = rf"[+-]?{_UNSIGNED}"
_NUMBER = re.compile(rf"{_SIGNED}|[+-]?(?:nan|inf|infinity)", re.IGNORECASE)
_BRACKETED = re.compile(rf"(?:complex)?\(\s*({_SIGNED})\s*[,;]\s*({_SIGNED})\s*\)", re.IGNORECASE)
_STARTED = rf"(?<![\w.])\(?({_SIGNED})"  # a number from its first character on
# (-3.01dB,-45.0°): the degree sign may be one byte or, seen as Latin-1, two.
_DECIBELS = re.compile(
    rf"\(\s*({_SIGNED})\s*dB\s*[,;]\s*({_SIGNED})\s*(?:\xc2?\xb0|deg)\s*\)", re.IGNORECASE
)
_SLASHED = re.compile(rf"(?<![\w./])({_SIGNED})[ \t]*/[ \t]*({_SIGNED})(?![\w./])")  # 12.5 / -30.2
_UNIT_LAST = re.compile(rf"{_STARTED}[ \t]*(?:\+[ \t]*)?([+-])[ \t]*({_UNSIGNED})\*?[ij]\)?")
# a+bj without blanks; begins with the sign, since that is quick to search for.
_PLAIN_SUM = re.compile(rf"([+-])(?<=[\d.][+-])({_UNSIGNED})[ij](?![\w(*])")
_UNIT_FIRST = re.compile(rf"{_STARTED}[ \t]*([+-])[ \t]*[ij][ \t]*\*?[ \t]*({_UNSIGNED})\)?")
_IMAGINARY = re.compile(rf"{_STARTED}\*?[ij]\)?")
_QUOTED_PAIR = re.compile(rf'"\s*({_SIGNED})\s*[,;\t ]\s*({_SIGNED})\s*"')
_QUOTED_DECIMAL = re.compile(r'"\s*([+-]?\d+),(\d*(?:[eE][+-]?\d+)?)\s*"')
_COMMA = re.compile(r",[ \t]*")
_FORTRAN = re.compile(r"(?<=[\d.])[dD](?=[+-]?\d)")
_TRAILING_NOTE = re.compile(r"[ \t,;]*(?:[#!]|(?<=[ \t])(?:%|//)).*")
_COMMENT = re.compile(r"\s*(?:[#!%;*]|//)")
_LATER_COMMENT = re.compile(r"\n[ \t\f]*[#!%;*/]")
_ROW_START = re.compile(r"[\s\"(]*[+-]?\.?\d")
_GROUPED = re.compile(r"[+-]?\d{1,3}(?:,\d{3})+\.\d*|[+-]?\d{1,3}(?:\.\d{3})+,\d*")
# 10MEG, 1.5k, 0.01 GHz, 3.2mOhm: a number with a prefix, a unit or both.
_PREFIXED = re.compile(
    rf"(?<![\w.]){_SIGNED}[ \t]?"
    r"(?:(?:[fpnuµmkGT]|meg)?(?:Hz|Ohms?|Ω|V|A|S|dB|deg)|[fpnuµmkGT]|meg)(?![\w(])",
    re.IGNORECASE,
)
_A_TABLE = (
    "a text file needs one row per frequency: frequency, then two numbers per response, "
    "separated by comma, semicolon, tab or blanks"
)
_SAMPLE_LINES = 200
_PREAMBLE_LINES = 1000


@dataclass(frozen=True)
class Dialect:
    """How rows are written.

    Parameters
    ----------
    delimiter : str
        Tab, comma, semicolon, or a blank for any run of blanks.
    decimal : str
        Decimal mark.
    complex_style : str
        How two numbers share a field: "", "bracketed", "decibels", "slash", "unit", "quoted"
        or "comma".
    quoted : bool
        Whether fields are put in quotation marks.
    fortran : bool
        Whether exponents are marked with D.
    trailing : bool
        Whether rows end with a delimiter.
    notes : bool
        Whether comments may follow a row.
    """

    delimiter: str
    decimal: str
    complex_style: str = ""
    quoted: bool = False
    fortran: bool = False
    trailing: bool = False
    notes: bool = False

    def rows(self, text: str) -> list[str]:
        """Turn a piece of text into rows of fields, leaving out blank and comment lines."""
        return [row for row in self.plain(text).split("\n") if row and not row.isspace()]

    def plain(self, text: str) -> str:
        """Rewrite text so that each row is its fields with this delimiter, decimal point."""
        if "\xe2\x88\x92" in text or "−" in text:
            text = text.replace("\xe2\x88\x92", "-").replace("−", "-")
        if self.notes or self._has_comments(text):
            text = self._without_comments(text)
        if "\f" in text:
            text = text.replace("\f", " ")
        if self.fortran:
            text = _FORTRAN.sub("E", text)
        if self.decimal == "," and self.delimiter != ",":
            text = text.replace(",", ".")
        text = self._pairs_marked(text)
        if self.quoted:
            text = self._quotes_dropped(text)
        if self.trailing:
            text = re.sub(rf"{re.escape(self.delimiter)}[ \t]*$", "", text, flags=re.MULTILINE)
        return text

    def _has_comments(self, text: str) -> bool:
        """Whether a line is a comment; quick, since nearly all blocks have none."""
        if not any(mark in text for mark in "#!%;*/"):
            return False
        return is_comment(text) or _LATER_COMMENT.search(text) is not None

    def _pairs_marked(self, text: str) -> str:
        if self.complex_style == "bracketed":
            return _BRACKETED.sub(rf"\1{PAIR}\2", text)
        if self.complex_style == "decibels":
            return _DECIBELS.sub(rf"\1{PAIR}\2", text)
        if self.complex_style == "slash":
            return _SLASHED.sub(rf"\1{PAIR}\2", text)
        if self.complex_style == "unit":
            marked, count = _PLAIN_SUM.subn(rf"{PAIR}\1\2", text)
            brackets = text.count("(")
            if count == text.count("i") + text.count("j") and brackets in (0, count):
                # Nearly always; what follows takes ten times as long.
                return marked.replace("(", "").replace(")", "") if brackets else marked
            text = _UNIT_LAST.sub(rf"\1{PAIR}\2\3", text)
            text = _UNIT_FIRST.sub(rf"\1{PAIR}\2\3", text)
            return _IMAGINARY.sub(rf"0{PAIR}\1", text)
        if self.complex_style == "quoted":
            return _QUOTED_PAIR.sub(rf"\1{PAIR}\2", text)
        if self.complex_style == "comma":
            return _COMMA.sub(PAIR, text)
        return text

    def _quotes_dropped(self, text: str) -> str:
        if self.decimal == ",":
            text = _QUOTED_DECIMAL.sub(r"\1.\2", text)
        return text.replace('"', "")

    def _without_comments(self, text: str) -> str:
        lines = ("" if _COMMENT.match(line) else line for line in text.split("\n"))
        if self.notes:
            lines = (_TRAILING_NOTE.sub("", line) for line in lines)
        return "\n".join(lines)

    def fields(self, row: str) -> list[str]:
        """Split one row of :meth:`rows`."""
        if self.delimiter == BLANKS:
            return row.split()
        return [part.strip() for part in row.split(self.delimiter)]

    def kinds(self, line: str) -> tuple[int, ...] | None:
        """Count the numbers in each field of a line of the file; None if it is no row."""
        rows = self.rows(line)
        if len(rows) != 1 or (self.decimal == "," and "." in line):
            return None
        if self.quoted and self._splits_quotes(line):
            return None
        counts = []
        for part in self.fields(rows[0]):
            numbers = part.split(PAIR)
            if len(numbers) > 2 or not all(_NUMBER.fullmatch(n.strip()) for n in numbers):
                return None
            counts.append(len(numbers))
        return tuple(counts) if len(counts) > 1 else None

    def _splits_quotes(self, line: str) -> bool:
        """Whether a quoted field holds the delimiter, so that dropping the quotes cuts it."""
        if self.decimal == ",":
            line = _QUOTED_DECIMAL.sub(r"\1.\2", line)
        inside = self._pairs_marked(line).split('"')[1::2]
        return any(self.delimiter in part.strip() for part in inside)

    def __str__(self) -> str:
        mark = "decimal comma" if self.decimal == "," else "decimal point"
        pair = f", two numbers in one field ({self.complex_style})" if self.complex_style else ""
        return f"{_NAMES[self.delimiter]} between fields, {mark}{pair}"


@dataclass(frozen=True)
class Draft:
    """A dialect that fits the sample, with what it finds there.

    Parameters
    ----------
    dialect : Dialect
        How rows are written.
    kinds : tuple of int
        Numbers in each field.
    first_line : int
        Index of the first row among the lines of the sample.
    rows : tuple of tuple of str
        The sample, as numbers with decimal point.
    """

    dialect: Dialect
    kinds: tuple[int, ...]
    first_line: int
    rows: tuple[tuple[str, ...], ...] = field(repr=False)


def is_comment(line: str) -> bool:
    """Whether a line is a comment as a whole."""
    return _COMMENT.match(line) is not None


def drafts(lines: Sequence[str], options: ReadOptions) -> list[Draft]:
    """Find every dialect in which the first lines of a file are a table.

    Parameters
    ----------
    lines : sequence of str
        The first lines of the file.
    options : ReadOptions
        `delimiter` and `decimal` narrow the search.

    Returns
    -------
    list of Draft
        Distinct readings, each explaining as many rows as any other.

    Raises
    ------
    FormatError
        If there is no table.
    AmbiguousFileError
        If the numbers may carry thousands separators.
    """
    found: list[Draft] = []
    for dialect in _hypotheses(lines, options):
        draft = _draft(lines, dialect)
        if draft is not None and all((d.kinds, d.rows) != (draft.kinds, draft.rows) for d in found):
            found.append(draft)
    if not found:
        raise _no_table(lines, options)
    # A reading that finds fewer rows takes the others for text: it explains less of the file.
    most = max(len(d.rows) for d in found)
    found = [d for d in found if len(d.rows) == most]
    for draft in found:
        _refuse_thousands(lines, draft, options)
    return found


def _hypotheses(lines: Sequence[str], options: ReadOptions) -> Iterator[Dialect]:
    text = "\n".join(line for line in lines if _ROW_START.match(line))
    given = None if options.delimiter is None else as_delimiter(options.delimiter)
    delimiters = ["\t", ";", ",", BLANKS] if given is None else [given]
    decimals = [".", ","] if options.decimal is None else [options.decimal]
    quoted = '"' in text
    fortran = _FORTRAN.search(text) is not None
    notes = any(mark in text for mark in "#!%/")
    styles = [""]
    pointed = text.replace(",", ".")
    if _BRACKETED.search(text) or _BRACKETED.search(pointed):
        styles = ["bracketed"]
    elif _DECIBELS.search(text) or _DECIBELS.search(pointed):
        styles = ["decibels"]
    elif _SLASHED.search(text):
        styles.append("slash")  # a date above the table may look like it
    elif any(p.search(t) for p in (_UNIT_LAST, _UNIT_FIRST) for t in (text, pointed)):
        styles = ["unit"]
    elif _QUOTED_PAIR.search(text):
        styles.append("quoted")
    if styles == [""] and "," in text:
        styles.append("comma")
    for delimiter in delimiters:
        for decimal in decimals:
            for style in styles:
                if _possible(delimiter, decimal, style, quoted):
                    yield Dialect(delimiter, decimal, style, quoted, fortran, False, notes)
                    if delimiter != BLANKS:
                        yield Dialect(delimiter, decimal, style, quoted, fortran, True, notes)


def _possible(delimiter: str, decimal: str, style: str, quoted: bool) -> bool:
    if style == "comma" and (delimiter == "," or decimal == ","):
        return False
    if decimal == "," and delimiter == ",":
        return quoted and style == ""
    return True


def as_delimiter(name: str) -> str:
    """Turn the option `delimiter` into the character.

    Raises
    ------
    ArgumentError
        If it is not one of those that are read.
    """
    known = _NAMED.get(name if name in _NAMED else name.strip().lower())
    if known is None:
        raise ArgumentError(
            f"delimiter: {name!r} is not known; use one of comma, semicolon, tab, blanks"
        )
    return known


def _draft(lines: Sequence[str], dialect: Dialect) -> Draft | None:
    kinds: tuple[int, ...] | None = None
    first = 0
    rows: list[tuple[str, ...]] = []
    for index, line in enumerate(lines):
        if not line.strip() or is_comment(line):
            continue
        current = dialect.kinds(line)
        if kinds is None:
            if index > _PREAMBLE_LINES:
                return None
            kinds, first = current, index
        elif current != kinds:
            break  # an error of the file, found again with its line when the body is read
        if kinds is not None:
            parts = dialect.fields(dialect.rows(line)[0])
            rows.append(tuple(n.strip() for part in parts for n in part.split(PAIR)))
        if len(rows) >= _SAMPLE_LINES:
            break
    return None if kinds is None else Draft(dialect, kinds, first, tuple(rows))


def _no_table(lines: Sequence[str], options: ReadOptions) -> FormatError:
    wanted = [
        f"{name}={value!r}"
        for name, value in (("delimiter", options.delimiter), ("decimal", options.decimal))
        if value is not None
    ]
    at = " with " + " and ".join(wanted) if wanted else ""
    if not any(line.strip() for line in lines):
        return FormatError("the file holds only blank lines", "export it again")
    begun = [(i, line) for i, line in enumerate(lines, 1) if _ROW_START.match(line)]
    if not begun:
        first = next(line for line in lines if line.strip())
        what = f"no line begins with a number, the first is {_shown(first)}"
        return FormatError(f"no row of numbers found{at}: {what}", _A_TABLE)
    number, row = begun[0]
    what, remedy = _why(row)
    return FormatError(f"no row of numbers found{at}: {what} {_shown(row)}", remedy, line=number)


def _shown(line: str) -> str:
    return repr(" ".join(line.split())[:60])


def _why(row: str) -> tuple[str, str]:
    """Tell what keeps a line from being a row of numbers, and the remedy."""
    prefix = _PREFIXED.search(row)
    if prefix:
        return (
            f"{prefix[0].strip()} is no plain number, in",
            "export numbers without prefixes and units, such as 1.5e9; a unit of the frequency "
            "belongs in the heading or in frequency_unit= (--frequency-unit)",
        )
    if any(_GROUPED.fullmatch(part.strip('" ')) for part in re.split(r"[;\t ]+", row)):
        return "numbers seem to carry thousands separators in", "export without them"
    return "this is none:", _A_TABLE


def _refuse_thousands(lines: Sequence[str], draft: Draft, options: ReadOptions) -> None:
    """Refuse numbers such as 1,234 throughout: decimal comma or thousands separator."""
    if draft.dialect.decimal != "," or options.decimal is not None:
        return
    text = "\n".join(lines[draft.first_line : draft.first_line + _SAMPLE_LINES])
    with_comma = re.findall(r"[+-]?\d[\d,]*,[\d,]*(?:[eE][+-]?\d+)?", text)
    if with_comma and all(re.fullmatch(r"[+-]?[1-9]\d{0,2}(,\d{3})+", t) for t in with_comma):
        example = with_comma[0]
        raise AmbiguousFileError(
            f"{example} may be {example.replace(',', '.', 1)} with a decimal comma or "
            f"{example.replace(',', '')} with thousands separators",
            "say decimal=',' (--decimal ,) for the first; export without separators otherwise",
            line=draft.first_line + 1,
        )
