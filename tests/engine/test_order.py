"""The order: true poles are kept, spare ones go, missed ones are added."""

import numpy as np
import pytest
import scipy.stats
from circuits import Circuit
from problems import POLES, RESIDUES, axis, block, noise, response, true_sections

from polefit.engine import order
from polefit.engine.blocks import samples
from polefit.engine.order import (
    count_places,
    drop_direct,
    grow,
    largest_order,
    parameters,
    prune,
    search,
    split,
    take_up,
    trial_grid,
    variance_factor,
)
from polefit.engine.projection import residual, solve
from polefit.engine.refinement import refine
from polefit.engine.sections import Sections, from_poles
from polefit.engine.significance import information, section_scores, threshold
from polefit.engine.whiteness import judge_whiteness

S = axis(201)
STD = 1e-3
WEAK = -0.01 + 0.42j
LADDER_NETWORK = (
    "L1 a 0 1u", "C1 a 0 100p", "R1 a 0 5k", "C12 a b 10p", "L2 b 0 0.4u", "C2 b 0 80p",
    "R2 b 0 3k", "G1 b 0 b 0 -1m", "L23 b c 1u", "C3 c 0 60p", "R3 c 0 1.5k",
)  # fmt: skip


def noisy(seed=71, values=None):
    clean = response(S) if values is None else values
    return [block(S, clean + noise(np.random.default_rng(seed), clean.shape, STD), STD)]


def nearest(solution, poles):
    found = solution.sections.poles()
    return np.array([found[np.argmin(np.abs(found - p))] for p in poles])


@pytest.mark.parametrize("seed", range(6))
def test_spare_poles_are_pruned_and_true_ones_kept(seed):
    """Three spare pairs and a spare real pole, refined on the noise, then pruned."""
    blocks = noisy(seed)
    spare = from_poles(np.array([-0.02 + 0.15j, 0.01 + 0.42j, -0.03 + 0.7j, -0.05]))
    rich = refine(blocks, solve(blocks, true_sections().join(spare), 2), iterations=20)
    assert rich.sections.order == 14
    found = prune(blocks, rich, count_places(blocks))
    assert found.sections.order == 7
    # noise of 1e-3 on residues of 0.02 and more: poles are known to 2e-3 or better, 0.4 to 2e-2
    assert np.all(np.abs(nearest(found, POLES) - POLES) < [1e-3, 2e-3, 1e-2, 5e-2])


def test_pruning_stops_where_the_misfit_would_rise():
    blocks = noisy()
    exact = refine(blocks, solve(blocks, true_sections(), 2))
    kept = prune(blocks, exact, count_places(blocks))
    assert kept.sections.order == 7
    assert kept.misfit <= exact.misfit * (1 + 1e-6)


def test_of_two_pairs_that_stand_in_for_each_other_one_is_kept():
    """Either may go, not both: each alone scores nothing, since the other would take over."""
    blocks = noisy()
    twin = from_poles(POLES[:1] + 1e-5j)
    rich = solve(blocks, true_sections().join(twin), 2)
    level = variance_factor(blocks, rich)
    scores = section_scores(blocks, rich, information(rich)).full / level
    assert np.sum(scores < threshold(2, count_places(blocks), 0.01)) >= 2
    found = prune(blocks, rich, count_places(blocks))
    assert found.sections.order == 7
    assert np.all(np.abs(nearest(found, POLES[:3]) - POLES[:3]) < 1e-2)


def test_a_glitch_is_not_kept():
    """One wild sample at 20 σ: its narrow pair leaves although the misfit rises."""
    values = response(S).copy()
    values[:, 90] += 0.02
    blocks = noisy(values=values)
    pair = from_poles(np.array([complex(-0.002, S[90].imag)]))
    rich = refine(blocks, solve(blocks, true_sections().join(pair), 2), iterations=10)
    found = prune(blocks, rich, count_places(blocks))
    assert found.sections.order == 7
    # 20² in each of two channels, of which the other parameters take a little
    assert found.misfit > rich.misfit + 400


@pytest.mark.parametrize("std", [1e-6, 1e-4])
def test_order_of_a_lumped_circuit_is_its_number_of_poles(std):
    """Three coupled tanks, one with a negative conductance: of six poles a pair grows."""
    circuit = Circuit.from_cards(*LADDER_NETWORK)
    poles = circuit.poles()
    frequency = np.linspace(5e6, 40e6, 301)
    scale = 2 * np.pi * 40e6
    assert np.sum(poles.real > 0) == 2
    assert np.all(np.abs(poles.imag) < scale)
    clean = circuit.driving_points(frequency, ["a", "c"]).T
    size = np.sqrt(np.mean(np.abs(clean) ** 2))
    values = clean + noise(np.random.default_rng(72), clean.shape, std * size)
    blocks = [block(2j * np.pi * frequency / scale, values, std * size)]
    found = search(blocks)
    assert found.solution.sections.order == poles.size == 6
    assert found.richest.sections.order > 6
    assert f"pruned from {found.richest.sections.order} poles" in found.reason
    upper = poles[poles.imag > 0]
    # relative noise times a few: the pairs are strong and sampled tens of times per width
    error = np.abs(nearest(found.solution, upper / scale) * scale - upper) / np.abs(upper)
    assert np.all(error < 20 * std)
    # what is left is the noise: χ² per degree of freedom, known to √(2/1180)
    assert found.solution.misfit / (samples(blocks) - parameters(blocks, found.solution)) == (
        pytest.approx(1.0, abs=4 * np.sqrt(2 / samples(blocks)))
    )


def test_pure_noise_has_no_poles():
    """The chance of keeping one is 1 % for each run."""
    orders = [
        search([block(S, noise(np.random.default_rng(seed), (1, S.size)))]).solution.sections.order
        for seed in range(15)
    ]
    assert sum(n > 0 for n in orders) <= 2  # binomial: three or more in 15 have 0.04 %


def with_weak_pair():
    """Noisy data of the usual poles and a weak pair, seen at 50 standard deviations."""
    poles, residues = np.append(POLES, WEAK), np.vstack((RESIDUES, [[5e-4, 5e-4j]]))
    return noisy(values=response(S, poles, residues))


def test_a_missed_pair_is_added():
    blocks = with_weak_pair()
    poor = refine(blocks, solve(blocks, true_sections(), 2))
    assert poor.misfit > 2 * samples(blocks)
    found = grow(blocks, poor, count_places(blocks))
    # peak to noise 50, some ten samples over its width of 0.01: known to about 1e-4
    assert np.abs(nearest(found, [WEAK]) - WEAK)[0] < 1e-3
    assert found.misfit < 1.2 * samples(blocks)


def test_nothing_is_added_to_a_model_that_is_complete():
    blocks = noisy()
    complete = refine(blocks, solve(blocks, true_sections(), 2))
    assert grow(blocks, complete, count_places(blocks)) is complete


def test_taking_up_with_new_weights_mends_what_the_first_search_missed():
    blocks = with_weak_pair()
    poor = refine(blocks, solve(blocks, true_sections(), 2))
    found = take_up(blocks, order.Found(poor, poor, "because"))
    assert found.solution.sections.order == 9
    assert found.reason == "because"


@pytest.mark.parametrize("proportional", [0.0, 0.1])
def test_the_proportional_term_stays_only_where_it_is_needed(proportional):
    blocks = noisy(values=response(S, proportional=proportional))
    start = refine(blocks, solve(blocks, true_sections(), 2))
    found = drop_direct(blocks, start)
    assert found.direct == (2 if proportional else 1)
    assert drop_direct(blocks, solve(blocks, true_sections(), 1)).direct == 1


def test_rounding_is_not_fitted():
    """Exact data at full precision: no order beyond the true one chases the last bits."""
    clean = response(S)
    std = 1e-13 * np.abs(clean).max()
    found = search([block(S, clean, std)])
    assert np.all(np.abs(nearest(found.solution, POLES) - POLES) < 1e-9)
    assert found.solution.sections.order == 7


def test_real_pairs_are_split_for_judgement():
    blocks = noisy()
    wide = Sections(np.array([0.04, 3.0]), np.array([0.09, 1.0]), np.zeros(0))
    solution = solve(blocks, wide, 1)
    flat = split(blocks, solution)
    assert flat.sections.c.size == 2
    # the same space of functions
    assert flat.misfit == pytest.approx(solution.misfit, rel=1e-10)
    assert split(blocks, flat) is flat


def test_counts():
    first, second = block(axis(50), response(axis(50))), block(S[::4], response(S[::4])[:1])
    blocks = [first, second]
    solution = solve(blocks, true_sections(), 2)
    assert samples(blocks) == 2 * 50 * 2 + 2 * 51
    assert parameters(blocks, solution) == 7 + 3 * (7 + 2)
    both = np.unique(np.concatenate((axis(50).imag, S[::4].imag)))
    assert count_places(blocks) == both.size
    # half of what the shorter axis could carry: 4n + 3 real unknowns against 2·50 real samples
    assert largest_order(blocks) == (2 * 50 - 3) // 4
    assert largest_order([block(axis(2000), response(axis(2000)))]) == order.LARGEST_ORDER
    assert largest_order([block(axis(2), response(axis(2)))]) == 1


def test_variance_factor_is_the_misfit_per_degree_of_freedom_but_never_below_one():
    loud = noisy()
    three = [b._replace(weight=3 * b.weight, target=3 * b.target) for b in loud]
    solution = refine(three, solve(three, true_sections(), 2))
    freedom = samples(three) - parameters(three, solution)
    assert variance_factor(three, solution) == pytest.approx(solution.misfit / freedom)
    interval = scipy.stats.chi2(freedom).ppf([1e-4, 1 - 1e-4]) / freedom
    assert 9 * interval[0] < variance_factor(three, solution) < 9 * interval[1]
    third = [b._replace(weight=b.weight / 3, target=b.target / 3) for b in loud]
    assert variance_factor(third, solve(third, solution.sections, 2)) == 1.0


def test_trial_frequencies_are_samples():
    blocks = [block(axis(90, 0.0, 0.5), response(axis(90, 0.0, 0.5))), block(S, response(S))]
    grid = trial_grid(blocks, 64)
    every = np.unique(np.concatenate([b.s.imag for b in blocks]))
    assert grid.size == 64
    assert np.all(np.isin(grid, every))
    assert grid.min() > 0
    assert (grid[0], grid[-1]) == (every[every > 0][0], every[-1])
    assert np.array_equal(trial_grid(blocks, 1000), every[every > 0])


def test_residual_of_the_order_found_is_white():
    blocks = noisy()
    found = search(blocks).solution
    assert judge_whiteness([residual(blocks[0], found, found.parts[0])]).probability > 1e-3
