"""Counts to screen colours. Runs on the bridge's own thread, never on the window's."""

from __future__ import annotations

from dataclasses import dataclass
from functools import lru_cache

import numpy as np
from numpy.typing import NDArray


@dataclass(frozen=True)
class Tones:
    """How counts become colours: tone curve, colour map, the ground that uncounted cells keep, and its
    kind.
    """

    tone: str
    palette: str
    ground: str
    dark: bool


def toned(counts: NDArray[np.uint32], tones: Tones) -> NDArray[np.uint32]:
    """Pixels 0xffRRGGBB, shape (rows, columns), row 0 at the top, in memory order."""
    from tinemark.density.tone import tone_map

    indices = tone_map(counts[::-1], tones.tone)
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
