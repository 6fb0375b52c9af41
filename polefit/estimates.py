"""A value with its uncertainty, and the one rule for printing it."""

from __future__ import annotations

import math
from dataclasses import dataclass


@dataclass(frozen=True)
class Estimate:
    """An estimated quantity; its unit is in the name of the field that holds it.

    Parameters
    ----------
    value : float
        The estimate.
    std : float or None
        One standard uncertainty; None where it cannot be given.
    low, high : float or None
        Limits of the 95 % interval; None where they cannot be given.
    """

    value: float
    std: float | None = None
    low: float | None = None
    high: float | None = None

    @classmethod
    def normal(cls, value: float, std: float | None, coverage_factor: float = 1.959964) -> Estimate:
        """Build an estimate with a symmetric interval: value ± coverage_factor · std."""
        if std is None or not math.isfinite(std):
            return cls(value)
        half = coverage_factor * std
        return cls(value, std, value - half, value + half)

    def to_dict(self) -> dict[str, float | None]:
        """Return the four numbers under their names."""
        return {"value": self.value, "std": self.std, "low": self.low, "high": self.high}
