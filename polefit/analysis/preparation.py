"""From response sets to what the engine takes: checks, channels that say nothing, scaling."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np

from polefit.analysis.plausibility import refuse_without_phase
from polefit.engine.blocks import ComplexArray, FloatArray
from polefit.engine.weighting import Measured
from polefit.errors import ArgumentError, DataError, NotSupportedError
from polefit.responses import Channel, ResponseSet

FEWEST_POINTS = 8
"""Fewer points cannot tell one pair and its residue from noise with any degree of freedom left."""
LARGEST = 1e100
LONGEST_RUN = 30.0
"""Most samples that are taken to share a rounding error."""
NUMERICAL_ZERO = 1e-14
"""A transfer so much smaller than its driving points is what inverting a matrix leaves."""

_SHARES_POLES = {"impedance", "transfer"}
"""Quantities whose modes do not depend on which node the probe drives."""


@dataclass(frozen=True, eq=False)
class Prepared:
    """Data for the engine.

    Parameters
    ----------
    responses : tuple of ResponseSet
        As used: restricted to the band, unusable channels left out.
    measured : tuple of Measured
        One for each of `responses`.
    scale_rad_per_s : float
        Normalisation: the highest angular frequency.
    notes : tuple of str
        What was left out or assumed.
    """

    responses: tuple[ResponseSet, ...]
    measured: tuple[Measured, ...]
    scale_rad_per_s: float
    notes: tuple[str, ...]


def prepare(
    responses: ResponseSet | Sequence[ResponseSet], band_hz: tuple[float, float] | None
) -> Prepared:
    """Check that the sets may be identified together and put them into the engine's form.

    Raises
    ------
    ArgumentError, DataError, NotSupportedError
        With the remedy.
    """
    sets = (responses,) if isinstance(responses, ResponseSet) else tuple(responses)
    if not sets or not all(isinstance(one, ResponseSet) for one in sets):
        raise ArgumentError("responses: give a ResponseSet or a sequence of them")
    _check_together(sets)
    if band_hz is not None:
        _check_band(band_hz)
        sets = tuple(one.in_band(*band_hz) for one in sets)
    notes: list[str] = []
    usable = tuple(
        kept for kept in (_without_useless(one, notes) for one in sets) if kept is not None
    )
    if not usable:
        raise DataError("every channel is constantly zero or repeats another one; nothing to fit")
    for one in usable:
        if one.points < FEWEST_POINTS:
            raise DataError(
                f"{one.channels[0]}: {one.points} points cannot carry a verdict; "
                f"simulate at least {FEWEST_POINTS} in the band"
            )
        _check_sizes(one)
        refuse_without_phase(one)
    scale = 2 * np.pi * max(one.band_hz[1] for one in usable)
    return Prepared(usable, tuple(_measured(one, scale) for one in usable), scale, tuple(notes))


def _check_band(band_hz: object) -> None:
    """Refuse what is not two frequencies in hertz."""
    try:
        low, high = (float(edge) for edge in band_hz)  # type: ignore[attr-defined]
    except (TypeError, ValueError):
        raise ArgumentError(
            f"band_hz: {band_hz!r} is not a pair of frequencies in hertz; give e.g. (1e6, 6e9)"
        ) from None
    if not 0 <= low < high:
        raise ArgumentError(
            f"band_hz: {low:g} to {high:g} Hz is no band; give the lower edge first"
        )


def _check_together(sets: tuple[ResponseSet, ...]) -> None:
    for one in sets:
        if one.quantity in ("return-difference", "loop-gain"):
            raise NotSupportedError(
                f"quantity: {one.quantity} is not identified by this version; export the "
                "driving-point impedance of a node in the loop instead"
            )
    if len({one.pump_hz for one in sets}) > 1:
        raise ArgumentError(
            "responses: sets with different pump_hz are not of one circuit in one state; identify "
            "each on its own (--separately)"
        )
    if len({one.quantity for one in sets}) > 1:
        raise ArgumentError(
            "responses: different quantities cannot share their modes, since each is terminated "
            "in its own way; identify each on its own (--separately)"
        )
    if len(sets) > 1 and sets[0].quantity not in _SHARES_POLES:
        raise ArgumentError(
            f"responses: several {sets[0].quantity} sets load the circuit in different ways and "
            "have different modes; convert scattering data to impedance (quantity='impedance', "
            "--quantity impedance), or identify each on its own (--separately)"
        )
    channels = [channel for one in sets for channel in one.channels]
    if len(set(channels)) != len(channels):
        twice = next(c for c in channels if channels.count(c) > 1)
        raise ArgumentError(
            f"responses: channel {twice} is given twice; name the nodes (node=, --node), or "
            "identify each file on its own (--separately)"
        )


def _check_sizes(one: ResponseSet) -> None:
    """Refuse sizes whose squares leave double precision; no physical response has them."""
    for channel, largest in zip(one.channels, np.abs(one.values).max(axis=0), strict=True):
        if not 1 / LARGEST < largest < LARGEST:
            raise DataError(
                f"{channel}: the largest response is {largest:.3g}, beyond {1 / LARGEST:g} to "
                f"{LARGEST:g}; check the unit"
            )


def _without_useless(one: ResponseSet, notes: list[str]) -> ResponseSet | None:
    """Leave out channels that are zero throughout or repeat another one, and say so."""
    keep: list[int] = []
    largest = np.abs(one.values).max(axis=0)
    own = {c.output: top for c, top in zip(one.channels, largest, strict=True) if c.driving_point}
    for i, channel in enumerate(one.channels):
        column = one.values[:, i]
        beside = math.sqrt(own.get(channel.output, 0.0)) * math.sqrt(own.get(channel.input, 0.0))
        if not np.any(column):
            notes.append(f"channel {channel} is zero throughout and was left out")
            continue
        if largest[i] < NUMERICAL_ZERO * beside:
            notes.append(
                f"channel {channel} is zero to double precision beside the driving points of its "
                "nodes and was left out"
            )
            continue
        twin = next((j for j in keep if np.array_equal(one.values[:, j], column)), None)
        if twin is not None:
            notes.append(f"channel {channel} repeats {one.channels[twin]} and was left out")
            continue
        keep.append(i)
    if len(keep) == len(one.channels):
        return one
    return _columns(one, keep) if keep else None


def _columns(one: ResponseSet, keep: list[int]) -> ResponseSet:
    return replace(
        one,
        values=one.values[:, keep],
        channels=tuple(one.channels[i] for i in keep),
        sample_std=None if one.sample_std is None else one.sample_std[:, keep],
    )


def _measured(one: ResponseSet, scale: float) -> Measured:
    values: ComplexArray = np.ascontiguousarray(one.values.T, dtype=np.complex128)
    known = np.zeros((values.shape[0], 2, one.points))
    turn: ComplexArray | None = None
    if one.sample_std is not None:
        known += (one.sample_std.T**2)[:, np.newaxis, :]
    if one.precision is not None:
        first, second, polar = one.precision.rounding_std(one.values)
        if polar:
            size = np.abs(values)
            unit = values.conj() / np.where(size > 0, size, 1.0)
            turn = np.where(size > 0, unit, 1.0).astype(np.complex128)
        change = np.gradient(values, axis=1) * (1.0 if turn is None else turn)
        known[:, 0] += first.T**2 * _run(first.T, change.real)
        known[:, 1] += second.T**2 * _run(second.T, change.imag)
    s: ComplexArray = np.asarray(2j * np.pi * one.frequency_hz / scale, dtype=np.complex128)
    shift = 2 * np.pi * one.frequency_rounding_std() / scale
    return Measured(s, values, known, turn, shift if np.any(shift) else None)


def _run(rounding_std: FloatArray, change: FloatArray) -> FloatArray:
    """Return how many neighbouring samples share one rounding error.

    Where a printed number changes by less than its last digit from sample to sample, the errors
    run together, and so many samples tell no more than one.
    """
    quantum = math.sqrt(12.0) * rounding_std
    step = np.maximum(np.abs(change), 1e-290)
    run: FloatArray = np.clip(quantum / step, 1.0, LONGEST_RUN)
    return run


def node_names(channels: Sequence[Channel]) -> tuple[str, ...]:
    """Return the names of the observed nodes, each once."""
    return tuple(dict.fromkeys(channel.output for channel in channels))
