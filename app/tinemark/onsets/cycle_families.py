"""The cycles of a map along a parameter, as continuation asks for them: of one state, and of several."""

from __future__ import annotations

import math

import numpy as np

from tinemark.onsets.branch_places import MOST_UNSTABLE, Floats, Place
from tinemark.onsets.cycle_map import CycleMap
from tinemark.onsets.float_map import FloatMap

MOST_STEPS = 12
SETTLED = 1e-12
"""A cycle is found when a Newton step moves no point by more than this share of the state's scale …"""
WORST_SETTLED = 1e-8
"""… or, where rounding does not let it get there, stays below this."""


DIFFERENCE = 1e-3
"""Scaled length of the steps of a second difference."""
DEFECTIVE = 1e-6
"""Left and right critical vectors whose cosine is smaller mean a double multiplier."""


class OneFamily:
    """Cycles of a map of one state: the shooting equations of all points, condensed to the first."""

    def __init__(self, cycles: FloatMap, scale: float, width: float) -> None:
        self.cycles = cycles
        self.scales: Floats = np.array([scale])
        self.width = width

    def observed(self, points: Floats, r: float) -> Floats:
        """Observed quantity at each point."""
        cycles = self.cycles
        if cycles.one.observes_state:
            return points[:, 0]
        values = points[:, 0].copy()
        cycles.module.observed(values, r, cycles.fixed)
        return values

    def corrected(self, points: Floats, r: float, along: tuple[Floats, float] | None = None) -> Place | None:
        """Newton's method for a cycle; see `branch_places.Family`."""
        scale = float(self.scales[0])
        xs = [float(x) for x in points[:, 0]]
        first_xs, first_r = list(xs), r
        count = len(xs)
        weights: list[float] = []
        weight_r = 0.0
        if along is not None:
            weights = [float(move) / scale**2 / count for move in along[0][:, 0]]
            weight_r = along[1] / self.width**2
        last = math.inf
        for _ in range(MOST_STEPS):
            shifts = self._condensed(xs, r)
            if shifts is None:
                return None
            a, b, c = shifts[-1]
            if along is None:
                if a == 1:
                    return None
                d0, dr = -c / (a - 1), 0.0
            else:
                row_x = row_r = offset = 0.0
                for place, weight in enumerate(weights):
                    sa, sb, sc = shifts[place]
                    row_x += weight * sa
                    row_r += weight * sb
                    offset += weight * (sc + xs[place] - first_xs[place])
                row_r += weight_r
                offset += weight_r * (r - first_r)
                determinant = (a - 1) * row_r - b * row_x
                if determinant == 0:
                    return None
                d0 = (-c * row_r + b * offset) / determinant
                dr = (-(a - 1) * offset + c * row_x) / determinant
            size = 0.0
            for place in range(count):
                sa, sb, sc = shifts[place]
                move = sa * d0 + sb * dr + sc
                xs[place] += move
                size = max(size, abs(move))
            r += dr
            size /= max(scale, 1e-2 * max(map(abs, xs)))
            if not size < 1e6:
                return None
            if size < SETTLED or (size < WORST_SETTLED and size > last / 2):
                return self._place(xs, r)
            last = size
        return None

    def unfolding(self, place: Place) -> tuple[float, float]:
        """Push and bend; see `branch_places.Family`."""
        _, push, bend, _ = self.cycles.slopes(float(place.points[0, 0]), place.r, place.period)
        return push * self.width / self.cycles.scale, bend * self.cycles.scale

    def _condensed(self, xs: list[float], r: float) -> list[tuple[float, float, float]] | None:
        """Shift of each point, and of the one after the last, as a * first shift + b * dr + c."""
        bundle, fixed = self.cycles.module.bundle, self.cycles.fixed
        a, b, c = 1.0, 0.0, 0.0
        shifts = [(a, b, c)]
        count = len(xs)
        for place, x in enumerate(xs):
            f, fx, fr, _, _ = bundle(x, r, fixed, 1)
            a, b, c = fx * a, fx * b + fr, fx * c + f - xs[(place + 1) % count]
            shifts.append((a, b, c))
        return shifts if math.isfinite(a) and math.isfinite(b) and math.isfinite(c) else None

    def _place(self, xs: list[float], r: float) -> Place | None:
        shifts = self._condensed(xs, r)
        if shifts is None:
            return None
        a, b, _ = shifts[-1]
        if abs(a) > MOST_UNSTABLE:
            return None
        # The null direction of (a - 1, b).
        moves = np.array([sa * -b + sb * (a - 1) for sa, sb, _ in shifts[:-1]])
        move_r = a - 1
        length = math.hypot(move_r / self.width, float(np.sqrt(np.mean((moves / self.scales[0]) ** 2))))
        if length == 0 or not math.isfinite(length):
            return None
        points = np.array(xs)[:, None]
        return Place(points, float(r), (complex(a),), moves[:, None] / length, move_r / length)


def stretch_family(cycles: FloatMap, widest: float, x: float, r: float, period: int) -> OneFamily:
    """The cycles around one of them, lengths measured by the stretch on which it is stable.

    In a window a millionth wide a fold would else be too sharp a turn for doubles.
    """
    u, v, w, z = cycles.slopes(x, r, period)
    rate = abs(z + w * v / (1 - u)) if u != 1 else 0.0
    width = min(widest, 2 / rate) if rate > 0 else widest
    width = max(width, 1e-12 * max(abs(r), 1e-3))
    wide = OneFamily(cycles, cycles.scale, width)
    place = wide.corrected(cycles.points(x, r, period)[:, None], r)
    if place is None or place.move_r == 0:
        return wide
    moved = float(np.sqrt(np.mean(place.moves**2))) / abs(place.move_r) * width
    return OneFamily(cycles, min(cycles.scale, max(moved, 1e-7 * cycles.scale)), width)


class ManyFamily:
    """Cycles of a map of several states, by the solvers of `many_cycles`."""

    def __init__(self, float_map: CycleMap, scales: Floats, width: float) -> None:
        self.float_map = float_map
        self.scales = scales
        self.width = width

    def observed(self, points: Floats, r: float) -> Floats:
        """Observed quantity at each point."""
        return self.float_map.observed(points, r)

    def corrected(self, points: Floats, r: float, along: tuple[Floats, float] | None = None) -> Place | None:
        """Newton's method for a cycle; see `branch_places.Family`."""
        from tinemark.onsets.many_cycles import Cycle, condensed, eigenvalues, newton, tangent

        guess = Cycle(points, r)
        if along is None:
            cycle = newton(self.float_map, guess, self.scales)
        else:
            weights, weight_r = along[0] / self.scales**2 / len(points), along[1] / self.width**2
            target = float(np.sum(weights * points)) + weight_r * r
            cycle = newton(self.float_map, guess, self.scales, along=weights, along_r=weight_r, target=target)
        if cycle is None:
            return None
        parts = condensed(self.float_map, cycle.points, cycle.r)
        values = eigenvalues(parts.monodromy)
        if not values or abs(values[0]) > MOST_UNSTABLE:
            return None
        moves, move_r = tangent(parts, self.scales, self.width)
        return Place(cycle.points, float(cycle.r), tuple(values), moves, move_r)

    def unfolding(self, place: Place) -> tuple[float, float]:
        """Push and bend; see `branch_places.Family`."""
        from tinemark.onsets.many_cycles import condensed

        n = len(self.scales)
        closing = condensed(self.float_map, place.points, place.r).closing
        # In scaled states, in which vectors have comparable entries.
        matrix = closing[:, :n] * self.scales / self.scales[:, None]
        left, _, right = np.linalg.svd(matrix - np.eye(n))
        into, direction = left[:, -1], right[-1]
        cosine = float(into @ direction)
        # Where areas are preserved the multiplier is double, and the two are at right angles.
        cosine = cosine if abs(cosine) > DEFECTIVE else 1.0
        push = float(into @ (closing[:, n] / self.scales)) * self.width / cosine
        states = place.points[0][:, None] + DIFFERENCE * (self.scales * direction)[:, None] * np.array(
            [-1, 0, 1]
        )
        for _ in range(place.period):
            states = self.float_map.step(states, place.r)
        second = (states[:, 0] - 2 * states[:, 1] + states[:, 2]) / DIFFERENCE**2 / self.scales
        return push, float(into @ second) / cosine
