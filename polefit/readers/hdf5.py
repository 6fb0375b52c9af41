"""Responses in HDF5, in polefit's own layout, which anyone can read and write with h5py.

Layout, version 1. Text is UTF-8, of fixed or variable length; frequencies are in hertz.

================================  =================================================================
``/``                             attributes ``format`` = "polefit.responses", ``version`` = 1
``/responses/0``, ``/1`` …        one group for each response set, numbered from 0
``…/frequency_hz``                (N,) float, strictly increasing
``…/values``                      (N, K) complex: compound {r, i} as h5py stores it, compound
                                  {real, imag}, or HDF5's own complex class
``…/channels``                    (K, 2) text: output, input
``…`` attribute ``quantity``      what the values are, in ohm, siemens or dimensionless
``…`` attribute ``termination``   terminations for which the modes hold (optional)
``…`` attribute ``pump_hz``       fundamental of the periodic drive (optional)
``…`` attribute ``reference_ohm``  (n,) or scalar float (optional)
``…/sample_std``                  (N, K) float: standard uncertainty of each real and imaginary
                                  part (optional)
``…/precision``                   group (optional): how the numbers were printed; attributes
                                  ``form``, ``scale``, ``radians`` and, where known,
                                  ``first_significant``, ``first_decimals``,
                                  ``second_significant``, ``second_decimals``
``…/frequency_precision``         group (optional): how the frequencies were printed; attributes
                                  ``scale_hz``, ``exact`` and ``significant`` or ``decimals``
``…/source``                      group (optional): attributes ``file``, ``sha256``, ``format``,
                                  dataset ``assumptions`` (m,) text
================================  =================================================================

Whatever else the file holds is left alone. Links to other places and other files are not followed.
"""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np

from polefit.atomic import whole_file
from polefit.errors import ArgumentError, DataError, FormatError
from polefit.precision import FrequencyPrecision, Precision, Printed
from polefit.readers.hdf5_safely import (
    child_dataset,
    child_group,
    complex_array,
    damage_is_told,
    float_array,
    number,
    opened,
    text,
    text_array,
)
from polefit.readers.reading import Parsed, ReadOptions
from polefit.responses import Channel, ResponseSet, Source

if TYPE_CHECKING:
    import h5py

    from polefit.readers.large_files import Content

FORMAT = "polefit.responses"
VERSION = 1
_NAME = f"HDF5 ({FORMAT} {VERSION})"
_FORMS = ("real-imaginary", "magnitude-angle", "decibel-angle")
_MOST_SETS = 10_000


def parse(content: Content, options: ReadOptions, *, stem: str = "") -> Parsed:
    """Read a file that holds one response set.

    Parameters
    ----------
    content : bytes-like
        The whole file.
    options : ReadOptions
        Only `reference_ohm` is used, for conversion.
    stem : str
        Not used: channels are named in the file.

    Returns
    -------
    Parsed

    Raises
    ------
    FormatError
        If the file is damaged, of another program, or holds several response sets.
    ArgumentError
        If an option has no meaning for this file.
    """
    found = parse_all(content, options)
    if len(found) > 1:
        what = f"{len(found)} response sets in one file"
        raise FormatError(what, "polefit.read_all gives them all")
    return found[0]


def parse_all(content: Content, options: ReadOptions) -> tuple[Parsed, ...]:
    """Read all response sets of a file.

    Parameters
    ----------
    content : bytes-like
        The whole file.
    options : ReadOptions
        Only `reference_ohm` is used, for conversion.

    Returns
    -------
    tuple of Parsed
        At least one.

    Raises
    ------
    FormatError
        If the file is damaged or of another program.
    ArgumentError
        If an option has no meaning for this file.
    """
    options.refuse_unused({"reference_ohm"}, "HDF5")
    with damage_is_told(), opened(content) as file:
        _check_mark(file, content)
        sets = child_group(file, "responses")
        count = len(sets)
        if not 0 < count <= _MOST_SETS:
            raise FormatError(f"{count} response sets", "at least one is needed")
        return tuple(_parsed(child_group(sets, str(i))) for i in range(count))


def write_hdf5(path: str | Path, responses: ResponseSet | Sequence[ResponseSet]) -> None:
    """Write response sets to HDF5, from which :func:`polefit.read` gives them back exactly.

    The file appears whole or not at all. Its layout is told in :mod:`polefit.readers.hdf5`.

    Parameters
    ----------
    path : str or pathlib.Path
        The file to appear.
    responses : ResponseSet or sequence of ResponseSet
        At least one; several, such as the probes of one circuit, come back with
        :func:`polefit.read_all`.

    Returns
    -------
    None

    Raises
    ------
    FileError
        If the file cannot be written there.
    ArgumentError
        If there is nothing to write.

    Examples
    --------
    >>> import polefit
    >>> polefit.write_hdf5("gate2.h5", polefit.read("gate2.s1p"))  # doctest: +SKIP
    """
    import h5py

    sets = [responses] if isinstance(responses, ResponseSet) else responses
    with whole_file(path) as temporary, h5py.File(temporary, "w") as file:
        put_responses(file, sets)


def put_responses(file: h5py.File, sets: Sequence[ResponseSet]) -> None:
    """Put the version mark and the response sets into an open file.

    Parameters
    ----------
    file : h5py.File
        Open for writing.
    sets : sequence of ResponseSet
        At least one.

    Raises
    ------
    ArgumentError
        If there is nothing to write.
    """
    if not sets:
        raise ArgumentError("sets: no response set; give at least one")
    put_text(file, "format", FORMAT)
    file.attrs["version"] = VERSION
    for i, responses in enumerate(sets):
        _put(file.create_group(f"responses/{i}"), responses)


def put_text(place: h5py.HLObject, name: str, content: str) -> None:
    """Put a text attribute of fixed length, which survives damage better than a variable one."""
    import h5py

    raw = content.encode("utf-8", "backslashreplace")
    kind = h5py.string_dtype("utf-8", max(len(raw), 1))
    place.attrs.create(name, np.array(raw, dtype=kind))


def put_texts(group: h5py.Group, name: str, rows: Sequence[Any]) -> None:
    """Put an array of text of fixed length; `rows` may be nested."""
    import h5py

    encoded = np.char.encode(np.array(rows, dtype=np.str_), "utf-8", "backslashreplace")
    kind = h5py.string_dtype("utf-8", max(encoded.dtype.itemsize, 1))
    group.create_dataset(name, data=encoded.astype(kind))


def _put(group: h5py.Group, responses: ResponseSet) -> None:
    group.create_dataset("frequency_hz", data=responses.frequency_hz)
    group.create_dataset("values", data=responses.values)
    put_texts(group, "channels", [(c.output, c.input) for c in responses.channels])
    put_text(group, "quantity", responses.quantity)
    put_text(group, "termination", responses.termination)
    if responses.pump_hz is not None:
        group.attrs["pump_hz"] = responses.pump_hz
    if responses.reference_ohm is not None:
        group.attrs["reference_ohm"] = np.array(responses.reference_ohm)
    if responses.sample_std is not None:
        group.create_dataset("sample_std", data=responses.sample_std)
    if responses.precision is not None:
        _put_precision(group.create_group("precision"), responses.precision)
    if responses.frequency_precision is not None:
        _put_axis(group.create_group("frequency_precision"), responses.frequency_precision)
    if responses.source is not None:
        _put_source(group.create_group("source"), responses.source)


def _put_precision(group: h5py.Group, precision: Precision) -> None:
    put_text(group, "form", precision.form)
    group.attrs["scale"] = precision.scale
    group.attrs["radians"] = precision.radians
    for place, printed in (("first", precision.first), ("second", precision.second)):
        if printed.significant is not None:
            group.attrs[f"{place}_significant"] = printed.significant
        if printed.decimals is not None:
            group.attrs[f"{place}_decimals"] = printed.decimals


def _put_axis(group: h5py.Group, precision: FrequencyPrecision) -> None:
    group.attrs["scale_hz"] = precision.scale_hz
    group.attrs["exact"] = precision.exact
    if precision.printed.significant is not None:
        group.attrs["significant"] = precision.printed.significant
    if precision.printed.decimals is not None:
        group.attrs["decimals"] = precision.printed.decimals


def _put_source(group: h5py.Group, source: Source) -> None:
    put_text(group, "file", source.file)
    put_text(group, "sha256", source.sha256)
    put_text(group, "format", source.format)
    put_texts(group, "assumptions", list(source.assumptions))


def _check_mark(file: h5py.File, content: Content) -> None:
    mark = file.attrs.get("format") if "format" in file.attrs else None
    if not isinstance(mark, str | bytes | np.ndarray) or text(mark, "format") != FORMAT:
        maker = " (MATLAB)" if bytes(content[:6]) == b"MATLAB" else ""
        what = f"an HDF5 file of another program{maker}: no mark 'format' = '{FORMAT}'"
        raise FormatError(what, "export text, or write the layout told in polefit.readers.hdf5")
    version = number(file, "version")
    if version != VERSION:
        raise FormatError(f"layout version {version:g} is not known", "update polefit")


def _parsed(group: h5py.Group) -> Parsed:
    frequency = float_array(child_dataset(group, "frequency_hz"), dimensions=1)
    values = complex_array(child_dataset(group, "values"))
    names = text_array(child_dataset(group, "channels"))
    if names.ndim != 2 or names.shape[1] != 2:
        what = f"{group.name}/channels: shape {names.shape}"
        raise FormatError(what, "give an output and an input for each response")
    std = group.get("sample_std", getlink=True) and child_dataset(group, "sample_std")
    try:
        responses = ResponseSet(
            frequency_hz=frequency,
            values=values,
            channels=tuple(Channel(str(output), str(drive)) for output, drive in names),
            quantity=text(_attribute(group, "quantity"), "quantity"),  # type: ignore[arg-type]
            pump_hz=_optional(group, "pump_hz"),
            reference_ohm=_references(group),
            termination=text(group.attrs.get("termination", ""), "termination"),
            precision=_precision(group),
            sample_std=None if std is None else float_array(std, dimensions=2),
            source=_source(group),
            frequency_precision=_axis(group),
        )
    except (DataError, ArgumentError) as error:
        what, _, remedy = str(error).partition("; ")
        raise FormatError(f"{group.name}: {what}", remedy or "mend the file") from error
    return Parsed(responses, _NAME, _history(responses), ())


def _history(responses: ResponseSet) -> tuple[str, ...]:
    """Tell what was assumed when the responses were first read."""
    source = responses.source
    if source is None:
        return ()
    first = f"first read from {source.file} ({source.format}, sha256 {source.sha256})"
    return (first, *source.assumptions)


def _attribute(place: h5py.HLObject, name: str) -> Any:
    if name not in place.attrs:
        what = f"{place.name}: no attribute {name!r}"
        raise FormatError(what, "write the layout told in polefit.readers.hdf5")
    return place.attrs[name]


def _optional(group: h5py.Group, name: str) -> float | None:
    return number(group, name) if name in group.attrs else None


def _whole(group: h5py.Group, name: str) -> int | None:
    value = _optional(group, name)
    if value is None:
        return None
    if not (value == int(value) and 0 <= value <= 400):
        raise FormatError(f"{group.name}: {name} = {value:g}", "give a count of digits")
    return int(value)


def _references(group: h5py.Group) -> tuple[float, ...] | None:
    if "reference_ohm" not in group.attrs:
        return None
    return tuple(np.atleast_1d(np.asarray(group.attrs["reference_ohm"], np.float64)).tolist())


def _precision(group: h5py.Group) -> Precision | None:
    if group.get("precision", getlink=True) is None:
        return None
    stored = child_group(group, "precision")
    form = text(_attribute(stored, "form"), "form")
    if form not in _FORMS:
        raise FormatError(f"{stored.name}: form {form!r}", f"use one of {', '.join(_FORMS)}")
    scale = number(stored, "scale")
    if not np.isfinite(scale) or scale == 0:
        raise FormatError(f"{stored.name}: scale = {scale:g}", "give a finite factor")
    first, second = (
        Printed(_whole(stored, f"{place}_significant"), _whole(stored, f"{place}_decimals"))
        for place in ("first", "second")
    )
    radians = bool(number(stored, "radians"))
    return Precision(form, first, second, scale, radians)  # type: ignore[arg-type]


def _axis(group: h5py.Group) -> FrequencyPrecision | None:
    if group.get("frequency_precision", getlink=True) is None:
        return None
    stored = child_group(group, "frequency_precision")
    scale = number(stored, "scale_hz")
    if not 0 < scale < np.inf:
        raise FormatError(f"{stored.name}: scale_hz = {scale:g}", "give hertz per printed unit")
    printed = Printed(_whole(stored, "significant"), _whole(stored, "decimals"))
    return FrequencyPrecision(printed, scale, bool(number(stored, "exact")))


def _source(group: h5py.Group) -> Source | None:
    if group.get("source", getlink=True) is None:
        return None
    stored = child_group(group, "source")
    assumptions = text_array(child_dataset(stored, "assumptions"))
    file, digest, name = (
        text(_attribute(stored, key), key) for key in ("file", "sha256", "format")
    )
    return Source(file, digest, name, tuple(str(line) for line in assumptions.ravel()))
