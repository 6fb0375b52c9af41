"""A confirmation in words: the verdict in one sentence, and the text report."""

from __future__ import annotations

from dataclasses import replace

from polefit.confirmation import Confirmation, NodeLimit
from polefit.estimates import si
from polefit.modes import Mode
from polefit.report import headline, limits, phrases, text, wording

LIMIT_HEADINGS = ("node", "at worst above", "at", "blind")
_NODES = 8


def verdict_sentence(answer: Confirmation) -> str:
    """Give the verdict in one sentence, the word in capitals first."""
    body = {"confirmed": _confirmed, "refuted": _refuted}.get(answer.verdict, _undecided)(answer)
    return f"{answer.verdict.upper()}: {body}"


def short_form(answer: Confirmation) -> str:
    """Return the answer in one short line, for the prompt of an interpreter."""
    found = phrases.counted(len(answer.in_range), "mode")
    return f"<Confirmation: {answer.verdict}; {found} {prediction(answer)}>"


def prediction(answer: Confirmation) -> str:
    """Write the range as it was asked for."""
    return f"near {si(answer.near_hz, 'Hz', 6)} ± {si(100 * answer.within, '', 3)} %"


def _confirmed(answer: Confirmation) -> str:
    assert answer.mode is not None, "what confirms is a mode"
    core = f"{headline.growth(answer.mode)}{headline.loads(answer.identification)}"
    as_asked = f"{core}, as predicted {prediction(answer)}"
    return headline.joined([as_asked, headline.strongest(answer.mode), elsewhere_warning(answer)])


def _refuted(answer: Confirmation) -> str:
    core = f"nothing grows {prediction(answer)}{headline.loads(answer.identification)}"
    there = "no resonance was found there"
    if answer.mode is not None:
        there = _resonance(answer.mode)
        rest = len(answer.in_range) - 1
        if rest:
            there += f", and so {'does' if rest == 1 else 'do'} {phrases.counted(rest, 'other')}"
    return headline.joined([core, there, elsewhere_warning(answer), limit(answer)])


def _resonance(mode: Mode) -> str:
    return (
        f"the resonance at {phrases.label(mode)} with damping ratio "
        f"{phrases.brief(mode.damping_ratio)} decays"
    )


def _undecided(answer: Confirmation) -> str:
    core = f"whether a mode grows {prediction(answer)} cannot be told"
    return headline.joined(
        [
            f"{core}: {phrases.tidy(answer.reasons[0])}",
            elsewhere_warning(answer),
            headline.next_step(answer.next_points_hz),
        ]
    )


def elsewhere_warning(answer: Confirmation) -> str:
    """Name what grows or may grow outside the range; or nothing."""
    modes = [answer.identification.modes[i] for i in answer.elsewhere]
    lead = "" if answer.verdict == "confirmed" else "BUT "
    parts = [
        _others([m for m in modes if m.in_band and m.verdict == "unstable"], "grow"),
        _others([m for m in modes if m.in_band and m.verdict == "undecided"], "may grow"),
    ]
    told = [f"{lead}{part}" for part in parts if part]
    inside = [answer.identification.modes[i] for i in answer.in_range]
    edge = headline.edge_warning(answer.identification)
    if edge and all(m.in_band or m.verdict == "stable" for m in inside):
        told.append(edge)
    return "; ".join(told)


def _others(modes: list[Mode], verb: str) -> str:
    if not modes:
        return ""
    places = phrases.listed((phrases.label(mode) for mode in modes), 3)
    if len(modes) > 1:
        return f"{len(modes)} modes {verb} elsewhere ({places})"
    return f"a mode elsewhere ({places}) {verb if verb.startswith('may') else f'{verb}s'}"


def limit(answer: Confirmation) -> str:
    """Say which mode would have been found in the range; or nothing."""
    if answer.view is None:
        return ""
    found = limits.detection_limit(replace(answer.identification, detection=answer.view.detection))
    return f"in the range {found}" if found else ""


def rows(answer: Confirmation) -> list[tuple[str, str]]:
    """Return what was asked and why the answer is as it is, as headings and sentences."""
    heading = "Open because" if answer.verdict == "undecided" else "Because"
    found = [("Prediction", f"a mode grows {prediction(answer)}: {phrases.band(answer.range_hz)}")]
    found += [(heading if i == 0 else "and", one) for i, one in enumerate(answer.reasons)]
    view = answer.view
    if view is None:
        found.append(("Samples", "what the data could have shown in the range is not known"))
    else:
        found.append(
            (
                "Samples",
                f"{phrases.counted(view.points, 'point')} in the range, at most "
                f"{si(view.step_hz, 'Hz', 3)} apart (near {si(view.step_at_hz, 'Hz', 3)})",
            )
        )
    return [(head, phrases.sentence(line)) for head, line in found]


def limit_rows(answer: Confirmation) -> list[tuple[str, ...]]:
    """Tabulate what would have been found at each node: headings first; nothing if not known."""
    if answer.view is None or not answer.view.limits:
        return []
    return [LIMIT_HEADINGS, *(_limit_row(answer, one) for one in answer.view.limits[:_NODES])]


def limit_title(answer: Confirmation) -> str:
    """Say what the table of limits is about."""
    if answer.view is None:
        return ""
    ratio = si(answer.view.detection.damping_ratio, "", 2)
    return f"What would have been found in the range, of a mode with damping ratio {ratio}"


def _limit_row(answer: Confirmation, one: NodeLimit) -> tuple[str, ...]:
    return (
        phrases.plain(str(one.channel), 30),
        limits.height(one.peak, one.relative, answer.identification.quantity),
        phrases.hertz(one.frequency_hz, 3),
        _blind_part(answer, one),
    )


def _blind_part(answer: Confirmation, one: NodeLimit) -> str:
    """Say whether a node is blind in the range; where, the identification tells."""
    if not one.blind_hz:
        return "nowhere"
    (low, high), (start, end) = answer.range_hz, answer.identification.band_hz
    return "everywhere" if one.blind_hz == ((max(low, start), min(high, end)),) else "in part"


def confirmation_text(answer: Confirmation) -> str:
    """Return the report of a confirmation, at most 100 columns wide, without colour.

    Parameters
    ----------
    answer : Confirmation
        The answer.

    Returns
    -------
    str
        Lines without blanks at their ends; no newline at the end.
    """
    result = answer.identification
    doubtful = [i for i in answer.elsewhere if result.modes[i].verdict != "stable"]
    there = text.mode_table(result, answer.in_range, answer.in_range) if answer.in_range else []
    table = limit_rows(answer)
    return text.joined(
        [
            text.wrapped(verdict_sentence(answer)),
            text.section("What was asked", text.headed(rows(answer))),
            text.section("Modes in the range", there or ["  none was found there"]),
            text.section(
                "Modes elsewhere, nearest first",
                text.mode_table(result, answer.elsewhere) if answer.elsewhere else [],
            ),
            text.section(limit_title(answer), text.table(table) if table else []),
            text.section("What to simulate next", text.next_points(answer.next_points_hz)),
            text.section("Evidence", text.evidence(result, [*answer.in_range, *doubtful])),
            text.section("The identification behind it", _behind(answer)),
            text.section("Read", text.files_read(result)),
            text.section("Notes", text.bullets(notes(answer))),
            text.section("Caution", text.bullets(wording.CAUTIONS)),
        ]
    )


def _behind(answer: Confirmation) -> list[str]:
    result = answer.identification
    verdict = ("Verdict", headline.verdict_sentence(result))
    return text.headed([verdict, *wording.basis(result)])


def notes(answer: Confirmation) -> tuple[str, ...]:
    """Return the notes on the answer, then those of the identification behind it."""
    return tuple(
        dict.fromkeys((*map(phrases.tidy, answer.notes), *wording.notes(answer.identification)))
    )
