"""Passive networks that packages ship: not one may be called unstable in its band.

scikit-rf (BSD-3-Clause) is a dependency and brings its files along; tests/data/README.md names
the origin of the others.
"""

from pathlib import Path

import numpy as np
import pytest
import skrf
from rational import nearest_mode, response_set, unstable_in_band

import polefit

DATA = Path(__file__).resolve().parents[1] / "data"
SHIPPED = Path(skrf.__file__).parent / "data"
FILES = (
    "ring slot.s2p",
    "ring slot measured.s1p",
    "ro,1.s1p",
    "ro,2.s1p",
    "ro,3.s1p",
    "ntwk1.s2p",
    "line.s2p",
    "delay_short.s1p",
    "short.s1p",
    "ind.s2p",
    "open.s2p",
    "short.s2p",
    "tee.s3p",
    "wr1p5,line.s2p",
    "wr1p5,short.s1p",
    "wr2p2,line.s2p",
    "wr2p2,line1.s2p",
    "wr2p2,short.s1p",
    "wr2p2,delayshort.s1p",
)


def shipped(name):
    return polefit.ResponseSet.from_network(skrf.Network(str(SHIPPED / name)))


def excerpt(name, quantity="transfer"):
    table = np.loadtxt(DATA / name, delimiter=",", skiprows=1)
    return response_set(table[:, 0], table[:, 1] + 1j * table[:, 2], quantity)


@pytest.mark.parametrize("name", FILES)
def test_scikit_rf_data_are_never_unstable(name):
    result = polefit.identify(shipped(name))
    assert not unstable_in_band(result)
    assert result.verdict != "unstable"


def test_the_list_of_files_is_complete():
    """Every Touchstone file that scikit-rf ships, so that a new one is not passed over."""
    assert {p.name for p in SHIPPED.glob("*.s*p")} == set(FILES)


@pytest.mark.parametrize(
    ("name", "low_ghz", "high_ghz", "zeta_low", "zeta_high"),
    [
        # own fit of the notes: 85.782 GHz, 0.1478; stable for two to four pairs
        ("ring slot.s2p", 85.6, 86.0, 0.143, 0.153),
        # 85.43 to 85.48 GHz, 0.146 to 0.151 by fits of low order; three standard uncertainties
        # found here, 0.4 GHz and 0.0045, as no low order describes these data to their noise
        ("ring slot measured.s1p", 84.3, 86.6, 0.1325, 0.1645),
    ],
)
def test_ring_slot_resonance(name, low_ghz, high_ghz, zeta_low, zeta_high):
    result = polefit.identify(shipped(name))
    mode = nearest_mode(result, 2 * np.pi * 85.6e9 * (-0.148 + 0.989j))
    assert low_ghz < mode.natural_frequency_hz.value / 1e9 < high_ghz
    assert zeta_low < mode.damping_ratio.value < zeta_high
    assert mode.verdict == "stable"


def test_superconducting_resonator():
    """Published fit of RES-1 at −10 dBm, 113 mK: f0, df, qi and qc of the package's example.

    The pole of its model lies at ft = f0 + df = 8174954364.98 Hz with Q = 1/(1/qi + 1/qc).
    The drive distorts the curve and a cable lies before the port; neither is modelled, so
    accept a tenth of the width: ft/(10·Q) in frequency and 10 % in Q.
    """
    ft, q = 8174865670.34 + 88694.64, 1 / (1 / 284032.4 + 1 / 48825.97)
    result = polefit.identify(excerpt("hanger_resonator_-10dbm.csv"))
    mode = nearest_mode(result, 2 * np.pi * ft * (-1 / (2 * q) + 1j))
    assert mode.verdict == "stable"
    assert mode.frequency_hz.value == pytest.approx(ft, abs=0.1 * ft / q)
    assert 1 / (2 * mode.damping_ratio.value) == pytest.approx(q, rel=0.1)
    assert result.verdict != "unstable"


def test_superconducting_resonator_in_noise():
    """At −50 dBm, 112 mK: the list of the second example has f0 = 8.174932e9 Hz, seven digits.

    df is a property of the line (88.7 kHz at −10 dBm). Accept a tenth of the width found.
    """
    result = polefit.identify(excerpt("hanger_resonator_-50dbm.csv"))
    expected = 8.174932e9 + 88.7e3
    mode = max(result.modes, key=lambda m: m.significance)
    assert mode.verdict == "stable"
    width = 2 * mode.damping_ratio.value * expected
    assert 2e5 < width < 2e6  # at least as wide as at −10 dBm: Q falls at low power
    assert mode.frequency_hz.value == pytest.approx(expected, abs=0.1 * width)
    assert result.verdict != "unstable"


def test_vibrating_beam():
    """case1: the package's own fit gives 212.092530551 Hz; ζ is 8.1e-4 to 8.64e-4 by two fits.

    One-pair fits of the source differ by 0.0015 Hz among themselves; this one carries a second,
    weak pair in the same peak. Accept a tenth of the width, 2·8.4e-4·212 Hz/10 = 0.036 Hz.
    """
    result = polefit.identify(excerpt("beam_case1.csv"))
    mode = nearest_mode(result, 2j * np.pi * 212.0925)
    assert mode.frequency_hz.value == pytest.approx(212.092530551, abs=0.036)
    assert 8e-4 < mode.damping_ratio.value < 9.8e-4
    assert not unstable_in_band(result)


def test_vibrating_beam_with_little_coherence():
    """case2: coherence 0.1 to 0.6; fits with one pair give ζ = −4e-4. The beam is passive."""
    result = polefit.identify(excerpt("beam_case2.csv"))
    assert not unstable_in_band(result)
    assert result.verdict != "unstable"
