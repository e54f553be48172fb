"""The map of one state in high precision, for views where doubles cannot tell columns apart."""

from __future__ import annotations

import math
from collections.abc import Sequence
from fractions import Fraction
from typing import Any

import numpy as np
import numpy.typing as npt
from flint import arb

from tinemark.onsets.ball_orbits import ball_loops, ball_of, fraction_of, precision
from tinemark.onsets.float_map import RETURN_TOLERANCES, CycleStep, float_map
from tinemark.onsets.one_map import OneMap
from tinemark.systems.balls import ball_function


class BallMap:
    """A one-state map at a fixed precision. States and parameters are exact balls.

    It answers what `FloatMap` answers, more slowly: nothing here is rigorous, only precise.
    """

    slice_steps = 10_000

    def __init__(self, one: OneMap, bits: int) -> None:
        self.one = one
        self.bits = bits
        self.loops = ball_loops(one)
        self.observe = ball_function((one.exact_observe,), (one.state, one.parameter))
        self.scale = float_map(one).scale
        self.fine = 2.0 ** (-0.8 * bits)
        self.coincident = 2.0 ** (-bits / 3)

    def number(self, value: Fraction | float) -> Any:
        """A parameter or state value in this map's arithmetic."""
        with precision(self.bits):
            return ball_of(Fraction(value)).mid()

    def exact(self, value: Any) -> Fraction:
        """A number of this map's arithmetic as the rational it is."""
        return fraction_of(value)

    def offset(self, value: Any, origin: Fraction) -> float:
        """How far a number lies from an exact one."""
        with precision(self.bits):
            return float(value - ball_of(origin))

    def midway(self, a: Any, b: Any) -> Any:
        """The middle of two numbers."""
        with precision(self.bits):
            return ((a + b) / 2).mid()

    def newton(self, x: Any, r: Any, period: int, target: float | None) -> CycleStep | None:
        """One Newton step towards a cycle; see `FloatMap.newton`."""
        with precision(self.bits):
            zero = arb(0)
            end, u, v, w, z = self.loops.newton(x, r, arb(1), zero, zero, zero, period)
            u, v, w, z = (value.mid() for value in (u, v, w, z))
            gap = end - x
            shift_r = zero
            if target is None:
                shift_x = -gap / (u - 1)
            else:
                miss = u - target
                determinant = (u - 1) * z - v * w
                shift_x = -(z * gap - v * miss) / determinant
                shift_r = -((u - 1) * miss - w * gap) / determinant
            if not (shift_x.is_finite() and shift_r.is_finite()):
                return None
            return CycleStep(
                (x + shift_x).mid(), (r + shift_r).mid(), float(shift_x), float(shift_r), float(u)
            )

    def slopes(self, x: Any, r: Any, period: int) -> tuple[float, float, float, float]:
        """Derivatives of f^p: in x, in r, twice in x, mixed."""
        with precision(self.bits):
            zero = arb(0)
            _, u, v, w, z = self.loops.newton(x, r, arb(1), zero, zero, zero, period)
            return float(u.mid()), float(v.mid()), float(w.mid()), float(z.mid())

    def points(self, x: Any, r: Any, count: int) -> list[Any]:
        """Orbit of `count` points, from x on."""
        points = [x]
        with precision(self.bits):
            while len(points) < count:
                x = self.loops.orbit(x, r, 1)
                points.append(x)
        return points

    def observed_offsets(self, points: Sequence[Any], r: Any, origin: Fraction) -> npt.NDArray[np.float64]:
        """How far the observed quantity lies from an exact value, at each state."""
        with precision(self.bits):
            zero = ball_of(origin)
            return np.array([float((self.observe(x, r)[0] - zero).mid()) for x in points])

    def settle(
        self, xs: Sequence[Any], rs: Sequence[Any], transient: int, most: int
    ) -> tuple[list[Any], npt.NDArray[np.int64]]:
        """Run orbits, then look for returns; see `FloatMap.settle`."""
        returns = np.zeros((len(xs), len(RETURN_TOLERANCES)), dtype=np.int64)
        ends = []
        # A deep view shows small structure, so returns must be closer by the digits gained.
        depth = math.sqrt(2.0 ** -(self.bits - 53))
        for lane, (x, r) in enumerate(zip(xs, rs, strict=True)):
            with precision(self.bits):
                x = self.loops.orbit(x, r, transient)
                ends.append(x)
                if not x.is_finite() or abs(x) > 1e100:
                    returns[lane, 0] = -1
                    continue
                now = x
                for n in range(1, most + 1):
                    now = self.loops.orbit(now, r, 1)
                    gap = abs(float(now - x))
                    for place, tolerance in enumerate(RETURN_TOLERANCES):
                        if returns[lane, place] == 0 and gap <= tolerance * depth * self.scale:
                            returns[lane, place] = n
                    if returns[lane, 0]:
                        break
        return ends, returns

    def critical_points(self, r: Any) -> list[Any]:
        """Turning points of the map, to the accuracy of doubles."""
        return [self.number(x) for x in float_map(self.one).critical_points(float(r))]
