"""What would have gone unnoticed: the smallest residue found with a given power.

At each frequency the Fisher information of a further pair's residue, everything else free, gives
the noncentrality of the test that would have found it (S. M. Kay, Fundamentals of Statistical
Signal Processing: Detection Theory, 1998, from memory: generalised likelihood ratio).
"""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
import scipy.special

from polefit.engine.blocks import Block, ComplexArray, FloatArray
from polefit.engine.projection import Solution
from polefit.engine.significance import (
    NARROW_STEPS,
    Information,
    scan,
    step_at,
    telling_share,
)


def residue_limits(
    blocks: Sequence[Block],
    solution: Solution,
    info: Information,
    frequencies: FloatArray,
    *,
    damping_ratio: float,
    power: float,
    threshold: float,
    level: float,
) -> FloatArray:
    """Return the smallest |residue| of a hidden pair that would have been found.

    Parameters
    ----------
    frequencies : (C,) float ndarray
        Im of the pole, normalised rad/s.
    damping_ratio : float
        Of the hidden pair; negative grows.
    power : float
        Probability of finding it.
    threshold : float
        χ² above which a pair is claimed.
    level : float
        Noise variance of the weighted samples.

    Returns
    -------
    (C, K) float ndarray
        For the least favourable phase of the residue; infinite where a channel is blind.
    """
    tilt = -damping_ratio / np.sqrt(1 - damping_ratio**2)
    poles = frequencies * (tilt + 1j)
    found = scan(blocks, solution, info, poles).information
    a, b, c = found[..., 0, 0], found[..., 1, 1], found[..., 0, 1]
    smallest = (a + b) / 2 - np.sqrt(((a - b) / 2) ** 2 + c**2)
    scale = np.maximum((a + b) / 2, 1e-300)
    usable = smallest > 1e-9 * scale
    # the search disregards the most telling samples of a narrow pair
    counted = 1 - np.concatenate([_concentrated(block, poles) for block in blocks])
    usable &= counted > 1e-6
    smallest = np.where(usable, smallest * counted, 1.0)
    needed = noncentrality(threshold, 2, power) * level
    limits = np.where(usable, np.sqrt(needed / smallest), np.inf)
    result: FloatArray = limits.T
    return result


def _concentrated(block: Block, poles: ComplexArray) -> FloatArray:
    """Share, (K, C), of the evidence for each pole that its most telling samples would carry."""
    share = np.zeros((block.channels, poles.size))
    step = step_at(block.s.imag, poles.imag)
    precision = np.sum(block.weight**2, axis=1)
    narrow = np.flatnonzero(2 * np.abs(poles.real) < NARROW_STEPS * step)
    for c in narrow:
        curve = 1 / np.abs(block.s - poles[c]) ** 2
        share[:, c] = telling_share(curve * precision)
    return share


def noncentrality(threshold: float, freedom: int, power: float) -> float:
    """Return λ for which a non-central χ² exceeds `threshold` with probability `power`."""
    return float(scipy.special.chndtrinc(threshold, freedom, 1 - power))
