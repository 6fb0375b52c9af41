"""The numbers of a text table: parsed block by block, checked, turned into responses."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import dataclass, field, replace

import numpy as np
from numpy.typing import NDArray

from polefit.errors import AmbiguousFileError, FormatError
from polefit.precision import Precision, Printed
from polefit.readers.delimited_dialect import BLANKS, PAIR, Dialect
from polefit.readers.delimited_layout import Layout, Trace
from polefit.readers.large_files import Growing
from polefit.readers.reading import OpenQuestionError, printed_form
from polefit.readers.text_blocks import Text, numbered_lines
from polefit.responses import ComplexArray, FloatArray

HIGHEST_HZ = 1e15  # beyond this a frequency unit must be wrong
_TOKENS_PER_BLOCK = 12
_TRACES_SAMPLED = 16
_ROWS_AT_ONCE = 4096


@dataclass(frozen=True, eq=False)
class Table:
    """Numbers as printed.

    Parameters
    ----------
    frequency : (N,) float ndarray
        In the unit of the file.
    parts : (N, K) complex ndarray
        First number of each trace as real, second as imaginary part, whatever they mean.
    first, second, axis : list of str
        Samples of the printed numbers, and of the frequencies.
    line_of : callable
        Line number of a row, for error messages; may be slow.
    """

    frequency: FloatArray
    parts: ComplexArray
    line_of: Callable[[int], int]
    first: list[str] = field(default_factory=list)
    second: list[str] = field(default_factory=list)
    axis: list[str] = field(default_factory=list)


def load(text: Text, dialect: Dialect, layout: Layout, first_line: int) -> Table:
    """Parse all rows of a file.

    Parameters
    ----------
    text : Text
        The file.
    dialect : Dialect
        How rows are written.
    layout : Layout
        What the numbers of a row are; only the traces in it are kept.
    first_line : int
        Lines before the first row.

    Returns
    -------
    Table

    Raises
    ------
    FormatError
        With the line, if a row does not fit, a number is not finite, or axes differ.
    """
    frequency = Growing(None, np.float64)
    parts = Growing(len(layout.traces), np.complex128)
    samples: tuple[list[str], list[str], list[str]] = ([], [], [])
    rows_before = characters = 0

    def line_of(row: int) -> int:
        return _line_of_row(text, dialect, first_line, row)

    for block in _behind(text, first_line):
        characters += len(block) * (2 if text.wide else 1)
        rows = dialect.rows(block)
        if not rows:
            continue
        if dialect.decimal == "," and "." in block:
            raise _odd_row(text, dialect, layout, first_line)
        numbers = _numbers(rows, dialect, layout)
        if numbers is None:
            raise _odd_row(text, dialect, layout, first_line)
        axis, values = take(numbers, layout, _shifted(line_of, rows_before))
        share = characters / len(text.content)
        frequency.add(axis, share)
        parts.add(values, share)
        _sample(rows, dialect, layout, *samples)
        rows_before += len(rows)
    if not rows_before:
        raise FormatError("no row of numbers", "export the file again")
    return Table(frequency.finished(), parts.finished(), line_of, *samples)


def _shifted(line_of: Callable[[int], int], rows: int) -> Callable[[int], int]:
    return lambda row: line_of(rows + row)


def _behind(text: Text, lines: int) -> Iterator[str]:
    """Yield the blocks of a text without its first lines."""
    for block in text.blocks():
        if lines:
            at = 0
            while lines and at < len(block):
                at = block.find("\n", at) + 1
                lines -= 1
            block = block[at:]
        if block:
            yield block


def _numbers(rows: list[str], dialect: Dialect, layout: Layout) -> FloatArray | None:
    """Parse rows with NumPy's C parser; None if one does not fit."""
    delimiter = None if dialect.delimiter == BLANKS else dialect.delimiter
    if dialect.complex_style:
        joint = dialect.delimiter
        rows = [row.replace(PAIR, joint) for row in rows]
    try:
        table = np.loadtxt(rows, delimiter=delimiter, comments=None, ndmin=2)
    except (ValueError, OverflowError):
        return None
    return table if table.shape == (len(rows), layout.width) else None


def take(
    numbers: FloatArray, layout: Layout, line_of: Callable[[int], int]
) -> tuple[FloatArray, ComplexArray]:
    """Pick the frequency and the two parts of each trace out of rows of numbers.

    Raises
    ------
    FormatError
        With the line, if a number is not finite or the axes of the traces differ.
    """
    firsts = [t.first for t in layout.traces]
    seconds = [t.second for t in layout.traces]
    axis = numbers[:, layout.frequency].copy()
    values = np.empty((len(numbers), len(firsts)), dtype=np.complex128)
    values.real = numbers[:, firsts]
    values.imag = numbers[:, seconds]
    bad = ~(np.isfinite(axis) & np.isfinite(values).all(axis=1))
    if bad.any():
        row = int(np.flatnonzero(bad)[0])
        raise FormatError(
            "a number that is not finite (NaN, infinite or out of range)",
            "remove or simulate that point again",
            line=line_of(row),
        )
    for other in layout.axes:
        differs = numbers[:, other] != axis
        if differs.any():
            row = int(np.flatnonzero(differs)[0])
            raise FormatError(
                f"the traces have different frequencies ({numbers[row, other]:.12g} "
                f"beside {axis[row]:.12g})",
                "write one file per trace, or all traces on one axis",
                line=line_of(row),
            )
    return axis, values


def _sample(
    rows: list[str],
    dialect: Dialect,
    layout: Layout,
    first: list[str],
    second: list[str],
    axis: list[str],
) -> None:
    """Collect printed numbers of some rows, spread over the block."""
    stride = max(1, len(layout.traces) // _TRACES_SAMPLED)
    for row in [*rows[:: max(1, len(rows) // _TOKENS_PER_BLOCK)], rows[-1]]:
        tokens = [t for part in dialect.fields(row) for t in part.split(PAIR)]
        axis.append(tokens[layout.frequency])
        for trace in layout.traces[::stride]:
            first.append(tokens[trace.first])
            second.append(tokens[trace.second])


def _odd_row(text: Text, dialect: Dialect, layout: Layout, first_line: int) -> FormatError:
    """Find the first row that does not fit, slowly, and say what is wrong with it."""
    for number, line in numbered_lines(text):
        if number <= first_line or not dialect.rows(line):
            continue
        counts = dialect.kinds(line)
        if counts is None:
            return FormatError(
                f"text where numbers should be: {line.strip()[:60]!r}",
                "a table is rows of numbers to its end; remove that line or mark it with #",
                line=number,
            )
        if sum(counts) != layout.width:
            return FormatError(
                f"{sum(counts)} numbers in this row, {layout.width} in the first row",
                "export the file again; it may be cut or hold several tables",
                line=number,
            )
    return FormatError("a row that cannot be read", "export the file again")


def _line_of_row(text: Text, dialect: Dialect, first_line: int, row: int) -> int:
    count = -1
    for number, line in numbered_lines(text):
        if number > first_line and dialect.rows(line):
            count += 1
            if count == row:
                return number
    return first_line + 1


def frequency_axis(table: Table, scale: float) -> tuple[FloatArray, tuple[str, ...]]:
    """Scale the frequencies to hertz and check that they rise.

    Parameters
    ----------
    table : Table
        The numbers.
    scale : float
        Hertz per unit; zero where nothing says.

    Returns
    -------
    frequency_hz : (N,) float ndarray
        Hertz.
    assumptions : tuple of str
        Whether hertz was assumed.

    Raises
    ------
    AmbiguousFileError
        If the unit is open and hertz is doubtful, or the stated unit is impossible.
    FormatError
        With the lines, if frequencies are negative, repeated or falling.
    """
    printed = table.frequency
    highest = float(np.abs(printed).max())
    remedy = "say frequency_unit= (--frequency-unit) Hz, kHz, MHz, GHz or THz"
    if not scale and highest < 1000:
        raise AmbiguousFileError(
            f"no frequency unit, and the highest frequency is {highest:g}: hertz, or a "
            "larger unit such as GHz",
            remedy,
        )
    if highest * (scale or 1.0) > HIGHEST_HZ:
        raise AmbiguousFileError(
            f"frequencies up to {highest * (scale or 1.0):.3g} Hz in the stated unit; "
            f"the largest number printed is {highest:.10g}",
            remedy,
        )
    _check_rising(printed, table.line_of)
    frequency: FloatArray = printed * scale if scale not in (0.0, 1.0) else printed
    if np.any(np.diff(frequency) <= 0):  # numbers near the smallest double may coincide
        raise FormatError("frequencies too small to tell apart", "check the frequency unit")
    return frequency, () if scale else ("frequencies taken in hertz: no unit is given",)


def _check_rising(printed: FloatArray, line_of: Callable[[int], int]) -> None:
    if np.any(printed < 0):
        row = int(np.flatnonzero(printed < 0)[0])
        raise FormatError(
            f"negative frequency {printed[row]:.12g}",
            "export positive frequencies only",
            line=line_of(row),
        )
    steps = np.diff(printed)
    if not np.any(steps <= 0):
        return
    row = int(np.flatnonzero(steps <= 0)[0])
    here, before = line_of(row + 1), line_of(row)
    if steps[row] == 0:
        raise FormatError(
            f"frequency {printed[row]:.12g} of line {before} comes again",
            "keep one row per frequency, or export more digits of it",
            line=here,
        )
    what = (
        "frequencies fall throughout"
        if np.all(steps < 0)
        else f"frequency falls from {printed[row]:.12g} (line {before}) to {printed[row + 1]:.12g}"
    )
    raise FormatError(
        what, "sort the rows by rising frequency; write one file per sweep", line=here
    )


def complex_values(table: Table, traces: tuple[Trace, ...]) -> tuple[list[Trace], tuple[str, ...]]:
    """Turn the printed parts into complex responses, in place.

    Returns
    -------
    traces : list of Trace
        With the angle unit settled.
    assumptions : tuple of str
        Where degrees were assumed.

    Raises
    ------
    AmbiguousFileError
        If an angle may be in degrees or radians.
    FormatError
        If a value overflows.
    """
    parts = table.parts
    settled, assumed = _angle_units(parts, traces)
    scales = np.array([t.scale for t in settled])
    polar = np.array([t.form != "real-imaginary" for t in settled])
    decibel = np.array([t.form == "decibel-angle" for t in settled])
    to_rad = np.array([np.pi / 180 if t.angle_unit == "deg" else 1.0 for t in settled])
    _refuse_negative_magnitudes(table, settled)
    with np.errstate(all="ignore"):
        for start in range(0, len(parts), _ROWS_AT_ONCE):
            rows = parts[start : start + _ROWS_AT_ONCE]
            if polar.any():
                size = rows.real[:, polar]
                size = np.where(decibel[polar], 10.0 ** (size / 20), size)
                rows[:, polar] = size * np.exp(1j * rows.imag[:, polar] * to_rad[polar])
            if np.any(scales != 1):
                rows *= scales
            if not np.isfinite(rows).all():
                row = start + int(np.flatnonzero(~np.isfinite(rows).all(axis=1))[0])
                raise FormatError(
                    "a value too large for a number", "check the unit", line=table.line_of(row)
                )
    return settled, assumed


def _refuse_negative_magnitudes(table: Table, traces: list[Trace]) -> None:
    columns = [i for i, t in enumerate(traces) if t.form == "magnitude-angle"]
    negative = (table.parts.real[:, columns] < 0).any(axis=1)
    if negative.any():
        raise FormatError(
            "a negative magnitude",
            "say form= (--form) if these are decibels or real parts; else mend the file",
            line=table.line_of(int(np.flatnonzero(negative)[0])),
        )


def _angle_units(
    parts: ComplexArray, traces: tuple[Trace, ...]
) -> tuple[list[Trace], tuple[str, ...]]:
    unknown = [i for i, t in enumerate(traces) if t.form != "real-imaginary" and not t.angle_unit]
    if not unknown:
        return list(traces), ()
    largest = float(np.abs(parts.imag[:, unknown]).max())
    if not 100 < largest <= 360:
        raise OpenQuestionError(
            f"phases up to {largest:.6g} without a unit may be degrees or radians",
            "say angle_unit= (--angle-unit) deg or rad",
            option="angle_unit",
            presume={"angle_unit": "deg"},
        )
    settled = [replace(t, angle_unit="deg") if i in unknown else t for i, t in enumerate(traces)]
    return settled, (f"phases taken in degrees: they reach {largest:.6g}",)


def precision(table: Table, traces: list[Trace], *, simulator: bool) -> Precision | None:
    """Tell how the numbers were printed, from the samples; None for full double precision."""
    first = _printed(table.first, simulator)
    second = _printed(table.second, simulator)
    if first is None and second is None:
        return None
    form = traces[0].form
    return Precision(
        form=form,
        first=first or Printed(),
        second=second or Printed(),
        scale=max(t.scale for t in traces),
        radians=form != "real-imaginary" and traces[0].angle_unit == "rad",
    )


def _printed(tokens: list[str], simulator: bool) -> Printed | None:
    """As printed_form; some simulators give negative numbers one digit less."""
    whole = printed_form(tokens)
    negative = printed_form([t for t in tokens if t.startswith("-")]) if simulator else None
    if whole and negative and whole.significant and negative.significant:
        return Printed(significant=min(whole.significant, negative.significant))
    return whole


def as_floats(rows: list[str]) -> NDArray[np.float64] | None:
    """Parse blank-separated rows; None if they do not fit each other."""
    try:
        return np.loadtxt(rows, comments=None, ndmin=2)
    except (ValueError, OverflowError):
        return None
