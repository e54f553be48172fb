"""Cycles as places on a branch: what a branch is made of, and what may be passed on it."""

from __future__ import annotations

from dataclasses import dataclass, field
from enum import Enum
from typing import Protocol

import numpy as np
from numpy.typing import NDArray

Floats = NDArray[np.float64]

ACROSS, UP = 1280.0, 800.0
"""Pixels of the view that smoothness is judged by."""
MOST_UNSTABLE = 1e9
"""Cycles with a larger multiplier are not followed in doubles."""
SAME_POINT = 1e-6
"""Points of a cycle closer than this share of the state's scale are one point."""
NEUTRAL = 1e-6
"""Multipliers may exceed 1 by this much and count as stable: area-preserving maps have them at 1."""


class Passed(Enum):
    """What a branch passes."""

    FOLD = "fold"
    FLIP = "flip"
    NEIMARK_SACKER = "Neimark-Sacker"
    CROSSING = "crossing of branches"


@dataclass(frozen=True)
class Place:
    """A cycle on a branch.

    Attributes
    ----------
    points
        (p, n), in the order of the orbit.
    r
        The parameter.
    multipliers
        Largest by modulus first.
    moves, move_r
        Unit tangent of the branch in scaled length: (p, n) of the points, and of the parameter.
    """

    points: Floats
    r: float
    multipliers: tuple[complex, ...]
    moves: Floats
    move_r: float

    @property
    def period(self) -> int:
        """Number of points."""
        return len(self.points)

    @property
    def stable(self) -> bool:
        """Whether all multipliers lie inside the unit circle."""
        return max(map(abs, self.multipliers)) <= 1 + NEUTRAL

    def turned(self) -> Place:
        """The same place, the branch looked along the other way."""
        return Place(self.points, self.r, self.multipliers, -self.moves, -self.move_r)


class Family(Protocol):
    """The cycles of a map along a parameter: solved for at a fixed parameter, or across a direction.

    Attributes
    ----------
    scales, width
        Length of each state, and of the parameter, that counts as 1.
    """

    scales: Floats
    width: float

    def corrected(self, points: Floats, r: float, along: tuple[Floats, float] | None = None) -> Place | None:
        """Newton's method for a cycle.

        Parameters
        ----------
        along
            Direction (points, parameter) across which the parameter is free; None keeps the parameter.

        Returns
        -------
        Place or None
            None where the method does not converge.
        """

    def observed(self, points: Floats, r: float) -> Floats:
        """Observed quantity at each point."""

    def unfolding(self, place: Place) -> tuple[float, float]:
        """Push and bend of f^p along the direction whose multiplier is nearest 1, in scaled lengths.

        The push is the derivative in the parameter, the bend the second derivative along the direction,
        both seen from the left critical vector.
        """


@dataclass(frozen=True)
class Screen:
    """The view by which smoothness is judged, and how far beyond it branches are followed."""

    left: float
    width: float
    bottom: float
    height: float
    margin: float = 0.1

    def pixels(self, family: Family, place: Place) -> Floats:
        """(p, 2) places on the screen."""
        up = (family.observed(place.points, place.r) - self.bottom) / self.height * UP
        across = np.full(len(up), (place.r - self.left) / self.width * ACROSS)
        return np.column_stack((across, up))

    def holds(self, r: float) -> bool:
        """Whether a parameter value lies in the view or its margin."""
        return -self.margin <= (r - self.left) / self.width <= 1 + self.margin


@dataclass(frozen=True)
class Event:
    """Something a branch passes: what, and the place in its trace."""

    passed: Passed
    at: int


@dataclass
class Trace:
    """A branch as followed one way. `ended` says why it stops there.

    Attributes
    ----------
    parent
        The cycle of half the period that a doubled one joined.
    """

    places: list[Place]
    events: list[Event] = field(default_factory=list)
    ended: str = ""
    parent: Place | None = None


def flip_test(values: tuple[complex, ...]) -> float:
    """Product of (1 + multiplier): changes sign where one of them passes -1."""
    return float(np.real(np.prod([1 + value for value in values])))


def fold_test(values: tuple[complex, ...]) -> float:
    """Product of (multiplier - 1): changes sign where one of them passes 1."""
    return float(np.real(np.prod([value - 1 for value in values])))


def circle_test(values: tuple[complex, ...]) -> float:
    """Product of (multiplier i times multiplier j - 1): zero where a pair has product 1."""
    pairs = [values[i] * values[j] - 1 for i in range(len(values)) for j in range(i)]
    return float(np.real(np.prod(pairs)))


def least_period(points: Floats, scales: Floats, tolerance: float = SAME_POINT) -> int:
    """Least period of a cycle: the smallest divisor after which all points come back."""
    count = len(points)
    for period in range(1, count // 2 + 1):
        if count % period == 0 and np.all(np.abs(np.roll(points, -period, 0) - points) < tolerance * scales):
            return period
    return count
