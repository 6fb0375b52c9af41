"""The phrases that the text report, the page and the figures share."""

from __future__ import annotations

import math
from collections.abc import Sequence

import numpy as np

from polefit.estimates import si
from polefit.modes import BackgroundPole, FitQuality, Identification, Mode
from polefit.report.phrases import band, counted, hertz, listed, percent, plain, sentence, tidy
from polefit.responses import UNITS

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
CERTAIN = 1e4  # misfit ratio from which digits say nothing
SAME = 0.01  # frequencies closer than this are one to a reader
NOISELESS = 1e-6  # of the typical response: a detection limit below is not worth its digits
CAUTIONS = (
    "The verdict holds for the model, the nodes, the band and the terminations that were "
    "simulated; another bias, temperature, load or layout is another circuit.",
    "A simulation is not the hardware: confirm on the bench, done by qualified people under local "
    "codes and licensed practice.",
    "Radio-frequency power burns, and an amplifier that oscillates can destroy itself and what "
    "is connected to it: limit the supply current and terminate every port before power is on.",
)


def detection_limit(result: Identification) -> str | None:
    """Say which hidden mode would have been found, for the least favourable frequency.

    A mode with residue r and damping ratio ζ at frequency f raises a peak of ``|r|/(|ζ|·2πf)``;
    at each frequency the node that sees it best counts.
    """
    detection = result.detection
    if detection is None or detection.frequency_hz.size == 0:
        return None
    ratio = f"a mode with damping ratio {si(detection.damping_ratio, '', 2)}"
    omega = 2 * np.pi * np.asarray(detection.frequency_hz)
    with np.errstate(divide="ignore", invalid="ignore"):
        peak = detection.residue.min(axis=1) / (abs(detection.damping_ratio) * omega)
    seen = peak[np.isfinite(peak)]
    if seen.size == 0:
        return f"{ratio} would have gone unnoticed: the data are blind to it"
    blind = peak.size - seen.size
    highest = peak_text(result, float(seen.max()))
    text = (
        f"{ratio} that raises a peak above {highest} at one of the nodes "
        f"would have been found with {percent(detection.power)} probability"
    )
    return text if not blind else f"{text}, except where every node is blind (see detection)"


def peak_text(result: Identification, limit: float) -> str:
    """Write a detection limit; one far below the response, of exact data, only as such."""
    typical = float(np.median([np.median(np.abs(r.values)) for r in result.responses]))
    if limit < NOISELESS * typical:
        return "a millionth of the typical response"
    return si(limit, UNITS.get(result.quantity, ""), 2)


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


def next_points(points: Sequence[float], most: int = 12) -> tuple[str, ...]:
    """Say what to simulate next; nothing where nothing is asked for."""
    if not points:
        return ()
    count = "1 point" if len(points) == 1 else f"{len(points)} points"
    shown = ", ".join(si(p, "Hz", 7) for p in points[:most])
    rest = f" and {len(points) - most} more" if len(points) > most else ""
    return (f"{count} from {band((min(points), max(points)))}: {shown}{rest}.",)


def evidence_sentence(name: str, passed: bool | None, detail: str) -> str:
    """Write one test of a mode as a sentence that starts with its outcome."""
    mark = {True: "passed", False: "FAILED", None: "not made"}[passed]
    return f"{mark}: {name}: {sentence(detail)}"
