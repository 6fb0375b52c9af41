"""What the data see of a range: steps, limits between known ones, blind stretches, sweeps."""

import numpy as np
import pytest
from invented_results import example

from polefit.analysis.range_view import (
    COARSEST_STEP,
    MOST_POINTS,
    Range,
    _largest_step,
    _limits,
    _stretches,
    coarsest_step,
    sweep,
    view_of,
)
from polefit.modes import Detection


def test_the_largest_step_is_that_relative_to_its_frequency():
    axis = np.array([1.0, 2.0, 2.5, 10.0, 11.0, 13.0])
    assert _largest_step(axis, 10.5, 12.0) == (2.0, 12.0)
    step, at = _largest_step(axis, 2.0, 12.0)
    assert (step, at) == (7.5, 6.25)
    # a step that only reaches into the range counts, at the range's edge
    assert _largest_step(axis, 9.0, 11.0) == (7.5, 9.0)


def test_limits_between_known_frequencies_lie_on_a_power_law():
    frequency = np.array([1.0, 4.0, 16.0])
    found = Detection(frequency, -0.01, 0.95, np.array([[1.0, 1.0], [16.0, np.inf], [256.0, 4.0]]))
    grid, limits = _limits(found, 2.0, 8.0)
    assert grid.tolist() == [2.0, 4.0, 8.0]
    assert limits[:, 0] == pytest.approx([4.0, 16.0, 64.0], rel=1e-12)
    assert np.isinf(limits[:, 1]).all(), "beside a blind frequency nothing is promised"
    beyond, held = _limits(found, 16.0, 20.0)
    assert beyond.tolist() == [16.0, 20.0]
    assert held[:, 1].tolist() == pytest.approx([4.0, 4.0])


def test_blind_stretches_reach_to_the_nearest_seeing_frequency():
    grid = np.array([1.0, 2.0, 3.0, 4.0, 5.0])
    blind = np.array([True, False, False, True, False])
    assert _stretches(grid, blind) == ((1.0, 2.0), (3.0, 5.0))
    assert _stretches(grid, ~blind) == ((1.0, 4.0), (4.0, 5.0))
    assert _stretches(grid, np.zeros(5, dtype=bool)) == ()
    assert _stretches(grid, np.ones(5, dtype=bool)) == ((1.0, 5.0),)


def test_the_view_of_the_example():
    """Peaks are |r|/(|ζ|·2πf) at the least favourable frequency; the best node comes first."""
    result = example("stable")
    view = view_of(result, Range(1.5e9, 0.1))
    axis = result.responses[0].frequency_hz
    assert view.points == np.count_nonzero((axis >= 1.35e9) & (axis <= 1.65e9))
    assert view.step_hz == pytest.approx(2.49e9 / 300, rel=1e-9)
    assert coarsest_step(view) == pytest.approx(COARSEST_STEP * 0.01 * view.step_at_hz)
    assert {one.channel for one in view.limits} == set(result.channels)
    ratios = [one.peak / one.response for one in view.limits]
    assert ratios == sorted(ratios)
    for one in view.limits:
        column = result.detection.residue[:, result.channels.index(one.channel)]
        frequency = result.detection.frequency_hz
        near = (frequency > 1.2e9) & (frequency < 1.9e9)
        assert column[near].min() <= one.residue <= column[near].max()
        assert one.peak == pytest.approx(one.residue / (0.01 * 2 * np.pi * 1.5e9), rel=0.12)
    assert view_of(result, Range(5e9, 0.1)) is None


@pytest.mark.parametrize(("low", "high"), [(1.35e9, 1.65e9), (997.0, 1203.0), (3.3e6, 4.1e6)])
def test_sweeps_are_round_and_fine_enough(low, high):
    points = np.array(sweep(low, high, -0.01))
    step = np.diff(points)
    assert step == pytest.approx(np.full(step.size, step[0]), rel=1e-9)
    assert f"{step[0]:.3e}"[0] in "125"
    # half a half-width of ζ = 0.01 at the low end; 1, 2, 5 lose at most a factor of 2.5
    assert 0.005 * low / 2.5 <= step[0] <= 0.005 * low * (1 + 1e-9)
    assert low - step[0] < points[0] <= low
    assert high <= points[-1] < high + step[0] * (1 + 1e-9)


def test_long_sweeps_keep_their_ratio():
    points = np.array(sweep(1e8, 2e9, -0.01))
    ratio = points[1:] / points[:-1]
    assert ratio.max() < 1.0051
    assert points.size < 2 * MOST_POINTS
    assert (points[0], points[-1]) == (1e8, 2e9)
