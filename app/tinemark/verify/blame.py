"""Which part of a claim is wrong, where the test on its box fails.

A certificate says the same thing several times over: the box and the printed value both tell where the onset
is, and the formula tells whether one is there. What agrees with the two others is not to blame. None of this
proves anything; it only names what was refused.
"""

from __future__ import annotations

from fractions import Fraction
from typing import NoReturn

from tinemark.verify import intervals as iv
from tinemark.verify.claims import Numbers, Paper, Part, Refused, Undecided
from tinemark.verify.cycles import OneState, at_point, middle_orbit, on_box
from tinemark.verify.intervals import ONE
from tinemark.verify.newton import inverse, times
from tinemark.verify.one_state import LONG, TARGETS

STEPS = 8
CLOSE = Fraction(1, 10**5)
FURTHER = 4
"""So many times the claimed period is looked along for the true one, up to `MOST_STEPS` steps."""
MOST_STEPS = 4096
NEAR_SLOPE = Fraction(1, 100)


def find(
    one: OneState, paper: Paper, numbers: Numbers, bits: int, start: Fraction | None, reason: str
) -> NoReturn:
    """Raise `Refused` with the part to blame."""
    x = numbers.states[0][0] if start is None else start
    reached = None
    if paper.period < LONG:
        try:
            _other_period_or_kind(one, paper, numbers, bits, x)
            reached = _solved(one, paper, numbers, bits, x)
        except Undecided:
            reached = None
    middle, half = numbers.parameter
    room = 100 * (numbers.upper - numbers.lower)
    if reached is not None and numbers.lower - room <= reached <= numbers.upper + room:
        raise Refused(Part.BOX, f"{reason}; value and formula agree with each other")
    if numbers.lower - room - half <= middle <= numbers.upper + room + half:
        raise Refused(
            Part.FORMULA, f"the formulas have no such onset where value and box say it is ({reason})"
        )
    raise Refused(Part.BOX, f"{reason}; it is not where the value is")


def _other_period_or_kind(one: OneState, paper: Paper, numbers: Numbers, bits: int, x: Fraction) -> None:
    period, target = paper.period, TARGETS[paper.kind]
    most = max(period, min(FURTHER * period, MOST_STEPS))
    start = iv.middle(iv.of_fraction(x, bits), bits)
    scale = max(abs(x), Fraction(1, 10**6)) * CLOSE
    half_slope: Fraction | None = None
    for steps, point, along in middle_orbit(one, x, numbers.value, most, bits):
        if not (steps > period or period % steps == 0):
            continue
        if max(abs(end) for end in iv.ends(iv.sub(point, start, bits))) > scale:
            continue
        slope = iv.ends(along)[0]
        # Near a deep flip the orbit of half the period is close as well: the slope tells.
        if steps != period:
            if abs(slope - target) < NEAR_SLOPE:
                raise Refused(Part.PERIOD, f"the cycle there has period {steps}, not {period}")
            if 2 * steps == period:
                half_slope = slope
            continue
        for kind, other in TARGETS.items():
            if kind == paper.kind or abs(slope - other) >= NEAR_SLOPE:
                continue
            if kind == "fold" and half_slope is not None and abs(half_slope + 1) < NEAR_SLOPE:
                # A flip, seen over twice its period, has the slope of a fold.
                raise Refused(Part.PERIOD, f"the cycle there has period {period // 2}, not {period}")
            raise Refused(Part.KIND, f"the onset there is a {kind}, not a {paper.kind}")
        return


def _solved(one: OneState, paper: Paper, numbers: Numbers, bits: int, x: Fraction) -> Fraction | None:
    """Where Newton's method goes from the printed value; None where it does not settle."""
    target = iv.of_fraction(Fraction(TARGETS[paper.kind]), bits)
    place = [iv.middle(iv.of_fraction(value, bits), bits) for value in (x, numbers.value)]
    last = None
    for _ in range(STEPS):
        end = on_box(one, place[0], place[1], paper.period, bits)
        there, slope = at_point(one, place[0], place[1], paper.period, bits)
        slopes = [[iv.sub(end.u, ONE, bits), end.v], [end.w, end.z]]
        residual = [iv.sub(there, place[0], bits), iv.sub(slope, target, bits)]
        move = times(inverse(slopes, bits), residual, bits)
        place = [iv.middle(iv.sub(old, by, bits), bits) for old, by in zip(place, move, strict=True)]
        last = iv.ends(move[1])
        if max(abs(last[0]), abs(last[1])) < (numbers.upper - numbers.lower) / 4:
            return iv.ends(place[1])[0]
    return None
