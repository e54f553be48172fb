"""Counts to colour indices, and the colour tables. Loads quickly: the window uses this too.

Look-up tables have 256 entries: index 0 is the empty cell, which shows the ground.
"""

from __future__ import annotations

import sys
from functools import cache
from typing import Any

import numpy as np
from numpy.typing import NDArray

from tinemark.density import tone_plain
from tinemark.density.tone_plain import EVEN_SIDE, KEY_SHIFT, KEY_ZERO, KEYS, keys

TONES = ("linear", "log", "equalised")

_LOG_SPAN = 4096.0
"""Cells visited this many times less often than the most visited one end near the first colour."""

_LINEAR_SHARE = 0.99
"""Share of the visited cells that the linear tone spreads; the rest is saturated. One fixed point would
otherwise leave everything else in the first colour."""

_SAMPLE = 1 << 17

EVENED_STEPS = 4096
"""Steps a column from which on a picture shows its own grain."""


def tone_map(counts: NDArray[np.uint32], mode: str = "log") -> NDArray[np.uint8]:
    """Colour indices of counts.

    A picture looks the same however long it has been drawn: only the counts' ratios matter.

    Parameters
    ----------
    counts
        uint32, any shape, any strides.
    mode
        "linear": in proportion to the visits. "log": equal steps of colour for equal factors of visits.
        "equalised": every index about the same number of visited cells.

    Returns
    -------
    uint8 of the same shape: 0 where there is no visit, else 1 to 255, never falling with the count.

    Raises
    ------
    ValueError
        The mode is not known.
    """
    cells = counts if counts.ndim == 2 else counts.reshape(1, -1)
    indices: NDArray[np.uint8] = _loops().toned(cells, _indices_by_key(cells, mode))
    return indices.reshape(counts.shape)


def coloured(counts: NDArray[np.uint32], mode: str, colours: NDArray[np.uint32]) -> NDArray[np.uint32]:
    """Counts to colours at once, as `tone_map` and a look-up in `colours`, shape (256,), would give them.

    Parameters
    ----------
    counts
        uint32, shape (rows, columns), any strides.

    Returns
    -------
    uint32, shape (rows, columns), in memory order.
    """
    pixels: NDArray[np.uint32] = _loops().toned(counts, colours[_indices_by_key(counts, mode)])
    return pixels


def even(counts: NDArray[np.uint32], steps: float) -> NDArray[np.uint32]:
    """The counts of a picture of a few `steps` a column, without the grain that so few steps have.

    Where a cell has hardly been visited, its neighbours tell better than its own count how often it will
    be: they share their visits (`tone_kernels.evened`), and all counts grow by one factor. A picture of
    many steps is returned as it is.

    Parameters
    ----------
    counts
        uint32, shape (rows, columns), in memory order.
    """
    return counts if steps >= EVENED_STEPS else _loops().even_counts(counts)


def shares_of(lines: int, places: int) -> NDArray[np.uint32]:
    """Memory for the shares of the squares of so many cells."""
    return np.zeros((-(-lines // EVEN_SIDE), -(-places // EVEN_SIDE)), np.uint32)


def colour_columns(
    counts: NDArray[np.uint32],
    mode: str,
    colours: NDArray[np.uint32],
    shares: NDArray[np.uint32],
    pixels: NDArray[np.uint32],
) -> None:
    """Colours of a picture of few steps, evened, from a drawing's counts; a column is two pixels wide.

    Parameters
    ----------
    counts
        uint32, shape (columns, rows + 2): from the bottom up, with a cell below and one above the view. No
        count is much larger than a hundred thousand.
    colours
        uint32, shape (256,).
    shares
        `shares_of` columns and rows; overwritten.
    pixels
        uint32, shape (rows, 2 * columns), row 0 at the top; overwritten.
    """
    from tinemark.density.tone_kernels import evened, shared_out, upright

    highest = shared_out(counts, 1, shares)
    if mode == "log":
        by_key = _indices_of_log(highest)
    else:
        by_key = _indices_by_key(evened(np.ascontiguousarray(counts[:, 1:-1]), shares), mode)
    # Counts are small enough for a table of all of them, which spares a logarithm a cell.
    upright(counts, shares, colours[by_key[keys(np.arange(highest + 1, dtype=np.uint32))]], pixels)


def _indices_by_key(cells: NDArray[np.uint32], mode: str) -> NDArray[np.uint8]:
    if mode not in TONES:
        raise ValueError(f'there is no tone "{mode}"; known tones: {", ".join(TONES)}')
    loops = _loops()
    if mode == "log":
        return _indices_of_log(loops.largest(cells))
    visits = loops.visits_of_keys(cells, _stride(cells.size))
    visits[0] = 0
    below = np.cumsum(visits)
    total = max(int(below[-1]), 1)
    values = _values()
    if mode == "linear":
        cap = values[int(np.searchsorted(below[:-1], _LINEAR_SHARE * total))]
        return _indices(values / max(cap, 1.0))
    return _indices((below - 0.5 * visits) / total)


def _indices_of_log(highest: int) -> NDArray[np.uint8]:
    # No cell has a key beyond that of the highest count.
    values = _values()
    values = values[: int(np.searchsorted(values, highest)) + 2]
    return _indices(np.log1p(values * (_LOG_SPAN / max(highest, 1))) / np.log1p(_LOG_SPAN))


def _indices(shares: NDArray[np.float64]) -> NDArray[np.uint8]:
    """Colour indices by key from the shares of the colours that the keys reach; missing keys are not met."""
    table = np.zeros(KEYS, np.uint8)
    table[1 : len(shares)] = 1.0 + np.clip(shares[1:] * 254.0, 0.0, 254.0)
    return table


def _loops() -> Any:
    """The loops over cells: compiled where whoever draws has loaded them, else NumPy's.

    A picture of a system that is not compiled yet must not wait for the compiler because of its colours.
    """
    compiled = sys.modules.get("tinemark.density.tone_kernels")
    return compiled if getattr(compiled, "LOADED", False) else tone_plain


def _stride(cells: int) -> int:
    """A hundred thousand cells of a large picture tell the shares of all of them."""
    # An odd stride, so that it is prime to most widths and no column is met again and again.
    stride = cells // _SAMPLE
    return 2 * (stride // 2) + 1 if stride > 1 else 1


@cache
def _values() -> NDArray[np.float64]:
    """Count that each key stands for."""
    of_keys = (np.arange(KEYS, dtype=np.uint32) + np.uint32(KEY_ZERO)) << np.uint32(KEY_SHIFT)
    values = of_keys.view(np.float32).astype(np.float64)
    values[0] = 0.0
    values.setflags(write=False)
    return values


# Our names, the perceptually uniform map each is cut from (Kovesi, 2015), and the part of it used,
# first to last: the ends that no ground could be told from are left out.
_SOURCES = {
    "ink": ("linear_blue_5_95_c73", 0.90, 0.0),
    "graphite": ("linear_grey_10_95_c0", 0.88, 0.0),
    "clay": ("linear_worb_100_25_c53", 0.15, 1.0),
    "glow": ("linear_blue_5_95_c73", 0.20, 1.0),
    "silver": ("linear_grey_10_95_c0", 0.14, 1.0),
    "amber": ("linear_protanopic_deuteranopic_kyw_5_95_c49", 0.16, 1.0),
    "ember": ("linear_kryw_5_100_c67", 0.14, 1.0),
}

PALETTE_NAMES = tuple(_SOURCES)

DARK_FIRST = frozenset({"glow", "silver", "amber", "ember"})
"""Palettes made for a dark ground; the others are made for a light one."""


@cache
def palettes() -> dict[str, NDArray[np.uint8]]:
    """Colour tables by name, each uint8 of shape (256, 3), lowest counts first.

    Lightness changes evenly and in one direction along each, so that all are readable without colour
    vision. Index 0 repeats index 1; whoever draws puts the ground there.
    """
    import colorcet

    tables = {}
    for name, (source, first, last) in _SOURCES.items():
        colours = np.array([_rgb(text) for text in colorcet.palette[source]], np.float64)
        place = np.linspace(first, last, 255) * (len(colours) - 1)
        each = [np.interp(place, np.arange(len(colours)), colours[:, channel]) for channel in range(3)]
        table = np.empty((256, 3), np.uint8)
        table[1:] = np.rint(np.stack(each, axis=1))
        table[0] = table[1]
        table.setflags(write=False)
        tables[name] = table
    return tables


def _rgb(text: str) -> tuple[int, int, int]:
    value = int(text.lstrip("#"), 16)
    return value >> 16, value >> 8 & 255, value & 255


def colour_table(palette: str, ground: tuple[int, int, int]) -> NDArray[np.uint8]:
    """Table of a palette on a ground, uint8 of shape (256, 3).

    Raises
    ------
    ValueError
        The palette is not known.
    """
    known = palettes()
    if palette not in known:
        raise ValueError(f'there is no palette "{palette}"; known palettes: {", ".join(known)}')
    table = known[palette].copy()
    table[0] = ground
    return table


HATCH_SPACING = 8


def hatched(rows: int, columns: int, escaped: NDArray[np.bool_]) -> NDArray[np.bool_]:
    """Where the hatch of escaped columns is drawn: slanted lines, told from density by shape, not hue.

    Parameters
    ----------
    escaped
        bool, shape (columns,).

    Returns
    -------
    bool, shape (rows, columns).
    """
    slant: NDArray[np.bool_] = (np.arange(rows)[:, None] + np.arange(columns)) % HATCH_SPACING == 0
    return slant & escaped
