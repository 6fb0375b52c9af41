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
        _wrapped(headline.verdict_sentence(result)),
        _section("Modes, most dangerous first", _modes(result)),
        *(_loop(result, i) for i in range(len(result.loops))),
        _section("What to simulate next", _next(result)),
        _section("Evidence", _evidence(result)),
        _section("What the verdict rests on", _basis(result)),
        _section("Poles of the model that are not claimed as modes", _background(result)),
        _section("Read", _read(result)),
        _section("Notes", _bullets(wording.notes(result))),
        _section("Caution", _bullets(wording.CAUTIONS)),
    ]
    text = "\n\n".join("\n".join(block) for block in blocks if block)
    return "\n".join(line.rstrip() for line in text.splitlines())


def _wrapped(text: str, first: str = "", rest: str = "") -> list[str]:
    """Wrap one paragraph, never between a number and its uncertainty or unit."""
    glued = phrases.glued(phrases.plain(text, 4000), _HELD)
    lines = textwrap.wrap(
        glued, WIDTH, initial_indent=first, subsequent_indent=rest, break_on_hyphens=False
    )
    return [line.replace(_HELD, " ") for line in lines]


def _section(title: str, lines: Sequence[str]) -> list[str]:
    return [title, *lines] if lines else []


def _bullets(texts: Iterable[str]) -> list[str]:
    return [line for text in texts for line in _wrapped(text, "  - ", "    ")]


def _modes(result: Identification) -> list[str]:
    if not result.modes:
        return ["  none was found in the data"]
    rows = [_HEADINGS, *(_row(i, mode) for i, mode in enumerate(result.modes))]
    widths = [max(len(row[c]) for row in rows) for c in range(len(_HEADINGS))]
    lines = []
    full = wording.in_full(result, _FEW)
    for i, row in enumerate(rows):
        cells = (cell.ljust(width) for cell, width in zip(row, widths, strict=True))
        lines.append("  " + _GAP.join(cells))
        if i and i - 1 in full:
            indent = " " * (2 + widths[0] + len(_GAP))
            lines.extend(_wrapped(_second_line(result.modes[i - 1]), indent, indent))
    lines.extend(_wrapped(nodes.node_note([result.modes[i] for i in full]), "  ", "  "))
    if any(phrases.is_sharp(mode) for mode in result.modes):
        lines.append(f"  {phrases.SHARP_NOTE}")
    if not all(mode.in_band for mode in result.modes):
        lines.append("  * at the edge of the band or outside: it does not decide the verdict.")
    return lines


def _row(index: int, mode: Mode) -> tuple[str, ...]:
    word = mode.verdict.upper() if mode.verdict != "stable" else "stable"
    if mode.real:
        frequency = f"{phrases.hertz(mode.natural_frequency_hz.value, 5)}, real pole"
        ratio = si(mode.damping_ratio.value)
    else:
        frequency = phrases.uncrowded(mode.frequency_hz.text("Hz"))
        ratio = phrases.uncrowded(mode.damping_ratio.text())
    time = f"{phrases.trend(mode)}, {phrases.time_constant(mode)}"
    return str(index + 1), word if mode.in_band else f"{word}*", frequency, ratio, time


def _second_line(mode: Mode) -> str:
    parts = [f"P(unstable) {phrases.probability(mode.probability_unstable)}"]
    if mode.real:
        parts.append(f"|p|/2π {phrases.natural(mode)}")
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
    widths = [max(len(row[c]) for row in rows) for c in range(len(rows[0]))]
    lines = [
        "  " + _GAP.join(cell.ljust(width) for cell, width in zip(row, widths, strict=True))
        for row in rows
    ]
    rest = len(loop.nodes) - (len(rows) - 1)
    if rest > 0:
        lines.append(f"  {nodes.more_nodes(rest)}")
    return _section(title, lines)


def _next(result: Identification) -> list[str]:
    if not result.next_points_hz:
        return []
    lines = _wrapped(wording.next_points(result), "  ", "  ")
    lines += textwrap.wrap(
        wording.pasteable(result),
        WIDTH,
        initial_indent="    ",
        subsequent_indent="    ",
        break_on_hyphens=False,
        break_long_words=False,
    )
    sweep = wording.as_sweep(result)
    return [*lines, f"  evenly spaced: {sweep}"] if sweep else lines


def _evidence(result: Identification) -> list[str]:
    suspects = {loop.mode for loop in result.loops}
    lines: list[str] = []
    shown: list[Mode] = []
    for i, mode in enumerate(result.modes):
        if (mode.verdict == "stable" and i not in suspects) or not mode.evidence:
            continue
        lines.append(f"  Mode {i + 1}, {phrases.label(mode)}")
        for test in mode.evidence:
            sentence = wording.evidence_sentence(test.name, test.passed, test.detail)
            lines.extend(_wrapped(sentence, "    ", "      "))
        shown.append(mode)
    meaning = glossary.explained(shown)
    if meaning:
        lines.append("  What they ask")
    for name, asks in meaning:
        lines.extend(_wrapped(f"{name}: {asks}", "    ", "      "))
    return lines


def _basis(result: Identification) -> list[str]:
    rows = [("Reason", phrases.sentence(result.reason)), *wording.basis(result)]
    width = max(len(heading) for heading, _ in rows)
    lines: list[str] = []
    for heading, text in rows:
        lines.extend(_wrapped(text, f"  {heading.ljust(width)}  ", " " * (width + 4)))
    return lines


def _background(result: Identification) -> list[str]:
    lines: list[str] = []
    for pole in result.background[:_BACKGROUND]:
        frequency, ratio, reason = wording.background_row(pole)
        lines.extend(_wrapped(f"{frequency}, damping ratio {ratio}: {reason}", "  - ", "    "))
    rest = len(result.background) - _BACKGROUND
    if rest > 0:
        lines.append(f"  and {rest} more")
    return lines


def _read(result: Identification) -> list[str]:
    lines: list[str] = []
    for source in result.sources[:_FILES]:
        head = f"{phrases.plain(source.file, 70)}: {source.format}, sha256 {source.sha256[:16]}…"
        lines.extend(_wrapped(head, "  - ", "    "))
    rest = len(result.sources) - _FILES
    if rest > 0:
        lines.append(f"  - and {rest} more files")
    assumed = dict.fromkeys(a for source in result.sources for a in source.assumptions)
    for assumption in assumed:
        lines.extend(_wrapped(f"assumed: {assumption}", "  - ", "    "))
    return lines
