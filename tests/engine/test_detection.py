"""What would have gone unnoticed: the promised power is the power that is there."""

import numpy as np
import pytest
import scipy.stats
from problems import POLES, RESIDUES, axis, block, noise, response, settle, true_sections

from polefit.engine.detection import (
    MASKED,
    _caught,
    _needed,
    noncentrality,
    residue_limits,
    trial_cells,
)
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
    """Share of the evidence that the scan of the residual shows."""
    return _caught(blocks, np.array([hidden_pole()]))[0]


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
    both grow as a pair is caught by its skirts, and the noise level is known here, so that the
    power is the promised one or more; part of the residue must be found as seldom as the square of
    that part of the noncentrality says.
    """
    size, worst, _, _ = limit
    share = counted(fitted(np.random.default_rng(0))[0])
    assert 0.1 < share <= 1
    needed = needed_of(share)
    assert needed > noncentrality(LIMIT, 2, POWER) / share
    for part in (1.0, 0.5, 0.33):
        power = scipy.stats.ncx2.sf(LIMIT / share, 2, part**2 * needed)
        std = np.sqrt(max(power * (1 - power), 1 / DRAWS) / DRAWS)
        assert found(part * size * worst, range(DRAWS)) == pytest.approx(power, abs=4 * std)
    assert scipy.stats.ncx2.sf(LIMIT / share, 2, needed) >= POWER


def needed_of(share, limit=LIMIT, power=POWER):
    """Noncentrality asked for in one channel of 151 points and a model of order 7."""
    plain = noncentrality(limit, 2, power)
    return _needed(plain, 2, np.array([[share]]), np.array([2.0 * S.size - 9]))[0, 0]


@pytest.mark.parametrize("share", [1.0, 0.5, 0.3])
def test_needed_evidence_passes_against_the_noise_that_it_raises(share):
    """λ raises the level by 1 + λ/n, and what is left of the score must still pass."""
    plain, own = noncentrality(LIMIT, 2, POWER), 290.0
    (found,) = _needed(plain, 2, np.array([[share]]), np.array([own]))[0]
    assert found * share / (1 + found / own) >= plain
    assert found * share / (1 + found / own) < 1.1 * plain + 2


def test_what_narrow_pairs_do_to_the_noise_level_is_bounded():
    plain = noncentrality(LIMIT, 2, POWER)
    (found,) = _needed(plain, 2, np.array([[0.01]]), np.array([290.0]))[0]
    assert found == pytest.approx(MASKED * ((plain + 2) / 0.01 - 2))


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
    expected = np.sqrt(needed_of(1.0) / values[:, 0])
    # a closed form of two by two against an eigenvalue solver
    assert np.allclose(limit_at(blocks, solution, at)[:, 0], expected, rtol=1e-6)


def test_limit_grows_with_noise_threshold_and_power():
    blocks, solution = fitted(np.random.default_rng(1))
    at = np.array([0.2, OMEGA, 0.7])
    usual = limit_at(blocks, solution, at)
    assert np.all(np.isfinite(usual))
    assert np.allclose(limit_at(blocks, solution, at, level=9.0), 3 * usual, rtol=1e-12)
    assert np.all(limit_at(blocks, solution, at, threshold=2 * LIMIT) > 1.3 * usual)
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


# -- where a hidden mode is supposed --------------------------------------------------------------


def cells_of(axis, most=60):
    return trial_cells([block(1j * np.asarray(axis), np.ones((1, len(axis))))], most)


@pytest.mark.parametrize("points", [4, 5, 61, 62, 63, 200, 1000])
def test_cells_cover_the_band_without_gap_or_overlap(points):
    axis = np.linspace(0.1, 1.0, points)
    cells = cells_of(axis)
    assert cells.edges[0, 0] == axis[0]
    assert cells.edges[-1, 1] == axis[-1]
    assert np.array_equal(cells.edges[1:, 0], cells.edges[:-1, 1])
    assert np.all(cells.edges[:, 0] < cells.edges[:, 1])
    assert cells.between.size == min(60, points - 3)
    # no mode is judged within a step of the ends
    assert cells.points.sum() == points - 3
    assert np.all((axis[1] <= cells.sample) & (cells.sample < cells.between))
    assert np.allclose(cells.between - cells.sample, cells.step / 2)


def test_a_gap_of_the_sweep_is_a_cell_of_its_own():
    axis = np.concatenate((np.linspace(0.1, 0.3, 101), np.linspace(0.7, 0.9, 101)))
    cells = cells_of(axis, most=10)
    at = int(np.argmax(cells.step))
    assert cells.edges[at] == pytest.approx([0.3, 0.7])
    assert cells.between[at] == pytest.approx(0.5)
    assert cells.points[at] == 1


def test_an_axis_without_order_has_a_bounded_number_of_cells():
    axis = np.sort(np.random.default_rng(5).uniform(0.01, 1, 2000))
    assert 60 <= cells_of(axis).between.size <= 3 * 60


def test_three_points_judge_no_mode():
    assert cells_of([0.1, 0.2, 0.3]) is None
    assert cells_of([0.0, 0.1, 0.2, 0.3]) is None


def test_between_coarse_samples_a_narrow_mode_must_be_stronger():
    """Five times the step, at equal noise, and the peak needed grows by more than tenfold.

    Of a pair much narrower than a step what counts falls with the square of its width over the
    step, so that the residue needed grows in proportion to the step; halving the samples alone
    would bring a factor of √5.
    """
    found = []
    for points in (401, 81):
        s = axis(points)
        blocks = [block(s, response(s, POLES, RESIDUES[:, :1]), STD)]
        solution = settle(blocks, solve(blocks, true_sections(), 2), steps=3)
        cells = trial_cells(blocks, 400)
        at = int(np.argmin(np.abs(cells.between - OMEGA)))
        both = np.array([cells.between[at], cells.sample[at]])
        found.append(limit_at(blocks, solution, both, damping_ratio=-1e-4).max())
    assert 4.5 < found[1] / found[0] < 7.0
