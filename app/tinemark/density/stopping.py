"""The flag that stops a drawing run from outside."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray


class StopFlag:
    """Set once, from any thread; kernels read it after every buffer of steps.

    Attributes
    ----------
    cell
        uint8, shape (1,): what the kernels read. A store to it is seen by other threads without a lock.
    """

    def __init__(self) -> None:
        self.cell: NDArray[np.uint8] = np.zeros(1, np.uint8)

    def set(self) -> None:
        """Ask for the run to end."""
        self.cell[0] = 1

    def is_set(self) -> bool:
        """Whether it was asked to end."""
        return bool(self.cell[0])
