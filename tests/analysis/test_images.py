"""Images of exponents put into the model: when they help, and when the free fit stands."""

import math
from dataclasses import replace

import numpy as np
import pytest

from polefit.analysis.candidate import Candidate
from polefit.analysis.folding import fold
from polefit.analysis.images import with_images
from polefit.engine.complex_poles import NONE
from polefit.engine.estimation import Measured, estimate_model
from polefit.engine.significance import invert

DRIVE = 1e9
OMEGA = 2 * math.pi * DRIVE
HZ = np.linspace(0.1e9, 0.95e9, 301)
SCALE = 2 * math.pi * HZ[-1]
BAND = (float(HZ[0]), float(HZ[-1]))


def claims_of(poles, residues, noise, seed=1):
    """Fit, and fold all lines of the band."""
    s = 2j * np.pi * HZ / OMEGA
    values = (np.array(residues) / (s[:, None] - np.array(poles))).sum(axis=1) + 1
    rough = np.random.default_rng(seed).normal(size=(2, HZ.size)) * noise
    values = values + np.abs(values) * (rough[0] + 1j * rough[1])
    known = np.zeros((1, 2, HZ.size))
    measured = Measured(2j * np.pi * HZ / SCALE, values[None], known, None)
    found = estimate_model([measured], kind=NONE)
    sections = found.solution.sections
    covariance = invert(found.info.poles) * found.level * SCALE**2
    lines = []
    for i, pole in enumerate(sections.poles() * SCALE):
        if BAND[0] < pole.imag / (2 * math.pi) < BAND[1]:
            own = covariance[np.ix_(rows := sections.columns(i), rows)] * [[1, -1], [-1, 1]]
            lines.append(Candidate(i, pole, own, float(found.scores[i]), True, True))
    turn = np.zeros((2 * len(lines), sections.order))
    for k, line in enumerate(lines):
        turn[2 * k : 2 * k + 2, sections.columns(line.index)] = np.diag([-1, 1])
    return fold(lines, turn @ covariance @ turn.T, DRIVE), found


def deviation(claim, truth):
    return abs(claim.pole.real / OMEGA - truth.real) / math.sqrt(claim.covariance[0, 0]) * OMEGA


def test_a_hidden_image_no_longer_biases_a_line():
    """The image at 0.505 is too weak to be fitted beside the line at 0.495 and shifts it.

    Over 20 seeds the deviations in standard uncertainties are those of a normal distribution with
    the images (root mean square 1, ±0.16; four of them), and clearly more without.
    """
    truth = -0.01 + 0.4952j
    before, after = [], []
    for seed in range(20):
        claims, found = claims_of([truth, -0.01 + 0.5048j], [0.02, 0.0001j], 1e-3, seed)
        (claim,) = with_images(claims, found, SCALE, BAND, DRIVE)
        before.append(deviation(claims[0], truth))
        after.append(deviation(claim, truth))
    assert np.sqrt(np.mean(np.square(before))) > 3
    assert np.sqrt(np.mean(np.square(after))) < 1.64


def test_a_mode_that_would_become_another_one_stays():
    """Claimed three half-widths off, the tied fit would carry it back: not that mode any more."""
    claims, found = claims_of([-0.01 + 0.3j], [0.02], 1e-3)
    off = [replace(claims[0], pole=claims[0].pole + 0.03j * OMEGA)]
    assert with_images(off, found, SCALE, BAND, DRIVE) == off


def test_a_tie_that_misfits_is_not_taken():
    """Growth rate held at half the drive while the line lies half a width beside it."""
    claims, found = claims_of([-0.01 + 0.495j], [0.02], 1e-3)
    pinned = replace(claims[0], pole=complex(claims[0].pole.real, OMEGA / 2),
                     covariance=np.diag([claims[0].covariance[0, 0], 0.0]))  # fmt: skip
    assert with_images([pinned], found, SCALE, BAND, DRIVE) == [pinned]


def test_agreeing_images_stay_what_they_are():
    claims, found = claims_of([-0.01 + 0.3j, -0.01 + 0.7j], [0.02, 0.02j], 1e-3)
    (before,) = claims
    (after,) = with_images(claims, found, SCALE, BAND, DRIVE)
    std = math.sqrt(before.covariance[0][0])
    assert after.pole.real == pytest.approx(before.pole.real, abs=0.5 * std)
    assert math.sqrt(after.covariance[0][0]) == pytest.approx(std, rel=0.1)


def test_half_the_drive_keeps_its_frequency():
    claims, found = claims_of([0.002 + 0.5j], [0.02], 1e-3)
    (after,) = with_images(claims, found, SCALE, BAND, DRIVE)
    assert after.subharmonic
    assert after.pole.imag == pytest.approx(OMEGA / 2, rel=1e-15)
    assert after.covariance[1, 1] == 0
    assert deviation(after, 0.002) < 4


def test_nothing_claimed_nothing_done():
    assert with_images([], None, SCALE, BAND, DRIVE) == []
