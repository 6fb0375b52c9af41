"""Vector fitting: exact on exact data, from either side of the axis, and nothing is flipped."""

import numpy as np
import pytest
from problems import POLES, axis, block, noise, response, sorted_poles, true_sections, uneven_block

from polefit.engine import blocks as blocks_module
from polefit.engine.blocks import weighted
from polefit.engine.sections import Sections, evaluate, from_poles
from polefit.engine.vector_fitting import relocate, starting_sections, zeros_of_weighting

S = axis(201)
EXACT = [block(S, response(S))]


def relocated(blocks, sections, times):
    for _ in range(times):
        sections = relocate(blocks, sections, 2)
    return sections


def largest_error(sections, poles):
    """Of every true pole, the distance to the nearest found one."""
    found = sections.poles()
    return max(np.min(np.abs(found - pole)) for pole in poles)


def test_exact_on_exact_data():
    """Order right, two channels: three relocations from poles that know nothing of the data."""
    start = starting_sections(0.01, 1.0, true_sections().order)
    found = relocated(EXACT, start, 3)
    # rounding times the condition of the shared columns; the real pole at −0.4 is the weakest
    assert np.allclose(sorted_poles(found), sorted_poles(true_sections()), atol=1e-9)


@pytest.mark.parametrize("side", [-1, 1])
def test_true_poles_stay_whichever_side_the_start_was_on(side):
    """A growing pair is found from decaying starts, and decaying pairs from growing ones."""
    start = starting_sections(0.01, 1.0, true_sections().order, damping=-side * 0.02)
    assert np.all(side * start.poles()[start.poles().imag != 0].real > 0)
    found = relocated(EXACT, start, 4)
    assert np.allclose(sorted_poles(found), sorted_poles(true_sections()), atol=1e-8)


@pytest.mark.parametrize("growth", [1e-6, 1e-3, 0.05, 0.3])
def test_growing_pair_is_never_reflected(growth):
    """At ± growth the magnitude on the axis differs by the residue's phase only."""
    pole = growth + 0.5j
    poles = np.array([pole, -0.1 + 0.8j])
    blocks = [block(S, response(S, poles, [0.02j + 0.1 * growth, 0.2]))]
    found = relocated(blocks, starting_sections(0.01, 1.0, 4), 5)
    assert largest_error(found, poles) < 1e-9
    assert np.sum(found.poles().real > 0) == 2


def test_true_poles_are_a_fixed_point():
    found = relocate(EXACT, true_sections(), 2)
    assert np.allclose(sorted_poles(found), sorted_poles(true_sections()), atol=1e-11)


def test_one_relocation_of_noisy_data_against_a_dense_solution():
    """All unknowns of both channels in one matrix, as the paper writes it, by numpy's lstsq."""
    generator = np.random.default_rng(44)
    clean = response(S)
    one = uneven_block(generator, S, clean + noise(generator, clean.shape, 0.05))
    start = true_sections(POLES * 1.05)
    n, m = start.order, start.order + 2
    basis = evaluate(start, S, 2)
    shared = np.hstack((basis[:, :n], np.ones((S.size, 1))))
    matrix = np.zeros((one.rows + 1, 2 * m + n + 1))
    for k in (0, 1):
        rows = np.s_[2 * k * S.size : 2 * (k + 1) * S.size]
        matrix[rows, k * m : (k + 1) * m] = weighted(one, basis)[k]
        every = weighted(one, -one.values[:, :, None] * shared)
        matrix[rows, 2 * m :] = every[k]
    # the relaxed condition: the mean of Re(weighting) is one, weighed like the data
    scale = np.linalg.norm(one.target) / S.size
    matrix[-1, 2 * m :] = scale * shared.real.sum(axis=0)
    right = np.zeros(one.rows + 1)
    right[-1] = scale * S.size
    size = np.linalg.norm(matrix, axis=0)
    found = np.linalg.lstsq(matrix / size, right, rcond=None)[0] / size
    expected = zeros_of_weighting(start, found[2 * m :])
    got = relocate([one], start, 2)
    # rounding times the condition of the columns
    assert np.allclose(sorted_poles(got), sorted_poles(expected), rtol=1e-7, atol=1e-9)
    assert not np.allclose(sorted_poles(got), sorted_poles(start), atol=1e-3)


def test_several_axes_and_many_pieces_share_their_poles(monkeypatch):
    other = axis(90, 0.2, 0.7)
    blocks = [block(S, response(S)[:1]), block(other, response(other)[1:])]
    whole = relocated(blocks, starting_sections(0.01, 1.0, 7), 4)
    assert np.allclose(sorted_poles(whole), sorted_poles(true_sections()), atol=1e-8)
    noisy = [b._replace(values=b.values + noise(np.random.default_rng(5), b.values.shape, 1e-3))
             for b in blocks]  # fmt: skip
    start = starting_sections(0.01, 1.0, 7)
    before = relocate(noisy, start, 2)
    monkeypatch.setattr(blocks_module, "PIECE", 64)
    after = relocate(noisy, start, 2)
    # other order of summation only
    assert np.allclose(sorted_poles(after), sorted_poles(before), atol=1e-8)


def test_too_many_poles_still_hold_the_true_ones():
    found = relocated(EXACT, starting_sections(0.01, 1.0, 14), 4)
    assert found.order == 14
    assert largest_error(found, POLES) < 1e-6


def test_number_of_poles_is_kept_on_noise():
    generator = np.random.default_rng(42)
    for order in (1, 2, 5, 8):
        blocks = [block(S, noise(generator, (2, S.size)))]
        sections = starting_sections(0.01, 1.0, order)
        for _ in range(3):
            sections = relocate(blocks, sections, 1)
            assert sections.order == order
            assert np.all(np.isfinite(sections.vector()))


def test_zeros_of_the_weighting_are_roots_of_its_numerator():
    """1·d + Σ: multiplied out, with numpy.roots; five poles leave ten digits."""
    generator = np.random.default_rng(43)
    for _ in range(20):
        sections = Sections(*(generator.uniform(0.1, 1, n) for n in (2, 2, 1)))
        weights = generator.normal(size=6)
        root = np.sqrt(sections.c0)
        factors = [np.array([1, a, b]) for a, b in zip(sections.c1, sections.c0, strict=True)]
        factors.append(np.array([1, sections.c[0]]))
        tops = [weights[[i, 2 + i]] * [1, root[i]] for i in (0, 1)] + [weights[4:5]]
        numerator = weights[5] * np.polymul(np.polymul(factors[0], factors[1]), factors[2])
        for i, top in enumerate(tops):
            others = [f for j, f in enumerate(factors) if j != i]
            numerator = np.polyadd(numerator, np.polymul(top, np.polymul(*others)))
        expected = np.sort_complex(np.roots(numerator))
        found = sorted_poles(zeros_of_weighting(sections, weights))
        assert np.allclose(found, expected, rtol=1e-7, atol=1e-7 * np.abs(expected).max())


@pytest.mark.parametrize(("low", "order"), [(0.5, 8), (1e-4, 8), (1e-4, 15), (0.0, 6), (0.3, 1)])
def test_starting_poles_are_spread_over_the_band(low, order):
    sections = starting_sections(low, 1.0, order, damping=0.02)
    assert sections.order == order
    upper = sections.poles()[sections.poles().imag > 0]
    assert np.allclose(-upper.real / upper.imag, 0.02)
    assert np.all((upper.imag > 0.999 * low) & (upper.imag < 1.002))
    if upper.size > 1:
        apart = np.diff(np.sort(upper.imag))
        assert apart.min() > 1e-4 * upper.imag.min()  # coincident poles would be defective
        assert upper.imag.max() > 0.6  # of an even spread every other one is kept


def test_a_wide_band_has_starting_poles_in_every_decade():
    upper = starting_sections(1e-4, 1.0, 24).c0 ** 0.5
    for decade in (1e-4, 1e-3, 1e-2, 1e-1):
        assert np.any((upper > 0.99 * decade) & (upper < 10.1 * decade))


def test_conjugates_are_implied():
    assert from_poles(POLES).order == 7
