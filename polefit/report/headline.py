"""The verdict in one sentence: what a reader in a hurry takes away."""

from __future__ import annotations

from collections.abc import Sequence

from polefit.estimates import si
from polefit.modes import Identification, Mode
from polefit.report.limits import detection_limit
from polefit.report.nodes import strongest_node
from polefit.report.phrases import band, brief, counted, hertz, label, listed, plain, tidy

SURE = 10.0  # standard deviations by which a growing mode beside the band must stand out
_DOUBTS = {
    "growth rate": "its growth rate cannot be told from zero",
    "persistence over orders": "it does not stay where it is in a larger model",
    "stable-model misfit": "a model without it is not ruled out",
    "plausibility of the data": "the data do not look like responses of a circuit",
}
_HYBRID = {
    "hybrid": " with port 1 open and port 2 shorted",
    "inverse-hybrid": " with port 1 shorted and port 2 open",
}


def verdict_sentence(result: Identification) -> str:
    """Give the verdict in one sentence, the word in capitals first."""
    word = result.verdict.upper()
    body = {"unstable": _unstable, "stable": _stable}.get(result.verdict, _undecided)(result)
    return f"{word}: {body}"


def short_form(result: Identification) -> str:
    """Return the result in one short line, for the prompt of an interpreter."""
    growing = sum(m.verdict == "unstable" and m.in_band for m in result.modes)
    found = counted(len(result.modes), "mode") + (f", {growing} growing" if growing else "")
    taken = f"{counted(len(result.channels), 'channel')} of {result.quantity}"
    return f"<Identification: {result.verdict}; {found}; {taken}, {band(result.band_hz)}>"


def edge_warning(result: Identification) -> str:
    """Name what grows at the edge of the band or outside, where it is not judged; or nothing."""
    found = [m for m in result.modes if not m.in_band and _grows(m)]
    if not found:
        return ""
    places = listed((label(m) for m in found), 3)
    what = "a growing mode" if len(found) == 1 else f"{len(found)} growing modes"
    verb = "is" if len(found) == 1 else "are"
    lead = "BUT " if result.verdict == "stable" else ""
    return f"{lead}{what} at {places} at the edge of the band {verb} not judged: widen the sweep"


def _grows(mode: Mode) -> bool:
    low = mode.growth_rate_per_s.low
    sure = low is not None and low > 0 and mode.significance > SURE
    return mode.verdict == "unstable" or sure


def loads(result: Identification) -> str:
    """Say how the probe itself terminates the ports, and under which drive; or nothing."""
    return _terminations(result) + driven(result)


def driven(result: Identification) -> str:
    """Name the periodic drive; nothing without one."""
    pump = result.pump_hz
    return "" if pump is None else f" under the drive at {si(pump, 'Hz', 5)}"


def _terminations(result: Identification) -> str:
    if result.quantity == "admittance":
        return " with every port shorted"
    if result.quantity == "scattering":
        references = [ohm for r in result.responses for ohm in r.reference_ohm or ()]
        shown = listed((si(ohm, "Ω", 4) for ohm in references), 3)
        return f" with every port loaded with {shown or 'its reference resistance'}"
    return _HYBRID.get(result.quantity, "")


def joined(parts: Sequence[str]) -> str:
    """Join the parts of a sentence that say anything."""
    return "; ".join(part for part in parts if part) + "."


def _unstable(result: Identification) -> str:
    growing = [m for m in result.modes if m.verdict == "unstable" and m.in_band]
    if not growing:
        return joined([tidy(result.reason.rstrip(".")), edge_warning(result)])
    mode = growing[0]
    lead = "" if len(growing) == 1 else f"{len(growing)} modes grow; the most dangerous: "
    core = f"{lead}{growth(mode)}{loads(result)}"
    return joined([core, strongest(mode), edge_warning(result)])


def growth(mode: Mode) -> str:
    """Say that a mode grows, where and how fast."""
    time = si(1 / mode.growth_rate_per_s.value, "s", 3, keep_zeros=True)
    if mode.real:
        return f"a real pole grows without ringing, time constant {time}"
    half = ", half the drive's frequency," if mode.subharmonic else ""
    return (
        f"a mode at {label(mode, 5)}{half} grows with time constant {time} "
        f"(damping ratio {brief(mode.damping_ratio)})"
    )


def strongest(mode: Mode) -> str:
    """Say where a mode shows most; nothing where no channel is known."""
    node = strongest_node(mode)
    return f"strongest at {plain(node, 30)}" if node else ""


def _stable(result: Identification) -> str:
    names = listed(c.output for c in result.channels)
    single = len(dict.fromkeys(c.output for c in result.channels)) == 1
    loaded = loads(result)
    converts = result.quantity in ("admittance", "scattering")
    open_ports = " (for open ports: --quantity impedance)" if converts else ""
    parts = [
        f"no unstable mode between {si(result.band_hz[0], 'Hz')} and "
        f"{si(result.band_hz[1], 'Hz')} at node{'' if single else 's'} {names}{loaded}{open_ports}",
        edge_warning(result),
    ]
    ringing = [m for m in result.modes if m.in_band and not m.real]
    if ringing:
        mode = min(ringing, key=lambda m: m.damping_ratio.value)
        parts.append(
            f"lightest damped mode: {label(mode)}, damping ratio {brief(mode.damping_ratio)}"
        )
    return joined([*parts, detection_limit(result) or ""])


def _undecided(result: Identification) -> str:
    step = next_step(result.next_points_hz)
    doubtful = [m for m in result.modes if m.verdict == "undecided" and m.in_band]
    if not doubtful or any(m.verdict == "unstable" and m.in_band for m in result.modes):
        return joined([tidy(result.reason.rstrip(".")), edge_warning(result), step])
    mode = doubtful[0]
    lead = "" if len(doubtful) == 1 else f"{len(doubtful)} modes may grow; the first: "
    at_hz = hertz(mode.natural_frequency_hz.value if mode.real else mode.frequency_hz.value, 3)
    what = f"a real pole ({at_hz})" if mode.real else f"a mode near {at_hz}"
    node = strongest_node(mode)
    at = f" at {plain(node, 30)}" if node else ""
    core = f"{lead}{what}{at} may grow{loads(result)}"
    return joined([core, _doubt(mode), edge_warning(result), step])


def next_step(points: Sequence[float]) -> str:
    """Say in a few words what to simulate next; nothing where nothing is asked for."""
    if not points:
        return ""
    span = band((min(points), max(points)))
    return f"next: simulate {counted(len(points), 'point')} from {span}"


def _doubt(mode: Mode) -> str:
    """Say shortly why the data cannot tell."""
    failed = [test for test in mode.evidence if test.passed is False]
    if not failed:
        return _DOUBTS["growth rate"]
    test = failed[0]
    return _DOUBTS.get(test.name, tidy(plain(test.detail.partition(";")[0].rstrip("."), 120)))
