"""Following the cycle that a flip gave birth to, from there to its own flip, the parameter leading the way.

Elsewhere branches are followed in their multiplier. On the way from one flip to the next that is unsafe
where the map's maximum is flat: around the superstable parameter the multiplier of a map of order z stays
near zero, like a power z - 1, and Newton's method with the multiplier as target is thrown far away, perhaps
onto a cycle of the same period in another window. At a fixed parameter Newton's method only asks that the
multiplier is not +1, which holds all along the way.
"""

from __future__ import annotations

from tinemark.onsets.branches import Cycle, CycleMap, cycle_with_multiplier, find_cycle, least_period

MOST_STEPS = 400
LONGEST_MOVE = 0.35
"""Largest change of the multiplier taken in one step."""
HALVINGS = 4
"""How often the distance from the flip is halved to see whether a cycle was born there."""


def born_at(cycles: CycleMap, cycle: Cycle, birth: float) -> bool:
    """Whether a cycle of even period appeared in the flip at a parameter value close to its own.

    On the way back to the flip its points close up in pairs, like the square root of the distance.
    """
    half = cycle.period // 2
    now = cycle
    distance = float(cycle.r) - birth
    first = _pair(cycles, now, half)
    for _ in range(HALVINGS):
        distance /= 2
        found = find_cycle(cycles, now.x, birth + distance, cycle.period)
        # Where the pair has closed already as far as can be told, its parent is found instead.
        if found is None or found.period != cycle.period:
            return found is not None and found.period == half and _pair(cycles, now, half) < 0.8 * first
        now = found
    # A square root would leave a quarter; a cycle of another origin keeps its points apart.
    return _pair(cycles, now, half) < 0.5 * first


def _pair(cycles: CycleMap, cycle: Cycle, half: int) -> float:
    points = cycles.points(cycle.x, cycle.r, half + 1)
    return abs(float(points[half] - points[0]))


def flip_of_doubled(cycles: CycleMap, start: Cycle, birth: float, end: float) -> Cycle | None:
    """Where a stable cycle, born at `birth`, reaches the multiplier -1 on the way to `end`.

    None where it cannot be followed that far, or does not flip before `end`.
    """
    now = start
    step = (float(start.r) - birth) / 2
    for _ in range(MOST_STEPS):
        if now.multiplier <= -1:
            return None
        ahead = float(now.r) + step
        if (ahead - end) * step > 0:
            if float(now.r) == end:
                return None
            ahead, step = end, end - float(now.r)
        found = _along(cycles, now, ahead)
        if found is None or abs(found.multiplier - now.multiplier) > LONGEST_MOVE:
            step /= 2
            if abs(step) < 1e-14 * abs(ahead):
                return None
            continue
        if found.multiplier <= -1:
            return _at_minus_one(cycles, now, found)
        if abs(found.multiplier - now.multiplier) < LONGEST_MOVE / 2:
            step *= 1.5
        now = found
    return None


def _along(cycles: CycleMap, now: Cycle, ahead: float) -> Cycle | None:
    """The cycle a step further, from where its tangent points."""
    u, v, _, _ = cycles.slopes(now.x, now.r, now.period)
    if u == 1:
        return None
    guess = float(now.x) + v / (1 - u) * (ahead - float(now.r))
    found = find_cycle(cycles, guess, ahead, now.period)
    return found if found is not None and found.period == now.period else None


def _at_minus_one(cycles: CycleMap, before: Cycle, beyond: Cycle) -> Cycle | None:
    found = cycle_with_multiplier(cycles, before.x, before.r, before.period, -1.0)
    if found is None:
        found = cycle_with_multiplier(cycles, beyond.x, beyond.r, before.period, -1.0)
    if found is None:
        return None
    x, r, _ = found
    low, high = sorted((float(before.r), float(beyond.r)))
    room = 0.1 * (high - low)
    if not low - room <= float(r) <= high + room:
        return None
    if least_period(cycles, x, r, before.period) != before.period:
        return None
    return Cycle(before.period, x, r, -1.0)
