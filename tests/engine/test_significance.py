"""What a section matters and what one more would bring: against refits and their chi-squares."""

import numpy as np
import pytest
import scipy.stats
from problems import (
    POLES,
    RESIDUES,
    axis,
    block,
    joint_jacobian,
    noise,
    response,
    settle,
    true_sections,
    uneven_block,
)

from polefit.engine import blocks as blocks_module
from polefit.engine.projection import solve
from polefit.engine.refinement import refine
from polefit.engine.sections import from_poles, section_columns
from polefit.engine.significance import (
    SPARED_SAMPLES,
    information,
    invert,
    leverage,
    scan,
    section_scores,
    threshold,
)

S = axis(201)
SPARE_PAIR, SPARE_REAL = -0.02 + 0.42j, -0.15 + 0j
DRAWS = 300


def noisy(seed, std=1e-3):
    clean = response(S)
    generator = np.random.default_rng(seed)
    return [block(S, clean + noise(generator, clean.shape, std), std)]


@pytest.mark.parametrize("index", [1, 3])  # a pair, the real pole
def test_score_is_the_rise_of_misfit_on_removal(index):
    """A weak section, 1e-3 of its usual residue: the rest moves so little that χ² is quadratic.

    The model is exact, hence at its optimum, and the rise comes from refitting everything else.
    """
    weak = np.ones((4, 1))
    weak[index] = 1e-3
    clean = response(S, residues=RESIDUES * weak)
    bare = uneven_block(np.random.default_rng(51), S, clean)
    blocks = [blocks_module.make_block(S, clean, bare.weight * 1e4, bare.turn)]
    solution = solve(blocks, true_sections(), 2)
    score = section_scores(blocks, solution, information(solution)).full[index]
    rest = settle(blocks, solve(blocks, true_sections().drop(index), 2))
    assert rest.misfit - solution.misfit > 10
    # what is left is the curvature, proportional to the residue, of a part in a thousand
    assert score == pytest.approx(rest.misfit - solution.misfit, rel=1e-2)


@pytest.mark.parametrize(("spare", "columns"), [(SPARE_PAIR, 2), (SPARE_REAL, 1)])
def test_spare_sections_score_like_chi_square_under_noise(spare, columns):
    """At a pole fixed beforehand: 2 or 1 degrees of freedom for each of two channels.

    Kolmogorov-Smirnov over 300 draws: a distribution off by 0.11 anywhere would show.
    """
    sections = true_sections().join(from_poles(np.array([spare])))
    index = 3 if columns == 2 else 4
    held = section_columns(sections, index)
    scores = []
    for seed in range(DRAWS):
        blocks = noisy(seed)
        solution = settle(blocks, solve(blocks, sections, 2), held, steps=2)
        scores.append(section_scores(blocks, solution, information(solution)).full[index])
    law = scipy.stats.chi2(columns * 2)
    assert scipy.stats.kstest(scores, law.cdf).pvalue > 1e-3
    # the mean of so many is known to √(2·freedom/300)
    assert np.mean(scores) == pytest.approx(law.mean(), abs=4 * law.std() / np.sqrt(DRAWS))


@pytest.mark.parametrize("trial", [SPARE_PAIR, -0.005 + 0.7j, 0.03 + 0.2j])
def test_gain_of_a_scan_is_the_decrease_of_misfit(trial):
    """One channel; everything else refitted with the trial pole held."""
    generator = np.random.default_rng(52)
    clean = response(S)[:1]
    bare = uneven_block(generator, S, clean)
    noisy_values = clean + noise(generator, clean.shape, 1e-3)
    blocks = [blocks_module.make_block(S, noisy_values, bare.weight * 1e3, bare.turn)]
    solution = settle(blocks, solve(blocks, true_sections(), 2), steps=10)
    gain = scan(blocks, solution, information(solution), np.array([trial])).gain[0]
    sections = solution.sections.join(from_poles(np.array([trial])))
    held = section_columns(sections, 3)
    more = settle(blocks, solve(blocks, sections, 2), held)
    # to first order in noise of 1e-3
    assert gain == pytest.approx(solution.misfit - more.misfit, rel=2e-2)
    assert gain > 0.1


def test_gain_of_noise_is_chi_square():
    """Two degrees of freedom for each of two channels, at a trial pole fixed beforehand."""
    gains = []
    for seed in range(DRAWS):
        blocks = noisy(seed)
        solution = settle(blocks, solve(blocks, true_sections(), 2), steps=2)
        gains.append(scan(blocks, solution, information(solution), np.array([SPARE_PAIR])).gain[0])
    assert scipy.stats.kstest(gains, scipy.stats.chi2(4).cdf).pvalue > 1e-3


def test_scan_of_many_poles_in_pieces_is_the_scan_of_each(monkeypatch):
    blocks = noisy(53)
    solution = settle(blocks, solve(blocks, true_sections(), 2))
    info = information(solution)
    trials = -0.01 + 1j * np.linspace(0.05, 0.95, 7)
    whole = scan(blocks, solution, info, trials)
    monkeypatch.setattr(blocks_module, "PIECE", 64)
    for i, trial in enumerate(trials):
        one = scan(blocks, solution, info, np.array([trial]))
        assert one.gain[0] == pytest.approx(whole.gain[i], rel=1e-6)
        assert np.allclose(one.information[:, 0], whole.information[:, i], rtol=1e-8)


def test_turned_weights_that_are_equal_do_not_matter():
    """Circular noise has no direction: turning its samples changes neither gain nor scores."""
    (straight,) = noisy(54)
    turn = np.exp(1j * np.random.default_rng(54).uniform(0, 6, straight.values.shape))
    turned = blocks_module.make_block(S, straight.values, straight.weight, turn)
    trials = np.array([SPARE_PAIR])
    outcome = []
    for one in (straight, turned):
        solution = settle([one], solve([one], true_sections(), 2))
        info = information(solution)
        outcome.append(
            [*section_scores([one], solution, info).full, *scan([one], solution, info, trials).gain]
        )
    assert np.allclose(*outcome, rtol=1e-6)


def test_the_scan_points_at_what_the_model_lacks():
    """A hidden pair with a peak of 50 standard deviations: the gain is largest beside it."""
    poles, residues = np.append(POLES, -0.01 + 0.42j), np.vstack((RESIDUES, [[5e-4, 5e-4j]]))
    values = response(S, poles, residues) + noise(np.random.default_rng(55), (2, S.size), 1e-3)
    blocks = [block(S, values, 1e-3)]
    solution = refine(blocks, solve(blocks, true_sections(), 2))
    frequencies = np.linspace(0.05, 0.95, 91)
    gain = scan(blocks, solution, information(solution), -0.01 + 1j * frequencies).gain
    # one step of the grid
    assert frequencies[np.argmax(gain)] == pytest.approx(0.42, abs=0.0101)
    assert gain.max() > 100


def test_covariance_of_all_parameters_is_the_inverse_information():
    """Linear parameters included: R⁻¹R⁻ᵀ plus what uncertain poles add."""
    blocks = noisy(56)
    solution = settle(blocks, solve(blocks, true_sections(), 2))
    info = information(solution)
    full = np.linalg.pinv(joint_jacobian(blocks, solution))
    covariance = full @ full.T
    n, m = 7, 9
    poles = invert(info.poles)
    std = np.sqrt(np.diag(covariance))
    for k in range(2):
        inverse, slope = info.linear[0].inverse[k], info.linear[0].slope[k]
        own = np.s_[k * m : (k + 1) * m]
        expected = covariance[own, own] / np.outer(std[own], std[own])
        found = (inverse @ inverse.T + slope @ poles @ slope.T) / np.outer(std[own], std[own])
        # differences behind the joint Jacobian are good to 1e-8, its condition is about 1e3
        assert np.allclose(found, expected, rtol=0, atol=1e-4)
    tail = np.outer(std[-n:], std[-n:])
    assert np.allclose(poles / tail, covariance[-n:, -n:] / tail, rtol=0, atol=1e-4)


def test_invert_copes_with_scales_and_with_nothing():
    generator = np.random.default_rng(57)
    root = generator.normal(size=(6, 4)) * np.geomspace(1e-12, 1e12, 4)
    matrix = root.T @ root
    scale = np.sqrt(np.diag(matrix))
    back = (matrix @ invert(matrix)) / np.outer(scale, 1 / scale)
    assert np.allclose(back, np.eye(4), atol=1e-10)
    assert np.array_equal(invert(np.zeros((2, 2))), np.zeros((2, 2)))


@pytest.mark.parametrize("channels", [1, 3, 30])
@pytest.mark.parametrize("columns", [1, 2])
@pytest.mark.parametrize("places", [1, 401])
def test_threshold_is_a_quantile_of_chi_square(channels, columns, places):
    expected = scipy.stats.chi2.isf(1e-3 / places, columns * channels)
    assert threshold(channels, places, 1e-3, columns) == pytest.approx(expected, rel=1e-9)


def with_narrow_pair(values, width):
    """Model with a further pair at ω = 0.42 of the given half-width, refitted there."""
    blocks = [block(S, values, 1e-3)]
    sections = true_sections().join(from_poles(np.array([complex(-width, 0.42)])))
    return blocks, settle(blocks, solve(blocks, sections, 2), section_columns(sections, 3))


def test_a_glitch_is_spared():
    """One or two wild samples make a narrow pair stand out; without them nothing is left."""
    step = S[1].imag - S[0].imag
    for wild in ([82], [82, 83]):
        values = noisy(58)[0].values.copy()
        values[:, wild] += 0.1
        blocks, solution = with_narrow_pair(values, step / 3)
        scores = section_scores(blocks, solution, information(solution))
        limit = threshold(2, S.size, 0.01)
        assert scores.full[3] > 5 * limit
        assert scores.spared[3] < 0.35 * scores.full[3]


def test_a_narrow_mode_keeps_much_of_its_evidence():
    """Half-width of two steps: some ten samples tell of it, and three of them are not all."""
    step = S[1].imag - S[0].imag
    extra = np.concatenate((POLES, [complex(-2 * step, 0.42)]))
    values = response(S, extra, np.vstack((RESIDUES, [[2e-3, 1e-3]])))
    values = values + noise(np.random.default_rng(59), values.shape, 1e-3)
    blocks = [block(S, values, 1e-3)]
    sections = true_sections(POLES).join(from_poles(extra[-1:]))
    solution = settle(blocks, solve(blocks, sections, 2))
    scores = section_scores(blocks, solution, information(solution))
    assert scores.full[3] > scores.spared[3] > 0.3 * scores.full[3]
    # wide pairs and real poles are nobody's glitch: nothing is taken away
    assert np.array_equal(scores.full[[2, 4]], scores.spared[[2, 4]])
    assert SPARED_SAMPLES == 3


def test_leverage_is_the_share_of_noise_that_the_fit_follows():
    """By the dense hat matrix J(JᵀJ)⁻¹Jᵀ of all parameters; it sums to their number."""
    clean = response(S)
    one = uneven_block(np.random.default_rng(58), S, clean)
    solution = solve([one], true_sections(), 2)
    found = leverage([one], solution, information(solution))[0]
    jacobian = joint_jacobian([one], solution)
    q, _ = np.linalg.qr(jacobian / np.linalg.norm(jacobian, axis=0))
    # derivatives by differences are good to about 1e-8 of a column
    assert found.reshape(-1) == pytest.approx(np.sum(q**2, axis=1), abs=1e-5)
    assert found.sum() == pytest.approx(jacobian.shape[1], rel=1e-6)
