"""Counts to screen colours. A whole picture is toned on the bridge's own thread, never on the window's."""

from __future__ import annotations

from dataclasses import dataclass
from functools import lru_cache

import numpy as np
from numpy.typing import NDArray

from tinemark.density.field import Field


@dataclass(frozen=True)
class Tones:
    """How counts become colours: tone curve, colour map, the ground that uncounted cells keep, and its
    kind.
    """

    tone: str
    palette: str
    ground: str
    dark: bool
    thickness: int = 1


def toned(field: Field, tones: Tones) -> NDArray[np.uint32]:
    """Pixels 0xffRRGGBB, shape (rows, columns), row 0 at the top, in memory order.

    On a screen with fine pixels a branch one cell high would fade away. Where the orbit is periodic,
    and only there, each cell is drawn `thickness` pixels high.
    """
    from tinemark.density.tone import coloured, even, tone_map

    counts = even(field.counts, field.steps / field.counts.shape[1])[::-1]
    if tones.thickness == 1:
        return coloured(counts, tones.tone, table(tones))
    indices = tone_map(counts, tones.tone)
    is_periodic = field.period > 0
    if np.isnan(field.lyapunov).all():
        # A first look knows no periods; a settled orbit meets few cells again and again.
        visited = np.count_nonzero(field.counts, axis=0)
        is_periodic = is_periodic | (visited * 3 * len(visited) <= field.steps)
    periodic = np.flatnonzero(is_periodic)
    lines = indices[:, periodic]
    thick = lines.copy()
    for step in range(1, tones.thickness):
        # Down and up in turn, so that the branch stays where it is.
        by = (step + 1) // 2 * (1 if step % 2 else -1)
        target, source = (thick[by:], lines[:-by]) if by > 0 else (thick[:by], lines[-by:])
        np.maximum(target, source, out=target)
    indices[:, periodic] = thick
    return np.ascontiguousarray(table(tones)[indices])


@lru_cache(maxsize=32)
def table(tones: Tones) -> NDArray[np.uint32]:
    """The colour table of 256 entries; entry 0 is the ground."""
    from tinemark.density.tone import palettes

    colors = np.asarray(palettes()[tones.palette], dtype=np.uint32)[:, :3]
    packed = (np.uint32(0xFF) << 24) | (colors[:, 0] << 16) | (colors[:, 1] << 8) | colors[:, 2]
    result = packed.astype(np.uint32)
    result[0] = 0xFF000000 | int(tones.ground.lstrip("#"), 16)
    result.setflags(write=False)
    return result
