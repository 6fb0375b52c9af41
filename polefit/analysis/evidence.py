"""What speaks for and against a mode: named facts, each with what was found and what was asked."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from polefit.analysis.candidate import Candidate
from polefit.analysis.persistence import persistence
from polefit.engine.estimation import Estimation
from polefit.engine.stable_model import StableModel, compare_with_stable
from polefit.modes import Evidence

STABLE_MODEL_RISE = 10.8
"""Rise of χ² that speaks against every stable model (χ² with one degree, p = 0.001)."""
COLOURED_MISFIT = 10.0
"""Where the residual is not noise-like a stable model must fit this many times worse."""
GROWING_SCORE = 2.0
"""A growing mode is asked for so many times the χ² from which a pole is claimed. One whose growth
is known to a sixth has three times that much; spare pairs that mend small errors of a model whose
order is finite stay below."""
LEAST_SHARE = 1e-9
"""Peak over the response below which a growing mode is not believed, however little noise there
seems to be: simulators solve to 1e-12 of their largest numbers, other libraries write less."""
MANY = 6
"""So many growing modes are the mark of data which no circuit gave; none is tested alone."""
MOSTLY_NOISE = 0.5
NOISY_MISFIT = 1.1
"""Where noise exceeds half of the response at most samples, its law is uncertain as well: a stable
model must fit at least this many times worse."""
COMPANION_MISFIT = (1.0, 3.0, 10.0)
"""The same for a growing mode that shares its resonance curve with no, one, or more other modes of
which one is stronger. That is how a fit mends data that no small rational function
describes: passive resonators, distorted by drive or behind unmodelled lines, were seen to reach 8
with several companions, 4.5 with a coloured residual and 19 with both."""
COMPANION_WIDTHS = 3.0
"""How many half-widths apart two modes may lie to count as one resonance curve ..."""
COMPANION_RATIO = 5.0
"""... and how many times wider the other may be."""
BROAD, BROAD_MISFIT = 0.3, 3.0
"""Growing modes with ζ below −0.3, and real ones, are asked for this: a drift of the gain by 1 % in
data with 0.1 % of noise was seen to reach 2.1."""
COMPARABLE = 0.3
"""Within one half-width a mode this much weaker counts like a stronger one: the two may cancel."""


@dataclass(frozen=True)
class Comparison:
    """The best stable model against the free one, and what casts doubt on the free one.

    Parameters
    ----------
    stable : StableModel
        With all poles confined.
    alone : dict of int to StableModel
        For each growing mode in the band, with the other growing modes left where they are.
    companions : dict of int to int
        For each growing mode in the band, how many modes share its resonance curve.
    distorted : bool
        Whether one of these shows that the data are not those of a small rational function.
    noisy : bool
        Whether noise exceeds half of the response at most samples.
    """

    stable: StableModel
    alone: dict[int, StableModel]
    companions: dict[int, int]
    distorted: bool
    noisy: bool

    def asks_more_of(self, c: Candidate) -> bool:
        """Whether a mode is worth tests that fit again: it grows, and few others do."""
        return c.index in self.companions and len(self.companions) < MANY


def compare(
    claimed: Sequence[Candidate], estimation: Estimation, scale: float
) -> Comparison | None:
    """Fit the best stable model where a growing mode is in question; None where none is."""
    growing = [c for c in claimed if c.pole.real > 0 and c.in_band]
    if not growing:
        return None

    def against(others: Sequence[Candidate]) -> StableModel:
        return compare_with_stable(
            estimation.blocks,
            estimation.solution,
            [estimation.past, estimation.richest],
            estimation.level,
            [p / scale for c in others for p in (c.pole, *c.images)],
        )

    stable = against(())
    alone = {c.index: stable for c in growing}
    if 1 < len(growing) < MANY:
        alone = {c.index: against([o for o in growing if o is not c]) for c in growing}
    companions = {c.index: _companions(c, estimation, scale) for c in growing}
    distorted = any(
        n > 0 and alone[i].misfit_ratio < COMPANION_MISFIT[min(n, 2)] for i, n in companions.items()
    )
    return Comparison(stable, alone, companions, distorted, _noisy(estimation))


def evidence_for(
    c: Candidate,
    estimation: Estimation,
    against: Comparison | None,
    distance: float,
    factor: float,
    scale: float,
    limit: float = 0.0,
    share: float = 1.0,
) -> tuple[Evidence, ...]:
    """Collect what was tested on one mode.

    Parameters
    ----------
    distance : float
        Growth rate over its standard uncertainty.
    factor : float
        What is needed of it.
    limit : float
        χ² of its residues from which a pole is claimed as a mode.
    share : float
        Its peak over the rms response of the channel that shows it best.
    """
    items = [
        Evidence(
            "growth rate",
            abs(distance) > factor,
            f"the growth rate lies {abs(distance):.3g} standard uncertainties from zero; "
            f"{factor:.2f} are needed",
        ),
        _residue(c, limit, share),
        *persistence(c, estimation, scale, against is not None and against.asks_more_of(c)),
    ]
    if against is not None and c.index in against.companions:
        items.append(_against_stable(c, against, estimation))
    return tuple(items)


def _residue(c: Candidate, limit: float, share: float) -> Evidence:
    """Check the residues; a growing mode must stand out clearly, not just be claimed."""
    asked = limit * (GROWING_SCORE if c.pole.real > 0 else 1.0)
    detail = f"its residues stand out of the noise by χ² = {c.score:.3g}"
    if c.score < asked:
        detail += f"; {asked:.3g} are asked for of a growing mode"
    tiny = c.pole.real > 0 and share < LEAST_SHARE
    if tiny:
        detail += f", but its peak is {share:.1g} of the response: no solver is that exact"
    return Evidence("residue", c.score >= asked and not tiny, detail)


def _noisy(estimation: Estimation) -> bool:
    ratios = [
        noise.sum(axis=1) / np.maximum(np.abs(block.values) ** 2, 1e-300)
        for block, noise in zip(estimation.blocks, estimation.noise, strict=True)
    ]
    return float(np.median(np.concatenate([r.ravel() for r in ratios]))) > MOSTLY_NOISE**2


def _companions(c: Candidate, estimation: Estimation, scale: float) -> int:
    """Count the modes on one resonance curve with a growing one, if one of them is stronger."""
    sections = estimation.solution.sections
    poles = sections.own_poles()
    coefficients = np.concatenate([part.coefficients for part in estimation.solution.parts])
    strength = np.linalg.norm(sections.own_residues(coefficients), axis=1)
    distance = np.abs(poles - c.pole / scale)
    own = int(np.argmin(distance))
    width, widths = abs(poles[own].real), np.abs(poles.real)
    near = (distance < COMPANION_WIDTHS * np.maximum(widths, width)) & (
        (poles.imag > 0) | (not sections.paired)
    )
    near &= widths < COMPANION_RATIO * width
    near[[i for i in c.related if i != own]] = False
    overlapping = distance < np.maximum(widths, width)
    rival = strength > np.where(overlapping, COMPARABLE, 1.0) * strength[own]
    rival[own] = False
    return int(near.sum()) - 1 if np.any(near & rival) else 0


def _against_stable(c: Candidate, against: Comparison, estimation: Estimation) -> Evidence:
    stable, whiteness = against.alone[c.index], estimation.whiteness
    companions = against.companions[c.index]
    asked = COMPANION_MISFIT[2 if against.distorted else min(companions, 2)]
    asked *= 1.0 if whiteness.white else COLOURED_MISFIT
    asked = max(asked, NOISY_MISFIT if against.noisy else 1.0)
    broad = c.pole.real > BROAD * abs(c.pole)
    asked = max(asked, BROAD_MISFIT if broad else 1.0)
    detail = (
        f"the best model without {'this' if len(against.alone) > 1 else 'a'} right-half-plane pole "
        f"({stable.order} poles) misses the data {_times(stable.misfit_ratio)} as far"
    )
    doubts = [] if whiteness.white else ["the residual is not noise-like"]
    if companions:
        doubts.append("the mode lies on the resonance curve of a stronger one")
    elif against.distorted:
        doubts.append("a resonance in the band looks distorted")
    if against.noisy:
        doubts.append("most samples are noise")
    if broad:
        doubts.append("so broad a mode also mends drift and joints of sweeps")
    if doubts:
        detail += f"; as {' and '.join(doubts)}, {asked:g} times are asked for"
    rise = stable.rise / whiteness.inflation
    return Evidence(
        "stable-model misfit", rise > STABLE_MODEL_RISE and stable.misfit_ratio > asked, detail
    )


def _times(ratio: float) -> str:
    return "more than 10000 times" if ratio > 1e4 else f"{ratio:.4g} times"
