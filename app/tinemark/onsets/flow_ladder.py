"""A cascade of flips of equations, level by level, past the pitchfork that comes before it.

A cycle that is its own mirror image has a multiplier that is a square and cannot flip. So the cascade of a
symmetric system begins with a pitchfork; the ladder names it and goes on along one of the two branches.
"""

from __future__ import annotations

from collections.abc import Generator
from dataclasses import dataclass, replace
from fractions import Fraction

import numpy as np

from tinemark.onsets.branch_places import Passed, Screen
from tinemark.onsets.branch_places import Place as BranchPlace
from tinemark.onsets.continuation import Pace, follow
from tinemark.onsets.cycle_families import ManyFamily
from tinemark.onsets.cycle_map import Floats
from tinemark.onsets.flow_crossing import leaps
from tinemark.onsets.flow_limits import check_rates, first_samples
from tinemark.onsets.flow_map import FlowMap, Level
from tinemark.onsets.flow_onset import settle_flow
from tinemark.onsets.flow_search import SLICE, polished
from tinemark.onsets.many_cycles import Cycle, newton
from tinemark.onsets.many_ladder import base_cycle, ladder_cycles
from tinemark.onsets.many_onset import Settled
from tinemark.onsets.many_polish import NotFound
from tinemark.onsets.results import Kind, LadderLevel, LadderRequest, LadderResult, Onset, Step
from tinemark.systems.errors import NoOnsetFound

LADDER = Level(8, 1e-12)
"""Deep levels lie close together: what is followed must tell them apart."""
PACE = Pace(0.02, 0.06, smooth=False, farthest=12.0)
MOST_PLACES = 240
SHARES = (0.02, 0.004, 0.0008)
"""Where past a pitchfork its branches are taken up, as shares of the range."""
PUSH = 0.02
TRANSIENT = 960
APART = 1e-3
"""Scaled distance from the symmetric cycle at which another one is not it."""


@dataclass(frozen=True)
class _Passage:
    """Where a ladder starts when it has passed a pitchfork: a cycle past it, and the pitchfork."""

    cycle: Cycle
    besides: tuple[Onset, ...] = ()


def ladder_flow(request: LadderRequest) -> Generator[Step | LadderLevel, None, LadderResult]:
    """Follow a cascade of flips of equations; see `engine.ladder`.

    Raises
    ------
    NoOnsetFound
        There is no first level on the way, or the equations stand in the way.
    """
    yield Step("reading the equations")
    check_rates(request.system, request.parameter, float(request.start))
    flow = FlowMap(request.system, request.parameter, LADDER)
    yield from first_samples(flow, float(request.start))
    cycle = yield from base_cycle(flow, request)
    levels: list[LadderLevel] = []
    besides: list[Onset] = []
    while True:
        passage = yield from _past_pitchforks(flow, request, cycle)
        besides += passage.besides
        if levels and not passage.besides:
            break
        left = replace(request, base_period=cycle.period, levels=request.levels - len(levels))
        try:
            result = yield from _renumbered(ladder_cycles(flow, left, passage.cycle), len(levels))
        except NoOnsetFound as error:
            if not levels:
                raise
            result = replace(result, message=str(error))
            break
        levels += result.levels
        if len(levels) >= request.levels or not result.levels:
            break
        # A doubled cycle may be its own mirror image again, as about a state of rest that is shaken.
        following = yield from _doubled(flow, levels[-1].onset, float(request.stop))
        if following is None:
            break
        cycle = following
    result = replace(result, base_period=request.base_period, levels=tuple(levels))
    if not besides:
        return result
    words = "; ".join(
        f"the ladder passed the pitchfork of period {onset.period_before} at {onset.parameter} = "
        f"{onset.value} and went on along one of the two branches that part there"
        for onset in besides
    )
    message = f"{result.message}; {words}" if result.message else words
    return replace(result, message=message, besides=(*besides, *result.besides))


def _past_pitchforks(flow: FlowMap, request: LadderRequest, cycle: Cycle) -> Generator[Step, None, _Passage]:
    start, stop = cycle.r, float(request.stop)
    width, scales = abs(stop - start), flow.scales(start)
    family = ManyFamily(flow, scales, width)
    screen = Screen(min(start, stop), width, 0.0, 1.0, margin=0.0)
    begun = family.corrected(cycle.points, cycle.r)
    if begun is None:
        return _Passage(cycle)
    onward = 1 if (stop - start) * begun.move_r > 0 else -1
    trace = yield from follow(
        family, begun, onward, screen, pace=PACE, most=MOST_PLACES, stop=lambda place: not place.stable
    )
    rough: BranchPlace | None = None
    for event in trace.events[:1]:
        if event.passed is Passed.CROSSING:
            rough = trace.places[event.at]
    for _, place in leaps(trace.places):
        if rough is None or abs(place.r - start) < abs(rough.r - start):
            rough = place
    first_flip = [trace.places[e.at].r for e in trace.events if e.passed is Passed.FLIP]
    if rough is None or (first_flip and abs(first_flip[0] - start) < abs(rough.r - start)):
        return _Passage(cycle)
    try:
        pitchfork = yield from settle_flow(
            flow, Kind.PITCHFORK, Cycle(rough.points, rough.r), request.digits, scales, 0.05 * width
        )
    except NotFound:
        return _Passage(cycle)
    beyond = yield from _branch_beyond(flow, pitchfork, stop, width, scales)
    return _Passage(beyond or cycle, (pitchfork.onset,) if beyond else ())


def _renumbered(
    levels: Generator[Step | LadderLevel, None, LadderResult], before: int
) -> Generator[Step | LadderLevel, None, LadderResult]:
    """A ladder whose levels are counted on from those before."""
    counted: list[LadderLevel] = []
    while True:
        try:
            item = next(levels)
        except StopIteration as done:
            result: LadderResult = done.value
            return replace(result, levels=tuple(counted))
        if isinstance(item, LadderLevel):
            item = replace(item, level=before + len(counted) + 1)
            counted.append(item)
        yield item


def _doubled(flow: FlowMap, flip: Onset, stop: float) -> Generator[Step, None, Cycle | None]:
    """The doubled cycle that orbits settle on soon after a flip, on the way to the stop."""
    value, period = float(flip.value_fraction), flip.period_after
    scales = flow.scales(value)
    state = np.array([[float(Fraction(text))] for _, text in flip.states])
    for share in SHARES:
        r = value + share * (stop - value)
        now = state + PUSH * scales[:, None]
        for place in range(TRANSIENT):
            now = flow.step(now, r)
            if place % SLICE == 0:
                yield Step(f"taking up the cycle of period {period}")
        points = []
        for _ in range(period):
            points.append(now[:, 0])
            now = flow.step(now, r)
        found = polished(flow, np.array(points), r, scales) if np.isfinite(points).all() else None
        if found is not None and found.period == period:
            return found
    return None


def _branch_beyond(
    flow: FlowMap, pitchfork: Settled, stop: float, width: float, scales: Floats
) -> Generator[Step, None, Cycle | None]:
    """A stable cycle on one of the branches that part at a pitchfork, on the way to the stop."""
    origin = pitchfork.cycle
    toward = 1.0 if stop > origin.r else -1.0
    push = pitchfork.vector[0] / np.max(np.abs(pitchfork.vector[0]) / scales)
    for share in SHARES:
        r = origin.r + toward * share * width
        symmetric = newton(flow, Cycle(origin.points, r), scales)
        state = (origin.points[0] + PUSH * push)[:, None]
        for place in range(TRANSIENT):
            state = flow.step(state, r)
            if place % SLICE == 0:
                yield Step("going on along one of the branches that part at the pitchfork")
        points = []
        for _ in range(origin.period):
            points.append(state[:, 0])
            state = flow.step(state, r)
        if not np.isfinite(points).all():
            continue
        found = polished(flow, np.array(points), r, scales)
        if found is None or found.period != origin.period:
            continue
        if symmetric is None or np.max(np.abs(found.points[0] - symmetric.points[0]) / scales) > APART:
            return found
    return None
