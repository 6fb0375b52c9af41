"""What is known and assumed about the noise of each sample, turned into weights.

The weights follow the response as the data or a model show it, since noise and rounding may
depend on its size and on its slope.
"""

from __future__ import annotations

from collections.abc import Sequence
from typing import NamedTuple

import numpy as np

from polefit.engine.blocks import Block, ComplexArray, FloatArray, make_block
from polefit.engine.noise import NoiseLaw, estimate, variance
from polefit.engine.projection import Solution, model_values


class Measured(NamedTuple):
    """Responses on one frequency axis, as the engine takes them.

    Attributes
    ----------
    s : (N,) complex ndarray
        Normalised complex frequency.
    values : (K, N) complex ndarray
        Responses.
    known : (K, 2, N) float ndarray
        Known noise variance of the two parts of each sample.
    turn : (K, N) complex ndarray or None
        Unit phasors, where the parts lie along and across the sample.
    shift : (N,) float ndarray or None
        Standard deviation of Im s, where frequencies are rounded.
    """

    s: ComplexArray
    values: ComplexArray
    known: FloatArray
    turn: ComplexArray | None
    shift: FloatArray | None = None


def change(before: Sequence[Block], after: Sequence[Block]) -> float:
    """Return the factor by which weights typically changed relative to each other."""
    steps = [np.log(new.weight / old.weight) for old, new in zip(before, after, strict=True)]
    return float(np.exp(np.std(np.concatenate([step.ravel() for step in steps]))))


class Sight(NamedTuple):
    """One set of responses as the data or a model show it: values, |H|, known variance."""

    values: ComplexArray
    size: FloatArray
    known: FloatArray


def by_data(data: Sequence[Measured]) -> list[Sight]:
    """Look at the responses before there is a model."""
    seen = []
    for m in data:
        moved = None if m.shift is None else np.gradient(m.values, m.s.imag, axis=1) * m.shift
        seen.append(Sight(m.values, np.abs(m.values), _known(m, moved)))
    return seen


def by_model(data: Sequence[Measured], solution: Solution) -> list[Sight]:
    """Look at the responses through the model: the data are noisy."""
    seen = []
    for m, part in zip(data, solution.parts, strict=True):
        values, moved = model_values(m.s, solution, part), None
        if m.shift is not None:
            above, below = m.s + 1j * m.shift, m.s - 1j * m.shift
            moved = model_values(above, solution, part) - model_values(below, solution, part)
            moved = moved / 2
        seen.append(Sight(values, np.abs(values), _known(m, moved)))
    return seen


def _known(m: Measured, moved: ComplexArray | None) -> FloatArray:
    """Return the known variance; a frequency off by δ has `moved` the response by δ·dH/df.

    All channels share δ: together they must tell no more than one.
    """
    if moved is None:
        return m.known
    moved = moved * np.sqrt(len(m.values))
    moved = moved if m.turn is None else moved * m.turn
    total: FloatArray = m.known + np.stack((moved.real**2, moved.imag**2), axis=1)
    return total


def weigh(
    data: Sequence[Measured], laws: Sequence[NoiseLaw], seen: Sequence[Sight]
) -> tuple[Block, ...]:
    """Weight by the law, at the size that is seen."""
    return tuple(
        make_block(m.s, m.values, 1.0 / np.sqrt(variance(law, sight.size, sight.known)), m.turn)
        for m, law, sight in zip(data, laws, seen, strict=True)
    )


def law_of(m: Measured, sight: Sight, followed: FloatArray) -> NoiseLaw:
    """Estimate the law of one set from what the model leaves and how much noise it `followed`."""
    rest = m.values - sight.values
    if m.turn is not None:
        rest = rest * m.turn
    parts = np.stack((rest.real, rest.imag), axis=1)
    return estimate(parts, sight.size, sight.known, followed)
