"""Modes of a periodically driven circuit: lines of the sweep folded into 0 … half the drive.

A circuit under a drive at ω₀, linearised about its periodic state, answers with poles at its
Floquet exponents p, at their conjugates, and at every multiple of jω₀ beside these (N. M. Wereley,
S. R. Hall, 1991, from memory). In each half interval between multiples of ω₀/2 an exponent shows
once, at the same |Im p| from the nearest multiple of ω₀ and with the same growth rate: its images.
That they agree is a test of the data, and together they are known better than one alone.

A real multiplier e^(pT) has its line exactly at a multiple of ω₀ (positive: frequency 0) or exactly
half-way between two (negative: division of the drive's frequency by two).
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np
import scipy.special

from polefit.analysis.candidate import Candidate
from polefit.engine.blocks import FloatArray
from polefit.estimates import si
from polefit.modes import Evidence

DIFFER = 1e-4
"""Probability by chance below which two lines are not taken for images of one exponent, or a line
not for one of a real multiplier."""
SHARPEST = 1e-10
"""Frequencies are not compared more finely than this share of the drive: nor are they given so."""
ALIKE = 1e-4
"""Nor poles more finely than this share of a half-width, to which what a finite model leaves out
may move a line of data without noise."""
CLOSE = 0.3
"""Images this close, in half-widths, that differ by more than noise contradict each other."""


@dataclass(frozen=True)
class Claim:
    """A mode to be judged: one line, or several images of one exponent.

    Parameters
    ----------
    line : Candidate
        The line by which it is judged: the most telling one.
    pole : complex
        Of the mode, in rad/s: folded and combined.
    covariance : (2, 2) float ndarray
        Of real and imaginary part.
    in_band : bool
        Whether one of its lines is.
    subharmonic : bool or None
        Whether it divides the drive's frequency; None without a drive.
    seen_hz : tuple of float
        Where its lines show, that of `line` first; empty without a drive.
    evidence : tuple of Evidence
        What folding has to say.
    lines : frozenset of int
        Members of the model that are its lines.
    spread : (float, float)
        Part of the variance of real and imaginary part of `line` that stands for what the order
        of the model moves it by.
    """

    line: Candidate
    pole: complex
    covariance: FloatArray
    in_band: bool
    subharmonic: bool | None = None
    seen_hz: tuple[float, ...] = ()
    evidence: tuple[Evidence, ...] = ()
    lines: frozenset[int] = frozenset()
    spread: tuple[float, float] = (0.0, 0.0)


def as_it_is(line: Candidate) -> Claim:
    """Return the claim of a mode that has one line only: that of a circuit without a drive."""
    return Claim(line, line.pole, line.covariance, line.in_band)


def folded(frequency: float, drive: float) -> float:
    """Return the distance of a frequency from the nearest multiple of the drive's."""
    return abs(frequency - drive * round(frequency / drive))


def images_in(frequency: float, drive: float, band: tuple[float, float]) -> list[float]:
    """Return the frequencies inside `band` that fold to the same as `frequency`, rising."""
    at = folded(frequency, drive)
    listed = {
        n * drive + side * at
        for n in range(int(band[0] // drive), int(band[1] // drive) + 2)
        for side in (-1, 1)
    }
    return sorted(f for f in listed if band[0] <= f <= band[1])


def coverage(band: tuple[float, float], drive: float) -> tuple[float, float]:
    """Return the folded frequencies that a band shows, from the lowest to the highest."""
    ends = [folded(edge, drive) for edge in band]
    turns = range(math.ceil(2 * band[0] / drive), math.floor(2 * band[1] / drive) + 1)
    ends += [drive / 2 * (turn % 2) for turn in turns]
    return min(ends), max(ends)


@dataclass(frozen=True)
class _Lines:
    """Claimed lines with their joint covariance, all in rad/s.

    Lines are combined by their `covariance`, and compared by the slightly wider `tolerance`.
    `offset` is Im p minus the nearest multiple of ω₀/2, number `point`; `pinned` tells which of
    them are taken to lie on it. Covariance rows 2i and 2i + 1 are Re and Im of line i.
    """

    lines: tuple[Candidate, ...]
    drive: float
    covariance: FloatArray
    tolerance: FloatArray
    point: tuple[int, ...]
    offset: tuple[float, ...]
    pinned: tuple[bool, ...]
    doubtful: tuple[bool, ...]

    def distance(self, i: int) -> float:
        """Return the folded frequency of line i."""
        if self.pinned[i]:
            return self.drive / 2 * (self.point[i] % 2)
        return folded(self.lines[i].pole.imag, self.drive)

    def slope(self, i: int) -> float:
        """Return the derivative of the folded frequency by Im p."""
        at = self.lines[i].pole.imag
        return math.copysign(1.0, at - self.drive * round(at / self.drive))

    def cell(self, i: int) -> tuple[bool, int]:
        """Return the place that one exponent can fill once only."""
        if self.pinned[i]:
            return True, self.point[i]
        return False, math.floor(2 * self.lines[i].pole.imag / self.drive)


def fold(lines: Sequence[Candidate], covariance: FloatArray, pump_hz: float) -> list[Claim]:
    """Fold lines into modes.

    Parameters
    ----------
    lines : sequence of Candidate
        Claimed poles of the model.
    covariance : (2L, 2L) float ndarray
        Joint covariance of Re and Im of their poles, in this order, (rad/s)².
    pump_hz : float
        Frequency of the drive.

    Returns
    -------
    list of Claim
    """
    drive = 2 * math.pi * pump_hz
    known = covariance + np.diag(np.tile([0.0, (SHARPEST * drive) ** 2], len(lines)))
    least = np.repeat([(ALIKE * c.pole.real) ** 2 for c in lines], 2)
    tolerance = known + np.diag(least)
    point = tuple(round(2 * c.pole.imag / drive) for c in lines)
    offset = tuple(c.pole.imag - drive / 2 * p for c, p in zip(lines, point, strict=True))
    nothing = (False,) * len(lines)
    set_ = _Lines(tuple(lines), drive, known, tolerance, point, offset, nothing, nothing)
    set_ = _pin(set_)
    groups = _group(set_)
    return [_claim(set_, group, groups) for group in groups]


def _limit(freedom: int) -> float:
    return float(scipy.special.chdtri(freedom, DIFFER))


def _misfit(difference: FloatArray, jacobian: FloatArray, covariance: FloatArray) -> float:
    """Return χ² of differences that should be zero."""
    own = jacobian @ covariance @ jacobian.T
    return float(difference @ np.linalg.lstsq(own, difference, rcond=1e-13)[0])


def _pin(set_: _Lines) -> _Lines:
    """Decide which lines lie exactly on a multiple of ω₀/2.

    One line there within its uncertainty does: otherwise its mirror image would show beside it.
    Of two, either both do, with growth rates of their own, or they mirror each other with one
    growth rate; the likelier is taken.
    """
    count = len(set_.lines)
    pinned, doubtful = [False] * count, [False] * count
    for i in range(count):
        on_point = np.zeros((1, 2 * count))
        on_point[0, 2 * i + 1] = 1.0
        alone = _misfit(np.array([set_.offset[i]]), on_point, set_.tolerance)
        pinned[i] = alone < _limit(1)
    used: set[int] = set()
    for mirrored, i, j in sorted(_mirrors(set_)):
        if used & {i, j}:
            continue
        used |= {i, j}
        both = _both_on_point(set_, i, j)
        if mirrored < both:
            pinned[i] = pinned[j] = False
        doubtful[i] = doubtful[j] = both < _limit(2)
    return replace(set_, pinned=tuple(pinned), doubtful=tuple(doubtful))


def _mirrors(set_: _Lines) -> list[tuple[float, int, int]]:
    """List the pairs of lines that may mirror each other, each after its χ²."""
    count = len(set_.lines)
    pairs = [(i, j) for i in range(count) for j in range(i) if set_.point[i] == set_.point[j]]
    found = [(_mirrored(set_, i, j), i, j) for i, j in pairs]
    return [one for one in found if one[0] < _limit(2)]


def _mirrored(set_: _Lines, i: int, j: int) -> float:
    """Return χ² of two lines as mirror images of each other about the same point."""
    jacobian = np.zeros((2, 2 * len(set_.lines)))
    jacobian[0, [2 * i, 2 * j]] = 1.0, -1.0
    jacobian[1, [2 * i + 1, 2 * j + 1]] = 1.0
    growth = set_.lines[i].pole.real - set_.lines[j].pole.real
    return _misfit(np.array([growth, set_.offset[i] + set_.offset[j]]), jacobian, set_.tolerance)


def _both_on_point(set_: _Lines, i: int, j: int) -> float:
    jacobian = np.zeros((2, 2 * len(set_.lines)))
    jacobian[[0, 1], [2 * i + 1, 2 * j + 1]] = 1.0
    return _misfit(np.array([set_.offset[i], set_.offset[j]]), jacobian, set_.tolerance)


def _difference(set_: _Lines, i: int, j: int) -> tuple[FloatArray, FloatArray]:
    """Return growth rate and folded frequency of line i minus those of line j; the Jacobian."""
    jacobian = np.zeros((2, 2 * len(set_.lines)))
    jacobian[0, [2 * i, 2 * j]] = 1.0, -1.0
    difference = np.array([set_.lines[i].pole.real - set_.lines[j].pole.real, 0.0])
    if set_.pinned[i] and set_.pinned[j]:
        return difference[:1], jacobian[:1]
    difference[1] = set_.distance(i) - set_.distance(j)
    jacobian[1, [2 * i + 1, 2 * j + 1]] = set_.slope(i), -set_.slope(j)
    return difference, jacobian


def _alike(set_: _Lines, i: int, j: int) -> float:
    """Return χ² over its limit of two lines as images; infinite where they cannot be."""
    if set_.cell(i) == set_.cell(j) or set_.pinned[i] != set_.pinned[j]:
        return math.inf
    if set_.pinned[i] and (set_.point[i] - set_.point[j]) % 2:
        return math.inf
    difference, jacobian = _difference(set_, i, j)
    return _misfit(difference, jacobian, set_.tolerance) / _limit(len(difference))


def _group(set_: _Lines) -> list[tuple[int, ...]]:
    """Join lines to modes, the closest first, never two from one cell."""
    groups: list[tuple[int, ...]] = [(i,) for i in range(len(set_.lines))]
    while len(groups) > 1:
        best, at = 1.0, (0, 0)
        for a in range(len(groups)):
            for b in range(a):
                worst = max(_alike(set_, i, j) for i in groups[a] for j in groups[b])
                if worst < best:
                    best, at = worst, (a, b)
        if at == (0, 0):
            break
        a, b = at
        groups[b] = groups[b] + groups[a]
        del groups[a]
    return groups


def _claim(set_: _Lines, group: tuple[int, ...], groups: list[tuple[int, ...]]) -> Claim:
    inside = [i for i in group if set_.lines[i].in_band] or list(group)
    pole, covariance = _combined(set_, inside)
    chosen = [i for i in inside if set_.lines[i].pole.real * pole.real > 0] or inside
    line = max((set_.lines[i] for i in chosen), key=lambda c: c.score)
    others = [c for c in (set_.lines[i] for i in group) if c is not line]
    others.sort(key=lambda c: -c.score)
    growing = tuple(c.pole for c in others if c.pole.real > 0)
    pinned = set_.pinned[group[0]]
    odd = bool(set_.point[group[0]] % 2)
    related = _related(set_, group, line)
    evidence = [_consistency(set_, group, groups)]
    if (pinned and odd) or any(set_.doubtful[i] for i in group):
        evidence.append(_division(set_, group, pinned))
    return Claim(
        line=replace(line, images=growing, related=related),
        pole=pole,
        covariance=covariance,
        in_band=any(set_.lines[i].in_band for i in group),
        subharmonic=pinned and odd,
        seen_hz=tuple(c.pole.imag / (2 * math.pi) for c in (line, *others)),
        evidence=tuple(evidence),
        lines=frozenset(set_.lines[i].index for i in group),
        spread=line.spread,
    )


def _related(set_: _Lines, group: tuple[int, ...], line: Candidate) -> frozenset[int]:
    """Return the members of the model that lie near a line for a known reason.

    These are its own images, other real multipliers at the same point, and the partner of a
    growing line: a drive makes a mode grow by coupling it with the image of another, and what
    one of the two gains in damping the other loses, at one frequency.
    """
    related = {set_.lines[i].index for i in group}
    at_point = [p or d for p, d in zip(set_.pinned, set_.doubtful, strict=True)]
    if any(at_point[i] for i in group):
        points = {set_.point[i] for i in group}
        lines = zip(set_.lines, set_.point, at_point, strict=True)
        related |= {c.index for c, point, there in lines if there and point in points}
    partners = [
        (abs(c.pole.imag - line.pole.imag), c.index)
        for c in set_.lines
        if c.index not in related
        and c.pole.real < 0
        and abs(c.pole.imag - line.pole.imag) < max(-c.pole.real, abs(line.pole.real))
    ]
    return frozenset(related | {index for _, index in sorted(partners)[:1]})


def _combined(set_: _Lines, group: list[int]) -> tuple[complex, FloatArray]:
    """Return the mean pole, weighted by the joint covariance, and the covariance of it.

    Where lines lie on a multiple of ω₀/2 that is used, too: growth rates are correlated with
    frequencies.
    """
    rows = [2 * i + part for i in group for part in (0, 1)]
    own = set_.covariance[np.ix_(rows, rows)]
    pinned = set_.pinned[group[0]]
    turn = np.ones(len(rows))
    turn[1::2] = 1.0 if pinned else [set_.slope(i) for i in group]
    own = own * np.outer(turn, turn)
    values = np.array(
        [
            v
            for i in group
            for v in (
                set_.lines[i].pole.real,
                set_.offset[i] if pinned else set_.distance(i),
            )
        ]
    )
    design = np.tile(np.eye(2), (len(group), 1))[:, : 1 if pinned else 2]
    size = np.sqrt(np.diag(own))
    size[size == 0] = 1.0
    inverse = np.linalg.pinv(own / np.outer(size, size), rcond=1e-13, hermitian=True)
    inverse = inverse / np.outer(size, size)
    covariance = np.linalg.inv(design.T @ inverse @ design)
    mean = covariance @ (design.T @ (inverse @ values))
    if pinned:
        at = set_.drive / 2 * (set_.point[group[0]] % 2)
        return complex(mean[0], at), np.array([[covariance[0, 0], 0.0], [0.0, 0.0]])
    return complex(mean[0], abs(mean[1])), covariance


def _hertz(set_: _Lines, i: int) -> str:
    return si(set_.lines[i].pole.imag / (2 * math.pi), "Hz", 5)


def _consistency(set_: _Lines, group: tuple[int, ...], groups: list[tuple[int, ...]]) -> Evidence:
    """Say whether the images of an exponent agree, or that only one line of it shows."""
    name = "images"
    if len(group) > 1:
        places = " and ".join(_hertz(set_, i) for i in group)
        worst = max(_alike(set_, i, j) for i in group for j in group if i != j)
        return Evidence(
            name,
            True,
            f"its lines at {places} agree in growth rate and folded frequency "
            f"({worst:.2g} of the χ² at which they would not)",
        )
    (i,) = group
    rival = next(
        (o[0] for o in groups if len(o) == 1 and o[0] != i and _contradict(set_, i, o[0])), None
    )
    if rival is not None:
        return Evidence(
            name,
            False,
            f"the lines at {_hertz(set_, i)} and {_hertz(set_, rival)} should be images of one "
            "exponent, but differ by more than their uncertainties",
        )
    return Evidence(name, None, f"only its line at {_hertz(set_, i)} shows in the band")


def _contradict(set_: _Lines, i: int, j: int) -> bool:
    """Tell whether two lines are too close to be strangers and too far off to be images."""
    if set_.cell(i) == set_.cell(j) or set_.pinned[i] != set_.pinned[j]:
        return False
    one, other = set_.lines[i].pole, set_.lines[j].pole
    apart = math.hypot(one.real - other.real, set_.distance(i) - set_.distance(j))
    return apart < CLOSE * min(abs(one.real), abs(other.real))


def _division(set_: _Lines, group: tuple[int, ...], pinned: bool) -> Evidence:
    """Say how a line at half the drive was told from two that mirror each other beside it."""
    name = "frequency division"
    if any(set_.doubtful[i] for i in group):
        return Evidence(
            name,
            None,
            "two lines at half the frequency of the drive: one exponent with its image or two "
            "real multipliers, the uncertainties allow both",
        )
    off = max(abs(set_.offset[i]) for i in group) / (2 * math.pi)
    return Evidence(
        name,
        pinned,
        f"its line lies within {si(off, 'Hz', 2)} of half the frequency of the drive, as near as "
        "its uncertainty allows, without a mirror image beside it",
    )
