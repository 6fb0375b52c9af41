"""The noise law: recovered within its own statistical uncertainty, and not invented."""

import numpy as np
import pytest

from polefit.engine.noise import (
    ABSOLUTE_FLOOR,
    RELATIVE_FLOOR,
    NoiseLaw,
    estimate,
    first_guess,
    variance,
)

POINTS = 2000
SIZE = np.geomspace(1e-3, 1.0, POINTS)[np.newaxis]
"""|H| over three decades, so that the two coefficients can be told apart."""
NOTHING = np.zeros((1, 2, POINTS))


def residuals(seed, relative, absolute, known=NOTHING):
    std = np.sqrt((relative * SIZE[:, None]) ** 2 + absolute**2 + known)
    return std * np.random.default_rng(seed).standard_normal((1, 2, POINTS))


def relative_std(*fractions):
    """Standard uncertainty of each σ over σ: √(inverse information of σ²)/2.

    `fractions`: the part of each sample's variance that each coefficient makes.
    """
    shapes = np.array([np.broadcast_to(f, (2, POINTS)).ravel() for f in fractions])
    information = shapes @ shapes.T / 2
    return np.sqrt(np.diag(np.linalg.inv(information))) / 2


@pytest.mark.parametrize("seed", range(5))
def test_relative_noise_is_recovered(seed):
    law = estimate(residuals(seed, 3e-3, 0.0), SIZE, NOTHING, NOTHING)
    (std,) = relative_std(1.0)
    assert std == pytest.approx(1 / np.sqrt(4 * POINTS))  # 2·N squares
    assert law.relative[0] == pytest.approx(3e-3, rel=4 * std)
    assert law.absolute[0] == 0.0


@pytest.mark.parametrize("seed", range(5))
def test_absolute_noise_is_recovered(seed):
    law = estimate(residuals(seed, 0.0, 2e-4), SIZE, NOTHING, NOTHING)
    (std,) = relative_std(1.0)
    assert law.absolute[0] == pytest.approx(2e-4, rel=4 * std)
    assert law.relative[0] == 0.0


@pytest.mark.parametrize("seed", range(5))
def test_both_are_recovered_together(seed):
    law = estimate(residuals(seed, 1e-2, 3e-4), SIZE, NOTHING, NOTHING)
    total = (1e-2 * SIZE) ** 2 + 3e-4**2
    relative, absolute = relative_std((1e-2 * SIZE) ** 2 / total, 3e-4**2 / total)
    assert law.relative[0] == pytest.approx(1e-2, rel=4 * relative)
    assert law.absolute[0] == pytest.approx(3e-4, rel=4 * absolute)


def test_errors_are_as_large_as_the_information_says():
    """Root mean square of 200 estimates over the bound, known to 5 % (one σ)."""
    total = (1e-2 * SIZE) ** 2 + 3e-4**2
    bound = relative_std((1e-2 * SIZE) ** 2 / total, 3e-4**2 / total)
    laws = [estimate(residuals(s, 1e-2, 3e-4), SIZE, NOTHING, NOTHING) for s in range(200)]
    errors = np.array([[w.relative[0] / 1e-2 - 1, w.absolute[0] / 3e-4 - 1] for w in laws])
    assert np.sqrt(np.mean(errors**2, axis=0)) / bound == pytest.approx([1, 1], abs=0.2)


def test_two_coefficients_are_never_confused():
    """|H| over five decades: no sample's standard deviation may be off by a factor of two.

    Each coefficient is known to better than 10 % here, so a factor of two would be seven σ;
    plain Fisher scoring, which may step out of the admissible quadrant, lost one of them in a
    quarter of such draws.
    """
    points = 401
    size = np.geomspace(1e-5, 1.0, points)[np.newaxis]
    std = np.hypot(1e-2 * size, 3e-5)
    for seed in range(40):
        parts = std[:, None] * np.random.default_rng(seed).standard_normal((1, 2, points))
        law = estimate(parts, size, np.zeros((1, 2, points)), np.zeros((1, 2, points)))
        found = np.hypot(law.relative[0] * size, law.absolute[0])
        assert np.max(np.abs(np.log(found / std))) < np.log(2)


def test_what_the_fit_took_is_given_back():
    """A fit that spends half of the freedom leaves half of the squares."""
    half = residuals(6, 3e-3, 0.0) / np.sqrt(2)
    law = estimate(half, SIZE, NOTHING, np.full((1, 2, POINTS), 0.5))
    assert law.relative[0] == pytest.approx(3e-3, rel=4 / np.sqrt(4 * POINTS))


def test_each_channel_has_its_own_law():
    parts = np.concatenate((residuals(7, 3e-3, 0.0), residuals(8, 0.0, 2e-4)))
    law = estimate(
        parts,
        np.repeat(SIZE, 2, axis=0),
        np.repeat(NOTHING, 2, axis=0),
        np.repeat(NOTHING, 2, axis=0),
    )
    assert law.relative[0] > 0
    assert law.relative[1] == 0
    assert law.absolute[0] == 0
    assert law.absolute[1] > 0


def test_noise_that_is_known_is_not_estimated_again():
    """Normal noise of the known variance: a coefficient must bring 8 of 2·Δln L to appear.

    For one coefficient, bounded at zero, that has a chance of P(χ²₁ > 8)/2 = 0.23 %, for two
    shapes less than 0.5 %: of 300 runs at most 5 (chance of more: 0.5 %).
    """
    known = np.broadcast_to((1e-3 * (1 + SIZE)) ** 2, NOTHING.shape)
    found = [estimate(residuals(s, 0.0, 0.0, known), SIZE, known, NOTHING) for s in range(300)]
    assert sum(w.relative[0] > 0 or w.absolute[0] > 0 for w in found) <= 5


def test_rounding_is_not_called_noise():
    """Uniform errors of printed digits scatter less than normal ones of the same variance."""
    known = np.full_like(NOTHING, 1e-4**2 / 12)
    for seed in range(50):
        rounding = np.random.default_rng(seed).uniform(-0.5e-4, 0.5e-4, NOTHING.shape)
        law = estimate(rounding, SIZE, known, NOTHING)
        assert (law.relative[0], law.absolute[0]) == (0.0, 0.0)


def test_noise_above_the_known_is_found_beside_it():
    known = np.full_like(NOTHING, 1e-4**2)
    law = estimate(residuals(9, 1e-2, 0.0, known), SIZE, known, NOTHING)
    share = (1e-2 * SIZE) ** 2 / ((1e-2 * SIZE) ** 2 + 1e-4**2)
    (std,) = relative_std(share)
    assert law.relative[0] == pytest.approx(1e-2, rel=4 * std)
    assert law.absolute[0] == 0.0


def test_double_precision_is_no_noise():
    """Residuals at the floor of arithmetic give no law."""
    law = estimate(residuals(10, 1e-16, 1e-17), SIZE, NOTHING, NOTHING)
    assert (law.relative[0], law.absolute[0]) == (0.0, 0.0)


def test_variance_is_the_sum_of_its_parts():
    law = NoiseLaw(np.array([0.1, 0.0]), np.array([0.0, 2.0]))
    size = np.array([[1.0, 3.0], [5.0, 0.0]])
    known = np.arange(8.0).reshape(2, 2, 2)
    found = variance(law, size, known)
    expected = known + np.array([[0.01, 0.09], [4.0, 4.0]])[:, None]
    assert np.allclose(found, expected, rtol=1e-12)


def test_variance_is_never_zero():
    size = np.array([[1.0, 1e-3, 0.0], [0.0, 0.0, 0.0]])
    found = variance(first_guess([size.astype(complex)])[0], size, np.zeros((2, 2, 3)))
    assert np.all(found > 0)
    expected = (RELATIVE_FLOOR * size[0]) ** 2 + ABSOLUTE_FLOOR**2
    assert np.allclose(found[0], expected, rtol=1e-12)
