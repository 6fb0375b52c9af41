"""Lines of a driven circuit folded into modes: images of one exponent, and half the drive."""

import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from polefit.analysis.candidate import Candidate
from polefit.analysis.folding import as_it_is, coverage, fold, folded, images_in

DRIVE = 2 * math.pi * 1e9


def lines(*poles, std=1e-4, in_band=True):
    """Candidates at poles in units of the drive's angular frequency; `std` in the same unit."""
    own = np.eye(2) * (std * DRIVE) ** 2
    return [
        Candidate(i, pole * DRIVE, own, 1000.0 - i, in_band, True) for i, pole in enumerate(poles)
    ]


def modes(*poles, std=1e-4):
    listed = lines(*poles, std=std)
    found = fold(listed, np.eye(2 * len(listed)) * (std * DRIVE) ** 2, 1e9)
    return sorted(found, key=lambda c: c.pole.imag)


def outcome(claim, name):
    return next(e for e in claim.evidence if e.name == name).passed


@given(st.floats(0, 10), st.integers(-5, 5), st.booleans())
def test_folding_undoes_images(frequency, harmonic, mirrored):
    image = (-frequency if mirrored else frequency) + harmonic * 1.0
    assert folded(image, 1.0) == pytest.approx(folded(frequency, 1.0), abs=1e-12)
    assert 0 <= folded(image, 1.0) <= 0.5


def test_images_in_a_band():
    assert images_in(0.3, 1.0, (0.0, 2.0)) == pytest.approx([0.3, 0.7, 1.3, 1.7])
    assert images_in(-1.3, 1.0, (0.5, 1.0)) == pytest.approx([0.7])
    assert images_in(0.3, 1.0, (0.4, 0.6)) == []


@pytest.mark.parametrize(
    ("band", "shown"),
    [
        ((0.0, 0.5), (0, 0.5)),
        ((0.1, 0.45), (0.1, 0.45)),
        ((0.3, 0.6), (0.3, 0.5)),
        ((0.8, 1.2), (0, 0.2)),
        ((0.7, 1.1), (0, 0.3)),
        ((1.6, 1.9), (0.1, 0.4)),
        ((0.2, 1.3), (0, 0.5)),
    ],
)
def test_what_a_band_shows(band, shown):
    assert coverage(band, 1.0) == pytest.approx(shown)
    inside = [folded(f, 1.0) for f in np.linspace(*band, 2001)]
    assert (min(inside), max(inside)) == pytest.approx(shown, abs=1e-3)


def test_images_are_one_mode_known_better():
    """Two lines with equal, independent uncertainties: the mean, and √2 less uncertainty."""
    (mode,) = modes(-0.0101 + 0.2999j, -0.0099 + 0.7003j)
    assert mode.pole / DRIVE == pytest.approx(-0.01 + 0.2998j)
    assert np.allclose(mode.covariance, np.eye(2) * (1e-4 * DRIVE) ** 2 / 2)
    assert outcome(mode, "images") is True
    assert mode.subharmonic is False
    assert np.allclose(mode.seen_hz, [0.2999e9, 0.7003e9])


def test_better_known_images_weigh_more():
    listed = lines(-0.010 + 0.3j, -0.0104 + 0.7j)
    covariance = np.diag(np.repeat([1e-4, 2e-4], 2) * DRIVE) ** 2
    (mode,) = fold(listed, covariance, 1e9)
    assert mode.pole.real / DRIVE == pytest.approx(-0.010 - 0.0004 / 5)


def test_correlated_images_are_not_counted_twice():
    """Two lines that err together tell no more than one."""
    listed = lines(-0.01 + 0.3j, -0.01 + 1.3j)
    covariance = np.kron(np.array([[1, 0.999999], [0.999999, 1]]), np.eye(2)) * (1e-4 * DRIVE) ** 2
    (mode,) = fold(listed, covariance, 1e9)
    assert math.sqrt(mode.covariance[0][0]) / DRIVE == pytest.approx(1e-4, rel=1e-3)


def test_images_that_disagree_contradict_each_other():
    """0.0005 apart in growth rate, seven standard uncertainties, within half-widths of 0.01."""
    found = modes(-0.0100 + 0.3j, -0.0110 + 0.7j)
    assert len(found) == 2
    assert [outcome(m, "images") for m in found] == [False, False]


def test_strangers_are_two_modes():
    found = modes(-0.01 + 0.3j, -0.03 + 0.65j)
    assert [m.pole.imag / DRIVE for m in found] == pytest.approx([0.3, 0.35])
    assert [outcome(m, "images") for m in found] == [None, None]


def test_two_lines_of_one_half_interval_are_never_images():
    """Within half the drive an exponent shows once."""
    assert len(modes(-0.01 + 0.30j, -0.01 + 0.3001j)) == 2


def test_one_line_at_half_the_drive_divides_it():
    (mode,) = modes(0.004 + 0.50005j)
    assert mode.subharmonic is True
    assert mode.pole.imag == DRIVE / 2
    assert mode.pole.real == pytest.approx(0.004 * DRIVE)
    assert mode.covariance[1][1] == 0
    assert outcome(mode, "frequency division") is True


def test_a_line_well_off_half_the_drive_does_not():
    (mode,) = modes(0.004 + 0.5005j)  # five standard uncertainties
    assert mode.subharmonic is False
    assert mode.pole.imag / DRIVE == pytest.approx(0.4995)


def test_two_lines_that_mirror_each_other_do_not():
    """Each within three standard uncertainties of half the drive, but of one growth rate."""
    (mode,) = modes(-0.004 + 0.4992j, -0.004 + 0.5008j, std=2e-4)
    assert mode.subharmonic is False
    assert mode.pole.imag / DRIVE == pytest.approx(0.4992)
    assert outcome(mode, "images") is True


def test_two_real_multipliers_both_do():
    """Growth rates far apart, frequencies equal: two modes, each at half the drive."""
    found = modes(0.004 + 0.5j, -0.02 + 0.5001j)
    assert [m.subharmonic for m in found] == [True, True]
    growing = max(found, key=lambda m: m.pole.real)
    assert growing.line.related == {0, 1}


def test_what_cannot_be_told_is_said():
    found = modes(-0.004 + 0.49995j, -0.0041 + 0.50005j)
    assert all(outcome(m, "frequency division") is None for m in found)


@pytest.mark.parametrize("harmonic", [0, 1, 2])
def test_a_line_at_a_multiple_of_the_drive_is_a_real_mode(harmonic):
    (mode,) = modes(-0.02 + (harmonic + 0.00005) * 1j)
    assert mode.pole.imag == 0
    assert mode.subharmonic is False


def test_lines_at_half_the_drive_and_above_are_one_mode():
    (mode,) = modes(0.004 + 0.5j, 0.0041 + 1.5j)
    assert mode.subharmonic is True
    assert mode.pole.real / DRIVE == pytest.approx(0.00405)


def test_the_partner_of_a_growing_line_casts_no_doubt():
    """What the drive gives to one of two coupled modes it takes from the other."""
    found = modes(0.003 + 0.3j, -0.02 + 0.301j, -0.01 + 0.45j)
    growing = max(found, key=lambda m: m.pole.real)
    assert growing.line.related == {0, 1}


def test_a_mirror_image_is_taken_by_the_closest():
    """The line on half the drive keeps its place though two others flank it."""
    found = modes(-0.0170 + 0.4950j, -0.0170 + 0.5050j, -0.0180 + 0.5005j, std=8e-4)
    assert [m.subharmonic for m in found] == [False, True]


def test_without_a_drive_nothing_changes():
    (line,) = lines(-0.01 + 0.3j)
    claim = as_it_is(line)
    assert (claim.pole, claim.in_band, claim.subharmonic) == (line.pole, True, None)
    assert claim.line is line
    assert claim.evidence == ()
