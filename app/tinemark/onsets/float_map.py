"""The map of one state in doubles: compiled loops for settling, and Newton steps for cycles and onsets."""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from fractions import Fraction
from functools import lru_cache
from types import ModuleType
from typing import Any

import numpy as np
import numpy.typing as npt

from tinemark.onsets.one_map import OneMap
from tinemark.systems.emit import emit
from tinemark.systems.native import native_module

Floats = npt.NDArray[np.float64]

RETURN_TOLERANCES = (1e-10, 1e-7, 1e-4)
"""Shares of the state's extent within which an orbit counts as back where it was."""

_HEADER = """
import numpy as np
from numpy import sin as lane_sin, cos as lane_cos, tan as lane_tan, exp as lane_exp, log as lane_log
from numpy import arcsin as lane_asin, arccos as lane_acos, arctan as lane_atan, arctan2 as lane_atan2
from numpy import sinh as lane_sinh, cosh as lane_cosh, tanh as lane_tanh, sqrt as lane_sqrt
from numpy import floor as lane_floor, power as lane_pow, abs as lane_abs
from numpy import minimum as lane_min, maximum as lane_max
from tinemark.systems.native import jit
"""

_LOOPS = """

@jit
def bundle(x, r, q, n):
    {unpack}
    u = 1.0
    v = 0.0
    w = 0.0
    z = 0.0
    for _ in range(n):
        {all_derivatives}
        w = fxx * u * u + fx * w
        z = (fxx * v + fxr) * u + fx * z
        v = fx * v + fr
        u = fx * u
        x = f
    return x, u, v, w, z


@jit
def orbit(x, r, q, points):
    {unpack}
    for place in range(points.shape[0]):
        points[place] = x
        {step}
    return x


@jit
def nearest_turning(x, r, q, n):
    {unpack}
    place = 0
    least = np.inf
    for count in range(n):
        {slope}
        if abs(fx) < least * abs(fxx):
            least = abs(fx) / abs(fxx)
            place = count
        x = f
    return place


@jit
def settle(xs, rs, q, transient, most, tolerances, ends, returns):
    {unpack}
    for lane in range(xs.shape[0]):
        x = xs[lane]
        r = rs[lane]
        for _ in range(transient):
            {step}
        ends[lane] = x
        back = x
        for place in range(tolerances.shape[0]):
            returns[lane, place] = 0
        if not (abs(x) < 1e100):
            returns[lane, 0] = -1
            continue
        for n in range(1, most + 1):
            {step}
            gap = abs(x - back)
            for place in range(tolerances.shape[0]):
                if returns[lane, place] == 0 and gap <= tolerances[place]:
                    returns[lane, place] = n
            if returns[lane, 0] != 0:
                break


@jit
def observed(points, r, q):
    {unpack}
    for place in range(points.shape[0]):
        x = points[place]
        {observe}
        points[place] = f
"""


@dataclass(frozen=True)
class CycleStep:
    """One Newton step for a cycle or an onset.

    Attributes
    ----------
    x, r
        The new point.
    shift_x, shift_r
        What the step added.
    multiplier
        Derivative of f^p at the old point.
    """

    x: Any
    r: Any
    shift_x: float
    shift_r: float
    multiplier: float


class FloatMap:
    """A one-state map in doubles. States and parameters are plain floats."""

    fine = 1e-13
    """Share of the state's scale to which Newton's method is taken."""
    coincident = 1e-7
    """Share of the state's extent within which two points of a cycle count as one."""
    slice_steps = 400_000
    """Steps, over all orbits together, between two chances to cancel."""

    def __init__(self, one: OneMap) -> None:
        self.one = one
        self.module = _module(one)
        self.fixed: Floats = np.array([float(value) for _, value in one.fixed] or [0.0])
        self.scale = self._scale()

    def number(self, value: Fraction | float) -> float:
        """A parameter or state value in this map's arithmetic."""
        return float(value)

    def exact(self, value: float) -> Fraction:
        """A number of this map's arithmetic as the rational it is."""
        return Fraction(value)

    def offset(self, value: float, origin: Fraction) -> float:
        """How far a number lies from an exact one."""
        return value - float(origin)

    def midway(self, a: float, b: float) -> float:
        """The middle of two numbers."""
        return float(0.5 * (a + b))

    def newton(self, x: float, r: float, period: int, target: float | None) -> CycleStep | None:
        """One Newton step towards a cycle of this period.

        Parameters
        ----------
        target
            Multiplier wanted, the parameter being free; None keeps the parameter and finds the cycle.

        Returns
        -------
        CycleStep or None
            None where the equations are singular or the orbit escaped.
        """
        x, r = float(x), float(r)
        end, u, v, w, z = map(float, self.module.bundle(x, r, self.fixed, period))
        gap = end - x
        if target is None:
            if u == 1 or not math.isfinite(u) or not math.isfinite(gap):
                return None
            shift_x, shift_r = -gap / (u - 1), 0.0
        else:
            miss = u - target
            determinant = (u - 1) * z - v * w
            if determinant == 0 or not math.isfinite(determinant) or not math.isfinite(gap):
                return None
            shift_x = -(z * gap - v * miss) / determinant
            shift_r = -((u - 1) * miss - w * gap) / determinant
        if not (math.isfinite(shift_x) and math.isfinite(shift_r)):
            return None
        return CycleStep(x + shift_x, r + shift_r, shift_x, shift_r, u)

    def slopes(self, x: float, r: float, period: int) -> tuple[float, float, float, float]:
        """Derivatives of f^p: in x, in r, twice in x, mixed."""
        _, u, v, w, z = self.module.bundle(x, r, self.fixed, period)
        return u, v, w, z

    def points(self, x: float, r: float, count: int) -> Floats:
        """Orbit of `count` points, from x on."""
        points = np.empty(count)
        self.module.orbit(x, r, self.fixed, points)
        return points

    def nearest_turning(self, x: float, r: float, count: int) -> int:
        """Steps from x to the point, of `count` on its orbit, that is nearest a turning point of the map.

        The distance is |f_x / f_xx|, Newton's estimate: a flat tail of the map does not count as near.
        """
        return int(self.module.nearest_turning(x, r, self.fixed, count))

    def observed_offsets(self, points: Floats, r: float, origin: Fraction) -> Floats:
        """How far the observed quantity lies from an exact value, at each state."""
        if self.one.observes_state:
            return points - float(origin)
        result = points.copy()
        self.module.observed(result, r, self.fixed)
        return result - float(origin)

    def settle(
        self, xs: Sequence[float], rs: Sequence[float], transient: int, most: int
    ) -> tuple[Floats, npt.NDArray[np.int64]]:
        """Run orbits, then look for returns.

        Returns
        -------
        ends : (lanes,)
            Where each orbit was after the transient.
        returns : (lanes, tolerances)
            Steps of the first return within each of `RETURN_TOLERANCES`; 0 none, -1 escaped.
        """
        ends = np.empty(len(xs))
        returns = np.zeros((len(xs), len(RETURN_TOLERANCES)), dtype=np.int64)
        tolerances = np.array(RETURN_TOLERANCES) * self.scale
        self.module.settle(
            np.array(xs, dtype=float),
            np.array(rs, dtype=float),
            self.fixed,
            transient,
            most,
            tolerances,
            ends,
            returns,
        )
        return ends, returns

    def critical_points(self, r: float, count: int = 257) -> list[float]:
        """Turning points of the map at a parameter value, where its extent shows a change of slope's sign."""
        low, high = self._extent(r)

        def slope(x: float) -> float:
            return float(self.module.bundle(x, r, self.fixed, 1)[1])

        grid = np.linspace(low, high, count)
        slopes = [slope(x) for x in grid]
        found = []
        for place in range(1, count):
            left, right = slopes[place - 1], slopes[place]
            if left * right < 0:
                found.append(_bisect(slope, grid[place - 1], grid[place]))
            elif right == 0 and left != 0:
                # The first point of a flat stretch, or a turning point that the grid hits.
                found.append(float(grid[place]))
        return found

    def _scale(self) -> float:
        """A length typical of the state: its range, or how far an orbit wanders where none is given."""
        if self.one.extent is not None:
            return float(self.one.extent[1] - self.one.extent[0])
        low, high = self._extent(float(self.one.value))
        return high - low

    def _extent(self, r: float) -> tuple[float, float]:
        if self.one.extent is not None:
            low, high = (float(end) for end in self.one.extent)
        else:
            points = self.points(float(self.one.start), r, 400)
            points = points[np.isfinite(points) & (abs(points) < 1e100)]
            low, high = (float(points.min()), float(points.max())) if len(points) else (-1.0, 1.0)
        room = 0.25 * (high - low) or 0.5 * abs(high) or 1.0
        return low - room, high + room


def _bisect(slope: Callable[[float], float], left: float, right: float) -> float:
    rising = slope(left) < 0
    for _ in range(60):
        middle = 0.5 * (left + right)
        if (slope(middle) < 0) == rising:
            left = middle
        else:
            right = middle
    return float(0.5 * (left + right))


@lru_cache(maxsize=64)
def float_map(one: OneMap) -> FloatMap:
    """The map in doubles, its loops compiled or taken from the user's cache."""
    return FloatMap(one)


def _module(one: OneMap) -> ModuleType:
    bind = {one.state: "x", one.parameter: "r"}
    bind |= {name: f"q{place}" for place, (name, _) in enumerate(one.fixed)}
    exprs = dict(one.derivatives)
    wanted = ("f", "fx", "fr", "fxx", "fxr")
    parts = {
        "unpack": [f"q{place} = q[{place}]" for place in range(len(one.fixed))] or ["pass"],
        "all_derivatives": emit([(name, exprs[name]) for name in wanted], bind, "native", "t"),
        "slope": emit([(name, exprs[name]) for name in ("f", "fx", "fxx")], bind, "native", "t"),
        "step": emit([("x", exprs["f"])], bind, "native", "t"),
        "observe": emit([("f", one.observe)], bind, "native", "t"),
    }
    lines = []
    for line in _LOOPS.splitlines():
        mark = line.strip()
        if mark.startswith("{"):
            indent = line[: len(line) - len(line.lstrip())]
            lines += [indent + statement for statement in parts[mark[1:-1]]]
        else:
            lines.append(line)
    return native_module(_HEADER + "\n".join(lines) + "\n", "onsets")
