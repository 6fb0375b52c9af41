"""``polefit identify FILE…``: from response files to a verdict."""

from __future__ import annotations

from itertools import chain
from typing import Any

import click

from polefit.cli import options
from polefit.cli.output import Outputs, deliver
from polefit.cli.paths import check_paths
from polefit.cli.progress import Progress
from polefit.cli.reading import read_files
from polefit.errors import ArgumentError


@click.command()
@click.argument("files", nargs=-1, required=True, metavar="FILE…")
@options.band_option
@click.option(
    "--confidence",
    type=options.Number(0.5, 1, min_open=True, max_open=True),
    default=0.95,
    metavar="P",
    show_default=True,
    help="Confidence of the verdicts.",
)
@click.option(
    "--detection-damping",
    type=options.Number(-1, 1, min_open=True, max_open=True),
    default=-0.01,
    metavar="ZETA",
    show_default=True,
    help="Damping ratio of the hidden mode for which it is told what would have gone unnoticed.",
)
@click.option("--separately", is_flag=True, help="Each FILE is a circuit of its own.")
@options.json_option
@options.html_option
@options.hdf5_option
@options.figures_option
@options.figure_format_option
@options.quiet_option
@options.quantity_option(
    [name for name in options.QUANTITY_NAMES if name not in options.NOT_IDENTIFIED]
)
@options.reading_options
def identify(
    files: tuple[str, ...],
    band: tuple[float, float] | None,
    confidence: float,
    detection_damping: float,
    separately: bool,
    json: str | None,
    html: str | None,
    hdf5: str | None,
    figures: str | None,
    figure_format: tuple[str, ...],
    quiet: bool,
    **reading: Any,
) -> int:
    """Find the natural modes in response files and say whether one grows.

    Several FILEs are several probes of one circuit and share their modes; a one-port file names
    its node by its stem. Exit status: 0 nothing unstable, 1 unstable, 3 undecided, 2 bad input.
    """
    if figure_format and figures is None:
        raise ArgumentError("--figure-format: no figures were asked for; give --figures DIR, too")
    check_paths(json=json, html=html, hdf5=hdf5, figures=figures, inputs=files)
    outputs = Outputs(json, html, hdf5, figures, figure_format or ("png",), quiet)
    band_hz = options.checked_band(band)
    with Progress(quiet) as progress:
        responses = read_files(files, reading, progress)
        progress("loading the numerics")
        from polefit.analysis.identify import identify as identify_responses

        groups = [[*sets] for sets in responses]
        if not separately:
            groups = [[*chain.from_iterable(groups)]]
        results = [
            identify_responses(
                group,
                band_hz=band_hz,
                confidence=confidence,
                detection_damping=detection_damping,
                progress=progress,
            )
            for group in groups
        ]
        progress("writing the report")
        return deliver(results, outputs, separately=separately)
