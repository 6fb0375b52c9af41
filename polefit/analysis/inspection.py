"""What a file holds, how it was understood, and what will limit the verdict."""

from __future__ import annotations

import textwrap
from collections.abc import Callable, Mapping
from dataclasses import dataclass, field, replace
from pathlib import Path
from typing import Any, Literal, TypeAlias

import numpy as np

from polefit.analysis.data_quality import known_uncertainty, limits
from polefit.errors import ArgumentError
from polefit.estimates import si
from polefit.precision import Printed
from polefit.readers import read_all_with_report, read_with_report
from polefit.readers.reading import OpenQuestionError, Parsed
from polefit.responses import Channel, FloatArray, ResponseSet

Spacing: TypeAlias = Literal["single point", "uniform", "logarithmic", "uneven"]

# Frequencies printed with few digits make the steps scatter by about this part.
_STEP_SCATTER = 2e-3
_MARKS = {".": "point", ",": "comma"}
_WIDTH = 96
_UNREAD = "what will limit the verdict can be told once these questions are settled"


@dataclass(frozen=True)
class Step:
    """How the frequencies are spaced.

    Parameters
    ----------
    spacing : {"single point", "uniform", "logarithmic", "uneven"}
        The rule they follow.
    min_hz, max_hz : float or None
        Smallest and largest step; None for a single point.
    points_per_decade : float or None
        For logarithmic spacing.
    """

    spacing: Spacing
    min_hz: float | None = None
    max_hz: float | None = None
    points_per_decade: float | None = None

    def __str__(self) -> str:
        if self.min_hz is None or self.max_hz is None:
            return self.spacing
        if self.spacing == "uniform":
            return f"uniform, {si((self.min_hz + self.max_hz) / 2, 'Hz')}"
        between = f"{si(self.min_hz, 'Hz')} to {si(self.max_hz, 'Hz')}"
        if self.points_per_decade is not None:
            return f"logarithmic, {self.points_per_decade:.4g} points per decade ({between})"
        return f"uneven, {between}"


@dataclass(frozen=True, eq=False)
class Inspection:
    """What was read from a file, every assumption made, and what will limit the verdict.

    Parameters
    ----------
    file : str
        The file.
    format : str
        Its format.
    responses : ResponseSet
        The data themselves.
    frequency_unit : str
        Unit in which the file gives frequencies.
    scaling : str
        How printed numbers became ohm, siemens or a ratio.
    decimal_mark : str or None
        "." or "," of a text file.
    digits : str
        How the numbers are printed.
    step : Step
        How the frequencies are spaced.
    assumptions : tuple of str
        Every reading that was not forced by the file.
    warnings : tuple of str
        What deserves a second look or will limit the verdict.
    questions : mapping of str to str
        What the file leaves open, by the option that settles it. What depends on the answer, such
        as the quantity, is then not told.
    """

    file: str
    format: str
    responses: ResponseSet
    frequency_unit: str
    scaling: str
    decimal_mark: str | None
    digits: str
    step: Step
    assumptions: tuple[str, ...]
    warnings: tuple[str, ...]
    questions: Mapping[str, str] = field(default_factory=dict)

    @property
    def settled(self) -> bool:
        """Whether quantity and termination are known."""
        return not {"quantity", "driven"} & set(self.questions)

    @property
    def frequency_digits(self) -> str | None:
        """How the frequencies are printed; None for full double precision."""
        printed = self.responses.frequency_precision
        return None if printed is None else str(printed)

    def _if_settled(self, text: str) -> str:
        return text if self.settled else "not stated, see below"

    def _printed_to(self) -> str:
        printed = self.responses.frequency_precision
        if printed is None:
            return ""
        return f", printed to {printed}" + (": its grid, exactly" if printed.exact else "")

    def to_dict(self) -> dict[str, Any]:
        """Return plain data under the schema name ``polefit.inspection``."""
        data = self.responses
        source = data.source
        return {
            "schema": "polefit.inspection",
            "version": 1,
            "source": {
                "file": self.file,
                "sha256": None if source is None else source.sha256,
                "points": data.points,
                "format": self.format,
            },
            "quantity": data.quantity if self.settled else None,
            "unit": data.unit if self.settled else None,
            "frequency_unit": self.frequency_unit,
            "frequency_digits": self.frequency_digits,
            "scaling": self.scaling,
            "decimal_mark": self.decimal_mark,
            "digits": self.digits,
            "channels": [[c.output, c.input if self.settled else None] for c in data.channels],
            "band_hz": list(data.band_hz),
            "points": data.points,
            "step": {
                "spacing": self.step.spacing,
                "min_hz": self.step.min_hz,
                "max_hz": self.step.max_hz,
                "points_per_decade": self.step.points_per_decade,
            },
            "pump_hz": data.pump_hz,
            "reference_ohm": None if data.reference_ohm is None else list(data.reference_ohm),
            "termination": data.termination if self.settled else None,
            "assumptions": list(self.assumptions),
            "warnings": list(self.warnings),
            "questions": dict(self.questions),
        }

    def __str__(self) -> str:
        data = self.responses
        low, high = data.band_hz
        names = ", ".join(str(c) if self.settled else c.output for c in data.channels)
        mark = "" if self.decimal_mark is None else _MARKS.get(self.decimal_mark, "")
        rows = {
            "format": self.format,
            "quantity": self._if_settled(
                f"{data.quantity} in {data.unit}" if data.unit else data.quantity
            ),
            "frequency": f"in {self.frequency_unit}{self._printed_to()}",
            "scaling": self.scaling,
            "decimal mark": mark or "none: binary numbers",
            "digits": self.digits,
            "channels": f"{len(data.channels)}: {names}",
            "band": f"{si(low, 'Hz')} to {si(high, 'Hz')}",
            "points": str(data.points),
            "step": str(self.step),
            "termination": self._if_settled(data.termination),
        }
        if data.pump_hz is not None:
            rows["pump"] = si(data.pump_hz, "Hz")
        lines = [self.file, *(_row(name, text) for name, text in rows.items())]
        if self.questions:
            told = tuple(f"{option}: {text}" for option, text in self.questions.items())
            lines += ["Not stated:", *_items(told)]
        lines += ["Assumed:", *_items(self.assumptions or ("nothing: the file says it all",))]
        lines += ["Take care:", *_items(self.warnings or ("nothing to warn of",))]
        return "\n".join(lines)


def inspect(path: str | Path, **options: Any) -> Inspection:
    """Read a file and tell what it holds, and what it leaves open.

    Parameters
    ----------
    path : str or pathlib.Path
        The file.
    **options
        As for :func:`polefit.read`.

    Returns
    -------
    Inspection

    Raises
    ------
    FileError, ArgumentError
        As :func:`polefit.read` does.
    """
    parsed, open_ = _looked_at(lambda given: (read_with_report(path, **given),), options)
    return _inspection(path, parsed[0], open_)


def inspect_all(path: str | Path, **options: Any) -> tuple[Inspection, ...]:
    """Read every response set of a file and tell what they hold.

    Parameters
    ----------
    path : str or pathlib.Path
        The file; only HDF5 can hold more than one set.
    **options
        As for :func:`polefit.read`.

    Returns
    -------
    tuple of Inspection

    Raises
    ------
    FileError, ArgumentError
        As :func:`polefit.read_all` does.
    """
    parsed, open_ = _looked_at(lambda given: read_all_with_report(path, **given), options)
    return tuple(_inspection(path, one, open_) for one in parsed)


def _looked_at(
    read: Callable[[Mapping[str, Any]], tuple[Parsed, ...]], options: Mapping[str, Any]
) -> tuple[tuple[Parsed, ...], dict[str, str]]:
    """Read with whatever answer to the questions that the file leaves open; return them too."""
    questions: list[OpenQuestionError] = []
    given = dict(options)
    while True:
        try:
            parsed = read(given)
        except OpenQuestionError as error:
            if not error.presume or any(q.option == error.option for q in questions):
                raise
            questions.append(error)
            given.update(error.presume)
        except ArgumentError:
            if questions:
                raise questions[0] from None
            raise
        else:
            return parsed, {q.option: f"{q.what}; {q.remedy}" for q in questions}


def _inspection(path: str | Path, parsed: Parsed, questions: Mapping[str, str]) -> Inspection:
    responses = _undriven(parsed.responses) if "driven" in questions else parsed.responses
    unread = {"form", "angle_unit"} & set(questions)  # the numbers mean nothing yet
    # What was presumed about the driven node, only to look at the file, is no assumption.
    assumptions = (a for a in parsed.assumptions if not (questions and a.startswith("transfer:")))
    return Inspection(
        file=str(path),
        format=parsed.format,
        responses=responses,
        frequency_unit=parsed.frequency_unit,
        scaling=parsed.scaling or _scaling(responses),
        decimal_mark=parsed.decimal_mark or _usual_mark(parsed.format),
        digits=_digits(responses, named="form" not in questions),
        step=step_of(responses.frequency_hz),
        assumptions=tuple(assumptions),
        warnings=(*parsed.warnings, *((_UNREAD,) if unread else limits(responses))),
        questions=questions,
    )


def _undriven(responses: ResponseSet) -> ResponseSet:
    """Take each response by its node alone, since nothing says what was driven."""
    nodes = tuple(Channel(c.output, c.output) for c in responses.channels)
    return replace(responses, channels=nodes) if len(set(nodes)) == len(nodes) else responses


def step_of(frequency_hz: FloatArray) -> Step:
    """Tell how frequencies are spaced.

    Parameters
    ----------
    frequency_hz : (N,) float ndarray
        Rising frequencies in hertz.

    Returns
    -------
    Step
    """
    if frequency_hz.size < 2:
        return Step("single point")
    steps = np.diff(frequency_hz)
    low, high = float(steps.min()), float(steps.max())
    if high - low <= _STEP_SCATTER * high:
        return Step("uniform", low, high)
    if frequency_hz[0] > 0:
        decades = np.diff(np.log10(frequency_hz))
        if decades.max() - decades.min() <= _STEP_SCATTER * decades.max():
            return Step("logarithmic", low, high, float(1 / decades.mean()))
    return Step("uneven", low, high)


def _scaling(responses: ResponseSet) -> str:
    precision = responses.precision
    if precision is None or precision.scale == 1:
        return "none: numbers as printed"
    unit = f" = {responses.unit}" if responses.unit else ""
    return f"printed numbers × {precision.scale:g}{unit}"


def _usual_mark(format_name: str) -> str | None:
    """Decimal mark where the format leaves no choice."""
    return "." if format_name.startswith("Touchstone") else None


def _digits(responses: ResponseSet, *, named: bool) -> str:
    precision = responses.precision
    if precision is None:
        if responses.sample_std is None:
            return "double precision (15 or more)"
        relative = known_uncertainty(responses)
        return f"uncertain by about {relative:.1g} of the response"
    names = {
        "real-imaginary": ("real part", "imaginary part"),
        "magnitude-angle": ("magnitude", "angle"),
        "decibel-angle": ("decibels", "angle"),
    }[precision.form]
    names = names if named else ("first number", "second number")
    texts = [_printed(p) for p in (precision.first, precision.second)]
    if texts[0] == texts[1]:
        return f"{texts[0]} ({' and '.join(names)})"
    return "; ".join(f"{name}: {text}" for name, text in zip(names, texts, strict=True))


def _printed(printed: Printed) -> str:
    if printed.decimals is not None:
        return f"{printed.decimals} decimal places"
    if printed.significant is not None:
        return f"{printed.significant} significant"
    return "double precision (15 or more)"


def _row(name: str, text: str) -> str:
    return textwrap.fill(text, _WIDTH, initial_indent=f"  {name:14}", subsequent_indent=" " * 16)


def _items(texts: tuple[str, ...]) -> list[str]:
    return [
        textwrap.fill(text, _WIDTH, initial_indent="  - ", subsequent_indent="    ")
        for text in texts
    ]
