"""What users call a pole by, and what the covariance of a pole makes of it."""

import math

import numpy as np
import pytest

from polefit.engine.propagation import pole_estimates, pole_jacobian, propagate
from polefit.errors import ArgumentError

POLES = [-1e7 + 6e9j, 2e-3 + 0.1j, 5.0 + 0.01j, -3.0 + 4.0j]


def called(sigma, omega):
    size = math.hypot(sigma, omega)
    return np.array([omega / (2 * math.pi), size / (2 * math.pi), -sigma / size, sigma])


@pytest.mark.parametrize("pole", POLES)
def test_values_are_the_definitions(pole):
    found = pole_estimates(pole, np.eye(2))
    values = [
        found.frequency_hz.value, found.natural_frequency_hz.value,
        found.damping_ratio.value, found.growth_rate_per_s.value,
    ]  # fmt: skip
    assert values == pytest.approx(called(pole.real, pole.imag), rel=1e-14)


@pytest.mark.parametrize("pole", POLES)
def test_jacobian_against_differences(pole):
    """Central differences over 1e-5 of |p|: error about 1e-10 of the curvature."""
    h = 1e-5 * abs(pole)
    x = np.array([pole.real, pole.imag])
    for j in (0, 1):
        d = h * np.eye(2)[j]
        expected = (called(*(x + d)) - called(*(x - d))) / (2 * h)
        size = np.abs(pole_jacobian(pole)).max(axis=1)
        assert np.all(np.abs(pole_jacobian(pole)[:, j] - expected) < 1e-8 * size)


def test_spread_of_drawn_poles_is_what_is_reported():
    """20,000 draws know each spread to 0.5 % (one σ); uncertainties small against the pole."""
    pole, root = -2.0 + 30j, np.array([[0.02, 0.0], [0.015, 0.03]])
    draws = np.random.default_rng(1).standard_normal((20000, 2)) @ root.T
    values = np.array([called(pole.real + a, pole.imag + b) for a, b in draws])
    found = pole_estimates(pole, root @ root.T)
    reported = [
        found.frequency_hz.std, found.natural_frequency_hz.std,
        found.damping_ratio.std, found.growth_rate_per_s.std,
    ]  # fmt: skip
    assert reported == pytest.approx(values.std(axis=0), rel=0.025)


def test_intervals_are_symmetric_with_the_factor_asked_for():
    rate = pole_estimates(-2 + 30j, np.diag([0.04, 0.09]), coverage_factor=2.5).growth_rate_per_s
    assert (rate.low, rate.high) == pytest.approx((-2.5, -1.5))


def test_extreme_poles_do_not_overflow():
    huge = pole_estimates(1e200 * (1 + 1j), np.eye(2) * 1e300)
    assert huge.damping_ratio.value == pytest.approx(-math.sqrt(0.5))
    assert huge.damping_ratio.std == pytest.approx(1e150 / abs(1e200 * (1 + 1j)), rel=1e-9)


def test_real_pole_and_origin():
    real = pole_estimates(3 + 0j, np.array([[0.01, 0.0], [0.0, 0.0]]))
    assert (real.frequency_hz.value, real.frequency_hz.std) == (0.0, 0.0)
    assert (real.damping_ratio.value, real.damping_ratio.std) == (-1.0, 0.0)
    origin = pole_estimates(0j, np.array([[0.01, 0.0], [0.0, 0.0]]))
    assert math.isnan(origin.damping_ratio.value)
    assert origin.growth_rate_per_s.std == pytest.approx(0.1)


def test_unknown_covariance_gives_values_without_uncertainty():
    found = pole_estimates(-1 + 2j, np.full((2, 2), np.nan))
    assert found.growth_rate_per_s.value == -1
    assert found.growth_rate_per_s.std is None


def test_covariances_stay_symmetric():
    generator = np.random.default_rng(2)
    root, jacobian = generator.normal(size=(5, 5)), generator.normal(size=(3, 5))
    found = propagate(jacobian, root @ root.T)
    assert np.array_equal(found, found.T)
    assert np.allclose(found, jacobian @ root @ root.T @ jacobian.T)


@pytest.mark.parametrize("covariance", [np.eye(3), np.ones(2), 1.0])
def test_shapes_that_do_not_fit_are_refused(covariance):
    with pytest.raises(ArgumentError, match="covariance"):
        pole_estimates(-1 + 2j, covariance)
    with pytest.raises(ArgumentError, match=r"give \(2, 2\)"):
        propagate(np.ones((4, 2)), covariance)
