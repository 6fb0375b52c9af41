"""Parametric resonance against outside values: SciPy's Mathieu functions, a textbook threshold.

The flux of a resonator whose reciprocal inductance varies obeys Mathieu's equation
x″ + (a − 2q·cos 2t)·x = 0. It grows between the characteristic values b_n(q) and a_n(q): for
odd n at odd multiples of half the drive's frequency (angular frequency 2), for even n at its
multiples (N. W. McLachlan, "Theory and application of Mathieu functions", 1947, from memory). The
values come from ``scipy.special.mathieu_a`` and ``mathieu_b``.
"""

import numpy as np
import pytest
from circuits import Circuit
from periodic import PeriodicCircuit
from scipy.optimize import brentq
from scipy.special import mathieu_a, mathieu_b

import polefit

PUMP_HZ = 1 / np.pi


def resonator(a, q, siemens=0.0):
    """C·v′ + G·v + Γ(t)·φ = i, φ′ = v with C = 1 and Γ = a − 2q·cos 2t."""
    mean = np.array([[siemens, a], [-1.0, 0.0]])
    still = Circuit(mean, np.eye(2), ("a", "flux"))
    nothing = np.zeros((2, 2), dtype=complex)
    return PeriodicCircuit(still, PUMP_HZ, nothing, nothing).pumped(conductance=[("a", "flux", -q)])


@pytest.mark.parametrize("q", [0.05, 0.4, 1.5])
@pytest.mark.parametrize("n", [1, 2])
def test_growth_starts_at_the_characteristic_values(q, n):
    """From the monodromy matrix; 1e-4 of the width inside it grows, outside it does not.

    Near an edge growth goes with the root of the distance, so that outside the rate must be
    zero to the root of the integration's tolerance of 1e-12.
    """
    low, high = mathieu_b(n, q), mathieu_a(n, q)
    margin = 1e-4 * (high - low)
    for edge, inward in ((low, 1), (high, -1)):
        inside = resonator(edge + inward * margin, q).exponents()[0]
        outside = resonator(edge - inward * margin, q).exponents()[0]
        assert inside.real > 1e-3 * (high - low)
        assert abs(outside.real) < 2e-6
        assert inside.imag == (pytest.approx(1.0) if n == 1 else 0)


@pytest.mark.parametrize(("n", "subharmonic"), [(1, True), (2, False)])
def test_identification_tells_the_tongues_apart(n, subharmonic):
    """In the middle of a tongue: half the drive's frequency in the first, zero in the second."""
    q = 1.2
    circuit = resonator((mathieu_b(n, q) + mathieu_a(n, q)) / 2, q, siemens=0.02)
    result = identified(circuit, 0.25, 1.3)
    assert result.verdict == "unstable"
    mode = result.modes[0]
    assert mode.subharmonic is subharmonic
    assert mode.frequency_hz.value == (PUMP_HZ / 2 if subharmonic else 0)
    growth = mode.growth_rate_per_s
    assert abs(growth.value - circuit.exponents()[0].real) < 4 * growth.std


@pytest.mark.parametrize(("above", "verdict"), [(1.05, "unstable"), (0.95, "stable")])
def test_identification_around_the_threshold(above, verdict):
    """With losses: a resonator at half the drive's frequency grows at q > G·√a to first order.

    The same as the textbook's depth of modulation 2/Q (L. D. Landau, E. M. Lifshitz, "Mechanics",
    section 27, from memory).
    """
    siemens = 0.02
    circuit = resonator(1.0, above * siemens, siemens)
    result = identified(circuit, 0.2, 0.8)
    assert result.verdict == verdict
    assert result.modes[0].subharmonic
    # from dx/dt = ±(q/2)x − (G/2)x; what is left out is of second order in G
    assert result.modes[0].growth_rate_per_s.value == pytest.approx(
        (above - 1) * siemens / 2, abs=siemens**2 / 2
    )


def identified(circuit, low, high):
    hz = np.linspace(low, high, 401) * PUMP_HZ
    values = circuit.response(hz, [("a", "a")])
    rough = np.random.default_rng(1).normal(size=(2, *values.shape)) * 1e-4 / np.sqrt(2)
    return polefit.identify(
        polefit.ResponseSet.from_arrays(
            hz,
            values * (1 + rough[0] + 1j * rough[1]),
            channels=["a"],
            quantity="impedance",
            pump_hz=PUMP_HZ,
        )
    )


def test_threshold_of_a_pumped_capacitor():
    """Depth m of C(t) = C·(1 + m·cos 2ω₀t) at which a tank starts to grow: 2/Q to first order."""
    for quality, error in ((50, 0.02), (200, 0.005)):  # what is left out is of the order 1/Q
        omega = 1.0
        cards = ["L1 a 0 1", "C1 a 0 1", f"R1 a 0 {quality}"]
        tank = PeriodicCircuit.from_cards(cards, pump_hz=2 * omega / (2 * np.pi))

        def growth(depth, tank=tank):
            return tank.pumped(capacitance=[("a", "a", depth / 2)]).exponents()[0].real

        found = brentq(growth, 1 / quality, 4 / quality, xtol=1e-8)
        assert found == pytest.approx(2 / quality, rel=error)
