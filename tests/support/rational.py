"""Rational functions with known poles, noise on them, and the modes found near a pole."""

from __future__ import annotations

import numpy as np

import polefit


def with_conjugates(values):
    """Append the conjugate of every value that is not real."""
    values = np.atleast_1d(np.asarray(values, dtype=complex))
    return np.concatenate([values, values[values.imag != 0].conj()])


def partial_fractions(frequency_hz, poles, residues, constant=0.0, proportional=0.0):
    """Σ residues/(s − poles) + constant + proportional·s; poles given once for each pair.

    `residues` is (n,) for one channel or (n, K), listed like `poles`; returns (N,) or (N, K).
    """
    s = 2j * np.pi * np.asarray(frequency_hz, dtype=float)
    poles = np.atleast_1d(np.asarray(poles, dtype=complex))
    residues = np.asarray(residues, dtype=complex).reshape(len(poles), -1)
    pair = poles.imag != 0
    all_poles = np.concatenate([poles, poles[pair].conj()])
    all_residues = np.concatenate([residues, residues[pair].conj()])
    total = (1.0 / (s[:, None] - all_poles)) @ all_residues
    total = total + np.asarray(constant) + s[:, None] * np.asarray(proportional)
    return total[:, 0] if total.shape[1] == 1 else total


def complex_noise(generator, shape, power):
    """Circular complex Gaussian noise with E|n|² = power."""
    parts = generator.standard_normal((2, *np.atleast_1d(shape)))
    return np.sqrt(np.asarray(power) / 2) * (parts[0] + 1j * parts[1])


def response_set(frequency_hz, values, quantity="impedance", channels=None, **more):
    """ResponseSet with node names n1, n2 … unless channels are named."""
    values = np.asarray(values)
    count = 1 if values.ndim == 1 else values.shape[1]
    names = channels or [f"n{k + 1}" for k in range(count)]
    return polefit.ResponseSet.from_arrays(
        frequency_hz, values, channels=names, quantity=quantity, **more
    )


def nearest_mode(result, pole):
    """The claimed mode whose pole lies nearest."""
    assert result.modes, f"no mode claimed; background: {result.background}"
    return min(result.modes, key=lambda m: abs(m.pole_rad_per_s - pole))


def nearest_pole(result, pole):
    """The pole of the fitted model, claimed or not, that lies nearest."""
    poles = result.model.poles
    return poles[np.argmin(np.abs(poles - pole))]


def unstable_in_band(result):
    """In-band modes called unstable."""
    return [m for m in result.modes if m.in_band and m.verdict == "unstable"]
