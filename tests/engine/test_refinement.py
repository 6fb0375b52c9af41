"""Refinement against scipy.optimize.least_squares on all parameters at once."""

import numpy as np
import pytest
import scipy.optimize
from problems import POLES, axis, block, design, noise, response, sorted_poles, true_sections

from polefit.engine.blocks import make_block
from polefit.engine.projection import normal_equations, solve
from polefit.engine.refinement import BOUND, refine
from polefit.engine.sections import from_poles

STD = 0.02
STABLE = POLES - 0.03 * (POLES.real > 0)
HARDLY = POLES - 0.014 * (POLES.real > 0)
"""Its pair grows so slowly that the best stable model has it just on the axis."""


def noisy(seed=31, poles=POLES):
    s = axis(151)
    clean = response(s, poles)
    return [block(s, clean + noise(np.random.default_rng(seed), clean.shape, STD), STD)]


def start(blocks, shift=0.02, poles=POLES):
    moved = true_sections(poles * (1 + shift * np.array([1, 1j, -1, 1])))
    return solve(blocks, moved, 2)


def least_squares(blocks, begin, bounds=(-np.inf, np.inf)):
    """Poles, residues and direct terms of both channels together, no variable eliminated."""
    (one,) = blocks
    n, channels = begin.sections.order, one.channels
    x0 = np.concatenate((begin.sections.vector(), begin.parts[0].coefficients.ravel()))

    def rest(x):
        sections = begin.sections.with_vector(x[:n])
        coefficients = x[n:].reshape(channels, -1)
        model = np.einsum("krm,km->kr", design(one, sections, 2), coefficients)
        return (one.target - model).ravel()

    low, high = np.full(x0.size, -np.inf), np.full(x0.size, np.inf)
    low[:n], high[:n] = bounds
    x0[:n] = np.clip(x0[:n], low[:n] + 1e-9, high[:n])
    found = scipy.optimize.least_squares(
        rest, x0, bounds=(low, high), x_scale="jac", xtol=1e-12, ftol=1e-13, gtol=1e-12,
        max_nfev=300,
    )  # fmt: skip
    return 2 * found.cost, begin.sections.with_vector(found.x[:n])


def test_reaches_the_optimum_that_scipy_finds():
    blocks = noisy()
    begin = start(blocks)
    found = refine(blocks, begin, tolerance=1e-9, iterations=60)
    misfit, sections = least_squares(blocks, begin)
    assert found.misfit == pytest.approx(misfit, rel=1e-7)
    std = np.sqrt(np.diag(np.linalg.inv(normal_equations(found)[0])))
    # at equal misfit both lie within a small part of a standard uncertainty of the optimum
    assert np.all(np.abs(found.sections.vector() - sections.vector()) < 0.01 * std)


def test_growing_pair_is_kept_where_it_is():
    """The truth lies within 5 standard uncertainties; the optimum is not reflected."""
    blocks = noisy()
    found = refine(blocks, start(blocks))
    information, _ = normal_equations(found)
    std = np.sqrt(np.diag(np.linalg.inv(information)))
    assert np.all(np.abs(found.sections.vector() - true_sections().vector()) < 5 * std)
    assert np.sum(found.sections.poles().real > 0) == 2


def test_exact_data_are_fitted_exactly():
    s = axis(151)
    blocks = [block(s, response(s))]
    found = refine(blocks, start(blocks), tolerance=1e-12, iterations=60)
    assert found.misfit < 1e-18 * np.sum(blocks[0].target ** 2)
    assert np.allclose(sorted_poles(found.sections), sorted_poles(true_sections()), atol=1e-8)


@pytest.mark.parametrize("confined", [False, True])
def test_never_worse_than_the_start(confined):
    blocks = noisy()
    generator = np.random.default_rng(32)
    for _ in range(15):
        poles = generator.uniform(-0.3, -0.01, 3) + 1j * generator.uniform(0.1, 1, 3)
        begin = solve(blocks, from_poles(poles), 2)
        for iterations in (1, 3):
            bounds = np.full(begin.sections.order, confined)
            found = refine(blocks, begin, iterations=iterations, confined=bounds)
            assert found.misfit <= begin.misfit
            assert found.sections.order == begin.sections.order


def test_one_step_from_nearby_is_nearly_enough():
    """The first damping of 1e-3 leaves that share of the step where the data are sharp: its
    square would be 1e-6 of the misfit, and blunter directions cost two or three more decades.
    """
    s = axis(151)
    blocks = [block(s, response(s))]
    begin = start(blocks, shift=1e-3)
    found = refine(blocks, begin, iterations=1, tolerance=0.0)
    assert found.misfit < 1e-3 * begin.misfit


def test_confined_model_is_the_best_in_the_box():
    """Against scipy's bounded least squares on all parameters."""
    blocks = noisy(poles=HARDLY)
    free = refine(blocks, start(blocks, poles=HARDLY), iterations=60)
    mirrored = np.where(HARDLY.real > 0, -HARDLY.conj(), HARDLY)
    begin = solve(blocks, true_sections(mirrored), 2)
    everything = np.ones(begin.sections.order, dtype=bool)
    found = refine(blocks, begin, iterations=60, tolerance=1e-9, confined=everything)
    assert np.all(found.sections.vector() >= BOUND)
    assert np.all(found.sections.poles().real <= 0)
    # a model without its growing pair fits clearly worse: the box is felt
    assert found.misfit > 1.5 * free.misfit
    misfit, sections = least_squares(blocks, begin, bounds=(BOUND, np.inf))
    assert np.all(sections.vector() >= BOUND)
    # both stop within a small part of one unit of χ²
    assert found.misfit == pytest.approx(misfit, rel=1e-8)
    assert found.sections.c1.min() == pytest.approx(BOUND)


def test_bounds_do_not_matter_where_they_are_not_touched():
    blocks = noisy(poles=STABLE)
    begin = start(blocks, poles=STABLE)
    free = refine(blocks, begin, tolerance=1e-9, iterations=60)
    everything = np.ones(begin.sections.order, dtype=bool)
    confined = refine(blocks, begin, tolerance=1e-9, iterations=60, confined=everything)
    assert np.all(free.sections.vector() > 0)
    assert confined.misfit == pytest.approx(free.misfit, rel=1e-8)


def test_a_parameter_on_its_bound_is_released_when_the_data_pull_inside():
    """Stable data, started with the first pair on the axis, its neighbours at the truth."""
    blocks = noisy(poles=STABLE)
    sections = true_sections(STABLE)
    sections.c1[0] = BOUND
    everything = np.ones(sections.order, dtype=bool)
    found = refine(blocks, solve(blocks, sections, 2), iterations=60, confined=everything)
    assert found.sections.c1[0] == pytest.approx(-2 * STABLE[0].real, rel=0.1)


def test_start_beyond_floating_point_is_handed_back():
    s = axis(20)
    with np.errstate(all="ignore"):
        blocks = [make_block(s, np.full((1, 20), 1e200 + 0j), np.full((1, 2, 20), 1e200))]
        begin = solve(blocks, true_sections(), 0)
    assert not np.isfinite(begin.misfit)
    assert refine(blocks, begin) is begin
