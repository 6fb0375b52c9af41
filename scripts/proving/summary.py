"""Counts, rates and errors over many scores."""

from __future__ import annotations

from dataclasses import dataclass
from itertools import pairwise

import numpy as np

from proving.case import Case
from proving.scoring import Hit, Score


@dataclass(frozen=True)
class Accuracy:
    """Errors and intervals of detectable modes that were met.

    Parameters
    ----------
    hits : tuple of Hit
        The modes.
    """

    hits: tuple[Hit, ...]

    def coverage(self, name: str) -> float:
        """Share of the 95 % intervals that hold the truth; NaN without any."""
        covered = [c for h in self.hits if (c := getattr(h, name)) is not None]
        return float(np.mean(covered)) if covered else float("nan")

    @property
    def rms(self) -> float:
        """Root mean square error of σ over its bound."""
        errors = [h.growth_error for h in self.hits]
        return float(np.sqrt(np.mean(np.square(errors)))) if errors else float("nan")

    @property
    def robust(self) -> float:
        """The same from the median: median |error| / 0.6745."""
        errors = [abs(h.growth_error) for h in self.hits]
        return float(np.median(errors) / 0.6745) if errors else float("nan")

    @property
    def claimed(self) -> float:
        """Median of the claimed standard uncertainty over the bound."""
        return float(np.median([h.claimed for h in self.hits])) if self.hits else float("nan")


def _growing(case: Case) -> float:
    """Return the detectability of what grows in the band; −1 if nothing does."""
    found = [m.detectability for m in case.modes if m.growing and m.place == "inside"]
    return max(found, default=-1.0)


@dataclass(frozen=True)
class Summary:
    """Counts and rates over scores of one family.

    Parameters
    ----------
    scores : tuple of Score
        What is summed up.
    """

    scores: tuple[Score, ...]

    def count(self, name: str) -> int:
        """Add up an attribute: a truth value, or how many it holds."""
        values = [getattr(s, name) for s in self.scores]
        return sum(v if isinstance(v, bool) else len(v) for v in values)

    def answers(self, kind: str) -> int:
        """Count cases by what can be expected of a verdict."""
        return sum(s.case.answer == kind for s in self.scores)

    def by_detectability(self) -> dict[str, dict[str, int]]:
        """Count verdicts by the detectability of the most detectable growing mode in the band."""
        table: dict[str, dict[str, int]] = {}
        for low, high in pairwise((0.0, 1.0, 3.0, 6.0, 12.0, 100.0, np.inf)):
            inside = [s for s in self.scores if low <= _growing(s.case) < high]
            name = f"{low:g} to {high:g}" if np.isfinite(high) else f"{low:g} and more"
            verdicts = ("unstable", "undecided", "stable")
            table[name] = {v: sum(s.answer.verdict == v for s in inside) for v in verdicts}
        return table

    @property
    def accuracy(self) -> Accuracy:
        """Of all detectable modes that were met."""
        return Accuracy(tuple(h for s in self.scores for h in s.hits))

    def by_damping(self) -> dict[str, Accuracy]:
        """Tell growing modes from decaying ones, and these by their damping ratio."""
        hits = self.accuracy.hits
        table = {"growing": Accuracy(tuple(h for h in hits if h.damping < 0))}
        for low, high in pairwise((0.0, 0.02, 0.1, 0.3, 1.0)):
            inside = tuple(h for h in hits if low <= h.damping < high)
            table[f"ζ {low:g} to {high:g}"] = Accuracy(inside)
        table["real, decaying"] = Accuracy(tuple(h for h in hits if h.damping == 1))
        return table

    @property
    def ratios(self) -> tuple[float, float]:
        """Geometric mean and largest of the time ratios."""
        ratios = [s.ratio for s in self.scores if np.isfinite(s.ratio) and s.ratio > 0]
        if not ratios:
            return float("nan"), float("nan")
        return float(np.exp(np.mean(np.log(ratios)))), float(max(ratios))
