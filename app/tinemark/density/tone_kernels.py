"""One-pass loops over the cells for the tones; loaded by whoever draws: the compiler comes with them."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from tinemark.density.tone_plain import (
    EVEN_BELOW,
    EVEN_SCALE,
    EVEN_SIDE,
    KEY_SHIFT,
    KEY_ZERO,
    KEYS,
    Entry,
)
from tinemark.systems.native import jit

_UPRIGHT_AT_ONCE = 64


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
def toned(counts: NDArray[np.uint32], table: NDArray[Entry]) -> NDArray[Entry]:
    """The table's entry for the key of each count: colour indices, or colours."""
    rows, columns = counts.shape
    entries = np.empty((rows, columns), table.dtype)
    for i in range(rows):
        for j in range(columns):
            bits = np.float32(counts[i, j]).view(np.uint32)
            key = int(bits >> KEY_SHIFT) - KEY_ZERO
            entries[i, j] = table[key if key > 0 else 0]  # noqa: FURB136
    return entries


@jit
def shared_out(counts: NDArray[np.uint32], beside: int, shares: NDArray[np.uint32]) -> int:
    """What each cell of a square gets where hardly any visits are shared out; the largest evened count.

    In each square of `EVEN_SIDE` cells a side, cells of fewer than `EVEN_BELOW` visits share theirs: each
    gets the mean, times `EVEN_SCALE` and rounded up. The others keep their own count, times `EVEN_SCALE`, so
    that a branch stays one cell wide.

    Parameters
    ----------
    counts
        uint32, shape (lines, places + 2 * beside), in memory order.
    beside
        Cells to leave out at both ends of each line.
    shares
        uint32, shape (squares, squares), as many as cover lines and places; overwritten.
    """
    lines, places = counts.shape[0], counts.shape[1] - 2 * beside
    few, none, one, scale = np.uint32(EVEN_BELOW), np.uint32(0), np.uint32(1), np.uint32(EVEN_SCALE)
    # The last square may reach beyond the edge; what is summed up there stays zero.
    visits, cells = np.empty(places + EVEN_SIDE, np.uint32), np.empty(places + EVEN_SIDE, np.uint32)
    most, highest = none, none
    for top in range(0, lines, EVEN_SIDE):
        visits[:] = 0
        cells[:] = 0
        # Loops along memory that choose instead of branching: they become vector code.
        for i in range(top, min(top + EVEN_SIDE, lines)):
            for j in range(places):
                count = counts[i, j + beside]
                visits[j] += count if count < few else none
                cells[j] += one if count < few else none
                most = max(most, count)
        for square in range(shares.shape[1]):
            seen, among = none, none
            for j in range(square * EVEN_SIDE, (square + 1) * EVEN_SIDE):
                seen += visits[j]
                among += cells[j]
            among = max(among, one)
            share = (seen * scale + among - one) // among
            shares[top // EVEN_SIDE, square] = share
            highest = max(highest, share)
    return int(max(highest, most * scale if most >= few else none))


@jit
def evened(counts: NDArray[np.uint32], shares: NDArray[np.uint32]) -> NDArray[np.uint32]:
    """The evened counts of `shared_out`, in full."""
    lines, places = counts.shape
    even = np.empty((lines, places), np.uint32)
    for i in range(lines):
        for j in range(places):
            count = counts[i, j]
            share = shares[i // EVEN_SIDE, j // EVEN_SIDE]
            even[i, j] = share if count < EVEN_BELOW else count * np.uint32(EVEN_SCALE)
    return even


@jit
def upright(
    counts: NDArray[np.uint32], shares: NDArray[np.uint32], table: NDArray[Entry], entries: NDArray[Entry]
) -> None:
    """The table's entry for each evened count, columns stood upright, each twice as wide as a cell is high.

    Parameters
    ----------
    counts
        uint32, shape (columns, rows + 2): from the bottom up, with a cell below and one above.
    shares
        As `shared_out` leaves them.
    table
        Shape (largest evened count + 1,).
    entries
        Shape (rows, 2 * columns), from the top down; overwritten.
    """
    rows, columns = entries.shape[0], counts.shape[0]
    for first in range(0, columns, _UPRIGHT_AT_ONCE):
        end = min(first + _UPRIGHT_AT_ONCE, columns)
        for i in range(rows):
            line = entries[rows - 1 - i]
            for j in range(first, end):
                count = counts[j, i + 1]
                share = shares[j // EVEN_SIDE, i // EVEN_SIDE]
                entry = table[share if count < EVEN_BELOW else count * np.uint32(EVEN_SCALE)]
                line[2 * j] = entry
                line[2 * j + 1] = entry


def even_counts(counts: NDArray[np.uint32]) -> NDArray[np.uint32]:
    """Evened counts of a picture, uint32 of shape (lines, places) in memory order."""
    lines, places = counts.shape
    shares = np.zeros((-(-lines // EVEN_SIDE), -(-places // EVEN_SIDE)), np.uint32)
    shared_out(counts, 0, shares)
    return evened(counts, shares)


LOADED = True
"""The last line: another thread that meets this module half loaded must not use it."""
