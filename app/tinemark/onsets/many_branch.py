"""Branches of cycles of several states, followed along the parameter and around folds.

Pseudo-arclength continuation (Keller 1977) with all points of the cycle as unknowns. Along the way the
multipliers are watched: a crossing of -1 is a flip, a turn of the branch a fold, and a complex pair that
crosses the unit circle a Neimark-Sacker point.
"""

from __future__ import annotations

from collections.abc import Generator, Sequence
from dataclasses import dataclass, replace
from enum import Enum
from itertools import pairwise

import numpy as np

from tinemark.onsets.cycle_map import CycleMap, Floats
from tinemark.onsets.many_cycles import Cycle, condensed, eigenvalues, least_period, newton, tangent
from tinemark.onsets.results import Step

FIRST_STEP = 0.02
LARGEST_STEP = 0.08
SMALLEST_STEP = 1e-7
MOST_POINTS = 400
LARGEST_TURN = 0.3
"""A critical multiplier may move by this much a step (of itself or of 1, whichever is larger)."""


JOINED = 1e-7
"""A doubled cycle whose opposite points are closer than this has joined the branch it split from."""
TOGETHER = 1e-4
"""Two flips closer than this along a branch count as one place, as where a symmetry makes them meet."""
MOST_NARROWING = 12
AFTER_EVENT = 12
"""Points for which a branch is followed beyond its first crossing."""
ON_THE_CIRCLE = 1e-8
FARTHEST = 20.0
"""A branch is not followed farther than this many scaled lengths from where it began."""
MOST_UNSTABLE = 1e7


class Crossing(Enum):
    """What happens between two neighbouring points of a branch."""

    FLIP = "flip"
    FOLD = "fold"
    NEIMARK_SACKER = "Neimark-Sacker"
    BRANCHES = "crossing of branches"
    BORDER = "border collision"


@dataclass(frozen=True)
class BranchPoint:
    """A cycle on a branch, with its multipliers and the branch's tangent there (points, parameter)."""

    cycle: Cycle
    multipliers: tuple[complex, ...]
    moves: Floats
    move_r: float

    @property
    def flip_test(self) -> float:
        """Product of (1 + multiplier): changes sign where one of them passes -1."""
        return float(np.real(np.prod([1 + value for value in self.multipliers])))

    @property
    def fold_test(self) -> float:
        """Product of (multiplier - 1): changes sign where one of them passes 1."""
        return float(np.real(np.prod([value - 1 for value in self.multipliers])))

    @property
    def circle_test(self) -> float:
        """`circle_test` of the multipliers here."""
        return circle_test(self.multipliers)


def circle_test(values: Sequence[complex]) -> float:
    """Product of (multiplier i times multiplier j - 1): zero where a pair has product 1."""
    pairs = [values[i] * values[j] - 1 for i in range(len(values)) for j in range(i)]
    return float(np.real(np.prod(pairs)))


def below_minus_one(values: Sequence[complex]) -> int:
    """How many real multipliers lie below -1."""
    return sum(value.real < -1 and abs(value.imag) < 1e-12 for value in values)


@dataclass(frozen=True)
class Event:
    """A crossing, bracketed by the two branch points next to it.

    Attributes
    ----------
    joined_from
        Where a branch of doubled cycles joins the one it split from, the two points beside the flip are of
        that other branch; this is the last point of the doubled one. None otherwise.
    """

    kind: Crossing
    before: BranchPoint
    after: BranchPoint
    joined_from: BranchPoint | None = None
    near: Cycle | None = None

    @property
    def share(self) -> float:
        """Where between the two the crossing lies, from 0 to 1, by the secant of its test."""
        a, b = _test(self.kind, self.before), _test(self.kind, self.after)
        return a / (a - b) if a != b else 0.5

    @property
    def rough(self) -> Cycle:
        """A cycle near the crossing."""
        return self.near or between(self.before.cycle, self.after.cycle, self.share)


@dataclass(frozen=True)
class Window:
    """Where a branch is followed.

    Attributes
    ----------
    low, high
        Ends of the parameter interval.
    width
        Length of the parameter that counts as 1.
    scales
        Length of each state that counts as 1.
    """

    low: float
    high: float
    width: float
    scales: Floats


def between(a: Cycle, b: Cycle, share: float) -> Cycle:
    """Linear interpolation of two neighbouring cycles of a branch."""
    return Cycle(a.points + share * (b.points - a.points), a.r + share * (b.r - a.r))


def branch_point(
    float_map: CycleMap, cycle: Cycle, window: Window, before: BranchPoint | None = None
) -> BranchPoint | None:
    """A cycle with its multipliers and tangent; the tangent goes on from the point before."""
    parts = condensed(float_map, cycle.points, cycle.r)
    values = eigenvalues(parts.monodromy)
    if not values:
        return None
    moves, move_r = tangent(parts, window.scales, window.width)
    if before is not None and _cosine(before.moves, before.move_r, moves, move_r, window) < 0:
        moves, move_r = -moves, -move_r
    return BranchPoint(cycle, tuple(values), moves, move_r)


def follow(
    float_map: CycleMap,
    start: BranchPoint,
    window: Window,
    direction: int,
    *,
    most: int = MOST_POINTS,
    first_step: float = FIRST_STEP,
) -> Generator[Step, None, tuple[list[BranchPoint], list[Event]]]:
    """Follow a branch until it leaves the window, closes, or cannot be followed.

    Parameters
    ----------
    direction
        1: first towards larger parameter values; -1: towards smaller.
    most
        Branch points at most.
    """
    sign = direction if start.move_r >= 0 else -direction
    here = BranchPoint(start.cycle, start.multipliers, sign * start.moves, sign * start.move_r)
    trace, events = [here], []
    step, seen = first_step, 0
    while len(trace) < most:
        following = _advance(float_map, here, window, step)
        if following is None or not _close_enough(here, following, window, step):
            step /= 2
            if step < SMALLEST_STEP:
                break
            continue
        if least_period(following.cycle.points, window.scales, JOINED) < here.cycle.period:
            events += _joins(float_map, here, following, window)
            break
        events += _events(here, following)
        trace.append(following)
        events += _left_at_crossing(trace[-3:])
        here = following
        yield Step(f"following the branch of period {here.cycle.period}")
        seen += bool(events)
        if (
            seen > AFTER_EVENT
            or not window.low <= here.cycle.r <= window.high
            or _is_lost(here, start, window)
        ):
            break
        step = min(step * 1.6, LARGEST_STEP)
    return trace, events


def _is_lost(here: BranchPoint, start: BranchPoint, window: Window) -> bool:
    """Whether a branch runs off to infinity or becomes too unstable to be followed in doubles."""
    away = np.abs(here.cycle.points - start.cycle.points) / window.scales
    return bool(np.max(away) > FARTHEST) or max(map(abs, here.multipliers)) > MOST_UNSTABLE


def _advance(float_map: CycleMap, here: BranchPoint, window: Window, step: float) -> BranchPoint | None:
    guess = Cycle(here.cycle.points + step * here.moves, here.cycle.r + step * here.move_r)
    along = here.moves / window.scales**2 / len(here.moves)
    along_r = here.move_r / window.width**2
    target = float(np.sum(along * guess.points)) + along_r * guess.r
    cycle = newton(float_map, guess, window.scales, along=along, along_r=along_r, target=target)
    if cycle is None:
        return None
    missed = float(np.max(np.abs(cycle.points - guess.points) / window.scales))
    if missed > step or abs(cycle.r - guess.r) > step * window.width:
        return None
    return branch_point(float_map, cycle, window, here)


def _close_enough(here: BranchPoint, following: BranchPoint, window: Window, step: float) -> bool:
    if step < 1e-5:
        return True
    if (
        step > TOGETHER
        and abs(below_minus_one(here.multipliers) - below_minus_one(following.multipliers)) > 1
    ):
        return False  # two passed -1 at once, so that the test's sign shows neither
    if _cosine(here.moves, here.move_r, following.moves, following.move_r, window) < 0.7:
        return False
    for before, after in ((here, following), (following, here)):
        for value in before.multipliers:
            if abs(abs(value) - 1) < 0.5:
                nearest = min(abs(value - other) for other in after.multipliers)
                if nearest > LARGEST_TURN:
                    return False
    return True


def _events(a: BranchPoint, b: BranchPoint) -> list[Event]:
    found = []
    if _changes_sign(a.move_r, b.move_r):
        found.append(Event(Crossing.FOLD, a, b))
    elif _changes_sign(a.fold_test, b.fold_test):
        # A multiplier passes 1 while the branch goes straight on: another one crosses it there.
        found.append(Event(Crossing.BRANCHES, a, b))
    if _changes_sign(a.flip_test, b.flip_test):
        found.append(Event(Crossing.FLIP, a, b))
    if len(a.multipliers) > 1 and _changes_sign(a.circle_test, b.circle_test) and _pair_crosses(a, b):
        found.append(Event(Crossing.NEIMARK_SACKER, a, b))
    return found


def _left_at_crossing(last: list[BranchPoint]) -> list[Event]:
    """A crossing of branches at which the branch was left for the other one.

    The multiplier then seems to turn back just before it reaches 1.
    """
    if len(last) < 3:
        return []
    before, there, after = (point.fold_test for point in last)
    sign = 1 if before > 0 else -1
    if not (sign * before > sign * there >= 0 and sign * after > sign * there):
        return []
    steps = [
        np.hypot(np.max(np.abs(b.cycle.points - a.cycle.points)), b.cycle.r - a.cycle.r)
        for a, b in pairwise(last)
    ]
    if there / (before - there) * steps[0] > 1.5 * steps[1]:
        return []
    return [Event(Crossing.BRANCHES, last[0], last[2], near=last[1].cycle)]


def _changes_sign(before: float, after: float) -> bool:
    # Zero counts as positive: a branch that has a place exactly at an onset shows it on one side of it, once.
    return (before >= 0) != (after >= 0)


def narrowed(float_map: CycleMap, event: Event, window: Window, bracket: float) -> Event:
    """A flip with its bracket in the parameter narrowed, so that a neighbouring flip is not taken for it."""
    low, high = event.before, event.after
    for place in range(MOST_NARROWING):
        if abs(high.cycle.r - low.cycle.r) <= bracket:
            break
        share = low.flip_test / (low.flip_test - high.flip_test)
        # Every third time the middle: the secant alone can stick to one end.
        share = 0.5 if place % 3 == 2 else min(max(share, 0.02), 0.98)
        cycle = newton(float_map, between(low.cycle, high.cycle, share), window.scales)
        middle = None if cycle is None else branch_point(float_map, cycle, window)
        if middle is None or middle.flip_test == 0:
            break
        if middle.flip_test * low.flip_test > 0:
            low = middle
        else:
            high = middle
    return replace(event, before=low, after=high)


def _joins(float_map: CycleMap, a: BranchPoint, b: BranchPoint, window: Window) -> list[Event]:
    """The flip at which a branch of doubled cycles was left for the one it split from."""
    half = a.cycle.period // 2
    if a.cycle.period % 2 or least_period(b.cycle.points, window.scales, JOINED) > half:
        return []
    ends = []
    for cycle in (a.cycle, b.cycle):
        mean = Cycle((cycle.points[:half] + cycle.points[half:]) / 2, cycle.r)
        parent = newton(float_map, mean, window.scales)
        point = None if parent is None else branch_point(float_map, parent, window)
        if point is None:
            return []
        ends.append(point)
    return [replace(event, joined_from=a) for event in _events(*ends) if event.kind is Crossing.FLIP]


def _pair_crosses(a: BranchPoint, b: BranchPoint) -> bool:
    # A real pair with product 1 is a neutral saddle, where nothing splits. Where the map preserves areas
    # pairs stay on the circle, inside and outside by rounding alone.
    def sizes(point: BranchPoint) -> list[float]:
        pairs = sorted(abs(value) for value in point.multipliers if value.imag > 1e-9)
        return [0.0 if abs(size - 1) < ON_THE_CIRCLE else size - 1 for size in pairs]

    before, after = sizes(a), sizes(b)
    # A place exactly at the onset lies on neither side; which stretch shows it, `_changes_sign` decides.
    return len(before) == len(after) and any(
        x * y < 0 or (x == 0) != (y == 0) for x, y in zip(before, after, strict=True)
    )


def _test(kind: Crossing, point: BranchPoint) -> float:
    if kind is Crossing.FLIP:
        return point.flip_test
    if kind is Crossing.BRANCHES:
        return point.fold_test
    return point.move_r if kind is Crossing.FOLD else point.circle_test


def _cosine(a: Floats, a_r: float, b: Floats, b_r: float, window: Window) -> float:
    return float(np.sum(a * b / window.scales**2) / len(a) + a_r * b_r / window.width**2)
