"""A mode far narrower than the step, and a glitch: neither is claimed, neither is passed over."""

import numpy as np
import pytest

import polefit

NOISE = 3e-3
HZ = np.linspace(0.5e9, 6e9, 201)


def impedance(hz, zeta, at_hz, strength):
    """Invented: a broad mode, and one whose width is a ninetieth of the step at ζ = 2e-4."""
    s = 2j * np.pi * hz
    narrow = 2 * np.pi * at_hz * (-zeta + 1j * np.sqrt(1 - zeta**2))
    broad = 2 * np.pi * 4e9 * (-0.2 + 1j)
    r = 2 * np.pi * at_hz * strength
    total = r / (s - narrow) + r / (s - np.conj(narrow)) + 20
    return total + 3e11 * (1 / (s - broad) + 1 / (s - np.conj(broad)))


def identified(hz, values):
    order = np.argsort(hz)
    return polefit.identify(
        polefit.ResponseSet.from_arrays(
            hz[order], values[order], channels=["gate"], quantity="impedance"
        )
    )


def noisy(values, generator):
    parts = generator.standard_normal((2, values.size)) * NOISE / np.sqrt(2)
    return values * (1 + parts[0] + 1j * parts[1])


@pytest.mark.parametrize(("zeta", "verdict"), [(-2e-4, "unstable"), (2e-4, "stable")])
def test_a_mode_between_two_samples_is_asked_for_and_then_decided(zeta, verdict):
    """A third of a step off a sample, where two samples stand out by many times the noise."""
    generator = np.random.default_rng(4)
    at = HZ[40] + (HZ[1] - HZ[0]) / 3
    values = noisy(impedance(HZ, zeta, at, 0.004), generator)
    hz, result = HZ, identified(HZ, values)
    assert result.verdict == "undecided"
    more = np.array(result.next_points_hz)
    assert np.any(np.abs(more - at) < HZ[1] - HZ[0])
    for _ in range(4):
        if result.verdict != "undecided":
            break
        more = np.array(result.next_points_hz)
        added = noisy(impedance(more, zeta, at, 0.004), generator)
        hz, values = np.append(hz, more), np.append(values, added)
        result = identified(hz, values)
    assert result.verdict == verdict


def test_a_spike_is_no_reason_to_say_stable():
    values = noisy(impedance(HZ, 0.1, 1.5e9, 0.0), np.random.default_rng(5))
    assert identified(HZ, values).verdict == "stable"
    values[60] *= 1.1
    result = identified(HZ, values)
    assert result.verdict == "undecided"
    assert "a few samples alone" in result.reason
    assert any("glitch" in note for note in result.notes)
    assert np.all(np.abs(np.array(result.next_points_hz) - HZ[60]) < 2 * (HZ[1] - HZ[0]))
