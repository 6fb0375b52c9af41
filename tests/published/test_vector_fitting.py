"""The artificial examples of Gustavsen & Semlyen, by the engine and by identification.

B. Gustavsen, A. Semlyen, "Rational approximation of frequency domain responses by vector
fitting", IEEE Trans. Power Delivery 14(3), 1052-1061, 1999, doi 10.1109/61.772353. Numbers:
the author's example scripts ex1 and ex2 (2005 and 2008 editions).
"""

import numpy as np
import pytest
from rational import nearest_mode, nearest_pole, partial_fractions, response_set, with_conjugates

import polefit
from polefit.engine.blocks import make_block
from polefit.engine.projection import solve
from polefit.engine.sections import from_poles, residues
from polefit.engine.vector_fitting import relocate

TWO_PI = 2 * np.pi

# ex1: third order, poles in rad/s as written
EX1_POLES = np.array([-5, -100 + 500j])
EX1_RESIDUES = np.array([2, 30 + 40j])
EX1_CONSTANT = 0.5
EX1_HZ = np.logspace(0, 4, 101)

# ex2: poles and residues as written, both times 2π
EX2_POLES = TWO_PI * np.array(
    [-4500, -41000, -100 + 5000j, -120 + 15000j, -3000 + 35000j, -200 + 45000j, -1500 + 45000j,
     -500 + 70000j, -1000 + 73000j, -2000 + 90000j]
)  # fmt: skip
EX2_RESIDUES = TWO_PI * np.array(
    [-3000, -83000, -5 + 7000j, -20 + 18000j, 6000 + 45000j, 40 + 60000j, 90 + 10000j,
     50000 + 80000j, 1000 + 45000j, -5000 + 92000j]
)  # fmt: skip
EX2_HZ = np.linspace(1, 1e5, 100)
# published f0 (of 2π times the pole) and ζ of the eight pairs
EX2_PAIRS = np.array([
    (5000.9999, 0.0199960011996), (15000.47999, 0.00799974401229),
    (35128.33614, 0.0854011413464), (45000.44444, 0.00444440054935),
    (45024.99306, 0.0333148302326), (70001.78569, 0.00714267493409),
    (73006.84899, 0.0136973450270), (90022.21948, 0.0222167372851),
])  # fmt: skip


def ex2_two_functions():
    """Element 1 has the first six poles, element 2 the last five: only 45 kHz (sharp) is shared.

    The author's script adds the constant three times to element 1, and not to element 2.
    """
    first = partial_fractions(EX2_HZ, EX2_POLES[:6], EX2_RESIDUES[:6], 0.6, 2e-5)
    second = partial_fractions(EX2_HZ, EX2_POLES[5:], EX2_RESIDUES[5:], 0.0, 6e-5)
    return np.column_stack([first, second])


def ex2_scalar():
    """All eighteen poles in one function, d = 0.2, h = 2e-5."""
    return partial_fractions(EX2_HZ, EX2_POLES, EX2_RESIDUES, 0.2, 2e-5)


def vector_fit(frequency_hz, values, start, iterations, direct=2, weights=None):
    """Relocate `iterations` times from `start` (rad/s); poles and solution, rad/s."""
    scale = TWO_PI * frequency_hz[-1]
    table = np.asarray(values).reshape(len(frequency_hz), -1).T
    weight = np.ones((len(table), 2, table.shape[1]))
    if weights is not None:
        weight *= weights
    block = make_block(1j * TWO_PI * frequency_hz / scale, table, weight)
    sections = from_poles(np.asarray(start, dtype=complex) / scale)
    for _ in range(iterations):
        sections = relocate([block], sections, direct)
    solution = solve([block], sections.split(), direct)
    samples = table.size
    return scale * sections.poles(), solution, np.sqrt(solution.misfit / samples), scale


def worst_pole_error(found, exact):
    exact = with_conjugates(exact)
    assert len(found) == len(exact)
    return max(np.min(np.abs(found - p)) / abs(p) for p in exact)


def spread_start():
    """Nine pairs, evenly spaced, damped by a hundredth: as in ex2."""
    beta = TWO_PI * np.linspace(EX2_HZ[0], EX2_HZ[-1], 9)
    return beta * (-0.01 + 1j)


def test_construction_has_the_published_fixed_points():
    """Values at the band edges, recomputed independently in the reference notes, 15 digits."""
    first, last = ex2_two_functions()[[0, -1]]
    expected = np.array([
        -12.4799520778263 + 0.000370112283026j, -8.66399161328313 + 0.000399787873776j,
        1.40959567819561 + 13.1978647744281j, 12.6851044354144 + 38.0748101756737j,
    ])  # fmt: skip
    assert np.allclose([*first, *last], expected, rtol=1e-13, atol=1e-13)
    scalar = ex2_scalar()
    assert scalar[0] == pytest.approx(-18.8773375980612 + 0.000392342806377j, rel=1e-13)
    assert scalar[-1] == pytest.approx(13.0175947388723 + 13.5711700900073j, rel=1e-13)


def test_example_1_in_one_iteration():
    """Exact poles after ONE relocation from real starting poles."""
    values = partial_fractions(EX1_HZ, EX1_POLES, EX1_RESIDUES, EX1_CONSTANT)
    found, solution, rms, scale = vector_fit(EX1_HZ, values, -TWO_PI * np.logspace(0, 4, 3), 1)
    assert worst_pole_error(found, EX1_POLES) < 1e-10
    assert rms < 1e-12
    constant, proportional = solution.parts[0].coefficients[0, -2:]
    assert constant == pytest.approx(0.5, abs=1e-11)
    assert abs(proportional) < 1e-11  # over the whole band: h·s at its top
    split = solution.sections
    found_residues = scale * residues(split, solution.parts[0].coefficients)[:, 0]
    at = np.argmin(np.abs(scale * split.poles() - EX1_POLES[1]))
    assert found_residues[at] == pytest.approx(EX1_RESIDUES[1], rel=1e-9)


def test_example_1_identified():
    values = partial_fractions(EX1_HZ, EX1_POLES, EX1_RESIDUES, EX1_CONSTANT)
    result = polefit.identify(response_set(EX1_HZ, values, "transfer"))
    assert result.verdict == "stable"
    mode = nearest_mode(result, EX1_POLES[1])
    # figures of the reference notes, ten digits
    assert mode.natural_frequency_hz.value == pytest.approx(81.15341605, rel=1e-9)
    assert mode.damping_ratio.value == pytest.approx(0.1961161351, rel=1e-8)
    real = nearest_pole(result, -5)  # 0.8 Hz, below the band: in the model, not a claim
    assert real == pytest.approx(-5, rel=1e-8)


def test_example_2_converges_as_published():
    """18 poles, two functions: 1e-8 after three relocations; 8e-7 and 1e-7 after the first."""
    values = ex2_two_functions()
    found, _, rms, _ = vector_fit(EX2_HZ, values, spread_start(), 1)
    assert worst_pole_error(found, EX2_POLES) < 5e-6
    assert rms < 1e-6
    found, _, rms, _ = vector_fit(EX2_HZ, values, spread_start(), 3)
    assert worst_pole_error(found, EX2_POLES) < 1e-8
    assert rms < 1e-10


@pytest.mark.parametrize("weighting", ["uniform", "inverse square root"])
def test_example_2_scalar(weighting):
    """All 18 poles in one function: error norm < 1e-10 after three relocations, two weightings.

    Acceptance of a public translation of the example.
    """
    values = ex2_scalar()
    weights = 1 / np.sqrt(np.abs(values)) if weighting == "inverse square root" else None
    found, solution, rms, scale = vector_fit(EX2_HZ, values, spread_start(), 3, weights=weights)
    assert rms * np.sqrt(len(EX2_HZ)) < 1e-10
    assert worst_pole_error(found, EX2_POLES) < 1e-10
    constant, proportional = solution.parts[0].coefficients[0, -2:]
    assert constant == pytest.approx(0.2, rel=1e-10)
    assert proportional / scale == pytest.approx(2e-5, rel=1e-10)


@pytest.mark.parametrize("make", [ex2_two_functions, ex2_scalar])
def test_example_2_identified(make):
    """No starting poles, no order given. 1e-7: far below the 5-digit spacing of the data."""
    result = polefit.identify(response_set(EX2_HZ, make(), "transfer"))
    assert result.verdict == "stable"
    for pole in EX2_POLES:
        assert abs(nearest_pole(result, pole) - pole) < 1e-7 * abs(pole)
    claimed = [m for m in result.modes if not m.real]
    assert len(claimed) == len(EX2_PAIRS), "each pair once, and nothing else"
    for f0, zeta in EX2_PAIRS:
        mode = nearest_mode(result, TWO_PI * f0 * (-zeta + 1j * np.sqrt(1 - zeta**2)))
        assert mode.natural_frequency_hz.value == pytest.approx(f0, rel=1e-7)
        assert mode.damping_ratio.value == pytest.approx(zeta, rel=1e-6)


def test_a_mode_shows_only_where_it_has_a_residue():
    """Example 2: 5 kHz belongs to the first function, 90 kHz to the second."""
    result = polefit.identify(response_set(EX2_HZ, ex2_two_functions(), "transfer"))
    for pole, home in ((EX2_POLES[2], "n1"), (EX2_POLES[-1], "n2")):
        mode = nearest_mode(result, pole)
        strong, weak = mode.nodes
        assert strong.channel.output == home
        # nothing there but rounding
        assert abs(weak.residue) < 1e-8 * abs(strong.residue)
    shared = {v.channel.output: v.residue for v in nearest_mode(result, EX2_POLES[5]).nodes}
    assert shared["n1"] == pytest.approx(EX2_RESIDUES[5], rel=1e-6)
    assert shared["n2"] == pytest.approx(EX2_RESIDUES[5], rel=1e-6)


def test_right_half_plane_poles_are_not_flipped():
    """Example 2 with two pairs mirrored: found where they are."""
    poles = EX2_POLES.copy()
    poles[[3, 7]] = -poles[[3, 7]].conj()
    values = partial_fractions(EX2_HZ, poles, EX2_RESIDUES, 0.2, 2e-5)
    found, _, rms, _ = vector_fit(EX2_HZ, values, spread_start(), 3)
    assert worst_pole_error(found, poles) < 1e-8
    assert rms < 1e-10
    result = polefit.identify(response_set(EX2_HZ, values, "transfer"))
    assert result.verdict == "unstable"
    growing = sorted(m.frequency_hz.value for m in result.modes if m.verdict == "unstable")
    assert growing == pytest.approx([15000, 70000], rel=1e-7)
