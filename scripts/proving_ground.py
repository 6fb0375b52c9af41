"""Random circuits with exactly known modes, and how identification fares on them.

    scripts/proving_ground [--quick] [--cases N] [--seed S] [--family NAME] [--naive] [--show]

One row for each family, then the worst cases. Seeded; nothing is written unless asked for with
--json. A case is made again by its family and seed: --family X --seed S --cases 1 --show.
"""

from __future__ import annotations

import argparse
import json
import math
import time
import warnings
from collections.abc import Iterator
from concurrent.futures import ProcessPoolExecutor
from multiprocessing import get_context
from pathlib import Path

from benchmark import skrf_fit
from proving.case import Case
from proving.families import FAMILIES, cases
from proving.scoring import Score, score
from proving.summary import Summary
from proving.tools import TOOLS
from threadpoolctl import threadpool_limits

import polefit
from polefit.atomic import write_text

CASES = 40
QUICK = 8
WORST = 10
FEWEST_POLES = 2
HEADS = (
    ("family", 12), ("cases", 6), ("unst", 5), ("stab", 5), ("open", 5),
    ("F-unst", 7), ("F-stab", 7), ("undec", 6), ("error", 6), ("edge", 5), ("spare", 6),
    ("grow", 5), ("blend", 6), ("alarm", 6), ("missed", 7), ("found", 6), ("cov σ", 6),
    ("cov f", 6), ("rms", 8), ("robust", 7), ("ms", 6), ("ratio", 6), ("worst", 6),
)  # fmt: skip
LEGEND = """\
unst/stab/open: cases whose answer can be expected (a detectable mode grows; nothing grows and all
modes are detectable or buried) or not. F-unst, F-stab: wrong verdicts. undec: undecided though the
answer is not open. edge: unstable where a mode grows just outside the band. spare: claims without
a mode, grow: those with σ > 0; blend: claims amid poles that cannot be resolved; alarm:
growing claims outside the band though nothing grows. missed, found:
detectable modes (|σ| at least 6 bounds). cov: coverage of the 95 % intervals. rms, robust: error of
σ over its Cramér-Rao bound, and the same from the median. ms: median time. ratio, worst: time over
one scikit-rf fit of one channel at the same order, geometric mean and largest. Lines and delays
have more modes than the bound can hold unknown: there it is too small for heavily damped ones."""


def judged(task: tuple[str, int, str, bool]) -> Score:
    """Make one case, ask a tool, and score the answer; (family, seed, tool, timed)."""
    family, seed, tool, timed = task
    with warnings.catch_warnings(), threadpool_limits(1):
        warnings.simplefilter("ignore")
        case = next(cases(family, 1, seed))
        answer = TOOLS[tool](case)
        ratio = math.nan
        if timed and answer.verdict != "error":
            ratio = answer.seconds / _fixed_order_seconds(case, max(answer.order, FEWEST_POLES))
        return score(case, answer, ratio)


def _fixed_order_seconds(case: Case, order: int) -> float:
    fit = skrf_fit(case.responses, order)
    start = time.perf_counter()
    fit()
    return time.perf_counter() - start


def scores(
    families: list[str], count: int, seed: int, tool: str, timed: bool, processes: int
) -> Iterator[Score]:
    """Score cases of several families, in order."""
    tasks = [(f, seed + i, tool, timed) for f in families for i in range(count)]
    if processes == 1:
        yield from map(judged, tasks)
        return
    with ProcessPoolExecutor(processes, mp_context=get_context("spawn")) as pool:
        yield from pool.map(judged, tasks)


def row(name: str, found: list[Score]) -> str:
    """Return one line of the table."""
    summary = Summary(tuple(found))
    mean, worst = summary.ratios
    accuracy = summary.accuracy
    times = sorted(s.answer.seconds for s in found)
    cells = [
        name, len(found), *(summary.answers(k) for k in ("unstable", "stable", "open")),
        summary.count("false_unstable"), summary.count("false_stable"), summary.count("undecided"),
        sum(s.answer.verdict == "error" for s in found), summary.count("edge"),
        summary.count("spare"), sum(c.pole.real > 0 for s in found for c in s.spare),
        *(summary.count(name) for name in ("blended", "alarms", "missed", "hits")),
        *(_short(accuracy.coverage(f"{part}_covered"), 3) for part in ("growth", "angular")),
        _short(accuracy.rms, 2), _short(accuracy.robust, 2),
        f"{1e3 * times[len(times) // 2]:.0f}", _short(mean, 2), _short(worst, 1),
    ]  # fmt: skip
    return "".join(
        f"{c!s:<{w}}" if i == 0 else f"{c!s:>{w}}"
        for i, (c, (_, w)) in enumerate(zip(cells, HEADS, strict=True))
    )


def _short(value: float, places: int) -> str:
    if math.isnan(value):
        return "-"
    return f"{value:.{places}f}" if value < 1000 else f"{value:.1e}"


def heading() -> str:
    """Return the heads of the table."""
    return "".join(f"{h:<{w}}" if i == 0 else f"{h:>{w}}" for i, (h, w) in enumerate(HEADS))


def table(options: argparse.Namespace, tool: str, families: list[str]) -> list[Score]:
    """Print the table of one tool and return the scores."""
    print(f"\n{tool}\n{heading()}")
    everything: list[Score] = []
    timed = tool == "polefit" and not options.untimed
    for family in families:
        found = list(scores([family], options.cases, options.seed, tool, timed, options.processes))
        print(row(family, found), flush=True)
        everything += found
    if len(families) > 1:
        print(row("all", everything))
    return everything


def details(summary: Summary) -> None:
    """Print verdicts by detectability, and intervals and errors by damping."""
    print("\nVerdicts of polefit by |σ| over its bound of what grows in the band")
    for name, counts in summary.by_detectability().items():
        print(f"{name:>16}  " + "  ".join(f"{v} {n:4d}" for v, n in counts.items()))
    print("\nDetectable modes: coverage of σ and f, error of σ over its bound, claimed over bound")
    print(f"{'':16}{'modes':>7}{'cov σ':>8}{'cov f':>8}{'rms':>8}{'robust':>8}{'claimed':>9}")
    for name, accuracy in summary.by_damping().items():
        parts = [accuracy.coverage(f"{part}_covered") for part in ("growth", "angular")]
        cells = [*parts, accuracy.rms, accuracy.robust]
        numbers = "".join(f"{_short(c, 2):>8}" for c in cells)
        print(f"{name:>16}{len(accuracy.hits):7d}{numbers}{_short(accuracy.claimed, 2):>9}")


def show(one: Score) -> None:
    """Print a case in full: circuit, truth, answer."""
    case, answer = one.case, one.answer
    print(f"\n{case.name}: {case.responses.points} points, {case.responses.frequency_hz[0]:.6g} to "
          f"{case.responses.frequency_hz[-1]:.6g} Hz, {case.responses.quantity}, "
          f"{', '.join(str(c) for c in case.responses.channels)}")  # fmt: skip
    print(f"noise: {case.noise}\n{case.circuit}\n\ntrue modes (the answer is {case.answer}):")
    print(f"{'Hz':>14}{'ζ':>12}{'σ/s':>14}{'bound':>11}{'detect':>10}{'χ²':>10} place")
    for m in case.modes:
        print(f"{m.frequency_hz:14.7g}{m.damping:12.5g}{m.pole.real:14.6g}{m.growth_std:11.3g}"
              f"{m.detectability:10.3g}{m.energy:10.3g} {m.place}")  # fmt: skip
    print(f"\nanswer: {answer.verdict}: {answer.reason}; order {answer.order}, "
          f"{answer.seconds * 1e3:.0f} ms; {one.wrong() or 'nothing wrong'}")  # fmt: skip
    for c in answer.claims:
        print(f"{c.pole.imag / 2 / math.pi:14.7g}{-c.pole.real / abs(c.pole):12.5g}"
              f"{c.pole.real:14.6g}{c.growth_std:11.3g}")  # fmt: skip
    try:
        with threadpool_limits(1):
            print(f"\n{polefit.identify(case.responses)}")
    except polefit.PolefitError as error:
        print(f"\n{error}")


def as_dict(one: Score) -> dict[str, object]:
    """Return plain data of a scored case."""
    return {
        "family": one.case.family, "seed": one.case.seed, "answer": one.case.answer,
        "verdict": one.answer.verdict, "reason": one.answer.reason, "order": one.answer.order,
        "seconds": one.answer.seconds, "ratio": None if math.isnan(one.ratio) else one.ratio,
        "noise": one.case.noise, "wrong": one.wrong(), "badness": one.badness,
        "growth_errors": [h.growth_error for h in one.hits],
        "growth_covered": [h.growth_covered for h in one.hits],
        "spare": len(one.spare), "alarms": len(one.alarms),
        "blended": len(one.blended), "missed": len(one.missed),
        "true_modes": [
            {"real": m.pole.real, "imag": m.pole.imag, "place": m.place,
             "detectability": m.detectability if math.isfinite(m.detectability) else None}
            for m in one.case.modes
        ],
    }  # fmt: skip


def options_of() -> argparse.Namespace:
    """Read the command line."""
    parser = argparse.ArgumentParser(
        prog="scripts/proving_ground", description=__doc__.split("\n")[0]
    )
    parser.add_argument("--cases", type=int, help=f"cases of each family ({CASES}; quick: {QUICK})")
    parser.add_argument("--seed", type=int, default=0, help="seed of the first case (0)")
    parser.add_argument("--family", action="append", choices=sorted(FAMILIES), help="only this one")
    parser.add_argument("--quick", action="store_true", help="few cases")
    parser.add_argument("--naive", action="store_true", help="also ask naive users")
    parser.add_argument(
        "--untimed", action="store_true", help="no fit beside, to compare times with"
    )
    parser.add_argument("--show", action="store_true", help="print every case in full")
    parser.add_argument("--worst", type=int, default=WORST, help=f"worst cases listed ({WORST})")
    parser.add_argument("--processes", type=int, default=1, help="cases at once (1)")
    parser.add_argument("--json", type=Path, help="write the scored cases here")
    options = parser.parse_args()
    options.cases = options.cases or (QUICK if options.quick else CASES)
    return options


def main() -> None:
    """Print the tables."""
    options = options_of()
    families = options.family or list(FAMILIES)
    everything = {}
    for tool in TOOLS if options.naive else ["polefit"]:
        everything[tool] = table(options, tool, families)
    print(f"\n{LEGEND}")
    worst = sorted(everything["polefit"], key=lambda s: -s.badness)
    listed = [s for s in worst if s.badness > 0][: options.worst]
    if listed:
        print("\nWorst cases of polefit (--family, --seed)")
    for s in listed:
        print(f"{s.case.family:12} {s.case.seed:6d}  {s.wrong()}")
    details(Summary(tuple(everything["polefit"])))
    if options.show:
        for s in everything["polefit"]:
            show(s)
    if options.json:
        text = json.dumps({t: [as_dict(s) for s in f] for t, f in everything.items()}, indent=1)
        write_text(options.json, text + "\n")


if __name__ == "__main__":
    main()
