"""What a click does on a one-state map: settle, follow branches, choose the onset nearest on screen, prove.

Where a cycle is about to split, an orbit settles ever more slowly, so nothing here waits for it: an
orbit only has to come close to a cycle, Newton's method does the rest, and the onset is reached along
the branch. Orbits start from the turning points of the map, which every stable cycle of a map with
negative Schwarzian derivative attracts (Singer, 1978), and from a few other places for all other maps.
"""

from __future__ import annotations

import math
from collections.abc import Generator, Iterable
from dataclasses import dataclass, field
from fractions import Fraction
from typing import Any

import numpy as np

from tinemark.onsets.branches import Crossing, CycleMap, Cycle, crossings_from, find_cycle
from tinemark.onsets.float_map import float_map
from tinemark.onsets.one_map import OneMap, one_map
from tinemark.onsets.polish import Lost, Rough, settle_onset
from tinemark.onsets.results import Kind, Onset, RefineRequest, RefineResult, Status, Step
from tinemark.systems.errors import NoOnsetFound
from tinemark.systems.exact import fraction_text

PIXEL = 1 / 1280
"""The share of a view that a pixel takes, for what can be seen in it."""
CLOSE = 6 * PIXEL
"""Two onsets whose distances from the click differ by less than this are both shown."""
DEEP = 1e-9
"""Views narrower than this, relative to the parameter, are searched in high precision."""
LANES = 16


@dataclass(frozen=True)
class Sweep:
    """One round of settling: offsets of the columns as shares of the view, and how long orbits run."""

    offsets: tuple[float, ...]
    transient: int
    most: int


NEAR = Sweep(tuple(k * PIXEL for k in sorted(range(-32, 33), key=abs)), 3000, 700)
WIDE = Sweep(tuple(sorted((k / 240 for k in range(-120, 121)), key=abs)), 6000, 2100)
LONG = Sweep(tuple(k * PIXEL * 2 for k in sorted(range(-10, 11), key=abs)), 60000, 17000)
DEEP_NEAR = Sweep(tuple(k * PIXEL for k in (0, -1, 1, -3, 3, -8, 8, -16, 16)), 1500, 300)
DEEP_WIDE = Sweep(tuple(k / 16 for k in sorted(range(-8, 9), key=abs)), 3000, 600)


@dataclass(frozen=True)
class Candidate:
    """An onset in reach: how far from the click, as a share of the view, and how it ranks."""

    crossing: Crossing
    distance: float
    rank: float
    steps_to_click: int
    offset: float


@dataclass
class _Search:
    """What has been found so far in one view."""

    request: RefineRequest
    cycles: CycleMap
    candidates: list[Candidate] = field(default_factory=list)
    spans: dict[tuple[int, int], list[tuple[float, float]]] = field(default_factory=dict)
    periods: set[int] = field(default_factory=set)
    escaped: int = 0
    orbits: int = 0

    @property
    def width(self) -> float:
        return float(self.request.width)

    def known(self, start: int, period: int, offset: float) -> bool:
        """Whether the branch that an orbit from this start settled on has been followed already."""
        return any(low <= offset <= high for low, high in self.spans.get((start, period), ()))

    def add(self, crossing: Crossing) -> None:
        """Take a crossing in, unless it is known or out of reach."""
        offset = self.cycles.offset(crossing.r, self.request.near)
        if abs(offset) > self.width / 2:
            return
        for other in self.candidates:
            same = other.crossing.kind is crossing.kind and other.crossing.period == crossing.period
            if same and abs(other.offset - offset) < 1e-6 * self.width:
                return
        across, place = self._distance_observed(crossing)
        distance = math.hypot(offset / self.width, across)
        # What is smaller than a few pixels was hardly aimed at: it ranks behind what can be seen.
        seen = crossing.extent / self.width / (3 * PIXEL)
        hidden = 20 * PIXEL * max(0.0, -math.log2(seen)) if seen > 0 else 1.0
        self.candidates.append(Candidate(crossing, distance, distance + hidden, place, offset))

    def _distance_observed(self, crossing: Crossing) -> tuple[float, int]:
        request = self.request
        if request.observed is None or request.height is None:
            return 0.0, 0
        points = self.cycles.points(crossing.x, crossing.r, crossing.period)
        gaps = np.abs(self.cycles.observed_offsets(points, crossing.r, request.observed))
        place = int(np.argmin(gaps))
        return float(gaps[place]) / float(request.height), place

    def ranked(self) -> list[Candidate]:
        """Candidates, nearest first."""
        return sorted(self.candidates, key=lambda candidate: candidate.rank)

    def done(self, within: float) -> bool:
        """Whether something that can be seen lies this close to the click."""
        return any(candidate.rank <= within for candidate in self.candidates)


def refine_one(request: RefineRequest) -> Generator[Step, None, RefineResult]:
    """Find, polish and prove the onset nearest to a click on a one-state map.

    Raises
    ------
    NoOnsetFound
        No flip and no fold in the view; says what was looked at.
    """
    one = one_map(request.system, request.parameter)
    if request.width <= 0:
        raise NoOnsetFound("the view has no width", what_to_do="choose a view in which the parameter varies")
    yield Step("settling orbits around the click")
    deep = request.width < DEEP * max(abs(request.near), Fraction(1, 10**6))
    search = yield from (_deep_search(one, request) if deep else _search(one, request))
    result = yield from _prove_nearest(one, search)
    if result is None:
        raise NoOnsetFound(
            _looked_at(search),
            where=f"near {request.parameter} = {_short(request.near)}",
            what_to_do="click nearer to a split, or widen the view",
        )
    return result


def _search(one: OneMap, request: RefineRequest) -> Generator[Step, None, _Search]:
    search = _Search(request, float_map(one))
    yield from _run(search, NEAR)
    if not search.done(0.03):
        yield from _run(search, WIDE)
    if not search.done(0.03):
        yield from _run(search, LONG)
    return search


def _deep_search(one: OneMap, request: RefineRequest) -> Generator[Step, None, _Search]:
    from tinemark.onsets.deep_views import deep_crossings, deep_map

    search = _Search(request, deep_map(one, request))
    for crossing in (yield from deep_crossings(one, request, search.cycles)):
        search.add(crossing)
    if not search.done(0.03):
        yield from _run(search, DEEP_NEAR)
    if not search.done(0.1):
        yield from _run(search, DEEP_WIDE)
    return search


def _run(search: _Search, sweep: Sweep) -> Generator[Step, None, None]:
    """Settle orbits in every column of a sweep and follow what they settle on."""
    cycles, near = search.cycles, search.request.near
    columns = [cycles.number(near + Fraction(share) * search.request.width) for share in sweep.offsets]
    starts = starting_points(cycles, cycles.number(near), search.request)
    jobs = [(label, x, r) for r in columns for label, x in enumerate(starts)]
    for first in range(0, len(jobs), LANES):
        batch = jobs[first : first + LANES]
        ends, returns = cycles.settle(
            [x for _, x, _ in batch], [r for _, _, r in batch], sweep.transient, sweep.most
        )
        for (label, _, r), end, periods in zip(batch, ends, returns.tolist(), strict=True):
            search.orbits += 1
            if periods[0] < 0:
                search.escaped += 1
                continue
            _take_seed(search, label, end, r, [period for period in periods if period])
        yield Step("settling orbits around the click", first / len(jobs))


def starting_points(cycles: CycleMap, r: Any, request: RefineRequest) -> list[Any]:
    """Where orbits start: turning points of the map, the click, the system's own start."""
    found = cycles.critical_points(r)[:6]
    if request.observed is not None and request.system.observe == cycles.one.state:
        found.append(cycles.number(request.observed))
    found.append(cycles.number(cycles.one.start))
    distinct: list[Any] = []
    for x in found:
        if all(abs(float(x) - float(other)) > 1e-9 * cycles.one.scale for other in distinct):
            distinct.append(x)
    return distinct


def _take_seed(search: _Search, label: int, x: Any, r: Any, periods: Iterable[int]) -> None:
    """Turn an orbit's returns into a cycle, follow its branch, keep its onsets."""
    near, cycles = search.request.near, search.cycles
    offset = cycles.offset(r, near)
    for period in dict.fromkeys(periods):
        if search.known(label, period, offset):
            return
        cycle = find_cycle(cycles, x, r, period)
        if cycle is None or not abs(cycle.multiplier) < 20:
            continue
        search.periods.add(cycle.period)
        if search.known(label, cycle.period, offset):
            return
        crossings, span = crossings_from(cycles, cycle, near, search.width)
        search.spans.setdefault((label, cycle.period), []).append(span)
        for crossing in crossings:
            search.add(crossing)
        return


def _prove_nearest(one: OneMap, search: _Search) -> Generator[Step, None, RefineResult | None]:
    """Prove candidates from the nearest on, until the view has no closer one left."""
    request = search.request
    reach = request.width / 100
    found: list[tuple[Candidate, Onset]] = []
    limit = math.inf
    for candidate in search.ranked()[:8]:
        if candidate.rank > limit or len(found) == 2:
            break
        crossing = candidate.crossing
        cycles = search.cycles
        rough = Rough(crossing.kind, crossing.period, cycles.exact(crossing.x), cycles.exact(crossing.r))
        yield Step(f"proving the {crossing.kind.value} of period {crossing.period}")
        try:
            settled = yield from settle_onset(
                one, rough, request.digits, reach=max(reach, abs(rough.r) / 10**9), show_after=candidate.steps_to_click
            )
        except Lost:
            continue
        onset = settled.onset
        if abs(onset.value_fraction - request.near) > request.width / 2:
            continue
        if any(onset.kind is other.kind and _overlap(onset, other) for _, other in found):
            continue
        found.append((candidate, onset))
        limit = found[0][0].rank + CLOSE
    if not found:
        return None
    return RefineResult(tuple(onset for _, onset in found), _message(found, request))


def _overlap(one: Onset, other: Onset) -> bool:
    return Fraction(one.lower) <= Fraction(other.upper) and Fraction(other.lower) <= Fraction(one.upper)


def _message(found: list[tuple[Candidate, Onset]], request: RefineRequest) -> str:
    onset = found[0][1]
    share = abs(onset.value_fraction - request.near) / request.width
    text = f"{describe(onset)}, {float(100 * share):.2g} % of the view's width from the click"
    if len(found) > 1:
        text += f"; a second is as close: {describe(found[1][1])}"
    return text


def describe(onset: Onset) -> str:
    """An onset in a few words."""
    proved = "proved" if onset.status is Status.PROVED else f"estimated ({onset.reason})"
    place = f"{onset.parameter} = {_short(onset.value_fraction)}"
    if onset.kind is Kind.FLIP:
        return f"flip of period {onset.period_before} to {onset.period_after} at {place}, {proved}"
    return f"fold that opens period {onset.period_after} at {place}, {proved}"


def _short(value: Fraction) -> str:
    return fraction_text(value, 10)


def _looked_at(search: _Search) -> str:
    request = search.request
    text = (
        f"no flip and no fold was found within half a view's width ({_short(request.width / 2)}) of the click: "
        f"{search.orbits} orbits were settled"
    )
    if search.escaped == search.orbits:
        return f"{text}, and all of them escaped"
    if not search.periods:
        return f"{text}, and none of them is periodic"
    shown = ", ".join(str(period) for period in sorted(search.periods)[:8])
    return f"{text} and the branches of their cycles (periods {shown}) were followed"
