"""Tests share helpers in support/, and the exact circuit analysis with the scripts."""

import sys
from pathlib import Path

HERE = Path(__file__).resolve().parent
sys.path[:0] = [str(HERE / "support"), str(HERE.parent / "scripts")]
