"""Following a cascade of flips level by level, each level predicted, refined and proved.

Early levels follow the doubled branch from one flip to the next. From then on gaps shrink by a ratio
that itself converges, and so do the distances of the cycle point nearest the turning point
(Feigenbaum, 1978): the next level is predicted from the last ones, and Newton's method has little left
to do. A prediction is only ever a start: what is reported was solved for and proved by itself.
"""

from __future__ import annotations

from collections.abc import Generator, Sequence
from dataclasses import dataclass, field
from fractions import Fraction

from tinemark.onsets.ball_orbits import ball_loops, ball_of, fraction_of, in_chunks, precision
from tinemark.onsets.branches import (
    Crossing,
    Cycle,
    crossing_at,
    crossings_from,
    cycle_with_multiplier,
    find_cycle,
)
from tinemark.onsets.decimals import leading_power
from tinemark.onsets.doubled_branch import born_at, flip_of_doubled
from tinemark.onsets.float_map import FloatMap, float_map
from tinemark.onsets.ladder_passages import besides_words, passage_to
from tinemark.onsets.one_map import OneMap, one_map
from tinemark.onsets.polish import Lost, Rough, Settled, first_bits, settle_onset
from tinemark.onsets.results import Kind, LadderLevel, LadderRequest, LadderResult, Status, Step
from tinemark.onsets.scaling_steps import extrapolated
from tinemark.onsets.searches import settled
from tinemark.systems.errors import NoOnsetFound
from tinemark.systems.exact import fraction_text

LONGEST_PERIOD = 2**24
"""Longest cycles of a ladder; each level takes twice the time of the last, and no more memory."""
LONGEST_FOLLOWED = 2**17
"""Cycles longer than this are only reached by prediction: doubles cannot tell their points apart."""
COLUMNS = (600, 8000)
"""Columns in which the first level is looked for; the finer round only where the coarser found nothing."""
NARROWEST = 1e-12
"""Ranges below this share of the parameter cannot be scanned in doubles."""
PATIENCE = 40
"""Branches of one start and period followed in vain, from which on only every 40th is followed."""
DOUBLES_TELL = 1e-11
"""Gaps below this share of the parameter are left to high precision from the start."""


@dataclass(frozen=True)
class _Course:
    """A ladder being followed: map, direction (+1 or -1), where it must end."""

    one: OneMap
    cycles: FloatMap
    request: LadderRequest
    direction: int

    def ahead(self, r: float, of: float) -> bool:
        """Whether a parameter value lies further along than another."""
        return (r - of) * self.direction > 0

    @property
    def range_text(self) -> str:
        """The range in words."""
        request = self.request
        return (
            f"{request.parameter} = {fraction_text(request.start, 10)} and {fraction_text(request.stop, 10)}"
        )


@dataclass
class _Tried:
    """Stretches of parameter, by period, on which a branch was followed and has no flip in the range."""

    spans: dict[int, list[tuple[float, float]]] = field(default_factory=dict)
    skipped: int = 0

    def covers(self, period: int, r: float) -> bool:
        """Whether there is nothing to gain from a cycle of this period there."""
        known = self.spans.get(period, [])
        if any(low <= r <= high for low, high in known):
            return True
        # A branch that never can be followed, such as a constant map's: now and then is enough.
        self.skipped += 1
        return len(known) > PATIENCE and self.skipped % PATIENCE != 0

    def add(self, period: int, low: float, high: float) -> None:
        """Take a stretch in."""
        self.spans.setdefault(period, []).append((low, high))


def ladder_one(request: LadderRequest) -> Generator[Step | LadderLevel, None, LadderResult]:
    """Follow a cascade of a one-state map; see `engine.ladder`.

    Raises
    ------
    NoOnsetFound
        No cycle of the base period loses stability in a flip between `start` and `stop`.
    """
    if request.start == request.stop:
        raise NoOnsetFound("the ladder's range is empty", what_to_do="give two different ends")
    width, size = abs(request.stop - request.start), max(abs(request.start), abs(request.stop))
    if width < size * Fraction(NARROWEST):
        raise NoOnsetFound(
            f"the ladder's range is too narrow to look for its first level in ({fraction_text(width, 3)})",
            what_to_do="widen it; single onsets in so narrow a view are found by a click",
        )
    one = one_map(request.system, request.parameter)
    course = _Course(one, float_map(one), request, 1 if request.stop > request.start else -1)
    first = yield from _first_flip(course)
    period = request.base_period
    share = 1 / max(request.levels, 1)
    yield Step(f"level 1: proving the flip of period {period}", 0.0)
    reach = abs(request.stop - request.start) / 100
    try:
        settled = yield from settle_onset(one, _rough(first, period), request.digits, reach=reach)
    except Lost as error:
        raise NoOnsetFound(f"the first level could not be solved for: {error}") from error
    passage = yield from passage_to(one, course.cycles, settled, 1, request.start, request.digits)
    levels, besides = [LadderLevel(1, passage.settled.onset)], list(passage.besides)
    found = [(yield from _anchored(course, passage.settled, period))]
    yield levels[0]
    message = ""
    while len(levels) < request.levels:
        number = len(levels) + 1
        period *= 2
        if period > LONGEST_PERIOD:
            message = f"level {number} would need cycles of more than {LONGEST_PERIOD} points"
            break
        yield Step(f"level {number}: looking for the flip of period {period}", (number - 1) * share)
        following = yield from _next_level(course, found, period)
        if isinstance(following, str):
            message = f"the ladder ends at level {number - 1}: {following}"
            break
        passage = yield from passage_to(one, course.cycles, following, number, found[-1].r, request.digits)
        following = passage.settled
        besides += passage.besides
        levels.append(LadderLevel(number, following.onset))
        found.append(following)
        yield levels[-1]
    message = "; ".join(part for part in (message, besides_words(besides)) if part)
    return LadderResult(request.base_period, tuple(levels), message, besides=tuple(besides))


def _rough(crossing: Crossing, period: int) -> Rough:
    return Rough(Kind.FLIP, period, Fraction(float(crossing.x)), Fraction(float(crossing.r)))


def _anchored(course: _Course, settled: Settled, period: int) -> Generator[Step, None, Settled]:
    """Move to the cycle point nearest a turning point of the map: its distances scale along the ladder."""
    steps = course.cycles.nearest_turning(float(settled.x), float(settled.r), period)
    if steps == 0:
        return settled
    bits = first_bits(Rough(Kind.FLIP, period, settled.x, settled.r), course.request.digits)
    with precision(bits):
        x, r = ball_of(settled.x).mid(), ball_of(settled.r).mid()
    orbit = ball_loops(course.one).orbit
    x = yield from in_chunks(lambda now, n: orbit(now, r, n), x, steps, bits, "following the cycle")
    return Settled(settled.onset, fraction_of(x), settled.r)


def _first_flip(course: _Course) -> Generator[Step, None, Crossing]:
    """The first flip of a base-period cycle on the way from start to stop."""
    request = course.request
    seen: set[int] = set()
    for columns in COLUMNS:
        for crossing in (yield from _scan(course, columns, seen)):
            return crossing
    periods = ", ".join(str(period) for period in sorted(seen)[:8])
    looked = f"stable cycles were seen of periods {periods}" if seen else "no stable cycle was seen"
    raise NoOnsetFound(
        f"no cycle of period {request.base_period} flips between {course.range_text}; {looked}",
        what_to_do="start before the first flip of the ladder (from either end), "
        "or give the base period that splits there",
    )


def _scan(course: _Course, columns: int, seen: set[int]) -> Generator[Step, None, list[Crossing]]:
    request, cycles = course.request, course.cycles
    start, stop = float(request.start), float(request.stop)
    # By start: what one start settles on along the range is one branch, or a few.
    tried: dict[int, _Tried] = {}
    block = 25
    for first in range(0, columns + 1, block):
        rs = [start + (stop - start) * k / columns for k in range(first, min(first + block, columns + 1))]
        starts = [*cycles.critical_points(rs[len(rs) // 2])[:6], float(course.one.start)]
        jobs = [(label, x, r) for r in rs for label, x in enumerate(starts)]
        ends, returns = yield from settled(
            cycles, [x for _, x, _ in jobs], [r for _, _, r in jobs], 3000, 8 * request.base_period + 64
        )
        for (label, _, r), end, periods in zip(jobs, ends, returns, strict=True):
            known = tried.setdefault(label, _Tried())
            flip = _flip_from(course, end, r, [n for n in periods if n > 0], seen, known)
            if flip is not None:
                return [flip]
        yield Step(f"looking for the first flip of period {request.base_period}", None)
    return []


def _flip_from(
    course: _Course,
    x: float,
    r: float,
    periods: Sequence[int],
    seen: set[int],
    tried: _Tried,
) -> Crossing | None:
    """The flip that an orbit leads to, where no branch is known already to have none."""
    request, cycles = course.request, course.cycles
    base = request.base_period
    width = abs(float(request.stop - request.start))
    for period in dict.fromkeys(periods):
        if period % base and period > base:
            continue
        if tried.covers(period, r):
            return None
        cycle = find_cycle(cycles, x, r, period)
        if cycle is None or not abs(cycle.multiplier) < 1.5:
            continue
        if abs(cycle.multiplier) < 1:
            seen.add(cycle.period)
        if cycle.period not in (base, 2 * base):
            continue
        crossings, span = crossings_from(cycles, cycle, Fraction(r), 1.01 * width)
        for crossing in crossings:
            if crossing.kind is Kind.FLIP and crossing.period == base and _begins(course, crossing):
                return crossing
        tried.add(cycle.period, r + span[0], r + span[1])
        return None
    return None


def _begins(course: _Course, crossing: Crossing) -> bool:
    """Whether a flip lies in the range and makes the cycle unstable in the ladder's direction."""
    start, stop = float(course.request.start), float(course.request.stop)
    slack = 1e-9 * abs(stop - start)
    r = float(crossing.r)
    if not min(start, stop) - slack <= r <= max(start, stop) + slack:
        return False
    u, v, w, z = course.cycles.slopes(crossing.x, r, crossing.period)
    return (z + w * v / (1 - u)) * course.direction < 0


def _next_level(
    course: _Course, found: Sequence[Settled], period: int
) -> Generator[Step, None, Settled | str]:
    """The flip of the doubled cycle; a sentence where there is none."""
    guess = _predicted(found)
    if guess is not None:
        settled = yield from _from_prediction(course, found[-1], guess, period)
        if settled is not None:
            return settled
    crossing = None
    if period <= LONGEST_FOLLOWED:
        crossing = yield from _along_doubled_branch(course, found[-1], period)
    if crossing is None:
        end = fraction_text(course.request.stop, 10)
        return f"no flip of the period-{period} cycle was found on the way to {end}"
    gap = abs(float(crossing.r) - float(found[-1].r))
    try:
        settled = yield from settle_onset(
            course.one, _rough(crossing, period), _digits(course, Fraction(gap)), reach=Fraction(gap) / 4
        )
    except Lost as error:
        return f"the flip of the period-{period} cycle could not be solved for: {error}"
    if (settled.r - course.request.stop) * course.direction > 0:
        return f"the flip of period {period} lies beyond {fraction_text(course.request.stop, 10)}"
    # A predicted level is at the right cycle point already, and more precisely than doubles could find it.
    return (yield from _anchored(course, settled, period))


def _digits(course: _Course, gap: Fraction) -> int:
    """Digits asked for, or as many as it takes to give the gap to the last level eight of its own."""
    size = max(abs(course.request.start), abs(course.request.stop))
    return max(course.request.digits, leading_power(size) - leading_power(gap) + 9)


def _predicted(found: Sequence[Settled]) -> tuple[Fraction, Fraction] | None:
    """Cycle point and parameter value expected of the next level; None while ratios still wander."""
    r = extrapolated([level.r for level in found])
    x = extrapolated([level.x for level in found])
    return None if r is None or x is None else (x, r)


def _from_prediction(
    course: _Course, last: Settled, guess: tuple[Fraction, Fraction], period: int
) -> Generator[Step, None, Settled | None]:
    x, r = guess
    gap = abs(r - last.r)
    if (r - course.request.stop) * course.direction > gap / 10:
        return None
    if gap > abs(r) * Fraction(DOUBLES_TELL):
        near = cycle_with_multiplier(course.cycles, float(x), float(r), period, -1.0)
        if near is not None and abs(near[1] - float(r)) < 0.2 * float(gap):
            # Doubles resolve the state less finely than the prediction may; Newton sorts it out.
            x, r = Fraction(near[0]), Fraction(near[1])
    try:
        settled = yield from settle_onset(
            course.one, Rough(Kind.FLIP, period, x, r), _digits(course, gap), reach=gap / 4
        )
    except Lost:
        return None
    inside = (course.request.stop - settled.r) * course.direction >= 0
    sound = settled.onset.status is Status.PROVED or settled.onset.evidence
    return settled if sound and inside and (settled.r - last.r) * course.direction > 0 else None


def _along_doubled_branch(
    course: _Course, last: Settled, period: int
) -> Generator[Step, None, Crossing | None]:
    """Follow the doubled cycle from where it settles beyond a flip to its own flip."""
    cycles = course.cycles
    half = period // 2
    x, r = float(last.x), float(last.r)
    flip = crossing_at(cycles, Cycle(half, x, r, -1.0), Kind.FLIP)
    extent = flip.extent if flip is not None else abs(float(course.request.stop) - r) / 10
    turning = cycles.critical_points(r)[:6]
    for share in (0.05, 0.1, 0.2, 0.02, 0.4, 0.01, 0.7, 1.0, 1.5):
        here = r + course.direction * share * extent
        if course.ahead(here, float(course.request.stop)):
            continue
        nudge = 1e-3 * cycles.scale / half
        starts = [x + nudge, *turning]
        transient = min(2000 * period, 2_000_000)
        ends, returns = yield from settled(cycles, starts, [here] * len(starts), transient, 2 * period)
        yield Step(f"following the cycle of period {period}")
        for end, periods in zip(ends, returns, strict=True):
            for count in dict.fromkeys(n for n in periods if n > 0):
                cycle = find_cycle(cycles, end, here, count)
                if cycle is None or cycle.period != period or not abs(cycle.multiplier) < 1:
                    continue
                if not born_at(cycles, cycle, r):
                    continue
                there = flip_of_doubled(cycles, cycle, r, float(course.request.stop))
                if there is not None:
                    return crossing_at(cycles, there, Kind.FLIP)
    return None
