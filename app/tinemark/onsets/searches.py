"""Searching a view for onsets: settle orbits column by column, follow the branches of what they settle on."""

from __future__ import annotations

import math
from collections.abc import Generator, Iterable, Sequence
from dataclasses import dataclass, field
from fractions import Fraction
from typing import Any

import numpy as np

from tinemark.onsets.border_search import border_crossings
from tinemark.onsets.branch_points import is_stalled, meetings_of
from tinemark.onsets.branches import Crossing, Cycle, CycleMap, crossings_from, find_cycle
from tinemark.onsets.crises import band_offsets
from tinemark.onsets.float_map import FloatMap, float_map
from tinemark.onsets.results import Kind, RefineRequest, Step

APART = 0.1
"""Cycles of one period further apart than this share of the state's scale are not taken for one branch."""
PIXEL = 1 / 1280
"""The share of a view that a pixel takes, for what can be seen in it."""
ASPECT = 0.625
"""Height of a view over its width, as on a screen."""
LANES = 16
LINE = 12 * PIXEL
"""What a crisis ranks behind a split at the same distance."""


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
    """An onset in reach: how far from the click, as a share of the view's width, and how it ranks."""

    crossing: Crossing
    distance: float
    rank: float
    steps_to_click: int
    offset: float


@dataclass(frozen=True)
class Span:
    """A branch that was followed: from where to where, in offsets, and the cycle it was taken up at.

    Where two cycles of one period are stable at a time, the points tell which of them the branch is of.
    """

    low: float
    high: float
    points: tuple[float, ...]


@dataclass
class Search:
    """What has been found so far in one view."""

    request: RefineRequest
    cycles: CycleMap
    candidates: list[Candidate] = field(default_factory=list)
    spans: dict[tuple[int, int], list[Span]] = field(default_factory=dict)
    periods: set[int] = field(default_factory=set)
    escaped: int = 0
    orbits: int = 0
    climbed: int = 0
    touchings: dict[int, float] = field(default_factory=dict)
    words: set[Any] = field(default_factory=set)

    @property
    def width(self) -> float:
        """Width of the view."""
        return float(self.request.width)

    def known(self, start: int, period: int, offset: float, x: Any) -> bool:
        """Whether the branch that an orbit from this start settled on has been followed already."""
        return any(
            span.low <= offset <= span.high
            and min(abs(float(x) - point) for point in span.points) <= APART * self.cycles.scale
            for span in self.spans.get((start, period), ())
        )

    def add(self, crossing: Crossing) -> None:
        """Take a crossing in, unless it is known or out of reach."""
        offset = self.cycles.offset(crossing.r, self.request.near)
        if abs(offset) > self.width / 2:
            return
        across, place = self._distance_observed(crossing)
        distance = math.hypot(offset / self.width, across)
        # What is smaller than a few pixels was hardly aimed at: it ranks behind what can be seen.
        seen = crossing.extent / self.width / (3 * PIXEL)
        hidden = 20 * PIXEL * max(0.0, -math.log2(seen)) if seen > 0 else 1.0
        if crossing.kind is Kind.CRISIS:
            # A split is a point and was aimed at in two directions; a crisis is a line across the picture.
            hidden += LINE
        candidate = Candidate(crossing, distance, distance + hidden, place, offset)
        for index, other in enumerate(self.candidates):
            same = other.crossing.kind is crossing.kind and other.crossing.period == crossing.period
            if same and abs(other.offset - offset) < 1e-6 * self.width:
                # The same onset, or its mirror image in a symmetric map: keep what was clicked.
                if candidate.rank < other.rank:
                    self.candidates[index] = candidate
                return
        self.candidates.append(candidate)

    def _distance_observed(self, crossing: Crossing) -> tuple[float, int]:
        request = self.request
        if request.observed is None or not request.height:
            return 0.0, 0
        if crossing.kind is Kind.CRISIS:
            # Nothing to aim at but the line itself: the bands fill at once.
            bands = np.abs(band_offsets(float_map(self.cycles.one), crossing, request.observed))
            return ASPECT * float(bands.min()) / float(request.height), 0
        points = self.cycles.points(crossing.x, crossing.r, crossing.period)
        gaps = np.abs(self.cycles.observed_offsets(points, crossing.r, request.observed))
        place = int(np.argmin(gaps))
        return ASPECT * float(gaps[place]) / float(request.height), place

    def ranked(self) -> list[Candidate]:
        """Candidates, nearest first."""
        return sorted(self.candidates, key=lambda candidate: candidate.rank)

    def done(self, within: float) -> bool:
        """Whether something that can be seen lies this close to the click."""
        return any(candidate.rank <= within for candidate in self.candidates)


def run_sweep(search: Search, sweep: Sweep) -> Generator[Step, None, None]:
    """Settle orbits in every column of a sweep and follow what they settle on."""
    cycles, near = search.cycles, search.request.near
    columns = [cycles.number(near + Fraction(share) * search.request.width) for share in sweep.offsets]
    starts = starting_points(cycles, cycles.number(near), search.request)
    jobs = [(label, x, r) for r in columns for label, x in enumerate(starts)]
    for first in range(0, len(jobs), LANES):
        batch = jobs[first : first + LANES]
        ends, returns = yield from settled(
            cycles, [x for _, x, _ in batch], [r for _, _, r in batch], sweep.transient, sweep.most
        )
        for (label, _, r), end, periods in zip(batch, ends, returns, strict=True):
            search.orbits += 1
            if periods[0] < 0:
                search.escaped += 1
                continue
            _take_seed(search, label, end, r, [period for period in periods if period])
        yield Step("settling orbits around the click", first / len(jobs))


def settled(
    cycles: CycleMap, xs: Sequence[Any], rs: Sequence[Any], transient: int, most: int
) -> Generator[Step, None, tuple[list[Any], list[list[int]]]]:
    """Run orbits in slices short enough to cancel between, then look for returns.

    Returns
    -------
    ends
        Where each orbit was after the transient.
    returns
        Steps of the first return within each tolerance; 0 none, -1 escaped.
    """
    share = max(1, cycles.slice_steps // max(1, len(xs)))
    ends: Sequence[Any] = xs
    left = transient
    while left > share:
        ends, _ = cycles.settle(ends, rs, share, 0)
        left -= share
        yield Step("settling orbits")
    ends, returns = cycles.settle(ends, rs, left, most)
    return list(ends), returns.tolist()


def starting_points(cycles: CycleMap, r: Any, request: RefineRequest) -> list[Any]:
    """Where orbits start: turning points of the map, the click, the system's own start."""
    found = cycles.critical_points(r)[:6]
    if request.observed is not None and request.system.observe == cycles.one.state:
        found.append(cycles.number(request.observed))
    found.append(cycles.number(cycles.one.start))
    distinct: list[Any] = []
    for x in found:
        if all(abs(float(x) - float(other)) > 1e-9 * cycles.scale for other in distinct):
            distinct.append(x)
    return distinct


def _take_seed(search: Search, label: int, x: Any, r: Any, periods: Iterable[int]) -> None:
    """Turn an orbit's returns into a cycle, follow its branch, keep its onsets."""
    near, cycles = search.request.near, search.cycles
    offset = cycles.offset(r, near)
    for period in dict.fromkeys(periods):
        if search.known(label, period, offset, x):
            return
        cycle = find_cycle(cycles, x, r, period)
        if cycle is None or not abs(cycle.multiplier) < 20:
            continue
        search.periods.add(cycle.period)
        if search.known(label, cycle.period, offset, cycle.x):
            return
        crossings, span = crossings_from(cycles, cycle, near, search.width)
        points = tuple(float(point) for point in cycles.points(cycle.x, cycle.r, cycle.period))
        search.spans.setdefault((label, cycle.period), []).append(Span(*span, points))
        for crossing in crossings:
            if not is_stalled(crossing, search.width):
                search.add(crossing)
        _add_meetings(search, cycle, crossings)
        return


def _add_meetings(search: Search, cycle: Cycle, crossings: Sequence[Crossing]) -> None:
    """Add what a branch meets besides its own flips and folds; deep views take it from wider ones."""
    if not isinstance(search.cycles, FloatMap):
        return
    meetings = meetings_of(search.cycles, cycle, search.request.near, search.width, crossings)
    for crossing in meetings.crossings:
        search.add(crossing)
    for crossing in border_crossings(search.cycles, cycle, search.width, search.words):
        search.add(crossing)
    if meetings.touching is not None:
        search.touchings[cycle.period] = float(meetings.touching.r)
