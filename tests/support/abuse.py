"""An invented circuit of three resonances whose modes are known, and what users do to its data."""

from __future__ import annotations

import numpy as np

import polefit

FREQUENCY = np.linspace(1e8, 3e9, 201)
AT = (0.7e9, 1.5e9, 2.2e9)
DAMPING = (0.03, 0.02, 0.05)
RESIDUES = (2e10 * np.exp(0.2j), 3e10 * np.exp(-0.4j), 1.5e10 * np.exp(0.3j))
GROWTH = 0.01 * 2 * np.pi * 1.5e9
"""Growth rate of the mode at 1.5 GHz where it grows, 1/s."""


def poles(*, grows):
    """The three upper poles, rad/s; the middle one grows or decays."""
    damping = (DAMPING[0], -0.01 if grows else DAMPING[1], DAMPING[2])
    return [
        2 * np.pi * f * (-z + 1j * np.sqrt(1 - z * z)) for f, z in zip(AT, damping, strict=True)
    ]


def response(frequency=FREQUENCY, *, grows=False, residues=RESIDUES, noise=1e-5, seed=1):
    """An impedance in ohm, with relative noise."""
    s = 2j * np.pi * np.asarray(frequency)
    total = 30.0 + 5e10 / (s + 3e9)
    for p, r in zip(poles(grows=grows), residues, strict=True):
        total = total + r / (s - p) + np.conj(r) / (s - np.conj(p))
    parts = np.random.default_rng(seed).normal(size=(2, s.size)) / np.sqrt(2)
    return total * (1 + noise * (parts[0] + 1j * parts[1]))


def measured(values, frequency=FREQUENCY, channels=None, quantity="impedance"):
    """A ResponseSet of one or more columns."""
    values = np.asarray(values)
    if channels is None:
        channels = [f"n{k}" for k in range(1 if values.ndim == 1 else values.shape[1])]
    return polefit.ResponseSet.from_arrays(frequency, values, channels=channels, quantity=quantity)


def answer(values, frequency=FREQUENCY, **options):
    """The verdict, or ``refused`` with a reason of one line; anything else is raised."""
    try:
        return polefit.identify(measured(values, frequency, **options)).verdict
    except polefit.PolefitError as refusal:
        text = str(refusal)
        assert text
        assert "\n" not in text
        return "refused"


def reason_of(result):
    """What was found wrong with the data; empty where nothing was."""
    found = [e.detail for m in result.modes for e in m.evidence if "plausibility" in e.name]
    return found[0] if found else ""
