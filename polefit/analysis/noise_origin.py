"""Where the noise law comes from: stated by the caller, known of the data, or estimated."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from polefit.analysis.preparation import Prepared
from polefit.engine.estimation import Estimation
from polefit.engine.noise import NoiseLaw
from polefit.errors import ArgumentError
from polefit.responses import ResponseSet


@dataclass(frozen=True)
class StatedNoise:
    """Noise that the caller wants to be taken as given.

    Parameters
    ----------
    relative : float or None
        Standard deviation of a sample, both parts together, over its size.
    absolute : float or None
        The same in the unit of the responses.

    Raises
    ------
    ArgumentError
        If one of them is not a positive number.
    """

    relative: float | None = None
    absolute: float | None = None

    def __post_init__(self) -> None:
        for name in ("relative", "absolute"):
            given = getattr(self, name)
            if given is None:
                continue
            if not isinstance(given, int | float) or not 0 < given < math.inf:
                raise ArgumentError(
                    f"noise_{name}: {given!r} is not a positive standard deviation; "
                    "leave it out to have the noise estimated"
                )

    def laws(self, channels: Sequence[int]) -> list[NoiseLaw] | None:
        """Return one law for each set of so many channels; None if the noise is to be estimated."""
        if self.relative is None and self.absolute is None:
            return None
        part = [(given or 0.0) / math.sqrt(2) for given in (self.relative, self.absolute)]
        return [NoiseLaw(np.full(n, part[0]), np.full(n, part[1])) for n in channels]


def noise_origin(prepared: Prepared, estimation: Estimation, stated: StatedNoise) -> str:
    """Say in one line which noise was assumed and where that comes from."""
    listed = []
    if any(one.precision is not None and _digits(one) for one in prepared.responses):
        listed.append("rounding of the printed digits")
    if any(one.sample_std is not None for one in prepared.responses):
        listed.append("the uncertainty given with the data")
    given = [
        f"{name} noise of {value:.3g} as stated"
        for name, value in (("relative", stated.relative), ("absolute", stated.absolute))
        if value is not None
    ]
    if given:
        raised = math.sqrt(estimation.level)
        more = f", raised {raised:.3g} times to what the model leaves" if raised > RAISED else ""
        listed.append(" and ".join(given) + more)
    else:
        listed += _estimated(estimation)
    return "; ".join(listed) if listed else "double precision: no noise above its rounding"


RAISED = 1.2
"""Stated noise that is exceeded by more is said to be."""


def _estimated(estimation: Estimation) -> list[str]:
    terms = [
        name
        for name in ("relative", "absolute")
        if any(np.any(getattr(law, name) > 0) for law in estimation.laws)
    ]
    return [f"{' and '.join(terms)} noise estimated from the residual"] if terms else []


def _digits(one: ResponseSet) -> bool:
    assert one.precision is not None
    printed = (one.precision.first, one.precision.second)
    return any(p.significant is not None or p.decimals is not None for p in printed)
