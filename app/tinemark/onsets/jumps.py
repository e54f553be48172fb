"""What a subcritical split does: a jump, where orbits go, and the fold that bounds the hysteresis.

The unstable branch that leaves a subcritical flip or pitchfork goes back over the stable one. It is
followed by pseudo-arclength continuation (Keller, 1977) to the fold where it turns.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Generator
from dataclasses import dataclass, replace
from fractions import Fraction

from tinemark.onsets.branches import cycle_with_multiplier, least_period
from tinemark.onsets.float_map import FloatMap, float_map
from tinemark.onsets.one_map import OneMap
from tinemark.onsets.onset_words import short_number
from tinemark.onsets.polish import Lost, Rough, Settled
from tinemark.onsets.results import Criticality, Kind, Onset, Status, Step
from tinemark.onsets.settling import settle_any

FIRST_OFFSETS = (1e-2, 3e-3, 1e-3, 3e-2)
"""Shares of the state's scale at which the leaving branch is met, tried one after the other."""
MOST_STEPS = 1500
LARGEST_STEP, SMALLEST_STEP = 0.05, 1e-6
FARTHEST = 4.0
"""Parameter reaches within which the branch is followed."""
PAST = 1e-3
"""Share of the reach past the split at which orbits are let go to see where they end."""
LONGEST_SEEN = 64


@dataclass(frozen=True)
class Jump:
    """A subcritical onset with what follows in words, and the fold that bounds its hysteresis if found."""

    onset: Onset
    fold: Onset | None


@dataclass(frozen=True)
class _Place:
    x: float
    r: float


def jump_of(one: OneMap, settled: Settled, digits: int, reach: Fraction) -> Generator[Step, None, Jump]:
    """Say what a subcritical flip or pitchfork does; any other onset is given back as it is.

    Parameters
    ----------
    reach
        A length of the parameter that counts as near, such as a view's width.
    """
    onset = settled.onset
    if onset.criticality is not Criticality.SUBCRITICAL:
        return Jump(onset, None)
    yield Step("following the unstable branch of the jump")
    cycles = float_map(one)
    at = _Place(float(settled.x), float(settled.r))
    far = max(float(reach), 0.05 * abs(at.r))
    turn = _turning_point(cycles, onset, at, far)
    fold: Onset | None = None
    if turn is not None:
        rough = Rough(Kind.FOLD, onset.period_after, Fraction(turn.x), Fraction(turn.r))
        try:
            fold = (yield from settle_any(one, rough, digits)).onset
        except Lost:
            fold = None
    words = _words(cycles, onset, at, far, fold)
    consequence = f"{onset.consequence}; {words}" if onset.consequence else words
    return Jump(replace(onset, consequence=consequence), fold)


def _words(cycles: FloatMap, onset: Onset, at: _Place, far: float, fold: Onset | None) -> str:
    name, period = onset.parameter, onset.period_before
    past = _past(cycles, onset, at)
    words = (
        f"the change is a jump: {'above' if past > 0 else 'below'} {name} = "
        f"{short_number(onset.value_fraction)} the cycle of period {period} is unstable and nothing near "
        f"it is stable{_landing(cycles, at, past * PAST * far)}"
    )
    unstable = f"the unstable cycle of period {onset.period_after} that meets it there"
    if fold is None:
        return f"{words}; where {unstable} ends was not found"
    proved = "proved" if fold.status is Status.PROVED else "estimated"
    value = short_number(fold.value_fraction)
    return (
        f"{words}; {unstable} turns back at the fold {name} = {value} ({proved}), so between there and the "
        f"split two behaviours exist side by side: hysteresis"
    )


def _past(cycles: FloatMap, onset: Onset, at: _Place) -> int:
    """The parameter's direction in which the cycle loses its stability."""
    _, v, w, z = cycles.slopes(at.x, at.r, onset.period_before)
    # At a flip the multiplier falls through -1; at a pitchfork it rises through +1, where dx/dr drops out of
    # the cycle's own branch: a fixed one has v = 0, and of a mirrored one the half-way map is a flip.
    if onset.kind is Kind.FLIP:
        return -1 if z + w * v / 2 > 0 else 1
    half = onset.period_before // 2
    if half and onset.period_before % 2 == 0:
        _, v, w, z = cycles.slopes(at.x, at.r, half)
        return 1 if z - w * v / 2 > 0 else -1
    return 1 if z > 0 else -1


def _landing(cycles: FloatMap, at: _Place, shift: float) -> str:
    x, r = at.x + 1e-3 * cycles.scale, at.r + shift
    ends, returns = cycles.settle([x], [r], 20_000, 4 * LONGEST_SEEN)
    if returns[0][0] < 0 or not math.isfinite(ends[0]):
        return "; orbits let go there escape"
    period = next((int(count) for count in returns[0] if count > 0), 0)
    if period:
        return f"; orbits let go there are seen to settle on period {period}"
    return "; orbits let go there wander without a period"


def _turning_point(cycles: FloatMap, onset: Onset, at: _Place, far: float) -> _Place | None:
    period = onset.period_after
    for share in FIRST_OFFSETS:
        for side in (1, -1):
            begin = _branch_beside(cycles, onset, at, side * share * cycles.scale, far)
            if begin is None:
                continue
            turn = _follow_to_turn(cycles, period, at, begin, far)
            if turn is not None:
                return turn
    return None


def _branch_beside(cycles: FloatMap, onset: Onset, at: _Place, offset: float, far: float) -> _Place | None:
    """The leaving branch where its point is a given offset away, the cycle's own branch divided out."""
    period, x = onset.period_after, at.x + offset
    own = _own_branch(cycles, onset, at)

    def residue(r: float) -> float:
        points = cycles.points(x, r, period + 1)
        return float(points[period] - x) / own(x, r)

    r, step = at.r, 1e-4 * far
    try:
        before, value = residue(r - step), residue(r)
        for _ in range(40):
            if value == before:
                return None
            shift = -value * step / (value - before)
            shift = math.copysign(min(abs(shift), far / 4), shift)
            r, step, before = r + shift, shift, value
            value = residue(r)
            if not math.isfinite(value) or abs(r - at.r) > far:
                return None
            if abs(shift) < 1e-13 * max(abs(r), far):
                break
    except ZeroDivisionError:
        return None
    if least_period(cycles, x, r, period) != period or not cycles.slopes(x, r, period)[0] > 1:
        return None
    return _Place(x, r)


def _own_branch(cycles: FloatMap, onset: Onset, at: _Place) -> Callable[[float, float], float]:
    """A function that is zero on the branch that splits, and not on the one that leaves it."""
    before = onset.period_before
    if onset.kind is Kind.FLIP:
        return lambda x, r: float(cycles.points(x, r, before + 1)[before]) - x
    if before % 2 == 0:
        half = before // 2
        total = at.x + float(cycles.points(at.x, at.r, half + 1)[half])
        return lambda x, r: total - float(cycles.points(x, r, half + 1)[half]) - x
    return lambda x, _: x - at.x


def _follow_to_turn(cycles: FloatMap, period: int, start: _Place, begin: _Place, far: float) -> _Place | None:
    """Follow a branch away from where it began until its multiplier, at first above 1, comes back to 1."""
    scale = cycles.scale
    here, step = begin, 1e-2
    away = ((begin.x - start.x) / scale, (begin.r - start.r) / far)
    for _ in range(MOST_STEPS):
        direction = _tangent(cycles, period, here, far)
        if direction is None:
            return None
        if direction[0] * away[0] + direction[1] * away[1] < 0:
            direction = (-direction[0], -direction[1])
        following = None
        while following is None:
            guess = _Place(here.x + step * direction[0] * scale, here.r + step * direction[1] * far)
            following = _corrected(cycles, period, guess, direction, far)
            ahead = None if following is None else _tangent(cycles, period, following, far)
            if ahead is None or abs(ahead[0] * direction[0] + ahead[1] * direction[1]) < 0.97:
                following, step = None, step / 2
                if step < SMALLEST_STEP:
                    return None
        if abs(following.r - start.r) > FARTHEST * far or abs(following.x - start.x) > 20 * scale:
            return None
        if cycles.slopes(following.x, following.r, period)[0] < 1:
            found = cycle_with_multiplier(cycles, following.x, following.r, period, 1.0)
            if found is None or least_period(cycles, found[0], found[1], period) != period:
                return None
            return _Place(float(found[0]), float(found[1]))
        away, here, step = direction, following, min(1.5 * step, LARGEST_STEP)
    return None


def _tangent(cycles: FloatMap, period: int, at: _Place, far: float) -> tuple[float, float] | None:
    u, v, _, _ = cycles.slopes(at.x, at.r, period)
    across, along = (u - 1) * cycles.scale, v * far
    size = math.hypot(across, along)
    if size == 0 or not math.isfinite(size):
        return None
    return -along / size, across / size


def _corrected(
    cycles: FloatMap, period: int, guess: _Place, direction: tuple[float, float], far: float
) -> _Place | None:
    """Newton's method for the branch, across a direction."""
    x, r = guess.x, guess.r
    for _ in range(12):
        u, v, _, _ = cycles.slopes(x, r, period)
        gap = float(cycles.points(x, r, period + 1)[period]) - x
        a, b = (u - 1) * cycles.scale, v * far
        determinant = a * direction[1] - b * direction[0]
        if determinant == 0 or not math.isfinite(determinant) or not math.isfinite(gap):
            return None
        shift = (-gap * direction[1] / determinant, gap * direction[0] / determinant)
        x, r = x + shift[0] * cycles.scale, r + shift[1] * far
        if math.hypot(*shift) < 1e-11:
            return _Place(x, r)
    return None
