"""What keeps the memory of reading a large file near the size of its numbers."""

from __future__ import annotations

import mmap
from typing import Any

import numpy as np
from numpy.typing import NDArray

Content = bytes | bytearray | mmap.mmap

_DONTNEED: int | None = getattr(mmap, "MADV_DONTNEED", None)


def release(content: Content, start: int, end: int) -> None:
    """Let the system drop the pages of a mapped file that have been read."""
    if isinstance(content, mmap.mmap) and _DONTNEED is not None:
        first = -(-start // mmap.PAGESIZE) * mmap.PAGESIZE
        length = end // mmap.PAGESIZE * mmap.PAGESIZE - first
        if length > 0:
            content.madvise(_DONTNEED, first, length)


class Growing:
    """An array of which the number of rows is not known beforehand; grows in place.

    Parameters
    ----------
    columns : int or None
        Numbers per row; None for a one-dimensional array.
    dtype : numpy type
        Of the numbers.
    """

    def __init__(self, columns: int | None, dtype: type[Any]) -> None:
        self._rows = 0
        self._array = np.empty(0 if columns is None else (0, columns), dtype=dtype)

    def add(self, rows: NDArray[Any], whole: float) -> None:
        """Append rows; `whole` is the share of the file that they complete, to plan ahead."""
        need = self._rows + len(rows)
        if need > len(self._array):
            planned = max(need, int(need / max(whole, 1e-3) * 1.02) + 16)
            self._resize(min(planned, 4 * need + 1024) if whole < 0.05 else planned)
        self._array[self._rows : need] = rows
        self._rows = need

    def finished(self) -> NDArray[Any]:
        """Return the array, cut to its rows; nothing may be added afterwards."""
        self._resize(self._rows)
        return self._array

    def _resize(self, rows: int) -> None:
        # In place, by the allocator: growing a large block moves no data.
        self._array.resize((rows, *self._array.shape[1:]), refcheck=False)
