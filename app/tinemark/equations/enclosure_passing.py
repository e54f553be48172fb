"""When a box on its way round passes the section: enclosed by interval Newton, and the first time it does."""

from __future__ import annotations

import math
from collections.abc import Sequence
from typing import Any

from flint import arb

from tinemark.equations.enclosure_bound import Bound
from tinemark.equations.enclosure_run import CLOCK_UNIT, Run
from tinemark.equations.enclosure_section import Grazes, Local, Side, courses, local_at, passage
from tinemark.equations.enclosure_steps import image_over, turn_over
from tinemark.equations.series import value_at, working
from tinemark.equations.taylor_arc import LOW_BITS, Arc

RETAKES = 8
NEAR = 2.0**-10
"""A start that reaches the section within this part of the time a bound holds for is taken to lie on it."""


def _look(run: Run, arc: Arc, bound: Bound, spread: Sequence[Any], start: float, stop: float) -> Local:
    """The section and the rates on a stretch of a step, for the whole box."""
    assert run.section is not None
    with working(LOW_BITS):
        middle, half = (start + stop) / 2, (stop - start) / 2
        # A little wider than the stretch, for the rounding of its ends to doubles.
        time = arb(middle, half * (1 + 2.0**-20))
        return local_at(run.section, _states_over(run, arc, bound, spread, time), run.r)


def _states_over(run: Run, arc: Arc, bound: Bound, spread: Sequence[Any], time: Any) -> list[Any]:
    """States of the whole box over a ball of times, by the first derivatives' bounds."""
    rest = bound.rest(time.abs_upper(), run.order)
    drift = sum((s / room for s, room in zip(spread, bound.room, strict=True)), run.spread_r / bound.room_r)
    return [
        value_at(row, time) + arb(0, (b * (rest + drift)).abs_upper())
        for row, b in zip(arc.x, bound.reach, strict=True)
    ]


def passing(
    run: Run, arc: Arc, bound: Bound, spread: Sequence[Any], length: float
) -> tuple[float, Any | None]:
    """How far this step goes: to its end, or to the section, then the ball of moments of passing."""
    section = run.section
    assert section is not None
    for _ in range(RETAKES):
        end = _look(run, arc, bound, spread, length, length).g
        if end > 0 or end < 0:
            break
        length = math.floor(0.87 * length / CLOCK_UNIT) * CLOCK_UNIT
    else:
        raise Grazes("the orbit stays so near to the section that it cannot be told when it passes")
    if run.side is Side.START:
        run.side = _side_of_start(run, _look(run, arc, bound, spread, 0.0, 0.0))
    found = courses(lambda start, stop: _look(run, arc, bound, spread, start, stop), length)
    run.side, stretch = passage(run.side, found, bool(end > 0))
    if stretch is None:
        return length, None
    return length, _moment(run, arc, bound, spread, stretch)


def _side_of_start(run: Run, local: Local) -> Side:
    """Above or below the section, if the start is so far from it that it cannot be meant to lie on it."""
    if local.g.abs_lower() > local.speed.abs_upper() * (NEAR * run.radius):
        return Side.ABOVE if local.g > 0 else Side.BELOW
    return Side.START


def _moment(run: Run, arc: Arc, bound: Bound, spread: Sequence[Any], stretch: tuple[float, float]) -> Any:
    """The ball of moments at which solutions from the box pass the section, by interval Newton."""
    section = run.section
    assert section is not None
    low, high = stretch
    with working(run.bits):
        # Newton's method on midpoints, kept inside the stretch by halving.
        left, right = arb(low), arb(high)
        time = ((left + right) / 2).mid()
        for _ in range(200):
            states = [value_at(row, time) for row in arc.x]
            local = local_at(section, states, run.middle_r)
            g = local.g.mid()
            if g < 0:
                left = time
            else:
                right = time
            following = (time - g / local.speed).mid()
            if not left <= following <= right:
                following = ((left + right) / 2).mid()
            moved = abs(following - time)
            time = following
            if moved <= arb(2) ** (8 - run.bits):
                break
        image = image_over(arc, bound, time, run.order)
        turn = turn_over(arc, bound, time, run.order, spread, run.spread_r)
        wide = turn * run.set.basis * run.set.offset
        drift = [(b * run.spread_r / bound.room_r).abs_upper() for b in bound.reach]
        box = [value + wide[i, 0] + arb(0, drift[i]) for i, value in enumerate(image)]
        here = local_at(section, box, run.r)
        off = here.g.abs_upper()
        size = here.speed.abs_lower()
        if not size > 0:
            raise Grazes("the orbit grazes the section")
        window = (4 * off / size + arb(2) ** (4 - run.bits)).abs_upper()
        span = arb(time, window)
        over = local_at(section, _states_over(run, arc, bound, spread, span), run.r)
        if not over.speed > 0:
            raise Grazes("the orbit may pass the section at rest")
        half = (off / over.speed.abs_lower()).abs_upper()
        if not (half <= window and arb(low) <= time <= arb(high)):
            raise Grazes("the moment of passing the section could not be enclosed")
        return arb(time, half)
