"""``polefit identify FILE…``: from response files to a verdict."""

from __future__ import annotations

from typing import Any

import click

from polefit.cli import options
from polefit.cli.answering import answer


@click.command()
@click.argument("files", nargs=-1, required=True, metavar="FILE…")
@options.identification_options
def identify(files: tuple[str, ...], **given: Any) -> int:
    """Find the natural modes in response files and say whether one grows.

    Several FILEs are several probes of one circuit and share their modes; a one-port file names
    its node by its stem. Exit status: 0 nothing unstable, 1 unstable, 3 undecided, 2 bad input.
    """

    def ask(responses: list[Any], **how: Any) -> Any:
        """Identify one circuit."""
        from polefit.analysis.identify import identify as identify_responses

        return identify_responses(responses, **how)

    return answer(files, given, ask)
