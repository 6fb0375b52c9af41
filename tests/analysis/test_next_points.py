"""What to simulate next: the points decide the case, and the expected gain comes true."""

import numpy as np
import pytest

import polefit

NOISE = 3e-3
GHZ = 1e9


def impedance(hz, zeta):
    """Invented: a narrow mode at 1.5 GHz beside a broad one, in ohm."""
    s = 2j * np.pi * hz
    narrow = 2 * np.pi * 1.5e9 * (-zeta + 1j * np.sqrt(1 - zeta**2))
    broad = 2 * np.pi * 4e9 * (-0.2 + 1j)
    r = 2 * np.pi * 1.5e9 * 0.015 * (1 + 0.2j)
    total = r / (s - narrow) + np.conj(r) / (s - np.conj(narrow)) + 20
    return total + 3e11 * (1 / (s - broad) + 1 / (s - np.conj(broad)))


def swept(hz, zeta, generator):
    clean = impedance(hz, zeta)
    noise = generator.standard_normal((2, hz.size)) * NOISE / np.sqrt(2)
    return clean * (1 + noise[0] + 1j * noise[1])


def identified(hz, values):
    order = np.argsort(hz)
    return polefit.identify(
        polefit.ResponseSet.from_arrays(
            hz[order], values[order], channels=["gate"], quantity="impedance"
        )
    )


def before_and_after(zeta, seed):
    """A sweep whose step is ten times the width of the mode, then with the points asked for."""
    generator = np.random.default_rng(seed)
    hz = np.linspace(0.5e9, 6e9, 201)
    values = swept(hz, zeta, generator)
    first = identified(hz, values)
    more = np.array(first.next_points_hz)
    added = swept(more, zeta, generator)
    return first, identified(np.append(hz, more), np.append(values, added))


def test_the_points_asked_for_decide_the_case():
    """Of ten sweeps about half cannot tell; with the points asked for, all of them can."""
    undecided = 0
    for seed in range(10):
        first, second = before_and_after(-0.0008, seed)
        undecided += first.verdict == "undecided"
        assert first.next_points_hz
        assert second.verdict == "unstable"
        mode = second.modes[0]
        # five standard uncertainties, as found
        assert mode.frequency_hz.value == pytest.approx(1.5 * GHZ, abs=5 * mode.frequency_hz.std)
    assert undecided >= 3


@pytest.mark.parametrize("zeta", [-0.0008, 0.0008])
def test_points_lie_where_the_mode_is(zeta):
    """At least half of them within ten half-widths, none twice, all in the band."""
    first, _ = before_and_after(zeta, 0)
    points = np.array(first.next_points_hz)
    assert np.all(np.diff(points) > 0)
    assert points.min() > 0.5e9
    assert points.max() < 6e9
    mode = first.modes[0]
    width = abs(mode.growth_rate_per_s.value) / (2 * np.pi)
    assert np.mean(np.abs(points - mode.frequency_hz.value) < 11 * width) >= 0.5


def test_the_expected_gain_comes_true():
    """The note's two numbers: the first is that of the model, the second is reached within 2.

    What is expected holds for the mode as first estimated, whose width was known badly.
    """
    first, second = before_and_after(-0.0008, 3)
    note = next(n for n in first.notes if n.startswith("further points"))
    words = note.split("from ")[1].replace("1/s", "").split()
    expected = float(words[2])
    reached = second.modes[0].growth_rate_per_s.std
    assert expected / 3 < reached < 3 * expected


def test_a_decided_well_sampled_case_asks_for_nothing():
    generator = np.random.default_rng(1)
    hz = np.linspace(0.5e9, 6e9, 201)
    result = identified(hz, swept(hz, 0.02, generator))
    assert result.verdict == "stable"
    assert result.next_points_hz == ()


def test_blind_stretches_are_filled_where_they_leave_a_run_undecided():
    """Steps of a tenth of the frequency see no mode of ζ = −0.001 at all."""
    generator = np.random.default_rng(2)
    hz = np.geomspace(0.5e9, 6e9, 30)
    data = polefit.ResponseSet.from_arrays(
        hz, swept(hz, 0.3, generator), channels=["gate"], quantity="impedance"
    )
    result = polefit.identify(data, detection_damping=-0.001)
    assert result.verdict == "undecided"
    assert len(result.next_points_hz) > 30
