"""Columns that the data cannot tell apart: what is left of them is not taken for information."""

import numpy as np
import pytest
from problems import POLES, RESIDUES, axis, block, noise, response, true_sections

from polefit.engine.complex_poles import standing_alone
from polefit.engine.dependence import independent, set_apart
from polefit.engine.projection import solve
from polefit.engine.sections import Sections
from polefit.engine.significance import information, leverage, scan

STD = 1e-3


def data(channels=2):
    s = axis(151)
    clean = response(s, POLES, RESIDUES[:, :channels])
    return [block(s, clean + noise(np.random.default_rng(6), clean.shape, STD), STD)]


def beside(*far):
    return true_sections().join(Sections(np.zeros(0), np.zeros(0), np.array(far)))


TRIALS = np.linspace(0.1, 0.9, 9) * (0.02 + 1j)


ALONE = standing_alone(true_sections().poles())


@pytest.mark.parametrize("poles", [true_sections(), ALONE], ids=["paired", "alone"])
def test_nothing_changes_where_all_is_independent(poles):
    blocks = data()
    solution = solve(blocks, poles, 2)
    apart, known = set_apart(blocks, solution)
    # normal equations against orthogonalisation
    assert apart.parts[0].coefficients == pytest.approx(solution.parts[0].coefficients, rel=1e-8)
    assert apart.parts[0].misfit == pytest.approx(solution.misfit, rel=1e-10)
    usual = information(solution)
    assert known.poles == pytest.approx(usual.poles, rel=1e-8, abs=1e-8 * usual.poles.max())
    before, after = (
        scan(blocks, one, info, TRIALS) for one, info in ((solution, usual), (apart, known))
    )
    size = np.abs(before.information).max()
    assert after.information == pytest.approx(before.information, rel=1e-7, abs=1e-8 * size)


@pytest.mark.parametrize("direct", [1, 2])
@pytest.mark.parametrize("far", [(1e6,), (1e8,), (1e11,), (1e14,), (1e8, 1e8), (-1e9, 3e12)])
def test_a_spare_pole_far_outside_the_band_is_a_constant_and_a_slope(far, direct):
    """Of its own position only rounding errors speak; its slope is lost in them from 1e11 on."""
    blocks = data()
    apart, known = set_apart(blocks, solve(blocks, beside(*far), direct))
    slope = direct == 2 or min(map(abs, far)) < 1e10
    same = solve(blocks, true_sections(), 2 if slope else 1)
    expected = scan(blocks, same, information(same), TRIALS).information
    found = scan(blocks, apart, known, TRIALS).information
    assert found == pytest.approx(expected, rel=1e-3, abs=1e-3 * np.abs(expected).max())
    shares = sum(one.sum() for one in leverage(blocks, apart, known))
    # as many as there are parameters that the data know: poles, and in each channel the others
    order = same.sections.order
    assert shares == pytest.approx(order + 2 * (order + same.direct), abs=1e-3)


def test_only_dependent_directions_are_taken_out():
    """Basis of four columns, one derivative function, the target; the third column is dependent."""
    r = np.triu(np.random.default_rng(24).normal(size=(2, 6, 6))) + 4 * np.eye(6)
    assert independent(r, 4) is r
    weak = r.copy()
    weak[0, 2, 2] = 1e-15
    mended = independent(weak, 4)
    assert weak[0, 2, 2] == 1e-15, "the caller's array is left alone"
    assert np.array_equal(mended[1], weak[1])
    basis = mended[0, :4, :4]
    assert np.linalg.cond(basis) < 100
    coefficients = np.linalg.solve(basis, mended[0, :4, 5])
    # what the other three columns can do for the target, and no more
    kept = [0, 1, 3]
    best, misfit, *_ = np.linalg.lstsq(weak[0][:, kept], weak[0, :, 5])
    assert coefficients[kept] == pytest.approx(best, rel=1e-12)
    assert coefficients[2] == 0
    assert np.sum(mended[0, 4:, 5] ** 2) == pytest.approx(misfit[0], rel=1e-12)
    # of the derivative function, what they leave
    left = np.linalg.lstsq(weak[0][:, kept], weak[0, :, 4])[1][0]
    assert mended[0, 4, 4] ** 2 == pytest.approx(left, rel=1e-12)
    assert mended[0, 5, 4] == pytest.approx(0, abs=1e-14)
