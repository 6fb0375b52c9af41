"""Poles that stand alone: against the formula, differences and exact data."""

import numpy as np
import pytest

from polefit.engine.blocks import make_block
from polefit.engine.complex_poles import NONE, ComplexPoles, standing_alone
from polefit.engine.order import search
from polefit.engine.projection import model_values, normal_equations, solve
from polefit.engine.refinement import refine
from polefit.engine.significance import information, scan
from polefit.engine.stable_model import compare_with_stable
from polefit.engine.vector_fitting import relocate, zeros_of_weighting

TRUTH = np.array([-0.01 + 0.4j, 0.004 + 0.5j, -0.02 + 0.62j, -0.05 - 0.3j])
RESIDUES = np.array([[1 - 2j, 0.5j, -1 + 0.3j, 2], [0.2, 1 + 1j, 0.7j, -0.5 - 1j]]) / 50
DIRECT = np.array([[0.3 - 0.1j, 0.02], [0.1j, -0.01 + 0.05j]])
S = 1j * np.linspace(0.2, 1.0, 201)
ROUNDING = 1e-13
"""A few hundred rounding errors of double precision: what some ten operations may leave."""


def exact(s=S):
    pairs = zip(RESIDUES, DIRECT, strict=True)
    return np.array([(r / (s[:, None] - TRUTH)).sum(axis=1) + a + b * s for r, (a, b) in pairs])


def noisy(level, seed=1):
    generator = np.random.default_rng(seed)
    values = exact()
    rough = generator.normal(size=(2, *values.shape)) * level
    weight = np.full((2, 2, S.size), 1 / level)
    return [make_block(S, values + rough[0] + 1j * rough[1], weight)]


def test_the_basis_spans_the_responses():
    """Real multiples of the columns give any complex residues and direct terms."""
    poles = standing_alone(TRUTH)
    coefficients = np.hstack((RESIDUES.real, RESIDUES.imag, DIRECT.real, DIRECT.imag))
    assert np.allclose(coefficients @ poles.evaluate(S, 2).T, exact(), rtol=ROUNDING)
    assert np.allclose(poles.residues(coefficients), RESIDUES.T, rtol=ROUNDING)
    assert np.allclose(poles.direct_terms(coefficients), DIRECT, rtol=ROUNDING)
    assert np.array_equal(poles.poles(), TRUTH)


@pytest.mark.parametrize("direct", [0, 1, 2])
def test_direct_terms_that_are_left_out_are_zero(direct):
    poles = standing_alone(TRUTH)
    count = poles.order + poles.direct_columns(direct)
    assert poles.evaluate(S, direct).shape == (S.size, count)
    found = poles.direct_terms(np.ones((1, count)))[0]
    assert found.tolist() == [1 + 1j] * direct + [0] * (2 - direct)


def test_chain_against_differences():
    """Central differences: error h²·f'''/6 plus rounding/h, about 1e-8 of the largest."""
    poles, h = standing_alone(TRUTH), 1e-6
    coefficients = np.random.default_rng(2).normal(size=(2, poles.order + 4))
    slopes, basis = poles.chain(coefficients)
    assert not basis.any()
    columns = poles.evaluate_with_slopes(S, 2)[:, poles.order + 4 :]
    for j, shift in enumerate(h * np.eye(poles.order)):
        above, below = (poles.with_vector(poles.vector() + side * shift) for side in (1, -1))
        expected = coefficients @ (above.evaluate(S, 2) - below.evaluate(S, 2)).T / (2 * h)
        found = slopes[:, :, j] @ columns.T
        assert np.allclose(found, expected, rtol=0, atol=1e-6 * np.abs(expected).max())


def test_gradients_of_pole_and_residue():
    poles = standing_alone(TRUTH)
    for index in range(poles.number):
        rows = poles.columns(index)
        for at, row in enumerate(rows):
            step = np.eye(poles.order)[row] * 1e-3
            moved = poles.with_vector(poles.vector() + step).poles()[index] - TRUTH[index]
            slope = poles.pole_gradient(index)[:, at] * 1e-3
            assert moved == pytest.approx(complex(*slope), abs=1e-16)
    gradient = poles.residue_gradient(np.ones((3, 2)), 1)
    assert gradient.shape == (3, 2, 4)
    assert np.array_equal(gradient[0, :, :2], np.eye(2))
    assert not gradient[:, :, 2:].any()


def test_zeros_of_the_weighting_function():
    poles = standing_alone(TRUTH)
    weights = np.random.default_rng(3).normal(size=poles.order + 1)
    zeros = zeros_of_weighting(poles, weights).poles()
    values = poles.evaluate(zeros, 0) @ weights[:-1] + weights[-1]
    sizes = np.abs(poles.evaluate(zeros, 0)) @ np.abs(weights[:-1])
    assert np.all(np.abs(values) < 1e-10 * sizes)


def test_relocation_finds_exact_poles():
    """Vector fitting of exact data is exact after few steps, growing pole and all."""
    block = make_block(S, exact(), np.ones((2, 2, S.size)))
    poles = standing_alone(np.linspace(-0.4, 1.0, 4) * 1j - 0.02)
    for _ in range(8):
        poles = relocate([block], poles, 2)
    found = np.array([poles.poles()[np.argmin(abs(poles.poles() - p))] for p in TRUTH])
    assert np.allclose(found, TRUTH, rtol=0, atol=1e-9)


def test_refinement_reaches_the_bound():
    """Estimates over their standard uncertainties: a χ² of 8 freedoms each, 40 times.

    Mean 8, standard deviation √(2·8/40) = 0.63 of the mean: four of them on either side.
    """
    totals = []
    for seed in range(40):
        blocks = noisy(1e-3, seed)
        solution = refine(blocks, solve(blocks, standing_alone(TRUTH), 2), tolerance=1e-8)
        error = solution.sections.vector() - standing_alone(TRUTH).vector()
        totals.append(error @ normal_equations(solution)[0] @ error)
    assert np.mean(totals) == pytest.approx(8, abs=4 * 0.63)


def test_search_finds_order_and_poles():
    blocks = noisy(1e-4)
    found = search(blocks, kind=NONE).solution
    assert isinstance(found.sections, ComplexPoles)
    for pole in TRUTH[:3]:
        assert np.abs(found.sections.poles() - pole).min() < 1e-3
    assert np.allclose(model_values(S, found, found.parts[0]), exact(), atol=1e-3)


def test_scan_sees_a_missing_pole_on_its_side():
    """The best of the others in place, it brings what they miss: about 780 of χ² is noise.

    With a weak pole, so that first order is enough.
    """
    pole, residue = TRUTH[1], RESIDUES[:, 1]
    level = 1e-3 / 200
    values = exact() - 0.995 * residue[:, None] / (S - pole)
    rough = np.random.default_rng(1).normal(size=(2, *values.shape)) * level
    weight = np.full((2, 2, S.size), 1 / level)
    blocks = [make_block(S, values + rough[0] + 1j * rough[1], weight)]
    solution = refine(blocks, solve(blocks, standing_alone(np.delete(TRUTH, 1)), 2))
    trials = np.array([pole, -pole.conjugate(), 0.004 + 0.8j])
    gain = scan(blocks, solution, information(solution), trials).gain
    assert gain[0] == pytest.approx(solution.misfit - 780, rel=0.05)
    assert gain[1:].max() < 0.7 * gain[0]


def test_the_stable_model_misses_a_growing_pole():
    blocks = noisy(1e-3)
    free = refine(blocks, solve(blocks, standing_alone(TRUTH), 2))
    found = compare_with_stable(blocks, free, [], 1.0)
    assert found.misfit_ratio > 3
    alone = compare_with_stable(blocks, free, [], 1.0, [TRUTH[1]])
    assert alone.misfit_ratio == pytest.approx(1, abs=1e-3)
    stable = refine(blocks, solve(blocks, standing_alone(TRUTH).reflected(), 2))
    assert stable.sections.half_plane().tolist() == [True] * 4 + [False] * 4


def test_members():
    poles = standing_alone(TRUTH)
    assert (poles.order, poles.number, poles.twofold) == (8, 4, 4)
    assert not poles.paired
    assert poles.place(1) == (0.5, 0.008)
    kept = poles.keep(np.array([True, False, True, False]))
    assert np.array_equal(kept.join(poles.keep(np.array([False, True, False, True]))).poles(),
                          TRUTH[[0, 2, 1, 3]])  # fmt: skip
    assert poles.on_axis(1e-9).poles().real.max() == -1e-9
    assert poles.reflected().poles()[1] == -0.004 + 0.5j
    assert poles.like(TRUTH[:1]).number == 1
