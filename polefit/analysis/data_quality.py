"""What in a set of responses will limit a verdict: points, digits, noise, dead channels."""

from __future__ import annotations

from collections.abc import Sequence
from hashlib import sha256

import numpy as np

from polefit.channels import Channel
from polefit.estimates import si
from polefit.responses import ComplexArray, FloatArray, ResponseSet

FEW_POINTS = 50
# Rounding to 6 digits leaves about 1e-6 of the response, which is known to raise false alarms
# where it is taken for nothing.
COARSE_ROUNDING = 2e-7
# Interpolation over twice the step errs 2**4 times as much on a smooth curve, once on noise.
NOISE_RATIO = 3.0
LEAST_NOISE = 1e-9
_SAMPLED_POINTS = 4001
_UNEVEN = 30.0
_GAP = 5.0
_LOW_END = 1e-3


def limits(responses: ResponseSet) -> tuple[str, ...]:
    """Tell what will limit the verdict, one sentence each.

    Parameters
    ----------
    responses : ResponseSet
        Any data.

    Returns
    -------
    tuple of str
    """
    return (
        *_sampling(responses.frequency_hz),
        *_dead(responses),
        *_copies(responses),
        *_accuracy(responses),
    )


def _sampling(frequency: FloatArray) -> list[str]:
    found = []
    if frequency.size < FEW_POINTS:
        found.append(
            f"few points: {frequency.size}; a verdict wants some hundreds over the band, and "
            "several within each resonance"
        )
    if frequency.size < 3:
        return found
    low, high = float(frequency[0]), float(frequency[-1])
    steps = np.diff(frequency)
    relative = np.diff(np.log(frequency[frequency > 0]))
    # A logarithmic sweep has steps that grow, a uniform one steps that shrink on a log axis.
    with np.errstate(all="ignore"):
        spread = min(steps.max() / steps.min(), relative.max() / relative.min())
    if spread > _UNEVEN:
        found.append(_uneven(frequency, steps))
    within = int(np.sum(frequency <= 2 * low)) if low > 0 else 3
    if low > 0 and within < 3:
        found.append(
            f"low end thinly sampled: {within} point{'s' if within > 1 else ''} in the first "
            f"octave from {si(low, 'Hz')}; slow modes there are hardly seen"
        )
    if low > _LOW_END * high:
        found.append(
            f"no points below {si(low, 'Hz')}: modes there, such as those of bias networks, "
            "are not seen"
        )
    return found


def _uneven(frequency: FloatArray, steps: FloatArray) -> str:
    """Tell of the gap that stands out from its neighbours, else of coarse and fine parts."""
    beside = np.maximum(np.r_[0, steps[:-1]], np.r_[steps[1:], 0])
    at = int(np.argmax(steps / beside))
    if steps[at] > _GAP * beside[at]:
        return (
            f"uneven step: between {si(frequency[at], 'Hz')} and {si(frequency[at + 1], 'Hz')} "
            "lies a gap in which a narrow mode would be missed"
        )
    return (
        f"uneven step: {si(float(steps.min()), 'Hz')} to {si(float(steps.max()), 'Hz')}; narrow "
        "modes may be missed where it is coarse"
    )


def _dead(responses: ResponseSet) -> list[str]:
    """Channels that are zero or constant, or zero at some points."""
    values = responses.values
    found: dict[str, list[Channel]] = {}
    zeros = (values == 0).sum(axis=0)
    for k, channel in enumerate(responses.channels):
        if zeros[k] == len(values):
            what = "zero at every point; leave out with select= (--select)"
        elif _constant(values[:, k]):
            what = "constant over frequency; shows no mode"
        elif zeros[k]:
            what = f"exactly zero at {zeros[k]} point{'s' if zeros[k] > 1 else ''}"
        else:
            continue
        found.setdefault(what, []).append(channel)
    return [f"{listed(channels)}: {what}" for what, channels in found.items()]


def _constant(column: ComplexArray) -> bool:
    return column.size > 1 and bool(np.all(column == column[0]))


def listed(channels: Sequence[Channel]) -> str:
    """Name a few channels and count the others."""
    names = ", ".join(str(channel) for channel in channels[:4])
    more = len(channels) - 4
    return f"{names} and {more} more" if more > 0 else names


def _copies(responses: ResponseSet) -> list[str]:
    """Channels with the same numbers, reciprocal pairs and dead channels apart."""
    groups: dict[bytes, list[Channel]] = {}
    for column, channel in zip(responses.values.T, responses.channels, strict=True):
        if not _constant(column):
            digest = sha256(column.tobytes()).digest()
            groups.setdefault(digest, []).append(channel)
    return [
        f"{listed(group)} hold the same numbers; together they tell no more than one"
        for group in groups.values()
        # A reciprocal pair is no surprise.
        if len({frozenset((c.output, c.input)) for c in group}) > 1
    ]


def _accuracy(responses: ResponseSet) -> list[str]:
    """Coarse rounding of values and frequencies, and noise that shows above it."""
    frequency, values = _middle(responses)
    rounding = _rounding(responses, values)
    found = []
    if responses.precision is None and responses.sample_std is not None:
        rounding = known_uncertainty(responses)
        if rounding > COARSE_ROUNDING:
            found.append(
                f"few digits or stated noise: samples are known to about {rounding:.1g} of the "
                "response only"
            )
    elif rounding > COARSE_ROUNDING:
        found.append(
            f"few digits: rounding leaves about {rounding:.1g} of the response uncertain; "
            "export more digits"
        )
    found += _axis_rounding(responses)
    by_axis = _by_axis(frequency, values, responses.frequency_rounding_std(frequency))
    rounding = float(np.hypot(rounding, _typical(by_axis, values)))
    noise = [visible_noise(frequency, values[:, k]) for k in range(values.shape[1])]
    worst = int(np.argmax(noise))
    if noise[worst] > max(3 * rounding, LEAST_NOISE):
        found.append(
            f"noise shows: about {noise[worst]:.1g} of the response at {responses.channels[worst]}"
        )
    return found


def _axis_rounding(responses: ResponseSet) -> list[str]:
    """Warn where rounded frequencies move a steep response by more than its own digits do."""
    printed = responses.frequency_precision
    std = responses.frequency_rounding_std()
    if printed is None or not std.any():
        return []
    worst, at, beside = COARSE_ROUNDING, -1, 0.0
    for k in range(len(responses.channels)):
        column = responses.values[:, k : k + 1]
        moved = _relative(_by_axis(responses.frequency_hz, column, std), column)
        known = _relative(_by_values(responses, slice(k, k + 1)), column)
        row = int(np.argmax(np.where(moved > known, moved, 0.0)))
        if moved[row, 0] > max(worst, known[row, 0]):
            worst, at, beside = float(moved[row, 0]), row, float(known[row, 0])
    if at < 0:
        return []
    left = f"; the digits of the values leave {beside:.1g}" if beside else ""
    return [
        f"frequency printed to {printed}: its rounding moves the response by up to {worst:.1g} "
        f"where it is steep (at {si(responses.frequency_hz[at], 'Hz')}){left}; export more digits "
        "of the frequency, or sweep a grid that its digits hold"
    ]


def _by_axis(frequency: FloatArray, values: ComplexArray, std_hz: FloatArray) -> FloatArray:
    """Tell what an uncertainty of the frequency does to the response: |dH/df| times it."""
    if frequency.size < 2 or not std_hz.any():
        return np.zeros(values.shape)
    slope: FloatArray = np.abs(np.gradient(values, frequency, axis=0))
    return slope * std_hz[:, np.newaxis]


def _by_values(responses: ResponseSet, columns: slice) -> FloatArray:
    """Tell the standard uncertainty of samples, both parts together, as known of the values."""
    values = responses.values[:, columns]
    total = np.zeros(values.shape)
    if responses.precision is not None:
        first, second, _ = responses.precision.rounding_std(values)
        total = np.hypot(first, second)
    if responses.sample_std is not None:
        total = np.hypot(total, np.sqrt(2) * responses.sample_std[:, columns])
    return total


def _relative(std: FloatArray, values: ComplexArray) -> FloatArray:
    """Uncertainties over the response; zero where that is zero."""
    size = np.abs(values)
    with np.errstate(divide="ignore", invalid="ignore"):
        relative: FloatArray = np.where(size > 0, std / size, 0.0)
    return relative


def _typical(std: FloatArray, values: ComplexArray) -> float:
    """Typical uncertainty over the response, of the worst channel."""
    return float(np.median(_relative(std, values), axis=0).max())


def _middle(responses: ResponseSet) -> tuple[FloatArray, ComplexArray]:
    """Neighbouring points from the middle, enough to judge by."""
    spare = max(0, responses.points - _SAMPLED_POINTS)
    part = slice(spare // 2, spare // 2 + _SAMPLED_POINTS)
    return responses.frequency_hz[part], responses.values[part]


def _rounding(responses: ResponseSet, values: ComplexArray) -> float:
    """Typical standard uncertainty by rounding, over the response; of the worst channel."""
    if responses.precision is None:
        return 0.0
    first, second, _ = responses.precision.rounding_std(values)
    return _typical(np.hypot(first, second), values)


def known_uncertainty(responses: ResponseSet) -> float:
    """Tell how uncertain samples are that came with an uncertainty.

    Parameters
    ----------
    responses : ResponseSet
        With `sample_std`.

    Returns
    -------
    float
        Typical standard deviation of a sample, both parts together, over its size; of the
        worst channel. Zero where none is known.
    """
    if responses.sample_std is None:
        return 0.0
    return _typical(np.sqrt(2) * responses.sample_std, responses.values)


def visible_noise(frequency: FloatArray, values: ComplexArray) -> float:
    """Estimate the noise of one response over its size; zero where none can be seen.

    Parameters
    ----------
    frequency : (N,) float ndarray
        Rising.
    values : (N,) complex ndarray
        One response.

    Returns
    -------
    float
        Typical standard deviation of a sample, both parts together, over its size.

    Notes
    -----
    Each point is predicted from two neighbours on either side by the cubic through them, once
    with the nearest and once with every second neighbour. The error of the cubic grows as the
    fourth power of the step, that of noise not at all.
    """
    if frequency.size < 20:
        return 0.0
    near = _misfit(frequency, values, 1)
    far = _misfit(frequency, values, 2)
    return near if far < NOISE_RATIO * near else 0.0


def _misfit(frequency: FloatArray, values: ComplexArray, stride: int) -> float:
    """Median error of the prediction from neighbours, as the noise of one sample."""
    reach = 2 * stride
    at = np.arange(reach, frequency.size - reach)
    offsets = [-2 * stride, -stride, stride, 2 * stride]
    nodes = [frequency[at + o] for o in offsets]
    predicted = np.zeros(at.size, dtype=np.complex128)
    variance = np.ones(at.size)
    for i, o in enumerate(offsets):
        weight = np.ones(at.size)
        for j in range(4):
            if j != i:
                weight *= (frequency[at] - nodes[j]) / (nodes[i] - nodes[j])
        predicted += weight * values[at + o]
        variance += weight**2
    size = np.abs(values[at])
    with np.errstate(divide="ignore", invalid="ignore", over="ignore"):
        relative = np.abs(values[at] - predicted) / np.sqrt(variance) / size
    relative = relative[np.isfinite(relative)]
    # |complex normal| has the median 0.833 of its root mean square (sqrt(ln 2)).
    return float(np.median(relative)) / np.sqrt(np.log(2)) if relative.size else 0.0
