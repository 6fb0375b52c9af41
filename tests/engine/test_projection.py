"""Residues eliminated: against numpy.linalg.lstsq, full Jacobians and differences."""

import numpy as np
import pytest
from problems import (
    POLES,
    axis,
    block,
    design,
    joint_jacobian,
    noise,
    response,
    true_sections,
    uneven_block,
)

from polefit.engine import blocks as blocks_module
from polefit.engine import projection
from polefit.engine.blocks import pieces, weighted_parts
from polefit.engine.projection import (
    cholesky,
    model_values,
    normal_equations,
    orthogonal_triangle,
    regular,
    residual,
    solve,
)
from polefit.engine.sections import Sections, evaluate

OFF = true_sections(POLES * (1 + 0.01 * np.array([1, -1j, 1 + 1j, 1])))
"""Near the true poles but not at them: residual, gradient and curvature are all there."""
TIED = true_sections([-0.02 + 0.3j, -0.02 + 0.3j * (1 + 1e-9), -0.4])


def problem(points=301, std=0.01, seed=21):
    """Two blocks of two and one channels with uneven weights and turns, and noise."""
    generator = np.random.default_rng(seed)
    first, second = axis(points), axis(points // 2, 0.2, 0.9)
    clean = response(first), response(second, residues=0.3 * noise(generator, (4, 1)) * [[1]])
    return [
        uneven_block(generator, s, values + noise(generator, values.shape, std))
        for s, values in zip((first, second), clean, strict=True)
    ]


def reference(one, sections, direct):
    """Coefficients and misfit by lstsq with scaled columns, channel by channel."""
    coefficients, misfit = [], 0.0
    for rows, target in zip(design(one, sections, direct), one.target, strict=True):
        size = np.linalg.norm(rows, axis=0)
        x = np.linalg.lstsq(rows / size, target, rcond=None)[0] / size
        coefficients.append(x)
        misfit += np.sum((target - rows @ x) ** 2)
    return np.array(coefficients), misfit


@pytest.mark.parametrize("direct", [0, 1, 2])
@pytest.mark.parametrize("way", ["_by_cholesky", "_by_orthogonalisation"])
def test_both_ways_solve_what_lstsq_solves(direct, way):
    for one in problem():
        part = getattr(projection, way)(one, OFF, direct)
        coefficients, misfit = reference(one, OFF, direct)
        # rounding times the condition of the scaled columns, which is below 1e3
        assert np.allclose(part.coefficients, coefficients, rtol=1e-10, atol=1e-12)
        assert part.misfit == pytest.approx(misfit, rel=1e-11)


def test_both_ways_agree_on_the_derivatives():
    """Triangles may differ by signs of rows; products of them may not."""
    for one in problem():
        a = projection._by_cholesky(one, OFF, 2)
        b = projection._by_orthogonalisation(one, OFF, 2)
        for x, y in [
            (a.factor.swapaxes(1, 2) @ a.factor, b.factor.swapaxes(1, 2) @ b.factor),
            (a.factor.swapaxes(1, 2) @ a.coupling, b.factor.swapaxes(1, 2) @ b.coupling),
            (a.inner.swapaxes(1, 2) @ a.inner, b.inner.swapaxes(1, 2) @ b.inner),
            (a.pull, b.pull),
        ]:
            # the Gram matrix of nearly dependent columns keeps ten digits of the largest
            assert np.allclose(x, y, rtol=1e-7, atol=1e-9 * np.abs(y).max())


def test_exact_data_leave_rounding_only():
    """The correction brings back what forming normal equations loses."""
    one = block(axis(301), response(axis(301)))
    part = projection._by_cholesky(one, true_sections(), 2)
    # each residual is a few rounding errors of its sample
    assert part.misfit < (10 * np.finfo(float).eps) ** 2 * np.sum(one.target**2)


def test_residual_and_model_are_what_was_fitted():
    blocks = problem()
    solution = solve(blocks, OFF, 2)
    total = 0.0
    for one, part in zip(blocks, solution.parts, strict=True):
        rest = residual(one, solution, part)
        values = part.coefficients @ evaluate(OFF, one.s, 2).T
        assert np.allclose(model_values(one.s, solution, part), values, rtol=1e-14)
        assert np.allclose(rest, one.target - weighted_parts(one, values), atol=1e-14)
        total += np.sum(rest**2)
    assert solution.misfit == pytest.approx(total, rel=1e-12)


def test_gradient_against_differences():
    """JᵀR is −½ of the slope of the projected misfit; central differences, relative 1e-7."""
    blocks, h = problem(), 1e-6
    _, gradient = normal_equations(solve(blocks, OFF, 2))
    theta = OFF.vector()
    expected = [
        (solve(blocks, OFF.with_vector(theta - d), 2).misfit
         - solve(blocks, OFF.with_vector(theta + d), 2).misfit) / (4 * h)
        for d in h * np.eye(theta.size)
    ]  # fmt: skip
    assert np.allclose(gradient, expected, rtol=0, atol=1e-6 * np.abs(expected).max())
    assert np.abs(expected).min() > 1e-5 * np.abs(expected).max()  # every entry is tested


def test_information_is_the_full_one_with_the_rest_eliminated():
    """Schur complement of the complete JᵀJ, linear parameters of all channels included."""
    blocks = problem()
    solution = solve(blocks, OFF, 2)
    jacobian = joint_jacobian(blocks, solution)
    n = OFF.order
    linear, poles = jacobian[:, :-n], jacobian[:, -n:]
    size = np.linalg.norm(linear, axis=0)
    fitted = np.linalg.lstsq(linear / size, poles, rcond=None)[0]
    rest = poles - (linear / size) @ fitted
    information, _ = normal_equations(solution)
    expected = rest.T @ rest
    # differences are good to 1e-8
    assert np.allclose(information, expected, rtol=0, atol=1e-6 * np.abs(expected).max())
    scale = np.sqrt(np.diag(expected))
    assert np.allclose(
        information / np.outer(scale, scale), expected / np.outer(scale, scale), atol=1e-5
    )


def test_information_is_half_the_curvature_where_nothing_is_left():
    """With exact data the Gauss-Newton matrix is the Hessian, by differences of gradients."""
    blocks = problem(std=0.0)
    truth = true_sections()
    blocks[1:] = []
    information, _ = normal_equations(solve(blocks, truth, 2))
    theta, h = truth.vector(), 1e-5
    for j, d in enumerate(h * np.eye(theta.size)):
        ahead, behind = (
            normal_equations(solve(blocks, truth.with_vector(theta + way * d), 2))[1]
            for way in (1, -1)
        )
        column = (behind - ahead) / (2 * h)
        # error of a central difference with h = 1e-5 on a scale of widths of 0.02: 1e-6
        assert np.allclose(column, information[:, j], rtol=0, atol=1e-5 * np.abs(information).max())


@pytest.mark.parametrize("way", ["_by_cholesky", "_by_orthogonalisation"])
def test_pieces_change_nothing(monkeypatch, way):
    blocks = problem(points=500)
    whole = [getattr(projection, way)(one, OFF, 2) for one in blocks]
    monkeypatch.setattr(blocks_module, "PIECE", 64)
    assert [len(pieces(one)) for one in blocks] == [8, 4]
    for one, before in zip(blocks, whole, strict=True):
        after = getattr(projection, way)(one, OFF, 2)
        # other order of summation, amplified by the condition of the columns
        assert np.allclose(after.coefficients, before.coefficients, rtol=1e-9, atol=1e-11)
        assert after.misfit == pytest.approx(before.misfit, rel=1e-11)
        assert np.allclose(after.pull, before.pull, rtol=0, atol=1e-9 * np.abs(before.pull).max())
        grams = [x.inner.swapaxes(1, 2) @ x.inner for x in (before, after)]
        assert np.allclose(*grams, rtol=0, atol=1e-9 * np.abs(grams[0]).max())


def test_nearly_tied_columns_fall_back():
    """Two pairs 3e-10 apart: normal equations are refused, the misfit is still the smallest."""
    for one in problem():
        assert projection._by_cholesky(one, TIED, 2) is None
        solution = solve([one], TIED, 2)
        assert np.all(np.isfinite(solution.parts[0].coefficients))
        _, misfit = reference(one, TIED, 2)
        # the tied direction may be given up: what it could have saved is noise
        assert solution.misfit == pytest.approx(misfit, rel=1e-2)


def test_coincident_poles_give_finite_answers():
    twice = Sections(np.array([0.04, 0.04]), np.array([0.09, 0.09]), np.array([0.4]))
    (one, _) = problem()
    solution = solve([one], twice, 2)
    once = solve([one], twice.drop(1), 2)
    assert np.all(np.isfinite(solution.parts[0].coefficients))
    # the same functions: a repeated column can take away one random direction out of some 600
    # in each of two channels, a handful of units of χ² of about 1000
    assert solution.misfit == pytest.approx(once.misfit, rel=2e-2)
    assert np.sum(residual(one, solution, solution.parts[0]) ** 2) == pytest.approx(
        once.misfit, rel=2e-2
    )
    assert np.all(np.isfinite(normal_equations(solution)[0]))


def test_cholesky_refuses_what_it_cannot_do_well():
    generator = np.random.default_rng(22)
    tall = generator.normal(size=(2, 50, 4)) * np.geomspace(1e-8, 1e8, 4)
    gram = tall.transpose(0, 2, 1) @ tall
    factor = cholesky(gram)
    assert np.allclose(factor, np.triu(factor))
    back = factor.transpose(0, 2, 1) @ factor
    size = np.sqrt(np.diagonal(gram, axis1=1, axis2=2))
    assert np.allclose(
        back / size[:, :, None] / size[:, None, :], gram / size[:, :, None] / size[:, None, :]
    )
    near = tall.copy()
    near[:, :, 3] = near[:, :, 0] * (1 + 1e-8 * generator.normal(size=(2, 50)))
    assert cholesky(near.transpose(0, 2, 1) @ near) is None
    assert cholesky(np.full((1, 2, 2), np.nan)) is None
    assert cholesky(np.zeros((1, 2, 2))) is None


def test_triangle_of_pieces_is_the_triangle_of_the_whole():
    tall = np.random.default_rng(23).normal(size=(2, 60, 4))
    r = orthogonal_triangle([tall[:, :10], tall[:, 10:12], tall[:, 12:]])
    expected = tall.transpose(0, 2, 1) @ tall
    assert np.allclose(r.transpose(0, 2, 1) @ r, expected, atol=1e-12)


def test_regular_mends_only_dependent_directions():
    r = np.triu(np.random.default_rng(24).normal(size=(1, 4, 4))) + 4 * np.eye(4)
    assert regular(r) is r
    weak = r.copy()
    weak[0, 2, 2] = 1e-15
    mended = regular(weak)
    assert weak[0, 2, 2] == 1e-15  # the caller's array is left alone
    assert mended[0, 2, 2] == pytest.approx(np.linalg.norm(weak[0, :, 2]), rel=1e-14)
    same = np.ones((4, 4), dtype=bool)
    same[2, 2] = False
    assert np.array_equal(mended[0][same], weak[0][same])
