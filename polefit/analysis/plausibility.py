"""Are these the responses of a circuit at all? Signs that numbers were mistaken for others.

Magnitudes without phase, parts that were swapped, angles in the wrong unit, a reference plane that
turned the phase: fits to any of these need growing poles, often with all evidence agreeing.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace

import numpy as np

from polefit.analysis.evidence import MANY
from polefit.analysis.judgement import Judged
from polefit.engine import complex_poles
from polefit.engine.estimation import Estimation
from polefit.engine.order import criterion, search
from polefit.errors import DataError
from polefit.modes import Evidence, Mode
from polefit.responses import ResponseSet

NAME = "plausibility of the data"
REAL_CHANGE = 1e-3
"""A response without imaginary part may change by this share: digits after the point run out."""
CROWD = 4
"""So many growing modes are the mark of data which no circuit gave ..."""
CROWD_DOUBTED, CROWD_OVERLAPPING = 2, 3
"""... if so many are in doubt themselves, or so many lie within the width of another one."""
CROWD_REAL = (2, 3)
"""So many growing modes that do not ring, among so many or in doubt, count alike."""
HAIR = 0.01
"""A growing mode of which the half-width is so small a part of a step shows in one sample only."""
NOTHING = 0.02
"""Share of the response up to which power given off may be noise."""
ASYMMETRIC = 10.0
"""How much lower the criterion must be without conjugates."""
ALL_GROWING = 3
"""If so many modes grow and none decays, the sign of the imaginary part is asked about ..."""
ALL_PASSIVE = 2
"""... and so many are doubted if no probed port gives off power at any sample."""


def refuse_without_phase(one: ResponseSet) -> None:
    """Refuse responses that change with frequency but have no imaginary part.

    Parameters
    ----------
    one : ResponseSet
        Of a circuit without periodic drive; others pass.

    Raises
    ------
    DataError
        For magnitudes taken for responses.

    Notes
    -----
    A real response H(jω) makes H(s) even: with every pole p it has one at −p. Of a circuit with
    decaying modes only it is a constant.
    """
    if one.pump_hz is not None or one.points < 3:
        return
    for channel, column in zip(one.channels, one.values.T, strict=True):
        real = column.real
        if not np.any(column.imag) and np.ptp(real) > REAL_CHANGE * np.abs(real).max():
            raise DataError(
                f"{channel}: the response changes with frequency but has no imaginary part at any "
                "point, which no circuit does; export real and imaginary part, or magnitude and "
                "phase, not magnitudes or real parts alone"
            )


def put_in_doubt(judged: Judged, sets: Sequence[ResponseSet], estimation: Estimation) -> Judged:
    """Take back *unstable* where the growing modes speak against the data, not the circuit.

    Parameters
    ----------
    judged : Judged
        Modes as judged one by one.
    sets : sequence of ResponseSet
        The data behind them.
    estimation : Estimation
        The model.

    Returns
    -------
    Judged
        The same, or with growing modes in the band undecided and the reason as failed evidence.
    """
    doubt = _doubt([mode for mode in judged.modes if mode.in_band], sets, estimation)
    if doubt is None:
        return judged
    failed = Evidence(NAME, False, doubt)
    modes = [_doubted(mode, failed) if _grows(mode) else mode for mode in judged.modes]
    return replace(judged, modes=tuple(sorted(modes, key=_danger)))


def sign_notes(modes: Sequence[Mode], sets: Sequence[ResponseSet]) -> list[str]:
    """Ask about the sign of the imaginary part where everything in the band grows.

    Parameters
    ----------
    modes : sequence of Mode
        As judged.
    sets : sequence of ResponseSet
        The data.

    Returns
    -------
    list of str
        One sentence, or none.
    """
    inside = [mode for mode in modes if mode.in_band]
    if len(inside) < ALL_GROWING or not all(_grows(mode) for mode in inside):
        return []
    if sets[0].pump_hz is not None:
        return []
    return [
        f"all {len(inside)} modes in the band grow, none decays: check that the data follow "
        "exp(+jωt), where an inductor has a positive imaginary part; with the other sign every "
        "mode is mirrored"
    ]


def _doubted(mode: Mode, failed: Evidence) -> Mode:
    verdict = "undecided" if mode.verdict == "unstable" else mode.verdict
    return replace(mode, verdict=verdict, evidence=(failed, *mode.evidence))


def _danger(mode: Mode) -> tuple[bool, bool, float]:
    return not mode.in_band, mode.verdict == "stable", mode.damping_ratio.value


def _grows(mode: Mode) -> bool:
    return mode.in_band and mode.growth_rate_per_s.value > 0


def _doubt(
    inside: Sequence[Mode], sets: Sequence[ResponseSet], estimation: Estimation
) -> str | None:
    """Return what speaks against the data; None if nothing does."""
    growing = [mode for mode in inside if _grows(mode)]
    if not growing or sets[0].pump_hz is not None:
        return None
    if all(_imaginary(one) for one in sets):
        return (
            "the responses are purely imaginary, as of a circuit without losses or of data "
            "without real part; such data cannot tell growing from decaying"
        )
    if any(mode.real for mode in growing) and asymmetric(estimation):
        return (
            "poles without their conjugates describe the data better than those that a real "
            "circuit has, as where a phase is wrong: parts swapped, a constant angle added, points "
            "too few for a long line; check the export"
        )
    doubted = sum(mode.verdict != "unstable" for mode in growing)
    if _crowded(growing, doubted, sets):
        return (
            f"{len(growing)} modes seem to grow, close together or in doubt themselves, as where "
            "numbers are no response of a circuit: phase lost or in the wrong unit, values "
            "clipped, sweeps joined with a step; check the export"
        )
    if len(inside) >= ALL_PASSIVE and len(growing) == len(inside) and _passive(sets):
        return (
            f"all {len(inside)} modes grow though every probed port looks passive, as where the "
            "sign of the imaginary parts is reversed; check that the data follow exp(+jωt)"
        )
    return None


def _crowded(growing: Sequence[Mode], doubted: int, sets: Sequence[ResponseSet]) -> bool:
    """Tell whether growing modes crowd as where they mend what is no response."""
    if len(growing) >= MANY:
        return True
    real = sum(mode.real for mode in growing)
    if len(growing) < CROWD:
        return real >= CROWD_REAL[0] and (len(growing) >= CROWD_REAL[1] or doubted > 0)
    poles = np.array([mode.pole_rad_per_s for mode in growing])
    apart = np.abs(poles[:, np.newaxis] - poles)
    np.fill_diagonal(apart, np.inf)
    overlapping = np.any(apart < poles.real[:, np.newaxis] + poles.real, axis=1)
    step = min(float(np.median(np.diff(one.frequency_hz))) for one in sets)
    doubted += sum(
        mode.verdict == "unstable" and mode.pole_rad_per_s.real < HAIR * 2 * np.pi * step
        for mode in growing
    )
    return doubted >= CROWD_DOUBTED or int(overlapping.sum()) >= CROWD_OVERLAPPING


def asymmetric(estimation: Estimation) -> bool:
    """Tell whether poles that need no conjugates describe the data with fewer parameters.

    Parameters
    ----------
    estimation : Estimation
        The model, with poles in conjugate pairs or real.

    Returns
    -------
    bool

    Notes
    -----
    Responses of real circuits have H(−jω) = H*(jω), so that a pole comes with its conjugate for
    nothing. A phase that was turned by a constant, or parts that were swapped, break this: then
    poles that stand alone win by Schwarz's criterion.
    """
    found = search(estimation.blocks, kind=complex_poles.NONE)
    alone = criterion(estimation.blocks, found.solution)
    return alone < criterion(estimation.blocks, estimation.solution) - ASYMMETRIC


def _imaginary(one: ResponseSet) -> bool:
    return not np.any(one.values.real)


def _passive(sets: Sequence[ResponseSet]) -> bool:
    """Tell whether driving points are probed and none of them gives off power anywhere."""
    seen = False
    for one in sets:
        columns = [k for k, channel in enumerate(one.channels) if channel.driving_point]
        own = one.values[:, columns]
        if one.quantity in ("impedance", "admittance"):
            given_off = own.real < -NOTHING * np.abs(own)
        elif one.quantity == "scattering":
            given_off = np.abs(own) > 1 + NOTHING
        else:
            return False
        if np.any(given_off):
            return False
        seen |= bool(columns)
    return seen
