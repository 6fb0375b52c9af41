"""Tied refinement: against the free one, differences, and the bound that the tie lowers."""

import numpy as np
import pytest

from polefit.engine.blocks import make_block
from polefit.engine.complex_poles import standing_alone
from polefit.engine.projection import normal_equations, solve
from polefit.engine.refinement import refine
from polefit.engine.significance import invert
from polefit.engine.tied import Tie, refine_tied

S = 1j * np.linspace(0.1, 1.0, 201)
POLES = np.array([-0.01 + 0.3j, -0.01 + 0.7j])
"""Images of one exponent of a circuit driven at 1."""
IMAGES = Tie(np.array([[1.0, 0], [1, 0], [0, 1], [0, -1]]), np.array([0, 0, 0, 1.0]))
KIND = standing_alone(POLES)
LEVEL = 1e-2


def noisy(seed, second=0.3):
    generator = np.random.default_rng(seed)
    values = 0.02 / (S - POLES[0]) + 0.02j * second / (S - POLES[1]) + 0.5
    rough = generator.normal(size=(2, 1, S.size)) * LEVEL
    weight = np.full((1, 2, S.size), 1 / LEVEL)
    return [make_block(S, values[None] + rough[0] + 1j * rough[1], weight)]


def test_without_ties_it_is_the_plain_refinement():
    blocks = noisy(1)
    nothing = Tie(np.eye(4), np.zeros(4))
    start = standing_alone(POLES + 0.003).vector()
    tied = refine_tied(blocks, KIND, nothing, start, 1, tolerance=1e-9)
    plain = refine(blocks, solve(blocks, KIND.with_vector(start), 1), tolerance=1e-9)
    assert tied.solution.misfit == pytest.approx(plain.misfit, rel=1e-9)
    assert np.allclose(tied.free, plain.sections.vector(), rtol=0, atol=1e-6)
    assert np.allclose(tied.information, normal_equations(tied.solution)[0], rtol=1e-12)


def test_the_minimum_is_one():
    """Steps of a hundredth of a standard uncertainty raise χ² by their square, 1e-4 each."""
    blocks = noisy(2)
    tied = refine_tied(blocks, KIND, IMAGES, np.array([0.012, 0.302]), 1, tolerance=1e-10)
    assert np.all(tied.solution.sections.poles().real == -tied.free[0])
    assert tied.solution.sections.omega.sum() == pytest.approx(1.0)
    for step in np.diag(np.sqrt(np.diag(invert(tied.information)))):
        for side in (1, -1):
            moved = IMAGES.matrix @ (tied.free + side * step) + IMAGES.offset
            rise = solve(blocks, KIND.with_vector(moved), 1).misfit - tied.solution.misfit
            # Kaufman's information leaves out terms of the order of noise over signal
            assert rise == pytest.approx(step @ tied.information @ step, rel=0.1)


def test_errors_follow_the_bound():
    """χ² of two freedoms over 60 runs: mean 2, standard deviation 2/√60 = 0.26; four of them."""
    truth, totals = np.array([0.01, 0.3]), []
    for seed in range(60):
        tied = refine_tied(noisy(seed), KIND, IMAGES, truth, 1)
        error = tied.free - truth
        totals.append(error @ tied.information @ error)
    assert np.mean(totals) == pytest.approx(2, abs=4 * 0.26)


def test_the_tie_tells_more_than_one_line():
    blocks = noisy(3, second=1.0)
    tied = refine_tied(blocks, KIND, IMAGES, np.array([0.01, 0.3]), 1)
    free = refine(blocks, solve(blocks, KIND, 1))
    one = invert(normal_equations(free)[0])[0, 0]
    assert invert(tied.information)[0, 0] == pytest.approx(one / 2, rel=0.2)
