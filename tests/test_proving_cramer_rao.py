"""Cramér-Rao bounds of the proving ground: closed form, brute force, and what is no parameter."""

from dataclasses import replace

import numpy as np
import pytest
from proving.cramer_rao import Known, Spread, bounds

F0, ZETA, SNR = 1e9, 2e-3, 1e4
ALPHA = 2 * np.pi * F0 * ZETA
PUBLISHED_STD_HZ = 5046.265
"""One resonance, r complex and unknown, 801 points over ±40 half-widths, 40 dB at the peak:
std(f0) = √((2/π)·ζ·f0·δf/SNR), see tests/published/test_cramer_rao.py."""


def resonance(half_widths):
    pole, residue = -ALPHA + 2j * np.pi * F0, ALPHA * np.exp(0.4j)
    hz = F0 + np.linspace(-half_widths, half_widths, 20 * half_widths + 1) * ALPHA / (2 * np.pi)
    s = 2j * np.pi * hz
    values = residue / (s - pole) + residue.conj() / (s - np.conj(pole))
    known = Known(hz, values[:, None], np.array([pole]), np.array([[residue]]))
    flat = np.full((hz.size, 1), np.sqrt(0.5 / SNR))
    return known, Spread(flat, flat)


@pytest.mark.parametrize(
    ("half_widths", "direct", "factor"),
    [(20, 0, 1.034), (60, 0, 1.011), (200, 0, 1.003), (20, 2, 1.12), (60, 2, 1.038),
     (200, 2, 1.011)],
)  # fmt: skip
def test_published_closed_form(half_widths, direct, factor):
    """Variance over the closed form for a finite band, without and with d and h unknown.

    The published factors have three decimals, and leave the conjugate pole out.
    """
    found = bounds(*resonance(half_widths), direct)
    tolerance = 0.005 if factor == 1.12 else 0.002
    for std in (found.growth[0], found.angular[0]):
        assert (std / (2 * np.pi) / PUBLISHED_STD_HZ) ** 2 == pytest.approx(factor, abs=tolerance)


def test_polar_noise_of_equal_parts_is_the_same():
    known, spread = resonance(60)
    turned = bounds(known, replace(spread, polar=True))
    assert turned.growth == pytest.approx(bounds(known, spread).growth, rel=1e-9)


def test_three_times_the_noise_is_three_times_the_bound():
    known, spread = resonance(60)
    plain, noisy = bounds(known, spread), bounds(known, spread.scaled(3.0))
    assert noisy.growth == pytest.approx(3 * plain.growth, rel=1e-9)
    assert noisy.energy == pytest.approx(plain.energy / 9, rel=1e-9)


HZ = np.linspace(0.1, 3.0, 151)
POLES = np.array([-0.4 + 6j, 0.2 + 11j, -3.0 + 0j])
RESIDUES = np.array([[1 + 0.5j, 0.2j], [-0.3 + 1j, 0.8], [2.0, -1.0]], dtype=complex)


def model(parameters, delay):
    """Two channels: poles, then residues and direct terms by channel, then one delay."""
    s = 2j * np.pi * HZ
    p1, p2 = parameters[0] + 1j * parameters[1], parameters[2] + 1j * parameters[3]
    out = []
    for k in range(2):
        r = parameters[5 + 7 * k : 12 + 7 * k]
        total = r[5] + r[6] * s + r[4] / (s - parameters[4])
        for p, a in ((p1, r[0] + 1j * r[1]), (p2, r[2] + 1j * r[3])):
            total = total + a / (s - p) + np.conj(a) / (s - np.conj(p))
        out.append(total * (np.exp(-s * parameters[19]) if delay else 1.0))
    return np.stack(out, axis=1)


@pytest.mark.parametrize("delay", [False, True])
def test_against_the_whole_fisher_matrix_by_differences(delay):
    """All parameters at once, derivatives by central differences, nothing projected."""
    start = [-0.4, 6, 0.2, 11, -3.0]
    for k in range(2):
        a, b, c = RESIDUES[:, k]
        start += [a.real, a.imag, b.real, b.imag, c.real, 0.7, 0.01]
    start = np.array([*start, 0.05] if delay else start, dtype=float)
    values = model(start, delay)
    spread = Spread(0.01 * np.abs(values), 0.02 + 0.01 * np.abs(values))
    columns = []
    for i in range(start.size):
        step = np.zeros(start.size)
        step[i] = 1e-5
        slope = (model(start + step, delay) - model(start - step, delay)) / 2e-5
        columns.append(
            np.concatenate([(slope.real / spread.first).ravel(),
                            (slope.imag / spread.second).ravel()])
        )  # fmt: skip
    jacobian = np.array(columns).T
    size = np.linalg.norm(jacobian, axis=0)
    scaled = jacobian / size
    std = np.sqrt(np.diag(np.linalg.inv(scaled.T @ scaled))) / size
    factor = np.exp(-2j * np.pi * HZ * 0.05) if delay else None
    found = bounds(Known(HZ, values, POLES, RESIDUES, factor), spread)
    # central differences with steps of 1e-5: errors of about 1e-9 in the derivatives
    assert found.growth == pytest.approx(std[[0, 2, 4]], rel=1e-5)
    assert found.angular == pytest.approx([std[1], std[3], 0.0], rel=1e-5)


def test_a_buried_pole_is_no_parameter():
    """It has no bound of its own and changes none; strong enough, it does both."""
    known, spread = resonance(60)
    near = known.poles[0] + 3 * ALPHA * (-1 + 1j)
    alone = bounds(known, spread).growth[0]

    def beside(share):
        both = Known(
            known.frequency_hz,
            known.values,
            np.array([known.poles[0], near]),
            np.array([known.residues[0], share * known.residues[0]]),
        )
        return bounds(both, spread)

    weak, strong = beside(1e-4), beside(0.3)
    assert weak.energy[1] < 10 < strong.energy[1]
    assert weak.growth == pytest.approx([alone, np.inf])
    assert strong.growth[0] > 1.1 * alone
    assert np.isfinite(strong.growth[1])


def test_poles_without_conjugates():
    """Far above zero the conjugate hardly matters: the same bound without it."""
    known, spread = resonance(60)
    single = replace(
        known,
        values=(known.residues[0] / (2j * np.pi * known.frequency_hz - known.poles[0]))[:, None],
        complex_coefficients=True,
    )
    # 500 half-widths away, the conjugate changes the response by a thousandth
    assert bounds(single, spread, 0).growth == pytest.approx(bounds(known, spread, 0).growth,
                                                            rel=5e-3)  # fmt: skip
