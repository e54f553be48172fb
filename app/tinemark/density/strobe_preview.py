"""A coarse picture first: fewer columns, each drawn several cells wide, while the whole one is on its way."""

from __future__ import annotations

from dataclasses import dataclass, field, replace

import numpy as np
from numpy.typing import NDArray

from tinemark.density.field import Field
from tinemark.density.request import PictureRequest

COARSENESS = 8
"""Cells that a column of the coarse picture is wide."""

SETTLING = 100
"""Samples thrown away at most before the first counted one."""


def coarse_request(request: PictureRequest) -> PictureRequest | None:
    """What to draw first; None where the picture is small already."""
    columns = -(-request.columns // COARSENESS)
    if columns < 2 * COARSENESS:
        return None
    return replace(request, columns=columns, transient_steps=min(request.transient_steps, SETTLING))


def spread(coarse: Field, columns: int) -> Field:
    """A coarse picture drawn over so many columns."""
    place = np.arange(columns) * coarse.counts.shape[1] // columns
    return Field(
        counts=np.ascontiguousarray(coarse.counts[:, place]),
        lyapunov=coarse.lyapunov[place],
        period=coarse.period[place],
        escaped=coarse.escaped[place],
        steps=coarse.steps,
    )


@dataclass
class Periods:
    """Periods of columns, told anew only when a picture has twice as many samples as the last time.

    Following each column for as long as its period takes to tell costs as much as a whole picture.
    """

    level: int = 256
    found: NDArray[np.int32] = field(default_factory=lambda: np.zeros(0, np.int32))

    def are_due(self, level: int) -> bool:
        """Whether a picture of so many samples a column should have its periods told."""
        return level >= 2 * self.level

    def kept(self, drawn: Field, level: int, are_told: bool) -> Field:
        """The picture, with the periods last told where it has none of its own."""
        if are_told:
            self.level, self.found = level, drawn.period
            return drawn
        known = self.found.size == drawn.period.size
        return replace(drawn, period=np.where(drawn.escaped, 0, self.found)) if known else drawn
