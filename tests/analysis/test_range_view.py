"""What the data see of a range: steps, limits, blind stretches, sweeps."""

from dataclasses import replace

import numpy as np
import pytest
from invented_results import example

from polefit.analysis.range_view import (
    AT_MOST,
    MOST_POINTS,
    Range,
    largest_step,
    sweep,
    undersampled,
    view_of,
)


def test_the_largest_step_is_that_relative_to_its_frequency():
    axis = np.array([1.0, 2.0, 2.5, 10.0, 11.0, 13.0])
    assert largest_step(axis, 10.5, 12.0) == (2.0, 12.0)
    step, at = largest_step(axis, 2.0, 12.0)
    assert (step, at) == (7.5, 6.25)
    # a step that only reaches into the range counts, at the range's edge
    assert largest_step(axis, 9.0, 11.0) == (7.5, 9.0)


def blind(result, everywhere, single=()):
    """The result with blind stretches: of all nodes, and of the first one besides."""
    own = ((*everywhere, *single),) + (everywhere,) * (len(result.channels) - 1)
    return replace(
        result, detection=replace(result.detection, blind_hz=own, blind_everywhere_hz=everywhere)
    )


def test_the_view_of_the_example():
    """Of each node the least favourable frequency in the range counts; the best node first."""
    result = example("stable")
    view = view_of(result, Range(1.5e9, 0.1))
    axis, known = result.responses[0].frequency_hz, result.detection
    assert view.points == np.count_nonzero((axis >= 1.35e9) & (axis <= 1.65e9))
    assert view.step_hz == pytest.approx(2.49e9 / 300, rel=1e-9)
    inside = (known.frequency_hz >= 1.35e9) & (known.frequency_hz <= 1.65e9)
    assert np.count_nonzero(inside) > 0
    assert np.array_equal(view.detection.frequency_hz, known.frequency_hz[inside])
    assert (view.detection.damping_ratio, view.detection.power) == (-0.01, 0.95)
    assert {one.channel for one in view.limits} == set(result.channels)
    ratios = [one.relative for one in view.limits]
    assert ratios == sorted(ratios)
    for one in view.limits:
        column = result.channels.index(one.channel)
        assert one.relative == known.relative[inside, column].max()
        (at,) = np.flatnonzero(known.frequency_hz == one.frequency_hz)
        assert one.residue == known.residue[at, column]
        assert one.peak == known.peak[at, column]
        assert one.blind_hz == ()
    assert view_of(result, Range(5e9, 0.1)) is None


def test_of_a_range_between_two_frequencies_tried_the_nearest_counts():
    result = example("stable")
    known = result.detection.frequency_hz
    between = np.sqrt(known[20] * known[21])
    for near, nearest in ((between / 1.01, 20), (between * 1.01, 21)):
        view = view_of(result, Range(near, 1e-4))
        assert view.detection.frequency_hz.tolist() == [known[nearest]]


def test_blind_stretches_are_those_of_the_range():
    result = blind(example("stable"), ((0.3e9, 0.4e9), (1.3e9, 1.5e9)), ((1.6e9, 1.7e9),))
    view = view_of(result, Range(1.5e9, 0.1))
    assert view.detection.blind_everywhere_hz == ((1.35e9, 1.5e9),)
    first = next(one for one in view.limits if one.channel == result.channels[0])
    assert first.blind_hz == ((1.35e9, 1.5e9), (1.6e9, pytest.approx(1.65e9)))
    # 18 of 36 samples: 8.3 MHz apart
    assert view.detection.blind_share == pytest.approx(0.5, abs=1 / 36)
    assert view_of(result, Range(0.7e9, 0.1)).detection.blind_share == 0.0


def test_closer_points_help_where_samples_lie_far_apart():
    """Steps of 83 MHz at 31 points, 8.3 MHz at 301; a half-width of ζ = −0.01 is 14 MHz."""
    for points, helps in ((31, True), (301, False)):
        result = blind(example("stable", points=points), ((1.4e9, 1.5e9),))
        view = view_of(result, Range(1.5e9, 0.1))
        assert undersampled(result, view) == (((1.4e9, 1.5e9),) if helps else ())


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


def test_no_sweep_is_without_bounds():
    points = sweep(1e9, 1.1e9, -1e-9)
    assert len(points) == AT_MOST
    assert np.all(np.diff(points) > 0)
