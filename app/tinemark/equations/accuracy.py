"""How accurately samples are integrated: three levels in words, and the error each is measured to have.

What a tolerance of steps means for a sample depends on the system: errors grow on the way to the next sample.
So a level is what it promises for a sample, and the tolerance that keeps the promise is found by taking
orbits of the system itself one sample on, once more with the smallest steps, and comparing.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass
from enum import Enum
from functools import lru_cache

import numpy as np

from tinemark.equations.return_map import FloatReturnMap
from tinemark.systems.system import System

SMALLEST = 2e-14
"""Tolerance of a step below which rounding is all that is left."""

PILOTS = 24
"""Orbits across the sweep that a level is measured on."""

_SETTLING, _KEPT, _ROUNDS = 20, 3, 6
_LOW, _AIM = 0.4, 0.7
"""Errors from this share of the goal upwards are near enough to it; and the share that is aimed at."""


class Accuracy(Enum):
    """How accurate a sample is to be; the value is its name."""

    PICTURE = "picture"
    BENCH = "bench"
    REFERENCE = "reference"

    @property
    def error(self) -> float:
        """Largest error of one sample, as a share of each state's size."""
        return {"picture": 1e-6, "bench": 1e-8, "reference": 1e-11}[self.value]


@dataclass(frozen=True)
class MeasuredAccuracy:
    """A level as it was measured on a system.

    Attributes
    ----------
    tolerance
        Error allowed in a step, for `FloatReturnMap`.
    error
        Largest error of one sample that was seen, as a share of each state's size; nan where no orbit
        has a sample.
    samples
        How many samples were compared.
    """

    accuracy: Accuracy
    tolerance: float
    error: float
    samples: int

    @property
    def holds(self) -> bool:
        """Whether the promise of the level is kept."""
        return self.error <= self.accuracy.error

    @property
    def words(self) -> str:
        """The level and what it was measured to be, for showing."""
        name = self.accuracy.value
        if not math.isfinite(self.error):
            return f"{name}: no orbit has a sample to measure it on"
        seen = (
            f"largest error {self.error:.0e} of a state's size in {self.samples} samples, against a tight run"
        )
        if self.holds:
            return f"{name}: at most {self.accuracy.error:.0e} a sample ({seen})"
        return f"{name}: {self.accuracy.error:.0e} a sample is out of reach in doubles ({seen})"


@lru_cache(maxsize=64)
def measured_accuracy(system: System, parameter: str, accuracy: Accuracy) -> MeasuredAccuracy:
    """Find the tolerance at which a level's promise is kept on a system's own orbits.

    Raises
    ------
    SystemFileError
        The parameter is not known, or the system has no period or section.
    """
    chosen = system.parameter(parameter)
    ends = chosen.range or (chosen.value, chosen.value)
    swept = np.linspace(float(ends[0].fraction), float(ends[1].fraction), PILOTS)
    tight = FloatReturnMap(system, parameter, SMALLEST)
    start = np.array([[float(state.start)] for state in system.states])
    states = np.repeat(start, PILOTS, axis=1)
    points, at, best = [], [], []
    for turn in range(_SETTLING + _KEPT):
        after = tight.step(states, swept)
        if turn >= _SETTLING:
            points.append(states)
            at.append(swept)
            best.append(after)
        states = after
    all_points, all_at, all_best = np.hstack(points), np.hstack(at), np.hstack(best)
    compared = np.isfinite(all_points).all(axis=0) & np.isfinite(all_best).all(axis=0)
    all_points, all_at, all_best = all_points[:, compared], all_at[compared], all_best[:, compared]
    if not all_at.size:
        return MeasuredAccuracy(accuracy, SMALLEST, math.nan, 0)
    scales = tight.scales(float(chosen.value))[:, None]

    def error(tolerance: float) -> float:
        ends = FloatReturnMap(system, parameter, tolerance).step(all_points, all_at)
        return float(np.nan_to_num(np.abs(ends - all_best) / scales, nan=np.inf).max())

    tolerance, seen = tuned_tolerance(error, accuracy.error, accuracy.error / 30.0, SMALLEST)
    return MeasuredAccuracy(accuracy, tolerance, seen, int(all_at.size))


def tuned_tolerance(
    error: Callable[[float], float], goal: float, first: float, smallest: float
) -> tuple[float, float]:
    """A tolerance whose error lies below a goal, and not far below it.

    Parameters
    ----------
    error
        Measures the error at a tolerance.
    first, smallest
        Where to begin, and where to end at the latest.

    Returns
    -------
    The tolerance and its error, the best that was seen; at `smallest` the error may exceed the goal.
    """
    tolerance = max(first, smallest)
    kept: tuple[float, float] | None = None
    for _ in range(_ROUNDS):
        seen = error(tolerance)
        if seen <= goal and (kept is None or tolerance > kept[0]):
            kept = tolerance, seen
        if not math.isfinite(seen) and kept is not None:
            break
        if _LOW * goal <= seen <= goal:
            break
        if seen > goal and tolerance <= smallest:
            break
        # Errors go with the tolerance nearly in proportion; one that cannot be told is far too large.
        change = min(max(_AIM * goal / max(seen, 1e-300), 1e-3), 1e2) if math.isfinite(seen) else 1e-2
        tolerance = max(tolerance * change, smallest)
        if kept is not None and tolerance <= kept[0]:
            break
    if kept is not None:
        return kept
    return smallest, error(smallest)
