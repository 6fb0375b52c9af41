"""What the command line asks of any answer: a sentence, a page, a file. One place knows the kinds.

Renderers are imported when they are needed: a page takes libraries that a sentence does not.
"""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path
from typing import TYPE_CHECKING, TypeAlias

if TYPE_CHECKING:
    from polefit.confirmation import Confirmation
    from polefit.modes import Identification, Verdict

    Answer: TypeAlias = Identification | Confirmation


def identification_of(answer: Answer) -> Identification:
    """Return the identification that an answer is, or rests on."""
    from polefit.modes import Identification

    return answer if isinstance(answer, Identification) else answer.identification


def stability(answer: Answer) -> Verdict:
    """Return what an answer says of the whole circuit."""
    from polefit.modes import Identification

    return answer.verdict if isinstance(answer, Identification) else answer.overall


def sentence(answer: Answer) -> str:
    """Return the verdict in one sentence."""
    from polefit.confirmation import Confirmation

    if isinstance(answer, Confirmation):
        from polefit.report.confirmation import verdict_sentence as of_confirmation

        return of_confirmation(answer)
    from polefit.report.headline import verdict_sentence

    return verdict_sentence(answer)


def page(answers: Sequence[Answer]) -> str:
    """Return one page with all answers, which are of one kind."""
    from polefit.confirmation import Confirmation

    confirmations = [a for a in answers if isinstance(a, Confirmation)]
    if confirmations:
        from polefit.report.confirmation_page import confirmations_html

        return confirmations_html(confirmations)
    from polefit.report.html import identifications_html

    return identifications_html([identification_of(a) for a in answers])


def write_hdf5(path: Path, answer: Answer) -> None:
    """Write an answer with the data behind it."""
    from polefit.confirmation import Confirmation

    if isinstance(answer, Confirmation):
        from polefit.report.hdf5 import write_confirmation

        write_confirmation(path, answer)
    else:
        from polefit.report.hdf5 import write_identification

        write_identification(path, answer)
