"""Colour of residuals: calibrated under white noise, awake to correlation."""

import numpy as np
import pytest
import scipy.signal
import scipy.stats

from polefit.engine.whiteness import CHANCE, judge_whiteness

POINTS = 300


def white(seed, channels=2, points=POINTS):
    return np.random.default_rng(seed).standard_normal((channels, 2 * points))


def autoregressive(seed, a, channels=2, points=POINTS):
    """Both parts correlated along the axis: x[n] = a·x[n−1] + noise, stationary."""
    long = np.random.default_rng(seed).standard_normal((channels, 2, points + 200))
    return scipy.signal.lfilter([1.0], [1.0, -a], long)[..., 200:].reshape(channels, -1)


def test_probability_is_uniform_under_white_noise():
    """Kolmogorov-Smirnov over 500 seeds: a distribution off by 0.09 anywhere would show."""
    found = [judge_whiteness([white(seed)]) for seed in range(500)]
    assert scipy.stats.kstest([w.probability for w in found], "uniform").pvalue > 1e-3
    # at a chance of 1e-4 each, 500 runs hold none with a probability of 95 %, two of 99.98 %
    assert sum(not w.white for w in found) <= 2


def test_tendency_is_standard_normal_under_white_noise():
    """Mean of 500 to ±0.045, variance to ±0.063 (one σ); the mean of sample correlations is
    −1/(2N) each, which makes −0.06 here.
    """
    found = [judge_whiteness([white(seed)]).tendency for seed in range(500)]
    assert np.mean(found) == pytest.approx(0.0, abs=0.2)
    assert np.var(found) == pytest.approx(1.0, abs=0.25)


@pytest.mark.parametrize("a", [0.3, -0.3, 0.7])
def test_correlated_noise_is_called_coloured(a):
    """1200 samples know the first correlation to 0.03; ten σ for 0.3."""
    for seed in range(20):
        found = judge_whiteness([autoregressive(seed, a)])
        assert not found.white
        assert found.probability < CHANCE
        assert np.sign(found.tendency) == np.sign(a)


@pytest.mark.parametrize("a", [0.3, 0.5, 0.6])
def test_inflation_is_that_of_a_mean_of_correlated_samples(a):
    """(1 + a)/(1 − a) for long sums; ten lags with falling weights see a little less."""
    found = [judge_whiteness([autoregressive(s, a, 4, 2000)]).inflation for s in range(40)]
    lag = np.arange(1, 11)
    seen = 1 + 2 * np.sum((1 - lag / 11) * a**lag)
    # 40·4·4000 samples know the sum of correlations to well below a per cent
    assert np.mean(found) == pytest.approx(seen, rel=0.03)
    assert seen == pytest.approx((1 + a) / (1 - a), rel=0.25)


def test_inflation_never_helps():
    """White or alternating residuals lower nothing."""
    assert judge_whiteness([white(1)]).inflation == 1.0
    alternating = judge_whiteness([autoregressive(1, -0.7)])
    assert not alternating.white
    assert alternating.inflation == 1.0


def test_one_coloured_channel_among_white_ones_is_seen():
    mixed = np.concatenate((white(3, channels=9), autoregressive(3, 0.5, channels=1)))
    assert not judge_whiteness([mixed]).white


def test_blocks_add_up():
    """Two blocks are judged like one block with the channels of both."""
    together = judge_whiteness([np.concatenate((white(4), white(5)))])
    apart = judge_whiteness([white(4), white(5)])
    assert apart.probability == pytest.approx(together.probability, rel=1e-12)
    assert apart.tendency == pytest.approx(together.tendency, rel=1e-12)


def test_scale_does_not_matter():
    one = autoregressive(6, 0.4)
    scaled = one * np.array([[1e-9], [1e9]])
    assert judge_whiteness([scaled]).probability == pytest.approx(
        judge_whiteness([one]).probability
    )


def test_too_short_to_tell_counts_as_white():
    assert judge_whiteness([white(7, points=4)]) == (True, 1.0, 0.0, 1.0)


def test_a_perfect_fit_is_white():
    found = judge_whiteness([np.zeros((2, 2 * POINTS))])
    assert found.white
    assert np.isfinite(found.tendency)
