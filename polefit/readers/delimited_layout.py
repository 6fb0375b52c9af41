"""Which columns of a text table are the frequency and the two parts of each response."""

from __future__ import annotations

import itertools
from collections.abc import Sequence
from dataclasses import dataclass, field, replace
from typing import Literal, TypeAlias

from polefit.errors import ArgumentError, FormatError
from polefit.readers.delimited_headings import (
    ANGLE,
    DECIBEL,
    FREQUENCY_UNITS,
    IMAGINARY,
    MAGNITUDE,
    REAL,
    Heading,
)
from polefit.readers.reading import OpenQuestionError, ReadOptions

Form: TypeAlias = Literal["real-imaginary", "magnitude-angle", "decibel-angle"]

_FORMS: tuple[tuple[Form, str, str], ...] = (
    ("real-imaginary", REAL, IMAGINARY),
    ("magnitude-angle", MAGNITUDE, ANGLE),
    ("decibel-angle", DECIBEL, ANGLE),
)
_FORM_REMEDY = "say form= (--form) real-imaginary, magnitude-angle or decibel-angle"
_ONE_FILE_EACH = "write one file per trace, or all traces on one axis"


@dataclass(frozen=True)
class Column:
    """One field of every row: one number, or two (`pair`) from number `start` on."""

    start: int
    pair: bool
    heading: Heading


@dataclass(frozen=True)
class Trace:
    """One response: the number columns of its two parts.

    Parameters
    ----------
    first, second : int
        Number columns.
    form : str
        What the two numbers are.
    scale : float
        Value of one printed unit.
    angle_unit : str
        "deg", "rad", or empty where nothing says.
    label : Heading
        Name and kind.
    """

    first: int
    second: int
    form: Form
    scale: float
    angle_unit: str
    label: Heading


@dataclass(frozen=True)
class Layout:
    """What each number of a row is.

    Parameters
    ----------
    width : int
        Numbers per row.
    frequency : int
        Number column of the frequency.
    frequency_scale : float
        Hertz per printed unit; zero where nothing says.
    axes : tuple of int
        Number columns that repeat the frequency for another trace.
    traces : tuple of Trace
        The responses.
    assumptions, warnings : tuple of str
        What was not forced by the file; what deserves a second look.
    """

    width: int
    frequency: int
    frequency_scale: float
    axes: tuple[int, ...]
    traces: tuple[Trace, ...]
    assumptions: tuple[str, ...] = ()
    warnings: tuple[str, ...] = ()


@dataclass
class _Notes:
    pairs: Form | None
    assumptions: list[str] = field(default_factory=list)
    warnings: list[str] = field(default_factory=list)


def resolve(
    kinds: Sequence[int],
    headings: Sequence[Heading] | None,
    rows: Sequence[Sequence[str]],
    options: ReadOptions,
    *,
    simulator: bool = False,
    pairs: Form | None = None,
) -> Layout:
    """Find the meaning of the columns.

    Parameters
    ----------
    kinds : sequence of int
        Numbers in each field: 1 or 2.
    headings : sequence of Heading or None
        One for each field.
    rows : sequence of sequence of str
        A sample of the numbers, with decimal points.
    options : ReadOptions
        `form`, `angle_unit` and `frequency_unit` settle what is open.
    simulator : bool
        Whether the file is evidently a simulator's own table: complex vectors are then
        printed as real and imaginary part, frequencies in hertz.
    pairs : str or None
        What two numbers in one field are, where their marks leave no doubt; angles are then in
        degrees.

    Returns
    -------
    Layout

    Raises
    ------
    FormatError
        If the columns cannot be responses.
    AmbiguousFileError
        If they could be several things.
    ArgumentError
        If an option contradicts the headings.
    """
    notes = _Notes("real-imaginary" if simulator else pairs)
    columns = _columns(kinds, headings)
    if headings is not None and columns[0].heading.role == "index" and len(columns) > 1:
        notes.assumptions.append(f"column {columns[0].heading.text!r} left out: it counts rows")
        columns = columns[1:]
    axes = _axes(columns, headings is not None, rows, notes)
    values = [c for c in columns if c not in axes]
    if headings is None:
        traces = _bare_traces(values, options, simulator, notes)
    else:
        traces = _headed_traces(columns, axes, options, simulator, notes)
    if options.angle_unit is not None:
        traces = [replace(t, angle_unit=options.angle_unit) for t in traces]
    return Layout(
        width=sum(kinds),
        frequency=axes[0].start,
        frequency_scale=_frequency_scale(axes, options, simulator, notes),
        axes=tuple(c.start for c in axes[1:]),
        traces=tuple(traces),
        assumptions=tuple(notes.assumptions),
        warnings=tuple(notes.warnings),
    )


def _columns(kinds: Sequence[int], headings: Sequence[Heading] | None) -> list[Column]:
    found, start = [], 0
    for index, count in enumerate(kinds):
        heading = Heading("") if headings is None else headings[index]
        found.append(Column(start, count == 2, heading))
        start += count
    return found


def _axes(
    columns: list[Column], headed: bool, rows: Sequence[Sequence[str]], notes: _Notes
) -> list[Column]:
    """Find the frequency column, and those that repeat it for another trace."""
    if any(c.heading.role == "time" for c in columns):
        raise FormatError("a table over time", "export an AC analysis: responses over frequency")
    named = [c for c in columns if c.heading.role in ("frequency", "angular-frequency")]
    if not named:
        first = columns[0]
        if first.heading.role or first.heading.kind:
            raise FormatError(
                f"no column is headed as frequency (the first is {first.heading.text!r})",
                "name it freq, with its unit",
            )
        if headed:
            notes.assumptions.append(f"column {first.heading.text!r} taken as the frequency")
            named = [c for c in columns if c.heading.text == first.heading.text]
        else:
            named = _repeated_axes(columns, rows)
    if named[0].pair:
        if any(float(row[named[0].start + 1]) != 0 for row in rows):
            raise FormatError("two numbers as frequency", "export the frequency as one number")
        notes.assumptions.append("real part of the complex frequency column taken")
    scales = {c.heading.scale for c in named if c.heading.scale}
    if len(scales) > 1:
        raise FormatError("frequency axes in different units", _ONE_FILE_EACH)
    return named


def _repeated_axes(columns: list[Column], rows: Sequence[Sequence[str]]) -> list[Column]:
    """Find columns without heading that repeat the first, or look like an axis of their own."""
    first = columns[0]
    same = [c for c in columns[1:] if all(row[c.start] == row[first.start] for row in rows)]
    if same:
        return [first, *same]
    for stride in (3, 2):
        every = columns[::stride]
        if len(columns) % stride == 0 and len(every) > 1 and all(not c.pair for c in every):
            sampled = [[float(row[c.start]) for row in rows] for c in every]
            if all(_like_axis(sampled[0], other) for other in sampled):
                return every
    return [first]


def _like_axis(reference: list[float], other: list[float]) -> bool:
    """Whether numbers rise throughout and cover about the range of the reference axis."""
    if len(other) < 3 or any(not b > a for a, b in itertools.pairwise(other)):
        return False
    ends = ((other[0], reference[0]), (other[-1], reference[-1]))
    return all(a >= 0 and b >= 0 and 0.1 * b <= a <= 10 * b for a, b in ends)


def _frequency_scale(
    axes: list[Column], options: ReadOptions, simulator: bool, notes: _Notes
) -> float:
    headed = axes[0].heading.scale
    if options.frequency_unit is None:
        return headed or (1.0 if simulator else 0.0)
    scale = FREQUENCY_UNITS.get(options.frequency_unit.strip().lower())
    if scale is None:
        raise ArgumentError(
            f"frequency_unit: {options.frequency_unit!r} is not known; "
            "use one of Hz, kHz, MHz, GHz, THz"
        )
    if headed not in (0.0, scale):
        notes.assumptions.append(
            f"frequency unit {options.frequency_unit} as given, against "
            f"the heading {axes[0].heading.text!r}"
        )
    return scale


def _bare_traces(
    values: list[Column], options: ReadOptions, simulator: bool, notes: _Notes
) -> list[Trace]:
    """Pair the columns of a table without headings."""
    pairs = [c for c in values if c.pair]
    single = [c for c in values if not c.pair]
    if not values:
        raise FormatError("a frequency column, but no response", "export responses too")
    if pairs and single:
        raise FormatError(
            "some responses are one number and some two, without headings",
            "name the columns in a first line",
        )
    if pairs:
        return [_pair_trace(c, options, notes) for c in pairs]
    return _adjacent_traces(single, options, simulator, notes)


def _pair_trace(column: Column, options: ReadOptions, notes: _Notes) -> Trace:
    form: Form = notes.pairs or options.form or "real-imaginary"
    if options.form not in (None, form):
        raise ArgumentError(f"form: the numbers are marked as {form}; leave the option out")
    if column.heading.role:
        raise FormatError(
            f"two numbers in the column {column.heading.text!r}, which is headed as one part",
            "export one number per field",
        )
    if options.form is None and notes.pairs is None:
        _say_once(notes.assumptions, "two numbers in one field taken as real and imaginary part")
    unit = column.heading
    degrees = "deg" if notes.pairs not in (None, "real-imaginary") else unit.angle_unit
    return Trace(column.start, column.start + 1, form, unit.scale or 1.0, degrees, column.heading)


def _adjacent_traces(
    single: list[Column], options: ReadOptions, simulator: bool, notes: _Notes
) -> list[Trace]:
    """Pair neighbouring columns of which nothing tells what they are."""
    names = ", ".join(repr(c.heading.text) for c in single[:4] if c.heading.text)
    which = f" (columns {names})" if names else ""
    if len(single) % 2:
        raise FormatError(
            f"{len(single)} number column{'s' if len(single) > 1 else ''} besides the "
            f"frequency{which} cannot be paired to complex responses",
            "export two numbers per response, such as real and imaginary part",
        )
    form = options.form or ("real-imaginary" if simulator else None)
    if form is None:
        raise OpenQuestionError(
            f"two numbers per response{which} may be real and imaginary part, or magnitude "
            "(or decibels) and phase",
            _FORM_REMEDY,
            option="form",
            presume={"form": "real-imaginary"},
        )
    if options.form is None:
        _say_once(notes.assumptions, "simulator table: real and imaginary part of each vector")
    return [
        Trace(a.start, b.start, form, a.heading.scale or 1.0, b.heading.angle_unit, a.heading)
        for a, b in zip(single[::2], single[1::2], strict=True)
    ]


def _headed_traces(
    columns: list[Column],
    axes: list[Column],
    options: ReadOptions,
    simulator: bool,
    notes: _Notes,
) -> list[Trace]:
    """Pair columns by the part and the name in their headings, in order of appearance."""
    groups: list[tuple[tuple[str, str, str], dict[str, Column]]] = []
    traces: list[tuple[int, Trace]] = []
    unsaid: list[Column] = []
    closed = 0
    for column in columns:
        part = column.heading.role
        if column in axes:
            closed = len(groups)
        elif column.pair:
            traces.append((column.start, _pair_trace(column, options, notes)))
        elif not part:
            unsaid.append(column)
        else:
            key = (column.heading.kind, column.heading.output, column.heading.input)
            near = groups if key[1] else groups[closed:]  # a name joins parts on axes of their own
            fitting = (g for k, g in near if _same(k, key) and part not in g)
            group = next(fitting, None)
            if group is None:
                groups.append((key, {part: column}))
            else:
                group[part] = column
    unsaid = _as_magnitudes(unsaid, [g for _, g in groups])
    lonely: list[Column] = []
    whole = {(t.label.output, t.label.input) for _, t in traces}
    for key, group in groups:
        if key[1] and key[1:] in whole:
            texts = ", ".join(c.heading.text for c in group.values())
            notes.assumptions.append(f"{texts} left out: {key[1]} is there as complex numbers")
            continue
        trace = _group_trace(group, options, notes)
        if trace is None:
            lonely.extend(group.values())
        else:
            traces.append((next(iter(group.values())).start, trace))
    if lonely and options.form is not None:
        unsaid, lonely = sorted([*lonely, *unsaid], key=lambda c: c.start), []
        texts = ", ".join(repr(c.heading.text) for c in unsaid[:4])
        notes.assumptions.append(f"{options.form} as given, whatever the headings {texts} say")
    if unsaid and (options.form is not None or not traces) and not lonely:
        paired = _adjacent_traces(unsaid, options, _repeats(unsaid) and simulator, notes)
        traces.extend((t.first, t) for t in paired)
        unsaid = []
    left = sorted([*lonely, *unsaid], key=lambda c: c.start)
    if not traces:
        raise _no_partner(left)
    notes.warnings.extend(f"column {c.heading.text!r} left out: it has no partner" for c in left)
    return [trace for _, trace in sorted(traces, key=lambda item: item[0])]


def _same(key: tuple[str, str, str], other: tuple[str, str, str]) -> bool:
    """Whether two headings name one response; a kind said only once does not part them."""
    return key[1:] == other[1:] and (key[0] == other[0] or not key[0] or not other[0])


def _as_magnitudes(unsaid: list[Column], groups: list[dict[str, Column]]) -> list[Column]:
    """Join a column in ohm or siemens to the phase of the same name; return the others."""
    left = []
    for column in unsaid:
        head = column.heading
        for group in groups:
            angle = group.get(ANGLE)
            if (
                set(group) == {ANGLE}
                and angle is not None
                and head.scale
                and head.kind in ("impedance", "admittance")
                and angle.heading.output == head.output
            ):
                group[MAGNITUDE] = column
                break
        else:
            left.append(column)
    return left


def _repeats(columns: list[Column]) -> bool:
    """Whether each heading comes twice in a row."""
    texts = [c.heading.text for c in columns]
    return len(texts) % 2 == 0 and texts[::2] == texts[1::2]


def _group_trace(group: dict[str, Column], options: ReadOptions, notes: _Notes) -> Trace | None:
    """Make a trace of the parts of one name; None if they are not enough."""
    complete = [(form, a, b) for form, a, b in _FORMS if a in group and b in group]
    if not complete:
        return None
    chosen = next((c for c in complete if c[0] == options.form), complete[0])
    form, a, b = chosen
    if options.form not in (None, form):
        if len(group) > 2:
            raise ArgumentError(f"form: the headings say {form}; leave the option out")
        return None  # two columns, to be paired as the option says
    first, second = group[a], group[b]
    unused = [c.heading.text for part, c in group.items() if part not in (a, b)]
    if unused:
        _say_once(notes.assumptions, f"{form} columns taken; {', '.join(unused)} left out")
    scales = {c.heading.scale for c in (first, second) if c.heading.scale and b == IMAGINARY}
    if len(scales) > 1:
        raise FormatError(
            f"columns {first.heading.text!r} and {second.heading.text!r} are in different units",
            "export both in one unit",
        )
    label = (
        first.heading if first.heading.kind else replace(first.heading, kind=second.heading.kind)
    )
    scale = scales.pop() if scales else first.heading.scale if form == "magnitude-angle" else 1.0
    return Trace(first.start, second.start, form, scale or 1.0, second.heading.angle_unit, label)


def _no_partner(left: list[Column]) -> FormatError:
    names = ", ".join(repr(c.heading.text) for c in left[:4]) or "none"
    return FormatError(
        f"no complete response: only {names} besides the frequency",
        "export two numbers per response: real and imaginary part, or magnitude and phase"
        + ("; say form= (--form) if they are these" if left and len(left) % 2 == 0 else ""),
    )


def _say_once(notes: list[str], text: str) -> None:
    if text not in notes:
        notes.append(text)
