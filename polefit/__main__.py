"""``python -m polefit``: the same as the command ``polefit``."""

from polefit.cli import run

if __name__ == "__main__":
    run()
