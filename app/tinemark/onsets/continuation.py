"""Cycles followed along a parameter and around folds, whatever the number of states.

Pseudo-arclength continuation (Keller 1977) with all points of the cycle as unknowns. The step adapts to
what is seen: a polyline through the places found stays within a fraction of a pixel of the curve. On the
way the multipliers are watched for folds, flips, Neimark-Sacker points and places where branches cross.
"""

from __future__ import annotations

from collections.abc import Callable, Generator
from dataclasses import dataclass

import numpy as np

from tinemark.onsets.branch_places import (
    ACROSS,
    MOST_UNSTABLE,
    UP,
    Event,
    Family,
    Floats,
    Passed,
    Place,
    Screen,
    Trace,
    circle_test,
    flip_test,
    fold_test,
    least_period,
)
from tinemark.onsets.results import Step

SMOOTH = 0.35
"""Pixels by which a polyline may miss the curve."""
SMALLEST_STEP = 1e-8
LEAST_COSINE = 0.8
"""Of the branch's directions at two neighbouring places: a fold must not be leapt over."""
LARGEST_TURN = 0.25
"""A critical multiplier may move by this much a step."""
MOST_PLACES = 1500
JOINED = 1e-7
"""A doubled cycle whose opposite points are closer than this has joined the branch it split from."""
ON_THE_CIRCLE = 1e-8
UPRIGHT = 1e-6
"""A branch whose parameter changes by less than this share of a step is taken to stand still in it."""


@dataclass(frozen=True)
class Pace:
    """How a branch is followed.

    Attributes
    ----------
    first, largest
        Steps, in scaled length.
    smooth
        Whether it is to be drawn: steps then keep to the curve within a fraction of a pixel.
    farthest
        The branch is left alone this many scaled lengths away from where it began.
    """

    first: float
    largest: float
    smooth: bool
    farthest: float = np.inf


DRAWN = Pace(2e-3, 0.04, smooth=True, farthest=12.0)
BRISK = Pace(0.05, 0.25, smooth=False)


def follow(
    family: Family,
    start: Place,
    direction: int,
    screen: Screen,
    *,
    pace: Pace = DRAWN,
    most: int = MOST_PLACES,
    stop: Callable[[Place], bool] | None = None,
) -> Generator[Step, None, Trace]:
    """Follow a branch until it leaves the view, closes, joins another, or cannot be followed.

    Parameters
    ----------
    direction
        1 along the start's tangent, -1 against it.
    pace
        Lengths of steps.
    most
        Places at most.
    stop
        The branch is left alone past a place of which this is true.

    Returns
    -------
    Trace
        Its first place is the start. `ended` is "left", "closed", "joined", "stopped", "lost" or "long".
    """
    here = start if direction > 0 else start.turned()
    trace = Trace([here], ended="long")
    seen = [shown := screen.pixels(family, here)]
    step = pace.first
    text = f"following the branch of period {start.period}"
    while len(trace.places) < most:
        following = _advance(family, here, step)
        missed = 0.0
        if following is not None and pace.smooth:
            shown = screen.pixels(family, following)
            missed = _sagitta(seen, shown)
        if following is None or not _acceptable(family, here, following, missed, step):
            step *= 0.45
            if step < SMALLEST_STEP:
                trace.ended = "lost"
                break
            continue
        if _has_joined(family, here, following):
            _end_at_joint(family, trace, here)
            break
        _append(family, trace, here, following, step)
        seen = [seen[-1], shown]
        here = following
        if len(trace.places) % 2 == 0:
            yield Step(text)
        ended = _ended(family, start, trace, here, screen, pace, step, stop)
        if ended:
            trace.ended = ended
            break
        step = min(step * min(1.5, max(0.6, 0.8 * np.sqrt(SMOOTH / max(missed, 1e-9)))), pace.largest)
    return trace


def _ended(
    family: Family,
    start: Place,
    trace: Trace,
    here: Place,
    screen: Screen,
    pace: Pace,
    step: float,
    stop: Callable[[Place], bool] | None,
) -> str:
    if not screen.holds(here.r):
        return "left"
    away = float(np.max(np.abs(here.points - start.points) / family.scales))
    if away > pace.farthest or max(map(abs, here.multipliers)) > MOST_UNSTABLE:
        return "lost"
    if stop is not None and stop(here):
        return "stopped"
    if len(trace.places) > 12 and away < step and abs(here.r - start.r) < step * family.width:
        first = trace.places[0]
        if _cosine(family, here, first) > 0.9:
            ahead = float(np.sum((first.points - here.points) * here.moves / family.scales**2)) / here.period
            ahead += (first.r - here.r) * here.move_r / family.width**2
            if ahead > 0:
                _append(family, trace, here, first, ahead)
            else:
                trace.places.append(first)
            return "closed"
    return ""


def _append(family: Family, trace: Trace, here: Place, following: Place, step: float) -> None:
    """Add the next place of a branch, and before it those of what lies between."""
    for passed in _passed(family, here, following):
        trace.places.append(_located(family, here, following, step, passed))
        trace.events.append(Event(passed, len(trace.places) - 1))
    trace.places.append(following)


def _advance(family: Family, here: Place, step: float) -> Place | None:
    points, r = here.points + step * here.moves, here.r + step * here.move_r
    following = family.corrected(points, r, (here.moves, here.move_r))
    if following is None:
        return None
    missed = float(np.max(np.abs(following.points - points) / family.scales))
    if missed > step or abs(following.r - r) > step * family.width:
        return None
    return following if _cosine(family, here, following) >= 0 else following.turned()


def _cosine(family: Family, a: Place, b: Place) -> float:
    along = float(np.sum(a.moves * b.moves / family.scales**2)) / len(a.moves)
    return along + a.move_r * b.move_r / family.width**2


def _sagitta(seen: list[Floats], shown: Floats) -> float:
    """How far, in pixels, a curve strays from the chord to its next place, judged by the last turn."""
    chord = shown - seen[-1]
    length = np.hypot(chord[:, 0], chord[:, 1])
    margin = 0.2
    inside = (
        (shown[:, 0] > -margin * ACROSS)
        & (shown[:, 0] < (1 + margin) * ACROSS)
        & (shown[:, 1] > -margin * UP)
        & (shown[:, 1] < (1 + margin) * UP)
    )
    if not inside.any():
        return 0.0
    if len(seen) < 2:
        return float(np.max(length[inside])) / 8
    before = seen[1] - seen[0]
    cross = np.abs(before[:, 0] * chord[:, 1] - before[:, 1] * chord[:, 0])
    ahead = before[:, 0] * chord[:, 0] + before[:, 1] * chord[:, 1]
    # The chord's turn over its length is the curvature, and that times the length squared over 8 the miss.
    angle = np.arctan2(cross, ahead)
    reach = np.hypot(before[:, 0], before[:, 1]) + length
    with np.errstate(invalid="ignore", divide="ignore"):
        missed = np.where(reach > 0, length**2 * angle / (4 * reach), 0.0)
    return float(np.max(missed[inside]))


def _acceptable(family: Family, here: Place, following: Place, missed: float, step: float) -> bool:
    if step < 1e-6:
        return True
    if _cosine(family, here, following) < LEAST_COSINE:
        return False
    if missed > 2.5 * SMOOTH and step > 1e-5:
        return False
    for before, after in ((here, following), (following, here)):
        for value in before.multipliers:
            turn, other = min((abs(value - other), abs(other)) for other in after.multipliers)
            near = min(abs(abs(value) - 1), abs(other - 1)) < 0.5
            # Far from the circle it may move by a share of itself, so that no crossing is leapt over.
            if turn > (LARGEST_TURN if near else max(LARGEST_TURN, 0.5 * min(abs(value), other))):
                return False
    return True


def _passed(family: Family, a: Place, b: Place) -> list[Passed]:
    """What lies between two neighbouring places."""
    found = []
    if a.move_r * b.move_r < 0:
        # A branch that stands upright, as where straight pieces make every cycle neutral, has no folds.
        if max(abs(a.move_r), abs(b.move_r)) > UPRIGHT * family.width:
            found.append(Passed.FOLD)
    elif fold_test(a.multipliers) * fold_test(b.multipliers) < 0:
        found.append(Passed.CROSSING)
    if flip_test(a.multipliers) * flip_test(b.multipliers) < 0:
        found.append(Passed.FLIP)
    many = len(a.multipliers) > 1
    if many and circle_test(a.multipliers) * circle_test(b.multipliers) < 0 and _pair_crosses(a, b):
        found.append(Passed.NEIMARK_SACKER)
    return found


def _pair_crosses(a: Place, b: Place) -> bool:
    # A real pair with product 1 is a neutral saddle, where nothing splits. Where the map preserves areas
    # pairs stay on the circle, inside and outside by rounding alone.
    def sizes(place: Place) -> list[float]:
        pairs = sorted(abs(value) for value in place.multipliers if value.imag > 1e-9)
        return [0.0 if abs(size - 1) < ON_THE_CIRCLE else size - 1 for size in pairs]

    before, after = sizes(a), sizes(b)
    return len(before) == len(after) and any(x * y < 0 for x, y in zip(before, after, strict=True))


def _test(passed: Passed, place: Place) -> float:
    if passed is Passed.FOLD:
        return place.move_r
    if passed is Passed.FLIP:
        return flip_test(place.multipliers)
    if passed is Passed.CROSSING:
        return fold_test(place.multipliers)
    return circle_test(place.multipliers)


def _located(family: Family, a: Place, b: Place, step: float, passed: Passed) -> Place:
    """The place between two where a test is zero: the secant method with safeguard along the arclength."""
    low, high, at_low, at_high = 0.0, step, _test(passed, a), _test(passed, b)
    best, least = (a, abs(at_low)) if abs(at_low) < abs(at_high) else (b, abs(at_high))
    for _ in range(12):
        length = low + (high - low) * at_low / (at_low - at_high) if at_low != at_high else (low + high) / 2
        length = min(max(length, low + 0.02 * (high - low)), high - 0.02 * (high - low))
        # Where branches cross the equations are singular at the very place, and regular beside it.
        tries = (_advance(family, a, length + nudge * (high - low)) for nudge in (0.0, 1e-6, -1e-6))
        middle = next((place for place in tries if place is not None), None)
        if middle is None:
            break
        value = _test(passed, middle)
        if abs(value) < least:
            best, least = middle, abs(value)
        # The end that stays is weighted down (Illinois rule), so that it cannot stick.
        if value * at_high <= 0:
            low, at_low, at_high = length, value, at_high / 2
        else:
            high, at_high, at_low = length, value, at_low / 2
        if least < 1e-12 or high - low < 1e-12:
            break
    return best


def _has_joined(family: Family, here: Place, following: Place) -> bool:
    """Whether a doubled cycle has passed through the one it split from, or has fallen onto it."""
    period = here.period
    if least_period(following.points, family.scales, JOINED) < period:
        return True
    if period % 2:
        return False
    half = period // 2
    gaps = [place.points[:half] - place.points[half:] for place in (here, following)]
    return float(np.sum(gaps[0] * gaps[1] / family.scales**2)) < 0


def _end_at_joint(family: Family, trace: Trace, here: Place) -> None:
    """End a branch of doubled cycles at the flip it split off at."""
    trace.ended = "lost"
    if here.period % 2:
        return
    half = here.period // 2
    r = here.r
    if len(trace.places) > 1:
        # The parameter goes with the square of the amplitude (Kuznetsov 4.5): two places give the joint.
        before = trace.places[-2]
        a, b = (float(np.sum((p.points[:half] - p.points[half:]) ** 2)) for p in (before, here))
        if a > b:
            r = (here.r * a - before.r * b) / (a - b)
    mean = (here.points[:half] + here.points[half:]) / 2
    parent = _flip_near(family, mean, here.r, r)
    if parent is None or float(np.max(np.abs(parent.points - mean) / family.scales)) > 0.05:
        return
    trace.ended, trace.parent = "joined", parent
    twice = np.concatenate((parent.points, parent.points))
    doubled = tuple(value * value for value in parent.multipliers)
    trace.places.append(Place(twice, parent.r, doubled, here.moves, here.move_r))


def _flip_near(family: Family, points: Floats, r: float, guess: float) -> Place | None:
    """The cycle whose multiplier passes -1 near two parameter values, by the secant method."""
    here, there = family.corrected(points, r), family.corrected(points, guess)
    for _ in range(8):
        if here is None or there is None:
            return there or here
        a, b = flip_test(here.multipliers), flip_test(there.multipliers)
        if a == b or abs(b) < 1e-13:
            break
        following = there.r - b * (there.r - here.r) / (b - a)
        here, there = there, family.corrected(there.points, following)
    return there
