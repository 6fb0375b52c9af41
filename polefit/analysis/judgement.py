"""From a fitted model to modes with verdicts: which poles are claimed, and how sure that is."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
import scipy.special

from polefit.analysis.candidate import Candidate
from polefit.analysis.evidence import Comparison, compare, evidence_for
from polefit.analysis.folding import Claim, as_it_is, fold, images_in
from polefit.analysis.images import with_images
from polefit.analysis.pole_uncertainty import KnownPoles, joint_covariance, known_poles
from polefit.engine.blocks import FloatArray, shared_axis
from polefit.engine.estimation import Estimation, freedom
from polefit.engine.propagation import pole_estimates
from polefit.engine.significance import invert, threshold
from polefit.engine.stable_model import StableModel
from polefit.estimates import Estimate
from polefit.modes import BackgroundPole, Evidence, Mode, NodeView, Verdict
from polefit.responses import Channel

CLAIM_CHANCE = 1e-3
"""Chance per run that a pole fitted to pure noise is claimed as a mode."""
EDGE_WIDTHS = 0.3
"""Half-widths by which a mode must lie inside the band: most of its curve must be seen."""
BEYOND = 2.0
"""Growing poles up to this factor outside the band are mentioned, if they are sure ..."""
BEYOND_SCORE = 100.0
"""... and stand out of the noise by this χ²: fits put poles there for other reasons, too."""
NEAR_BAND = 0.2
"""Modes up to this share of the band edge outside it are shown; they decide nothing."""


@dataclass(frozen=True)
class Judged:
    """Modes and poles that are not claimed.

    Parameters
    ----------
    modes : tuple of Mode
        Most dangerous first.
    background : tuple of BackgroundPole
        With reasons.
    beyond : tuple of complex
        Growing poles outside the band, and not far, whose residues stand out.
    stable_model : StableModel or None
        Comparison with the best stable model, when a right-half-plane mode was in question.
    """

    modes: tuple[Mode, ...]
    background: tuple[BackgroundPole, ...]
    stable_model: StableModel | None
    beyond: tuple[complex, ...]


def judge(
    estimation: Estimation,
    scale: float,
    band_hz: tuple[float, float],
    channels: Sequence[Channel],
    quantity: str,
    confidence: float,
    pump_hz: float | None = None,
) -> Judged:
    """Tell modes from background and give each mode its verdict."""
    known = known_poles(estimation)
    found = [
        _candidate(estimation, known, i, scale, band_hz)
        for i in range(estimation.solution.sections.number)
    ]
    lines, background = _claim(found, estimation, scale)
    claimed = [as_it_is(line) for line in lines]
    if pump_hz is not None:
        claimed = fold(
            lines, _joint(estimation, joint_covariance(estimation) * scale**2, lines), pump_hz
        )
        claimed = with_images(claimed, estimation, scale, band_hz, pump_hz)
    deciding = sum(c.in_band for c in claimed)
    level = 1 - (1 - confidence ** (1 / max(deciding, 1))) / 2
    factor = float(scipy.special.stdtrit(max(freedom(estimation), 1), level))
    against = compare([c.line for c in claimed], estimation, scale)
    views = _node_views(estimation, scale, channels, quantity, pump_hz)
    modes = [_mode(c, estimation, against, factor, scale, views[c.line.index]) for c in claimed]
    modes.sort(key=_danger)
    beyond = [c.pole for c in found if _beyond(c, band_hz, factor, pump_hz)]
    stable = None if against is None else against.stable
    return Judged(tuple(modes), tuple(background), stable, tuple(beyond))


def _joint(
    estimation: Estimation, covariance: FloatArray, lines: Sequence[Candidate]
) -> FloatArray:
    """Return the joint covariance of real and imaginary parts of poles of which each has both."""
    sections = estimation.solution.sections
    jacobian = np.zeros((2 * len(lines), sections.order))
    for i, line in enumerate(lines):
        rows = sections.columns(line.index)
        jacobian[2 * i : 2 * i + 2, rows] = sections.pole_gradient(line.index)
    joint: FloatArray = jacobian @ covariance @ jacobian.T
    for i, line in enumerate(lines):  # with what is added where the order moves a pole
        joint[2 * i : 2 * i + 2, 2 * i : 2 * i + 2] = line.covariance
    return joint


def _beyond(
    c: Candidate, band_hz: tuple[float, float], factor: float, pump_hz: float | None
) -> bool:
    """Tell whether a growing pole outside the band deserves a wider sweep."""
    at = c.pole.imag / (2 * math.pi)
    if pump_hz is not None and images_in(at, pump_hz, band_hz):
        return False  # what it stands for shows inside the band as well
    not_far = band_hz[0] / BEYOND < at < band_hz[1] * BEYOND
    sure = c.pole.real > factor * math.sqrt(max(c.covariance[0, 0], 0.0))
    return not c.in_band and not_far and sure and c.score > BEYOND_SCORE


def _danger(mode: Mode) -> tuple[int, int, float]:
    rank = {"unstable": 0, "undecided": 1, "stable": 2}[mode.verdict]
    return (0 if mode.in_band else 1, rank, mode.damping_ratio.value)


def _candidate(
    estimation: Estimation,
    known: KnownPoles,
    index: int,
    scale: float,
    band_hz: tuple[float, float],
) -> Candidate:
    pole = complex(known.poles[index]) * scale
    paired = estimation.solution.sections.paired
    # under a drive hidden modes are images of those that show, and are fitted as such
    own = (known.covariance if paired else known.moved)[index] * scale**2
    spread = np.diag(own / scale**2 - known.own[index]) * scale**2
    inside, near = _place(pole, known.moved[index] * scale**2, band_hz, estimation, scale)
    return Candidate(
        index,
        pole,
        own,
        float(estimation.scores[index]),
        inside,
        near,
        spread=(float(spread[0]), float(spread[1])),
        firm_std=math.sqrt(max(known.moved[index, 0, 0], 0.0)) * scale if paired else None,
    )


def _place(
    pole: complex,
    covariance: FloatArray,
    band_hz: tuple[float, float],
    estimation: Estimation,
    scale: float,
) -> tuple[bool, bool]:
    """In the band, at least one step and two standard deviations from its edges; or near it."""
    low, high = (2 * np.pi * edge for edge in band_hz)
    rings = pole.imag > 0 or not estimation.solution.sections.paired
    at = pole.imag if rings else abs(pole)
    axis = shared_axis(estimation.blocks) * scale
    step = float(np.interp(at, axis[:-1], np.diff(axis)))
    part = 1 if rings else 0
    margin = step + 2 * math.sqrt(max(covariance[part, part], 0.0))
    if rings:
        margin = max(margin, EDGE_WIDTHS * min(abs(pole.real), 0.1 * at))
    inside = low + (margin if low > 0 else 0.0) <= at <= high - margin and abs(pole) <= high
    near = (1 - NEAR_BAND) * low <= at <= (1 + NEAR_BAND) * high
    return inside, near


def claim_limit(pole: complex, estimation: Estimation) -> float:
    """Return the χ² from which a pole is claimed as a mode, all places counted."""
    channels = sum(block.channels for block in estimation.blocks)
    rings = pole.imag > 0 or not estimation.solution.sections.paired
    columns = 2 if rings else 1
    limit = threshold(channels, estimation.places, CLAIM_CHANCE, columns=columns)
    return limit * estimation.whiteness.inflation


def _claim(
    found: list[Candidate], estimation: Estimation, scale: float
) -> tuple[list[Candidate], list[BackgroundPole]]:
    claimed, background = [], []
    for c in found:
        limit = claim_limit(c.pole, estimation)
        if not c.near_band:
            reason = "outside the band: it stands for everything beyond the band edge"
        elif c.score < limit:
            reason = (
                f"its residues stand out of the noise by χ² = {c.score:.3g} only; "
                f"{limit:.3g} would be needed"
            )
        else:
            claimed.append(c)
            continue
        background.append(BackgroundPole(c.pole, reason))
    return claimed, background


def _mode(
    c: Claim,
    estimation: Estimation,
    against: Comparison | None,
    factor: float,
    scale: float,
    nodes: tuple[NodeView, ...],
) -> Mode:
    estimates = pole_estimates(c.pole, c.covariance)
    std = math.sqrt(max(c.covariance[0, 0], 0.0))
    if c.pole.real < 0 and c.line.firm_std is not None:
        std = c.line.firm_std  # no evidence of growth: what hides behind it need not be feared
    distance = c.pole.real / std if std > 0 else math.copysign(math.inf, c.pole.real)
    limit = claim_limit(c.line.pole, estimation)
    share = max(view.share for view in nodes)
    evidence = evidence_for(c.line, estimation, against, distance, factor, scale, limit, share)
    evidence = (*evidence, *c.evidence)
    return Mode(
        pole_rad_per_s=c.pole,
        covariance=(
            (float(c.covariance[0, 0]), float(c.covariance[0, 1])),
            (float(c.covariance[1, 0]), float(c.covariance[1, 1])),
        ),
        frequency_hz=estimates.frequency_hz,
        natural_frequency_hz=estimates.natural_frequency_hz,
        damping_ratio=estimates.damping_ratio,
        growth_rate_per_s=estimates.growth_rate_per_s,
        verdict=_verdict(distance, factor, evidence, c.in_band),
        probability_unstable=float(scipy.special.ndtr(distance)),
        significance=math.sqrt(c.line.score),
        in_band=c.in_band,
        evidence=evidence,
        nodes=nodes,
        subharmonic=c.subharmonic,
        seen_hz=c.seen_hz,
    )


def _verdict(
    distance: float, factor: float, evidence: Sequence[Evidence], in_band: bool
) -> Verdict:
    if distance < -factor:
        return "stable"
    # outside the band no stable model was held against it
    if in_band and distance > factor and all(item.passed is not False for item in evidence):
        return "unstable"
    return "undecided"


def _node_views(
    estimation: Estimation,
    scale: float,
    channels: Sequence[Channel],
    quantity: str,
    pump_hz: float | None,
) -> list[tuple[NodeView, ...]]:
    """Residues with uncertainties of every section, strongest channel first."""
    solution = estimation.solution
    sections = solution.sections
    coefficients = np.concatenate([part.coefficients for part in solution.parts])
    poles = sections.own_poles() * scale
    values = sections.own_residues(coefficients) * scale
    std = residue_std(estimation) * scale
    rms = np.concatenate(
        [np.sqrt(np.mean(np.abs(block.values) ** 2, axis=1)) for block in estimation.blocks]
    )
    views = []
    for index in range(sections.number):
        width = max(abs(poles[index].real), 1e-12 * abs(poles[index]))
        listed = []
        for k, channel in enumerate(channels):
            leverage = None
            # under a drive −dσ/dG is the sum over the images at all harmonics, also unseen ones
            if quantity == "impedance" and channel.driving_point and pump_hz is None:
                leverage = Estimate.normal(float(values[index, k].real), float(std[index, k, 0]))
            listed.append(
                NodeView(
                    channel=channel,
                    residue=complex(values[index, k]),
                    residue_std=float(np.hypot(std[index, k, 0], std[index, k, 1])),
                    share=float(abs(values[index, k]) / width / max(rms[k], 1e-300)),
                    leverage=leverage,
                )
            )
        listed.sort(key=_strength, reverse=True)
        views.append(tuple(listed))
    return views


def _strength(view: NodeView) -> tuple[bool, float]:
    if view.leverage is not None:
        return True, abs(view.leverage.value)
    return False, abs(view.residue)


def residue_std(estimation: Estimation) -> FloatArray:
    """Return standard uncertainties of both parts of the residues, normalised.

    Returns
    -------
    (sections, K, 2) float ndarray
        From the joint covariance of poles and linear parameters.
    """
    sections = estimation.solution.sections
    pole_covariance = invert(estimation.info.poles)
    factor = estimation.factor
    per_block = []
    for part, linear in zip(estimation.solution.parts, estimation.info.linear, strict=True):
        out = np.zeros((sections.number, part.coefficients.shape[0], 2))
        for index in range(sections.number):
            columns = sections.columns(index)
            rows = linear.inverse[:, columns]
            slope = linear.slope[:, columns]
            conditional = rows @ rows.transpose(0, 2, 1)
            linear_part = conditional + slope @ pole_covariance @ slope.transpose(0, 2, 1)
            cross = -(slope @ pole_covariance)[:, :, columns]
            own = pole_covariance[np.ix_(columns, columns)]
            own = np.broadcast_to(own, (cross.shape[0], *own.shape))
            joint = np.block([[linear_part, cross], [cross.transpose(0, 2, 1), own]])
            gradient = sections.residue_gradient(part.coefficients[:, columns], index)
            variance = np.einsum("kai,kij,kaj->ka", gradient, joint, gradient)
            out[index] = np.sqrt(np.maximum(variance, 0.0) * factor)
        per_block.append(out)
    return np.concatenate(per_block, axis=1)
