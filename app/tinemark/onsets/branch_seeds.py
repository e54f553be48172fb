"""Where branches are taken up: cycles that orbits settle on across a view, and short ones, stable or not."""

from __future__ import annotations

from collections.abc import Generator, Sequence
from itertools import pairwise

import numpy as np

from tinemark.onsets.branch_places import Family, Floats, Place, least_period
from tinemark.onsets.branches import find_cycle
from tinemark.onsets.continuation import UPRIGHT
from tinemark.onsets.cycle_families import ManyFamily, OneFamily
from tinemark.onsets.cycle_map import Along
from tinemark.onsets.float_map import FloatMap
from tinemark.onsets.many_cycles import Cycle, newton, orbit_ends, returns
from tinemark.onsets.many_search import scattered_cycles
from tinemark.onsets.results import Step
from tinemark.onsets.searches import settled

TRANSIENT = 3000
SAMPLED_TRANSIENT = 400
"""The same for equations, whose samples cost more."""
TOLERANCES = (1e-9, 1e-6, 1e-4)
PUT = 1e-9
"""A multiplier as close to 1 as this is that of a state which stays where it is put."""
SCATTERED_STARTS = 3
GRID = 240
"""Places of the state at which short unstable cycles are looked for."""
SEED = 20240301
PATIENCE = 10
"""Columns settled between two chances to cancel, where states are many."""


def settled_one(
    family: OneFamily, rs: Sequence[float], most: int
) -> Generator[Step, None, list[tuple[float, Place]]]:
    """Cycles of up to `most` points that orbits from the turning points and the start settle on."""
    cycles = family.cycles
    found: list[tuple[float, Place]] = []
    block = 24
    for first in range(0, len(rs), block):
        here = rs[first : first + block]
        starts = [*cycles.critical_points(here[len(here) // 2])[:6], float(cycles.one.start)]
        jobs = [(x, r) for r in here for x in starts]
        ends, periods = yield from settled(
            cycles, [x for x, _ in jobs], [r for _, r in jobs], TRANSIENT, most
        )
        for (_, r), end, counts in zip(jobs, ends, periods, strict=True):
            for count in dict.fromkeys(n for n in counts if n > 0):
                place = cycle_place(family, float(end), r, count)
                if place is None or not place.stable:
                    continue
                # Where every state stays put, as far out as a formula has died away, there are no branches.
                if abs(place.multipliers[0] - 1) > PUT:
                    found.append((r, place))
                break
        yield Step("settling orbits across the view", first / len(rs))
    return found


def cycle_place(family: OneFamily, x: float, r: float, count: int) -> Place | None:
    """The cycle of a map of one state that a point lies near."""
    cycle = find_cycle(family.cycles, x, r, count)
    if cycle is None:
        return None
    points = family.cycles.points(float(cycle.x), r, cycle.period)
    place = family.corrected(points[:, None], r)
    if place is None or least_period(place.points, family.scales) != place.period:
        return None
    return place


def short_one(
    family: OneFamily, rs: Sequence[float], most: int
) -> Generator[Step, None, list[tuple[float, Place]]]:
    """Cycles of up to `most` points, stable or not, found by changes of sign of f^p(x) - x."""
    cycles = family.cycles
    found: list[tuple[float, Place]] = []
    low, high = _extent(cycles)
    for r in rs:
        grid = np.linspace(low, high, GRID + 1) + 1e-9 * (high - low)
        for period in range(1, most + 1):
            gaps = [float(cycles.module.bundle(x, r, cycles.fixed, period)[0]) - x for x in grid]
            for (a, gap_a), (b, gap_b) in pairwise(zip(grid, gaps, strict=True)):
                if not (np.isfinite(gap_a) and np.isfinite(gap_b)) or (gap_a < 0) == (gap_b < 0):
                    continue
                share = min(max(gap_a / (gap_a - gap_b), 0.0), 1.0)
                place = cycle_place(family, float(a + share * (b - a)), r, period)
                if place is not None and place.period == period:
                    found.append((r, place))
            yield Step("looking for short cycles")
    return found


def _extent(cycles: FloatMap) -> tuple[float, float]:
    if cycles.one.extent is not None:
        low, high = (float(end) for end in cycles.one.extent)
        room = 0.05 * (high - low)
        return low - room, high + room
    points = cycles.points(float(cycles.one.start), float(cycles.one.value), 400)
    points = points[np.isfinite(points) & (np.abs(points) < 1e100)]
    low, high = (float(points.min()), float(points.max())) if len(points) else (-1.0, 1.0)
    room = 0.25 * (high - low) or 1.0
    return low - room, high + room


def settled_many(
    family: ManyFamily, rs: Sequence[float], most: int
) -> Generator[Step, None, list[tuple[float, Place]]]:
    """Cycles of up to `most` points that orbits of a map of several states settle on."""
    float_map = family.float_map
    many = float_map.many
    own = np.array([float(value) for value in many.starts])
    random = np.random.default_rng(SEED)
    starts = [own, *(_scattered(many, random) for _ in range(SCATTERED_STARTS))]
    states = np.repeat(np.array(starts).T, len(rs), axis=1)
    lanes = np.tile(np.array(rs), len(starts))
    transient = TRANSIENT if many.system.is_map else SAMPLED_TRANSIENT
    slices = 40
    for place in range(slices):
        yield Step("settling orbits across the view", place / slices)
        history, lanes = orbit_ends(float_map, states, lanes, transient // slices, 1)
        states = history[-1]
    history, lanes = orbit_ends(float_map, states, lanes, 0, most + 1)
    found: list[tuple[float, Place]] = []
    if not len(lanes):
        return found
    for lane, periods in enumerate(returns(history, family.scales, TOLERANCES)):
        for period in periods:
            place_ = many_place(family, history[-period:, :, lane], float(lanes[lane]))
            if place_ is not None and place_.stable:
                found.append((place_.r, place_))
                break
        if lane % PATIENCE == 0:
            yield Step("settling orbits across the view")
    return found


def _scattered(many: Along, random: np.random.Generator) -> Floats:
    """A start somewhere in the states' ranges, or around the system's own."""
    return np.array(
        [
            random.uniform(float(extent[0]), float(extent[1]))
            if extent
            else float(own) * (1 + 0.3 * random.uniform(-1, 1))
            for extent, own in zip(many.extents, many.starts, strict=True)
        ]
    )


def many_place(family: ManyFamily, points: Floats, r: float) -> Place | None:
    """The cycle of a map of several states that some points lie near, with its least period."""
    cycle = newton(family.float_map, Cycle(np.ascontiguousarray(points), r), family.scales)
    if cycle is None:
        return None
    return family.corrected(cycle.points[: least_period(cycle.points, family.scales)], r)


def short_many(
    family: ManyFamily, rs: Sequence[float], most: int
) -> Generator[Step, None, list[tuple[float, Place]]]:
    """Cycles of up to `most` points, stable or not, that Newton's method finds from scattered starts."""
    found: list[tuple[float, Place]] = []
    for r in rs:
        for cycle in scattered_cycles(family.float_map, r, family.scales, range(1, most + 1)):
            place = family.corrected(cycle.points, r)
            if place is not None:
                found.append((r, place))
            yield Step("looking for short cycles")
    return found


def parents_of(family: Family, place: Place) -> list[Place]:
    """Cycles that a cycle may have split off from, one after the other: the means of opposite points."""
    found: list[Place] = []
    while place.period % 2 == 0:
        half = place.period // 2
        parent = family.corrected((place.points[:half] + place.points[half:]) / 2, place.r)
        if parent is None or least_period(parent.points, family.scales) != half:
            break
        found.append(parent)
        place = parent
    return found


def doubled(family: Family, flip: Place, amplitude: float) -> Place | None:
    """A cycle of the branch that splits off at a flip, by its amplitude (Keller 1977)."""
    count = flip.period
    direction = critical_direction(family, flip)
    if direction is None:
        return None
    moves = np.concatenate((direction, -direction))
    points = np.concatenate((flip.points, flip.points)) + amplitude * moves
    place = family.corrected(points, flip.r, (moves, 0.0))
    if place is None or least_period(place.points, family.scales) != 2 * count:
        return None
    # Straight pieces make a whole upright line of cycles there: no branch to be followed.
    return None if abs(place.move_r) < UPRIGHT * family.width else place


def critical_direction(family: Family, flip: Place) -> Floats | None:
    """Direction of unit scaled length, at each point, that f^p reverses."""
    if isinstance(family, OneFamily):
        cycles = family.cycles
        value, values = 1.0, []
        for x in flip.points[:, 0]:
            values.append(value)
            value *= float(cycles.module.bundle(float(x), flip.r, cycles.fixed, 1)[1])
        direction = np.array(values)[:, None]
    else:
        assert isinstance(family, ManyFamily)
        jacobians = family.float_map.linearised(flip.points, flip.r).jacobian
        matrix = np.eye(len(family.scales))
        for jacobian in jacobians:
            matrix = jacobian @ matrix
        if not np.isfinite(matrix).all():
            return None
        vector = np.linalg.svd(matrix + np.eye(len(matrix)))[2][-1]
        rows = []
        for jacobian in jacobians:
            rows.append(vector)
            vector = jacobian @ vector
        direction = np.array(rows)
    length = float(np.sqrt(np.mean(np.sum((direction / family.scales) ** 2, axis=1))))
    return direction / length if length > 0 and np.isfinite(length) else None
