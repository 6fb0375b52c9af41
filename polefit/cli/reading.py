"""From the options of the command line to the responses in the files."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import TYPE_CHECKING, Any

from polefit.cli.options import names
from polefit.errors import ArgumentError

if TYPE_CHECKING:
    from polefit.cli.progress import Progress
    from polefit.responses import ResponseSet

READING = (
    "quantity",
    "driven",
    "select",
    "node",
    "decimal",
    "delimiter",
    "frequency_unit",
    "form",
    "angle_unit",
    "scaling",
    "reference_ohm",
    "pump_hz",
)


def options_for(given: Mapping[str, Any], index: int, count: int) -> dict[str, Any]:
    """Return the keyword arguments of ``read`` for one of several files.

    Parameters
    ----------
    given : mapping
        The options of the command.
    index, count : int
        Which file, of how many.

    Returns
    -------
    dict

    Raises
    ------
    ArgumentError
        If an option that goes with each file was given another number of times.
    """
    options = {name: given.get(name) for name in READING}
    options["select"] = names(tuple(given.get("select") or ())) or None
    options["driven"] = _one(
        tuple(given.get("driven") or ()), "--driven", index, count, shared=True
    )
    nodes = tuple(given.get("node") or ())
    if count == 1 and len(nodes) > 1:
        nodes = (",".join(nodes),)  # the ports of one file, one by one
    options["node"] = _one(nodes, "--node", index, count, shared=False)
    return {name: value for name, value in options.items() if value is not None}


def _one(
    values: tuple[str, ...], option: str, index: int, count: int, *, shared: bool
) -> str | None:
    if not values:
        return None
    if len(values) == count:
        return values[index]
    if shared and len(values) == 1:
        return values[0]
    once = "once, or once for each file" if shared else "once for each file"
    times = "once" if len(values) == 1 else f"{len(values)} times"
    files = "one file" if count == 1 else f"{count} files"
    raise ArgumentError(f"{option}: given {times} for {files}; give it {once}")


def read_files(
    files: Sequence[str], given: Mapping[str, Any], progress: Progress
) -> list[tuple[ResponseSet, ...]]:
    """Read all files: the response sets of each, of which only HDF5 holds more than one.

    Raises
    ------
    PolefitError
        If a file cannot be read; the message names it.
    """
    from polefit.readers import read_all

    found = []
    for i, file in enumerate(files):
        progress(f"reading {file}")
        found.append(read_all(file, **options_for(given, i, len(files))))
    return found
