"""One file per format, each a pure ``parse(content, options, …) -> Parsed``; and ``read``.

The format is recognised by content first, by the file name only where content leaves it open.
"""

from __future__ import annotations

import hashlib
import importlib
import mmap
import os
import stat
from collections.abc import Iterable
from dataclasses import replace
from pathlib import Path
from typing import Any, Literal, Protocol, cast

from polefit.conversions import convert
from polefit.errors import ArgumentError, DataError, FileError, FormatError, NotSupportedError
from polefit.readers.large_files import Content, release
from polefit.readers.reading import Parsed, ReadOptions
from polefit.readers.recognition import Format, recognise
from polefit.responses import Quantity, ResponseSet, Source

# Smaller files are read at once; larger ones are mapped, so that only their numbers take memory.
_MAPPED_BYTES = 32 << 20
_HASHED_BYTES = 4 << 20
# Formats whose columns mean something only together with what is selected or asked for.
_SETTLE_THEMSELVES = ("delimited", "spice_raw")


class _Parser(Protocol):
    def __call__(self, content: Content, options: ReadOptions, *, stem: str) -> Parsed: ...


def read(
    path: str | os.PathLike[str],
    *,
    quantity: str | None = None,
    driven: str | None = None,
    select: Iterable[str] | None = None,
    node: str | None = None,
    decimal: Literal[".", ","] | None = None,
    delimiter: str | None = None,
    frequency_unit: str | None = None,
    form: Literal["real-imaginary", "magnitude-angle", "decibel-angle"] | None = None,
    angle_unit: Literal["deg", "rad"] | None = None,
    scaling: Literal["normalised", "absolute"] | None = None,
    reference_ohm: float | None = None,
    pump_hz: float | None = None,
) -> ResponseSet:
    """Read a file exported from a circuit simulator.

    Touchstone 1.0 to 2.1, delimited text, SPICE raw files and polefit's own HDF5 are read.
    Options settle what a file leaves open; one that has no meaning for a file is refused.

    Parameters
    ----------
    path : str or path-like
        The file.
    quantity : str, optional
        What a text file holds, where it does not say; or the quantity wanted: complete
        matrices are converted between scattering, impedance and admittance.
    driven : str, optional
        Node driven by the 1 A (or 1 V) source, for files that hold node voltages or currents.
    select : iterable of str, optional
        Outputs to keep, in this order.
    node : str, optional
        Name of the node of a one-port file, by default the stem of the file name; or the names
        of all ports of an n-port file, separated by commas.
    decimal : {".", ","}, optional
        Decimal mark of a text file.
    delimiter : str, optional
        Field separator of a text file.
    frequency_unit : str, optional
        Hz, kHz, MHz, GHz or THz, where a text file does not say.
    form : {"real-imaginary", "magnitude-angle", "decibel-angle"}, optional
        What the two numbers of a sample are, where a text file does not say.
    angle_unit : {"deg", "rad"}, optional
        Unit of angles, where a text file does not say.
    scaling : {"normalised", "absolute"}, optional
        Whether Z, Y, H, G numbers of a Touchstone 1.x file are normalised to the reference.
    reference_ohm : float, optional
        Reference resistance, where scattering data do not say, or to convert into them.
    pump_hz : float, optional
        Frequency of the periodic drive, in hertz, where the file holds small-signal responses of
        a circuit under large drive: few formats can say it.

    Returns
    -------
    ResponseSet
        With its source: file, digest, format, and every assumption made.

    Raises
    ------
    FileError
        If the file is missing or unreadable; `FormatError` if it breaks the rules of its
        format, `AmbiguousFileError` if an option must settle how it is meant.
    ArgumentError
        If an option is unknown, or does not fit the file.
    DataError
        If a conversion is asked for that the data do not allow.

    Examples
    --------
    >>> import polefit
    >>> polefit.read("gate2.s1p", quantity="impedance")  # doctest: +SKIP
    <ResponseSet impedance: 401 points, 1e+08 to 4e+09 Hz, 1 channels>
    """
    return read_with_report(
        path,
        quantity=quantity,
        driven=driven,
        select=select,
        node=node,
        decimal=decimal,
        delimiter=delimiter,
        frequency_unit=frequency_unit,
        form=form,
        angle_unit=angle_unit,
        scaling=scaling,
        reference_ohm=reference_ohm,
        pump_hz=pump_hz,
    ).responses


def read_with_report(path: str | os.PathLike[str], **options: Any) -> Parsed:
    """Read a file and tell its format, every assumption, and what deserves a second look.

    Parameters
    ----------
    path : str or path-like
        The file.
    **options
        As for :func:`read`.

    Returns
    -------
    Parsed
        The responses with their source.

    Raises
    ------
    FileError, ArgumentError, DataError
        As for :func:`read`.
    """
    return _read(path, options, several=False)[0]


def read_all(path: str | os.PathLike[str], **options: Any) -> tuple[ResponseSet, ...]:
    """Read all response sets of a file; only HDF5 files can hold more than one.

    Parameters
    ----------
    path : str or path-like
        The file, such as one written by :func:`polefit.write_hdf5`, or the ``--hdf5`` result
        of an identification, which holds the responses that it judged.
    **options
        As for :func:`read`.

    Returns
    -------
    tuple of ResponseSet
        At least one.

    Raises
    ------
    FileError, ArgumentError, DataError
        As for :func:`read`.
    """
    return tuple(parsed.responses for parsed in read_all_with_report(path, **options))


def read_all_with_report(path: str | os.PathLike[str], **options: Any) -> tuple[Parsed, ...]:
    """Read all response sets of a file, each with what :func:`read_with_report` tells.

    Parameters
    ----------
    path : str or path-like
        The file.
    **options
        As for :func:`read`.

    Returns
    -------
    tuple of Parsed
        At least one.

    Raises
    ------
    FileError, ArgumentError, DataError
        As for :func:`read`.
    """
    return _read(path, options, several=True)


def _read(
    path: str | os.PathLike[str], given: dict[str, Any], *, several: bool
) -> tuple[Parsed, ...]:
    options = ReadOptions(**given)
    place = Path(path)
    name = os.fspath(path)
    try:
        content = _content(place)
        format_ = recognise(content, place.suffix)
        parsed = _parse(content, format_, options, place, several=several)
        digest = _sha256(content)
    except FileError as error:
        raise error if error.file is not None else error.in_file(name) from None
    except ArgumentError as error:
        raise ArgumentError(f"{name}: {error}") from None
    except DataError as error:
        what, _, remedy = str(error).partition("; ")
        raise FormatError(what, remedy or "mend the file", file=name) from error
    except MemoryError:
        what = "too large for the memory of this machine"
        raise FileError(what, "export fewer points or channels", file=name) from None
    if format_.module in ("touchstone", "delimited") and _ends_within_a_line(content):
        parsed = tuple(_perhaps_cut(one) for one in parsed)
    return tuple(_finished(one, format_, options, name, digest) for one in parsed)


def _ends_within_a_line(content: Content) -> bool:
    """Whether a text, of one or two bytes a character, lacks its last line end."""
    return not bytes(content[-2:]).strip(b"\0").endswith((b"\n", b"\r"))


def _perhaps_cut(parsed: Parsed) -> Parsed:
    if parsed.format.startswith("Touchstone 2"):
        return parsed  # [End] shows that it is whole
    told = "no line end behind the last line: if the file is cut there, its last number is wrong"
    return replace(parsed, warnings=(*parsed.warnings, told))


def _parse(
    content: Content, format_: Format, options: ReadOptions, place: Path, *, several: bool
) -> tuple[Parsed, ...]:
    module = importlib.import_module(f"polefit.readers.{format_.module}")
    if format_.module == "hdf5" and several:
        return cast("tuple[Parsed, ...]", module.parse_all(content, options))
    if format_.module == "touchstone":
        return (module.parse(content, options, stem=place.stem, suffix=place.suffix),)
    return (cast(_Parser, module.parse)(content, options, stem=place.stem),)


def _finished(
    parsed: Parsed, format_: Format, options: ReadOptions, name: str, digest: str
) -> Parsed:
    """Convert and select as asked, and tell where the responses came from."""
    responses = _driven(parsed.responses, options.pump_hz, name)
    assumptions = (*format_.assumptions, *parsed.assumptions)
    if format_.module not in _SETTLE_THEMSELVES:
        try:
            responses, said = _converted(responses, options)
            if options.select is not None:
                responses = responses.select(options.select)
        except (ArgumentError, DataError, NotSupportedError) as error:
            raise type(error)(f"{name}: {error}") from None
        assumptions += said
    source = Source(
        file=name,
        sha256=digest,
        format=parsed.format,
        assumptions=(*assumptions, *parsed.warnings),
    )
    return replace(parsed, responses=replace(responses, source=source), assumptions=assumptions)


def _driven(responses: ResponseSet, pump_hz: float | None, name: str) -> ResponseSet:
    """State the periodic drive, before anything is converted."""
    if pump_hz is None or responses.pump_hz == pump_hz:
        return responses
    if responses.pump_hz is not None:
        raise ArgumentError(
            f"{name}: pump_hz: the file states a drive at {responses.pump_hz:.12g} Hz; leave it out"
        )
    return replace(responses, pump_hz=pump_hz)


def _converted(responses: ResponseSet, options: ReadOptions) -> tuple[ResponseSet, tuple[str, ...]]:
    """Convert as asked, and the sentence that tells it."""
    wanted = cast(Quantity, options.quantity or responses.quantity)
    stated, asked = responses.reference_ohm, options.reference_ohm
    if options.quantity is None and stated and asked not in (None, *stated):
        listed = ", ".join(f"{r:g}" for r in stated)
        raise ArgumentError(
            f"reference_ohm: the data state {listed} Ω; leave it out, or say "
            'quantity="scattering" too to convert them to another reference'
        )
    converted = convert(responses, wanted, asked)
    if converted is responses:
        return responses, ()
    told = f"converted from {responses.quantity} to {wanted}: {converted.termination}"
    return converted, (told if stated or wanted != responses.quantity else f"{asked:g} Ω as asked",)


def _content(place: Path) -> Content:
    """Return the bytes of a file, mapped if it is large."""
    try:
        mode = place.stat().st_mode
        if stat.S_ISDIR(mode):
            raise FileError("is a directory", "name a file in it", file=place)
        if not stat.S_ISREG(mode):
            raise FileError("is not a regular file", "save it to a file first", file=place)
        with place.open("rb") as handle:
            size = os.fstat(handle.fileno()).st_size
            if size > _MAPPED_BYTES:
                return mmap.mmap(handle.fileno(), 0, access=mmap.ACCESS_READ)
            content = handle.read()
    except FileNotFoundError:
        raise FileError("there is no such file", "check the path", file=place) from None
    except (OSError, ValueError) as error:
        reason = getattr(error, "strerror", None) or str(error)
        remedy = "check the path and its permissions"
        raise FileError(f"cannot be read: {reason}", remedy, file=place) from error
    if not content:
        raise FormatError("the file is empty", "export it again", file=place)
    return content


def _sha256(content: Content) -> str:
    digest = hashlib.sha256()
    for at in range(0, len(content), _HASHED_BYTES):
        digest.update(content[at : at + _HASHED_BYTES])
        release(content, at, at + _HASHED_BYTES)
    return digest.hexdigest()
