"""Sections of poles: against polynomial roots, SciPy's residues and differences."""

import numpy as np
import pytest
import scipy.signal
from hypothesis import given
from hypothesis import strategies as st

from polefit.engine.sections import (
    Sections,
    chain,
    evaluate,
    evaluate_with_slopes,
    from_poles,
    residues,
    section_columns,
)

MIXED = Sections(
    np.array([0.04, -0.03, 1.5]), np.array([0.09, 0.3, 0.7]), np.array([0.4, -0.2])
)  # two pairs and a wide one, a decaying and a growing real pole
ROUNDING = 1e-13
"""A few hundred rounding errors of double precision: what some ten operations may leave."""


def formula(sections, s, direct):
    """The basis, element by element as the docstring says it."""
    table = np.zeros((s.size, sections.order + direct), dtype=complex)
    p = sections.c1.size
    for n, at in enumerate(s):
        for i in range(p):
            q = at**2 + sections.c1[i] * at + sections.c0[i]
            table[n, i] = at / q
            table[n, p + i] = np.sqrt(abs(sections.c0[i])) / q
        for i, c in enumerate(sections.c):
            table[n, 2 * p + i] = 1 / (at + c)
        for power in range(direct):
            table[n, sections.order + power] = at**power
    return table


coefficient = st.floats(-10, 10).filter(lambda x: x == 0 or abs(x) > 1e-8)


@given(coefficient, coefficient)
def test_poles_solve_their_quadratic(c1, c0):
    """Backward error, since near a double root the roots themselves lose half the digits."""
    found = Sections(np.array([c1]), np.array([c0]), np.zeros(0)).poles()
    assert found.size == 2
    for pole in found:
        terms = np.array([pole**2, c1 * pole, c0])
        assert abs(terms.sum()) <= 8 * np.finfo(float).eps * np.abs(terms).sum()


def test_poles_are_the_roots_numpy_finds():
    generator = np.random.default_rng(1)
    for c1, c0 in generator.uniform(-2, 2, (200, 2)):
        found = Sections(np.array([c1]), np.array([c0]), np.zeros(0)).poles()
        # numpy's eigenvalues are good to rounding over √(distance of the roots)
        distance = abs(np.sqrt(complex(c1**2 / 4 - c0)))
        expected = np.sort_complex(np.roots([1, c1, c0]))
        assert np.allclose(np.sort_complex(found), expected, atol=1e-14 / distance, rtol=0)


def test_poles_come_back():
    listed = np.array([-0.1 + 1j, 0.2 + 0.5j, -3.0, 0.25])
    sections = from_poles(np.concatenate((listed, listed[:2].conj())))
    assert sections.order == 6
    assert sections.number == 4
    expected = [-0.1 + 1j, 0.2 + 0.5j, -0.1 - 1j, 0.2 - 0.5j, -3, 0.25]
    assert np.allclose(sections.poles(), expected, rtol=ROUNDING)


def test_split_takes_only_real_pairs_apart_and_moves_no_pole():
    both = Sections(np.array([0.1, 3.0]), np.array([1.0, 2.0]), np.array([5.0]))
    flat = both.split()
    assert flat.c1.tolist() == [0.1]
    assert np.allclose(np.sort(flat.c), [1.0, 2.0, 5.0], rtol=ROUNDING)
    assert np.allclose(np.sort_complex(flat.poles()), np.sort_complex(both.poles()))
    assert flat.split() is flat


@pytest.mark.parametrize(("large", "small"), [(1.0, 1e-12), (-2.0, 1e-9), (3.0, 0.0), (0.0, 0.0)])
def test_split_does_not_cancel(large, small):
    """The small root keeps its digits; subtracting square roots would leave none of 1e-12."""
    flat = Sections(np.array([large + small]), np.array([large * small]), np.zeros(0)).split()
    expected = sorted([large, small])
    # c1 was itself rounded, which moves the larger root by as much
    assert np.allclose(np.sort(flat.c), expected, rtol=1e-12, atol=0)


@pytest.mark.parametrize("direct", [0, 1, 2])
@pytest.mark.parametrize("damping", [0.0, 0.3])
def test_basis_is_the_formula_on_the_axis_and_off_it(direct, damping):
    """Two codes: real arithmetic on the axis, complex division elsewhere."""
    s = damping + 1j * np.array([0.0, 1e-3, 0.3, 0.55, 1.0, 40.0])
    table = evaluate(MIXED, s, direct)
    assert table.shape == (6, MIXED.order + direct)
    assert np.allclose(table, formula(MIXED, s, direct), rtol=ROUNDING, atol=1e-16)


def test_both_codes_agree_where_they_meet():
    """A shift of 1e-14 off the axis changes the basis by as little but runs the other code."""
    omega = np.linspace(0.01, 2, 50)
    on, off = (evaluate(MIXED, shift + 1j * omega, 2) for shift in (0.0, 1e-14))
    # the narrowest pair has a half-width of 0.015: relative change below 1e-14/0.015
    assert np.allclose(on, off, rtol=1e-11)
    assert not np.array_equal(on, off)


def test_slope_columns_follow_the_basis():
    s = 1j * np.linspace(0.05, 1.2, 9)
    both = evaluate_with_slopes(MIXED, s, 2)
    m = MIXED.order + 2
    assert np.array_equal(both[:, :m], evaluate(MIXED, s, 2))
    q = s[:, None] ** 2 + MIXED.c1 * s[:, None] + MIXED.c0
    root = np.sqrt(MIXED.c0)
    expected = np.hstack(
        (s[:, None] * root / q**2, MIXED.c0 / q**2, 1 / (s[:, None] + MIXED.c) ** 2)
    )
    assert np.allclose(both[:, m:], expected, rtol=ROUNDING)


@pytest.mark.parametrize("direct", [0, 2])
def test_chain_against_differences(direct):
    """Central differences with b·√|c0| held: error h²·f'''/6 plus rounding/h, about 1e-8."""
    generator = np.random.default_rng(2)
    # also with a negative c0, two real poles astride zero, where √|c0| turns round
    sections = MIXED._replace(c0=np.array([0.09, 0.3, -0.7]))
    coefficients = generator.normal(size=(2, sections.order + direct))
    s = 1j * np.linspace(0.05, 1.2, 40)
    p, theta, h = sections.c1.size, sections.vector(), 1e-6
    held = coefficients.copy()
    held[:, p : 2 * p] *= sections.weights()

    def model(vector):
        moved = sections.with_vector(vector)
        used = held.copy()
        used[:, p : 2 * p] /= moved.weights()
        return used @ evaluate(moved, s, direct).T

    slopes, basis = chain(sections, coefficients)
    columns = evaluate_with_slopes(sections, s, direct)
    m = sections.order + direct
    for j, shift in enumerate(h * np.eye(theta.size)):
        expected = (model(theta + shift) - model(theta - shift)) / (2 * h)
        found = slopes[:, :, j] @ columns[:, m:].T + basis[:, :, j] @ columns[:, :m].T
        assert np.allclose(found, expected, rtol=0, atol=1e-6 * np.abs(expected).max())


def test_residues_are_those_of_scipy():
    """scipy.signal.residue of the same rational function multiplied out; five poles, so that
    its polynomials keep about ten digits.
    """
    sections = Sections(np.array([0.04, -0.3]), np.array([0.09, 0.5]), np.array([0.4]))
    coefficients = np.random.default_rng(3).normal(size=(3, 7))
    found = residues(sections, coefficients)
    assert found.shape == (5, 3)
    quadratics = [np.array([1, a, b]) for a, b in zip(sections.c1, sections.c0, strict=True)]
    factors = [*quadratics, np.array([1, sections.c[0]])]
    for k, row in enumerate(coefficients):
        root = np.sqrt(sections.c0)
        tops = [np.array([row[i], row[2 + i] * root[i]]) for i in (0, 1)] + [row[4:5]]
        numerator = np.zeros(1)
        for i, top in enumerate(tops):
            others = [f for j, f in enumerate(factors) if j != i]
            numerator = np.polyadd(numerator, np.polymul(top, np.polymul(*others)))
        denominator = np.polymul(np.polymul(factors[0], factors[1]), factors[2])
        expected, at, _ = scipy.signal.residue(numerator, denominator)
        for pole, value in zip(sections.poles(), found[:, k], strict=True):
            assert value == pytest.approx(expected[np.argmin(abs(at - pole))], rel=1e-9)


def test_residues_reproduce_the_basis():
    """Σ residue/(s − p) is coefficients times basis, pairs and real poles alike."""
    sections = MIXED._replace(c1=np.array([0.04, -0.03, 0.2]))
    coefficients = np.random.default_rng(4).normal(size=(2, sections.order))
    s = np.array([0.2 + 0.1j, -1 + 2j, 3j])
    sums = (1 / (s[:, None] - sections.poles())) @ residues(sections, coefficients)
    assert np.allclose(sums.T, coefficients @ evaluate(sections, s, 0).T, rtol=1e-12)


def test_dropping_keeping_and_joining():
    for index in range(MIXED.number):
        rest = MIXED.drop(index)
        mask = np.arange(MIXED.number) != index
        assert all(np.array_equal(*pair) for pair in zip(rest, MIXED.keep(mask), strict=True))
        own = MIXED.keep(~mask)
        assert own.order == len(section_columns(MIXED, index))
        whole = np.sort_complex(rest.join(own).poles())
        assert np.allclose(whole, np.sort_complex(MIXED.poles()), rtol=ROUNDING)
        # the columns of a section are also its places in the vector of parameters
        assert sorted(MIXED.vector()[section_columns(MIXED, index)]) == sorted(own.vector())


def test_vector_round_trip():
    again = MIXED.with_vector(MIXED.vector())
    assert all(np.array_equal(*pair) for pair in zip(again, MIXED, strict=True))
    moved = MIXED.with_vector(MIXED.vector() + np.arange(8))
    assert moved.c0.tolist() == (MIXED.c0 + np.arange(3, 6)).tolist()
