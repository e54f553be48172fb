"""Points where two branches of cycles meet: transcritical points and pitchforks, before any proof.

With h(x, r) = f^p(x, r) - x, branches are the curves h = 0. Two of them cross where the gradient of h
vanishes, (f^p)' = 1 and df^p/dr = 0, at a saddle of h. The gradient's own equations are regular there, so
Newton's method converges fast where following a branch stalls (Kuznetsov, 2004, sections 7.4 and 10.2).
"""

from __future__ import annotations

import math
from collections.abc import Generator, Sequence
from dataclasses import dataclass
from fractions import Fraction
from functools import partial
from typing import Any

from flint import arb

from tinemark.onsets.ball_orbits import BallLoops, ball_of, fraction_of, in_chunks, precision
from tinemark.onsets.branches import (
    Crossing,
    Cycle,
    CycleMap,
    follow_to_multiplier,
    least_period,
)
from tinemark.onsets.float_map import FloatMap
from tinemark.onsets.mirrored_cycles import symmetry_breaking_of
from tinemark.onsets.results import Kind, Step
from tinemark.systems.errors import SwitchingTouched

CLOSENESS = (0.7, 0.9, 0.98)
"""Multipliers at which the branch is left for the point ahead of it, one after the other."""
EXTENT = 100
"""A fold or flip that so many times the parameter's size belongs to is where following a branch stalled."""


def branch_point_ahead(cycles: CycleMap, start: Cycle, origin: Fraction, reach: float) -> Crossing | None:
    """The point at which a branch of rising multiplier meets another one, if it does."""
    now: Cycle | None = start
    for closeness in CLOSENESS:
        assert now is not None
        if now.multiplier < closeness:
            now, _ = follow_to_multiplier(cycles, now, closeness, origin, reach)
            if now is None:
                return None
        found = _gradient_zero(cycles, now.x, now.r, now.period)
        if found is None:
            continue
        crossing = _crossing_of(cycles, found, now)
        if crossing is not None and abs(cycles.offset(crossing.r, origin)) <= reach:
            return crossing
    return None


def _gradient_zero(cycles: CycleMap, x: Any, r: Any, period: int) -> tuple[Any, Any] | None:
    start_x, start_r = x, r
    previous = math.inf
    for _ in range(25):
        u, v, w, z = cycles.slopes(x, r, period)
        bend = _bend(cycles, x, r, period)
        determinant = w * bend - z * z
        if determinant == 0 or not math.isfinite(determinant):
            return None
        shift_x = -(bend * (u - 1) - z * v) / determinant
        shift_r = -(w * v - z * (u - 1)) / determinant
        if not abs(shift_x) < 10 * cycles.scale or not math.isfinite(shift_r):
            return None
        x, r = x + cycles.number(shift_x), r + cycles.number(shift_r)
        size = abs(shift_x) / cycles.scale + abs(shift_r) / (abs(float(r)) + abs(float(start_r)) + 1e-300)
        if size < 1e-9 or (size < 1e-6 and size >= previous / 2):
            return (x, r) if abs(float(x - start_x)) < cycles.scale else None
        previous = size
    return None


def _bend(cycles: CycleMap, x: Any, r: Any, period: int) -> float:
    """Second derivative of f^p in the parameter, by a central difference of its first."""
    step = 1e-5 * max(abs(float(r)), 1e-3)
    shift = cycles.number(step)
    above, below = cycles.slopes(x, r + shift, period), cycles.slopes(x, r - shift, period)
    return (above[1] - below[1]) / (2 * step)


def _crossing_of(cycles: CycleMap, found: tuple[Any, Any], start: Cycle) -> Crossing | None:
    x, r = found
    points = cycles.points(x, r, start.period + 1)
    if not abs(float(points[start.period] - points[0])) <= 1e-8 * cycles.scale:
        return None
    if least_period(cycles, x, r, start.period) != start.period:
        return None
    _, _, w, z = cycles.slopes(x, r, start.period)
    # At a pitchfork the curvature is zero; away from it, it grows in proportion to the distance.
    step = 1e-3 * cycles.scale
    beside = max(abs(cycles.slopes(x + cycles.number(side), r, start.period)[2]) for side in (-step, step))
    if beside == 0:
        return None  # f^p is straight there, so that no second branch leaves at an angle
    kind = Kind.PITCHFORK if abs(w) <= 1e-3 * beside else Kind.TRANSCRITICAL
    return Crossing(kind, start.period, x, r, 2 / abs(z) if z else math.inf)


@dataclass(frozen=True)
class Meetings:
    """What else lies on a branch: points where it meets others, and where its multiplier only touches -1."""

    crossings: tuple[Crossing, ...]
    touching: Cycle | None


def is_stalled(crossing: Crossing, reach: float) -> bool:
    """Whether a crossing is no onset but where following the multiplier stalled: its extent is unbounded."""
    return not crossing.extent < EXTENT * max(abs(float(crossing.r)), reach)


def meetings_of(
    cycles: FloatMap, start: Cycle, origin: Fraction, reach: float, known: Sequence[Crossing]
) -> Meetings:
    """Branch points and touchings of the branch a cycle lies on.

    Parameters
    ----------
    known
        Flips and folds of that branch.
    """
    found = []
    breaking = symmetry_breaking_of(cycles, start, origin, reach)
    if breaking is not None and abs(cycles.offset(breaking.r, origin)) <= reach:
        found.append(breaking)
    true = [crossing for crossing in known if not is_stalled(crossing, reach)]
    if not any(crossing.kind is Kind.FOLD or crossing.period < start.period for crossing in true):
        ahead = branch_point_ahead(cycles, start, origin, reach)
        if ahead is not None:
            found.append(ahead)
    doubles = any(crossing.kind is Kind.FLIP and crossing.period == start.period for crossing in true)
    touching = None
    if start.multiplier < 0 and not doubles:
        touching = touching_multiplier(cycles, start, origin, reach)
    return Meetings(tuple(found), touching)


def touching_multiplier(cycles: CycleMap, start: Cycle, origin: Fraction, reach: float) -> Cycle | None:
    """Where a branch's multiplier comes to -1 and turns back, if it does: there is no flip."""
    x, r, period = start.x, start.r, start.period
    before: tuple[float, float] | None = None
    width = 1e-4 * max(abs(float(r)), reach)
    for _ in range(60):
        step = None
        for _ in range(20):
            step = cycles.newton(x, r, period, None)
            if step is None:
                return None
            x = step.x
            if abs(step.shift_x) <= 1e-12 * cycles.scale:
                break
        u, v, w, z = cycles.slopes(x, r, period)
        if u == 1 or not math.isfinite(u):
            return None
        speed = z + w * v / (1 - u)
        at = cycles.offset(r, origin)
        if abs(at) > reach:
            return None
        if before is None or speed == before[1]:
            shift = width
        else:
            shift = -speed * (at - before[0]) / (speed - before[1])
            if abs(shift) < 1e-11 * max(abs(float(r)), reach):
                break
            shift = math.copysign(min(abs(shift), reach / 4), shift)
        before = (at, speed)
        r = r + cycles.number(shift)
    else:
        return None
    if abs(u + 1) > 1e-8 or least_period(cycles, x, r, period) != period:
        return None
    return Cycle(period, x, r, u)


@dataclass(frozen=True)
class BranchPoint:
    """A zero of the gradient of h in high precision; `miss` is h there, zero where the branches meet."""

    x: Fraction
    r: Fraction
    miss: Fraction
    last_step: float
    curvature: float
    speed: float
    bend: float


def polished_branch_point(
    loops: BallLoops, x: Fraction, r: Fraction, period: int, bits: int
) -> Generator[Step, None, BranchPoint | None]:
    """Newton's method for the gradient's zero, in high precision.

    None where it does not converge, or the formula switches on the way.
    """
    with precision(bits):
        here_x, here_r = ball_of(x).mid(), ball_of(r).mid()
        step = arb(2) ** (-bits // 3) * (abs(here_r) + arb(2) ** -20)
        step = step.mid()
    last = math.inf
    for _ in range(12 + bits.bit_length()):
        sides = []
        for shift in (0, 1, -1):
            with precision(bits):
                zero, one = arb(0), arb(1)
                start = (here_x, one, zero, zero, zero)
                at = (here_r + shift * step).mid()
            advance = partial(_advance, loops, at)
            try:
                state = yield from in_chunks(advance, start, period, bits, "solving for where branches meet")
            except SwitchingTouched:
                return None
            sides.append(state)
        with precision(bits):
            end, u, v, w, z = (value.mid() for value in sides[0])
            bend = ((sides[1][2] - sides[2][2]) / (2 * step)).mid()
            determinant = w * bend - z * z
            if not determinant.is_finite() or determinant.contains(0):
                return None
            shift_x = (bend * (u - 1) - z * v) / determinant
            shift_r = (w * v - z * (u - 1)) / determinant
            miss = (end - here_x).mid()
            size = abs(float(shift_r)) + abs(float(shift_x))
            if not math.isfinite(size):
                return None
            done = size < 2.0 ** (-bits * 0.8) or (size < 2.0 ** (-bits * 0.5) and size >= last / 4)
            if not done:
                here_x, here_r = (here_x - shift_x).mid(), (here_r - shift_r).mid()
                last = size
                continue
        return BranchPoint(
            fraction_of(here_x),
            fraction_of(here_r),
            fraction_of(miss),
            size,
            float(w),
            float(z),
            float(bend),
        )
    return None


def _advance(loops: BallLoops, r: Any, state: tuple[Any, ...], count: int) -> tuple[Any, ...]:
    return loops.newton(state[0], r, *state[1:], count)
