"""How a text file prints its frequencies, and whether its digits hold all that was simulated.

A sweep in whole megahertz loses nothing by being printed in megahertz; a logarithmic one does.
What tells them apart is the grid: rounding leaves its marks on the steps and on the last digits.
"""

from __future__ import annotations

import re
from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from polefit.precision import FrequencyPrecision, Printed
from polefit.readers.reading import printed_form
from polefit.responses import FloatArray

_DOUBLE = 15  # digits from which on a number is as good as a double
# Chance marks of so few points prove nothing.
_FEWEST = 12
# Of rounded numbers one in ten ends with a zero; of 12 of them 40 % do so once in 200 files.
_ZEROS = 0.4
_JOINTS = 0.2


def frequency_precision(
    tokens: Sequence[str], frequency_hz: FloatArray, scale_hz: float
) -> FrequencyPrecision | None:
    """Tell how the frequency column of a text file was printed.

    Parameters
    ----------
    tokens : sequence of str
        A sample of the frequencies as printed, with "." as the decimal mark.
    frequency_hz : (N,) float ndarray
        All frequencies in hertz, rising.
    scale_hz : float
        Hertz per printed unit; zero for hertz.

    Returns
    -------
    FrequencyPrecision or None
        None where the column carries 15 digits or more, or nothing can be told.
    """
    plain = [t for t in tokens if t.strip(" +-0.")]
    printed = printed_form(plain)
    if printed is None:
        return None
    scale = scale_hz or 1.0
    numbers = frequency_hz / scale
    if not any(mark in token.lower() for token in plain for mark in ".ed"):
        printed = Printed(decimals=0)
    settled = _settled(printed, max(map(_digits, plain)), numbers)
    if settled is None:
        return None
    quantum = settled.quantum(numbers)
    if np.any(numbers >= quantum * 10.0**_DOUBLE, where=quantum > 0):
        return None
    return FrequencyPrecision(settled, scale, exact=_is_grid(numbers, quantum))


def _digits(token: str) -> int:
    """Count the significant digits of a printed number."""
    mantissa = re.split("[eEdD]", token.strip().lstrip("+-"))[0]
    return len(mantissa.replace(".", "").lstrip("0"))


def _settled(printed: Printed, digits: int, numbers: FloatArray) -> Printed | None:
    """Take the digits that the sample shows, or more where some number has more.

    A number with more decimals than all of the sample shows that decimals are not what is fixed.
    """
    if printed.decimals is not None and _fits(printed, numbers):
        return printed
    return next(
        (Printed(significant=count) for count in range(digits, _DOUBLE)
         if _fits(Printed(significant=count), numbers)),
        None,
    )  # fmt: skip


def _fits(printed: Printed, numbers: FloatArray) -> bool:
    """Whether all numbers are whole in units of their last digit."""
    quantum = printed.quantum(numbers)
    known = quantum > 0
    ratio = numbers[known] / quantum[known]
    # A number and its division by the quantum may each be off by a few units of the last bit.
    return bool(np.all(np.abs(ratio - np.round(ratio)) <= 1e-3 + 1e-15 * ratio))


def _is_grid(numbers: FloatArray, quantum: FloatArray) -> bool:
    """Whether the numbers lie on a grid that their last digit does not force on them."""
    counts, unit = _whole(numbers, quantum)
    if counts.size < 3:
        return False
    steps = np.diff(counts)
    within = unit[1:] == unit[:-1]  # in both numbers the last digit is worth the same
    if _piecewise_uniform(steps, within):
        return True
    if counts.size < _FEWEST:
        return False
    inner = steps[within]
    coarse = inner.size >= _FEWEST - 1 and int(np.gcd.reduce(inner)) > 1
    # In both halves: of many numbers only the larger ones may have lost a digit.
    zeros = min(float(np.mean(half % 10 == 0)) for half in np.array_split(counts, 2))
    return coarse or zeros >= _ZEROS


def _whole(numbers: FloatArray, quantum: FloatArray) -> tuple[NDArray[np.int64], FloatArray]:
    """Numbers above zero in units of their last digit, and those units."""
    known = quantum > 0
    return np.round(numbers[known] / quantum[known]).astype(np.int64), quantum[known]


def _piecewise_uniform(steps: NDArray[np.int64], within: NDArray[np.bool_]) -> bool:
    """Whether steps are equal but for a few joints.

    Rounding makes the steps of a uniform sweep differ by one unit of the last digit; a joint of
    two sweeps, or a gap, changes them by more.
    """
    both = within[1:] & within[:-1]
    changes = np.abs(np.diff(steps)[both])
    if not changes.size:
        return False
    return bool(np.all(changes != 1)) and float(np.mean(changes != 0)) <= _JOINTS
