"""The exact nodal analysis that other tests lean on, against closed forms."""

import numpy as np
import pytest
from circuits import Circuit, number


@pytest.mark.parametrize(
    ("text", "value"),
    [("2.2k", 2200.0), ("3meg", 3e6), ("100f", 1e-13), ("-1.5m", -1.5e-3), ("4.7", 4.7),
     ("10nF", 1e-8), ("1e-12", 1e-12), ("2.5e1k", 25e3)],
)  # fmt: skip
def test_numbers_read_exactly(text, value):
    assert number(text) == value


def test_parallel_tank_closed_form():
    """p² + p/(RC) + 1/(LC) = 0, and Z(s) = (s/C)/(s² + s/(RC) + 1/(LC))."""
    R, L, C = 2e3, 1e-6, 1e-10
    tank = Circuit.from_cards("R1 a 0 2k", "L1 a 0 1u", "C1 a 0 100p")
    pole = -1 / (2 * R * C) + 1j * np.sqrt(1 / (L * C) - 1 / (2 * R * C) ** 2)
    found = tank.poles()
    assert len(found) == 2
    # eigenvalues polished to rounding
    assert abs(found[found.imag > 0][0] - pole) < 1e-14 * abs(pole)
    frequency = np.array([1e6, 1.59e7, 1e9])
    s = 2j * np.pi * frequency
    exact = (s / C) / (s**2 + s / (R * C) + 1 / (L * C))
    assert np.allclose(tank.driving_points(frequency, ["a"])[:, 0], exact, rtol=1e-12)
    residue = (pole / C) / (pole - pole.conjugate())
    assert np.allclose(tank.residues(pole, [("a", "a")]), residue, rtol=1e-12)


def test_coupled_coils_split_into_the_closed_form_pair():
    """Two equal tanks coupled by k ring at 1/√(LC(1 ± k))."""
    circuit = Circuit.from_cards(
        "L1 a 0 1u", "L2 b 0 1u", "K1 L1 L2 0.3", "C1 a 0 100p", "C2 b 0 100p",
        "R1 a 0 1meg", "R2 b 0 1meg",
    )  # fmt: skip
    found = np.sort(np.abs(circuit.poles()[circuit.poles().imag > 0]))
    assert np.allclose(found, 1 / np.sqrt(1e-16 * np.array([1.3, 0.7])), rtol=1e-13)


def test_slow_pole_beside_a_fast_one_keeps_its_digits():
    """Two separate RC pairs, twelve decades apart."""
    circuit = Circuit.from_cards("R1 a 0 1k", "C1 a 0 1u", "R2 b 0 1", "C2 b 0 1f", "Rx a b 1e12")
    slow, fast = circuit.poles()
    # to first order in the coupling, 1e12 Ω against 1 kΩ and 1 Ω
    assert slow == pytest.approx(-1e3 * (1 + 1e-9), rel=1e-12)
    assert fast == pytest.approx(-1e15, rel=1e-11)


def test_residues_reproduce_the_impedances():
    """A bridged network, active: Σ residue/(s − p) is what solving the equations gives."""
    circuit = Circuit.from_cards(
        "G1 b 0 a 0 20m", "R1 a 0 500", "C1 a 0 1p", "L1 a b 3n", "C2 b 0 2p", "R2 b 0 200",
        "E1 c 0 b a 2", "R3 c d 75", "C3 d 0 4p",
    )  # fmt: skip
    pairs = [("a", "a"), ("b", "a"), ("d", "b"), ("a", "b")]
    frequency = np.geomspace(1e7, 1e10, 7)
    s = 2j * np.pi * frequency
    total = sum(
        circuit.residues(p, pairs) / (s[:, None] - p) for p in circuit.poles()
    )  # no direct term: a capacitor at each of the nodes a, b and d
    assert np.allclose(total, circuit.impedances(frequency, pairs), rtol=1e-10)


def test_a_card_that_is_not_understood_is_refused():
    with pytest.raises(ValueError, match="not understood"):
        Circuit.from_cards("Q1 a b c model")
