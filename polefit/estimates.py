"""A value with its uncertainty, and the one rule for printing it.

The rule: two significant digits of the standard uncertainty, the value rounded to the same
decimal place (JCGM 100:2008, GUM, 7.2.6), one SI prefix for both, chosen by the larger of
them. An uncertainty of less than a millionth is only said to be so, after seven digits of the
value: nobody reads ten. What cannot be given is said in words.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from decimal import ROUND_HALF_EVEN, ROUND_HALF_UP, Decimal

PREFIXES = {
    -18: "a", -15: "f", -12: "p", -9: "n", -6: "µ", -3: "m", 0: "",
    3: "k", 6: "M", 9: "G", 12: "T", 15: "P", 18: "E",
}  # fmt: skip
NOT_KNOWN = "not known"
_SHARP = Decimal("1e-6")  # an uncertainty below this part of the value is not printed
_MOST_DIGITS = 7  # of a value as sharp as that
_PLAIN = range(-4, 6)  # decades in which a number without prefix is written without exponent


@dataclass(frozen=True)
class Estimate:
    """An estimated quantity; its unit is in the name of the field that holds it.

    Parameters
    ----------
    value : float
        The estimate.
    std : float or None
        One standard uncertainty; None where it cannot be given.
    low, high : float or None
        Limits of the 95 % interval; None where they cannot be given.
    """

    value: float
    std: float | None = None
    low: float | None = None
    high: float | None = None

    @classmethod
    def normal(cls, value: float, std: float | None, coverage_factor: float = 1.959964) -> Estimate:
        """Build an estimate with a symmetric interval: value ± coverage_factor · std."""
        if std is None or not math.isfinite(std):
            return cls(value)
        half = coverage_factor * std
        return cls(value, std, value - half, value + half)

    def to_dict(self) -> dict[str, float | None]:
        """Return the four numbers under their names."""
        return {"value": self.value, "std": self.std, "low": self.low, "high": self.high}

    def text(self, unit: str = "") -> str:
        """Return value ± standard uncertainty by the one rule, see :func:`with_uncertainty`."""
        return with_uncertainty(self.value, self.std, unit)


def with_uncertainty(value: float, std: float | None, unit: str = "") -> str:
    """Print a value with its standard uncertainty.

    Parameters
    ----------
    value : float
        The estimate.
    std : float or None
        Its standard uncertainty.
    unit : str
        Unit without prefix. A compound unit (with "/" or "·") and the empty unit of a ratio
        take no SI prefix but a power of ten where one is needed.

    Returns
    -------
    str
        Plain blanks only, "−" (U+2212) for minus.

    Notes
    -----
    A tie in the uncertainty is rounded up, so that no tie understates it; a tie in the value
    goes to the even digit.

    Examples
    --------
    >>> with_uncertainty(1.504321e9, 8.5e5, "Hz")
    '1.50432 ± 0.00085 GHz'
    >>> with_uncertainty(-0.0123, 0.0995)
    '−0.01 ± 0.10'
    >>> with_uncertainty(1e9, 2e-3, "Hz")
    '1.000000 GHz (± < 1 ppm)'
    """
    if not math.isfinite(value):
        return si(value, unit)
    if std is None or math.isnan(std):
        return f"{si(value, unit, 6)} (± {NOT_KNOWN})"
    if math.isinf(std):
        return f"{si(value, unit, 6)} (± without bound)"
    if std == 0:
        return f"{si(value, unit, _MOST_DIGITS)} (± 0)"
    number, spread = Decimal(repr(float(value))), Decimal(repr(abs(float(std))))
    if spread < _SHARP * abs(number):
        return f"{si(value, unit, _MOST_DIGITS, keep_zeros=True)} (± < 1 ppm)"
    place = _place(spread)
    return _scaled(_at(number, place), unit, _at(spread, place, ROUND_HALF_UP))


def si(value: float, unit: str = "", digits: int = 4, *, keep_zeros: bool = False) -> str:
    """Print a plain value with an SI prefix.

    Parameters
    ----------
    value : float
        The value.
    unit : str
        Unit without prefix; see :func:`with_uncertainty`.
    digits : int
        Significant digits.
    keep_zeros : bool
        Whether zeros at the end are kept, as they are for an uncertainty.

    Returns
    -------
    str

    Examples
    --------
    >>> si(1.5e9, "Hz"), si(-12.3456e-9, "s"), si(0.0123)
    ('1.5 GHz', '−12.35 ns', '0.0123')
    """
    if math.isnan(value):
        return NOT_KNOWN
    if math.isinf(value):
        return "infinite" if value > 0 else "−infinite"
    number = Decimal(repr(float(value)))
    if number == 0:
        return _joined("0", "", unit)
    place = number.adjusted() - digits + 1
    rounded = _at(number, place)
    if rounded.adjusted() > number.adjusted():
        rounded = _at(rounded, place + 1)
    return _scaled(rounded if keep_zeros else rounded.normalize(), unit)


def _place(spread: Decimal) -> int:
    """Power of ten of the second significant digit of `spread` after rounding to it."""
    place = spread.adjusted() - 1
    rounded = _at(spread, place, ROUND_HALF_UP)
    return place + 1 if rounded.adjusted() > spread.adjusted() else place


def _at(number: Decimal, place: int, rounding: str = ROUND_HALF_EVEN) -> Decimal:
    """Round to the decimal place 10**place; more digits than it can hold need no rounding."""
    return number.quantize(Decimal(1).scaleb(place), rounding=rounding)


def _scaled(number: Decimal, unit: str, spread: Decimal | None = None) -> str:
    """Write rounded numbers with one prefix, or one power of ten, chosen by the larger."""
    decade = max(number, -number, spread or Decimal(0)).adjusted()
    if takes_prefix(unit):
        power = 3 * (decade // 3)
        if power in PREFIXES:
            return _joined(_pair(number, spread, power), PREFIXES[power], unit)
    elif decade in _PLAIN:
        return _joined(_pair(number, spread, 0), "", unit)
    text = _pair(number, spread, decade)
    bracketed = text if spread is None else f"({text})"
    return _joined(f"{bracketed}e{decade}", "", unit)


def takes_prefix(unit: str) -> bool:
    """Whether an SI prefix before `unit` reads well: not for ratios and compound units."""
    return bool(unit) and not any(mark in unit for mark in "/·%°")


def _pair(number: Decimal, spread: Decimal | None, power: int) -> str:
    first = _plain(number.scaleb(-power))
    return first if spread is None else f"{first} ± {_plain(spread.scaleb(-power))}"


def _plain(number: Decimal) -> str:
    sign = "−" if number < 0 else ""
    return f"{sign}{abs(number):f}"


def _joined(number: str, prefix: str, unit: str) -> str:
    return f"{number} {prefix}{unit}" if unit else number
