"""The circuits of the proving ground: their modes against closed forms."""

import numpy as np
import pytest
import scipy.special
from circuits import Circuit
from proving.case import DETECTABLE, Noise, place
from proving.distributed import (
    Delayed,
    DistributedCircuit,
    Line,
    rectangle,
    winding_number,
    zeros_inside,
)
from proving.families import cases, print_responses
from proving.lumped import Netlist, exact_response

CENTRE = 2 * np.pi * 1e9


def test_exact_response_of_a_tank_is_the_closed_form():
    """p² + p/(RC) + 1/(LC) = 0; the residue of (s/C)/((s − p)(s − p*)) is (p/C)/(p − p*)."""
    tank = Netlist(("L1 a 0 1u", "C1 a 0 100p", "R1 a 0 2k"), ("a",), 16e6)
    exact = exact_response(tank, 1.0, np.linspace(1e6, 40e6, 51), [("a", "a")])
    pole = -1 / (2 * 2e3 * 1e-10) + 1j * np.sqrt(1e16 - (1 / (2 * 2e3 * 1e-10)) ** 2)
    assert exact.known.poles == pytest.approx([pole], rel=1e-13)
    expected = (pole / 1e-10) / (pole - pole.conjugate())
    assert exact.known.residues[0, 0] == pytest.approx(expected, rel=1e-12)


PHASE_SHIFT = Netlist(
    ("G1 a 0 g 0 {gm:0.032}", "R1 a 0 1k", "C1 a 0 100f", "R2 a b 1k", "C2 b 0 100f",
     "R3 b g 1k", "C3 g 0 100f"), ("a", "g"), 4e9,
)  # fmt: skip


def test_drive_scales_the_transconductances():
    """The low-pass phase-shift oscillator of tests/published: pair at 32 mS, on the axis at 29."""
    hz = np.linspace(0.5e9, 12e9, 51)
    pair = exact_response(PHASE_SHIFT, 1.0, hz, [("a", "a")]).known.poles
    pair = pair[pair.imag > 0][0]
    assert pair == pytest.approx(469515190.0246248 + 25448238692.362465j, rel=1e-12)
    marginal = exact_response(PHASE_SHIFT, 29 / 32, hz, [("a", "a")]).known.poles
    marginal = marginal[marginal.imag > 0][0]
    assert abs(marginal.real) < 1e-12 * abs(marginal)
    assert marginal.imag == pytest.approx(2 * np.pi * 3898484006.1683807, rel=1e-12)


def test_a_port_resistor_is_part_of_a_reflection():
    """S = (Z − R)/(Z + R) of the bare impedance, poles those of the loaded tank."""
    tank = Netlist(("L1 a 0 1u", "C1 a 0 100p", "R1 a 0 2k"), ("a",), 16e6)
    hz = np.linspace(5e6, 40e6, 51)
    z = exact_response(tank, 1.0, hz, [("a", "a")]).known.values
    loaded = exact_response(tank, 1.0, hz, [("a", "a")], port_ohm=50.0)
    assert np.allclose(loaded.known.values, (z - 50) / (z + 50), rtol=1e-12)
    s = 2j * np.pi * hz[:, None]
    poles, residues = loaded.known.poles, loaded.known.residues
    total = (1 / (s - poles)) @ residues
    pair = poles.imag > 0
    total += (1 / (s - poles[pair].conj())) @ residues[pair].conj() - 1
    assert np.allclose(total, loaded.known.values, rtol=1e-10)


def stub(conductance, loss=0.0):
    """A shorted line, a quarter of a wave long at 1 GHz, with a conductance across its open end."""
    lumped = Circuit.from_cards(f"R1 a 0 {1 / conductance!r}")
    return DistributedCircuit(lumped, (Line("a", "0", 50.0, 0.25e-9, loss, CENTRE),))


@pytest.mark.parametrize("conductance", [1e-3, -1e-3, 1.5e-2])
def test_modes_of_a_shorted_line(conductance):
    """G + coth(sT)/Z₀ = 0: s = (ln|(1 − GZ₀)/(1 + GZ₀)| + jπ(2n + 1))/2T while |GZ₀| < 1."""
    delay, share = 0.25e-9, conductance * 50
    real = np.log((1 - share) / (1 + share)) / (2 * delay)
    expected = real + 1j * np.pi * np.array([1, 3, 5]) / (2 * delay)
    box = (-3 * abs(real), 3 * abs(real), 0.1e9, 2 * np.pi * 6e9)
    circuit = stub(conductance)
    assert winding_number(circuit, rectangle(*box)) == 3
    found = zeros_inside(circuit, box, np.random.default_rng(1))
    assert np.sort_complex(found * -1j) == pytest.approx(np.sort_complex(expected * -1j), rel=1e-10)
    right = rectangle(0.0, box[1], box[2], box[3])
    assert winding_number(circuit, right) == (3 if conductance < 0 else 0)


def test_modes_of_a_lossy_line_solve_its_own_equation():
    """G + coth(θ)/Z = 0 with skin effect; loss alone damps what a lossless stub would ring at."""
    circuit = stub(1e-4, loss=0.05)
    box = (-3e9, 1e9, 1e9, 2 * np.pi * 6e9)
    found = zeros_inside(circuit, box, np.random.default_rng(1))
    assert len(found) == 3
    root = np.sqrt(1 + 0.05 * np.sqrt(CENTRE / found))
    theta, ohm = found * 0.25e-9 * root, 50 * root
    # relative to the slope of coth, about 1/sinh² = 1 here: zeros are polished to 1e-9
    assert np.abs(1e-4 * ohm + 1 / np.tanh(theta)).max() < 1e-8
    alone = np.log((1 - 5e-3) / (1 + 5e-3)) / 0.5e-9
    assert np.all(found.real < alone)


@pytest.mark.parametrize(("siemens", "growing"), [(4e-3, 0), (12e-3, 1)])
def test_modes_of_delayed_feedback_are_lambert_w(siemens, growing):
    """C·dv/dt + v/R + gm·v(t − τ) = 0: s = W_k(−(gm/C)·τ·exp(τ/RC))/τ − 1/RC."""
    R, C, tau = 200.0, 1e-12, 0.3e-9
    circuit = DistributedCircuit(
        Circuit.from_cards(f"R1 a 0 {R!r}", f"C1 a 0 {C!r}"), (), (Delayed("a", "a", siemens, tau),)
    )
    argument = -(siemens / C) * tau * np.exp(tau / (R * C))
    exact = np.array([scipy.special.lambertw(argument, k) / tau - 1 / (R * C) for k in range(4)])
    box = (-4e10, 1e10, 1e8, 5e10)
    inside = exact[(exact.real > box[0]) & (exact.imag > box[2]) & (exact.imag < box[3])]
    found = zeros_inside(circuit, box, np.random.default_rng(1))
    assert np.sort_complex(found * -1j) == pytest.approx(np.sort_complex(inside * -1j), rel=1e-10)
    assert winding_number(circuit, rectangle(0.0, 1e11, 1e7, 5e10)) == growing


def test_residues_and_impedances_of_a_lumped_circuit_agree_with_nodal_analysis():
    cards = ("R1 a 0 500", "C1 a 0 1p", "L1 a b 3n", "C2 b 0 2p", "R2 b 0 200")
    plain = Circuit.from_cards("G1 b 0 a 0 20m", *cards)
    same = DistributedCircuit(Circuit.from_cards(*cards), (), (Delayed("b", "a", 20e-3, 0.0),))
    pairs = [("a", "a"), ("b", "a")]
    hz = np.geomspace(1e7, 1e10, 7)
    assert np.allclose(same.impedances(hz, pairs), plain.impedances(hz, pairs), rtol=1e-12)
    pole = next(p for p in plain.poles() if p.imag > 0)
    # M' by central differences of a matrix linear in s: rounding of 1e-16 over a step of 1e-5
    assert np.allclose(same.residues(pole, pairs), plain.residues(pole, pairs), rtol=1e-9)


@pytest.mark.parametrize("family", ["distributed", "cable", "weak"])
def test_a_seed_makes_the_same_case_again(family):
    first, second = (next(cases(family, 1, 5)) for _ in range(2))
    assert np.array_equal(first.responses.values, second.responses.values)
    assert first.modes == second.modes


@pytest.mark.parametrize("family", ["lumped", "coarse", "wide", "laws"])
@pytest.mark.parametrize("seed", [20, 21])
def test_modes_of_a_case_are_the_poles_of_its_netlist(family, seed):
    case = next(cases(family, 1, seed))
    poles = Circuit.from_cards(*case.circuit.splitlines()).poles()
    for mode in case.modes:
        # netlists are printed with 13 digits; close pairs magnify that
        assert np.abs(poles - mode.pole).min() < 1e-7 * abs(mode.pole)
    wants_growth = seed % 2 == 1
    assert any(p.real > 0 for p in poles) or not wants_growth
    if not wants_growth and family != "coarse":
        assert not any(p.real > 0 for p in poles)


def test_noise_has_the_stated_size():
    generator = np.random.default_rng(5)
    clean = np.geomspace(1, 100, 4000)[:, None] * np.exp(1j * np.arange(4000.0))[:, None]
    law = Noise(relative=0.01, absolute=0.002)
    noise = law.drawn(clean, generator) - clean
    spread = law.spread(clean)
    for part, std in ((noise.real, spread.first), (noise.imag, spread.second)):
        # the mean square of 4000 normal numbers is known to 2.2 % (one σ)
        assert np.mean((part / std) ** 2) == pytest.approx(1, abs=0.08)
    total = np.sqrt(np.mean(np.abs(noise / clean) ** 2))
    assert total > 0.01  # both parts together: relative noise alone gives this


@pytest.mark.parametrize("seed", [13, 14, 15])
def test_printed_cases_come_back_with_their_digits(seed):
    """What is read is within half a unit of the last printed digit of the exact response."""
    case = next(cases("printed", 1, seed))
    data = case.responses
    digits = (4, 6, 8)[seed % 3]
    assert data.precision.first.significant == digits
    assert (data.precision.form == "decibel-angle") == (seed % 4 >= 2)
    pairs = [(c.output, c.input) for c in data.channels]
    circuit = Circuit.from_cards(*case.circuit.splitlines())
    error = np.abs(data.values - circuit.impedances(data.frequency_hz, pairs))
    first, second, _ = data.precision.rounding_std(data.values)
    limit = np.sqrt(12) / 2 * np.hypot(first, second)
    if seed % 5:  # every fifth has a little noise beside
        assert np.all(error <= limit * (1 + 1e-6) + 1e-12 * np.abs(data.values))


def test_printing_a_touchstone_one_port():
    text = print_responses(np.array([1e9]), np.array([[3 + 4j]]), ("n",), 4, False, "Touchstone")
    assert text == "# Hz Z RI R 1\n1000000000 3.000e+00 4.000e+00\n"


@pytest.mark.parametrize(
    ("pole", "expected"),
    [
        (-1e6 + 2j * np.pi * 5e8, "inside"),
        (1e6 + 2j * np.pi * 1.1e9, "edge"),
        (-4e9 + 2j * np.pi * 9.9e8, "edge"),
        (-1e6 + 2j * np.pi * 3e9, "outside"),
        (-2 * np.pi * 5e8 + 0j, "inside"),
        (-2 * np.pi * 1e7 + 0j, "outside"),
    ],
)
def test_place_of_a_mode(pole, expected):
    assert place(pole, (1e8, 1e9)) == expected


def test_weak_modes_are_as_detectable_as_they_were_to_be():
    """Odd seeds hold one growing mode; over the seeds it is now well, now hardly visible."""
    made = [next(cases("weak", 1, seed)) for seed in (3, 5, 7, 9)]
    assert len({case.circuit for case in made}) == len(made)
    found = [next(m.detectability for m in case.modes if m.growing) for case in made]
    assert min(found) < DETECTABLE < max(found)
