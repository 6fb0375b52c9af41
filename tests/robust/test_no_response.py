"""Numbers that no circuit gave: mistaken formats, lost phases, reversed signs, joined sweeps."""

import numpy as np
import pytest
from abuse import FREQUENCY, answer, measured, reason_of, response

import polefit
from polefit.analysis.continuity import continuity_notes


def joined(values, at, factor):
    """A sweep of which the second part was taken with another gain."""
    return values * np.where(np.arange(values.size) >= at, factor, 1.0)


@pytest.mark.parametrize("grows", [False, True])
@pytest.mark.parametrize(
    "lose", [np.abs, np.real, lambda z: 20 * np.log10(np.abs(z))], ids=["size", "real", "dB"]
)
def test_magnitudes_are_refused_with_the_remedy(grows, lose):
    values = lose(response(grows=grows))
    with pytest.raises(polefit.DataError, match=r"n0: .* no imaginary part .* export real and"):
        polefit.identify(measured(values))
    with pytest.raises(polefit.DataError, match=r"n1: .* no imaginary part"):
        polefit.identify(measured(np.c_[response(), values]))


def test_a_resistive_divider_is_not_refused():
    flat = np.full(FREQUENCY.size, 0.5) + 1e-5 * np.sin(np.arange(FREQUENCY.size))
    polefit.identify(measured(np.c_[response(), flat]))


def test_purely_imaginary_data_cannot_be_unstable():
    result = polefit.identify(measured(1j * response().imag))
    assert result.verdict == "undecided"
    assert "purely imaginary" in reason_of(result)
    assert "purely imaginary" in result.reason
    assert not any(m.verdict == "unstable" for m in result.modes)


def test_all_modes_growing_at_a_passive_port_asks_for_the_sign():
    result = polefit.identify(measured(response().conj()))
    assert result.verdict == "undecided"
    assert "sign of the imaginary parts is reversed" in reason_of(result)
    assert any("exp(+jωt)" in note for note in result.notes)
    assert not any("exp(+jωt)" in n for n in polefit.identify(measured(response())).notes)


def test_all_modes_growing_at_an_active_port_leaves_the_verdict_and_notes_the_sign():
    result = polefit.identify(measured(response().conj() - 100.0))
    assert result.verdict == "unstable"
    assert any("all 4 modes in the band grow" in note for note in result.notes)


TURNED = {
    "parts swapped": lambda z: z.imag + 1j * z.real,
    "angle added": lambda z: z * np.exp(0.3j),
    "small angle added": lambda z: z * np.exp(0.05j),
    "quarter turn": lambda z: 1j * z,
    "imaginary offset": lambda z: z + 1e6j,
    "frequencies reversed": lambda z: z[::-1],
}


@pytest.mark.parametrize("change", TURNED.values(), ids=TURNED)
def test_a_turned_phase_is_seen_as_such(change):
    result = polefit.identify(measured(change(response())))
    assert result.verdict in {"undecided", "stable"}
    if result.verdict == "undecided":
        assert "poles without their conjugates" in reason_of(result)


NONSENSE = {
    "degrees as radians": lambda z: np.abs(z) * np.exp(1j * np.angle(z) * np.pi / 180),
    "decibels and degrees": lambda z: 20 * np.log10(np.abs(z)) + 1j * np.degrees(np.angle(z)),
    "size of the imaginary part": lambda z: z.real + 1j * np.abs(z.imag),
    "clipped": lambda z: np.minimum(z.real, 60) + 1j * np.clip(z.imag, -40, 40),
    "angle and size swapped": lambda z: np.angle(z) + 1j * np.abs(z),
    "square wave": lambda z: np.sign(np.sin(FREQUENCY / 1e8)) + 0.1j * z,
}


@pytest.mark.parametrize("change", NONSENSE.values(), ids=NONSENSE)
def test_nonsense_is_not_called_unstable(change):
    half = change(response())[::2]
    assert answer(half, FREQUENCY[::2]) in {"undecided", "refused"}


def test_a_line_with_too_few_points_is_undecided():
    # its phase turns by 0.7 of a revolution from sample to sample
    assert answer(response() * np.exp(-2j * np.pi * FREQUENCY * 5e-8)) == "undecided"


@pytest.mark.parametrize("grows", [False, True])
def test_values_rounded_to_tens_of_ohms_are_not_answered_wrongly(grows):
    wrong = "stable" if grows else "unstable"
    assert answer(np.round(response(grows=grows) / 10)) != wrong


@pytest.mark.parametrize("at", [30, 60, 97, 150])
@pytest.mark.parametrize("factor", [0.95, 1.0005, 1.005, 1.05])
def test_joined_sweeps_are_not_called_unstable(at, factor):
    assert answer(joined(response(), at, factor)) == "undecided"


def test_joined_sweeps_of_an_unstable_circuit_are_not_called_stable():
    for at in (30, 100):
        assert answer(joined(response(grows=True), at, 1.05)) in {"unstable", "undecided"}


@pytest.mark.parametrize("at", [60, 120, 150])
def test_a_step_in_the_sweep_is_named(at):
    result = polefit.identify(measured(joined(response(), at, 1.05)))
    low, high = (f"{f / 1e9:.4g}" for f in FREQUENCY[at - 1 : at + 1])
    notes = [n for n in result.notes if "jumps by 0.05" in n or "jumps by 0.04" in n]
    assert len(notes) == 1
    if at == 150:
        assert f"between {low} GHz and {high} GHz" in notes[0]


def test_a_faulty_sample_is_named():
    values = response()
    values[60] *= 1.1
    notes = continuity_notes([measured(values)])
    assert len(notes) == 1
    assert "sample at 970 MHz stands out" in notes[0]


def test_a_smooth_sweep_has_nothing_to_name():
    assert continuity_notes([measured(response()), measured(response(grows=True))]) == []
    assert (
        continuity_notes([measured(np.zeros(FREQUENCY.size)), measured(response() * 0 + 5)]) == []
    )


def test_circuits_that_grow_are_not_doubted():
    result = polefit.identify(measured(response(grows=True)))
    assert result.verdict == "unstable"
    assert reason_of(result) == ""


def test_two_growing_real_modes_of_a_real_circuit_are_not_doubted():
    s = 2j * np.pi * FREQUENCY
    latch = 20.0 + 4e10 / (s - 8e8) - 3e10 / (s - 5e9) + 2e10 / (s + 2e9)
    result = polefit.identify(measured(latch * (response() / response(noise=0.0))))
    assert result.verdict == "unstable"
    assert reason_of(result) == ""
