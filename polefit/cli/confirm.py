"""``polefit confirm FILE… --near HZ``: a predicted oscillation held against response files."""

from __future__ import annotations

from typing import Any

import click

from polefit.cli import options
from polefit.cli.answering import answer
from polefit.errors import ArgumentError


@click.command()
@click.argument("files", nargs=-1, required=True, metavar="FILE…")
@click.option(
    "--near",
    type=options.Frequency(),
    required=True,
    metavar="HZ",
    help="The predicted frequency, such as 1.5GHz.",
)
@click.option(
    "--within",
    type=options.Number(0, 1, min_open=True, max_open=True),
    default=0.1,
    metavar="SHARE",
    show_default=True,
    help="Half of the range relative to it: 0.1 is ± 10 %.",
)
@options.identification_options
def confirm(files: tuple[str, ...], near: float, within: float, **given: Any) -> int:
    """Say whether a mode grows where an oscillation was predicted, or what is there instead.

    Several FILEs are several probes of one circuit. Exit status: 1 confirmed, or another mode is
    unstable; 0 refuted and nothing unstable; 3 undecided, or another mode is; 2 bad input.
    """
    if near == 0:
        raise ArgumentError("--near: 0 Hz is no frequency of an oscillation; give e.g. 1.5GHz")

    def ask(responses: list[Any], **how: Any) -> Any:
        """Hold the prediction against one circuit."""
        from polefit.analysis.confirm import confirm as confirm_responses

        return confirm_responses(responses, near, within, **how)

    return answer(files, given, ask)
