"""The return map of a driven or free-running system, enclosed: images and derivatives of boxes of states.

Everything is a ball that holds the true value for every start in the box and every parameter in its ball.
Derivatives in the start that a Newton test multiplies with tiny boxes are carried with few bits.
"""

from __future__ import annotations

import math
from collections.abc import Generator, Sequence
from dataclasses import dataclass
from typing import Any

from flint import arb, arb_mat

from tinemark.equations.enclosure_bound import Bound, NotEnclosed, bound_of
from tinemark.equations.enclosure_section import (
    Grazes,
    Local,
    Side,
    courses,
    local_at,
    passage,
    projected,
    projected_curve,
)
from tinemark.equations.enclosure_steps import (
    LOW_ORDER,
    Set,
    bend_over,
    curve_over,
    image_over,
    low_arc,
    moved_set,
    set_of,
    slope_over,
    turn_over,
)
from tinemark.equations.series import value_at, working
from tinemark.equations.taylor_arc import LOW_BITS, Arc, LowArc, arc_from
from tinemark.equations.taylor_rates import Rates, rate_functions, section_functions
from tinemark.systems.errors import Unbounded

GUARD_BITS = 16
MOST_STEPS = 20_000
"""Steps after which an orbit that has not come back is given up."""
FINEST_STEP = 2.0**-20
"""Steps are whole multiples of this part of a driven system's period."""
CLOCK_UNIT = 2.0**-40
ORDER_SHARE = 0.55
"""Order by bits of precision: beyond, longer series cost more than longer steps save."""
FLOOR = 2.0**-8
"""Reach of a-priori boxes, in parts of each state's size, below which they are not made …"""
LEAST_FLOOR = 2.0**-30
"""… and in parts of the largest state's size."""
RETAKES = 8
GROW = 1.12
"""How much longer than the last the next a-priori bound is tried …"""
RESTART = 0.95
"""… and with how much of its reach."""
LONGEST = 1e3
NOTHING = 2.0**-20


@dataclass(frozen=True)
class Carried:
    """A box after one return.

    Attributes
    ----------
    image
        n balls.
    jacobian, slope
        Derivative in the start (n, n) and in the parameter (n, 1).
    bend, bend_r
        Derivative of (jacobian times the vector) in the start (n, n) and in the parameter (n, 1); None
        without a vector.
    time
        How long it took: 1 for a strobe, otherwise a ball.
    steps
        Taylor steps taken.
    sizes
        Largest size of each state between steps.
    """

    image: list[Any]
    jacobian: Any
    slope: Any
    bend: Any | None
    bend_r: Any | None
    time: Any
    steps: int
    sizes: list[float]


class _Run:
    """A box on its way round."""

    def __init__(self, rates: Rates, box: Sequence[Any], r: Any, bits: int) -> None:
        self.rates, self.functions = rates, rate_functions(rates)
        self.section = None if rates.section is None else section_functions(rates)
        self.n = rates.size
        self.bits = bits + GUARD_BITS
        self.order = max(LOW_ORDER, math.ceil(ORDER_SHARE * self.bits))
        self.share = 2.0 ** (-(self.bits + 8) / self.order)
        with working(self.bits):
            self.set: Set = set_of([arb(value) for value in box])
            self.r = arb(r)
            self.middle_r, self.spread_r = self.r.mid(), self.r.rad()
            self.first = arb_mat(self.n, self.n + 1, _unit(self.n))
        self.sizes = [abs(float(value)) for value in self.set.middle]
        self.radius = 1.0
        self.reach: list[float] = []
        self.clock = 0.0
        self.elapsed = 0.0  # time at which the present step begins
        self.steps = 0
        self.side = Side.START

    def begin(self) -> tuple[Arc, Bound, float, list[Any]]:
        """Polynomials and bound from where the box is, and how far a step may go."""
        self.steps += 1
        if self.steps > MOST_STEPS:
            raise Unbounded(f"the orbit has not come back after {MOST_STEPS} steps of integration")
        with working(self.bits):
            spread = self.set.spread()
            # The clock of a free-running system plays no part.
            clock = arb(self.clock)
        self.sizes = [max(a, abs(float(b))) for a, b in zip(self.sizes, self.set.middle, strict=True)]
        largest = max(self.sizes)
        # What is next to nothing does not tell how large it may become: then of the order of one.
        least = FLOOR if largest < NOTHING else LEAST_FLOOR * largest
        floors = [max(FLOOR * size, least) for size in self.sizes]
        likely = [max(b, floor) for b, floor in zip(self.reach, floors, strict=False)]
        guess = min(GROW * self.radius, LONGEST)
        bound = bound_of(self.functions, self.set.middle, spread, self.r, clock, floors, guess, likely)
        self.radius = float(bound.radius)
        self.reach = [RESTART * float(b) for b in bound.reach]
        arc = arc_from(
            self.functions, self.set.middle, self.middle_r, clock, self.order, self.bits, low=LOW_ORDER
        )
        unit = FINEST_STEP if self.rates.section is None else CLOCK_UNIT
        length = math.floor(self.radius * self.share / unit) * unit
        if length <= 0:
            raise NotEnclosed("the steps of integration became too short to go on")
        return arc, bound, length, spread

    def end(self, arc: Arc, bound: Bound, time: Any, spread: Sequence[Any], low: LowArc, slope: Any) -> Any:
        """Move the box on by a time; returns the step's derivative in frames and the frame's inverse."""
        with working(LOW_BITS, LOW_ORDER):
            push = slope_over(low, slope, bound, time, spread, self.spread_r)
        with working(self.bits):
            image = image_over(arc, bound, time, self.order)
            turn = turn_over(arc, bound, time, self.order, spread, self.spread_r)
            before = self.set
            self.set, inverse = moved_set(before, image, turn, push, self.spread_r)
            link = inverse * turn * before.basis
            self.first = link * self.first + _last_column(inverse * push)
        return link, inverse

    def plain(self) -> Any:
        """Derivative of the flow so far, (n, n + 1), in the states themselves."""
        return self.set.basis * self.first


def _unit(n: int) -> list[int]:
    return [int(i == j) for i in range(n) for j in range(n + 1)]


def _last_column(column: Any) -> Any:
    n = column.nrows()
    values: list[Any] = []
    for i in range(n):
        values += [0] * n + [column[i, 0]]
    return arb_mat(n, n + 1, values)


def _strobe_step(run: _Run, length: float) -> float:
    left = 1.0 - run.clock
    if left <= length:
        return left
    return min(length, max(FINEST_STEP, math.ceil(left / 2 / FINEST_STEP) * FINEST_STEP))


def _look(run: _Run, arc: Arc, bound: Bound, spread: Sequence[Any], start: float, stop: float) -> Local:
    """The section and the rates on a stretch of a step, for the whole box."""
    assert run.section is not None
    with working(LOW_BITS):
        middle, half = (start + stop) / 2, (stop - start) / 2
        # A little wider than the stretch, for the rounding of its ends to doubles.
        time = arb(middle, half * (1 + 2.0**-20))
        return local_at(run.section, _states_over(run, arc, bound, spread, time), run.r)


def _states_over(run: _Run, arc: Arc, bound: Bound, spread: Sequence[Any], time: Any) -> list[Any]:
    """States of the whole box over a ball of times, by the first derivatives' bounds."""
    rest = bound.rest(time.abs_upper(), run.order)
    drift = sum((s / room for s, room in zip(spread, bound.room, strict=True)), run.spread_r / bound.room_r)
    return [
        value_at(row, time) + arb(0, (b * (rest + drift)).abs_upper())
        for row, b in zip(arc.x, bound.reach, strict=True)
    ]


def _passing(
    run: _Run, arc: Arc, bound: Bound, spread: Sequence[Any], length: float
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
    found = courses(lambda start, stop: _look(run, arc, bound, spread, start, stop), length)
    run.side, stretch = passage(run.side, found, bool(end > 0))
    if stretch is None:
        return length, None
    return length, _moment(run, arc, bound, spread, stretch)


def _moment(run: _Run, arc: Arc, bound: Bound, spread: Sequence[Any], stretch: tuple[float, float]) -> Any:
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


def carry(
    rates: Rates, box: Sequence[Any], r: Any, bits: int, vector: Sequence[Any] | None = None
) -> Generator[float, None, Carried]:
    """Carry a box of states once round, with its derivatives.

    Parameters
    ----------
    box, r
        Balls of the states and of the parameter.
    bits
        Accuracy wanted of image and first derivative where box and r are exact.
    vector
        Direction for the second derivative: n balls.

    Yields
    ------
    float
        Time integrated so far (periods of a driven system), between steps.

    Raises
    ------
    NotEnclosed, Grazes, ArithmeticError, Unbounded, SwitchingTouched
        Why there is no enclosure.
    """
    run = _Run(rates, box, r, bits)
    n = run.n
    second: Any = None
    with working(run.bits):
        direction = None if vector is None else arb_mat(n, 1, list(vector))
        if direction is not None:
            second = arb_mat(n, n + 1)
    moment: Any | None = None
    while moment is None and run.clock < 1.0:
        arc, bound, length, spread = run.begin()
        time: Any
        if run.section is None:
            length = _strobe_step(run, length)
            time = arb(length)
        else:
            length, moment = _passing(run, arc, bound, spread, length)
            time = arb(length) if moment is None else moment
        low = low_arc(arc)
        with working(LOW_BITS, LOW_ORDER):
            slope = low.slope()
            forced = None
            if direction is not None:
                plain = run.plain()
                moved = _square(plain) * direction
                bend = bend_over(
                    low, slope, [moved[i, 0] for i in range(n)], bound, time, spread, run.spread_r
                )
                forced = bend * _bordered(plain)
        link, inverse = run.end(arc, bound, time, spread, low, slope)
        if forced is not None:
            with working(run.bits):
                second = link * second + inverse * forced
        if moment is None:
            run.elapsed += length
        if run.section is None:
            run.clock += length
        yield run.elapsed
    with working(run.bits):
        image, first = run.set.hull(), run.plain()
        after = None if direction is None else run.set.basis * second
        if run.section is not None:
            vector_after = None if direction is None else _square(first) * direction
            stopped = projected(run.section, image, run.r, first, vector_after, after)
            first, after = stopped.first, stopped.second
        jacobian, push = _parts(first)
        bend, bend_r = (None, None) if after is None else _parts(after)
        taken = arb(1) if moment is None else moment + run.elapsed
        return Carried(image, jacobian, push, bend, bend_r, taken, run.steps, run.sizes)


def carry_curve(
    rates: Rates, box: Sequence[Any], r: Any, jets: Sequence[Sequence[Any]]
) -> Generator[float, None, list[list[Any]]]:
    """Coefficients of e, e^2 and e^3 after one return, of a curve of starts with these coefficients.

    For all starts in the box and all parameters in the ball r, to few bits. Yields and raises as `carry`.
    """
    run = _Run(rates, box, r, LOW_BITS)
    n = run.n
    with working(run.bits):
        # In the frame of the set, which at first is that of the states.
        y1, y2, y3 = (arb_mat(n, 1, list(jet)) for jet in jets)
    moment: Any | None = None
    while moment is None and run.clock < 1.0:
        arc, bound, length, spread = run.begin()
        time: Any
        if run.section is None:
            length = _strobe_step(run, length)
            time = arb(length)
        else:
            length, moment = _passing(run, arc, bound, spread, length)
            time = arb(length) if moment is None else moment
        low = low_arc(arc)
        with working(LOW_BITS, LOW_ORDER):
            slope = low.slope()
            firsts, seconds = run.set.basis * y1, run.set.basis * y2
            forced, turned = curve_over(
                low,
                [firsts[i, 0] for i in range(n)],
                [seconds[i, 0] for i in range(n)],
                bound,
                time,
                spread,
                run.spread_r,
            )
        link, inverse = run.end(arc, bound, time, spread, low, slope)
        with working(run.bits):
            y1, y2, y3 = link * y1, link * y2 + inverse * forced, link * y3 + inverse * turned
        run.elapsed += length
        if run.section is None:
            run.clock += length
        yield run.elapsed
    with working(run.bits):
        after = [run.set.basis * part for part in (y1, y2, y3)]
        if run.section is not None:
            after = projected_curve(run.section, run.set.hull(), run.r, after)
        return [[part[i, 0] for i in range(n)] for part in after]


def _square(block: Any) -> Any:
    n = block.nrows()
    return arb_mat(n, n, [block[i, j] for i in range(n) for j in range(n)])


def _bordered(block: Any) -> Any:
    """(n + 1, n + 1): derivative of states and parameter in starts and parameter."""
    n = block.nrows()
    values = [block[i, j] for i in range(n) for j in range(n + 1)]
    return arb_mat(n + 1, n + 1, [*values, *([0] * n), 1])


def _parts(block: Any) -> tuple[Any, Any]:
    n = block.nrows()
    return _square(block), arb_mat(n, 1, [block[i, n] for i in range(n)])
