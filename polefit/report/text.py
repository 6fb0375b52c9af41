"""The text report: verdict first, then the modes, then what they rest on."""

from __future__ import annotations

import textwrap
from collections.abc import Iterable, Sequence

from polefit.estimates import si
from polefit.modes import Identification, Mode
from polefit.report import glossary, headline, nodes, phrases, wording

WIDTH = 100
_HEADINGS = ("", "", "frequency", "damping ratio", "time constant")
_GAP = "  "
_HELD = "\x00"  # a blank at which a line must not break
_FEW = 4  # modes that are all shown with their nodes
_NODES_IN_TABLE = 4
_NODES_IN_LOOP = 8
_BACKGROUND = 8
_FILES = 12


def identification_text(result: Identification) -> str:
    """Return the report of an identification, at most 100 columns wide, without colour.

    Parameters
    ----------
    result : Identification
        The answer.

    Returns
    -------
    str
        Lines without blanks at their ends; no newline at the end.
    """
    blocks = [
        wrapped(headline.verdict_sentence(result)),
        section("Modes, most dangerous first", _modes(result)),
        *(_loop(result, i) for i in range(len(result.loops))),
        section("What to simulate next", next_points(result.next_points_hz)),
        section("Evidence", _evidence(result)),
        section("What the verdict rests on", _basis(result)),
        section("Poles of the model that are not claimed as modes", _background(result)),
        section("Read", files_read(result)),
        section("Notes", bullets(wording.notes(result))),
        section("Caution", bullets(wording.CAUTIONS)),
    ]
    return joined(blocks)


def joined(blocks: Iterable[Sequence[str]]) -> str:
    """Join blocks of lines, an empty line between two; no blanks at the ends of lines."""
    text = "\n\n".join("\n".join(block) for block in blocks if block)
    return "\n".join(line.rstrip() for line in text.splitlines())


def wrapped(text: str, first: str = "", rest: str = "") -> list[str]:
    """Wrap one paragraph, never between a number and its uncertainty or unit."""
    glued = phrases.glued(phrases.plain(text, 4000), _HELD)
    lines = textwrap.wrap(
        glued, WIDTH, initial_indent=first, subsequent_indent=rest, break_on_hyphens=False
    )
    return [line.replace(_HELD, " ") for line in lines]


def section(title: str, lines: Sequence[str]) -> list[str]:
    """Put a title over lines; nothing over nothing."""
    return [title, *lines] if lines else []


def bullets(texts: Iterable[str]) -> list[str]:
    """Write a list, one entry below the other."""
    return [line for text in texts for line in wrapped(text, "  - ", "    ")]


def _modes(result: Identification) -> list[str]:
    if not result.modes:
        return ["  none was found in the data"]
    return mode_table(result, range(len(result.modes)), wording.in_full(result, _FEW))


def mode_table(
    result: Identification, indices: Sequence[int], full: Sequence[int] = ()
) -> list[str]:
    """Tabulate some modes of a result, those of `full` with their nodes."""
    listed = [(i, result.modes[i]) for i in indices]
    rows = [_HEADINGS, *(_row(i, mode) for i, mode in listed)]
    widths = [max(len(row[c]) for row in rows) for c in range(len(_HEADINGS))]
    indent = " " * (2 + widths[0] + len(_GAP))
    lines = [_line(_HEADINGS, widths)]
    for (i, mode), row in zip(listed, rows[1:], strict=True):
        lines.append(_line(row, widths))
        if i in full:
            lines.extend(wrapped(_second_line(mode), indent, indent))
    explained = nodes.node_note([mode for i, mode in listed if i in full])
    lines.extend(wrapped(explained, "  ", "  "))
    if any(phrases.is_sharp(mode) for _, mode in listed):
        lines.append(f"  {phrases.SHARP_NOTE}")
    if not all(mode.in_band for _, mode in listed):
        lines.append("  * at the edge of the band or outside: it does not decide the verdict.")
    return lines


def _line(row: Sequence[str], widths: Sequence[int]) -> str:
    return "  " + _GAP.join(cell.ljust(width) for cell, width in zip(row, widths, strict=True))


def _row(index: int, mode: Mode) -> tuple[str, ...]:
    word = mode.verdict.upper() if mode.verdict != "stable" else "stable"
    ratio = mode.damping_ratio
    shown = si(ratio.value) if mode.real else phrases.uncrowded(ratio.text())
    time = f"{phrases.trend(mode)}, {phrases.time_constant(mode)}"
    return str(index + 1), word if mode.in_band else f"{word}*", phrases.rings_at(mode), shown, time


def _second_line(mode: Mode) -> str:
    parts = [f"P(unstable) {phrases.probability(mode.probability_unstable)}"]
    if mode.real:
        parts.append(f"|p|/2π {phrases.natural(mode)}")
    if mode.seen_hz:
        parts.append(wording.sightings(mode))
    strengths = nodes.node_strengths(mode)
    if strengths:
        shown = ", ".join(phrases.plain(s.brief, 40) for s in strengths[:_NODES_IN_TABLE])
        rest = len(strengths) - _NODES_IN_TABLE
        parts.append(shown + (f" and {rest} more" if rest > 0 else ""))
    return "; ".join(parts)


def _loop(result: Identification, index: int) -> list[str]:
    loop = result.loops[index]
    mode = result.modes[loop.mode]
    title = f"Suspect loop {index + 1}: mode {loop.mode + 1}, {phrases.label(mode)}"
    rows = nodes.loop_table(result, index, _NODES_IN_LOOP)
    lines = table(rows)
    rest = len(loop.nodes) - (len(rows) - 1)
    if rest > 0:
        lines.append(f"  {nodes.more_nodes(rest)}")
    return section(title, lines)


def table(rows: Sequence[Sequence[str]]) -> list[str]:
    """Write rows with their columns below each other."""
    widths = [max(len(row[c]) for row in rows) for c in range(len(rows[0]))]
    return [_line(row, widths) for row in rows]


def next_points(points: Sequence[float]) -> list[str]:
    """List what to simulate next, with a line to paste."""
    if not points:
        return []
    lines = wrapped(wording.next_points(points), "  ", "  ")
    lines += textwrap.wrap(
        wording.pasteable(points),
        WIDTH,
        initial_indent="    ",
        subsequent_indent="    ",
        break_on_hyphens=False,
        break_long_words=False,
    )
    sweep = wording.as_sweep(points)
    return [*lines, f"  evenly spaced: {sweep}"] if sweep else lines


def _evidence(result: Identification) -> list[str]:
    suspects = {loop.mode for loop in result.loops}
    return evidence(
        result,
        [i for i, m in enumerate(result.modes) if m.verdict != "stable" or i in suspects],
    )


def evidence(result: Identification, indices: Iterable[int]) -> list[str]:
    """List the tests of some modes of a result."""
    lines: list[str] = []
    shown: list[Mode] = []
    for i in indices:
        mode = result.modes[i]
        if not mode.evidence:
            continue
        lines.append(f"  Mode {i + 1}, {phrases.label(mode)}")
        for test in mode.evidence:
            sentence = wording.evidence_sentence(test.name, test.passed, test.detail)
            lines.extend(wrapped(sentence, "    ", "      "))
        shown.append(mode)
    meaning = glossary.explained(shown)
    if meaning:
        lines.append("  What they ask")
    for name, asks in meaning:
        lines.extend(wrapped(f"{name}: {asks}", "    ", "      "))
    return lines


def _basis(result: Identification) -> list[str]:
    return headed([("Reason", phrases.sentence(result.reason)), *wording.basis(result)])


def headed(rows: Sequence[tuple[str, str]]) -> list[str]:
    """Write sentences beside their headings."""
    width = max(len(heading) for heading, _ in rows)
    lines: list[str] = []
    for heading, text in rows:
        lines.extend(wrapped(text, f"  {heading.ljust(width)}  ", " " * (width + 4)))
    return lines


def _background(result: Identification) -> list[str]:
    lines: list[str] = []
    for pole in result.background[:_BACKGROUND]:
        frequency, ratio, reason = wording.background_row(pole)
        lines.extend(wrapped(f"{frequency}, damping ratio {ratio}: {reason}", "  - ", "    "))
    rest = len(result.background) - _BACKGROUND
    if rest > 0:
        lines.append(f"  and {rest} more")
    return lines


def files_read(result: Identification) -> list[str]:
    """List the files behind a result, and what was assumed of them."""
    lines: list[str] = []
    for source in result.sources[:_FILES]:
        head = f"{phrases.plain(source.file, 70)}: {source.format}, sha256 {source.sha256[:16]}…"
        lines.extend(wrapped(head, "  - ", "    "))
    rest = len(result.sources) - _FILES
    if rest > 0:
        lines.append(f"  - and {rest} more files")
    assumed = dict.fromkeys(a for source in result.sources for a in source.assumptions)
    for assumption in assumed:
        lines.extend(wrapped(f"assumed: {assumption}", "  - ", "    "))
    return lines
