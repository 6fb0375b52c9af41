"""What would have gone unnoticed, in words: right numbers, and blindness named."""

from dataclasses import replace

import numpy as np
import pytest

from polefit.report import limits


def flat(result, peaks, response=10.0, **changed):
    """The result with limits of these heights in each channel, over a flat response."""
    found = result.detection
    sigma = 2 * np.pi * found.frequency_hz[:, None] * 0.01 / np.sqrt(1 - 0.01**2)
    shape = found.residue.shape
    changes = {
        "residue": np.broadcast_to(peaks, shape) * sigma,
        "response": np.full(shape, response),
    } | changed
    return replace(result, detection=replace(found, **changes))


def test_height_of_the_peak_and_decibels_of_the_response(build):
    result = flat(build("stable", nodes=("gate2",)), 0.1)
    assert limits.detection_limit(result) == (
        "a mode with damping ratio −0.01 would have been found with 95 % probability from a peak "
        "of 100 mΩ (−40 dB of the response) at gate2"
    )


def test_the_most_telling_node_counts_typically_and_at_worst(build):
    result = build("stable", nodes=("gate2", "bias"))
    peaks = np.full((result.detection.frequency_hz.size, 2), [0.1, 5.0])
    peaks[7] = [2.0, 1.0]
    text = limits.detection_limit(flat(result, peaks))
    assert "typically 100 mΩ (−40 dB of the response) and at worst 1 Ω (−20 dB)" in text
    assert text.endswith("at the most telling node")


def test_the_peak_is_that_of_a_pole_at_its_frequency(stable):
    """r/(s − p) at s = j·Im p is r/|σ|, with p on the ray of the damping ratio."""
    found = stable.detection
    omega = 2 * np.pi * found.frequency_hz
    pole = omega * (0.01 / np.sqrt(1 - 0.01**2) + 1j)
    assert -pole[3].real / abs(pole[3]) == pytest.approx(found.damping_ratio)
    assert np.allclose(found.peak[:, 1], np.abs(found.residue[:, 1] / (1j * omega - pole)))
    assert np.allclose(found.relative, found.peak / found.response)


def test_blind_stretches_are_named(build):
    result = build("stable", nodes=("gate2", "bias"))
    blind = ((2e7, 4e7), (1e9, 1.1e9))
    result = flat(result, 0.1, blind_hz=((*blind, (2e9, 2.2e9)), blind), blind_everywhere_hz=blind)
    text = limits.detection_limit(result)
    assert text.endswith(
        ", except from 20 MHz to 40 MHz, 1 GHz to 1.1 GHz, where every node is blind"
    )
    rows = limits.channel_rows(result)
    assert [row[0] for row in rows] == ["gate2", "bias"]
    assert rows[0][3] == "20 MHz to 40 MHz, 1 GHz to 1.1 GHz, 2 GHz to 2.2 GHz"
    assert rows[1][1] == "100 mΩ (−40 dB of the response)"


def test_data_that_say_nothing_are_called_blind(stable):
    text = limits.detection_limit(flat(stable, np.inf))
    assert "the data are blind to it" in text
    assert all(row[1:3] == ("–", "–") for row in limits.channel_rows(flat(stable, np.inf)))


def test_a_response_of_zero_is_no_comparison(stable):
    """Nothing to compare with: infinite, never a number that is none."""
    assert np.all(np.isinf(flat(stable, 0.1, response=0.0).detection.relative))
    assert np.all(np.isinf(flat(stable, 0.0, response=0.0).detection.relative))


def test_limits_of_exact_data_are_no_numbers_of_femtoohms(stable):
    text = limits.detection_limit(flat(stable, 1e-9))
    assert "from a peak of a millionth of the response at" in text
    assert "Ω" not in text


def test_nothing_computed_says_nothing(stable):
    assert limits.detection_limit(replace(stable, detection=None)) is None
    assert limits.channel_rows(replace(stable, detection=None)) == []
