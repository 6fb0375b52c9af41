"""Driven circuits as cases: residues of the lines add up to the response."""

import numpy as np
import periodic
import pytest
from proving import pumped


@pytest.mark.parametrize("seed", [1, 2, 3])
def test_near_a_line_the_response_is_its_residue(seed):
    made = periodic.pumped_case(seed)
    drive = 2 * np.pi * made.circuit.pump_hz
    _, lines = pumped._lines(made.exponents, drive, made.responses.band_hz)
    residues = pumped._residues(made, lines, drive)
    index = int(np.argmax(np.abs(residues[:, 0])))
    near = lines[index] * (1 + 1e-7)
    pairs = [(c.output, c.input) for c in made.responses.channels]
    value = made.circuit.response(np.array([near / 2j / np.pi]), pairs)[0]
    # what the other lines add is smaller by the distance over theirs, 1e-7 of a frequency here
    assert value * (near - lines[index]) == pytest.approx(residues[index], rel=1e-3)


@pytest.mark.parametrize("seed", [1, 3, 4])
def test_the_answer_is_that_of_the_exponents(seed):
    case = pumped.case(seed)
    made = periodic.pumped_case(seed)
    assert case.growing_inside == made.unstable
    assert (case.answer == "unstable") == made.unstable
    assert case.responses.pump_hz == made.circuit.pump_hz
