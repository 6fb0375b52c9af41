"""First-order propagation of covariances, and what it makes of the covariance of a pole.

References
----------
JCGM 100:2008, Evaluation of measurement data: Guide to the expression of uncertainty in
measurement (GUM), equation (13) and annex H.2.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from polefit.errors import ArgumentError
from polefit.estimates import Estimate

TWO_PI = 2 * math.pi


@dataclass(frozen=True)
class PoleEstimates:
    """What users call a pole by, each with its uncertainty.

    Parameters
    ----------
    frequency_hz : Estimate
        Im(p)/2π, at which it rings.
    natural_frequency_hz : Estimate
        ``|p|``/2π.
    damping_ratio : Estimate
        −Re(p)/``|p|``; negative grows. Its value is NaN for a pole at the origin.
    growth_rate_per_s : Estimate
        Re(p); positive grows.
    """

    frequency_hz: Estimate
    natural_frequency_hz: Estimate
    damping_ratio: Estimate
    growth_rate_per_s: Estimate


def propagate(jacobian: ArrayLike, covariance: ArrayLike) -> NDArray[np.float64]:
    """Covariance of y = g(x) to first order: J C Jᵀ.

    Parameters
    ----------
    jacobian : (m, n) array_like of float
        Derivatives ∂y_i/∂x_j at the estimate.
    covariance : (n, n) array_like of float
        Covariance of x.

    Returns
    -------
    (m, m) float ndarray
        Covariance of y, exactly symmetric.

    Raises
    ------
    ArgumentError
        If the shapes do not fit.

    Notes
    -----
    GUM equation (13) for one output; the same with several outputs gives their correlations.

    Examples
    --------
    >>> propagate([[1.0, 1.0]], [[4.0, 0.0], [0.0, 9.0]])
    array([[13.]])
    """
    derivatives = np.atleast_2d(np.asarray(jacobian, dtype=np.float64))
    given = np.atleast_2d(np.asarray(covariance, dtype=np.float64))
    size = derivatives.shape[1]
    if derivatives.ndim != 2 or given.shape != (size, size):
        raise ArgumentError(
            f"covariance: shape {given.shape} does not fit a jacobian of shape "
            f"{derivatives.shape}; give ({size}, {size})"
        )
    product = derivatives @ given @ derivatives.T
    symmetric: NDArray[np.float64] = (product + product.T) / 2
    return symmetric


def pole_jacobian(pole: complex) -> NDArray[np.float64]:
    """Differentiate frequency, natural frequency, damping ratio and growth rate.

    Parameters
    ----------
    pole : complex
        p = σ + jω in rad/s, not zero.

    Returns
    -------
    (4, 2) float ndarray
        Rows f = ω/2π, f_n = ``|p|``/2π (Hz), ζ = −σ/``|p|``, σ (1/s); columns ∂/∂σ, ∂/∂ω.
    """
    sigma, omega, size = pole.real, pole.imag, abs(pole)
    cos, sin = sigma / size, omega / size  # scaled, so that no power of |p| overflows
    return np.array(
        [
            [0.0, 1 / TWO_PI],
            [cos / TWO_PI, sin / TWO_PI],
            [-sin * sin / size, cos * sin / size],
            [1.0, 0.0],
        ]
    )


def pole_estimates(
    pole: complex, covariance: ArrayLike, *, coverage_factor: float = 1.959964
) -> PoleEstimates:
    """Turn a pole and its covariance into the estimates that users read.

    Parameters
    ----------
    pole : complex
        p = σ + jω in rad/s.
    covariance : (2, 2) array_like of float
        Covariance of (Re p, Im p) in (rad/s)². NaN where it cannot be given.
    coverage_factor : float
        Half width of the intervals in standard uncertainties; 1.96 gives 95 %.

    Returns
    -------
    PoleEstimates

    Raises
    ------
    ArgumentError
        If `covariance` is not 2 by 2.

    Notes
    -----
    First order. For a real pole ω is 0 by construction and carries no uncertainty, so that
    the frequency is exactly 0 and the damping ratio exactly ±1.
    """
    given = np.asarray(covariance, dtype=np.float64)
    if given.shape != (2, 2):
        raise ArgumentError(f"covariance: shape {given.shape}; give the 2 by 2 of (Re, Im)")
    if pole == 0:
        zero = Estimate.normal(0.0, None)
        growth = Estimate.normal(0.0, _root(given[0, 0]), coverage_factor)
        return PoleEstimates(zero, zero, Estimate(math.nan), growth)
    variance = np.diagonal(propagate(pole_jacobian(pole), given))
    size = abs(pole)
    values = (pole.imag / TWO_PI, size / TWO_PI, -pole.real / size, pole.real)
    return PoleEstimates(
        *(
            Estimate.normal(value, _root(v), coverage_factor)
            for value, v in zip(values, variance, strict=True)
        )
    )


def _root(variance: float) -> float | None:
    """Square root of a variance; None where there is no usable one."""
    if not math.isfinite(variance):
        return None
    return math.sqrt(max(float(variance), 0.0))
