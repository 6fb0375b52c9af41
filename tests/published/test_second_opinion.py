"""Examples of the AAA algorithm, with SciPy's as a second opinion that shares no code.

Y. Nakatsukasa, O. Sète, L. N. Trefethen, "The AAA algorithm for rational approximation", SIAM J.
Sci. Comput. 40(3), A1494-A1522, 2018, doi 10.1137/16M1106122, and the tests of two public
implementations.
"""

import warnings

import numpy as np
import pytest
import skrf
from rational import (
    complex_noise,
    nearest_mode,
    nearest_pole,
    partial_fractions,
    response_set,
    unstable_in_band,
)
from scipy.interpolate import AAA
from scipy.special import jv
from skrf.vectorFitting import VectorFitting

import polefit
from polefit.engine.blocks import make_block
from polefit.engine.vector_fitting import relocate, starting_sections


def vector_fitted_poles(z, values, order, iterations=15):
    """Poles by the engine on any set of complex points (function real on the real axis)."""
    table = np.asarray(values)[np.newaxis]
    block = make_block(np.asarray(z, dtype=complex), table, np.ones((1, 2, len(z))))
    sections = starting_sections(0.1, np.abs(z).max(), order, damping=0.1)
    for _ in range(iterations):
        sections = relocate([block], sections, 1)
    return sections.poles()


def conjugate_symmetric_aaa(frequency_hz, values, **options):
    """AAA on both halves of the axis, so that poles come in pairs; poles and residues."""
    s = 2j * np.pi * np.asarray(frequency_hz)
    with warnings.catch_warnings():
        warnings.simplefilter("ignore", RuntimeWarning)  # asked for more than rounding allows
        fit = AAA(
            np.concatenate([s, s.conj()]), np.concatenate([values, np.conj(values)]), **options
        )
        return fit.poles(), fit.residues()


def test_tangent_on_a_spiral():
    """tan(πz/2): poles ±1, ±3, residue −2/π. Published: |p| = 1, 1, 3, 3 within 9e-7."""
    z = np.exp(np.linspace(-0.5, 0.5 + 15j * np.pi, 1000))
    values = np.tan(np.pi * z / 2)
    opinion = AAA(z, values, rtol=1e-13)
    assert len(opinion.support_points) == 12
    theirs = np.sort(np.abs(opinion.poles()))
    ours = np.sort(np.abs(vector_fitted_poles(z, values, 11)))
    for found in (theirs, ours):
        assert found[:4] == pytest.approx([1, 1, 3, 3], rel=9e-7)
    assert np.allclose(ours[:2], 1, atol=1e-9)


def test_reciprocal_bessel_function():
    """1/J0(z) from random points in [0, 10] × [−1, 1]j: poles are the zeros of J0.

    NIST DLMF table 10.21 has the zeros: 2.4048255577, 5.5200781103, 8.6537279129.
    """
    generator = np.random.default_rng(3)
    z = 10 * generator.random(2000) + 1j * (2 * generator.random(2000) - 1)
    values = 1 / jv(0, z)
    zeros = [2.404825557695772, 5.520078110286311, 8.653727912911013]
    opinion = AAA(z, values).poles()
    ours = vector_fitted_poles(z, values, 12)
    for zero in zeros:
        assert np.min(np.abs(opinion - zero)) < 1e-10
        assert np.min(np.abs(ours - zero)) < 1e-9


def test_doublets_of_the_published_example():
    """log(2 + z⁴)/(1 − 16z⁴) on the unit circle: spurious pairs at tolerance 0, none of them ours.

    True poles at |z| = 1/2, at 0, 90, 180 and 270 degrees; branch points at |z| = 2^¼.
    """
    z = np.exp(2j * np.pi * np.arange(1000) / 1000)
    values = np.log(2 + z**4) / (1 - 16 * z**4)
    with warnings.catch_warnings():
        warnings.simplefilter("ignore", RuntimeWarning)
        opinion = AAA(z, values, rtol=0, max_terms=100, clean_up=False)
    assert np.sum(np.abs(opinion.residues()) < 1e-13) > 0, "the example must show doublets"
    ours = vector_fitted_poles(z, values, 20, 20)
    for pole in (0.5, -0.5, 0.5j, -0.5j):
        assert np.min(np.abs(ours - pole)) < 1e-9
    inside = ours[np.abs(ours) < 1]
    assert len(inside) == 4


def test_a_doublet_is_never_a_mode():
    """Noise at 1e-5: AAA asked for more than that scatters doublets, some of them to the right."""
    poles = 2 * np.pi * 1e9 * np.array([-0.05 + 1j, -0.2 + 2.2j, -0.03 + 3j])
    hz = np.linspace(0.2e9, 4e9, 401)
    clean = partial_fractions(hz, poles, 1e9 * np.array([1 + 1j, 3 - 1j, 0.5j]), 0.3)
    for seed in range(5):
        noise = complex_noise(np.random.default_rng(seed), hz.size, (1e-5 * np.abs(clean)) ** 2)
        spurious, _ = conjugate_symmetric_aaa(hz / 1e9, clean + noise, rtol=1e-9, max_terms=60)
        spurious = 1e9 * spurious
        in_band = np.abs(spurious.imag / (2 * np.pi) - 2.1e9) < 1.9e9
        assert np.any(in_band & (spurious.real > 0)), "the noise must provoke doublets"
        result = polefit.identify(response_set(hz, clean + noise, "transfer"))
        assert result.verdict == "stable"
        assert len([m for m in result.modes if m.in_band]) == 3
        for pole in poles:
            assert nearest_mode(result, pole).pole_rad_per_s == pytest.approx(pole, rel=1e-3)


def test_lossy_line_splits_into_modes_in_band_and_background():
    """Shorted line, Z = tanh(s + 0.05): poles −0.05 + j(π/2 + kπ), infinitely many.

    AAA has the pairs at π/2, 3π/2, 5π/2 to 1e-14 and the first one beyond the data to 4e-5.
    """
    omega = np.linspace(0.05, 8, 600)
    hz = omega / (2 * np.pi)
    values = np.tanh(1j * omega + 0.05)
    opinion, _ = conjugate_symmetric_aaa(hz, values)
    result = polefit.identify(response_set(hz, values))
    assert result.verdict == "stable"
    for k in range(3):
        pole = -0.05 + 1j * (np.pi / 2 + k * np.pi)
        assert np.min(np.abs(opinion - pole)) < 1e-10
        mode = nearest_mode(result, pole)
        assert mode.in_band
        assert abs(mode.pole_rad_per_s - pole) < 1e-9
    beyond = -0.05 + 1j * 3.5 * np.pi  # 37 % above the last point
    assert np.min(np.abs(opinion - beyond)) < 1e-3
    assert abs(nearest_pole(result, beyond) - beyond) < 1e-2
    assert len([m for m in result.modes if m.in_band]) == 3
    assert all(m.frequency_hz.value <= hz[-1] for m in result.modes if m.in_band)


def test_agrees_with_scipy_on_stable_data():
    """Twelve random stable poles, no noise: the same poles as AAA's, to what the data support."""
    generator = np.random.default_rng(8)
    natural = 2 * np.pi * np.sort(generator.uniform(0.3, 9.5, 6))
    zeta = 10 ** generator.uniform(-2.5, -0.8, 6)
    poles = natural * (-zeta + 1j * np.sqrt(1 - zeta**2))
    residues = generator.standard_normal(6) + 1j * generator.standard_normal(6)
    hz = np.linspace(0.1, 10, 501)
    values = partial_fractions(hz, poles, residues, 0.5)
    opinion, _ = conjugate_symmetric_aaa(hz, values)
    result = polefit.identify(response_set(hz, values, "transfer"))
    assert not unstable_in_band(result)
    for pole in poles:
        theirs = opinion[np.argmin(np.abs(opinion - pole))]
        assert nearest_mode(result, pole).pole_rad_per_s == pytest.approx(theirs, rel=1e-8)


def test_agrees_with_scikit_rf_on_stable_data():
    """The same network by scikit-rf's vector fitting at the true order (it flips: stable only)."""
    generator = np.random.default_rng(4)
    natural = 2 * np.pi * 1e9 * np.array([1.2, 2.9, 4.4, 7.1])
    zeta = np.array([0.05, 0.01, 0.03, 0.02])
    poles = natural * (-zeta + 1j * np.sqrt(1 - zeta**2))
    residues = 2e8 * (generator.standard_normal((4, 4)) + 1j * generator.standard_normal((4, 4)))
    hz = np.linspace(0.1e9, 9e9, 401)
    s = partial_fractions(hz, poles, residues, 0.1).reshape(-1, 2, 2)
    network = skrf.Network(f=hz, s=s, z0=50, f_unit="Hz")
    fit = VectorFitting(network)
    with warnings.catch_warnings():
        warnings.simplefilter("ignore")  # about passivity, which random residues do not have
        fit.vector_fit(n_poles_real=0, n_poles_cmplx=4, fit_constant=True)
    result = polefit.identify(polefit.ResponseSet.from_network(network))
    assert result.verdict == "stable"
    assert len([m for m in result.modes if m.in_band]) == 4
    for pole in poles:
        theirs = fit.poles[np.argmin(np.abs(fit.poles - pole))]
        assert theirs == pytest.approx(pole, rel=1e-6)
        assert nearest_mode(result, pole).pole_rad_per_s == pytest.approx(theirs, rel=1e-6)
