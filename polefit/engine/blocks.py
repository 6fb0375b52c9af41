"""Sampled, weighted data in the form that least squares needs.

A block holds the channels that share one frequency axis. Each complex sample becomes two real
rows, scaled by the inverse of their standard deviations; where the noise acts along and across
the phasor, as with magnitude and angle printed to a few digits, the sample is first turned.
"""

from __future__ import annotations

from collections.abc import Sequence
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

FloatArray = NDArray[np.float64]
ComplexArray = NDArray[np.complex128]


class Block(NamedTuple):
    """Channels on one frequency axis.

    Attributes
    ----------
    s : (N,) complex ndarray
        Normalised complex frequency.
    values : (K, N) complex ndarray
        Responses.
    weight : (K, 2, N) float ndarray
        Inverse standard deviation of the two parts of each sample.
    turn : (K, N) complex ndarray or None
        Unit phasors by which samples are multiplied before they are taken apart.
    target : (K, 2N) float ndarray
        The weighted samples.
    """

    s: ComplexArray
    values: ComplexArray
    weight: FloatArray
    turn: ComplexArray | None
    target: FloatArray

    @property
    def channels(self) -> int:
        """Number of channels K."""
        return int(self.values.shape[0])

    @property
    def rows(self) -> int:
        """Number of real samples, 2·N·K."""
        return int(2 * self.values.size)


def make_block(
    s: ComplexArray, values: ComplexArray, weight: FloatArray, turn: ComplexArray | None = None
) -> Block:
    """Build a block; see :class:`Block` for the shapes."""
    bare = Block(s, values, weight, turn, np.empty((values.shape[0], 0)))
    return bare._replace(target=weighted_parts(bare, values))


def samples(blocks: Sequence[Block]) -> int:
    """Return the number of real samples."""
    return sum(block.rows for block in blocks)


def shared_axis(blocks: Sequence[Block]) -> FloatArray:
    """Return every frequency at which one of the blocks has samples, once, rising."""
    axis: FloatArray = np.unique(np.concatenate([block.s.imag for block in blocks]))
    return axis


def one_channel(block: Block, k: int) -> Block:
    """Return channel number k alone."""
    turn = None if block.turn is None else block.turn[k : k + 1]
    return make_block(block.s, block.values[k : k + 1], block.weight[k : k + 1], turn)


def weighted(block: Block, columns: ComplexArray) -> FloatArray:
    """Return the weighted real rows of complex columns.

    Parameters
    ----------
    block : Block
        Its weights and turns apply.
    columns : (N, m) or (K, N, m) complex ndarray
        Columns common to all channels, or one set for each channel.

    Returns
    -------
    (K, 2N, m) float ndarray
    """
    points = block.s.size
    if block.turn is not None:
        columns = columns * block.turn[:, :, np.newaxis]
    rows = np.empty((block.channels, 2 * points, columns.shape[-1]))
    np.multiply(columns.real, block.weight[:, 0, :, np.newaxis], out=rows[:, :points])
    np.multiply(columns.imag, block.weight[:, 1, :, np.newaxis], out=rows[:, points:])
    return rows


PIECE = 8192
"""Channels times points that are worked on at once: their columns fit into the cache."""
COLUMNS = 32
"""Columns that a channel usually has."""


def pieces(block: Block, shared: int = 0) -> list[Block]:
    """Cut a block along the frequency axis into parts small enough to work on at once.

    Parameters
    ----------
    block : Block
        Data.
    shared : int
        How many columns are formed for all channels together, if more than usual.
    """
    length = max(PIECE // max(block.channels, shared // COLUMNS), 64)
    if block.s.size <= length:
        return [block]
    points = block.s.size
    target = block.target.reshape(block.channels, 2, points)
    return [
        Block(
            block.s[at],
            block.values[:, at],
            block.weight[:, :, at],
            None if block.turn is None else block.turn[:, at],
            target[:, :, at].reshape(block.channels, -1),
        )
        for at in (slice(i, i + length) for i in range(0, points, length))
    ]


def window(block: Block, low: float, high: float) -> Block | None:
    """Return the samples from low to high; None where there are none."""
    inside = (block.s.imag >= low) & (block.s.imag <= high)
    if not inside.any():
        return None
    turn = None if block.turn is None else block.turn[:, inside]
    return make_block(block.s[inside], block.values[:, inside], block.weight[:, :, inside], turn)


def weighted_parts(block: Block, values: ComplexArray) -> FloatArray:
    """Return the weighted real rows, (K, 2N), of one complex (K, N) array."""
    if block.turn is not None:
        values = values * block.turn
    rows: FloatArray = np.concatenate(
        (values.real * block.weight[:, 0], values.imag * block.weight[:, 1]), axis=1
    )
    return rows


def pulled_back(block: Block, rows: FloatArray) -> ComplexArray:
    """Return g, (K, N): weighted rows of any columns, times `rows`, are Re(g·columns)."""
    points = block.s.size
    first = block.weight[:, 0] * rows[:, :points]
    second = block.weight[:, 1] * rows[:, points:]
    result: ComplexArray = first - 1j * second
    return result if block.turn is None else result * block.turn


SKETCHED = 6
"""Combinations of channels that stand for all of them while poles are only being looked for."""


def sketch(block: Block) -> Block:
    """Replace many channels by their strongest linear combinations, which have the same poles."""
    if block.channels <= SKETCHED:
        return block
    scale = np.sqrt(np.mean(block.weight**2, axis=(1, 2)))
    scaled = block.values * scale[:, np.newaxis]
    gram = (scaled @ scaled.conj().T).real
    mix = np.linalg.eigh(gram)[1][:, -SKETCHED:].T * scale
    spread = np.mean(1 / block.weight**2, axis=1)
    weight = 1 / np.sqrt(mix**2 @ spread)
    return make_block(block.s, mix @ block.values, np.repeat(weight[:, np.newaxis], 2, axis=1))
