"""``polefit demo``: the whole way from files to a report, on an invented example."""

from __future__ import annotations

from importlib import resources
from importlib.resources.abc import Traversable
from pathlib import Path

import click

from polefit.cli import options
from polefit.cli.output import put, say
from polefit.cli.paths import check_replaceable
from polefit.cli.progress import Progress
from polefit.errors import FileError

EXAMPLE = "three_stage_amplifier"
RESPONSES = (".s1p",)


@click.command()
@click.option(
    "--output", default="polefit-demo", show_default=True, metavar="DIR", help="Where to write."
)
@options.quiet_option
def demo(output: str, quiet: bool) -> int:
    """Identify the bundled example and write everything that a run can write.

    The example is an invented amplifier of three stages. Ends with status 0 whatever its verdict.
    """
    folder = Path(output)
    for option, name in (("json", "result.json"), ("html", "report.html"), ("hdf5", "result.h5")):
        check_replaceable(f"--{option}", folder / name)
    with Progress(quiet) as progress:
        files = copy_example(folder)
        from polefit.analysis.identify import identify
        from polefit.atomic import write_text
        from polefit.readers import read
        from polefit.report.figures import save_figures
        from polefit.report.hdf5 import write_identification
        from polefit.report.headline import verdict_sentence
        from polefit.report.html import identification_html
        from polefit.report.json import identification_json

        result = identify([read(f) for f in files if f.suffix in RESPONSES], progress=progress)
        progress("writing the report")
        write_text(folder / "result.json", identification_json(result))
        write_text(folder / "report.html", identification_html(result))
        write_identification(folder / "result.h5", result)
        save_figures(result, folder / "figures")
    put(verdict_sentence(result) if quiet else str(result))
    if not quiet:
        say(f"written to {folder}: report.html, figures/, result.json, result.h5, the data")
    return 0


def copy_example(folder: Path) -> list[Path]:
    """Copy the files of the bundled example into `folder`, and return them by name.

    Raises
    ------
    FileError
        If the example is missing, the folder cannot be written, or it holds another file of
        such a name.
    """
    from polefit.atomic import whole_file

    copied = []
    for source in sorted(_example().iterdir(), key=lambda entry: entry.name):
        if not source.is_file():
            continue
        target = folder / source.name
        if target.is_file() and target.read_bytes() != source.read_bytes():
            raise FileError(
                "exists and is not that of the example", "give another --output", file=target
            )
        with whole_file(target) as temporary:
            temporary.write_bytes(source.read_bytes())
        copied.append(target)
    return copied


def _example() -> Traversable:
    """Find the example in the installed package, or beside it in a checkout."""
    try:
        places: list[Traversable] = [resources.files("polefit.datasets")]
    except ModuleNotFoundError:
        places = [Path(__file__).resolve().parents[2] / "datasets"]
    for place in places:
        if (place / EXAMPLE).is_dir():
            return place / EXAMPLE
    raise FileError("the bundled example is missing", "install polefit again", file=EXAMPLE)
