"""One pole of the model that may be a mode, with what is known of it."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from polefit.engine.blocks import ComplexArray, FloatArray


@dataclass(frozen=True)
class Candidate:
    """One section of the model, in rad/s.

    Parameters
    ----------
    index : int
        Number of the section.
    pole : complex
        Its upper or real pole.
    covariance : (2, 2) float ndarray
        Of real and imaginary part.
    score : float
        Wald χ² of its residues.
    in_band, near_band : bool
        Where it lies.
    images : tuple of complex
        Other growing poles of the model that stand for the same mode.
    related : frozenset of int
        Sections that are near for a known reason and cast no doubt on it.
    spread : (float, float)
        Part of the two variances that stands for what a model past the order makes of it.
    firm_std : float or None
        Standard deviation of its real part without the uncertainty that a richer model adds.
    """

    index: int
    pole: complex
    covariance: FloatArray
    score: float
    in_band: bool
    near_band: bool
    images: tuple[complex, ...] = ()
    related: frozenset[int] = frozenset()
    spread: tuple[float, float] = (0.0, 0.0)
    firm_std: float | None = None


def nearest(pole: complex, poles: ComplexArray) -> complex | None:
    """Return the nearest pole of the same kind, real or one of a pair."""
    same = poles[(poles.imag == 0) == (pole.imag == 0)]
    if same.size == 0:
        return None
    return complex(same[int(np.argmin(np.abs(same - pole)))])
