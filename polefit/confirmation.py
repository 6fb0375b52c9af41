"""The answer to a prediction: whether a mode grows near a stated frequency, and what was there."""

from __future__ import annotations

import math
from dataclasses import dataclass, field
from typing import Any, Literal, TypeAlias

from polefit.modes import Detection, Identification, Mode, Stretch, Verdict
from polefit.responses import Channel

Holding: TypeAlias = Literal["confirmed", "refuted", "undecided"]


@dataclass(frozen=True)
class NodeLimit:
    """What one channel would have shown of a hidden mode anywhere in the range.

    All numbers are those of the frequency at which the channel sees least of it.

    Parameters
    ----------
    channel : Channel
        Where.
    frequency_hz : float
        That frequency.
    residue : float
        |residue| from which such a mode would have been found here, in the unit of the response
        times rad/s; infinite where the samples say nothing.
    peak : float
        The same as the height |residue|/|σ| of its peak.
    response : float
        |response| around that frequency, in the same unit.
    blind_hz : tuple of (float, float)
        Stretches of the range where this channel is blind.
    """

    channel: Channel
    frequency_hz: float
    residue: float
    peak: float
    response: float
    blind_hz: tuple[Stretch, ...] = ()

    @property
    def relative(self) -> float:
        """The height of the peak over that of the response; 1 is as high."""
        return self.peak / self.response if self.response > 0 else math.inf


@dataclass(frozen=True, eq=False)
class RangeView:
    """How well the data see the range, as far as it lies inside the band.

    Parameters
    ----------
    points : int
        Frequencies at which anything was sampled in the range.
    step_hz, step_at_hz : float
        The step between neighbouring samples that is largest relative to its frequency, and that
        frequency.
    detection : Detection
        What would have gone unnoticed in the range.
    limits : tuple of NodeLimit
        The worst of it for each channel, the one that sees most first.
    """

    points: int
    step_hz: float
    step_at_hz: float
    detection: Detection
    limits: tuple[NodeLimit, ...] = ()


@dataclass(frozen=True, eq=False)
class Confirmation:
    """A predicted oscillation held against the data.

    Parameters
    ----------
    verdict : {"confirmed", "refuted", "undecided"}
        Whether a mode grows in the range.
    reasons : tuple of str
        What the verdict follows from, or what keeps it open; the weightiest first.
    near_hz, within : float
        The prediction: the frequency, and half of the range relative to it.
    mode : Mode or None
        The mode that the verdict is about: the one that grows, or may grow; of a refuted
        prediction the least damped one that was there instead.
    in_range : tuple of int
        Modes whose frequency lies in the range, or may lie there: indices into
        ``identification.modes``, most dangerous first.
    elsewhere : tuple of int
        The nearest modes on both sides, and all others that grow or may grow; nearest first.
    view : RangeView or None
        How well the data see the range; None where that is not known.
    identification : Identification
        What all of this rests on.
    next_points_hz : tuple of float
        What to simulate next where the verdict is open.
    notes : tuple of str
        What else to know.
    """

    verdict: Holding
    reasons: tuple[str, ...]
    near_hz: float
    within: float
    mode: Mode | None
    in_range: tuple[int, ...]
    elsewhere: tuple[int, ...]
    view: RangeView | None
    identification: Identification = field(repr=False)
    next_points_hz: tuple[float, ...] = ()
    notes: tuple[str, ...] = ()

    @property
    def range_hz(self) -> tuple[float, float]:
        """The range of the prediction."""
        return self.near_hz * (1 - self.within), self.near_hz * (1 + self.within)

    @property
    def overall(self) -> Verdict:
        """Stability of the whole circuit as far as it is known: a refuted prediction is not all."""
        found = self.identification.verdict
        if self.verdict == "confirmed" or found == "unstable":
            return "unstable"
        return "undecided" if "undecided" in (self.verdict, found) else "stable"

    def to_dict(self) -> dict[str, Any]:
        """Return plain data in the layout of the schema ``polefit.confirmation``."""
        from polefit.report.confirmation_json import confirmation_dict

        return confirmation_dict(self)

    def __repr__(self) -> str:
        from polefit.report.confirmation import short_form

        return short_form(self)

    def __str__(self) -> str:
        from polefit.report.confirmation import confirmation_text

        return confirmation_text(self)

    def _repr_html_(self) -> str:
        from polefit.report.confirmation_page import confirmation_fragment

        return confirmation_fragment(self)
