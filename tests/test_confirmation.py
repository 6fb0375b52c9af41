"""The result type of a prediction: what it says of the whole circuit."""

from dataclasses import FrozenInstanceError, replace

import pytest
from invented_results import example

from polefit.confirmation import Confirmation


@pytest.mark.parametrize(
    ("verdict", "run", "overall"),
    [
        ("confirmed", "unstable", "unstable"),
        ("refuted", "stable", "stable"),
        ("refuted", "unstable", "unstable"),
        ("refuted", "undecided", "undecided"),
        ("undecided", "stable", "undecided"),
        ("undecided", "undecided", "undecided"),
        ("undecided", "unstable", "unstable"),
    ],
)
def test_the_worse_of_prediction_and_run(verdict, run, overall):
    answer = Confirmation(
        verdict=verdict, reasons=("invented",), near_hz=2e9, within=0.25, mode=None, in_range=(),
        elsewhere=(), view=None, identification=example(run, nodes=("gate2",), points=21),
    )  # fmt: skip
    assert answer.overall == overall
    assert answer.range_hz == (1.5e9, 2.5e9)
    assert replace(answer, near_hz=4e9).range_hz == (3e9, 5e9)
    with pytest.raises(FrozenInstanceError):
        answer.verdict = "confirmed"
