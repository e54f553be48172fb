"""One-pass loops over the cells for the tones; loaded on first use, since the compiler comes with them."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from tinemark.systems.native import jit

KEY_SHIFT = 15
KEY_ZERO = (127 << 8) - 1
KEYS = (32 << 8) + 2
"""A count's key is its logarithm in steps of 1/256 octave, the leading bits of its float; exact up to 512.
No visit has key 0, one visit key 1."""


@jit
def visits_of_keys(counts: NDArray[np.uint32], stride: int) -> NDArray[np.int64]:
    """How many cells have each key, every `stride`-th cell looked at; shape (KEYS,)."""
    visits = np.zeros(KEYS, np.int64)
    rows, columns = counts.shape
    for place in range(0, rows * columns, stride):
        bits = np.float32(counts[place // columns, place % columns]).view(np.uint32)
        key = int(bits >> KEY_SHIFT) - KEY_ZERO
        visits[key if key > 0 else 0] += 1  # noqa: FURB136
    return visits


@jit
def largest(counts: NDArray[np.uint32]) -> int:
    """The largest count."""
    rows, columns = counts.shape
    found = np.uint32(0)
    for i in range(rows):
        for j in range(columns):
            found = max(found, counts[i, j])
    return int(found)


@jit
def toned(counts: NDArray[np.uint32], table: NDArray[np.uint8]) -> NDArray[np.uint8]:
    """The table's entry for the key of each count."""
    rows, columns = counts.shape
    indices = np.empty((rows, columns), np.uint8)
    for i in range(rows):
        for j in range(columns):
            bits = np.float32(counts[i, j]).view(np.uint32)
            key = int(bits >> KEY_SHIFT) - KEY_ZERO
            indices[i, j] = table[key if key > 0 else 0]  # noqa: FURB136
    return indices
