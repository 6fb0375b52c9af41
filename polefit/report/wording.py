"""The sentences and short phrases that the text report, the page and the figures share."""

from __future__ import annotations

import math
import re
from collections.abc import Iterable, Sequence
from dataclasses import dataclass

import numpy as np

from polefit.engine.propagation import pole_jacobian
from polefit.estimates import Estimate, si
from polefit.modes import BackgroundPole, Identification, Mode, NodeView
from polefit.responses import UNITS

MILLISIEMENS = 1e-3
_GLUE = re.compile(r"(?<=\d) (?=±)|(?<=±) (?=\d)|(?<=\d) (?=[afpnµmkMGTPE]?(?:Hz|s|Ω|S|%)(?!\w))")
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
HARDLY_SEEN = 1e-3  # of the strongest residue
ALWAYS = 3  # nodes of a loop that are listed however weak
CAUTIONS = (
    "The verdict holds for the model, the nodes, the band and the terminations that were "
    "simulated; another bias, temperature, load or layout is another circuit.",
    "A simulation is not the hardware: confirm on the bench, done by qualified people under local "
    "codes and licensed practice.",
    "Radio-frequency power burns, and an amplifier that oscillates can destroy itself and what "
    "is connected to it: limit the supply current and terminate every port before power is on.",
)

LEVERAGE_NOTE = (
    "Behind each node: damping ratio added by 1 mS to ground, first order; negative makes it worse."
)
RESIDUE_NOTE = "Behind each node: its residue, relative to the strongest."


@dataclass(frozen=True)
class NodeStrength:
    """How strongly a mode shows at one channel, ready to print.

    Parameters
    ----------
    name : str
        The channel.
    damping_per_ms : Estimate or None
        Damping ratio added by 1 mS of shunt conductance there, to first order.
    leverage : Estimate or None
        As in the mode's node view.
    relative : float
        ``|residue|`` over that of the strongest channel.
    """

    name: str
    damping_per_ms: Estimate | None
    leverage: Estimate | None
    relative: float

    @property
    def brief(self) -> str:
        """Name and strength in a few characters."""
        if self.damping_per_ms is not None:
            value = self.damping_per_ms.value
            return f"{self.name} {'+' if value > 0 else ''}{si(value, '', 2, keep_zeros=True)}"
        return f"{self.name} {percent(self.relative)}"


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


def listed(names: Iterable[str], most: int = 4, limit: int = 30) -> str:
    """Join names with commas, the first `most` of them, and count the rest."""
    all_names = list(dict.fromkeys(names))
    shown = ", ".join(plain(name, limit) for name in all_names[:most])
    rest = len(all_names) - most
    return shown if rest <= 0 else f"{shown} and {rest} more"


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


def time_constant(mode: Mode) -> str:
    """Write 1/``|σ|`` with its uncertainty, or its lower limit where the sign is open."""
    growth = mode.growth_rate_per_s
    if growth.low is not None and growth.high is not None and growth.low <= 0 <= growth.high:
        fastest = max(-growth.low, growth.high)
        return "longer than " + si(1 / fastest, "s", 3) if fastest > 0 else "without bound"
    if growth.value == 0 or not math.isfinite(growth.value):
        return "without bound" if growth.value == 0 else "not known"
    std = None if growth.std is None else growth.std / growth.value**2
    return Estimate(1 / abs(growth.value), std).text("s")


def brief(estimate: Estimate) -> str:
    """Write an estimate for a sentence: a very sharp one is rounded to four digits."""
    if estimate.std is not None and estimate.std < 1e-6 * abs(estimate.value):
        return si(estimate.value, "", 4, keep_zeros=True)
    return estimate.text()


def trend(mode: Mode) -> str:
    """Say what the mode does in time, in one word."""
    return {"unstable": "grows", "stable": "decays"}.get(mode.verdict, "open")


def label(mode: Mode, digits: int = 4) -> str:
    """Name a mode by its frequency, or as a real pole."""
    if mode.real:
        return f"real, {si(mode.natural_frequency_hz.value, 'Hz', digits)}"
    return si(mode.frequency_hz.value, "Hz", digits)


def node_strengths(mode: Mode) -> tuple[NodeStrength, ...]:
    """Return the channels of a mode in the order of its views, with what a shunt does there.

    Notes
    -----
    A conductance G at a node moves the pole by −r·G (r the residue of the driving-point
    impedance there); the change of ζ follows with the exact derivatives of ζ.
    """
    strongest = max((abs(view.residue) for view in mode.nodes), default=0.0)
    return tuple(
        NodeStrength(
            name=str(view.channel),
            damping_per_ms=_damping_per_ms(mode, view),
            leverage=view.leverage,
            relative=abs(view.residue) / strongest if strongest > 0 else 0.0,
        )
        for view in mode.nodes
    )


def _damping_per_ms(mode: Mode, view: NodeView) -> Estimate | None:
    if view.leverage is None or mode.real or mode.pole_rad_per_s == 0:
        return None
    along_sigma, along_omega = pole_jacobian(mode.pole_rad_per_s)[2] * -MILLISIEMENS
    value = along_sigma * view.leverage.value + along_omega * view.residue.imag
    std = view.leverage.std
    return Estimate.normal(float(value), None if std is None else abs(float(along_sigma)) * std)


def nodes_in_order(result: Identification, mode_index: int) -> tuple[str, ...]:
    """Names of the nodes of a mode: of its loop where it has one, else of its views."""
    for loop in result.loops:
        if loop.mode == mode_index:
            return loop.nodes
    return tuple(str(view.channel) for view in result.modes[mode_index].nodes)


def unit_of(quantity: str) -> str:
    """Return the unit of a residue of this quantity."""
    unit = UNITS.get(quantity, "")
    return f"{unit}·rad/s" if unit else "rad/s"


def band(limits: Sequence[float]) -> str:
    """Write a band of frequencies."""
    return f"{si(limits[0], 'Hz', 6)} to {si(limits[1], 'Hz', 6)}"


def verdict_sentence(result: Identification) -> str:
    """Give the verdict in one sentence, the word in capitals first."""
    word = result.verdict.upper()
    body = {"unstable": _unstable, "stable": _stable}.get(result.verdict, _undecided)(result)
    return f"{word}: {body}"


def _unstable(result: Identification) -> str:
    growing = [(i, m) for i, m in enumerate(result.modes) if m.verdict == "unstable" and m.in_band]
    if not growing:
        return f"{result.reason}."
    index, mode = growing[0]
    lead = "" if len(growing) == 1 else f"{len(growing)} modes grow; the most dangerous: "
    time = si(1 / mode.growth_rate_per_s.value, "s", 3, keep_zeros=True)
    if mode.real:
        core = f"a real pole grows without ringing, time constant {time}"
    else:
        core = (
            f"a mode at {label(mode, 5)} grows with time constant {time} "
            f"(damping ratio {brief(mode.damping_ratio)})"
        )
    nodes = nodes_in_order(result, index)
    strongest = f"; strongest at {plain(nodes[0], 30)}" if nodes else ""
    return f"{lead}{core}{strongest}."


def _stable(result: Identification) -> str:
    names = listed(c.output for c in result.channels)
    single = len(dict.fromkeys(c.output for c in result.channels)) == 1
    parts = [
        f"no unstable mode between {si(result.band_hz[0], 'Hz')} and "
        f"{si(result.band_hz[1], 'Hz')} at node{'' if single else 's'} {names}"
    ]
    ringing = [m for m in result.modes if m.in_band and not m.real]
    if ringing:
        mode = min(ringing, key=lambda m: m.damping_ratio.value)
        parts.append(
            f"lightest damped mode: {label(mode)}, damping ratio {brief(mode.damping_ratio)}"
        )
    limit = detection_limit(result)
    if limit is not None:
        parts.append(limit)
    return "; ".join(parts) + "."


def _undecided(result: Identification) -> str:
    reason = result.reason.rstrip(".")
    step = "simulate the points listed below" if result.next_points_hz else ""
    return f"{reason}; next: {step}." if step else f"{reason}."


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
    unit = UNITS.get(result.quantity, "")
    text = (
        f"{ratio} that raises a peak above {si(float(seen.max()), unit, 2)} at one of the nodes "
        f"would have been found with {percent(detection.power)} probability"
    )
    return text if not blind else f"{text}, except where every node is blind (see detection)"


def basis(result: Identification) -> tuple[tuple[str, str], ...]:
    """Return what the verdict rests on, as pairs of a heading and a sentence."""
    fit, band_text = result.fit, band(result.band_hz)
    outputs = [c.output for c in result.channels]
    rows = [
        ("Band", f"{band_text}; {_points(result)}"),
        ("Nodes", f"{listed(outputs, 12)} ({len(result.channels)} channels, {result.quantity})"),
        ("Terminations", result.termination),
        ("Confidence", f"{percent(result.confidence)}; intervals are at 95 %"),
        ("Model", f"order {fit.order}; {fit.order_reason}"),
        (
            "Fit",
            f"residual {si(fit.rms_relative, '', 2)} of the response (rms); "
            + ("it looks like noise" if fit.residual_white else "it does NOT look like noise"),
        ),
        ("Noise", f"{si(fit.noise_relative, '', 2)} of the response; {fit.noise_origin}"),
        ("Stable model", _misfit(fit.stable_model_misfit)),
    ]
    if result.detection is not None:
        limit = detection_limit(result)
        rows.append(("Detection", f"{limit}." if limit else "no frequency was tried"))
    else:
        rows.append(("Detection", "what would have gone unnoticed was not computed"))
    return tuple((heading, _sentence(text)) for heading, text in rows)


def _points(result: Identification) -> str:
    counts = [r.points for r in result.responses]
    if len(counts) == 1:
        return f"{counts[0]} points"
    if len(set(counts)) == 1:
        return f"{counts[0]} points in each of {len(counts)} sets"
    return f"{min(counts)} to {max(counts)} points in each of {len(counts)} sets"


def _misfit(ratio: float | None) -> str:
    if ratio is None or math.isnan(ratio):
        return "the best model without growing poles was not compared"
    times = "as well as" if ratio < 1.005 else f"{si(ratio, '', 3)} times worse than"
    return f"the best model without growing poles fits {times} the free one"


def _sentence(text: str) -> str:
    clean = plain(text.strip(), 2000)
    return clean if clean.endswith((".", "!", "?")) else f"{clean}."


def loop_table(result: Identification, index: int, most: int) -> list[tuple[str, ...]]:
    """Tabulate the nodes of a suspect loop: headings, then at most `most` rows.

    Columns that would stay empty are left out, and so are nodes that hardly see the mode.
    """
    loop = result.loops[index]
    by_name = {s.name: s for s in node_strengths(result.modes[loop.mode])}
    seen = [n for n in loop.nodes if n not in by_name or by_name[n].relative >= HARDLY_SEEN]
    nodes = loop.nodes[: max(ALWAYS, len(seen))] if len(seen) < ALWAYS else tuple(seen)
    rows = [("node", "damping ratio added per mS", "leverage in 1/(s·S)", "residue")]
    for name in nodes[:most]:
        strength = by_name.get(name)
        added = None if strength is None else strength.damping_per_ms
        leverage = None if strength is None else strength.leverage
        rows.append(
            (
                plain(name, 30),
                "" if added is None else added.text(),
                "" if leverage is None else leverage.text(),
                "" if strength is None else percent(strength.relative),
            )
        )
    keep = [c for c in range(4) if c == 0 or any(row[c] for row in rows[1:])]
    return [tuple(row[c] for c in keep) for row in rows]


def more_nodes(count: int) -> str:
    """Say how many nodes of a loop are not listed."""
    return f"and {count} more node{'' if count == 1 else 's'} at which it shows less"


def suspects(result: Identification) -> set[int]:
    """Return the indices of the modes to look at: those not stable, and those of a suspect loop."""
    doubtful = {i for i, mode in enumerate(result.modes) if mode.verdict != "stable"}
    return doubtful | {loop.mode for loop in result.loops}


def notes(result: Identification) -> tuple[str, ...]:
    """Return the notes that are not already listed as assumptions of a file."""
    listed_before = {a for source in result.sources for a in source.assumptions}
    return tuple(note for note in result.notes if note not in listed_before)


def background_row(pole: BackgroundPole) -> tuple[str, str, str]:
    """Return natural frequency, damping ratio and reason of a pole that is not claimed."""
    p = pole.pole_rad_per_s
    ratio = si(-p.real / abs(p), "", 3) if p else "not defined"
    return si(abs(p) / math.tau, "Hz"), ratio, plain(pole.reason, 400)


def next_points(result: Identification, most: int = 12) -> tuple[str, ...]:
    """Say what to simulate next; nothing where nothing is asked for."""
    points = result.next_points_hz
    if not points:
        return ()
    count = "1 point" if len(points) == 1 else f"{len(points)} points"
    shown = ", ".join(si(p, "Hz", 7) for p in points[:most])
    rest = f" and {len(points) - most} more" if len(points) > most else ""
    return (f"{count} from {band((min(points), max(points)))}: {shown}{rest}.",)


def evidence_sentence(name: str, passed: bool | None, detail: str) -> str:
    """Write one test of a mode as a sentence that starts with its outcome."""
    mark = {True: "passed", False: "FAILED", None: "not made"}[passed]
    return f"{mark}: {name}: {_sentence(detail)}"
