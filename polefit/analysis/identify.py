"""Is it stable? From responses to a verdict with modes, loops and what they rest on."""

from __future__ import annotations

import functools
from collections.abc import Callable, Sequence

import numpy as np
from threadpoolctl import ThreadpoolController

from polefit.analysis.continuity import continuity_notes
from polefit.analysis.detection import (
    DAMPING,
    blind_notes,
    checked_damping,
    detect,
    in_view_of,
)
from polefit.analysis.evidence import MOSTLY_NOISE
from polefit.analysis.folding import coverage
from polefit.analysis.glitches import looks, suspicions
from polefit.analysis.judgement import Judged, judge
from polefit.analysis.next_points import next_plans
from polefit.analysis.noise_origin import StatedNoise, noise_origin
from polefit.analysis.plausibility import put_in_doubt, sign_notes
from polefit.analysis.preparation import Prepared, node_names, prepare
from polefit.engine import complex_poles, sections
from polefit.engine.blocks import FloatArray
from polefit.engine.estimation import Estimation, estimate_model
from polefit.engine.projection import model_values
from polefit.errors import ArgumentError
from polefit.estimates import si
from polefit.modes import (
    FitQuality,
    Identification,
    Loop,
    Mode,
    RationalModel,
    Verdict,
)
from polefit.responses import Channel, ResponseSet

SUSPECT_DAMPING = 0.05
"""Modes damped less than this are listed as suspect loops (common practice)."""
EDGE_STEPS = 3
"""Modes within so many steps from an edge of the band do not decide ..."""
UNSEEN = 0.05
"""... and this share of the drive's frequency may be left out at its low end without a word."""
POOR_FIT = 0.2
"""A model that misses the data by this much relative to them carries no verdict."""
POOR_REASON = "the model does not describe the data well enough to carry a verdict"
MOSTLY_NOISE_REASON = "the data are mostly noise"


def identify(
    responses: ResponseSet | Sequence[ResponseSet],
    *,
    band_hz: tuple[float, float] | None = None,
    confidence: float = 0.95,
    noise_relative: float | None = None,
    noise_absolute: float | None = None,
    detection_damping: float = DAMPING,
    progress: Callable[[str], None] | None = None,
) -> Identification:
    """Identify the natural modes behind frequency responses and judge their stability.

    Parameters
    ----------
    responses : ResponseSet or sequence of ResponseSet
        Responses of one circuit. Several sets, each with its own frequency axis, share their
        poles; they must leave the circuit terminated in the same way.
    band_hz : (float, float), optional
        Use only the points from low to high, in hertz.
    confidence : float
        Confidence of the verdict over all modes in the band, between 0.5 and 1.
    noise_relative, noise_absolute : float, optional
        Noise to be taken as given instead of being estimated: standard deviation of a sample,
        both parts together, over its size, or in the unit of the responses; both may be given.
        Rounding of printed numbers and stated uncertainties of the samples come on top.
    detection_damping : float
        Damping ratio of the hidden mode for which it is told what would have gone unnoticed;
        negative grows.
    progress : callable, optional
        Told in a few words what is being done.

    Returns
    -------
    Identification

    Raises
    ------
    ArgumentError
        If the sets cannot be identified together, or an argument is out of range.
    DataError
        If the data cannot carry a verdict.
    NotSupportedError
        For return differences and loop gains.

    Notes
    -----
    Rational model with poles shared by all channels and residues private to each, fitted by
    maximum likelihood (variable projection) from starting poles by relaxed vector fitting
    without flipping. Of a periodically driven circuit (``pump_hz``) every pole stands alone with a
    complex residue, and the modes are folded into 0 to half the drive's frequency. See the
    modules of ``polefit.engine`` for the sources.

    Examples
    --------
    >>> import numpy as np, polefit
    >>> f = np.linspace(1e6, 40e6, 201)
    >>> s = 2j * np.pi * f
    >>> z = s * 1e10 / (s**2 - 1e7 * s + 1e16)
    >>> z = z * (1 + 1e-6 * np.random.default_rng(1).normal(size=201))
    >>> data = polefit.ResponseSet.from_arrays(f, z, channels=["tank"], quantity="impedance")
    >>> polefit.identify(data).verdict
    'unstable'
    """
    if not isinstance(confidence, int | float) or not 0.5 < confidence < 1:
        raise ArgumentError(f"confidence: {confidence!r} is not between 0.5 and 1; give e.g. 0.95")
    stated = StatedNoise(noise_relative, noise_absolute)
    damping = checked_damping(detection_damping)
    prepared = prepare(responses, band_hz)
    laws = stated.laws([m.values.shape[0] for m in prepared.measured])
    with _thread_pools().limit(limits=1), np.errstate(all="ignore"):
        kind = sections.NONE if prepared.responses[0].pump_hz is None else complex_poles.NONE
        told = progress or (lambda _: None)
        estimation = estimate_model(prepared.measured, told, laws, kind)
        return _answer(prepared, estimation, confidence, stated, damping)


@functools.cache
def _thread_pools() -> ThreadpoolController:
    """Return the control of BLAS threads, which slow small matrices; looked up once."""
    return ThreadpoolController()


def _answer(
    prepared: Prepared,
    estimation: Estimation,
    confidence: float,
    stated: StatedNoise,
    damping: float,
) -> Identification:
    sets = prepared.responses
    channels = tuple(c for one in sets for c in one.channels)
    band = (min(one.band_hz[0] for one in sets), max(one.band_hz[1] for one in sets))
    judged = judge(
        estimation,
        prepared.scale_rad_per_s,
        band,
        channels,
        sets[0].quantity,
        confidence,
        sets[0].pump_hz,
    )
    judged = put_in_doubt(judged, sets, estimation)
    model = _model(estimation, prepared.scale_rad_per_s, channels)
    errors, noises = _relative(estimation)
    fit = _quality(prepared, estimation, judged, errors, noises, stated)
    # under a drive −dσ/dG is the sum over the images at all harmonics, also unseen ones
    levers = sets[0].quantity == "impedance" and sets[0].pump_hz is None
    detection = detect(estimation, prepared.scale_rad_per_s, channels, damping, levers=levers)
    scale = prepared.scale_rad_per_s
    suspect = suspicions(estimation, judged.modes, scale)
    verdict, reason = in_view_of(
        *_run_verdict(judged, fit, _poor(estimation, errors, noises), suspect), detection
    )
    plans = next_plans(estimation, judged.modes, detection, verdict, scale)
    plans += looks(suspect, estimation, scale)
    return Identification(
        verdict=verdict,
        reason=reason,
        confidence=confidence,
        band_hz=band,
        responses=sets,
        modes=judged.modes,
        background=judged.background,
        loops=_loops(judged.modes),
        fit=fit,
        model=model,
        detection=detection,
        notes=(
            *_notes(prepared, estimation, fit),
            *sign_notes(judged.modes, sets),
            *(continuity_notes(sets) if verdict == "undecided" else ()),
            *_delay_notes(model),
            *_edge_notes(judged.beyond, band),
            *blind_notes(detection, channels),
            *(plan.note for plan in plans),
        ),
        next_points_hz=tuple(sorted({point for plan in plans for point in plan.points_hz})),
        noise_std=tuple(np.sqrt(v.sum(axis=1)).T for v in estimation.noise),
    )


def _model(estimation: Estimation, scale: float, channels: tuple[Channel, ...]) -> RationalModel:
    solution = estimation.solution
    found = solution.sections
    coefficients = np.concatenate([part.coefficients for part in solution.parts])
    direct = found.direct_terms(coefficients)
    delays = np.concatenate(estimation.delays) / scale
    return RationalModel(
        poles=found.poles() * scale,
        residues=found.residues(coefficients) * scale,
        constant=direct[:, 0],
        proportional=direct[:, 1] / scale,
        channels=channels,
        delay_s=delays if delays.any() else None,
    )


def _quality(
    prepared: Prepared,
    estimation: Estimation,
    judged: Judged,
    errors: FloatArray,
    noises: FloatArray,
    stated: StatedNoise,
) -> FitQuality:
    stable = judged.stable_model
    return FitQuality(
        order=estimation.solution.sections.poles().size,
        order_reason=estimation.reason,
        rms_relative=float(np.sqrt(np.mean(errors))),
        noise_relative=float(np.sqrt(np.median(noises))),
        noise_origin=noise_origin(prepared, estimation, stated),
        residual_white=estimation.whiteness.white,
        stable_model_misfit=None if stable is None else stable.misfit_ratio,
    )


def _relative(estimation: Estimation) -> tuple[FloatArray, FloatArray]:
    """Return squared errors and noise variances over |H|², where noise does not hide it."""
    errors, noises = [], []
    for part, block, noise in zip(
        estimation.solution.parts, estimation.blocks, estimation.noise, strict=True
    ):
        fitted = model_values(block.s, estimation.solution, part)
        size, total = np.abs(block.values), noise.sum(axis=1)
        usable = size**2 > total
        if not usable.any():
            usable = size > 0
        errors.append((np.abs(fitted - block.values)[usable] / size[usable]) ** 2)
        noises.append(total[usable] / size[usable] ** 2)
    return np.concatenate(errors), np.concatenate(noises)


def _poor(estimation: Estimation, errors: FloatArray, noises: FloatArray) -> bool:
    """Tell whether the model misses the data by far more than their noise."""
    if any(np.any(law.relative > 1) for law in estimation.laws):
        return True  # what is called noise of a channel is larger than its model
    missed = float(np.mean(errors))
    return missed > POOR_FIT**2 and float(np.mean(noises)) < missed / 4


def _run_verdict(
    judged: Judged, fit: FitQuality, poor: bool, suspect: Sequence[float]
) -> tuple[Verdict, str]:
    inside = [mode for mode in judged.modes if mode.in_band]
    unstable = [mode for mode in inside if mode.verdict == "unstable"]
    undecided = [mode for mode in inside if mode.verdict == "undecided"]
    if poor and fit.noise_relative > MOSTLY_NOISE:
        return "undecided", MOSTLY_NOISE_REASON
    if poor:
        return "undecided", POOR_REASON
    if unstable:
        grow = (
            "1 mode in the band grows"
            if len(unstable) == 1
            else f"{len(unstable)} modes in the band grow"
        )
        return "unstable", f"{grow}, all evidence agreeing"
    if undecided:
        failed = [e for e in undecided[0].evidence if e.passed is False]
        why = failed[0].detail if failed else "its growth rate cannot be told from zero"
        return "undecided", f"a mode in the band may grow: {why}"
    if fit.noise_relative > MOSTLY_NOISE:
        return "undecided", MOSTLY_NOISE_REASON
    if suspect:
        at = ", ".join(si(omega / (2 * np.pi), "Hz") for omega in suspect)
        return "undecided", f"a few samples alone tell of a mode that may grow at {at}"
    return "stable", "no mode in the band grows"


def _loops(modes: Sequence[Mode]) -> tuple[Loop, ...]:
    loops = []
    for index, mode in enumerate(modes):
        lively = mode.verdict != "stable" or mode.damping_ratio.value < SUSPECT_DAMPING
        if mode.in_band and lively:
            loops.append(Loop(index, node_names([view.channel for view in mode.nodes])))
    return tuple(loops)


def _notes(prepared: Prepared, estimation: Estimation, fit: FitQuality) -> tuple[str, ...]:
    notes = list(prepared.notes)
    for one in prepared.responses:
        if one.source is not None:
            notes.extend(one.source.assumptions)
    drive = prepared.responses[0].pump_hz
    if drive is not None:
        notes += _unseen(prepared.responses, drive)
        notes.append(
            "the circuit is driven periodically: a mode is given by its frequency in 0 to "
            f"{si(drive / 2, 'Hz', 6)} and may oscillate there and that far from every multiple "
            "of the drive's frequency; no damping leverage is given, since that takes the "
            "residues at all of these"
        )
    if not fit.residual_white:
        raised = estimation.whiteness.inflation
        notes.append(
            "the residual is not noise-like: no low order describes the data to the noise"
            + (f"; variances were raised {raised:.3g} times" if raised > 1.005 else "")
        )
    return tuple(dict.fromkeys(notes))


def _delay_notes(model: RationalModel) -> list[str]:
    """Tell of delays that were taken out: no pole hangs on them, residues do."""
    if model.delay_s is None:
        return []
    listed = ", ".join(
        f"{si(float(delay), 's')} at {channel}"
        for channel, delay in zip(model.channels, model.delay_s, strict=True)
        if delay
    )
    return [
        f"a delay in front of the port was estimated and taken out ({listed}); it moves no pole, "
        "and residues are those behind it"
    ]


def _unseen(sets: Sequence[ResponseSet], drive: float) -> list[str]:
    """Tell which modes of a driven circuit a sweep cannot show, or at its edges only."""
    shown = []
    for one in sets:
        inner = one.frequency_hz[min(EDGE_STEPS, one.points - 1)], one.frequency_hz[-EDGE_STEPS - 1]
        shown.append(coverage((float(inner[0]), float(inner[1])), drive))
    low, high = min(s[0] for s in shown), max(s[1] for s in shown)
    if low <= UNSEEN * drive and high == drive / 2:
        return []
    half = " and frequency division" if high < drive / 2 else ""
    return [
        f"the sweep shows modes whose folded frequency lies in {si(low, 'Hz', 4)} to "
        f"{si(high, 'Hz', 4)} only; the others{half} show if it covers 0 to a little more than "
        f"{si(drive / 2, 'Hz', 4)}, or as much beside any multiple of that"
    ]


def _edge_notes(beyond: Sequence[complex], band: tuple[float, float]) -> list[str]:
    """Tell of growing modes that the band's edge keeps from deciding the verdict."""
    return [
        f"a growing mode at {si(pole.imag / (2 * np.pi), 'Hz')} lies at the edge of the band or "
        f"beyond it ({si(band[0], 'Hz')} to {si(band[1], 'Hz')}) and is not judged: widen the sweep"
        for pole in beyond
    ]
