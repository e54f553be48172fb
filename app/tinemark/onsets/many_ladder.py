"""A cascade of flips of a map of several states, followed level by level.

Level n is the flip of the cycle of period base * 2**(n - 1). From each flip the doubled cycle is taken up by
its amplitude along the critical vector (Keller 1977), followed by its amplitude's square, which is nearly
linear in the parameter, until its own multiplier passes -1, and polished there.
"""

from __future__ import annotations

from collections.abc import Generator
from dataclasses import dataclass

import numpy as np

from tinemark.onsets.cycle_map import CycleMap, Floats
from tinemark.onsets.many_branch import (
    Crossing,
    Event,
    Window,
    below_minus_one,
    between,
    branch_point,
    follow,
    narrowed,
)
from tinemark.onsets.many_cycles import (
    Cycle,
    least_period,
    multipliers,
    newton,
    orbit_ends,
    returns,
)
from tinemark.onsets.many_map import float_many_map, many_map
from tinemark.onsets.many_onset import Settled, settle_onset
from tinemark.onsets.many_polish import NotFound
from tinemark.onsets.many_preparation import worked_out
from tinemark.onsets.many_search import TOLERANCES, parents, scattered_cycles
from tinemark.onsets.results import Kind, LadderLevel, LadderRequest, LadderResult, Step
from tinemark.systems.errors import NoOnsetFound, SwitchingTouched

TRANSIENT = 4000
DELTA_GUESS = 4.67
FIRST_SHARE = 0.02
"""Where a doubled cycle is taken up, as a share of the gap expected to its own flip."""
GROWTH = 1.5
MOST_POINTS = 200
RESOLUTION = 1e-12
"""Gaps below this share of the parameter are too narrow for doubles to follow."""
NEUTRAL = 1e-6
NARROW = 1e-3
"""Share of the sweep to which the bracket of the first flip is narrowed before it is polished."""


@dataclass(frozen=True)
class _Doubled:
    """A doubled cycle with its test for a flip of its own."""

    cycle: Cycle
    values: tuple[complex, ...]

    @property
    def flip_test(self) -> float:
        return float(np.real(np.prod([1 + value for value in self.values])))


def ladder_many(request: LadderRequest) -> Generator[Step | LadderLevel, None, LadderResult]:
    """Follow a cascade of flips from `start` towards `stop`.

    Yields
    ------
    Step or LadderLevel
        Progress, and each level as it is found.

    Returns
    -------
    LadderResult
        As the generator's value. Its message says why a ladder ended before the levels asked for.

    Raises
    ------
    NoOnsetFound
        There is no first level on the way; says what was looked at.
    """
    yield Step("reading the map")
    many = many_map(request.system, request.parameter)
    yield from worked_out(many, 1)
    float_map = float_many_map(many)
    cycle = yield from base_cycle(float_map, request)
    return (yield from ladder_cycles(float_map, request, cycle))


def ladder_cycles(
    float_map: CycleMap, request: LadderRequest, cycle: Cycle
) -> Generator[Step | LadderLevel, None, LadderResult]:
    """Follow a cascade of flips from a cycle of the base period; see `ladder_many`."""
    stop, base = float(request.stop), request.base_period
    scales = float_map.scales(float(request.start))
    settled = yield from _first_flip(float_map, cycle, stop, scales, request.digits)
    before: Settled | None = None
    levels: list[LadderLevel] = []
    while True:
        levels.append(LadderLevel(len(levels) + 1, settled.onset))
        yield levels[-1]
        if len(levels) >= request.levels:
            return LadderResult(base, tuple(levels))
        following = yield from _next_flip(float_map, settled, before, stop, scales, request.digits)
        if isinstance(following, str):
            return LadderResult(base, tuple(levels), following)
        before, settled = settled, following


def base_cycle(float_map: CycleMap, request: LadderRequest) -> Generator[Step, None, Cycle]:
    """The cycle of the base period that a ladder starts with.

    Raises
    ------
    NoOnsetFound
        The ladder has no extent, or there is no such cycle.
    """
    start, stop = float(request.start), float(request.stop)
    if start == stop:
        raise NoOnsetFound("the ladder starts and stops at the same value", what_to_do="give two values")
    base = request.base_period
    cycle = yield from _base_cycle(float_map, start, base, float_map.scales(start))
    if cycle is None:
        raise NoOnsetFound(
            f"no cycle of period {base} was found at {float_map.many.parameter} = {start:.12g}",
            what_to_do="start where the system settles on it",
        )
    return cycle


def _base_cycle(
    float_map: CycleMap, start: float, base: int, scales: Floats
) -> Generator[Step, None, Cycle | None]:
    """A cycle of the base period at the start; settled ones first, then any, stable ones first."""
    text = f"looking for a cycle of period {base}"
    states = np.array([[float(value)] for value in float_map.many.starts])
    lanes = np.array([start])
    for _ in range(8):
        history, lanes = orbit_ends(float_map, states, lanes, TRANSIENT // 8, 1)
        states = history[-1]
        yield Step(text)
    history, lanes = orbit_ends(float_map, states, lanes, 0, 4 * base + 65)
    for periods in returns(history, scales, TOLERANCES):
        for period in periods:
            cycle = newton(float_map, Cycle(history[-period:, :, 0].copy(), start), scales)
            if cycle is None:
                continue
            cycle = Cycle(cycle.points[: least_period(cycle.points, scales)], start)
            for candidate in (cycle, *parents(float_map, cycle, scales)):
                if candidate.period == base:
                    return candidate
    yield Step(text)
    best: tuple[float, Cycle] | None = None
    for cycle in scattered_cycles(float_map, start, scales, (base,)):
        yield Step(text)
        if cycle.period != base:
            continue
        size = max(map(abs, multipliers(float_map, cycle)), default=np.inf)
        if best is None or size < best[0] - NEUTRAL:
            best = (size, cycle)
    return best[1] if best else None


def _first_flip(
    float_map: CycleMap, cycle: Cycle, stop: float, scales: Floats, digits: int
) -> Generator[Step, None, Settled]:
    """The first flip of the base cycle on the way to the stop."""
    start = cycle.r
    width = abs(stop - start)
    window = Window(min(start, stop), max(start, stop), width, scales)
    point = branch_point(float_map, cycle, window)
    if point is None:
        raise NoOnsetFound("the base cycle cannot be followed")
    direction = 1 if stop > start else -1
    trace, events = yield from follow(float_map, point, window, direction)
    rotation = next((e for e in events if e.kind is Crossing.NEIMARK_SACKER), None)
    other: Settled | None = None
    for event in events:
        if event.kind is not Crossing.FLIP or not window.low <= event.rough.r <= window.high:
            continue
        settled = yield from _flip_of(float_map, event, window, digits)
        if settled is None:
            continue
        # A cascade starts where a stable cycle splits; a flip of an unstable one is the last resort.
        if all(abs(value) <= 1 + NEUTRAL for value in settled.found.others):
            return settled
        other = other or settled
    if other is not None:
        return other
    name = float_map.many.parameter
    ended = f"the cycle of period {cycle.period} was followed to {name} = {trace[-1].cycle.r:.6g}"
    if rotation is not None:
        where = f"near {name} = {rotation.rough.r:.6g}"
        raise NoOnsetFound(
            f"{ended}; it loses its stability in a Neimark-Sacker onset {where}, not in a flip"
        )
    if _turns(events):
        raise NoOnsetFound(f"{ended}; it turns round in a fold and shows no flip")
    raise NoOnsetFound(f"{ended} and shows no flip", what_to_do="widen the range")


def _flip_of(
    float_map: CycleMap, event: Event, window: Window, digits: int
) -> Generator[Step, None, Settled | None]:
    """The flip that a branch's crossing stands for, or None where it cannot be polished."""
    close = narrowed(float_map, event, window, NARROW * window.width)
    bracket = abs(close.before.cycle.r - close.after.cycle.r)
    reach = bracket + 1e-9 * window.width
    try:
        return (yield from settle_onset(float_map, Kind.FLIP, close.rough, digits, window.scales, reach))
    except (NotFound, SwitchingTouched):
        return None


def _turns(events: list[Event]) -> bool:
    return any(event.kind is Crossing.FOLD for event in events)


def _next_flip(
    float_map: CycleMap,
    settled: Settled,
    before: Settled | None,
    stop: float,
    scales: Floats,
    digits: int,
) -> Generator[Step, None, Settled | str]:
    """The flip of the doubled cycle that a flip leads to, or why there is none."""
    origin = settled.cycle
    gap = abs(stop - origin.r) / 4
    if before is not None:
        gap = min(abs(origin.r - before.cycle.r) / DELTA_GUESS, gap)
    name = float_map.many.parameter
    if gap < RESOLUTION * max(abs(origin.r), 1e-3):
        return f"the next level lies within {gap:.1e} of the last, closer than doubles can follow"
    here = yield from _take_up(float_map, settled, gap, scales)
    if here is None:
        what = f"the doubled cycle of period {2 * origin.period}"
        return f"{what} could not be taken up beyond {name} = {origin.r:.12g}"
    crossed = yield from _follow_doubled(float_map, origin, here, stop, scales)
    if isinstance(crossed, str):
        return crossed
    low, high = crossed
    rough = _closed_in(float_map, low, high, scales)
    reach = 2 * abs(high.cycle.r - low.cycle.r) + 1e-12 * abs(origin.r)
    if (stop - origin.r) * (stop - rough.r) < 0:
        return f"the next flip lies beyond the end of the sweep, near {name} = {rough.r:.12g}"
    try:
        return (yield from settle_onset(float_map, Kind.FLIP, rough, digits, scales, reach))
    except (NotFound, SwitchingTouched) as error:
        return f"the flip of period {rough.period} near {name} = {rough.r:.12g} was lost: {error}"


def _take_up(
    float_map: CycleMap, settled: Settled, gap: float, scales: Floats
) -> Generator[Step, None, _Doubled | None]:
    """A doubled cycle soon after its flip, with positive flip test."""
    origin = settled.cycle
    vectors = settled.vector / np.max(np.abs(settled.vector) / scales)
    twice = np.concatenate([origin.points, origin.points])
    shape = np.concatenate([vectors, -vectors])
    along = shape / np.sum(shape**2)
    amplitude = 0.02 if origin.period == 1 else 0.02 / origin.period**0.5
    best: _Doubled | None = None
    for _ in range(40):
        yield Step(f"taking up the cycle of period {2 * origin.period}")
        guess = Cycle(twice + amplitude * shape, origin.r)
        target = float(np.sum(along * guess.points))
        cycle = newton(float_map, guess, scales * max(amplitude, 1e-2), along=along, target=target)
        if cycle is None:
            if best is not None:
                return best  # nearer to the flip than wished for, and good enough to go on from
            amplitude /= 3
            continue
        share = abs(cycle.r - origin.r) / gap
        here = _doubled(float_map, cycle)
        fits = here is not None and here.flip_test > 0 and share < 8 * FIRST_SHARE
        if fits and share > FIRST_SHARE / 8:
            return here
        if fits:
            best = here
        if amplitude < 1e-9:
            break
        amplitude *= float(np.clip(np.sqrt(FIRST_SHARE / share) if share > 0 else 4.0, 0.2, 5.0))
    return best


def _doubled(float_map: CycleMap, cycle: Cycle) -> _Doubled | None:
    values = multipliers(float_map, cycle)
    return _Doubled(cycle, tuple(values)) if values else None


def _follow_doubled(
    float_map: CycleMap, origin: Cycle, here: _Doubled, stop: float, scales: Floats
) -> Generator[Step, None, tuple[_Doubled, _Doubled] | str]:
    """Two doubled cycles between which the multiplier passes -1, or why there are none."""
    name = float_map.many.parameter
    offset, step = here.cycle.r - origin.r, (GROWTH - 1) * (here.cycle.r - origin.r)
    previous: _Doubled | None = None
    for _ in range(MOST_POINTS):
        yield Step(f"following the cycle of period {here.cycle.period}")
        following = _doubled_at(float_map, origin, previous, here, offset + step, scales)
        if following is None:
            step /= 3
            if abs(step) < 1e-6 * abs(offset):
                return (
                    f"the cycle of period {here.cycle.period} could not be followed beyond "
                    f"{name} = {here.cycle.r:.12g}: it may end in a fold there"
                )
            continue
        passed = below_minus_one(following.values) - below_minus_one(here.values)
        if passed > 1 and abs(step) > 1e-4 * abs(offset):
            step /= 3  # two flips in one step: the nearer is wanted
            continue
        if following.flip_test <= 0:
            return here, following
        if (stop - origin.r) * (stop - following.cycle.r) <= 0:
            return f"the cycle of period {here.cycle.period} shows no flip up to {name} = {stop:.12g}"
        previous, here = here, following
        offset = here.cycle.r - origin.r
        step = (GROWTH - 1) * offset
    return f"the cycle of period {here.cycle.period} was followed far beyond where its flip was expected"


def _doubled_at(
    float_map: CycleMap,
    origin: Cycle,
    previous: _Doubled | None,
    here: _Doubled,
    offset: float,
    scales: Floats,
) -> _Doubled | None:
    """The doubled cycle at a distance from its flip, predicted from the ones before."""
    now = here.cycle.r - origin.r
    twice = np.concatenate([origin.points, origin.points])
    if previous is None:
        start, past = twice, 0.0
    else:
        start, past = previous.cycle.points, previous.cycle.r - origin.r
    # Linear in the square root of the distance: the amplitude's own scale near a flip.
    roots = [np.sqrt(max(value / now, 0.0)) for value in (past, offset)]
    slope = (here.cycle.points - start) / (1 - roots[0])
    guess = Cycle(here.cycle.points + (roots[1] - 1) * slope, origin.r + offset)
    cycle = newton(float_map, guess, scales)
    if cycle is None:
        return None
    amplitude = float(np.max(np.abs(here.cycle.points - twice) / scales))
    if float(np.max(np.abs(cycle.points - guess.points) / scales)) > 0.5 * amplitude:
        return None
    halves_apart = np.max(np.abs(cycle.points - np.roll(cycle.points, -origin.period, 0)) / scales)
    if halves_apart < 1e-3 * amplitude:
        return None  # Newton fell back to the cycle it split from
    return _doubled(float_map, cycle)


def _closed_in(float_map: CycleMap, low: _Doubled, high: _Doubled, scales: Floats) -> Cycle:
    """A cycle near the flip between two, by the secant of the flip test kept inside the bracket."""
    for _ in range(8):
        share = low.flip_test / (low.flip_test - high.flip_test)
        share = min(max(share, 0.05), 0.95)
        guess = between(low.cycle, high.cycle, share)
        cycle = newton(float_map, guess, scales)
        middle = _doubled(float_map, cycle) if cycle is not None else None
        if middle is None:
            break
        if middle.flip_test > 0:
            low = middle
        else:
            high = middle
        if abs(middle.flip_test) < 1e-3:
            return middle.cycle
    return low.cycle if abs(low.flip_test) < abs(high.flip_test) else high.cycle
