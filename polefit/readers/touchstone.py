"""Touchstone 1.0, 1.1, 2.0 and 2.1: S, Y, Z, and for two-ports H and G.

Z and Y stay in ohm and siemens and never pass through S. In version 1 the numbers of Z, Y, H
and G are normalised to the reference resistance; some writers ignore this, so the scaling that
was taken is always told, and ``scaling="absolute"`` takes the other.
"""

from __future__ import annotations

import math
import re
from collections.abc import Iterable
from dataclasses import replace
from typing import Literal

import numpy as np

from polefit.errors import ArgumentError, FormatError
from polefit.estimates import si
from polefit.precision import FrequencyPrecision, Precision, Printed
from polefit.readers.large_files import Content
from polefit.readers.printed_frequency import frequency_precision
from polefit.readers.reading import Parsed, ReadOptions, named_ports, printed_form, unit_name
from polefit.readers.text_blocks import numbered_lines, open_text
from polefit.readers.touchstone_header import Header, read_header
from polefit.readers.touchstone_layout import Layout, layout_v1, layout_v2
from polefit.readers.touchstone_numbers import scan
from polefit.responses import (
    Channel,
    ComplexArray,
    FloatArray,
    Quantity,
    ResponseSet,
    port_channels,
)

_QUANTITY: dict[str, Quantity] = {
    "S": "scattering",
    "Z": "impedance",
    "Y": "admittance",
    "H": "hybrid",
    "G": "inverse-hybrid",
}
_SUFFIX = re.compile(r"\.([syzhg])(\d{1,6})p", re.IGNORECASE)
_NUMBER = re.compile(r"[+-]?(?:\d+\.?\d*|\.\d+)(?:[eE][+-]?\d+)?")
_ROWS = 4096
# A normalised impedance level beyond this, 2 kΩ on 50 Ω, may as well be ohms.
_UNUSUAL = 40.0


def ports_of_suffix(suffix: str) -> int | None:
    """Return the number of ports that an extension such as ``.s2p`` states, None if it does not.

    Parameters
    ----------
    suffix : str
        File name extension with its dot.

    Returns
    -------
    int or None
    """
    found = _SUFFIX.fullmatch(suffix)
    return int(found[2]) if found and int(found[2]) else None


def parse(content: Content, options: ReadOptions, *, stem: str, suffix: str = "") -> Parsed:
    """Read a Touchstone file.

    Parameters
    ----------
    content : bytes-like
        The whole file.
    options : ReadOptions
        `scaling`, `node` and `reference_ohm` are used.
    stem : str
        File name without extension: names the node of a one-port.
    suffix : str
        File name extension with its dot, which tells the number of ports of version 1.

    Returns
    -------
    Parsed
        All n² responses, row by row.

    Raises
    ------
    FormatError
        If the file breaks the rules; the line is named.
    ArgumentError
        If an option has no meaning for this file.
    """
    options.refuse_unused({"scaling", "node", "reference_ohm"}, "Touchstone")
    text = open_text(content)
    header = read_header(numbered_lines(text))
    found = scan(text, header.first_line)
    stated = ports_of_suffix(suffix)
    lay_out = layout_v1 if header.version == "1" else layout_v2
    layout = lay_out(found.sections, header, stated)
    _check_rows(header, layout)
    scales, assumed = _scales(header, layout, options)
    channels, named = _channels(header, layout, options, stem)
    responses = ResponseSet(
        frequency_hz=layout.table[:, 0] * header.option.unit_hz,
        values=_values(header, layout, scales),
        channels=channels,
        quantity=_QUANTITY[header.option.parameter],
        reference_ohm=layout.references if header.option.parameter == "S" else None,
    )
    responses = replace(responses, frequency_precision=_axis_precision(header, layout, responses))
    comments = (*header.reference_comments, *found.reference_comments)
    doubts = () if options.scaling else _scaling_doubt(responses, layout, scales)
    return Parsed(
        responses=_with_precision(responses, _precision(header, layout), scales),
        format=f"Touchstone {_version(header)}",
        assumptions=(*assumed, *named, *_noise_note(layout)),
        warnings=(*layout.warnings, *_warnings(header, layout, suffix, comments), *doubts),
        scaling=_scaling(header, scales),
        frequency_unit=unit_name(header.option.unit_hz),
    )


def _version(header: Header) -> str:
    if header.version != "1":
        return header.version
    return "1.0" if len(header.option.references) == 1 else "1.1"


def _check_rows(header: Header, layout: Layout) -> None:
    parameter, ports = header.option.parameter, layout.ports
    if parameter in "HG" and ports != 2:
        what = f"{parameter} parameters of {ports} port{'s' * (ports > 1)}"
        raise FormatError(what, "only two-ports have them", line=header.option.line)
    frequency = layout.table[:, 0]
    if frequency[0] < 0:
        line = layout.line_of(0)
        raise FormatError("negative frequency", "frequencies start at 0", line=line)
    bad = np.flatnonzero(np.diff(frequency) <= 0)
    if bad.size:
        row = int(bad[0]) + 1
        kind = "repeated" if frequency[row] == frequency[row - 1] else "falling"
        what = f"frequency {frequency[row]:.9g} is {kind}"
        remedy = "sort the points and keep one of each"
        raise FormatError(what, remedy, line=layout.line_of(row))


def _values(header: Header, layout: Layout, scales: FloatArray) -> ComplexArray:
    """Turn printed pairs into the n² elements, row by row, in their unit. Read-only."""
    table = layout.table
    values = np.empty((len(table), len(layout.pairs)), dtype=np.complex128)
    first = 2 * np.array(layout.pairs) + 1
    with np.errstate(over="ignore", invalid="ignore"):
        for at in range(0, len(table), _ROWS):  # pieces, so that temporaries stay small
            rows = table[at : at + _ROWS]
            piece = _complex(rows[:, first], rows[:, first + 1], header.option.form)
            values[at : at + _ROWS] = piece if np.all(scales == 1) else piece * scales
    if not np.all(np.isfinite(values)):
        row = int(np.argwhere(~np.isfinite(values))[0, 0])
        what = "a value too large for a number"
        raise FormatError(what, "mend or remove this point", line=layout.line_of(row))
    values.flags.writeable = False
    return values


def _complex(first: FloatArray, second: FloatArray, form: str) -> ComplexArray:
    if form == "ri":
        return np.asarray(first + 1j * second)
    size = np.power(10.0, first / 20) if form == "db" else first
    return np.asarray(size * np.exp(1j * np.deg2rad(second)))


def _scales(
    header: Header, layout: Layout, options: ReadOptions
) -> tuple[FloatArray, tuple[str, ...]]:
    """Factor for each element, and the sentence that tells which scaling was taken."""
    parameter = header.option.parameter
    none = np.ones(layout.ports**2)
    if parameter == "S":
        if options.scaling is not None:
            raise ArgumentError("scaling: scattering parameters have none; leave it out")
        return none, ()
    if header.version != "1":
        if options.scaling == "normalised":
            raise ArgumentError(
                f"scaling: Touchstone {header.version} holds absolute numbers; leave it out"
            )
        return none, ()
    listed = ", ".join(f"{r:g}" for r in dict.fromkeys(layout.references))
    if options.scaling == "absolute":
        told = f"{parameter} numbers taken as absolute as asked, not normalised to {listed} Ω"
        return none, (told,)
    told = f"{parameter} numbers taken as normalised to {listed} Ω, as version 1 demands"
    if len(set(layout.references)) > 1:
        told += ": of ports i and j with the square root of R_i R_j"
    if options.scaling is None:
        told += '; scaling="absolute" (--scaling) takes them as ohm and siemens'
    assumed = () if set(layout.references) == {1.0} else (told,)
    return _normalisation(parameter, np.array(layout.references)), assumed


def _scaling(header: Header, scales: FloatArray) -> str | None:
    """Tell what printed numbers were multiplied with; None where they were not."""
    if np.all(scales == 1):
        return None
    if len(set(scales.tolist())) == 1:
        unit = {"Z": "Ω", "Y": "S"}[header.option.parameter]
        return f"printed numbers × {scales[0]:g} = {unit}"
    listed = ", ".join(f"{scale:.6g}" for scale in scales[:9])
    return f"printed numbers × {listed}{' …' if scales.size > 9 else ''}, row by row"


def _scaling_doubt(responses: ResponseSet, layout: Layout, scales: FloatArray) -> tuple[str, ...]:
    """Warn where normalised numbers would be so large that ohm or siemens seem to be meant."""
    if np.all(scales == 1) or responses.quantity not in ("impedance", "admittance"):
        return ()
    own = slice(None, None, layout.ports + 1)  # diagonal of the matrix
    size = float(np.median(np.abs(responses.values[:_ROWS, own] / scales[own])))
    if responses.quantity == "impedance":
        suspicious, level = size > _UNUSUAL, size * scales[0]
    else:
        suspicious, level = size < 1 / _UNUSUAL, 1 / (size * scales[0]) if size else np.inf
    if not suspicious:
        return ()
    return (
        f"taken as normalised, the numbers are typically {si(level, 'Ω', 2)}: if the exporter "
        'ignored the normalisation, say scaling="absolute" (--scaling)',
    )


def _normalisation(parameter: str, references: FloatArray) -> FloatArray:
    """Ratio of an element to its normalised number.

    Voltages are normalised as v/sqrt(R), currents as i·sqrt(R), port by port.
    """
    product = np.sqrt(np.outer(references, references))
    if parameter == "Z":
        return product.ravel()
    if parameter == "Y":
        return 1 / product.ravel()
    first, second = references
    ratio = np.sqrt(first / second)
    if parameter == "H":  # V1 and I2 from I1 and V2
        return np.array([first, ratio, ratio, 1 / second])
    return np.array([1 / first, 1 / ratio, 1 / ratio, second])  # G: I1 and V2 from V1 and I2


def _precision(header: Header, layout: Layout) -> Precision | None:
    """Tell from a sample how the numbers were printed, first and second of a pair apart."""
    places = _sample(layout)
    first = printed_form([token for place, token in places if place % 2 == 1])
    second = printed_form([token for place, token in places if place and place % 2 == 0])
    if first is None and second is None:
        return None
    forms: dict[str, Literal["real-imaginary", "magnitude-angle", "decibel-angle"]] = {
        "ri": "real-imaginary",
        "ma": "magnitude-angle",
        "db": "decibel-angle",
    }
    return Precision(forms[header.option.form], first or Printed(), second or Printed())


def _sample(layout: Layout) -> list[tuple[int, str]]:
    """Numbers as printed, with their place in the row."""
    width = layout.table.shape[1]
    return [
        (index % width, token)
        for index, token in layout.section.sample
        if index < layout.table.size
    ]


def _axis_precision(
    header: Header, layout: Layout, responses: ResponseSet
) -> FrequencyPrecision | None:
    tokens = [token for place, token in _sample(layout) if place == 0]
    return frequency_precision(tokens, responses.frequency_hz, header.option.unit_hz)


def _with_precision(
    responses: ResponseSet, precision: Precision | None, scales: FloatArray
) -> ResponseSet:
    if precision is None:
        return responses
    if len(set(scales.tolist())) == 1:
        return replace(responses, precision=replace(precision, scale=float(scales[0])))
    # One scale for each response: keep the rounding as a number instead.
    first, second, _ = precision.rounding_std(responses.values / scales)
    return replace(responses, sample_std=scales * np.sqrt((first**2 + second**2) / 2))


def _channels(
    header: Header, layout: Layout, options: ReadOptions, stem: str
) -> tuple[tuple[Channel, ...], tuple[str, ...]]:
    """Channels, and the sentence that tells where port names came from."""
    if layout.ports == 1:
        name = options.node or stem
        return (Channel(name, name),), ()
    if options.node is not None:
        plain = port_channels([f"port{number}" for number in layout.port_order])
        return named_ports(plain, options.node, layout.ports), ()
    given = [header.port_names.get(number) for number in layout.port_order]
    names = [name for name in given if name]
    if len(set(names)) == layout.ports:
        return port_channels(names), (f"port names taken from comments: {', '.join(names)}",)
    return port_channels([f"port{number}" for number in layout.port_order]), ()


def _noise_note(layout: Layout) -> tuple[str, ...]:
    if not layout.noise_points:
        return ()
    return (f"{layout.noise_points} lines of noise parameters are left out",)


def _warnings(
    header: Header, layout: Layout, suffix: str, comments: Iterable[tuple[int, str]]
) -> tuple[str, ...]:
    found = []
    parameter = header.option.parameter
    letter = _SUFFIX.fullmatch(suffix)
    if letter and letter[1].upper() not in ("S", parameter):
        found.append(f"named {suffix}, but its option line says {parameter}, which is taken")
    other = (line for line, said in comments if _states_other(said, layout.references))
    if parameter == "S" and (comment_line := next(other, None)) is not None:
        listed = ", ".join(f"{r:g}" for r in dict.fromkeys(layout.references))
        found.append(
            f"line {comment_line}: a comment states other port impedances; the reference of the "
            f"file, {listed} Ω, is taken: check that the export was renormalised to it"
        )
    if header.option.form == "ma" and np.any(layout.table[:, 1::2] < 0):
        found.append("negative magnitudes, taken as a turn by 180 degrees")
    return tuple(found)


def _states_other(said: str, references: tuple[float, ...]) -> bool:
    """Whether a comment such as ``50.0 0.0 75.0 0.0`` (real, imaginary) differs."""
    numbers = [abs(float(word)) for word in _NUMBER.findall(said)]
    return any(
        number != 0 and not any(math.isclose(number, r, rel_tol=1e-6) for r in references)
        for number in numbers
    )
