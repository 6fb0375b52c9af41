"""What the commands that identify modes have in common: read, ask, deliver."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from itertools import chain
from typing import TYPE_CHECKING, Any

from polefit.cli.options import checked_band
from polefit.cli.output import Outputs, deliver
from polefit.cli.paths import check_paths
from polefit.cli.progress import Progress
from polefit.cli.reading import read_files
from polefit.errors import ArgumentError

if TYPE_CHECKING:
    from polefit.report.answers import Answer


IDENTIFYING = ("confidence", "noise_relative", "noise_absolute", "detection_damping")
"""Options that are keywords of :func:`polefit.identify` as they are."""


def answer(files: Sequence[str], given: Mapping[str, Any], ask: Callable[..., Answer]) -> int:
    """Read response files, ask one question of them, and deliver the answer.

    Parameters
    ----------
    files : sequence of str
        Probes of one circuit, or with ``separately`` each a circuit of its own.
    given : mapping
        What :data:`polefit.cli.options.identification_options` took.
    ask : callable
        From the response sets of one circuit, and the keywords of :func:`polefit.identify`, to the
        answer.

    Returns
    -------
    int
        The exit status.

    Raises
    ------
    ArgumentError
        If options contradict each other.
    """
    formats, figures = given["figure_format"], given["figures"]
    if formats and figures is None:
        raise ArgumentError("--figure-format: no figures were asked for; give --figures DIR, too")
    paths = {name: given[name] for name in ("json", "html", "hdf5", "figures")}
    check_paths(**paths, inputs=files)
    outputs = Outputs(**paths, figure_formats=formats or ("png",), quiet=given["quiet"])
    band_hz = checked_band(given["band"])
    with Progress(outputs.quiet) as progress:
        responses = read_files(files, given, progress)
        progress("loading the numerics")
        groups = [[*sets] for sets in responses]
        if not given["separately"]:
            groups = [[*chain.from_iterable(groups)]]
        how = {name: given[name] for name in IDENTIFYING}
        answers = [ask(group, band_hz=band_hz, progress=progress, **how) for group in groups]
        progress("writing the report")
        return deliver(answers, outputs, separately=given["separately"])
