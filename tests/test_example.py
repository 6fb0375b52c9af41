"""The bundled example: what identification makes of its files, against the exact poles."""

import importlib.util
import json
from pathlib import Path

import numpy as np
import pytest
from circuits import Circuit
from rational import nearest_mode

import polefit

ROOT = Path(__file__).resolve().parents[1]
EXAMPLE = ROOT / "datasets" / "three_stage_amplifier"
TRUTH = json.loads((EXAMPLE / "truth.json").read_text(encoding="utf-8"))
NODES = TRUTH["nodes"]
BIAS, BYPASS, ODD = TRUTH["modes"]


def pole_of(entry):
    return complex(entry["pole_rad_per_s"]["real"], entry["pole_rad_per_s"]["imag"])


def residue_of(entry, node):
    part = entry["residues_ohm_rad_per_s"][node]
    return complex(part["real"], part["imag"])


def peak_share(entry, node):
    """|residue/σ| of a mode at a node over the impedance there: how far it stands out."""
    z = circuit().driving_points(entry["frequency_hz"], [node])[0, 0]
    return abs(residue_of(entry, node) / pole_of(entry).real / z)


def circuit():
    return Circuit.from_netlist((EXAMPLE / "amplifier.cir").read_text(encoding="utf-8"))


def numbers(path):
    return np.loadtxt(path, comments=("!", "#"))


@pytest.fixture(scope="module")
def result():
    return polefit.identify([polefit.read(EXAMPLE / f"{node}.s1p") for node in NODES])


def test_script_makes_the_files_that_are_committed(tmp_path):
    """On another machine the last printed digit may differ by one, exact poles by rounding."""
    spec = importlib.util.spec_from_file_location("make_example", ROOT / "scripts/make_example.py")
    make_example = importlib.util.module_from_spec(spec)
    spec.loader.exec_module(make_example)
    made = make_example.make(tmp_path)
    kept = {p.name for p in EXAMPLE.iterdir()} - {"amplifier.cir"}
    assert {p.name for p in made} == kept
    for node in NODES:
        new, old = numbers(tmp_path / f"{node}.s1p"), numbers(EXAMPLE / f"{node}.s1p")
        assert np.array_equal(new[:, 0], old[:, 0])
        assert np.all(np.abs(new - old) <= 1.01e-8 * np.abs(old))
    again = json.loads((tmp_path / "truth.json").read_text(encoding="utf-8"))
    for new, old in zip(again["poles"], TRUTH["poles"], strict=True):
        assert pole_of(new) == pytest.approx(pole_of(old), rel=1e-12)


def test_example_is_what_it_claims_to_be():
    """Hidden from the ports, strong between the stages; five nodes or more; one pair grows."""
    assert len(NODES) >= 5
    assert [p["frequency_hz"] for p in TRUTH["poles"] if p["damping_ratio"] < 0] == [
        ODD["frequency_hz"]
    ]
    assert 0.1e9 < ODD["frequency_hz"] < 12e9
    for node in ("gate2a", "gate2b", "drain2a"):
        assert peak_share(ODD, node) > 0.5
    for node in ("in", "out"):
        assert peak_share(ODD, node) < 1e-3
    assert 0 < BYPASS["damping_ratio"] < 0.02
    assert BIAS["frequency_hz"] < 10e6
    assert peak_share(BIAS, "vdd") > 0.5


def test_verdict(result):
    assert result.verdict == "unstable"
    assert [m.verdict for m in result.modes].count("unstable") == 1
    assert result.modes[0].pole_rad_per_s.imag == pytest.approx(pole_of(ODD).imag, rel=1e-4)


@pytest.mark.parametrize("entry", TRUTH["modes"], ids=lambda e: e["name"])
def test_named_modes_within_their_uncertainty(result, entry):
    """Error within 4 standard uncertainties: by chance less than once in ten thousand."""
    pole = pole_of(entry)
    mode = nearest_mode(result, pole)
    assert mode.in_band
    assert mode.verdict == ("unstable" if pole.real > 0 else "stable")
    for estimate, true in (
        (mode.frequency_hz, pole.imag / (2 * np.pi)),
        (mode.natural_frequency_hz, abs(pole) / (2 * np.pi)),
        (mode.damping_ratio, -pole.real / abs(pole)),
        (mode.growth_rate_per_s, pole.real),
    ):
        assert abs(estimate.value - true) < 4 * estimate.std
        # and that uncertainty is small: nine digits were printed, many points hold the mode
        assert estimate.std < 1e-4 * abs(true)
        assert estimate.low < estimate.value < estimate.high


@pytest.mark.parametrize("entry", TRUTH["modes"], ids=lambda e: e["name"])
def test_residues_at_the_nodes(result, entry):
    mode = nearest_mode(result, pole_of(entry))
    views = {v.channel.output: v for v in mode.nodes}
    assert set(views) == set(NODES)
    strongest = max(abs(residue_of(entry, n)) for n in NODES)
    for node, view in views.items():
        true = residue_of(entry, node)
        if abs(true) > 0.01 * strongest:
            assert view.residue == pytest.approx(true, rel=1e-3)
            # leverage is the real part: −dσ/dG
            assert view.leverage.value == pytest.approx(true.real, abs=1e-3 * abs(true))


def test_loop_of_the_odd_mode_names_the_second_stage(result):
    loop = next(loop for loop in result.loops if loop.mode == 0)
    assert set(loop.nodes[:3]) == {"gate2a", "gate2b", "drain2a"}


def test_leverage_is_what_a_large_resistor_does():
    """−dσ/dG by truth's residues against the exact poles with 1 MΩ at a node added."""
    netlist = (EXAMPLE / "amplifier.cir").read_text(encoding="utf-8")
    before = pole_of(ODD)
    for node in ("gate2a", "drain2a"):
        changed = Circuit.from_netlist(netlist.replace(".end", f"Rnew {node} 0 1meg\n.end"))
        poles = changed.poles()
        moved = poles[np.argmin(np.abs(poles - before))]
        # second order in G: |Z| is a few hundred ohm, so parts in a thousand
        assert -(moved - before).real / 1e-6 == pytest.approx(residue_of(ODD, node).real, rel=5e-3)


def test_ports_alone_do_not_call_it_stable():
    """Input and output hardly see the mode: they may find it or not, never deny it falsely."""
    ports = polefit.identify([polefit.read(EXAMPLE / f"{node}.s1p") for node in ("in", "out")])
    near = [m for m in ports.modes if abs(m.frequency_hz.value / ODD["frequency_hz"] - 1) < 0.02]
    assert all(m.verdict != "stable" for m in near)


def test_every_claimed_mode_is_a_pole_of_the_circuit(result):
    exact = np.array([pole_of(p) for p in TRUTH["poles"]])
    for mode in result.modes:
        if mode.in_band:
            distance = np.min(np.abs(exact - mode.pole_rad_per_s))
            # broad modes carry less information: a tenth of |p| still singles the pole out
            assert distance < 0.1 * abs(mode.pole_rad_per_s)
