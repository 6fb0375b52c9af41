"""What the heading of a column says: part, unit, quantity and name of the channel."""

from __future__ import annotations

import itertools
import re
from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np

from polefit.errors import AmbiguousFileError

FREQUENCY_UNITS = {"hz": 1.0, "khz": 1e3, "mhz": 1e6, "ghz": 1e9, "thz": 1e12}
_ANGULAR_UNITS = {"rad/s", "rad/sec", "rads", "1/s", "rad·s⁻¹", "rad s^-1"}
_PREFIXES = {"": 1.0, "n": 1e-9, "u": 1e-6, "µ": 1e-6, "μ": 1e-6, "m": 1e-3}
_PREFIXES |= {"k": 1e3, "K": 1e3, "M": 1e6, "G": 1e9}
_BASES = {
    "ohm": "impedance",
    "ohms": "impedance",
    "Ω": "impedance",
    "\u2126": "impedance",
    "V/A": "impedance",
    "S": "admittance",
    "siemens": "admittance",
    "mho": "admittance",
    "A/V": "admittance",
    "V": "voltage",
    "A": "current",
}
_NO_UNIT = {"-", "1", "lin", "linear", "ratio", "none", "unitless", "complex", "v/v", "a/a", ""}

REAL, IMAGINARY, MAGNITUDE, DECIBEL, ANGLE = "real", "imaginary", "magnitude", "decibel", "angle"
_PARTS = {
    REAL: "re real realpart realteil",
    IMAGINARY: "im imag imaginary imagpart img imaginärteil imaginaerteil",
    MAGNITUDE: "mag magnitude abs amplitude ampl modulus mod betrag",
    DECIBEL: "db db20 dbmag magdb decibel",
    ANGLE: "phase ph phas ang angle arg argument deg rad degrees "
    "winkel phasenwinkel phasedeg phaserad angdeg angrad cangdeg cangrad",
}
_PART_OF = {word: part for part, words in _PARTS.items() for word in words.split()}
_FREQUENCY = {"freq", "frequency", "f", "frequencies", "fr", "hertz", "freqs", "xfreq", "frequenz"}
_ANGULAR = {"omega", "ω", "w"}
_INDEX = {"index", "no", "no.", "nr", "nr.", "#", "n", "point", "idx", "row"}
_LETTERS = {"R": (REAL, "impedance"), "X": (IMAGINARY, "impedance")}
_LETTERS |= {"G": (REAL, "admittance"), "B": (IMAGINARY, "admittance")}
_LETTERS |= {"I": (REAL, ""), "Q": (IMAGINARY, "")}
_SPICE_PART = {
    "r": REAL,
    "i": IMAGINARY,
    "m": MAGNITUDE,
    "p": ANGLE,
    "db": DECIBEL,
    "f": "",
    "": "",
}

_OPEN, _CLOSE = r"[\(\[\{]", r"[\)\]\}]"
_CALL = re.compile(rf"(\w+)\s*{_OPEN}\s*(.*?)\s*{_CLOSE}")
_SPICE = re.compile(rf"([vi])(r|i|m|p|db|f|)\s*{_OPEN}\s*(.+?)\s*{_CLOSE}", re.IGNORECASE)
_PORTS = re.compile(rf"([SZY])\s*{_OPEN}?[_ ]?\s*(\d+)\s*[,;_:. ]\s*(\d+)\s*{_CLOSE}?", re.I)
_PORTS_SHORT = re.compile(rf"([SZY])\s*{_OPEN}?[_ ]?(\d)(\d)\s*{_CLOSE}?", re.IGNORECASE)
_OF_NODE = re.compile(rf"([ZY])\s*{_OPEN}\s*(.+?)\s*{_CLOSE}", re.IGNORECASE)
_WITH_NODE = re.compile(r"([ZY])[_.: \-]+(.+)", re.IGNORECASE)
_ANGLE_WORD = re.compile(r"(?<![a-z])(?:c?ang|phase|ph)?_?(deg|rad)(?![a-z])", re.IGNORECASE)
# Waveform tables head the columns of each trace with its expression and X or Y.
_OF_WAVEFORM = re.compile(rf"(.*\))\s+([XY])(\s*{_OPEN}[^()\[\]]*{_CLOSE})?")
_KIND = {"s": "scattering", "z": "impedance", "y": "admittance", "v": "voltage", "i": "current"}


@dataclass(frozen=True)
class Heading:
    """One column as its heading describes it; empty strings where it does not say.

    Parameters
    ----------
    text : str
        The heading itself.
    role : str
        "frequency", "angular-frequency", "index", "time", or the part of a complex number:
        "real", "imaginary", "magnitude", "decibel", "angle".
    output, input : str
        Channel; `input` is empty where only one name is given.
    kind : str
        "impedance", "admittance", "scattering", "voltage" or "current".
    scale : float
        Value of one printed unit in hertz, ohm, siemens, volt, ampere; zero where no
        unit is given.
    angle_unit : str
        "deg" or "rad".
    """

    text: str
    role: str = ""
    output: str = ""
    input: str = ""
    kind: str = ""
    scale: float = 0.0
    angle_unit: str = ""


def parse_headings(texts: Sequence[str]) -> tuple[Heading, ...]:
    """Read all headings of a table; single letters (R and X, I and Q, r and i) count in pairs.

    Raises
    ------
    AmbiguousFileError
        If a unit has two readings.
    """
    found = [parse_heading(text) for text in _spelled_out(texts)]
    if (axis := _OF_WAVEFORM.fullmatch(found[0].text)) and axis[2] == "X":
        found = [_of_waveform(heading) for heading in found]
    plain = {h.output for h in found}
    for first, second in (("R", "X"), ("G", "B"), ("I", "Q")):
        if {first, second} <= plain:
            found = [_as_letter(h) if h.output in (first, second) else h for h in found]
    return tuple(found)


def _spelled_out(texts: Sequence[str]) -> list[str]:
    """Spell out neighbours such as ``r out.v`` and ``i out.v``."""
    found = list(texts)
    for i, (first, second) in enumerate(itertools.pairwise(texts)):
        one, other = first.strip('" '), second.strip('" ')
        if one[:2] == "r " and other[:2] == "i " and one[2:] == other[2:]:
            found[i], found[i + 1] = f"re {one[2:]}", f"im {other[2:]}"
    return found


def _of_waveform(heading: Heading) -> Heading:
    """Read a heading that ends with X, for an axis, or Y."""
    waveform = _OF_WAVEFORM.fullmatch(heading.text)
    if waveform is None:
        return heading
    if waveform[2] == "X":
        unit = _unit((waveform[3] or "").strip(" ()[]{}"), loose=False) or Heading("")
        return Heading(heading.text, unit.role or "frequency", scale=unit.scale)
    return replace(parse_heading(f"{waveform[1]} {waveform[3] or ''}"), text=heading.text)


def _as_letter(heading: Heading) -> Heading:
    part, kind = _LETTERS[heading.output]
    return replace(heading, role=part, output="", kind=heading.kind or kind)


def parse_heading(text: str) -> Heading:
    """Read one heading.

    Parameters
    ----------
    text : str
        Such as ``Freq [GHz]``, ``Re(Z(gate2)) / Ω``, ``dB(S(2,1))`` or ``Z(gate2).im``.

    Returns
    -------
    Heading

    Raises
    ------
    AmbiguousFileError
        If a unit has two readings.
    """
    clean = " ".join(text.replace('"', " ").split())
    rest, unit = _split_unit(clean)
    heading = replace(unit, text=clean)
    lowered = rest.strip(" _.:-/").lower()
    if lowered in _FREQUENCY or (not lowered and unit.role == "frequency"):
        return replace(heading, role=unit.role or "frequency")
    if lowered in _ANGULAR or unit.role == "angular-frequency":
        if unit.role == "frequency":
            return heading
        return replace(heading, role="angular-frequency", scale=unit.scale or 1 / (2 * np.pi))
    if re.fullmatch(r"time(\s*[\[(]?\s*[munp]?s(ec)?\s*[\])]?)?", lowered):
        return replace(heading, role="time")
    if lowered in _INDEX:
        return replace(heading, role="index")
    if unit.role == "frequency":
        return heading  # a frequency with a name of its own
    role, name = _split_part(rest)
    output, drive, kind, spice_role = _channel(name)
    role = _one_role(role or spice_role, unit.role)
    said = _ANGLE_WORD.search(rest) if role == ANGLE else None
    return replace(
        heading,
        role=role,
        angle_unit=unit.angle_unit or (said[1].lower() if said else ""),
        output=output,
        input=drive,
        kind=unit.kind if unit.kind in ("impedance", "admittance") else kind or unit.kind,
    )


def _one_role(said: str, by_unit: str) -> str:
    """Let the unit dB turn a magnitude into decibels; else the word decides."""
    if by_unit == DECIBEL and said in ("", MAGNITUDE, DECIBEL):
        return DECIBEL
    return said or by_unit


def _split_unit(text: str) -> tuple[str, Heading]:
    """Split a unit off the end of a heading."""
    blank = Heading(text)
    whole = _unit(text, loose=True)
    if whole is not None:
        return "", whole
    for pattern, loose in (
        (r"(.*?)[\s,_]*[\[{<]\s*([^\[\]{}<>]*?)\s*[\]}>]", False),
        (r"(.*?\S)[\s,_]+\(\s*([^()]*?)\s*\)", False),
        (r"(.*?\S)\(\s*([^()]*?)\s*\)", True),
        (r"(.*?\S)\s*/\s*(\S+)", False),
        (r"(.*?\S),\s*(\S+)", False),
        (r"(.*?\S)[\s_:.]+(\S+)", True),
    ):
        match = re.fullmatch(pattern, text)
        unit = None if match is None else _unit(match[2], loose)
        if match is not None and unit is not None:
            return match[1], unit
    return text, blank


def _unit(token: str, loose: bool) -> Heading | None:
    """Read a unit; `loose` where a single letter is as likely a name."""
    lowered = token.lower()
    if token == "mHz":
        raise AmbiguousFileError(
            "the unit mHz may be millihertz or megahertz", "say frequency_unit= (--frequency-unit)"
        )
    if lowered in FREQUENCY_UNITS:
        return Heading(token, "frequency", scale=FREQUENCY_UNITS[lowered])
    if lowered in _ANGULAR_UNITS:
        return Heading(token, "angular-frequency", scale=1 / (2 * np.pi))
    if lowered in ("db", "db20"):
        return Heading(token, DECIBEL, scale=1.0)
    if lowered in ("dbohm", "dbω"):
        return Heading(token, DECIBEL, kind="impedance", scale=1.0)
    if lowered in ("deg", "degree", "degrees", "grad", "°"):
        return Heading(token, ANGLE, angle_unit="deg")
    if lowered in ("rad", "radian", "radians"):
        return Heading(token, ANGLE, angle_unit="rad")
    if loose and len(token) < 2 and token not in ("Ω", "\u2126"):
        return None
    if lowered in _NO_UNIT:
        return None if loose else Heading(token, scale=1.0)
    return _scaled_unit(token)


def _scaled_unit(token: str) -> Heading | None:
    for base, kind in _BASES.items():
        prefix = token[: len(token) - len(base)]
        tail = token[len(prefix) :]
        same = tail == base if len(base) < 3 or "/" in base else tail.lower() == base
        if same and prefix in _PREFIXES:
            # The case of the prefix tells milli from mega, also in an all-capital MOHM.
            return Heading(token, kind=kind, scale=_PREFIXES[prefix])
    return None


def _split_part(text: str) -> tuple[str, str]:
    """Split the part of a complex number off a heading: (role, rest)."""
    text = re.sub(r"\bparts?\b(\s+of\b)?|\bof\b", " ", text, flags=re.IGNORECASE).strip()
    bars = re.fullmatch(r"\|\s*(.+?)\s*\|", text)
    if bars:
        return MAGNITUDE, _split_part(bars[1])[1]
    if text.startswith(("∠", "∡")):
        return ANGLE, text[1:].strip("() ")
    call = _CALL.fullmatch(text)
    word = call[1].lower().replace("_", "") if call else ""
    if call and word in _PART_OF:
        return _PART_OF[word], _split_part(call[2])[1]
    tail = re.fullmatch(rf"(.*\S)\s*{_OPEN}\s*([A-Za-z]+)\s*{_CLOSE}", text)
    if tail and tail[2].lower() in _PART_OF:
        return _PART_OF[tail[2].lower()], tail[1]
    last = re.fullmatch(r"(.*?)[\s_.:\-]*(?<![^\W\d_])([^\W\d_]+\d*)", text)
    if last and last[2].lower() in _PART_OF:
        return _PART_OF[last[2].lower()], last[1]
    first = re.fullmatch(r"([^\W\d_]+\d*)(?![^\W_])[\s_.:\-]*(.*)", text)
    if first and first[1].lower() in _PART_OF:
        return _PART_OF[first[1].lower()], first[2]
    return "", text


def _channel(text: str) -> tuple[str, str, str, str]:
    """Read the name of a channel: (output, input, kind, part)."""
    name = text.strip(" _.:-,;")
    spice = _SPICE.fullmatch(name)
    if spice:
        part = _SPICE_PART[spice[2].lower()]
        return spice[3], "", _KIND[spice[1].lower()], part
    ports = _PORTS.fullmatch(name) or _PORTS_SHORT.fullmatch(name)
    if ports:
        return f"port{ports[2]}", f"port{ports[3]}", _KIND[ports[1].lower()], ""
    branch = re.fullmatch(r"(.+)#branch", name, re.IGNORECASE)
    if branch:
        return branch[1], "", "current", ""
    node = _OF_NODE.fullmatch(name) or _WITH_NODE.fullmatch(name)
    if node:
        output, _, drive = (part.strip() for part in node[2].partition(","))
        return output, drive, _KIND[node[1].lower()], ""
    alone = re.fullmatch(r"([ZY])(in|out)?", name, re.IGNORECASE)
    if alone:
        return alone[2] or "", "", _KIND[alone[1].lower()], ""
    word = re.search(r"\b(impedance|admittance)\b", name, re.IGNORECASE)
    if word:
        rest = (name[: word.start()] + name[word.end() :]).strip(" _.:-,;()")
        return rest, "", word[1].lower(), ""
    return name, "", "", ""
