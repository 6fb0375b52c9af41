"""Covariance propagation against GUM annex H.2 and against exact and numerical derivatives."""

import math

import numpy as np
import pytest

from polefit.engine.propagation import pole_estimates, pole_jacobian, propagate
from polefit.errors import ArgumentError

# JCGM 100:2008 (GUM), table H.2: five simultaneous observations.
VOLT = np.array([5.007, 4.994, 5.005, 4.990, 4.999])
AMPERE = np.array([19.663, 19.639, 19.640, 19.685, 19.678]) * 1e-3
RADIAN = np.array([1.0456, 1.0438, 1.0468, 1.0428, 1.0433])


def resistance_reactance_impedance(volt, ampere, radian):
    """GUM equation (H.8): R = V cos φ / I, X = V sin φ / I, Z = V / I; with derivatives."""
    z, cos, sin = volt / ampere, math.cos(radian), math.sin(radian)
    values = np.array([z * cos, z * sin, z])
    jacobian = np.array(
        [
            [cos / ampere, -z * cos / ampere, -z * sin],
            [sin / ampere, -z * sin / ampere, z * cos],
            [1 / ampere, -z / ampere, 0.0],
        ]
    )
    return values, jacobian


def propagated():
    samples = np.stack([VOLT, AMPERE, RADIAN])
    means = samples.mean(axis=1)
    values, jacobian = resistance_reactance_impedance(*means)
    covariance = propagate(jacobian, np.cov(samples) / VOLT.size)
    std = np.sqrt(np.diagonal(covariance))
    return values, std, covariance / np.outer(std, std)


def test_means_and_correlations_of_the_observations_are_those_of_table_h2():
    """Guards the input: GUM table H.2 prints these to the digits asserted."""
    samples = np.stack([VOLT, AMPERE, RADIAN])
    assert samples.mean(axis=1) == pytest.approx([4.9990, 19.6610e-3, 1.04446], rel=1e-9)
    correlation = np.corrcoef(samples)
    assert correlation[0, 1] == pytest.approx(-0.36, abs=0.005)
    assert correlation[0, 2] == pytest.approx(0.86, abs=0.005)
    assert correlation[1, 2] == pytest.approx(-0.65, abs=0.005)


def test_values_of_gum_table_h3():
    """Values as printed in GUM table H.3, to half a unit of the last printed digit."""
    values, _, _ = propagated()
    assert values == pytest.approx([127.732, 219.847, 254.260], abs=0.0005)


def test_uncertainties_of_gum_table_h3():
    """Standard uncertainties as printed: 0.071, 0.295, 0.236 Ω.

    The guide rounds the correlations before it goes on, which moves 0.29558 to its 0.295;
    hence one unit of the last printed digit, instead of half.
    """
    _, std, _ = propagated()
    assert std == pytest.approx([0.071, 0.295, 0.236], abs=0.001)


def test_correlations_of_gum_table_h3():
    """Correlations as printed: −0.588, −0.485, 0.993, to one unit of the last digit."""
    _, _, correlation = propagated()
    assert correlation[0, 1] == pytest.approx(-0.588, abs=0.001)
    assert correlation[0, 2] == pytest.approx(-0.485, abs=0.001)
    assert correlation[1, 2] == pytest.approx(0.993, abs=0.001)


def test_unrounded_propagation():
    """Seven-digit figures of the same example, worked outside this project without rounding."""
    values, std, correlation = propagated()
    assert values == pytest.approx([127.732170, 219.846512, 254.259702], abs=6e-7)
    assert std == pytest.approx([0.071071, 0.295582, 0.236336], abs=6e-7)
    assert [correlation[0, 1], correlation[0, 2], correlation[1, 2]] == pytest.approx(
        [-0.588430, -0.485259, 0.992512], abs=6e-7
    )


@pytest.mark.parametrize("pole", [3e7 + 9.4e9j, -2e8 + 5e9j, -1e3 + 40j, 7.0 + 1e-3j, -5.0 + 0j])
def test_pole_jacobian_against_differences(pole):
    """Central differences of the definitions; their error is of order step² = 1e-10."""

    def definitions(sigma, omega):
        size = math.hypot(sigma, omega)
        return np.array([omega / (2 * math.pi), size / (2 * math.pi), -sigma / size, sigma])

    step = 1e-5 * abs(pole)
    along_sigma = definitions(pole.real + step, pole.imag) - definitions(
        pole.real - step, pole.imag
    )
    along_omega = definitions(pole.real, pole.imag + step) - definitions(
        pole.real, pole.imag - step
    )
    numerical = np.stack([along_sigma, along_omega], axis=1) / (2 * step)
    scale = np.array([1.0, 1.0, 1 / abs(pole), 1.0])[:, np.newaxis]
    assert pole_jacobian(pole) / scale == pytest.approx(numerical / scale, abs=1e-8)


def test_pole_estimates_in_the_high_q_limit():
    """For |ζ| << 1, std(ζ) = std(σ)/|p| = std(f0)/f0 when both parts share a variance."""
    pole, std = -2e-3 * 2 * math.pi * 1e9 + 2j * math.pi * 1e9, 5046.265 * 2 * math.pi
    found = pole_estimates(pole, np.eye(2) * std**2)
    assert found.frequency_hz.value == pytest.approx(1e9, rel=1e-12)
    assert found.frequency_hz.std == pytest.approx(5046.265, rel=1e-9)
    # terms of relative size ζ² = 4e-6 are left out by the limit
    assert found.damping_ratio.std == pytest.approx(5.046265e-6, rel=1e-5)
    assert found.damping_ratio.value == pytest.approx(2e-3, rel=1e-5)
    assert found.growth_rate_per_s.low == pytest.approx(pole.real - 1.959964 * std, rel=1e-12)


def test_correlated_parts_against_sampling():
    """Seeded sampling of an obliquely correlated pole; 4e5 draws leave 0.11 % on a std."""
    pole = -4e8 + 3e9j
    covariance = np.array([[4e12, 3e12], [3e12, 9e12]])
    draws = np.random.default_rng(20).multivariate_normal(
        [pole.real, pole.imag], covariance, size=400_000
    )
    size = np.hypot(draws[:, 0], draws[:, 1])
    found = pole_estimates(pole, covariance)
    # 0.6 % is five standard deviations of the sampled std
    assert found.damping_ratio.std == pytest.approx(np.std(-draws[:, 0] / size), rel=6e-3)
    assert found.natural_frequency_hz.std == pytest.approx(np.std(size) / (2 * np.pi), rel=6e-3)


def test_real_pole_and_origin():
    real = pole_estimates(-5e6 + 0j, [[1e6, 0.0], [0.0, 0.0]])
    assert (real.frequency_hz.value, real.frequency_hz.std) == (0.0, 0.0)
    assert (real.damping_ratio.value, real.damping_ratio.std) == (1.0, 0.0)
    assert real.natural_frequency_hz.std == pytest.approx(1e3 / (2 * math.pi))
    origin = pole_estimates(0j, [[4.0, 0.0], [0.0, 0.0]])
    assert math.isnan(origin.damping_ratio.value)
    assert origin.growth_rate_per_s.std == 2.0


def test_unknown_covariance_leaves_the_uncertainty_unsaid():
    found = pole_estimates(1 + 2j, np.full((2, 2), np.nan))
    assert found.damping_ratio.std is None
    assert found.damping_ratio.low is None


def test_shapes_that_do_not_fit_are_refused():
    with pytest.raises(ArgumentError, match="give \\(3, 3\\)"):
        propagate(np.eye(3), np.eye(2))
    with pytest.raises(ArgumentError, match="2 by 2"):
        pole_estimates(1j, np.eye(3))
