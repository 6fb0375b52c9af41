"""What would have gone unnoticed: the promised power is the power that is there."""

import numpy as np
import pytest
import scipy.stats
from problems import POLES, RESIDUES, axis, block, noise, response, settle, true_sections

from polefit.engine.detection import _concentrated, noncentrality, residue_limits
from polefit.engine.projection import solve
from polefit.engine.significance import information, scan, threshold

S = axis(151)
STD = 1e-3
LIMIT = threshold(1, S.size, 1e-3)
ZETA, OMEGA, POWER = -0.02, 0.43, 0.95
DRAWS = 250


@pytest.mark.parametrize("freedom", [1, 2, 8])
@pytest.mark.parametrize("power", [0.5, 0.95, 0.999])
def test_noncentrality_is_that_of_scipy(freedom, power):
    found = noncentrality(25.0, freedom, power)
    # chndtrinc searches to about 1e-7 relative
    assert scipy.stats.ncx2.sf(25.0, freedom, found) == pytest.approx(power, abs=1e-6)


def fitted(generator, hidden=0.0, channels=1):
    """Model of the known poles alone, fitted to data that may hold a further pair."""
    pole = hidden_pole()
    poles = np.append(POLES, pole)
    residues = np.vstack((RESIDUES[:, :channels], np.full((1, channels), hidden)))
    clean = response(S, poles, residues)
    blocks = [block(S, clean + noise(generator, clean.shape, STD), STD)]
    return blocks, settle(blocks, solve(blocks, true_sections(), 2), steps=3)


def hidden_pole():
    return OMEGA * (-ZETA / np.sqrt(1 - ZETA**2) + 1j)


def limit_at(blocks, solution, frequencies, **changed):
    asked = {"damping_ratio": ZETA, "power": POWER, "threshold": LIMIT, "level": 1.0} | changed
    return residue_limits(blocks, solution, information(solution), frequencies, **asked)


def found(residue, seeds):
    """How often a pair with this residue passes the threshold."""
    count = 0
    for seed in seeds:
        blocks, solution = fitted(np.random.default_rng(seed), residue)
        gain = scan(blocks, solution, information(solution), np.array([hidden_pole()])).gain[0]
        count += gain * counted(blocks) > LIMIT
    return count / len(seeds)


def counted(blocks):
    """What is left of the evidence without the samples that the search spares."""
    return 1 - _concentrated(blocks[0], np.array([hidden_pole()]))[0, 0]


@pytest.fixture(scope="module")
def limit():
    blocks, solution = fitted(np.random.default_rng(0))
    size = limit_at(blocks, solution, np.array([OMEGA]))[0, 0]
    information_matrix = scan(
        blocks, solution, information(solution), np.array([hidden_pole()])
    ).information[0, 0]
    values, vectors = np.linalg.eigh(information_matrix)
    worst, best = (complex(*vectors[:, i]) for i in (0, 1))
    return size, worst, best, values


def test_pole_of_a_negative_damping_ratio_grows():
    assert hidden_pole().real > 0
    assert -hidden_pole().real / abs(hidden_pole()) == pytest.approx(ZETA)


def test_a_mode_at_the_limit_is_found_with_the_promised_power(limit):
    """Least favourable phase; 250 draws know 95 % to 1.4 % (one σ). Threshold and noncentrality
    both grow as samples are spared, so that the power is the promised one or a little more;
    half the residue must be found as seldom as a quarter of the noncentrality says.
    """
    size, worst, _, _ = limit
    share = counted(fitted(np.random.default_rng(0))[0])
    assert 0.1 < share < 0.9, "the pair is to be narrow, but not a glitch"
    needed = noncentrality(LIMIT, 2, POWER) / share
    for part in (1.0, 0.5):
        power = scipy.stats.ncx2.sf(LIMIT / share, 2, part**2 * needed)
        std = np.sqrt(max(power * (1 - power), 1 / DRAWS) / DRAWS)
        assert found(part * size * worst, range(DRAWS)) == pytest.approx(power, abs=4 * std)
    assert scipy.stats.ncx2.sf(LIMIT / share, 2, needed) >= POWER


def test_a_better_phase_is_found_at_least_as_often(limit):
    size, _, best, values = limit
    assert values[1] > values[0]
    limit = LIMIT / counted(fitted(np.random.default_rng(0))[0])
    power = scipy.stats.ncx2.sf(limit, 2, size**2 * values[1])
    std = np.sqrt(max(power * (1 - power), 1 / DRAWS) / DRAWS)
    share = found(size * best, range(DRAWS))
    assert share == pytest.approx(power, abs=4 * std)
    assert share >= POWER - 4 * np.sqrt(POWER * (1 - POWER) / DRAWS)


def test_the_least_favourable_phase_is_the_smaller_eigenvalue():
    """At the upper edge of the band the two phases differ clearly."""
    blocks, solution = fitted(np.random.default_rng(4))
    at = np.array([0.99, 1.0])
    poles = at * (-ZETA / np.sqrt(1 - ZETA**2) + 1j)
    matrices = scan(blocks, solution, information(solution), poles).information[0]
    values = np.linalg.eigvalsh(matrices)
    assert np.all(values[:, 0] < 0.97 * values[:, 1])
    expected = np.sqrt(noncentrality(LIMIT, 2, POWER) / values[:, 0])
    # a closed form of two by two against an eigenvalue solver
    assert np.allclose(limit_at(blocks, solution, at)[:, 0], expected, rtol=1e-6)


def test_limit_grows_with_noise_threshold_and_power():
    blocks, solution = fitted(np.random.default_rng(1))
    at = np.array([0.2, OMEGA, 0.7])
    usual = limit_at(blocks, solution, at)
    assert np.all(np.isfinite(usual))
    assert np.allclose(limit_at(blocks, solution, at, level=9.0), 3 * usual, rtol=1e-12)
    ratio = np.sqrt(noncentrality(2 * LIMIT, 2, POWER) / noncentrality(LIMIT, 2, POWER))
    assert np.allclose(limit_at(blocks, solution, at, threshold=2 * LIMIT), ratio * usual)
    assert np.all(limit_at(blocks, solution, at, power=0.99) > usual)


def test_noise_in_one_channel_blunts_only_that_one():
    blocks, solution = fitted(np.random.default_rng(2), channels=2)
    (one,) = blocks
    weight = one.weight * np.array([1.0, 0.1])[:, None, None]
    louder = [one._replace(weight=weight, target=one.target * np.array([[1.0], [0.1]]))]
    at = np.array([OMEGA])
    before = limit_at(blocks, solution, at)
    after = limit_at(louder, settle(louder, solve(louder, solution.sections, 2)), at)
    assert after.shape == (1, 2)
    assert after[0, 1] / before[0, 1] == pytest.approx(10.0, rel=0.2)
    # the first channel shares its poles with the second, and loses their help only
    assert 0.9 < after[0, 0] / before[0, 0] < 2.0


def test_a_node_is_blind_where_a_mode_of_the_model_already_is():
    """A further pair at a pole of the model cannot be told from that pole's own residue."""
    blocks, solution = fitted(np.random.default_rng(3))
    pole = solution.sections.poles()[1]
    zeta = -pole.real / abs(pole)
    limits = limit_at(blocks, solution, np.array([pole.imag, 0.4]), damping_ratio=zeta)
    assert np.isinf(limits[0, 0])
    assert np.isfinite(limits[1, 0])
