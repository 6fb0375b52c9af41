"""``polefit inspect FILE``: what a file holds and how it was understood."""

from __future__ import annotations

from typing import Any

import click

from polefit.cli import options
from polefit.cli.output import Outputs, put
from polefit.cli.paths import check_paths
from polefit.cli.progress import Progress
from polefit.cli.reading import options_for


@click.command()
@click.argument("file")
@options.json_option
@options.quiet_option
@options.quantity_option()
@options.reading_options
def inspect(file: str, json: str | None, quiet: bool, **reading: Any) -> int:
    """Tell what was read from a response file, and every assumption made.

    Format, unit, scaling, decimal mark, digits, channels, band, step and termination; and what
    will limit the verdict.
    """
    outputs = Outputs(json=json, quiet=quiet)
    check_paths(json=json, inputs=[file])
    with Progress(quiet) as progress:
        progress(f"reading {file}")
        from polefit.analysis.inspection import inspect_all

        found = inspect_all(file, **options_for(reading, 0, 1))
    if json is not None:
        import json as encoder

        document = found[0].to_dict()
        if len(found) > 1:
            listed = [one.to_dict() for one in found]
            document = {"schema": "polefit.inspection-list", "version": 1, "inspections": listed}
        text = encoder.dumps(
            document, indent=2, ensure_ascii=outputs.json_on_stdout, allow_nan=False
        )
        if outputs.json_on_stdout:
            put(text)
        else:
            from polefit.atomic import write_text

            write_text(json, text + "\n")
    if not outputs.json_on_stdout and not quiet:
        put("\n\n".join(str(one) for one in found))
    return 0
