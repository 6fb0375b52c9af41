"""The best stable model: as good as the free one on stable data, far off on an unstable tank."""

import numpy as np
import pytest
from problems import POLES, axis, block, noise, response, true_sections

from polefit.engine.projection import solve
from polefit.engine.refinement import BOUND, refine
from polefit.engine.sections import Sections, evaluate
from polefit.engine.stable_model import compare_with_stable, on_axis, reflected

S = axis(151)
STD = 1e-3
STABLE = POLES - 0.03 * (POLES.real > 0)


def free_fit(poles, residues=None, seed=61, std=STD, s=S):
    residues = np.array([0.05, 0.05j, 0.2, 0.4][: len(poles)]) if residues is None else residues
    clean = response(s, poles, residues)
    blocks = [block(s, clean + noise(np.random.default_rng(seed), clean.shape, std), std)]
    return blocks, refine(blocks, solve(blocks, true_sections(poles), 2), iterations=50)


def test_stable_data_lose_nothing():
    """Free model and confined model are the same: same χ² to well below one unit of it."""
    blocks, free = free_fit(STABLE)
    assert np.all(free.sections.poles().real < 0)
    found = compare_with_stable(blocks, free, [], 1.0)
    assert found.misfit_ratio == pytest.approx(1.0, abs=1e-5)
    assert found.rise == pytest.approx(0.0, abs=0.1)
    assert found.order == free.sections.order


def test_unstable_tank_cannot_be_described_by_stable_poles():
    """A parallel tank with a net negative conductance, seen at a hundred times its noise."""
    blocks, free = free_fit(np.array([0.01 + 0.5j]))
    found = compare_with_stable(blocks, free, [], 1.0)
    assert found.misfit_ratio > 100
    assert found.rise == pytest.approx(found.misfit_ratio**2 * free.misfit - free.misfit, rel=1e-2)


def test_ratio_is_that_of_an_independent_search():
    """Two parameters only: the confined optimum of one pair, by brute force over its box.

    With residue and direct terms free, a mirrored pair is not best: the fit uses whatever of
    the box imitates growth.
    """
    blocks, free = free_fit(np.array([0.02 + 0.5j]), std=0.02)
    found = compare_with_stable(blocks, free, [], 1.0)
    (one,) = blocks

    def misfit(c1, c0):
        pair = Sections(np.array([c1]), np.array([c0]), np.zeros(0))
        columns = evaluate(pair, one.s, free.direct)
        rows = np.concatenate((columns.real, columns.imag)) / 0.02
        x = np.linalg.lstsq(rows, one.target[0], rcond=None)[0]
        return np.sum((one.target[0] - rows @ x) ** 2)

    grid = [misfit(c1, c0) for c1 in np.geomspace(1e-6, 3, 60) for c0 in np.geomspace(1e-3, 9, 120)]
    # the grid may miss the optimum by little, the search must not miss it by more
    assert found.misfit_ratio <= np.sqrt(min(grid) / free.misfit) * (1 + 1e-6)
    assert found.misfit_ratio > 0.9 * np.sqrt(min(grid) / free.misfit)


def test_a_spare_growing_pair_is_not_worth_much():
    """Stable data, a free model with a right-half-plane pair fitted to noise."""
    blocks, free = free_fit(STABLE)
    spare = solve(blocks, free.sections.join(true_sections([0.004 + 0.42j])), 2)
    spare = refine(blocks, spare, iterations=5)
    found = compare_with_stable(blocks, spare, [], 1.0)
    gain = free.misfit - spare.misfit
    # what the spare pair gained is all that confining can lose
    assert found.rise <= gain + 0.1
    assert found.misfit_ratio < 1.05


def test_richer_starts_are_used_when_they_pay():
    """Free model of too low an order: the stable truth is known to the richer one only."""
    blocks, rich = free_fit(STABLE)
    poor = refine(blocks, solve(blocks, true_sections([0.01 + 0.3j]), 2))
    alone = compare_with_stable(blocks, poor, [], 1.0)
    helped = compare_with_stable(blocks, poor, [rich], 1.0)
    assert helped.order == rich.sections.order
    # at the order of the truth confinement costs nothing; at the poor order nothing either
    assert helped.misfit_ratio == pytest.approx(1, abs=1e-6)
    assert helped.rise == pytest.approx(0, abs=0.1)
    assert alone.misfit_ratio >= 1 - 1e-9


def test_level_scales_the_rise_but_not_the_ratio():
    blocks, free = free_fit(np.array([0.01 + 0.5j]))
    one, four = (compare_with_stable(blocks, free, [], level) for level in (1.0, 4.0))
    assert four.misfit_ratio == one.misfit_ratio
    assert four.rise == pytest.approx(one.rise / 4, rel=1e-9)


@pytest.mark.parametrize("start", [reflected, on_axis])
def test_starts_lie_in_the_box(start):
    mixed = Sections(np.array([0.1, -0.2, -3.0]), np.array([1.0, 2.0, -0.5]), np.array([-1.0, 2.0]))
    confined = start(mixed, np.zeros(mixed.number, dtype=bool))
    assert np.all(confined.vector() >= BOUND)
    # what was stable stays where it was
    assert (confined.c1[0], confined.c0[0], confined.c[1]) == (0.1, 1.0, 2.0)
    assert np.all(confined.poles().real <= 0)
