"""Periodically driven circuits from responses to verdict; truth from the monodromy matrix."""

import json

import jsonschema
import numpy as np
import pytest
from periodic import pumped_case

import polefit
from polefit.report.hdf5 import write_identification
from polefit.report.json import identification_schema

SEEDS = range(24)


@pytest.fixture(scope="module")
def answers():
    cases = [pumped_case(seed, noise=1e-4) for seed in SEEDS]
    return [(case, polefit.identify(case.responses)) for case in cases]


def test_verdicts(answers):
    """A wrong verdict on none of 24 invented circuits, at most one of them undecided."""
    for case, result in answers:
        assert result.verdict in ("undecided", "unstable" if case.unstable else "stable")
    assert sum(result.verdict == "undecided" for _, result in answers) <= 1


def test_frequency_division_is_told(answers):
    for case, result in answers:
        for mode in result.modes:
            if mode.verdict == "unstable":
                assert mode.subharmonic is case.divides
                assert (mode.frequency_hz.value == case.circuit.pump_hz / 2) is case.divides


def test_growing_exponents_lie_in_their_intervals(answers):
    """Within four standard uncertainties, every one of about a dozen (chance 1e-3)."""
    checked = 0
    for case, result in answers:
        if result.verdict == "unstable":
            mode, truth = result.modes[0], case.exponents[0]
            growth = mode.growth_rate_per_s
            assert abs(growth.value - truth.real) < 4 * growth.std
            frequency = mode.frequency_hz
            assert abs(2 * np.pi * frequency.value - truth.imag) <= 8 * np.pi * frequency.std + 1e-3
            checked += 1
    assert checked >= 10


def test_modes_are_folded_and_say_where_they_show(answers):
    for case, result in answers:
        pump, (low, high) = case.circuit.pump_hz, result.band_hz
        for mode in result.modes:
            assert 0 <= mode.frequency_hz.value <= pump / 2
            assert mode.pole_rad_per_s.imag / (2 * np.pi) == mode.frequency_hz.value
            assert mode.seen_hz
            inside = [low <= f <= high for f in mode.seen_hz]
            assert any(inside) or not mode.in_band
            assert all(view.leverage is None for view in mode.nodes)
        assert np.isnan(result.detection.leverage).all()


def test_the_model_is_the_response(answers):
    for case, result in answers[:6]:
        fitted = result.model.response(case.responses.frequency_hz)
        error = np.abs(fitted / case.responses.values - 1)
        assert np.sqrt(np.mean(error**2)) < 1.2e-4


def test_document_and_reports(answers, tmp_path):
    case, result = next(pair for pair in answers if pair[0].divides)
    document = json.loads(json.dumps(result.to_dict(), allow_nan=False))
    jsonschema.validate(document, identification_schema())
    assert document["pump_hz"] == case.circuit.pump_hz
    assert document["modes"][0]["subharmonic"] is True
    text = str(result)
    assert "half the drive's frequency" in text.splitlines()[0]
    assert "frequency division of the drive, seen in the sweep at" in text
    assert "folded into 0 to" in text
    assert "this drive level" in text
    assert "frequency division of the drive" in result._repr_html_()
    path = tmp_path / "result.h5"
    write_identification(path, result)
    assert polefit.read(path).pump_hz == case.circuit.pump_hz


def test_conversion_to_a_sideband():
    """Residues there are not those of a real function; the exponents are the same."""
    found = 0
    for seed in (3, 7, 9):
        case = pumped_case(seed, noise=1e-5)
        hz = case.responses.frequency_hz
        values = case.circuit.response(hz, [("a", "a")], sideband=-1)
        generator = np.random.default_rng(seed)
        rough = generator.normal(size=(2, *values.shape)) * 1e-4 / np.sqrt(2)
        result = polefit.identify(
            polefit.ResponseSet.from_arrays(
                hz,
                values * (1 + rough[0] + 1j * rough[1]),
                channels=[("a, lower sideband", "a")],
                quantity="transfer",
                pump_hz=case.circuit.pump_hz,
            )
        )
        assert result.verdict == "unstable"
        mode, truth = result.modes[0], case.exponents[0]
        growth = mode.growth_rate_per_s
        assert abs(growth.value - truth.real) < 4 * growth.std
        found += mode.subharmonic is case.divides
    assert found == 3


def test_images_that_do_not_agree_leave_it_undecided():
    """A line at f₀ − f grows a fifth slower than its image at f: no circuit does that."""
    pump, omega = 1e9, 2 * np.pi * 1e9
    hz = np.linspace(0.1e9, 0.9e9, 401)
    s = 2j * np.pi * hz
    values = 1 + 0.05 * omega / (s - (0.005 + 0.3j) * omega)
    values = values + 0.05j * omega / (s - (0.004 + 0.7j) * omega)
    rough = np.random.default_rng(1).normal(size=(2, hz.size)) * 1e-4
    data = polefit.ResponseSet.from_arrays(
        hz,
        values * (1 + rough[0] + 1j * rough[1]),
        channels=["a"],
        quantity="impedance",
        pump_hz=pump,
    )
    result = polefit.identify(data)
    assert result.verdict == "undecided"
    assert "should be images of one exponent" in result.reason


@pytest.mark.parametrize(
    ("low", "high", "said"),
    [(0.02, 0.55, False), (0.02, 0.5, True), (0.8, 1.2, True), (0.45, 1.05, False)],
)
def test_modes_that_the_sweep_cannot_show_are_named(low, high, said):
    circuit = pumped_case(4).circuit
    hz = np.linspace(low, high, 201) * circuit.pump_hz
    values = circuit.response(hz, [("a", "a")])
    result = polefit.identify(
        polefit.ResponseSet.from_arrays(
            hz, values, channels=["a"], quantity="impedance", pump_hz=circuit.pump_hz
        )
    )
    assert any("frequency division show if" in note for note in result.notes) is said


def test_data_without_noise():
    """Double precision: images then differ by more than their uncertainties, but by nothing."""
    for seed in (24, 27, 3):
        case = pumped_case(seed, noise=0.0)
        result = polefit.identify(case.responses)
        assert result.verdict == ("unstable" if case.unstable else "stable")
        assert not [e for m in result.modes for e in m.evidence if e.passed is False]


def test_several_probes_share_their_exponents():
    """Probes apart say what they say as one set, but for the noise law of each."""
    case = pumped_case(1, noise=1e-4)
    probes = [case.responses.select([c.output]) for c in case.responses.channels]
    assert len(probes) == 2
    joint = polefit.identify(probes)
    assert joint.verdict == "unstable"
    assert joint.pump_hz == case.circuit.pump_hz
    whole = polefit.identify(case.responses)
    one, other = joint.modes[0].growth_rate_per_s, whole.modes[0].growth_rate_per_s
    assert abs(one.value - other.value) < 0.3 * other.std
    assert one.std == pytest.approx(other.std, rel=0.1)


def test_predictions_are_not_checked_yet():
    """A folded frequency is not where the sweep shows it: "refuted" could be wrong."""
    case = pumped_case(1)
    with pytest.raises(polefit.NotSupportedError, match=r"pump_hz: .* identify them"):
        polefit.confirm(case.responses, near_hz=0.35 * case.circuit.pump_hz)
