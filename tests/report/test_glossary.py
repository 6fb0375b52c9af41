"""Every test that is made of a mode is explained; unknown names do no harm."""

import re
from dataclasses import replace
from pathlib import Path

import polefit.analysis.evidence
from polefit.modes import Evidence
from polefit.report import glossary
from polefit.report.text import identification_text

FOLDER = Path(polefit.analysis.evidence.__file__).parent
SOURCE = "".join(p.read_text(encoding="utf-8") for p in sorted(FOLDER.glob("*.py")))


def test_every_test_of_the_analysis_is_explained(unstable):
    names = set(re.findall(r'Evidence\(\s*"([^"]+)"|^ +name = "([^"]+)"', SOURCE, re.MULTILINE))
    names = {first or second for first, second in names}
    assert {"growth rate", "residue", "persistence over orders", "stable-model misfit"} <= names
    assert [name for name in names if not glossary.asks(name)] == []


def test_each_is_explained_once_in_the_report(unstable):
    text = " ".join(identification_text(unstable).split())
    assert text.count("stable-model misfit: can a model without a growing pole explain") == 1


def test_unknown_tests_are_shown_without_explanation(unstable):
    odd = Evidence("phase of the moon", True, "it was full")
    modes = (replace(unstable.modes[0], evidence=(odd,)),)
    assert glossary.asks("phase of the moon") is None
    assert glossary.explained(modes) == ()
    text = identification_text(replace(unstable, modes=modes))
    assert "passed: phase of the moon: it was full." in text
    assert "What they ask" not in text
