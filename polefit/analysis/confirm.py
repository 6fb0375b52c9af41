"""Does it oscillate where that was predicted? A frequency held against the data."""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence

import numpy as np

from polefit.analysis.detection import DAMPING, mostly_blind, named, named_ratio
from polefit.analysis.evidence import MOSTLY_NOISE
from polefit.analysis.identify import MOSTLY_NOISE_REASON, POOR_REASON, identify
from polefit.analysis.range_view import (
    Range,
    largest_step,
    sampled,
    sweep,
    undersampled,
    view_of,
)
from polefit.confirmation import Confirmation, Holding, RangeView
from polefit.errors import ArgumentError, NotSupportedError
from polefit.estimates import si
from polefit.modes import Identification, Mode
from polefit.responses import ResponseSet

BEYOND = 1.05
"""How far a sweep that is asked for goes beyond the range: no mode at its very edge is judged."""


def confirm(
    responses: ResponseSet | Sequence[ResponseSet],
    near_hz: float,
    within: float = 0.1,
    *,
    band_hz: tuple[float, float] | None = None,
    confidence: float = 0.95,
    noise_relative: float | None = None,
    noise_absolute: float | None = None,
    detection_damping: float = DAMPING,
    progress: Callable[[str], None] | None = None,
) -> Confirmation:
    """Hold a predicted oscillation frequency against the data.

    Parameters
    ----------
    responses : ResponseSet or sequence of ResponseSet
        Responses of one circuit, as :func:`polefit.identify` takes them.
    near_hz : float
        The predicted frequency, in hertz.
    within : float
        Half of the range relative to it: 0.1 stands for ± 10 %.
    band_hz, confidence, noise_relative, noise_absolute, detection_damping, progress : optional
        As :func:`polefit.identify` takes them.

    Returns
    -------
    Confirmation

    Raises
    ------
    ArgumentError
        If the frequency or the range makes no sense, or as :func:`polefit.identify` does.
    DataError, NotSupportedError
        As :func:`polefit.identify` does.

    Notes
    -----
    Confirmed: a mode is unstable, all evidence agreeing, and the 95 % interval of its frequency
    lies in the range. Refuted: no mode there grows or may grow, the range lies inside the band and
    at none of its frequencies every node is blind to a mode of the damping ratio
    `detection_damping`: one whose peak is as high as the response itself would have been found at
    one of them. Undecided: everything else.

    Examples
    --------
    >>> import numpy as np, polefit
    >>> f = np.linspace(1e6, 40e6, 201)  # a parallel tank of 100 pF that rings up at 15.9 MHz
    >>> s = 2j * np.pi * f
    >>> noise = 1e-6 * np.random.default_rng(1).normal(size=201)
    >>> z = s * 1e10 / (s**2 - 1e7 * s + 1e16) * (1 + noise)
    >>> data = polefit.ResponseSet.from_arrays(f, z, channels=["tank"], quantity="impedance")
    >>> polefit.confirm(data, near_hz=16e6).verdict
    'confirmed'
    >>> polefit.confirm(data, near_hz=25e6).verdict
    'refuted'
    """
    asked = checked_range(near_hz, within)
    sets = (responses,) if isinstance(responses, ResponseSet) else responses
    if any(isinstance(one, ResponseSet) and one.pump_hz is not None for one in sets):
        raise NotSupportedError(
            "pump_hz: predictions about periodically driven circuits are not checked by this "
            "version, since their modes may oscillate at many frequencies; identify them"
        )
    result = identify(
        responses,
        band_hz=band_hz,
        confidence=confidence,
        noise_relative=noise_relative,
        noise_absolute=noise_absolute,
        detection_damping=detection_damping,
        progress=progress,
    )
    return hold_against(result, asked)


def checked_range(near_hz: float, within: float) -> Range:
    """Return the range of a prediction.

    Raises
    ------
    ArgumentError
        If the frequency is not positive and finite, or the range would reach zero.
    """
    if not _is_number(near_hz) or not 0 < near_hz < math.inf:
        raise ArgumentError(
            f"near_hz: {near_hz!r} is no positive frequency; give it in hertz, such as 1.5e9"
        )
    if not _is_number(within) or not 0 < within < 1:
        raise ArgumentError(
            f"within: {within!r} is not between 0 and 1; give half of the range relative to the "
            "frequency, such as 0.1 for ± 10 %"
        )
    return Range(float(near_hz), float(within))


def _is_number(value: object) -> bool:
    return isinstance(value, int | float | np.integer | np.floating) and not isinstance(value, bool)


def hold_against(result: Identification, asked: Range) -> Confirmation:
    """Judge a prediction by an identification that is already there.

    Parameters
    ----------
    result : Identification
        What was found.
    asked : Range
        Where a mode is said to grow.

    Returns
    -------
    Confirmation
    """
    inside = [i for i, mode in enumerate(result.modes) if asked.may_hold(mode)]
    found = [result.modes[i] for i in inside]
    view = view_of(result, asked)
    sure = [m for m in found if m.verdict == "unstable" and m.in_band and asked.holds(m)]
    open_modes = [m for m in found if m.verdict != "stable" and m not in sure]
    doubt = _doubt_of_run(result)
    verdict: Holding
    reasons: tuple[str, ...]
    if sure and not doubt:
        verdict, reasons = "confirmed", (_grows(sure, asked),)
    else:
        open_reasons = [_open(m, asked, result.band_hz) for m in open_modes]
        against = [*doubt, *open_reasons, *_unseen(result, asked, view)]
        verdict = "undecided" if against else "refuted"
        reasons = tuple(dict.fromkeys(against)) or _absent(found, asked)
    points = _next_points(result, asked, view, open_modes) if verdict == "undecided" else ()
    return Confirmation(
        verdict=verdict,
        reasons=reasons,
        near_hz=asked.near_hz,
        within=asked.within,
        mode=next(iter([*sure, *open_modes, *_lightest(found)]), None),
        in_range=tuple(inside),
        elsewhere=_elsewhere(result.modes, inside, asked),
        view=view,
        identification=result,
        next_points_hz=points,
        notes=_notes(result, asked),
    )


def _doubt_of_run(result: Identification) -> list[str]:
    """Return why nothing that was found may be trusted; one mode in doubt elsewhere is no reason.

    A run is also undecided because of a mode; then a mode of the band is undecided, none unstable.
    Or because most of the band is blind; whether the range is, is looked at by itself.
    """
    if result.verdict != "undecided":
        return []
    verdicts = {mode.verdict for mode in result.modes if mode.in_band}
    by_a_mode = "undecided" in verdicts and "unstable" not in verdicts
    other = by_a_mode or mostly_blind(result.detection)
    if other and result.reason not in (POOR_REASON, MOSTLY_NOISE_REASON):
        return []
    return [result.reason.rstrip(".")]


def _between(asked: Range) -> str:
    return f"between {si(asked.low_hz, 'Hz', 6)} and {si(asked.high_hz, 'Hz', 6)}"


def _grows(sure: Sequence[Mode], asked: Range) -> str:
    what = "1 mode grows" if len(sure) == 1 else f"{len(sure)} modes grow"
    return f"{what} {_between(asked)}, all evidence agreeing"


def _absent(found: Sequence[Mode], asked: Range) -> tuple[str, ...]:
    seen = "one that grows would have been found there"
    if not found:
        return (f"no mode was found {_between(asked)}; {seen}",)
    what = "1 mode was" if len(found) == 1 else f"{len(found)} modes were"
    decays = "it decays" if len(found) == 1 else "all of them decay"
    return (f"{what} found {_between(asked)}, and {decays}; {seen}",)


def _lightest(found: Sequence[Mode]) -> list[Mode]:
    return sorted(found, key=lambda mode: mode.damping_ratio.value)


def _open(mode: Mode, asked: Range, band_hz: tuple[float, float]) -> str:
    """Say why a mode neither confirms the prediction nor leaves it refuted."""
    at = si(mode.frequency_hz.value, "Hz")
    if not mode.in_band:
        return (
            f"the mode at {at} may grow, but lies at the edge of the band "
            f"({si(band_hz[0], 'Hz')} to {si(band_hz[1], 'Hz')}) and is not judged: widen the sweep"
        )
    if mode.verdict == "unstable":
        low, high = mode.frequency_hz.low, mode.frequency_hz.high
        if low is None or high is None:
            return f"the mode at {at} grows, but how well its frequency is known cannot be said"
        return (
            f"the mode at {at} grows, but its frequency is only known to lie between "
            f"{si(low, 'Hz', 6)} and {si(high, 'Hz', 6)}, across the limit of the range: ask for a "
            "wider one"
        )
    failed = [test.detail for test in mode.evidence if test.passed is False]
    why = failed[0].rstrip(".") if failed else "its growth rate cannot be told from zero"
    return f"the mode at {at} may grow: {why}"


def _unseen(result: Identification, asked: Range, view: RangeView | None) -> list[str]:
    """Return what keeps a growing mode in the range from being ruled out."""
    low, high = result.band_hz
    found = []
    if not low <= asked.low_hz < asked.high_hz <= high:
        part = "lies" if asked.high_hz <= low or asked.low_hz >= high else "reaches"
        found.append(
            f"the range {part} beyond the band ({si(low, 'Hz', 6)} to {si(high, 'Hz', 6)}): widen "
            "the sweep"
        )
    if result.fit.noise_relative > MOSTLY_NOISE:
        found.append(MOSTLY_NOISE_REASON)
    if view is None:
        return found or ["what would have gone unnoticed in the range is not known"]
    blind = view.detection.blind_everywhere_hz
    if blind:
        coarse = undersampled(result, view)
        remedy = "less noise or more digits would show it"
        if coarse:
            step = max(largest_step(sampled(result), *stretch)[0] for stretch in coarse)
            remedy = (
                f"samples lie up to {si(step, 'Hz', 3)} apart there, and closer ones are needed"
            )
        found.append(
            f"every node is blind to a mode with {named_ratio(view.detection)} from "
            f"{named(blind)}: one as high as the response itself could go unnoticed; {remedy}"
        )
    return found


def _elsewhere(modes: Sequence[Mode], inside: Sequence[int], asked: Range) -> tuple[int, ...]:
    """Return the nearest modes on both sides and all that grow or may grow, nearest first."""
    others = [i for i in range(len(modes)) if i not in inside]
    others.sort(key=lambda i: asked.distance(modes[i]))
    ringing = [i for i in others if not modes[i].real]
    below = [i for i in ringing if modes[i].frequency_hz.value < asked.near_hz]
    above = [i for i in ringing if modes[i].frequency_hz.value >= asked.near_hz]
    kept = {*below[:1], *above[:1], *(i for i in others if modes[i].verdict != "stable")}
    return tuple(i for i in others if i in kept)


def _next_points(
    result: Identification, asked: Range, view: RangeView | None, open_modes: Sequence[Mode]
) -> tuple[float, ...]:
    """Return what the run asks for, and a sweep of what the range lacks."""
    low, high = result.band_hz
    cut_off = [mode.frequency_hz.value for mode in open_modes if not mode.in_band]
    start = min([asked.low_hz, *cut_off]) / BEYOND
    end = max([asked.high_hz, *cut_off]) * BEYOND
    wanted = []
    if asked.low_hz < low or any(at**2 < low * high for at in cut_off):
        wanted.append((start, min(low, end)))
    if asked.high_hz > high or any(at**2 >= low * high for at in cut_off):
        wanted.append((max(high, start), end))
    wanted.extend(() if view is None else undersampled(result, view))
    damping = DAMPING if result.detection is None else result.detection.damping_ratio
    points = {at for stretch in wanted for at in sweep(*stretch, damping)}
    # what the run asks for may be about a mode elsewhere: beside a sweep of the range, too much
    run = [at for at in result.next_points_hz if not points or start <= at <= end]
    return tuple(sorted(points.union(run)))


def _growing_background(result: Identification) -> list[tuple[float, str]]:
    return [
        (pole.pole_rad_per_s.imag / (2 * math.pi), pole.reason.rstrip("."))
        for pole in result.background
        if pole.pole_rad_per_s.real > 0
    ]


def _notes(result: Identification, asked: Range) -> tuple[str, ...]:
    notes = [
        f"a growing pole of the model at {si(at, 'Hz')} is not claimed as a mode: {reason}"
        for at, reason in _growing_background(result)
        if asked.low_hz <= at <= asked.high_hz
    ]
    if result.verdict == "undecided":
        notes.append(f"the run as a whole is undecided: {result.reason.rstrip('.')}")
    notes.append(
        "the prediction is held against small-signal modes: once an oscillation has grown, its "
        "frequency shifts"
    )
    return tuple(notes)
