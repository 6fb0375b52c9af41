"""Text reports held against golden files.

After a wanted change of the layout: POLEFIT_WRITE_GOLDEN=1 python -m pytest tests/report, then
read the difference before committing it.
"""

import os
from pathlib import Path

from polefit.report.text import WIDTH

GOLDEN = Path(__file__).parents[1] / "report" / "golden"


def check_golden(name, text):
    path = GOLDEN / f"{name}.txt"
    if os.environ.get("POLEFIT_WRITE_GOLDEN"):
        GOLDEN.mkdir(exist_ok=True)
        path.write_text(text + "\n", encoding="utf-8")
    assert text + "\n" == path.read_text(encoding="utf-8")


def lines_fit(text):
    return all(len(line) <= WIDTH and line == line.rstrip() for line in text.splitlines())
