"""Cycles and the branches they lie on, followed by Newton's method whatever their stability.

A branch is followed in its multiplier: the cycle and the parameter where the multiplier has a given
value solve F(x, r) = (f^p(x) - x, (f^p)'(x) - value) = 0, which stays regular through a fold, where the
parameter turns back, and at a flip. So both ends of a stable branch, multiplier -1 and +1, are reached
in a few steps from any cycle on it.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction
from typing import Any, Protocol

import numpy as np
import numpy.typing as npt

from tinemark.onsets.float_map import CycleStep
from tinemark.onsets.one_map import OneMap
from tinemark.onsets.results import Kind


class CycleMap(Protocol):
    """What following a branch asks of a map: `FloatMap` and `BallMap` both answer."""

    one: OneMap
    scale: float
    fine: float
    coincident: float
    slice_steps: int

    def number(self, value: Fraction | float) -> Any:
        """A parameter or state value in this map's arithmetic."""

    def exact(self, value: Any) -> Fraction:
        """A number of this map's arithmetic as the rational it is."""

    def offset(self, value: Any, origin: Fraction) -> float:
        """How far a number lies from an exact one."""

    def midway(self, a: Any, b: Any) -> Any:
        """The middle of two numbers."""

    def newton(self, x: Any, r: Any, period: int, target: float | None) -> CycleStep | None:
        """One Newton step for a cycle, at a fixed parameter or with a multiplier as target."""

    def slopes(self, x: Any, r: Any, period: int) -> tuple[float, float, float, float]:
        """Derivatives of f^p: in x, in r, twice in x, mixed."""

    def points(self, x: Any, r: Any, count: int) -> Any:
        """Orbit of `count` points, from x on."""

    def observed_offsets(self, points: Any, r: Any, origin: Fraction) -> npt.NDArray[np.float64]:
        """How far the observed quantity lies from an exact value, at each state."""

    def settle(
        self, xs: Sequence[Any], rs: Sequence[Any], transient: int, most: int
    ) -> tuple[Any, npt.NDArray[np.int64]]:
        """Run orbits, then look for returns."""

    def critical_points(self, r: Any) -> list[Any]:
        """Turning points of the map at a parameter value."""


@dataclass(frozen=True)
class Cycle:
    """A cycle: least period, one of its points, parameter value, multiplier."""

    period: int
    x: Any
    r: Any
    multiplier: float


@dataclass(frozen=True)
class Crossing:
    """An onset in working precision: kind, period of the cycle, a point of it, parameter value.

    `extent` is how far the parameter moves while the multiplier goes from one end of the stable
    branch to the other, at the rate it has there: the size of what splits, as seen on a screen.
    """

    kind: Kind
    period: int
    x: Any
    r: Any
    extent: float


def find_cycle(cycles: CycleMap, x: Any, r: Any, period: int) -> Cycle | None:
    """Newton's method for a cycle at fixed parameter; gives it with its least period."""
    previous = math.inf
    # A state far from zero has coarser numbers around it than its scale alone would say.
    limit = cycles.fine * max(cycles.scale, 1e-2 * abs(float(x)))
    for _ in range(40):
        step = cycles.newton(x, r, period, None)
        if step is None or abs(step.shift_x) > 10 * cycles.scale:
            return None
        x = step.x
        size = abs(step.shift_x)
        if size <= limit or (size >= previous / 2 and size < 1e4 * limit):
            break
        previous = size
    else:
        return None
    period = least_period(cycles, x, r, period)
    return Cycle(period, x, r, cycles.slopes(x, r, period)[0])


def least_period(cycles: CycleMap, x: Any, r: Any, period: int) -> int:
    """The smallest divisor of `period` after which the cycle closes, as far as it can be told."""
    points = cycles.points(x, r, period)
    limit = cycles.coincident * cycles.scale
    for divisor in range(1, period // 2 + 1):
        if period % divisor == 0 and abs(float(points[divisor] - points[0])) <= limit:
            return divisor
    return period


def cycle_with_multiplier(
    cycles: CycleMap, x: Any, r: Any, period: int, target: float, *, most: int = 20
) -> tuple[Any, Any, CycleStep] | None:
    """Newton's method for a cycle with a given multiplier, from close by."""
    previous = math.inf
    for count in range(most):
        step = cycles.newton(x, r, period, target)
        if step is None:
            return None
        size = math.hypot(step.shift_x / cycles.scale, step.shift_r / (abs(float(r)) + 1e-300))
        if count > 1 and size > 4 * previous and size > 1e-9:
            return None
        x, r = step.x, step.r
        miss = abs(step.multiplier - target)
        if size < cycles.fine or (miss < 1e-6 and size >= previous / 2):
            return x, r, step
        previous = size
    return None


def follow_to_multiplier(
    cycles: CycleMap, start: Cycle, target: float, origin: Fraction, reach: float
) -> tuple[Cycle | None, float]:
    """Follow a branch until its multiplier has a value.

    Parameters
    ----------
    origin, reach
        The branch is left alone where its parameter value is further than `reach` from `origin`.

    Returns
    -------
    cycle
        Where the multiplier has the value; None where the branch left or could not be followed.
    offset
        How far from `origin` the branch was followed.
    """
    now = start
    stride = 0.5
    while now.multiplier != target:
        longest = stride * max(1.0, abs(now.multiplier))
        away = target - now.multiplier
        goal = target if abs(away) <= longest else now.multiplier + math.copysign(longest, away)
        found = cycle_with_multiplier(cycles, now.x, now.r, now.period, goal)
        # A cycle of lower period, run through several times, solves the same equations.
        if found is None or least_period(cycles, found[0], found[1], now.period) != now.period:
            stride /= 2
            if stride < 0.03:
                return None, cycles.offset(now.r, origin)
            continue
        now = Cycle(now.period, found[0], found[1], goal)
        offset = cycles.offset(now.r, origin)
        if abs(offset) > reach:
            return None, offset
        stride = min(0.7, stride * 1.4)
    return now, cycles.offset(now.r, origin)


def crossing_at(cycles: CycleMap, cycle: Cycle, kind: Kind) -> Crossing | None:
    """The crossing a cycle with multiplier -1 or +1 is; None where it is no regular one."""
    u, v, w, z = cycles.slopes(cycle.x, cycle.r, cycle.period)
    determinant = (u - 1) * z - v * w
    if not math.isfinite(determinant) or determinant == 0:
        return None
    if least_period(cycles, cycle.x, cycle.r, cycle.period) != cycle.period:
        return None
    # Flip: the multiplier moves at -det/2 in r. Fold: r - r_fold = -(1 - multiplier)^2 / (2 v w).
    extent = 4 / abs(determinant) if kind is Kind.FLIP else 2 / abs(determinant)
    return Crossing(kind, cycle.period, cycle.x, cycle.r, extent)


def crossings_from(
    cycles: CycleMap, start: Cycle, origin: Fraction, reach: float
) -> tuple[list[Crossing], tuple[float, float]]:
    """The onsets at both ends of the branch a cycle lies on.

    Returns
    -------
    crossings
        Flip and fold of the cycle's own branch, and the flip it was born at where it was.
    span
        Offsets from `origin` between which the branch is known now.
    """
    found: list[Crossing | None] = []
    flip, low = follow_to_multiplier(cycles, start, -1.0, origin, reach)
    if flip is not None:
        found.append(crossing_at(cycles, flip, Kind.FLIP))
    high = cycles.offset(start.r, origin)
    born = birth_flip(cycles, start, origin, reach)
    if born is not None:
        found.append(born)
        high = cycles.offset(born.r, origin)
    else:
        fold, high = follow_to_multiplier(cycles, start, 1.0, origin, reach)
        if fold is not None:
            found.append(crossing_at(cycles, fold, Kind.FOLD))
    crossings = [crossing for crossing in found if crossing is not None]
    return crossings, (min(low, high), max(low, high))


def birth_flip(cycles: CycleMap, start: Cycle, origin: Fraction, reach: float) -> Crossing | None:
    """The flip at which a cycle of even period appeared, if it did at one."""
    if start.period % 2:
        return None
    near: Cycle | None = start
    half = start.period // 2
    for closeness in (0.5, 0.9):
        assert near is not None
        if near.multiplier < closeness:
            near, _ = follow_to_multiplier(cycles, near, closeness, origin, 1.5 * reach)
            if near is None:
                return None
        points = cycles.points(near.x, near.r, half + 1)
        middle = cycles.midway(points[0], points[half])
        found = cycle_with_multiplier(cycles, middle, near.r, half, -1.0)
        if found is None:
            continue
        x, r, _ = found
        pair = abs(float(points[half] - points[0]))
        # The parent's point lies between the pair, and the pair closes as a square root.
        if abs(float(x - middle)) <= pair and abs(cycles.offset(r, origin)) <= reach:
            crossing = crossing_at(cycles, Cycle(half, x, r, -1.0), Kind.FLIP)
            if crossing is not None:
                return crossing
    return None
