"""What happens near a click on the branches of the cycles around it: candidates, before any is solved for."""

from __future__ import annotations

from collections.abc import Generator, Iterator
from dataclasses import dataclass
from itertools import pairwise

import numpy as np

from tinemark.onsets.cycle_map import CycleMap, Floats
from tinemark.onsets.many_border_search import borders_along
from tinemark.onsets.many_branch import (
    BranchPoint,
    Crossing,
    Event,
    Window,
    between,
    branch_point,
    follow,
)
from tinemark.onsets.many_cycles import Cycle, newton, same_cycle
from tinemark.onsets.many_map import FloatManyMap
from tinemark.onsets.many_search import Place
from tinemark.onsets.results import Step

MOST_BRANCHES = 6
LEAST_VISIBLE = 0.0015
"""Stable stretches shorter than this share of the view, about two pixels, cannot have been aimed at."""
NEUTRAL = 1e-6
"""Multipliers may exceed 1 by this much and count as stable: area-preserving maps have them at 1."""
SAME_BORDER = 1e-7
"""Shares of the view and of the states' scales within which two touching points are one."""
GOOD_ENOUGH = 0.03
"""Branches that start farther from the click than this, and than the nearest onset, are left out."""


@dataclass(frozen=True)
class Candidate:
    """Something that happens on a branch near the click.

    Attributes
    ----------
    stable_share
        Length of the stable stretch beside it, in widths of the view: what can be seen of it.
    """

    kind: Crossing
    rough: Cycle
    event: Event
    distance: float
    stable_share: float

    @property
    def rank(self) -> tuple[bool, float]:
        """What can be seen comes first, then what is near."""
        return self.stable_share < LEAST_VISIBLE, self.distance


def candidates_of(
    float_map: CycleMap, cycles: list[Cycle], place: Place, window: Window, scales: Floats
) -> Generator[Step, None, list[Candidate]]:
    """Crossings on the branches through the cycles, nearest to the click first."""
    traces: list[list[BranchPoint]] = []
    found: list[Candidate] = []
    followed = 0
    for cycle in cycles:
        seen = (candidate.distance for candidate in found if candidate.stable_share >= LEAST_VISIBLE)
        nearest = min(seen, default=np.inf)
        if followed >= MOST_BRANCHES or place.distance(float_map, cycle) > max(nearest, GOOD_ENOUGH):
            break
        start = branch_point(float_map, cycle, window)
        if start is None or _is_on(float_map, cycle, traces, window.scales):
            continue
        followed += 1
        onward, events = yield from follow(float_map, start, window, 1)
        backward, more = yield from follow(float_map, start, window, -1)
        traces += [onward, backward]
        whole = [*backward[:0:-1], *onward]
        for event in (*events, *more, *_borders(float_map, whole, scales, place.width)):
            share = _stable_stretch(whole, backward[0], event) / window.width
            rough = event.rough
            if event.kind is Crossing.BORDER and _is_known(rough, found, scales, place.width):
                continue
            if event.kind is Crossing.BRANCHES and _exchanges_stability(event):
                share = max(share, LEAST_VISIBLE)
            found.append(Candidate(event.kind, rough, event, place.distance(float_map, rough), share))
        yield Step("looking at the crossings found")
    return sorted(found, key=lambda candidate: candidate.rank)


def _borders(float_map: CycleMap, whole: list[BranchPoint], scales: Floats, reach: float) -> Iterator[Event]:
    """Switching surfaces that the cycles of a branch meet."""
    if not isinstance(float_map, FloatManyMap):
        return  # equations that are integrated have no pieces here
    for at, cycle in borders_along(float_map, [point.cycle for point in whole], scales, reach):
        yield Event(Crossing.BORDER, whole[at], whole[at], near=cycle)


def _stable_stretch(whole: list[BranchPoint], turned: BranchPoint, event: Event) -> float:
    """Length in the parameter of the stable part of the branch that ends at a crossing, on either side.

    Parameters
    ----------
    turned
        The place at which following began, looked at the other way; it stands for the one in `whole`.
    """
    order = {id(point): place for place, point in enumerate(whole)}
    order[id(turned)] = next(at for at, point in enumerate(whole) if point.cycle is turned.cycle)
    beside = [event.joined_from] if event.joined_from else [event.before, event.after]
    sides = sorted(order[id(point)] for point in beside)
    at = event.rough.r
    lengths = []
    for place, step in ((sides[0], -1), (sides[-1], 1)):
        end = at
        while 0 <= place < len(whole) and max(map(abs, whole[place].multipliers)) <= 1 + NEUTRAL:
            end = whole[place].cycle.r
            place += step
        lengths.append(abs(end - at))
    return max(lengths)


def _is_known(rough: Cycle, found: list[Candidate], scales: Floats, width: float) -> bool:
    """Whether a border collision was met from another cycle already."""
    return any(
        other.kind is Crossing.BORDER
        and other.rough.period == rough.period
        and abs(other.rough.r - rough.r) < SAME_BORDER * width
        and bool(np.all(np.abs(other.rough.points[0] - rough.points[0]) < SAME_BORDER * scales))
        for other in found
    )


def _exchanges_stability(event: Event) -> bool:
    """Whether of the branches that cross there one is stable on either side, followed or not."""
    values = sorted(event.before.multipliers, key=lambda value: abs(value - 1))
    return all(abs(value) <= 1 + NEUTRAL for value in values[1:])


def _is_on(float_map: CycleMap, cycle: Cycle, traces: list[list[BranchPoint]], scales: Floats) -> bool:
    """Whether a cycle lies on a branch that was followed already."""
    for trace in traces:
        if trace[0].cycle.period != cycle.period:
            continue
        for a, b in pairwise(trace):
            low, high = sorted((a.cycle.r, b.cycle.r))
            if low <= cycle.r <= high and high > low:
                guess = between(a.cycle, b.cycle, (cycle.r - a.cycle.r) / (b.cycle.r - a.cycle.r))
                there = newton(float_map, Cycle(guess.points, cycle.r), scales)
                if there is not None and same_cycle(there, cycle, scales):
                    return True
    return False
