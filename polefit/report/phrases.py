"""Names and numbers as every report writes them: harmless, short, in one notation."""

from __future__ import annotations

import math
import re
from collections.abc import Iterable, Sequence

from polefit.estimates import Estimate, si
from polefit.modes import Mode

_GLUE = re.compile(r"(?<=\d) (?=±)|(?<=±) (?=\d)|(?<=\d) (?=[afpnµmkMGTPE]?(?:Hz|s|Ω|S|%)(?!\w))")
_EXPONENT = re.compile(r"(?<![\w.])(\d+(?:\.\d+)?)[eE]([+-]?)0*(\d+)\b")
_SHARP = " (± < 1 ppm)"
SHARP_NOTE = "A number without ± is known to better than 1 ppm."
SLOWEST_HZ, FASTEST_HZ = 1e-3, 1e15  # what a fit puts beyond stands for zero and for infinity


def plain(text: str, limit: int = 60) -> str:
    """Make a name from a file harmless to print: one line, printable, cut in the middle."""
    clean = "".join(c if c.isprintable() else "\N{REPLACEMENT CHARACTER}" for c in text)
    if len(clean) <= limit:
        return clean
    head = (limit - 1) // 2
    return f"{clean[:head]}…{clean[len(clean) - (limit - 1 - head) :]}"


def glued(text: str, blank: str = "\N{NO-BREAK SPACE}") -> str:
    """Replace the blanks inside a number with uncertainty and unit, where no line may break."""
    return _GLUE.sub(blank, text)


def tidy(text: str) -> str:
    """Write powers of ten as the tables do: 9.15e9 instead of 9.15e+09."""
    return _EXPONENT.sub(lambda m: f"{m[1]}e{m[2].strip('+')}{m[3]}", text)


def sentence(text: str) -> str:
    """Return one tidy, harmless sentence with its full stop."""
    clean = tidy(plain(text.strip(), 2000))
    return clean if clean.endswith((".", "!", "?")) else f"{clean}."


def capital(text: str) -> str:
    """Return one sentence that begins with a capital letter."""
    whole = sentence(text)
    return whole[:1].upper() + whole[1:]


def listed(names: Iterable[str], most: int = 4, limit: int = 30) -> str:
    """Join names with commas, the first `most` of them, and count the rest."""
    all_names = list(dict.fromkeys(names))
    shown = ", ".join(plain(name, limit) for name in all_names[:most])
    rest = len(all_names) - most
    return shown if rest <= 0 else f"{shown} and {rest} more"


def counted(number: int, noun: str) -> str:
    """Write a number of things."""
    return f"{number} {noun}{'' if number == 1 else 's'}"


def percent(share: float) -> str:
    """Write a share of one in percent, two digits."""
    if not math.isfinite(share):
        return "not known"
    return "< 0.1 %" if 0 < share < 0.001 else f"{si(100 * share, '', 2)} %"


def probability(value: float) -> str:
    """Write a probability with as many digits as mean something."""
    if math.isnan(value):
        return "not known"
    if value > 0.9999:
        return "> 0.9999"
    return "< 0.0001" if value < 0.0001 else si(value, "", 3)


def hertz(value: float, digits: int = 4) -> str:
    """Write a frequency; what no circuit has is said in words."""
    if math.isfinite(value) and 0 < value < SLOWEST_HZ:
        return "near 0 Hz"
    return si(value, "Hz", digits) if not value > FASTEST_HZ else "beyond 1 PHz"


def band(limits: Sequence[float]) -> str:
    """Write a band of frequencies."""
    return f"{si(limits[0], 'Hz', 6)} to {si(limits[1], 'Hz', 6)}"


def uncrowded(text: str) -> str:
    """Leave out an uncertainty below 1 ppm, which :data:`SHARP_NOTE` tells once for all."""
    return text.replace(_SHARP, "")


def is_sharp(mode: Mode) -> bool:
    """Whether a number of the mode is known so well that tables leave out its uncertainty."""
    shown = (mode.natural_frequency_hz,) if mode.real else (mode.frequency_hz, mode.damping_ratio)
    return any(e.text().endswith(_SHARP) for e in shown)


def natural(mode: Mode) -> str:
    """Write ``|p|``/2π with its uncertainty."""
    value = mode.natural_frequency_hz.value
    words = hertz(value)
    return uncrowded(mode.natural_frequency_hz.text("Hz")) if words == si(value, "Hz") else words


def rings_at(mode: Mode) -> str:
    """Write the frequency of a mode for a table."""
    if mode.real:
        return f"{hertz(mode.natural_frequency_hz.value, 5)}, real pole"
    if mode.subharmonic:
        return f"{hertz(mode.frequency_hz.value, 7)}, drive/2"
    return uncrowded(mode.frequency_hz.text("Hz"))


def brief(estimate: Estimate) -> str:
    """Write an estimate for a sentence: a very sharp one is rounded to four digits."""
    if estimate.std is not None and estimate.std < 1e-6 * abs(estimate.value):
        return si(estimate.value, "", 4, keep_zeros=True)
    return estimate.text()


def time_constant(mode: Mode) -> str:
    """Write 1/``|σ|`` with its uncertainty, or its lower limit where the sign is open."""
    growth = mode.growth_rate_per_s
    if growth.low is not None and growth.high is not None and growth.low <= 0 <= growth.high:
        fastest = max(-growth.low, growth.high)
        return "longer than " + si(1 / fastest, "s", 3) if fastest > 0 else "without bound"
    if growth.value == 0 or not math.isfinite(growth.value):
        return "without bound" if growth.value == 0 else "not known"
    std = None if growth.std is None else growth.std / growth.value**2
    return uncrowded(Estimate(1 / abs(growth.value), std).text("s"))


def trend(mode: Mode) -> str:
    """Say what the mode does in time, in one word."""
    return {"unstable": "grows", "stable": "decays"}.get(mode.verdict, "open")


def label(mode: Mode, digits: int = 4) -> str:
    """Name a mode by its frequency, or as a real pole."""
    if mode.real:
        return f"real, {hertz(mode.natural_frequency_hz.value, digits)}"
    return hertz(mode.frequency_hz.value, digits)
