"""Phrases about exact data, far poles and missing comparisons: no alarm without cause."""

import math
from dataclasses import replace

import numpy as np
import pytest
from invented_results import with_pole

from polefit.modes import BackgroundPole
from polefit.report import phrases, wording
from polefit.report.text import identification_text


def basis(result):
    return dict(wording.basis(result))


@pytest.mark.parametrize(
    ("rms", "noise", "white", "words"),
    [
        (2.7e-16, 1.7e-13, False, "which is below the noise"),
        (2.7e-16, 1.7e-13, True, "which is below the noise"),
        (0.9e-3, 1e-3, False, "which is below the noise"),
        (0.9e-3, 1e-3, True, "which looks like noise"),
        (2e-3, 1e-3, False, "which does NOT look like noise"),
    ],
)
def test_a_residual_below_the_noise_is_no_alarm(stable, rms, noise, white, words):
    fit = replace(stable.fit, rms_relative=rms, noise_relative=noise, residual_white=white)
    assert basis(replace(stable, fit=fit))["Fit"].endswith(f" of the response (rms), {words}.")


@pytest.mark.parametrize(
    ("ratio", "words"),
    [
        (None, "not needed: no pole of the best model grows in the band."),
        (math.nan, "the best model without growing poles was not compared."),
        (1.004, "fits as well as the free one."),
        (34.1, "fits 34.1 times worse than the free one."),
        (3.2e14, "fits more than 10000 times worse than the free one."),
        (math.inf, "fits more than 10000 times worse than the free one."),
    ],
)
def test_comparison_with_the_stable_model(stable, ratio, words):
    fit = replace(stable.fit, stable_model_misfit=ratio)
    assert basis(replace(stable, fit=fit))["Stable model"].endswith(words)


def test_points_to_simulate_read_back_as_the_same_numbers():
    points = (1.4900000000000001e9, 1.5e9 + 1 / 3, 1.61e9)
    assert tuple(float(word) for word in wording.pasteable(points).split(" ")) == points
    text = wording.next_points(points)
    assert text.startswith("Simulate 3 more points from 1.49 GHz to 1.61 GHz")
    assert wording.as_sweep(points) == ""
    assert wording.next_points(()) == ""
    assert wording.next_points((2e9,)).startswith("Simulate one more point, 2 GHz")


def test_evenly_spaced_points_are_told_as_a_sweep_too():
    even = tuple(1e9 + 2.5e6 * i for i in range(11))
    assert wording.as_sweep(even) == "start 1000000000 stop 1025000000 step 2500000"
    assert wording.as_sweep((*even[:-1], even[-1] + 1e3)) == ""
    assert wording.as_sweep((1e9,) * 6) == ""


@pytest.mark.parametrize(
    ("hertz", "words"),
    [
        (165.4e-9, "near 0 Hz"),
        (2.163e162, "beyond 1 PHz"),
        (math.inf, "beyond 1 PHz"),
        (0.0, "0 Hz"),
        (0.25, "250 mHz"),
        (1.5e9, "1.5 GHz"),
        (math.nan, "not known"),
    ],
)
def test_frequencies_that_no_circuit_has(hertz, words):
    assert phrases.hertz(hertz) == words


@pytest.mark.parametrize(
    ("pole", "frequency"),
    [
        (complex(-1.0, 1e3) * math.tau * 1e6, "1 GHz"),
        (complex(-75.0, 30.0) * math.tau * 1e6, "30 MHz, |p|/2π 80.78 MHz"),
        (complex(-75e6, 0.0) * math.tau, "real pole, |p|/2π 75 MHz"),
        (complex(-1e163, 0.0), "real pole, |p|/2π beyond 1 PHz"),
    ],
)
def test_poles_that_are_not_claimed_have_the_frequency_of_the_table(pole, frequency):
    """√(75² + 30²) = 80.78."""
    assert wording.background_row(BackgroundPole(pole, "far"))[0] == frequency


def test_a_real_pole_at_almost_zero(stable):
    slow = with_pole(stable.modes[0], complex(-1e-6, 0.0), ((1e-20, 0.0), (0.0, 0.0)))
    text = identification_text(replace(stable, modes=(slow,), loops=()))
    assert "near 0 Hz, real pole" in text
    assert "nHz" not in text


def test_powers_of_ten_have_one_notation():
    given = "9.15e+09 and 2e-08, 1E6, 3.2e14; not run1e-05.s1p, n1e+02"
    assert phrases.tidy(given) == "9.15e9 and 2e-8, 1e6, 3.2e14; not run1e-05.s1p, n1e+02"


def test_uncertainties_below_a_ppm_are_told_once(stable):
    sharp = ((1e-8, 0.0), (0.0, 1e-8))
    modes = tuple(with_pole(m, m.pole_rad_per_s, sharp) for m in stable.modes)
    views = tuple(replace(v, leverage=replace(v.leverage, std=1.0)) for v in modes[0].nodes)
    modes = (replace(modes[0], nodes=views), *modes[1:])
    text = identification_text(replace(stable, modes=modes))
    assert "ppm)" not in text
    assert text.count("better than 1 ppm") == 1
    assert np.all([len(line) <= 100 for line in text.splitlines()])
