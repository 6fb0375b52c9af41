"""Options that several commands share. Nothing heavy is imported here: ``--help`` is quick."""

from __future__ import annotations

import math
import re
from collections.abc import Callable, Sequence
from functools import reduce
from typing import TYPE_CHECKING, Any, TypeVar

import click

from polefit.errors import ArgumentError
from polefit.estimates import si

Command = TypeVar("Command", bound=Callable[..., Any])

QUANTITY_NAMES = (
    "impedance",
    "admittance",
    "scattering",
    "transfer",
    "hybrid",
    "inverse-hybrid",
    "return-difference",
    "loop-gain",
)
_FREQUENCY = re.compile(r"\s*(\+?(?:\d+\.?\d*|\.\d+)(?:[eE][+-]?\d+)?)\s*([A-Za-z]*)\s*")
_PREFIXES = {"": 1.0, "k": 1e3, "m": 1e6, "meg": 1e6, "g": 1e9, "t": 1e12}
_FACTORS = _PREFIXES | {f"{prefix}hz": factor for prefix, factor in _PREFIXES.items()}


def as_frequency(text: str) -> float:
    """Turn ``1.5e9``, ``1.5GHz``, ``1.5G`` or ``1500 MHz`` into hertz.

    Raises
    ------
    ArgumentError
        If it is neither; ``m`` and ``mHz`` are refused, since they may mean a thousandth.
    """
    match = _FREQUENCY.fullmatch(text)
    unit = match[2] if match else ""
    if match is None or unit.lower() not in _FACTORS:
        raise ArgumentError(f"{text!r} is not a frequency; write it like 1.5e9, 1.5GHz or 1500MHz")
    if unit.lower() in ("m", "mhz") and unit[0] == "m":
        raise ArgumentError(f"{text!r} could mean thousandths of a hertz; write MHz for 1e6")
    value = float(match[1]) * _FACTORS[unit.lower()]
    if value == float("inf"):
        raise ArgumentError(f"{text!r} is not a finite frequency")
    return value


if TYPE_CHECKING:
    _FloatType = click.ParamType[float]
else:
    _FloatType = click.ParamType


class Frequency(_FloatType):
    """A frequency with or without unit, in hertz."""

    name = "hz"

    def convert(
        self, value: Any, param: click.Parameter | None, ctx: click.Context | None
    ) -> float:
        """Return hertz."""
        if isinstance(value, float):
            return value
        try:
            return as_frequency(str(value))
        except ArgumentError as error:
            self.fail(str(error), param, ctx)


class Number(click.FloatRange):
    """A number between limits; NaN, which no comparison excludes, is none."""

    def convert(
        self, value: Any, param: click.Parameter | None, ctx: click.Context | None
    ) -> float:
        """Return the number."""
        number = float(super().convert(value, param, ctx))
        if not math.isfinite(number):
            self.fail(f"{value!r} is not a finite number", param, ctx)
        return number


def names(values: tuple[str, ...]) -> tuple[str, ...]:
    """Split comma lists into names; commas inside brackets, as in v(a,b), stay."""
    found: list[str] = []
    for value in values:
        depth, start = 0, 0
        for at, letter in enumerate(value):
            depth += {"(": 1, ")": -1}.get(letter, 0)
            if letter == "," and depth <= 0:
                found.append(value[start:at])
                start = at + 1
        found.append(value[start:])
    return tuple(name.strip() for name in found if name.strip())


_API_NAMES = (
    "quantity|driven|select|node|decimal|delimiter|frequency_unit|form|angle_unit|scaling"
    "|reference_ohm|pump_hz|band_hz|confidence|noise_relative|noise_absolute|detection_damping"
    "|near_hz|within"
)
_VALUE = r"(?:\"([^\"]*)\"|'([^']*)')?"


def on_command_line(text: str) -> str:
    """Name the options in a message as they are called on the command line.

    Parameters
    ----------
    text : str
        Such as ``a.csv: driven: no node …; say quantity="transfer" (--quantity)``.

    Returns
    -------
    str
        Such as ``a.csv: --driven: no node …; say --quantity transfer``.
    """

    def option(match: re.Match[str]) -> str:
        """Write one option, with its value if there is one."""
        said = [part for part in match.groups()[1:] if part]
        return " ".join([_option(match[1]), *(part.strip() for part in said[-1:])])

    text = re.sub(rf"\b({_API_NAMES})={_VALUE},? \(--[\w-]+([^()]*)\)", option, text)
    text = re.sub(rf"\b({_API_NAMES})={_VALUE}, (?=--)", "", text)
    text = re.sub(rf"\b({_API_NAMES})={_VALUE}(?!\S*=)", option, text)
    return re.sub(rf"(^|: )({_API_NAMES}): ", lambda m: f"{m[1]}{_option(m[2])}: ", text, count=1)


def _option(name: str) -> str:
    return "--" + name.removesuffix("_hz").replace("_", "-")


def _together(*options: Callable[[Command], Command]) -> Callable[[Command], Command]:
    """Apply options so that help lists them in the order given."""

    def decorate(command: Command) -> Command:
        """Add the options to a command."""
        return reduce(lambda wrapped, option: option(wrapped), reversed(options), command)

    return decorate


_FORMS = ("real-imaginary", "magnitude-angle", "decibel-angle")

NOT_IDENTIFIED = ("return-difference", "loop-gain")


def quantity_option(names: Sequence[str] = QUANTITY_NAMES) -> Callable[[Command], Command]:
    """Return the option that says what the values are, with the names that a command can use."""
    return click.option(
        "--quantity",
        type=click.Choice(names),
        help="What the values are; matrices are converted to it.",
    )


reading_options = _together(
    click.option(
        "--driven",
        multiple=True,
        metavar="NODE",
        help="Node driven by the source, for files of node voltages; once, or once per FILE.",
    ),
    click.option("--select", multiple=True, metavar="NODE,…", help="Outputs to keep."),
    click.option(
        "--node",
        multiple=True,
        metavar="NAME,…",
        help="Node of a one-port file, instead of its stem, or all ports of an n-port file; once "
        "per FILE.",
    ),
    click.option("--decimal", type=click.Choice((".", ",")), help="Decimal mark of a text file."),
    click.option("--delimiter", metavar="NAME", help="comma, semicolon, tab or blanks."),
    click.option(
        "--frequency-unit",
        type=click.Choice(("Hz", "kHz", "MHz", "GHz", "THz")),
        help="Where a text file does not say.",
    ),
    click.option("--form", type=click.Choice(_FORMS), help="The two numbers of a sample."),
    click.option("--angle-unit", type=click.Choice(("deg", "rad")), help="Unit of angles."),
    click.option(
        "--scaling",
        type=click.Choice(("normalised", "absolute")),
        help="Of Z, Y, H, G numbers in a Touchstone 1.x file.",
    ),
    click.option(
        "--reference-ohm",
        type=Number(min=0, min_open=True),
        metavar="OHM",
        help="Reference resistance of scattering data.",
    ),
    click.option(
        "--pump",
        "pump_hz",
        type=Frequency(),
        metavar="HZ",
        help="Frequency of the large periodic drive, such as 2GHz, under which it was simulated.",
    ),
)

band_option = click.option(
    "--band",
    nargs=2,
    type=Frequency(),
    metavar="LO HI",
    help="Only this band, such as 10MHz 6GHz.",
)
json_option = click.option("--json", metavar="PATH", help="Write JSON; - is standard output.")
html_option = click.option("--html", metavar="PATH", help="Write one self-contained page.")
figures_option = click.option("--figures", metavar="DIR", help="Write the figures.")
figure_format_option = click.option(
    "--figure-format",
    type=click.Choice(("png", "svg", "pdf")),
    multiple=True,
    show_default="png",
    help="Of the figures; may be given several times.",
)
hdf5_option = click.option("--hdf5", metavar="PATH", help="Write data and result as HDF5.")
quiet_option = click.option(
    "--quiet", is_flag=True, help="No progress; only the verdict on standard output."
)
identification_options = _together(
    band_option,
    click.option(
        "--confidence",
        type=Number(0.5, 1, min_open=True, max_open=True),
        default=0.95,
        metavar="P",
        show_default=True,
        help="Confidence of the verdicts.",
    ),
    click.option(
        "--noise-relative",
        type=Number(min=0, min_open=True),
        metavar="SHARE",
        help="Standard deviation of the noise over the size of a sample, instead of an estimate.",
    ),
    click.option(
        "--noise-absolute",
        type=Number(min=0, min_open=True),
        metavar="STD",
        help="Standard deviation of the noise in the unit of the data, instead of an estimate.",
    ),
    click.option(
        "--detection-damping",
        type=Number(-1, 1, min_open=True, max_open=True),
        default=-0.01,
        metavar="ZETA",
        show_default=True,
        help="Damping ratio of the hidden mode for which it is told what would have gone "
        "unnoticed.",
    ),
    click.option("--separately", is_flag=True, help="Each FILE is a circuit of its own."),
    json_option,
    html_option,
    hdf5_option,
    figures_option,
    figure_format_option,
    quiet_option,
    quantity_option([name for name in QUANTITY_NAMES if name not in NOT_IDENTIFIED]),
    reading_options,
)
"""All options of a command that identifies modes in FILE…, in the order of the help."""


def checked_band(band: tuple[float, float] | None) -> tuple[float, float] | None:
    """Return the band, low before high.

    Raises
    ------
    ArgumentError
        If it is reversed or empty.
    """
    if band and not band[0] < band[1]:
        low, high = (si(edge, "Hz", 6) for edge in band)
        raise ArgumentError(f"--band: {low} to {high} is empty; give LO, then HI")
    return band or None
