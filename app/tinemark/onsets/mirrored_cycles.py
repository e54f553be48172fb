"""Where a symmetric map's cycles lose their symmetry: pitchforks in doubles, before any proof.

With S the reflection about the centre c(r), a cycle of period 2q that is its own mirror image is a fixed
point of g = S f^q, and it loses that symmetry where the multiplier of g is -1: a pitchfork of f is a flip
of g. So it is solved for as a flip is, also from a broken pair beside it and from where a click fell.
"""

from __future__ import annotations

import math
from collections.abc import Iterator
from fractions import Fraction
from typing import Any

from tinemark.onsets.branches import (
    Crossing,
    Cycle,
    CycleMap,
    cycle_with_multiplier,
    follow_to_multiplier,
    least_period,
)
from tinemark.onsets.float_map import CycleStep, FloatMap
from tinemark.onsets.results import Kind
from tinemark.onsets.symmetry import Curve, centres, total_of_cycle

MIRRORED_GAP = 1e-6
"""Share of the state's scale within which a cycle counts as its own mirror image."""
HALVES = (1, 2, 3, 4)
"""Half periods of the symmetric cycles that are solved for from a click itself."""
CLOSENESS = (0.5, 0.8, 0.95)
"""Multipliers to which a cycle of a broken pair is followed back, one after the other."""
COLUMNS = 64
"""Places of a view at which a centre's multiplier is looked at."""


class MirroredMap:
    """The return map g = S f^q of a map that commutes with the reflection S, x -> total - x.

    `total` is a curve of the parameter, or a number where no identity is known. Answers what `CycleMap` does.
    """

    def __init__(self, cycles: CycleMap, total: Curve | float) -> None:
        self.cycles, self.total = cycles, total
        self.one = cycles.one
        self.scale, self.fine, self.coincident = cycles.scale, cycles.fine, cycles.coincident
        self.slice_steps = cycles.slice_steps
        self.number, self.exact, self.offset, self.midway = (
            cycles.number,
            cycles.exact,
            cycles.offset,
            cycles.midway,
        )
        self.points, self.observed_offsets = cycles.points, cycles.observed_offsets
        self.settle, self.critical_points = cycles.settle, cycles.critical_points

    def total_at(self, r: float) -> tuple[float, float]:
        """Twice the centre, and how it moves with the parameter."""
        return self.total.plain(float(r)) if isinstance(self.total, Curve) else (self.total, 0.0)

    def newton(self, x: Any, r: Any, period: int, target: float | None) -> CycleStep | None:
        """One Newton step for g(x) = x, with a multiplier of g as target where one is given."""
        end = self.cycles.points(x, r, period + 1)[period]
        u, v, w, z = self.slopes(x, r, period)
        gap = float(self.total_at(r)[0] - end - x)
        shift_r = 0.0
        if target is None:
            shift_x = -gap / (u - 1) if u != 1 else math.nan
        else:
            miss = u - target
            determinant = (u - 1) * z - v * w
            if determinant == 0:
                return None
            shift_x = -(z * gap - v * miss) / determinant
            shift_r = -((u - 1) * miss - w * gap) / determinant
        if not (math.isfinite(shift_x) and math.isfinite(shift_r)):
            return None
        return CycleStep(x + self.number(shift_x), r + self.number(shift_r), shift_x, shift_r, u)

    def slopes(self, x: Any, r: Any, period: int) -> tuple[float, float, float, float]:
        """Derivatives of g."""
        u, v, w, z = self.cycles.slopes(x, r, period)
        return -u, self.total_at(r)[1] - v, -w, -z


def symmetry_breaking_of(cycles: FloatMap, start: Cycle, origin: Fraction, reach: float) -> Crossing | None:
    """The pitchfork at which a cycle that is its own mirror image ceases to be stable, if there is one.

    The cycle's multiplier is the square of that of its half, so following the multiplier itself cannot
    tell the end where the cycle was born from the end where it loses its symmetry. A cycle of a broken pair
    leads to the symmetric one that it left.
    """
    if start.period % 2:
        return None
    half = start.period // 2
    points = [float(point) for point in cycles.points(start.x, start.r, start.period)]
    totals = [points[place] + points[place + half] for place in range(half)]
    if max(totals) - min(totals) <= MIRRORED_GAP * cycles.scale:
        known = total_of_cycle(cycles.one, points, float(start.r))
        # The points of any 2-cycle have a middle: without an identity that says nothing.
        if known is not None or half > 1:
            mirrored = MirroredMap(cycles, totals[0] if known is None else known[0])
            multiplier = mirrored.slopes(start.x, start.r, half)[0]
            on_branch = Cycle(half, start.x, start.r, multiplier)
            found, _ = follow_to_multiplier(mirrored, on_branch, -1.0, origin, reach)
            return None if found is None else _breaking(mirrored, found.x, found.r, half)
    return _left_by_pair(cycles, start, origin, reach)


def _left_by_pair(cycles: FloatMap, start: Cycle, origin: Fraction, reach: float) -> Crossing | None:
    """The pitchfork that a cycle of a broken pair comes from: the nearer to it, the surer it is met."""
    half = start.period // 2
    near: Cycle | None = start
    for centre in centres(cycles.one, float(start.r)):
        mirrored = MirroredMap(cycles, centre.times(2))
        for closeness in (-math.inf, *CLOSENESS):
            near = start if closeness == -math.inf else near
            if near is None:
                break
            if near.multiplier < closeness:
                near, _ = follow_to_multiplier(cycles, near, closeness, origin, reach)
                if near is None:
                    break
            points = cycles.points(near.x, near.r, half + 1)
            x = float(points[0] + mirrored.total_at(near.r)[0] - points[half]) / 2
            crossing = breaking_near(mirrored, x, float(near.r), half)
            # The pair closes like a square root, with the symmetric cycle in its middle.
            pair = abs(float(points[0]) - x)
            if crossing is not None and abs(crossing.x - x) <= 2 * pair + MIRRORED_GAP * cycles.scale:
                return crossing
    return None


def breaking_near(mirrored: MirroredMap, x: float, r: float, half: int) -> Crossing | None:
    """The pitchfork of a symmetric cycle of period 2 * half that Newton's method reaches from close by."""
    found = cycle_with_multiplier(mirrored, x, r, half, -1.0)
    return None if found is None else _breaking(mirrored, found[0], found[1], half)


def _breaking(mirrored: MirroredMap, x: float, r: float, half: int) -> Crossing | None:
    # In the middle lies the centre, which stays put whatever the parameter.
    if abs(2 * x - mirrored.total_at(r)[0]) < MIRRORED_GAP * mirrored.scale:
        return None
    if least_period(mirrored.cycles, x, r, 2 * half) != 2 * half:
        return None
    _, v, w, z = mirrored.slopes(x, r, half)
    speed = abs(z + w * v / 2)
    return Crossing(Kind.PITCHFORK, 2 * half, x, r, 2 / speed if speed else math.inf)


def pitchforks_in_view(
    cycles: FloatMap, near: Fraction, observed: float | None, width: float
) -> list[Crossing]:
    """Pitchforks of the centres themselves in a view, and of symmetric cycles right at a click."""
    found = []
    for centre in centres(cycles.one, float(near)):
        found += list(_of_centre(cycles, centre, float(near), width))
        if observed is None:
            continue
        mirrored = MirroredMap(cycles, centre.times(2))
        for half in HALVES:
            crossing = breaking_near(mirrored, observed, float(near), half)
            if crossing is not None:
                found.append(crossing)
    return found


def _of_centre(cycles: FloatMap, centre: Curve, near: float, width: float) -> Iterator[Crossing]:
    """Where the multiplier of a reflection's centre passes +1."""

    def beyond(r: float) -> float:
        return cycles.slopes(centre.plain(r)[0], r, 1)[0] - 1

    grid = [near + width * (k / COLUMNS - 0.4997) for k in range(COLUMNS + 1)]
    values = [beyond(r) for r in grid]
    for left, right, before, after in zip(grid, grid[1:], values, values[1:], strict=False):
        if not (math.isfinite(before) and math.isfinite(after)) or before * after >= 0:
            continue
        a, b = left, right
        for _ in range(80):
            middle = 0.5 * (a + b)
            if beyond(middle) * before > 0:
                a = middle
            else:
                b = middle
        r = 0.5 * (a + b)
        speed = abs(after - before) / (right - left)
        yield Crossing(Kind.PITCHFORK, 1, centre.plain(r)[0], r, 2 / speed)
