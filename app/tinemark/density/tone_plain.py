"""The loops of `tone_kernels` in NumPy: slower, and ready before a compiler has been loaded."""

from __future__ import annotations

from typing import TypeVar

import numpy as np
from numpy.typing import NDArray

KEY_SHIFT = 15
KEY_ZERO = (127 << 8) - 1
KEYS = (32 << 8) + 2
"""A count's key is its logarithm in steps of 1/256 octave, the leading bits of its float; exact up to 512.
No visit has key 0, one visit key 1."""

EVEN_SIDE, EVEN_BELOW, EVEN_SCALE = 4, 4, 16

Entry = TypeVar("Entry", np.uint8, np.uint32)


def keys(counts: NDArray[np.uint32]) -> NDArray[np.int64]:
    """The key of each count."""
    bits = counts.astype(np.float32).view(np.uint32) >> np.uint32(KEY_SHIFT)
    return np.maximum(bits.astype(np.int64) - KEY_ZERO, 0)


def visits_of_keys(counts: NDArray[np.uint32], stride: int) -> NDArray[np.int64]:
    """How many cells have each key, every `stride`-th cell looked at; shape (KEYS,)."""
    return np.bincount(keys(counts.reshape(-1)[::stride]), minlength=KEYS)


def largest(counts: NDArray[np.uint32]) -> int:
    """The largest count."""
    return int(counts.max(initial=0))


def toned(counts: NDArray[np.uint32], table: NDArray[Entry]) -> NDArray[Entry]:
    """The table's entry for the key of each count: colour indices, or colours."""
    return table[keys(np.ascontiguousarray(counts))]


def even_counts(counts: NDArray[np.uint32]) -> NDArray[np.uint32]:
    """The counts as `tone_kernels.shared_out` and `tone_kernels.evened` leave them."""
    rows, columns = counts.shape
    padded = np.pad(counts.astype(np.int64), ((0, -rows % EVEN_SIDE), (0, -columns % EVEN_SIDE)))
    there = np.zeros(padded.shape, np.int64)
    there[:rows, :columns] = counts < EVEN_BELOW
    visits, cells = _square_sums(padded * there), np.maximum(_square_sums(there), 1)
    shares = -(-visits * EVEN_SCALE // cells)
    spread = np.repeat(np.repeat(shares, EVEN_SIDE, axis=0), EVEN_SIDE, axis=1)[:rows, :columns]
    even = np.where(counts < EVEN_BELOW, spread, counts.astype(np.int64) * EVEN_SCALE)
    return even.astype(np.uint32)


def _square_sums(cells: NDArray[np.int64]) -> NDArray[np.int64]:
    rows, columns = cells.shape
    squares = cells.reshape(rows // EVEN_SIDE, EVEN_SIDE, columns // EVEN_SIDE, EVEN_SIDE)
    sums: NDArray[np.int64] = squares.sum(axis=(1, 3))
    return sums
