"""SPICE raw files: plots of vectors, each with a text header and ASCII or binary numbers.

The AC plot is taken. Which node was driven is not in the file; see :mod:`polefit.readers.driven`.
"""

from __future__ import annotations

import re
from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace

import numpy as np

from polefit.errors import AmbiguousFileError, ArgumentError, FormatError
from polefit.precision import Precision, Printed
from polefit.readers.driven import Responses, Vector, port_responses, responses_of
from polefit.readers.large_files import Content
from polefit.readers.printed_frequency import frequency_precision
from polefit.readers.reading import REFERENCE_UNKNOWN, Parsed, ReadOptions, printed_form
from polefit.readers.spice_raw_numbers import Numbers, ascii_numbers, binary_numbers
from polefit.responses import ComplexArray, FloatArray, ResponseSet

_HEADER_BYTES = 1 << 20
_KEY = re.compile(r"([A-Za-z][A-Za-z. ]*?)\s*:\s*(.*)")
_AGAIN = "run the simulation again and save its raw file"


@dataclass(frozen=True)
class Plot:
    """The header of one plot.

    Parameters
    ----------
    name : str
        Plot name, such as "AC Analysis".
    title : str
        Title of the circuit.
    complex_numbers : bool
        Whether numbers are complex.
    names, types : tuple of str
        Vectors and what they are.
    points : int
        Declared number of points.
    binary : bool
        Whether the numbers are binary.
    start : int
        Byte at which the numbers begin.
    line : int
        Line of the first number, for ASCII.
    """

    name: str
    title: str
    complex_numbers: bool
    names: tuple[str, ...]
    types: tuple[str, ...]
    points: int
    binary: bool
    start: int
    line: int

    @property
    def over_frequency(self) -> bool:
        """Whether the plot holds complex vectors over frequency."""
        return self.complex_numbers and self.names[0].lower() in ("frequency", "freq", "hertz")


def parse(content: Content, options: ReadOptions, *, stem: str) -> Parsed:
    """Read a SPICE raw file.

    Parameters
    ----------
    content : bytes-like
        The whole file.
    options : ReadOptions
        `driven` is needed unless the file holds network parameters; `quantity`, `select` and,
        for these, `node` and `reference_ohm` are honoured.
    stem : str
        Not used: nodes are named in the file.

    Returns
    -------
    Parsed

    Raises
    ------
    FormatError
        If the file is damaged, cut, or of a dialect that is not read.
    AmbiguousFileError
        If `driven` is missing or several AC plots could be meant.
    ArgumentError
        If an option does not fit the file.
    """
    options.refuse_unused(("driven", "node", "reference_ohm"), "SPICE raw")
    _refuse_wide(content)
    numbers, plot, others, warnings = _ac_plot(content, options)
    frequency = numbers.frequency
    _check_rising(frequency, numbers.place_of)
    how = _how(plot, options)
    how, silent = _without_silent(how, numbers, options)
    reference, unknown = _reference(how, options)
    values = _values(numbers, how)
    responses = ResponseSet(
        frequency_hz=frequency,
        values=values,
        channels=how.channels,
        quantity=how.quantity,
        reference_ohm=reference,
        precision=_precision(numbers.tokens),
        frequency_precision=frequency_precision(numbers.tokens[2], frequency, 1.0),
    )
    name = f"SPICE raw ({'binary' if plot.binary else 'ASCII'})"
    taken = [f"plot {plot.name!r} taken; {', '.join(map(repr, others))} left out"] if others else []
    assumptions = (*numbers.assumptions, *taken, *how.assumptions, *silent)
    mark = None if plot.binary else "."
    return Parsed(responses, name, assumptions, (*warnings, *unknown), decimal_mark=mark)


def _how(plot: Plot, options: ReadOptions) -> Responses:
    vectors = _vectors(plot)
    ports = port_responses(vectors, options)
    if options.node is not None and ports is None:
        raise ArgumentError("node: the vectors of the file have names; leave it out")
    return ports or responses_of(vectors, options)


def _reference(
    how: Responses, options: ReadOptions
) -> tuple[tuple[float, ...] | None, tuple[str, ...]]:
    """Take the reference of scattering parameters from the option; no raw file states it."""
    if how.quantity != "scattering":
        if options.reference_ohm is not None:
            raise ArgumentError("reference_ohm: has no meaning for these data; leave it out")
        return None, ()
    if options.reference_ohm is None:
        return None, (REFERENCE_UNKNOWN,)
    ports = {name for c in how.channels for name in (c.output, c.input)}
    return (options.reference_ohm,) * len(ports), ()


def _refuse_wide(content: Content) -> None:
    head = bytes(content[:64])
    if not head:
        raise FormatError("the file is empty", _AGAIN)
    if head.startswith((b"\xff\xfe", b"\xfe\xff")) or b"\x00" in head:
        raise FormatError(
            "a header in UTF-16 (or no raw file at all)",
            "save it as an ASCII raw file with a plain header, or export text columns",
        )


def _ac_plot(content: Content, options: ReadOptions) -> tuple[Numbers, Plot, list[str], list[str]]:
    """Find the AC plot and read its numbers; list the names of the others."""
    found: list[tuple[Plot, Numbers]] = []
    others: list[str] = []
    warnings: list[str] = []
    position, line = 0, 1
    while True:
        position, line = _next_header(content, position, line)
        if position >= len(content):
            break
        try:
            plot = _header(content, position, line)
            wanted = _wanted_columns(plot, options)
            read = binary_numbers if plot.binary else ascii_numbers
            numbers = read(content, plot, wanted)
        except FormatError as error:
            # A damaged plot behind a whole AC plot does no harm; say so.
            if not found or not _begins_plot(content, position):
                raise
            warnings.append(f"after the AC plot: {error}")
            break
        if plot.over_frequency:
            found.append((plot, numbers))
        else:
            others.append(plot.name)
        position, line = numbers.end, numbers.end_line
    if not found:
        listed = ", ".join(map(repr, others))
        raise FormatError(
            f"no AC plot with complex numbers over frequency; the file holds {listed or 'nothing'}",
            "save the raw file of an AC analysis",
        )
    if len(found) > 1:
        titles = " and ".join(f"{p.name!r} of {p.title!r}" for p, _ in found[:3])
        raise AmbiguousFileError(
            f"{len(found)} AC plots: {titles}", "write each analysis to a file of its own"
        )
    plot, numbers = found[0]
    return numbers, plot, others, warnings


def _next_header(content: Content, position: int, line: int) -> tuple[int, int]:
    """Skip blanks between plots."""
    while position < len(content):
        piece = bytes(content[position : position + 4096])
        rest = piece.lstrip()
        line += piece[: len(piece) - len(rest)].count(b"\n")
        position += len(piece) - len(rest)
        if rest:
            break
    return position, line


def _begins_plot(content: Content, position: int) -> bool:
    return bytes(content[position : position + 6]).lower() == b"title:"


def _header(content: Content, position: int, line: int) -> Plot:
    """Read the header of a plot.

    Raises
    ------
    FormatError
        With the line, if it breaks the rules.
    """
    piece = bytes(content[position : position + _HEADER_BYTES])
    end = re.search(rb"^(Values|Binary):[ \t]*\r?\n", piece, re.MULTILINE | re.IGNORECASE)
    text = (piece if end is None else piece[: end.start()]).decode("utf-8", "replace")
    if not _begins_plot(content, position):
        what = "a plot must begin with 'Title:'"
        if position:
            what = "bytes that belong to no plot: No. Points or No. Variables may be wrong"
        raise FormatError(what, _AGAIN, line=line)
    if end is None:
        raise FormatError(
            "the header has no 'Values:' or 'Binary:': the file is cut within it",
            _AGAIN,
            line=line + text.count("\n"),
        )
    fields, vectors = _header_fields(text, line)
    count = _count(fields, "no. variables", 1)
    if len(vectors) != count:
        raise FormatError(
            f"No. Variables says {count}, {len(vectors)} are listed", _AGAIN, line=line
        )
    flags = fields.get("flags", ("", line))[0].lower().split()
    if not {"real", "complex"} & set(flags):
        raise FormatError("no 'Flags: real' or 'Flags: complex' in the header", _AGAIN, line=line)
    return Plot(
        name=fields.get("plotname", ("unnamed", 0))[0] or "unnamed",
        title=fields.get("title", ("", 0))[0],
        complex_numbers="complex" in flags,
        names=tuple(v[0] for v in vectors),
        types=tuple(v[1] for v in vectors),
        points=_count(fields, "no. points", 0),
        binary=end[1].lower() == b"binary",
        start=position + end.end(),
        line=line + piece[: end.end()].count(b"\n"),
    )


def _header_fields(
    text: str, line: int
) -> tuple[dict[str, tuple[str, int]], list[tuple[str, str]]]:
    """Split a header into its fields, with their lines, and its list of vectors."""
    fields: dict[str, tuple[str, int]] = {}
    vectors: list[tuple[str, str]] = []
    in_variables = False
    for number, row in enumerate(text.split("\n"), line):
        parts = row.split()
        if in_variables and len(parts) >= 3 and parts[0].isdigit():
            if int(parts[0]) != len(vectors):
                raise FormatError(
                    f"variable {parts[0]} where {len(vectors)} should be", _AGAIN, line=number
                )
            vectors.append((parts[1], parts[2].lower()))
            continue
        key = _KEY.match(row)
        if key:
            fields.setdefault(key[1].lower(), (key[2].strip(), number))
            in_variables = key[1].lower() == "variables"
            first = key[2].split()
            if in_variables and len(first) >= 3 and first[0] == "0":
                vectors.append((first[1], first[2].lower()))
        elif in_variables and parts:
            raise FormatError(f"no variable: {row.strip()[:60]!r}", _AGAIN, line=number)
    return fields, vectors


def _count(fields: dict[str, tuple[str, int]], key: str, least: int) -> int:
    text, line = fields.get(key, ("", None))
    if not re.fullmatch(r"\d{1,15}", text) or int(text) < least:
        raise FormatError(f"{key.title()}: {text[:30]!r} is no count", _AGAIN, line=line)
    return int(text)


def _vectors(plot: Plot) -> list[Vector]:
    """Name the vectors behind the frequency: node voltages and branch currents."""
    found = []
    for name, kind in zip(plot.names[1:], plot.types[1:], strict=True):
        bare = re.fullmatch(r"[vi]\((.+)\)", name, re.IGNORECASE)
        branch = re.fullmatch(r"(.+)#branch", name, re.IGNORECASE)
        current = kind == "current" or branch is not None or name[:2].lower() == "i("
        found.append(Vector((bare or branch or [name, name])[1], current))
    for vector in found:
        if found.count(vector) > 1:
            raise FormatError(f"two vectors are named {vector.name!r}", _AGAIN)
    return found


def _wanted_columns(plot: Plot, options: ReadOptions) -> tuple[int, ...]:
    """Find the vectors behind the frequency that are needed; none of a foreign plot."""
    if not plot.over_frequency:
        return ()
    told = options.driven is not None or options.quantity == "transfer"
    if not told and port_responses(_vectors(plot), options) is None:
        return ()
    how = _how(plot, options)
    also = [i for i in (how.divide_by, how.driven_by_current) if i is not None]
    return tuple(dict.fromkeys([*how.columns, *also]))


def _without_silent(
    how: Responses, numbers: Numbers, options: ReadOptions
) -> tuple[Responses, list[str]]:
    """Leave out nodes that are zero at every point (AC grounds), unless they were selected."""
    if options.select is not None or how.quantity == "scattering":
        return how, []
    places = {vector: at for at, vector in enumerate(numbers.columns)}
    silent = [i for i in how.columns if not numbers.values[:, places[i]].any()]
    if not silent or len(silent) == len(how.columns):
        return how, []
    kept = [k for k, i in enumerate(how.columns) if i not in silent]
    names = [c.output for c, i in zip(how.channels, how.columns, strict=True) if i in silent]
    less = replace(
        how,
        columns=tuple(how.columns[k] for k in kept),
        channels=tuple(how.channels[k] for k in kept),
    )
    return less, [f"left out, zero at every point: {', '.join(names)}"]


def _values(numbers: Numbers, how: Responses) -> ComplexArray:
    """Responses from the vectors read, with sign and divisor."""
    places = {vector: at for at, vector in enumerate(numbers.columns)}
    wanted = [places[i] for i in how.columns]
    divisor = None if how.divide_by is None else numbers.values[:, places[how.divide_by]].copy()
    values = numbers.values
    if how.driven_by_current is not None:
        how.refuse_driven_by_voltage(values[:, places[how.driven_by_current]])
    if wanted != list(range(values.shape[1])):
        values = values[:, wanted]
    if divisor is not None:
        with np.errstate(all="ignore"):
            values = values / divisor[:, np.newaxis]
        bad = ~np.isfinite(values).all(axis=1)
        if bad.any():
            point = int(np.flatnonzero(bad)[0])
            raise FormatError(
                f"point {point + 1}: the voltage of the driven node is too small to divide by",
                "name another node with driven= (--driven)",
            )
    return np.negative(values, out=values) if how.sign < 0 else values


def _check_rising(frequency: FloatArray, place_of: Callable[[int], tuple[str, int | None]]) -> None:
    bad = np.flatnonzero(np.r_[frequency[0] < 0, np.diff(frequency) <= 0])
    if not bad.size:
        return
    row = int(bad[0])
    where, line = place_of(row)
    if row == 0:
        raise FormatError(f"{where}negative frequency {frequency[0]:.12g}", _AGAIN, line=line)
    kind = "comes again" if frequency[row] == frequency[row - 1] else "is below the one before"
    raise FormatError(
        f"{where}frequency {frequency[row]:.12g} {kind}",
        "save one AC sweep with rising frequencies",
        line=line,
    )


def _precision(tokens: tuple[Sequence[str], Sequence[str], Sequence[str]]) -> Precision | None:
    first, second = printed_form(tokens[0]), printed_form(tokens[1])
    if first is None and second is None:
        return None
    return Precision("real-imaginary", first or Printed(), second or Printed())
