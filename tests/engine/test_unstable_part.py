"""Projection on unstable functions: partial fractions say exactly which part is unstable."""

import numpy as np
import pytest
from problems import noise

from polefit.engine.unstable_part import project

GROWING, RESIDUE = 0.05 + 2j, 0.3 + 0.1j
BROAD = -0.2 + 3j


def response(omega, pole=GROWING):
    s = 1j * omega
    total = 0.5 + 1 / (s - BROAD) + 1 / (s - np.conj(BROAD))
    return total + RESIDUE / (s - pole) + np.conj(RESIDUE) / (s - np.conj(pole))


def projected(points, pole=GROWING, std=0.0):
    omega = np.linspace(0.1, 6, points)
    clean = response(omega, pole)
    dirty = clean + noise(np.random.default_rng(1), clean.shape, std / np.sqrt(2))
    question = abs(pole.real) + 1j * pole.imag
    return project(omega, dirty, np.full(points, std), question, RESIDUE)


def test_a_growing_mode_is_seen_as_large_as_it_is():
    """Its peak |r|/σ = 6.3, less what the filter takes at σ off the axis.

    The ends of the sweep, where the filter leaves 1/400 of a response of 1.6, and the ripple of
    the filter across the mode stay within 5 %.
    """
    found = projected(801)
    assert found.expected < abs(RESIDUE) / 0.05
    assert found.seen == pytest.approx(found.expected, rel=0.05)


def test_a_decaying_mode_of_the_same_size_is_not_seen():
    found = projected(801, pole=-0.05 + 2j)
    assert found.seen < 1e-3 * found.expected


@pytest.mark.parametrize("seed_points", [201, 401])
def test_noise_is_in_the_error(seed_points):
    found = projected(seed_points, pole=-0.05 + 2j, std=0.05)
    assert found.error >= 0.05
    assert found.seen < 3 * found.error


def test_a_sweep_coarser_than_the_mode_gives_no_opinion():
    """Steps of 0.12 and of 0.06 beside a half-width of 0.05."""
    assert projected(50) is None
    assert projected(100) is None
    assert projected(150) is not None


def test_a_mode_at_the_edge_gives_no_opinion():
    omega = np.linspace(1.95, 6, 801)
    values = response(omega)
    assert project(omega, values, np.zeros(801), GROWING, RESIDUE) is None


def test_the_error_of_a_coarse_sweep_is_told():
    """At one step per half-width the peak is missed by some percent, and the error says so."""
    found = projected(121)
    assert abs(found.seen - found.expected) < 3 * found.error
