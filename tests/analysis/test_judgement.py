"""From a fitted model to modes: uncertainties against Monte Carlo, claims, places, verdicts."""

import re

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
)

from polefit.analysis.candidate import nearest
from polefit.analysis.judgement import CLAIM_CHANCE, _verdict, judge, residue_std
from polefit.channels import as_channel
from polefit.engine.estimation import Estimation, freedom, go_past
from polefit.engine.noise import first_guess
from polefit.engine.projection import solve
from polefit.engine.refinement import refine
from polefit.engine.sections import from_poles, residues
from polefit.engine.significance import information, section_scores, threshold
from polefit.engine.whiteness import Whiteness
from polefit.modes import Evidence

S = axis(201)
STD = 1e-3
SCALE = 2 * np.pi * 1e9
"""The band ends at 1 GHz."""
BAND = (1e7, 1e9)
CHANNELS = (as_channel("a"), as_channel(("b", "a")))
WHITE = Whiteness(True, 0.5, 0.0, 1.0)
DRAWS = 300


def blocks_of(seed, poles=POLES, weights=RESIDUES, std=STD):
    clean = response(S, poles, weights)
    return (block(S, clean + noise(np.random.default_rng(seed), clean.shape, std), std),)


def estimation(blocks, solution, past=None, whiteness=WHITE, level=1.0):
    """What the engine would hand over for this solution."""
    info = information(solution)
    return Estimation(
        blocks=blocks,
        laws=tuple(first_guess([b.values for b in blocks])),
        noise=tuple(1 / b.weight**2 for b in blocks),
        solution=solution,
        info=info,
        level=level,
        scores=section_scores(blocks, solution, info).spared / level,
        past=go_past(blocks, solution, info) if past is None else past,
        richest=solution,
        whiteness=whiteness,
        places=S.size,
        reason="made by hand",
        delays=tuple(np.zeros(b.channels) for b in blocks),
    )


def fitted(seed=91, sections=None, **more):
    blocks = blocks_of(seed, **more)
    sections = true_sections() if sections is None else sections
    return blocks, refine(blocks, solve(blocks, sections, 2), iterations=40)


def judged(made, quantity="impedance", band=BAND, confidence=0.95):
    return judge(made, SCALE, band, CHANNELS, quantity, confidence)


@pytest.fixture(scope="module")
def usual():
    return judged(estimation(*fitted()))


# -- uncertainties of residues ------------------------------------------------------------------


def section_residues(solution):
    """Residues at the upper or real pole of each section, (sections, K)."""
    pairs = solution.sections.c1.size
    rows = [*range(pairs), *range(2 * pairs, 2 * pairs + solution.sections.c.size)]
    return residues(solution.sections, solution.parts[0].coefficients)[rows]


def test_residue_std_is_the_spread_of_residues():
    """300 refits of fresh noise know each spread to 4.1 % (one σ); 16 of them are compared."""
    blocks = (block(S, response(S), STD),)
    found = residue_std(estimation(blocks, solve(blocks, true_sections(), 2)))
    draws = []
    for seed in range(DRAWS):
        noisy = blocks_of(seed)
        draws.append(section_residues(settle(noisy, solve(noisy, true_sections(), 2), steps=3)))
    parts = np.stack((np.real(draws), np.imag(draws)), axis=-1)
    spread = parts.std(axis=0, ddof=1)
    assert found.shape == spread.shape == (4, 2, 2)
    moving = spread > 0
    assert moving.sum() == 14  # all but the imaginary parts at the real pole
    assert found[~moving] == pytest.approx(0.0)
    ratio = found[moving] / spread[moving]
    assert np.all(np.abs(ratio - 1) < 4 * 0.041)


def test_residue_std_is_exact_propagation():
    """Against the joint covariance of all parameters and numerical derivatives of residues."""
    blocks = (block(S, response(S), STD),)
    solution = solve(blocks, true_sections(), 2)
    root = np.linalg.pinv(joint_jacobian(blocks, solution))
    covariance = root @ root.T
    coefficients = solution.parts[0].coefficients
    p, m = solution.sections.c1.size, coefficients.shape[1]
    held = coefficients.copy()
    held[:, p : 2 * p] *= solution.sections.weights()

    def flat(x):
        sections = solution.sections.with_vector(x[2 * m :])
        used = np.stack((x[:m], x[m : 2 * m]))
        # what is held when a pole moves is the product with √|c0|
        used[:, p : 2 * p] *= solution.sections.weights() / sections.weights()
        moved = solution.parts[0]._replace(coefficients=used)
        values = section_residues(solution._replace(sections=sections, parts=(moved,)))
        return np.concatenate((values.real.ravel(), values.imag.ravel()))

    x = np.concatenate((coefficients.ravel(), solution.sections.vector()))
    steps = 1e-7 * np.eye(x.size)
    slope = np.stack([(flat(x + d) - flat(x - d)) / 2e-7 for d in steps], axis=1)
    expected = np.sqrt(np.diag(slope @ covariance @ slope.T)).reshape(2, 4, 2)
    found = residue_std(estimation(blocks, solution)).transpose(2, 0, 1)
    assert np.allclose(found, expected, rtol=1e-4, atol=1e-12)


def test_level_and_inflation_raise_variances():
    blocks, solution = fitted()
    plain = residue_std(estimation(blocks, solution))
    louder = residue_std(
        estimation(blocks, solution, level=4.0, whiteness=Whiteness(False, 0.0, 5.0, 9.0))
    )
    assert np.allclose(louder, 6 * plain, rtol=1e-12)


# -- what is claimed ----------------------------------------------------------------------------


def test_the_true_modes_are_claimed_with_their_numbers(usual):
    assert usual.background == ()
    assert len(usual.modes) == 4
    for pole, weights in zip(POLES, RESIDUES, strict=True):
        mode = min(usual.modes, key=lambda m: abs(m.pole_rad_per_s - pole * SCALE))
        std = np.sqrt(np.diag(mode.covariance))
        error = mode.pole_rad_per_s - pole * SCALE
        assert abs(error.real) < 4.5 * std[0]
        assert abs(error.imag) <= 4.5 * std[1]
        assert mode.growth_rate_per_s.value == mode.pole_rad_per_s.real
        for view in mode.nodes:
            k = CHANNELS.index(view.channel)
            # the two parts are correlated: their joint σ is what is reported
            assert abs(view.residue - weights[k] * SCALE) < 5 * view.residue_std


def test_a_spare_pair_goes_to_the_background_with_its_number():
    spare = true_sections().join(from_poles(np.array([-0.02 + 0.42j])))
    blocks = blocks_of(92)
    made = estimation(blocks, settle(blocks, solve(blocks, spare, 2), held=[3, 7]))
    found = judged(made)
    assert len(found.modes) == 4
    (left,) = found.background
    assert left.pole_rad_per_s == pytest.approx((-0.02 + 0.42j) * SCALE, rel=1e-6)
    score, needed = (float(x) for x in re.findall(r"[\d.]+(?:e[+-]\d+)?", left.reason)[:2])
    assert score == pytest.approx(made.scores[3], rel=1e-2)
    # printed to three digits
    assert needed == pytest.approx(threshold(2, S.size, CLAIM_CHANCE), rel=1e-2)
    assert score < needed


def test_a_coloured_residual_asks_for_more():
    """Variances raised nine times raise what a mode must bring nine times."""
    spare = true_sections().join(from_poles(np.array([-0.02 + 0.42j])))
    blocks = blocks_of(92)
    solution = settle(blocks, solve(blocks, spare, 2), held=[3, 7])
    coloured = judged(estimation(blocks, solution, whiteness=Whiteness(False, 0.0, 5.0, 9.0)))
    (left,) = coloured.background
    assert f"{9 * threshold(2, S.size, CLAIM_CHANCE):.3g} would be needed" in left.reason


def test_a_pole_far_outside_stands_for_what_is_beyond():
    blocks, solution = fitted()
    found = judged(estimation(blocks, solution), band=(1e7, 0.6e9))
    outside = [
        b for b in found.background if abs(b.pole_rad_per_s - POLES[2] * SCALE) < 1e-2 * SCALE
    ]
    assert len(outside) == 1
    assert "outside the band" in outside[0].reason


# -- where they lie -----------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("edge", "inside"),
    [(0.553, False), (0.5547, False), (0.54, False), (0.545, False), (0.58, True)],
)
def test_a_mode_at_the_upper_edge_does_not_decide(edge, inside):
    """Pair at 0.55 GHz: one step, 0.00495, is asked for, and 0.3 half-widths, 0.0045."""
    found = judged(estimation(*fitted()), band=(1e7, edge * 1e9))
    mode = min(found.modes, key=lambda m: abs(m.pole_rad_per_s - POLES[1] * SCALE))
    assert mode.in_band is inside


@pytest.mark.parametrize(("edge", "inside"), [(0.29, True), (0.297, False), (0.31, False)])
def test_a_mode_at_the_lower_edge_does_not_decide(edge, inside):
    found = judged(estimation(*fitted()), band=(edge * 1e9, 1e9))
    mode = min(found.modes, key=lambda m: abs(m.pole_rad_per_s - POLES[0] * SCALE))
    assert mode.in_band is inside


# -- verdicts -----------------------------------------------------------------------------------

PASSED, FAILED, UNMADE = (Evidence("test", outcome, "") for outcome in (True, False, None))


@pytest.mark.parametrize(
    ("distance", "evidence", "verdict"),
    [
        (-3.0, [PASSED], "stable"), (-3.0, [FAILED], "stable"), (-1.9, [PASSED], "undecided"),
        (0.0, [PASSED], "undecided"), (1.9, [PASSED], "undecided"), (3.0, [PASSED], "unstable"),
        (3.0, [PASSED, FAILED], "undecided"), (3.0, [PASSED, UNMADE], "unstable"),
        (np.inf, [PASSED], "unstable"), (-np.inf, [PASSED], "stable"),
    ],
)  # fmt: skip
def test_verdict_by_distance_and_evidence(distance, evidence, verdict):
    assert _verdict(distance, 2.0, evidence, in_band=True) == verdict
    # outside the band nothing is called unstable: no stable model was held against it
    outside = "undecided" if verdict == "unstable" else verdict
    assert _verdict(distance, 2.0, evidence, in_band=False) == outside


def test_the_growing_pair_comes_first(usual):
    assert [m.verdict for m in usual.modes] == ["unstable", "stable", "stable", "stable"]
    damping = [m.damping_ratio.value for m in usual.modes[1:]]
    assert damping == sorted(damping)
    first = usual.modes[0]
    assert first.probability_unstable > 1 - 1e-12
    assert {e.name for e in first.evidence} >= {"growth rate", "residue", "stable-model misfit"}
    assert usual.stable_model.misfit_ratio > 10


@pytest.mark.parametrize("confidence", [0.6, 0.95, 0.999])
def test_what_is_needed_is_shared_by_all_modes_in_the_band(confidence):
    """Two-sided, each mode at confidence^(1/4), with Student's law for the noise estimated."""
    made = estimation(*fitted())
    found = judged(made, confidence=confidence)
    each = confidence ** (1 / sum(m.in_band for m in found.modes))
    factor = scipy.stats.t.ppf(1 - (1 - each) / 2, freedom(made))
    for mode in found.modes:
        growth = next(e for e in mode.evidence if e.name == "growth rate")
        assert f"{factor:.2f} are needed" in growth.detail


def test_probability_is_normal_in_the_growth_rate():
    """A pair so noisy that its growth is in question."""
    blocks, solution = fitted(std=0.05, sections=true_sections())
    for mode in judged(estimation(blocks, solution)).modes:
        expected = scipy.stats.norm.cdf(mode.growth_rate_per_s.value / mode.growth_rate_per_s.std)
        assert mode.probability_unstable == pytest.approx(expected, abs=1e-9)


def test_without_a_growing_mode_no_stable_model_is_sought():
    stable = POLES - 0.03 * (POLES.real > 0)
    found = judged(estimation(*fitted(poles=stable, sections=true_sections(stable))))
    assert found.stable_model is None
    assert {m.verdict for m in found.modes} == {"stable"}


# -- what moves with the order ------------------------------------------------------------------


def shifted(solution, blocks, move):
    """The same model with its first pair elsewhere: an invented model past the order."""
    poles = POLES + move * np.array([1, 0, 0, 0])
    more = true_sections(poles).join(from_poles(np.array([-0.3 + 0.95j])))
    return solve(blocks, more, solution.direct)


def test_a_pole_that_moves_with_the_order_is_less_certain():
    """A shift of many σ but less than half the width is added to the variance."""
    blocks, solution = fitted()
    steady = judged(estimation(blocks, solution, past=shifted(solution, blocks, 0.0)))
    moving = judged(estimation(blocks, solution, past=shifted(solution, blocks, 4e-3)))
    before, after = (
        min(j.modes, key=lambda m: abs(m.pole_rad_per_s - POLES[0] * SCALE))
        for j in (steady, moving)
    )
    shift = abs(POLES[0].real + 4e-3 - before.pole_rad_per_s.real / SCALE)
    assert before.growth_rate_per_s.std < 0.1 * shift * SCALE
    assert after.growth_rate_per_s.std == pytest.approx(shift * SCALE, rel=1e-2)


def test_a_growing_pole_that_vanishes_at_a_higher_order_is_not_believed():
    blocks, solution = fitted()
    without = solve(blocks, true_sections(np.delete(POLES, 1)), 2)
    (first, *_) = judged(estimation(blocks, solution, past=without)).modes
    assert first.pole_rad_per_s.real > 0
    assert first.verdict == "undecided"
    persistence = next(e for e in first.evidence if e.name.startswith("persistence"))
    assert persistence.passed is False


def test_persistence_cannot_be_tested_without_a_richer_model():
    blocks, solution = fitted()
    (first, *_) = judged(estimation(blocks, solution, past=solution)).modes
    persistence = next(e for e in first.evidence if e.name.startswith("persistence"))
    assert persistence.passed is None
    assert first.verdict == "unstable"


def test_nearest_is_of_the_same_kind():
    poles = np.array([-1.0 + 0j, 1j, -1j, 2.0 + 0j])
    assert nearest(-0.9 + 0.01j, poles) == 1j
    assert nearest(0.1 + 0j, poles) == -1.0
    assert nearest(1j, poles[[0, 3]]) is None


# -- where they show ----------------------------------------------------------------------------


def test_leverage_is_the_real_part_where_the_probe_drives(usual):
    for mode in usual.modes:
        views = {str(v.channel): v for v in mode.nodes}
        own, across = views["a"], views["b ← a"]
        assert own.leverage.value == own.residue.real
        assert 0 < own.leverage.std <= own.residue_std
        assert across.leverage is None
        # the node with a leverage comes first
        assert [str(v.channel) for v in mode.nodes] == ["a", "b ← a"]


@pytest.mark.parametrize("quantity", ["admittance", "scattering", "transfer"])
def test_only_impedances_have_leverage(quantity):
    found = judged(estimation(*fitted()), quantity=quantity)
    assert all(v.leverage is None for m in found.modes for v in m.nodes)
    for mode in found.modes:
        sizes = [abs(v.residue) for v in mode.nodes]
        assert sizes == sorted(sizes, reverse=True)


def test_share_is_the_peak_over_the_response(usual):
    (block_,) = blocks_of(91)
    rms = np.sqrt(np.mean(np.abs(block_.values) ** 2, axis=1))
    for mode in usual.modes:
        for view in mode.nodes:
            peak = abs(view.residue) / abs(mode.pole_rad_per_s.real)
            assert view.share == pytest.approx(peak / rms[CHANNELS.index(view.channel)], rel=1e-9)
