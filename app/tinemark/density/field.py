"""The counts behind a picture, kept apart from its colours."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray


@dataclass(frozen=True)
class Field:
    """A finished or still growing picture.

    Attributes
    ----------
    counts
        uint32, shape (rows, columns), row 0 at the bottom of the view.
    lyapunov
        float64, shape (columns,): largest Lyapunov exponent per step, nan where unknown.
    period
        int32, shape (columns,): period of the settled orbit, 0 where it is not periodic
        (up to the period that was looked for) or not known.
    escaped
        bool, shape (columns,): the orbit left every bound or became undefined.
    steps
        Steps drawn in all, transients not counted.
    """

    counts: NDArray[np.uint32]
    lyapunov: NDArray[np.float64]
    period: NDArray[np.int32]
    escaped: NDArray[np.bool_]
    steps: int
