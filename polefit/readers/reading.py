"""What every reader shares: the options of ``read``, file bytes with their digest, digits."""

from __future__ import annotations

import math
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass, fields
from pathlib import Path
from typing import Any, Literal

from polefit.errors import AmbiguousFileError, ArgumentError
from polefit.precision import Printed
from polefit.responses import QUANTITIES, Channel, ResponseSet, as_positive

REFERENCE_UNKNOWN = (
    "the reference resistance of the scattering parameters is not stated; "
    "give it with reference_ohm= (--reference-ohm)"
)


@dataclass(frozen=True)
class Parsed:
    """What a parser found in a file.

    Parameters
    ----------
    responses : ResponseSet
        The responses, without their source.
    format : str
        Short name of the format, such as "Touchstone 1.1".
    assumptions : tuple of str
        One sentence for every reading that was not forced by the file.
    warnings : tuple of str
        One sentence for everything about the file that deserves a second look.
    decimal_mark : str, optional
        "." or "," of a text file.
    scaling : str, optional
        How printed numbers became ohm, siemens or a ratio, where it is not one to one.
    frequency_unit : str
        Unit in which the file gives frequencies.
    """

    responses: ResponseSet
    format: str
    assumptions: tuple[str, ...]
    warnings: tuple[str, ...]
    decimal_mark: str | None = None
    scaling: str | None = None
    frequency_unit: str = "Hz"


class OpenQuestionError(AmbiguousFileError):
    """What only the user can settle; `presume` allows a look at the file nonetheless.

    Parameters
    ----------
    what, remedy : str
        As for every error about a file.
    option : str
        The option of ``read`` that settles it.
    presume : mapping
        Options with which the file can be read, although its numbers may then mean something
        else: points, columns and format can be told.
    file : str or pathlib.Path, optional
        The file.
    line : int, optional
        Line number in the file.
    """

    def __init__(
        self,
        what: str,
        remedy: str,
        *,
        option: str = "",
        presume: Mapping[str, Any] | None = None,
        file: str | Path | None = None,
        line: int | None = None,
    ) -> None:
        self.option = option
        self.presume = dict(presume or {})
        super().__init__(what, remedy, file=file, line=line)

    def in_file(self, file: str | Path) -> OpenQuestionError:
        """Return the same question naming `file`."""
        return OpenQuestionError(
            self.what,
            self.remedy,
            option=self.option,
            presume=self.presume,
            file=file,
            line=self.line,
        )


_UNIT_NAMES = {1e3: "kHz", 1e6: "MHz", 1e9: "GHz", 1e12: "THz", 1 / (2 * math.pi): "rad/s"}


def unit_name(hertz: float) -> str:
    """Name the frequency unit of so many hertz; Hz where nothing says (zero)."""
    return _UNIT_NAMES.get(hertz, "Hz")


_ALLOWED: dict[str, tuple[str, ...]] = {
    "quantity": QUANTITIES,
    "decimal": (".", ","),
    "form": ("real-imaginary", "magnitude-angle", "decibel-angle"),
    "angle_unit": ("deg", "rad"),
    "scaling": ("normalised", "absolute"),
}


@dataclass(frozen=True)
class ReadOptions:
    """Options that settle what a file leaves open; None means: find out, and say so.

    Parameters
    ----------
    quantity : str, optional
        What the values are; scattering, impedance and admittance matrices are converted to it.
    driven : str, optional
        Node driven by the 1 A (or 1 V) source, for files that hold node voltages or currents.
    select : sequence of str, optional
        Outputs to keep.
    node : str, optional
        Name of the node of a one-port file, by default the stem of the file name; or the names
        of the ports of an n-port file, separated by commas.
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
        Frequency of the periodic drive under which the circuit was simulated.

    Raises
    ------
    ArgumentError
        If an option has a value that it cannot have.
    """

    quantity: str | None = None
    driven: str | None = None
    select: tuple[str, ...] | None = None
    node: str | None = None
    decimal: Literal[".", ","] | None = None
    delimiter: str | None = None
    frequency_unit: str | None = None
    form: Literal["real-imaginary", "magnitude-angle", "decibel-angle"] | None = None
    angle_unit: Literal["deg", "rad"] | None = None
    scaling: Literal["normalised", "absolute"] | None = None
    reference_ohm: float | None = None
    pump_hz: float | None = None

    def __post_init__(self) -> None:
        for name, allowed in _ALLOWED.items():
            value = getattr(self, name)
            if value is not None and value not in allowed:
                raise ArgumentError(
                    f"{name}: {value!r} is not known; use one of {', '.join(allowed)}"
                )
        if isinstance(self.select, str):
            object.__setattr__(self, "select", (self.select,))
        elif self.select is not None:
            object.__setattr__(self, "select", tuple(self.select))
        for name in ("driven", "node"):
            value = getattr(self, name)
            if value is not None and not (isinstance(value, str) and value.strip()):
                raise ArgumentError(f"{name}: {value!r} is not a name; give one, or leave it out")
        if self.reference_ohm is not None:
            ohm = as_positive("reference_ohm", self.reference_ohm, "resistance; give ohms")
            object.__setattr__(self, "reference_ohm", ohm)
        if self.pump_hz is not None:
            pump_hz = as_positive("pump_hz", self.pump_hz, "frequency; give hertz")
            object.__setattr__(self, "pump_hz", pump_hz)

    def refuse_unused(self, used: Iterable[str], format_name: str) -> None:
        """Raise ArgumentError for an option that has no meaning for this format."""
        known = {*used, "quantity", "select", "pump_hz"}
        for option in fields(self):
            if getattr(self, option.name) is not None and option.name not in known:
                raise ArgumentError(
                    f"{option.name}: has no meaning for a {format_name} file; leave it out"
                )


def named_ports(channels: Sequence[Channel], node: str, count: int) -> tuple[Channel, ...]:
    """Give the ports of an n-port the names that the user says.

    Parameters
    ----------
    channels : sequence of Channel
        Between ports called port1, port2 …
    node : str
        The option: one name for each port, separated by commas.
    count : int
        Number of ports.

    Returns
    -------
    tuple of Channel

    Raises
    ------
    ArgumentError
        If the names are not as many as the ports, or one comes twice.
    """
    names = [name.strip() for name in node.split(",")]
    if len(names) != count or not all(names) or len(set(names)) != count:
        raise ArgumentError(
            f"node: {node!r} does not name {count} ports; give {count} different names separated "
            f"by commas, such as {','.join('abcdefgh'[:count])}"
        )
    named = {f"port{i}": name for i, name in enumerate(names, 1)}
    return tuple(Channel(named[c.output], named[c.input]) for c in channels)


def printed_form(tokens: Sequence[str]) -> Printed | None:
    """Tell how one column of a text file was printed, from a sample of its numbers.

    Parameters
    ----------
    tokens : sequence of str
        Numbers as printed, with "." as the decimal mark.

    Returns
    -------
    Printed or None
        Fixed decimal places if all numbers, without exponent, share them while their
        significant digits differ; else the largest count of significant digits. None when
        the column carries 15 digits or more (double precision) or nothing can be told.
    """
    decimals: set[int] = set()
    significant: set[int] = set()
    exponents = False
    for token in tokens:
        mantissa, _, exponent = token.strip().lower().replace("d", "e").partition("e")
        exponents |= bool(exponent)
        digits = mantissa.lstrip("+-")
        decimals.add(len(digits.partition(".")[2]))
        count = len(digits.replace(".", "").lstrip("0"))
        if count:
            significant.add(count)
    if not significant or max(significant) >= 15:
        return None
    if not exponents and len(decimals) == 1 and len(significant) > 1 and decimals != {0}:
        return Printed(decimals=decimals.pop())
    return Printed(significant=max(significant))
