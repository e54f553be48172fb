"""Counts to colour indices, and the colour tables. Loads quickly: the window uses this too.

Look-up tables have 256 entries: index 0 is the empty cell, which shows the ground.
"""

from __future__ import annotations

from functools import cache

import numpy as np
from numpy.typing import NDArray

TONES = ("linear", "log", "equalised")

_LOG_SPAN = 4096.0
"""Cells visited this many times less often than the most visited one end near the first colour."""

_LINEAR_SHARE = 0.99
"""Share of the visited cells that the linear tone spreads; the rest is saturated. One fixed point would
otherwise leave everything else in the first colour."""

_SAMPLE = 1 << 17


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
    if mode not in TONES:
        raise ValueError(f'there is no tone "{mode}"; known tones: {", ".join(TONES)}')
    # The compiler is loaded with the first picture, not with the window.
    from tinemark.density.tone_kernels import KEYS, largest, toned, visits_of_keys

    cells = counts if counts.ndim == 2 else counts.reshape(1, -1)
    table = np.zeros(KEYS, np.uint8)
    values = _values()
    if mode == "log":
        highest = max(float(largest(cells)), 1.0)
        share = np.log1p(values * (_LOG_SPAN / highest)) / np.log1p(_LOG_SPAN)
    else:
        visits = visits_of_keys(cells, _stride(counts.size))
        visits[0] = 0
        below = np.cumsum(visits)
        total = max(int(below[-1]), 1)
        if mode == "linear":
            cap = values[int(np.searchsorted(below[:-1], _LINEAR_SHARE * total))]
            share = values / max(cap, 1.0)
        else:
            share = (below - 0.5 * visits) / total
    table[1:] = 1.0 + np.clip(share[1:] * 254.0, 0.0, 254.0)
    return toned(cells, table).reshape(counts.shape)


def _stride(cells: int) -> int:
    """A hundred thousand cells of a large picture tell the shares of all of them."""
    # An odd stride, so that it is prime to most widths and no column is met again and again.
    stride = cells // _SAMPLE
    return 2 * (stride // 2) + 1 if stride > 1 else 1


@cache
def _values() -> NDArray[np.float64]:
    """Count that each key stands for."""
    from tinemark.density.tone_kernels import KEY_SHIFT, KEY_ZERO, KEYS

    keys = (np.arange(KEYS, dtype=np.uint32) + np.uint32(KEY_ZERO)) << np.uint32(KEY_SHIFT)
    values = keys.view(np.float32).astype(np.float64)
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
