"""What each test of a mode asks, in one plain sentence, keyed by the name of the test."""

from __future__ import annotations

from collections.abc import Iterable

from polefit.modes import Mode

_ASKS = {
    "growth rate": "does the mode surely grow, or surely decay? Its growth rate must lie further "
    "from zero than noise would move it.",
    "residue": "is it more than noise? Its residues must stand out by more than a spare pole "
    "fitted to noise would, a growing mode's by twice as much.",
    "persistence over orders": "is it still there, on the same side, when the model may use more "
    "poles? It may move by half its width.",
    "stable-model misfit": "can a model without a growing pole explain the same data? It must fit "
    "clearly worse.",
    "persistence over windows": "is it still there when only a part of the sweep is fitted? A real "
    "mode does not depend on where the sweep begins and ends.",
    "persistence over starts": "does the fit come to the same pole from other starting poles? A "
    "chance result of the search would not come back.",
    "projection on unstable functions": "is there a part of the response that no sum of decaying "
    "modes can have, whatever the order? It must stand above the error of the interpolation.",
    "frequency division": "does the mode lie at half the frequency of the drive as one line, or is "
    "it a pair mirrored about it? One line within its uncertainty is a division.",
    "images": "do its lines at other sidebands agree that it grows? The line alone and all of them "
    "together must say the same.",
    "plausibility of the data": "can a circuit have given these numbers? A phase that is missing, "
    "wrong or of the wrong sign shows as growing modes.",
    "image consistency": "in a circuit under periodic drive, do the images of the mode at the "
    "sidebands agree with it? They must lie where the drive puts them.",
}


def asks(name: str) -> str | None:
    """Return the sentence that explains a test; None for one that is not known here."""
    return _ASKS.get(name)


def explained(modes: Iterable[Mode]) -> tuple[tuple[str, str], ...]:
    """Return (name, what it asks) for each test made on these modes, in order, known ones only."""
    names = dict.fromkeys(test.name for mode in modes for test in mode.evidence)
    return tuple((name, _ASKS[name]) for name in names if name in _ASKS)
