"""A box of states on its way round, one rigorous Taylor step after the other."""

from __future__ import annotations

import math
from collections.abc import Sequence
from typing import Any

from flint import arb, arb_mat

from tinemark.equations.enclosure_bound import Bound, NotEnclosed, bound_of
from tinemark.equations.enclosure_section import Side
from tinemark.equations.enclosure_steps import (
    LOW_ORDER,
    Set,
    image_over,
    moved_set,
    set_of,
    slope_over,
    turn_over,
)
from tinemark.equations.series import working
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
GROW = 1.12
"""How much longer than the last the next a-priori bound is tried …"""
RESTART = 0.95
"""… and with how much of its reach."""
LONGEST = 1e3
"""Longest time that a bound is tried for."""
NOTHING = 2.0**-20
"""States this small do not tell how large they may become."""


class Run:
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


def strobe_step(run: Run, length: float) -> float:
    """How far to step so that the strobe is reached exactly and without a tiny last step."""
    left = 1.0 - run.clock
    if left <= length:
        return left
    return min(length, max(FINEST_STEP, math.ceil(left / 2 / FINEST_STEP) * FINEST_STEP))
