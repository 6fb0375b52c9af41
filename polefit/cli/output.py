"""Where results go: standard output, standard error and files, whatever their encoding."""

from __future__ import annotations

import os
import sys
from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING, TextIO

from polefit.cli.paths import check_replaceable

if TYPE_CHECKING:
    from polefit.report.answers import Answer

# For terminals without these letters. A lost minus would turn a verdict round, so none is
# left to chance.
_PLAIN = str.maketrans(
    {
        "−": "-",
        "±": "+/-",
        "Ω": "ohm",
        "ζ": "zeta",
        "σ": "sigma",
        "µ": "u",
        "π": "pi",
        "°": "deg",
        "·": "*",
        "²": "^2",
        "…": "...",
        "←": "<-",
        "→": "->",
        "×": "x",
        "≤": "<=",
        "≥": ">=",
        "≈": "~",
        "–": "-",
        "’": "'",
        "\N{NO-BREAK SPACE}": " ",
    }
)
STATUS = {"stable": 0, "unstable": 1, "undecided": 3}


@dataclass(frozen=True)
class Outputs:
    """What the user asked to be written.

    Parameters
    ----------
    json, html, hdf5 : str or None
        Paths; ``-`` for JSON is standard output.
    figures : str or None
        Directory for figures.
    figure_formats : tuple of str
        Their formats.
    quiet : bool
        Only the verdict on standard output, and no progress.
    """

    json: str | None = None
    html: str | None = None
    hdf5: str | None = None
    figures: str | None = None
    figure_formats: tuple[str, ...] = ("png",)
    quiet: bool = False

    @property
    def json_on_stdout(self) -> bool:
        """Whether standard output belongs to the JSON."""
        return self.json == "-"


def put(text: str) -> None:
    """Write a result to standard output."""
    _write(sys.stdout, text)


def say(text: str) -> None:
    """Write a remark to standard error."""
    _write(sys.stderr, f"polefit: {text}")


def _write(stream: TextIO, text: str) -> None:
    """Write a line; a reader that has gone away (``| head``) is no error of ours."""
    try:
        stream.write(encodable(text, stream.encoding) + "\n")
        stream.flush()
    except BrokenPipeError:
        # what the interpreter flushes at its end must not fail again
        silent = os.open(os.devnull, os.O_WRONLY)
        os.dup2(silent, stream.fileno())
        os.close(silent)


def encodable(text: str, encoding: str | None) -> str:
    """Return `text` in letters that `encoding` has, without losing a sign."""
    name = encoding or "ascii"
    try:
        text.encode(name)
    except (UnicodeEncodeError, LookupError):
        return text.translate(_PLAIN).encode("ascii", "backslashreplace").decode("ascii")
    return text


def status_of(results: Sequence[Answer]) -> int:
    """Return the exit status: unstable before undecided before stable."""
    from polefit.report.answers import stability

    verdicts = {stability(result) for result in results}
    worst = next(v for v in ("unstable", "undecided", "stable") if v in verdicts)
    return STATUS[worst]


def deliver(results: Sequence[Answer], outputs: Outputs, *, separately: bool) -> int:
    """Write the files asked for, then the report; return the exit status.

    Parameters
    ----------
    results : sequence of Identification or Confirmation
        One, or one for each file; all of one kind.
    outputs : Outputs
        What to write.
    separately : bool
        Whether the results are those of separate files, so that JSON is a list, and HDF5 files
        and figure directories are named after each.

    Returns
    -------
    int
    """
    from polefit.report.answers import sentence

    _write_files(results, outputs, separately)
    if not outputs.json_on_stdout:
        shown = [sentence(r) if outputs.quiet else str(r) for r in results]
        if separately:
            shown = [f"{_name(r)}\n{text}" for r, text in zip(results, shown, strict=True)]
        put(("\n" if outputs.quiet else "\n\n\n").join(shown))
    return status_of(results)


def _write_files(results: Sequence[Answer], outputs: Outputs, separately: bool) -> None:
    from polefit.atomic import write_text
    from polefit.report import answers

    if outputs.html is not None:
        write_text(outputs.html, answers.page(results))
    stems = _stems(results) if separately else ["" for _ in results]
    for result, stem in zip(results, stems, strict=True):
        if outputs.hdf5 is not None:
            path = _suffixed(Path(outputs.hdf5), stem)
            check_replaceable("--hdf5", path)
            answers.write_hdf5(path, result)
        if outputs.figures is not None:
            from polefit.report.figures import save_figures

            identification = answers.identification_of(result)
            save_figures(identification, Path(outputs.figures) / stem, outputs.figure_formats)
    if outputs.json is not None:
        _write_json(results, outputs, separately)


def _write_json(results: Sequence[Answer], outputs: Outputs, separately: bool) -> None:
    from polefit.atomic import write_text
    from polefit.report.json import documents_json, dumped

    documents = [result.to_dict() for result in results]
    if separately:
        text = documents_json(documents, ascii_only=outputs.json_on_stdout)
    else:
        text = dumped(documents[0], outputs.json_on_stdout)
    if outputs.json_on_stdout:
        put(text.rstrip("\n"))
    else:
        write_text(str(outputs.json), text)


def _name(result: Answer) -> str:
    from polefit.report.answers import identification_of
    from polefit.report.phrases import plain

    return ", ".join(plain(s.file, 90) for s in identification_of(result).sources) or "arrays"


def _stems(results: Sequence[Answer]) -> list[str]:
    """Return a distinct short name for each result, from its file."""
    from polefit.report.answers import identification_of

    stems: list[str] = []
    for result in results:
        sources = identification_of(result).sources
        stem = Path(sources[0].file).stem if sources else "result"
        number = 2
        unique = stem
        while unique in stems:
            unique = f"{stem}-{number}"
            number += 1
        stems.append(unique)
    return stems


def _suffixed(path: Path, stem: str) -> Path:
    return path.with_name(f"{path.stem}-{stem}{path.suffix}") if stem else path
