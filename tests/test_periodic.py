"""Periodically driven circuits of the scripts: two ways to every number, and the equations."""

from dataclasses import replace

import numpy as np
import pytest
from circuits import Circuit
from periodic import PeriodicCircuit, pumped_case

SEEDS = (0, 1, 3, 5, 9)


@pytest.mark.parametrize("seed", SEEDS)
def test_exponents_two_ways(seed):
    """Monodromy (relative tolerance 1e-12 over one period) against harmonic balance."""
    circuit = pumped_case(seed).circuit
    one, other = circuit.exponents(), circuit.exponents_by_harmonics(20)
    for exponent in one:
        assert np.abs(other - exponent).min() < 1e-9 * 2 * np.pi * circuit.pump_hz


@pytest.mark.parametrize("seed", SEEDS)
def test_truncation_is_below_rounding(seed):
    case = pumped_case(seed)
    hz, pairs = case.responses.frequency_hz[::20], [("a", "a")]
    few = case.circuit.response(hz, pairs, harmonics=25)
    assert np.allclose(case.circuit.response(hz, pairs), few, rtol=1e-12, atol=0)


@pytest.mark.parametrize("seed", SEEDS)
def test_the_response_satisfies_the_state_equation(seed):
    """d/dt[C(t)·x] + G(t)·x = b·e^(st) with x = Σ x_n·e^((s + jnω₀)t), at some times."""
    circuit = pumped_case(seed).circuit
    omega, nodes = 2 * np.pi * circuit.pump_hz, circuit.circuit.nodes
    at = 0.317 * circuit.pump_hz
    s, harmonics = 2j * np.pi * at, np.arange(-25, 26)
    names = [*nodes, *(f"#{i}" for i in range(len(circuit.circuit.conductance) - len(nodes)))]
    whole = replace(circuit, circuit=replace(circuit.circuit, nodes=tuple(names)))
    pairs = [(name, "a") for name in names]
    x = np.array([whole.response(at, pairs, sideband=int(n))[0] for n in harmonics])
    source = np.array([name == "a" for name in names], dtype=float)
    for turn in np.exp(1j * np.array([0.3, 1.9, 4.4])):
        G = circuit.circuit.conductance + 2 * (circuit.conductance * turn).real
        C = circuit.circuit.susceptance + 2 * (circuit.susceptance * turn).real
        slope_of_c = -2 * omega * (circuit.susceptance * turn).imag
        shape = turn**harmonics
        value = shape @ x
        slope = (shape * (s + 1j * omega * harmonics)) @ x
        left = slope_of_c @ value + C @ slope + G @ value
        # products of up to the largest element current cancel in the sum
        size = np.abs(C).max() * np.abs(slope).max() + np.abs(G).max() * np.abs(value).max()
        assert np.allclose(left, source, rtol=0, atol=1e-12 * size + 1e-11)


def test_without_a_drive_it_is_the_plain_circuit():
    cards = ["L1 a 0 1u", "C1 a 0 100p", "R1 a 0 2k", "C12 a b 20p", "R2 b 0 300"]
    plain = Circuit.from_cards(*cards)
    still = PeriodicCircuit.from_cards(cards, pump_hz=60e6)
    hz = np.linspace(1e6, 50e6, 7)
    expected = plain.impedances(hz, [("a", "b")])
    assert np.allclose(still.response(hz, [("a", "b")]), expected, rtol=1e-12)
    poles = plain.poles()[plain.poles().imag >= 0]
    found = still.exponents()
    assert np.allclose(np.sort_complex(found), np.sort_complex(poles), rtol=1e-9)


def test_damping_moves_by_the_sum_of_residues_over_all_images():
    """dp/dG = −Σₙ res(H₀; p + jnω₀) for a shunt conductance: one line alone does not tell it.

    Residues by the trapezoidal rule on a circle, which converges geometrically; the derivative
    by central differences, whose error is the square of the step of 1e-4.
    """
    for seed in (1, 9):
        circuit = pumped_case(seed).circuit
        omega, pole = 2 * np.pi * circuit.pump_hz, circuit.exponents()[0]
        step = 1e-4 * circuit.circuit.conductance[0, 0]

        def moved(siemens, circuit=circuit):
            G = circuit.circuit.conductance.copy()
            G[0, 0] += siemens
            return replace(circuit, circuit=replace(circuit.circuit, conductance=G)).exponents()[0]

        turn = 0.5 * abs(pole.real) * np.exp(2j * np.pi * np.arange(32) / 32)

        def residue(at, circuit=circuit, turn=turn):
            values = circuit.response((at + turn) / (2j * np.pi), [("a", "a")])[:, 0]
            return np.mean(values * turn)

        images = [residue(pole + 1j * omega * n) for n in range(-12, 13)]
        slope = (moved(step) - moved(-step)) / (2 * step)
        assert slope == pytest.approx(-sum(images), rel=1e-6)
        assert abs(slope + images[12]) > 1e-5 * abs(slope)


def test_cases_are_what_they_are_called():
    """Seeded: the same again; every kind comes up, a third of the unstable ones divides."""
    cases = [pumped_case(seed) for seed in range(24)]
    assert [case.unstable for case in cases] == [False, True] * 12
    assert sum(case.divides for case in cases) == 4
    assert {case.kind for case in cases} == {
        "one tank", "pumped conductance", "two tanks", "stage",
    }  # fmt: skip
    again = pumped_case(7).responses
    assert np.array_equal(again.values, cases[7].responses.values)
    for case in cases:
        omega = 2 * np.pi * case.circuit.pump_hz
        assert np.all((case.exponents.imag >= 0) & (case.exponents.imag <= omega / 2))
        assert case.responses.pump_hz == case.circuit.pump_hz


def test_noise_is_as_strong_as_asked():
    case = pumped_case(4, noise=1e-3)
    pairs = [(c.output, c.input) for c in case.responses.channels]
    clean = case.circuit.response(case.responses.frequency_hz, pairs)
    ratio = np.abs(case.responses.values / clean - 1)
    # 402 samples of an exponentially distributed square: 5 % each way is five deviations
    assert np.sqrt(np.mean(ratio**2)) == pytest.approx(1e-3, rel=0.13)
