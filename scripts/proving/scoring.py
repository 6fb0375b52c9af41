"""Hold an answer against the truth: verdict, claims, intervals, errors."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field

import numpy as np
from scipy.optimize import linear_sum_assignment

from proving.case import DETECTABLE, Case, TrueMode

FAR = 8.0
"""Standard deviations by which a claim may miss its mode."""
SHARE = 0.1
"""Share of |σ| by which it may miss it in any case."""
LARGEST = 0.5
"""Share of |p| by which it may never miss it."""
RESOLVED = 3.0
"""|σ| over its bound below which a true pole is not resolved: a claim may stand for several."""
SMOOTH = 0.3
"""Damping ratio above which a decaying claim may stand for a line or a delay."""


@dataclass(frozen=True)
class Claim:
    """What a tool says of one mode in the band.

    Parameters
    ----------
    pole : complex
        rad/s, Im ≥ 0.
    growth_std, angular_std : float
        Standard uncertainties of its parts, rad/s; zero where the tool gives none.
    growth, angular : (float, float) or None
        95 % intervals, rad/s.
    """

    pole: complex
    growth_std: float = 0.0
    angular_std: float = 0.0
    growth: tuple[float, float] | None = None
    angular: tuple[float, float] | None = None


@dataclass(frozen=True)
class Answer:
    """What a tool says of one case.

    Parameters
    ----------
    verdict : str
        ``unstable``, ``undecided``, ``stable``, or ``error``.
    reason : str
        Its words.
    claims : tuple of Claim
        Modes in the band.
    outside : tuple of Claim
        Modes that it mentions outside the band or at its edge; they decide nothing.
    order : int
        Of its model.
    seconds : float
        Time taken.
    """

    verdict: str
    reason: str = ""
    claims: tuple[Claim, ...] = ()
    outside: tuple[Claim, ...] = ()
    order: int = 0
    seconds: float = 0.0


@dataclass(frozen=True)
class Hit:
    """A detectable true mode and the claim that meets it.

    Parameters
    ----------
    growth_error, angular_error : float
        Error over the Cramér-Rao bound; the latter NaN for real poles.
    growth_covered, angular_covered : bool or None
        Whether the 95 % interval holds the truth; None where there is none.
    claimed : float
        Claimed standard uncertainty of σ over its bound.
    damping : float
        True damping ratio.
    """

    growth_error: float
    angular_error: float
    growth_covered: bool | None
    angular_covered: bool | None
    claimed: float
    damping: float

    @property
    def surprise(self) -> float:
        """Error of σ over its bound or the claimed uncertainty, whichever is larger."""
        return abs(self.growth_error) / max(self.claimed, 1.0)


@dataclass(frozen=True)
class Score:
    """One case judged.

    Parameters
    ----------
    case, answer : Case, Answer
        What was asked and answered.
    false_unstable, false_stable, undecided : bool
        ``unstable`` though nothing grows in the band or at its edge; ``stable`` though a detectable
        mode grows; ``undecided`` though the answer is not open.
    edge : bool
        ``unstable`` where only a mode at the edge of the band grows.
    spare : tuple of Claim
        Claims where there is no true mode.
    blended : tuple of Claim
        Claims amid true poles that cannot be resolved.
    alarms : tuple of Claim
        Growing claims outside the band, though nothing grows there.
    missed : tuple of TrueMode
        Detectable modes in the band that no claim meets, inside or at the edge.
    hits : tuple of Hit
        The others.
    ratio : float
        Time over that of one fixed-order fit; NaN if not measured.
    """

    case: Case
    answer: Answer
    false_unstable: bool = False
    false_stable: bool = False
    undecided: bool = False
    edge: bool = False
    spare: tuple[Claim, ...] = ()
    blended: tuple[Claim, ...] = ()
    alarms: tuple[Claim, ...] = ()
    missed: tuple[TrueMode, ...] = ()
    hits: tuple[Hit, ...] = field(default=())
    ratio: float = float("nan")

    @property
    def badness(self) -> float:
        """How bad it is: wrong verdicts first, then claims, then errors."""
        worst = max((h.surprise for h in self.hits), default=0.0)
        growing = sum(c.pole.real > 0 for c in self.spare)
        return (
            1e6 * self.false_unstable
            + 1e6 * self.false_stable
            + 1e4 * (self.answer.verdict == "error")
            + 1e3 * self.undecided
            + 300 * growing
            + 100 * len(self.spare)
            + 60 * len(self.alarms)
            + 50 * len(self.missed)
            + min(worst, 99.0) * (worst > 4)
        )

    def wrong(self) -> str:
        """Say in a line what was wrong; empty if nothing was."""
        said = []
        if self.false_unstable:
            said.append("FALSE UNSTABLE")
        if self.false_stable:
            said.append("FALSE STABLE")
        if self.answer.verdict == "error":
            said.append(f"ERROR {self.answer.reason[:100]}")
        if self.undecided:
            said.append(f"undecided (is {self.case.answer}): {self.answer.reason[:110]}")
        said += [f"spare {_claim(c)}" for c in self.spare]
        said += [f"alarm outside the band {_claim(c)}" for c in self.alarms]
        said += [f"missed {_mode(m)}" for m in self.missed]
        worst = max((h.surprise for h in self.hits), default=0.0)
        if worst > 4:
            said.append(f"σ off by {worst:.3g} times its bound and its claimed std")
        return "; ".join(said)


def _claim(claim: Claim) -> str:
    zeta = -claim.pole.real / abs(claim.pole)
    sure = abs(claim.pole.real) / claim.growth_std if claim.growth_std > 0 else np.inf
    return f"{claim.pole.imag / (2 * np.pi):.4g} Hz ζ {zeta:.2g} ({sure:.2g} std)"


def _mode(mode: TrueMode) -> str:
    return (
        f"{mode.frequency_hz:.4g} Hz ζ {mode.damping:.2g} (detectability {mode.detectability:.3g})"
    )


def score(case: Case, answer: Answer, ratio: float = float("nan")) -> Score:
    """Judge an answer.

    Parameters
    ----------
    case : Case
        The question.
    answer : Answer
        The answer.
    ratio : float
        Time over that of one fixed-order fit.

    Notes
    -----
    Claims and true poles are paired by optimal assignment of the distance over its allowance:
    the largest of `FAR` standard deviations, claimed or Cramér-Rao, and `SHARE`·|σ|, but
    never above `LARGEST`·|p|. A claim left over is *blended* when a true pole lies within the
    larger of the two |σ| that is buried, has a detectability below `RESOLVED` or a neighbour within
    as many bounds; or where, without a finite order, the claim decays with a damping ratio above
    `SMOOTH`. Else it is *spare*. Claims at the edge may meet modes, but are not counted as spare.
    """
    claims = (*answer.claims, *answer.outside)
    pairs = _paired(claims, case.modes)
    left = [c for i, c in enumerate(answer.claims) if i not in pairs]
    far = [c for i, c in enumerate(claims) if i not in pairs and i >= len(answer.claims)]
    blended = tuple(c for c in left if _is_blend(c, case))
    met = {j: claims[i] for i, j in pairs.items()}
    wanted = [
        (j, m) for j, m in enumerate(case.modes)
        if m.place == "inside" and m.detectability >= DETECTABLE
    ]  # fmt: skip
    said = answer.verdict
    grows = case.growing_inside
    return Score(
        case,
        answer,
        false_unstable=said == "unstable" and not grows and not case.growing_edge,
        false_stable=said == "stable" and case.answer == "unstable",
        undecided=said == "undecided" and case.answer != "open",
        edge=said == "unstable" and not grows and case.growing_edge,
        spare=tuple(c for c in left if c not in blended),
        blended=blended,
        alarms=tuple(c for c in far if c.pole.real > 0),
        missed=tuple(m for j, m in wanted if j not in met),
        hits=tuple(_hit(met[j], m) for j, m in wanted if j in met),
        ratio=ratio,
    )


def _allowance(claim: Claim, mode: TrueMode) -> float:
    own = FAR * float(np.hypot(claim.growth_std, claim.angular_std))
    bound = FAR * float(np.hypot(mode.growth_std, mode.angular_std))
    by = max(own, bound if np.isfinite(bound) else 0.0, SHARE * abs(mode.pole.real))
    return min(by, LARGEST * abs(mode.pole))


def _paired(claims: Sequence[Claim], modes: Sequence[TrueMode]) -> dict[int, int]:
    """Return the index of the true mode for the index of each claim that meets one."""
    if not claims or not modes:
        return {}
    cost = np.array(
        [[abs(c.pole - m.pole) / max(_allowance(c, m), 1e-300) for m in modes] for c in claims]
    )
    rows, columns = linear_sum_assignment(np.minimum(cost, 1.0) + 1e-3 * np.minimum(cost, 50.0))
    return {
        int(i): int(j) for i, j in zip(rows, columns, strict=True) if cost[i, j] <= 1.0
    }  # fmt: skip


def _is_blend(claim: Claim, case: Case) -> bool:
    damping = -claim.pole.real / abs(claim.pole)
    if case.infinite and damping > SMOOTH:
        return True
    return any(
        _unresolved(m, case.modes)
        and abs(claim.pole - m.pole) <= max(abs(m.pole.real), abs(claim.pole.real))
        for m in case.modes
    )


def _unresolved(mode: TrueMode, modes: Sequence[TrueMode]) -> bool:
    """Tell whether the data leave open where a mode is, or which of two it is."""
    if mode.detectability < RESOLVED:
        return True
    return any(
        abs(mode.pole - other.pole) < RESOLVED * np.hypot(mode.growth_std, other.growth_std)
        for other in modes
        if other is not mode and np.isfinite(other.growth_std)
    )


def _hit(claim: Claim, mode: TrueMode) -> Hit:
    real = mode.pole.imag == 0
    growth, angular = claim.growth, claim.angular
    return Hit(
        growth_error=(claim.pole.real - mode.pole.real) / mode.growth_std,
        angular_error=np.nan if real else (claim.pole.imag - mode.pole.imag) / mode.angular_std,
        growth_covered=None if growth is None else growth[0] <= mode.pole.real <= growth[1],
        angular_covered=None
        if angular is None or real
        else angular[0] <= mode.pole.imag <= angular[1],
        claimed=claim.growth_std / mode.growth_std,
        damping=mode.damping,
    )
