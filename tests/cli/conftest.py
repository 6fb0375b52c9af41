"""A command line whose reader and engine answer at once with an invented result."""

import sys
from types import SimpleNamespace

import pytest
from invented_results import example

from polefit.analysis.confirm import checked_range, hold_against

RESULTS: dict = {}


class Session:
    """Runs ``main`` and keeps what the stand-ins were asked.

    Parameters
    ----------
    verdict : str
        What the next identifications answer; a list answers one after the other.
    """

    def __init__(self, capsys):
        self.verdict = "stable"
        self.read, self.identified, self.saved, self.asked, self.how = [], [], [], [], []
        self.capsys = capsys
        self.error = None

    def __call__(self, *argv):
        from polefit.cli import main

        status = main([str(a) for a in argv])
        out, err = self.capsys.readouterr()
        return SimpleNamespace(status=status, out=out, err=err)

    def answer(self):
        verdict = self.verdict
        if isinstance(verdict, list):
            verdict = verdict.pop(0)
        if verdict not in RESULTS:
            RESULTS[verdict] = example(verdict, nodes=("gate2",), points=151)
        return RESULTS[verdict]


@pytest.fixture
def polefit_command(monkeypatch, capsys):
    session = Session(capsys)

    def read(file, **options):
        session.read.append((str(file), options))
        return (f"responses of {file}",)

    def identify(responses, *, band_hz=None, confidence=0.95, progress=None, **how):
        if session.error is not None:
            raise session.error
        session.identified.append((responses, band_hz, confidence))
        session.how.append(how)
        progress("fitting")
        return session.answer()

    def confirm(responses, near_hz, within=0.1, **how):
        session.asked.append((near_hz, within))
        return hold_against(identify(responses, **how), checked_range(near_hz, within))

    def write_identification(path, result):
        session.saved.append(path)

    monkeypatch.setattr("polefit.readers.read_all", read, raising=False)
    for name, part in {
        "polefit.analysis.identify": SimpleNamespace(identify=identify),
        "polefit.analysis.confirm": SimpleNamespace(confirm=confirm),
        "polefit.report.hdf5": SimpleNamespace(
            write_identification=write_identification, write_confirmation=write_identification
        ),
    }.items():
        monkeypatch.setitem(sys.modules, name, part)
    return session
