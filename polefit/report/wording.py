"""The phrases that the text report, the page and the figures share."""

from __future__ import annotations

import math
from collections.abc import Sequence

from polefit.estimates import si
from polefit.modes import BackgroundPole, FitQuality, Identification, Mode
from polefit.report.limits import detection_limit
from polefit.report.phrases import band, counted, hertz, listed, percent, plain, sentence, tidy

SYMBOL = {
    "impedance": "Z",
    "admittance": "Y",
    "scattering": "S",
    "transfer": "H",
    "hybrid": "H",
    "inverse-hybrid": "G",
    "return-difference": "F",
    "loop-gain": "T",
}
MANY_POINTS = 5  # from which evenly spaced points are told as a sweep, too
EVEN = 1e-6  # of a step by which evenly spaced points may be off
CERTAIN = 1e4  # misfit ratio from which digits say nothing
SAME = 0.01  # frequencies closer than this are one to a reader
CAUTIONS = (
    "The verdict holds for the model, the nodes, the band and the terminations that were "
    "simulated; another bias, temperature, load or layout is another circuit.",
    "A simulation is not the hardware: confirm on the bench, done by qualified people under local "
    "codes and licensed practice.",
    "Radio-frequency power burns, and an amplifier that oscillates can destroy itself and what "
    "is connected to it: limit the supply current and terminate every port before power is on.",
)


def basis(result: Identification) -> tuple[tuple[str, str], ...]:
    """Return what the verdict rests on, as pairs of a heading and a sentence."""
    fit, band_text = result.fit, band(result.band_hz)
    outputs = [c.output for c in result.channels]
    rows = [
        ("Band", f"{band_text}; {_points(result)}"),
        (
            "Nodes",
            f"{listed(outputs, 12)} ({counted(len(result.channels), 'channel')}, "
            f"{result.quantity})",
        ),
        ("Terminations", result.termination),
        *_drive(result),
        ("Confidence", f"{percent(result.confidence)}; intervals are at 95 %"),
        ("Model", f"order {fit.order}; {fit.order_reason}"),
        ("Fit", f"residual {si(fit.rms_relative, '', 2)} of the response (rms), {_residual(fit)}"),
        ("Noise", f"{si(fit.noise_relative, '', 2)} of the response; {fit.noise_origin}"),
        ("Stable model", _misfit(fit.stable_model_misfit)),
    ]
    if result.detection is not None:
        limit = detection_limit(result)
        rows.append(("Detection", f"{limit}." if limit else "no frequency was tried"))
    else:
        rows.append(("Detection", "what would have gone unnoticed was not computed"))
    return tuple((heading, sentence(text)) for heading, text in rows)


def _drive(result: Identification) -> tuple[tuple[str, str], ...]:
    """Say what the modes of a periodically driven circuit are; nothing of another one."""
    if result.pump_hz is None:
        return ()
    pump, half = si(result.pump_hz, "Hz", 6), si(result.pump_hz / 2, "Hz", 6)
    text = (
        f"periodic, {pump}; frequencies of modes are folded into 0 to {half}; the verdict holds "
        "for this drive level and this periodic state"
    )
    return (("Drive", text),)


def sightings(mode: Mode) -> str:
    """Say what the mode of a periodically driven circuit does to the drive, and where it shows."""
    if not mode.seen_hz:
        return ""
    shown = listed((hertz(f, 5) for f in mode.seen_hz), 3)
    half = ""
    if mode.subharmonic:
        grows = mode.verdict == "unstable"
        half = "frequency division of the drive, " if grows else "at half the drive's frequency, "
    return f"{half}seen in the sweep at {shown}"


def _residual(fit: FitQuality) -> str:
    """Say what the residual looks like; what is below the noise needs no alarm."""
    below = fit.rms_relative < fit.noise_relative * (0.5 if fit.residual_white else 1.0)
    if below:
        return "which is below the noise"
    return "which looks like noise" if fit.residual_white else "which does NOT look like noise"


def _points(result: Identification) -> str:
    counts = [r.points for r in result.responses]
    if len(counts) == 1:
        return f"{counts[0]} points"
    if len(set(counts)) == 1:
        return f"{counts[0]} points in each of {len(counts)} sets"
    return f"{min(counts)} to {max(counts)} points in each of {len(counts)} sets"


def _misfit(ratio: float | None) -> str:
    if ratio is None:
        return "not needed: no pole of the best model grows in the band"
    if math.isnan(ratio):
        return "the best model without growing poles was not compared"
    if ratio < 1.005:
        times = "as well as"
    elif ratio < CERTAIN:
        times = f"{si(ratio, '', 3)} times worse than"
    else:
        times = "more than 10000 times worse than"
    return f"the best model without growing poles fits {times} the free one"


def suspects(result: Identification) -> set[int]:
    """Return the indices of the modes to look at: those not stable, and those of a suspect loop."""
    doubtful = {i for i, mode in enumerate(result.modes) if mode.verdict != "stable"}
    return doubtful | {loop.mode for loop in result.loops}


def in_full(result: Identification, few: int) -> tuple[int, ...]:
    """Return the indices of the modes shown with their nodes: all if `few`, else the suspects."""
    count = len(result.modes)
    return tuple(range(count)) if count <= few else tuple(sorted(suspects(result)))


def notes(result: Identification) -> tuple[str, ...]:
    """Return the notes that are not already listed as assumptions of a file."""
    listed_before = {a for source in result.sources for a in source.assumptions}
    return tuple(tidy(note) for note in result.notes if note not in listed_before)


def background_row(pole: BackgroundPole) -> tuple[str, str, str]:
    """Return frequency, damping ratio and reason of a pole that is not claimed."""
    p = pole.pole_rad_per_s
    ratio = si(-p.real / abs(p), "", 3) if p else "not defined"
    return both_frequencies(p), ratio, tidy(plain(pole.reason, 400))


def both_frequencies(pole: complex) -> str:
    """Write Im(p)/2π, the frequency of the table, and ``|p|``/2π where that is another one."""
    natural, rings = abs(pole) / math.tau, abs(pole.imag) / math.tau
    sign = "−" if pole.imag < 0 else ""  # one line of a driven circuit, without its conjugate
    if rings == 0:
        return f"real pole, |p|/2π {hertz(natural)}"
    if natural - rings < SAME * natural:
        return f"{sign}{hertz(rings)}"
    return f"{sign}{hertz(rings)}, |p|/2π {hertz(natural)}"


def next_points(points: Sequence[float]) -> str:
    """Say what to simulate next; nothing where nothing is asked for."""
    if not points:
        return ""
    if len(points) == 1:
        return f"Simulate one more point, {hertz(points[0], 6)}; in Hz, to paste:"
    return (
        f"Simulate {len(points)} more points from {band((min(points), max(points)))}; in Hz, to "
        "paste:"
    )


def pasteable(points: Sequence[float]) -> str:
    """Return the points to simulate next in Hz, every digit, separated by blanks."""
    return " ".join(_full(p) for p in points)


def as_sweep(points: Sequence[float]) -> str:
    """Return the same points as start, stop and step, where they are many and evenly spaced."""
    if len(points) < MANY_POINTS:
        return ""
    start, stop = min(points), max(points)
    step = (stop - start) / (len(points) - 1)
    even = all(abs(p - start - i * step) <= EVEN * step for i, p in enumerate(sorted(points)))
    if not (even and step > 0):
        return ""
    return f"start {_full(start)} stop {_full(stop)} step {_full(float(f'{step:.12g}'))}"


def _full(value: float) -> str:
    """Write a number so that it reads back as the same."""
    return repr(float(value)).removesuffix(".0")


def evidence_sentence(name: str, passed: bool | None, detail: str) -> str:
    """Write one test of a mode as a sentence that starts with its outcome."""
    mark = {True: "passed", False: "FAILED", None: "not made"}[passed]
    return f"{mark}: {name}: {sentence(detail)}"
