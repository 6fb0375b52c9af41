"""What would have gone unnoticed, and what a verdict may say in view of it.

*Stable* means: nothing was found, and this is what would have been found. A mode counts as found
when the run would no longer have been called stable: a mode that grows or may grow is claimed.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace
from typing import Any

import numpy as np
from numpy.typing import NDArray

from polefit.analysis.judgement import claim_limit
from polefit.engine.blocks import FloatArray
from polefit.engine.dependence import set_apart
from polefit.engine.detection import Trials, residue_limits, trial_cells
from polefit.engine.estimation import Estimation
from polefit.engine.projection import model_values
from polefit.errors import ArgumentError
from polefit.estimates import si
from polefit.modes import Detection, Stretch, Verdict
from polefit.responses import Channel

DAMPING = -0.01
"""Damping ratio of the hidden mode unless another is asked for: it doubles in eleven periods
(ln 2 / 2π·0.01), which is slow for an oscillation."""
POWER = 0.95
CELLS = 60
"""Frequencies at which a hidden mode is supposed."""
NARROW = 2.0
"""Modes narrower than this many steps are tried at a sample and between two."""
BLIND = 1.0
"""A channel is blind where a mode is found only if its peak is higher than the response: a smaller
one would be among the largest things to be seen there, and still be missed."""
AROUND = 1.1
"""Up to this factor in frequency the response belongs to the surroundings of a mode."""
LOOKED_AT = 15
"""Samples of the surroundings that are looked at."""
MOST_BLIND = 0.5
"""Share of blind samples above which nothing can be said of the band as a whole."""
FEW = 4
"""Stretches, and channels, that are named one by one."""


def checked_damping(value: float) -> float:
    """Return the damping ratio of a hidden mode.

    Raises
    ------
    ArgumentError
        If it is not a number other than zero between −1 and 1.
    """
    number = isinstance(value, int | float | np.integer | np.floating)
    if not number or isinstance(value, bool) or not 0 < abs(value) < 1:
        raise ArgumentError(
            f"detection_damping: {value!r} is not a damping ratio between -1 and 1 other than 0; "
            "give e.g. -0.01, where negative grows"
        )
    return float(value)


def detect(
    estimation: Estimation,
    scale: float,
    channels: Sequence[Channel],
    damping_ratio: float,
    *,
    levers: bool,
) -> Detection | None:
    """Compute which hidden mode would have been found, over the whole band and at each channel.

    Parameters
    ----------
    estimation : Estimation
        The fitted model.
    scale : float
        rad/s that is one in the engine.
    channels : sequence of Channel
        In the order of the model.
    damping_ratio : float
        Of the hidden mode.
    levers : bool
        Whether residues at driving points are damping leverages.

    Returns
    -------
    Detection or None
        None where there are too few samples to judge a mode at all.
    """
    trials = trial_cells(estimation.blocks, CELLS)
    if trials is None:
        return None
    residue = _limits(estimation, trials, damping_ratio) * scale
    lever = [levers and channel.driving_point for channel in channels]
    found = Detection(
        frequency_hz=trials.between * scale / (2 * np.pi),
        damping_ratio=damping_ratio,
        power=POWER,
        residue=residue,
        response=_surroundings(estimation, trials.between),
        # |Re residue| beyond the limit is |residue| beyond it
        leverage=np.where(lever, residue, np.nan),
        blind_hz=(),
    )
    blind = np.logical_not(found.relative <= BLIND)
    edges = trials.edges * scale / (2 * np.pi)
    everywhere = np.all(blind, axis=1)
    return replace(
        found,
        blind_hz=tuple(stretches(edges, column) for column in blind.T),
        blind_everywhere_hz=stretches(edges, everywhere),
        blind_share=float(trials.points[everywhere].sum() / trials.points.sum()),
    )


def _limits(estimation: Estimation, trials: Trials, damping_ratio: float) -> FloatArray:
    """Limits in each cell, (M, K), for the worse of a sample and the middle of a step."""
    narrow = 2 * abs(damping_ratio) * trials.between < NARROW * trials.step
    count = trials.between.size
    solution, info = set_apart(estimation.blocks, estimation.solution)
    limits = residue_limits(
        estimation.blocks,
        solution,
        info,
        np.concatenate((trials.between, trials.sample[narrow])),
        damping_ratio=damping_ratio,
        power=POWER,
        threshold=claim_limit(1j, estimation),
        level=estimation.level,
    )
    worse = limits[:count].copy()
    worse[narrow] = np.maximum(worse[narrow], limits[count:])
    return worse


def _surroundings(estimation: Estimation, omega: FloatArray) -> FloatArray:
    """|H| around each frequency, (M, K), as :class:`Detection` describes it."""
    columns, s = [], (1j * omega).astype(np.complex128)
    for block, part in zip(estimation.blocks, estimation.solution.parts, strict=True):
        axis = block.s.imag
        size = np.abs(model_values(block.s, estimation.solution, part))
        at = np.abs(model_values(s, estimation.solution, part))
        low = np.searchsorted(axis, omega / AROUND)
        high = np.searchsorted(axis, omega * AROUND) - 1
        middle = np.clip(np.searchsorted(axis, omega), 1, axis.size - 1)
        low, high = np.minimum(low, middle - 1), np.maximum(high, middle)
        picked = np.linspace(low, high, LOOKED_AT).round().astype(int)
        near = np.median(size[:, picked], axis=1)
        columns.append(np.maximum(at, near).T)
    return np.concatenate(columns, axis=1)


def stretches(edges: FloatArray, chosen: NDArray[Any]) -> tuple[Stretch, ...]:
    """Join neighbouring cells that are chosen.

    Parameters
    ----------
    edges : (M, 2) float ndarray
        Ends of cells in ascending order.
    chosen : (M,) bool ndarray
        Which of them count.

    Returns
    -------
    tuple of (float, float)
    """
    change = np.diff(np.concatenate(([False], chosen, [False])).astype(int))
    begin, end = np.flatnonzero(change == 1), np.flatnonzero(change == -1)
    ends = zip(edges[begin, 0], edges[end - 1, 1], strict=True)
    return tuple((_tidy(low), _tidy(high)) for low, high in ends)


def _tidy(frequency: float) -> float:
    """Undo the rounding that the change of units left."""
    return float(f"{frequency:.13g}")


def mostly_blind(detection: Detection | None) -> bool:
    """Tell whether too little of the band was judged to say anything of it as a whole."""
    return detection is None or detection.blind_share > MOST_BLIND


def in_view_of(verdict: Verdict, reason: str, detection: Detection | None) -> tuple[Verdict, str]:
    """Return what may be said in view of what would have gone unnoticed.

    The rule: *stable* is said only of frequencies at which a growing mode of the stated damping
    would have been found at one node at least. Stretches where every node is blind are excepted
    by name; where they hold more than half of the samples, too little was judged for a verdict
    on the band, and it is *undecided*. So it is where no limit could be computed at all. What
    was found growing stands, whatever else may hide.
    """
    if verdict != "stable":
        return verdict, reason
    if detection is None:
        return "undecided", "too few points to say which mode would have been found"
    if not detection.blind_everywhere_hz:
        return verdict, reason
    where = named(detection.blind_everywhere_hz)
    if mostly_blind(detection):
        return "undecided", (
            f"every node is blind to a mode with {named_ratio(detection)} at "
            f"{100 * detection.blind_share:.0f} % of the samples ({where})"
        )
    return verdict, f"{reason}, except in the blind stretches, which are not judged: {where}"


def blind_notes(detection: Detection | None, channels: Sequence[Channel]) -> list[str]:
    """Name the stretches where a growing mode could hide, and what would show it."""
    if detection is None:
        return []
    notes, everywhere = [], detection.blind_everywhere_hz
    ratio = named_ratio(detection)
    if everywhere:
        notes.append(
            f"every node is blind to a mode with {ratio} from {named(everywhere)}: one as high "
            "as the response itself could go unnoticed there; closer points, more digits or less "
            "noise would show it"
        )
    single = [
        f"{channel} from {named(own)}"
        for channel, own in zip(channels, detection.blind_hz, strict=True)
        if own and own != everywhere
    ]
    if single:
        more = f"; and {len(single) - FEW} more channels" if len(single) > FEW else ""
        notes.append(f"blind to a mode with {ratio}: {'; '.join(single[:FEW])}{more}")
    return notes


def named(blind: Sequence[Stretch]) -> str:
    """Write stretches of frequency, the first of them."""
    shown = ", ".join(f"{si(low, 'Hz')} to {si(high, 'Hz')}" for low, high in blind[:FEW])
    return shown + (f" and {len(blind) - FEW} more" if len(blind) > FEW else "")


def named_ratio(detection: Detection) -> str:
    """Write the damping ratio of the mode that was supposed."""
    return f"damping ratio {si(detection.damping_ratio, '', 2)}"
