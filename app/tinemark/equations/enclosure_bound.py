"""A-priori bounds of solutions over discs of complex time, and what Cauchy's estimates make of them.

If starts within `room` of a point, with the parameter within `room_r` of its value, stay in a box of reach b
for all complex times |t| <= R, then the solution is analytic there in time, start and parameter, and every
Taylor coefficient and every derivative of one is bounded: that of t^k is at most a! b / (room^a R^k) for
derivatives of multi-order a. That the box holds is shown by a Taylor expansion whose rest is taken over the
box itself (Nedialkov, Jackson and Pryce 2001, Reliab. Comput. 7:449): with c_k the coefficients of solutions
from the starts, and c_m(box) those of solutions from anywhere in the box,
|room| + |c_1| R + … + |c_m(box)| R^m <= b. A solution that left the box would have to break this first.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import flint
from flint import acb, acb_series, arb

from tinemark.equations.enclosure_discs import NotAnalytic
from tinemark.equations.series import working
from tinemark.equations.taylor_rates import RateFunctions
from tinemark.systems.errors import SwitchingTouched

BOUND_BITS = 53
ROOM = 0.0625
"""Share of the reach that is kept as room for other starts."""
PARAMETER_ROOM = 2.0**-10
"""Room of the parameter, in parts of it …"""
LEAST_ROOM = 2.0**-20
"""… and no less than this."""
TERMS = 8
"""m: the order of the expansion whose rest is taken over the box."""
ROUNDS = 6
SHRINK = 0.75
TRIALS = 60
MOST_REACH = 2.0**9
"""Reaches beyond this multiple of the least one, and of what the rates at the start would lead to, say too
little: shorter times are tried instead."""
SWELL = 1.06


class NotEnclosed(Exception):
    """No a-priori bound was found even for very short times."""


@dataclass(frozen=True)
class Bound:
    """Reach of solutions over a disc of complex time.

    Attributes
    ----------
    radius
        R, an exact ball.
    reach
        For each state how far it gets from the middle of the starts.
    room, room_r
        How far starts (beyond their box) and the parameter may lie off.
    """

    radius: Any
    reach: list[Any]
    room: list[Any]
    room_r: Any

    def rest(self, time: Any, order: int) -> Any:
        """Bound, in parts of the reach, of all terms from t^order on up to a time below R."""
        share = (time / self.radius).abs_upper()
        if not share < 1:
            raise NotEnclosed("a step reaches beyond its bound")
        return (share**order / (1 - share)).abs_upper()

    def first(self, i: int, k: int) -> Any:
        """Bound of the derivative of state i in the start's state k, or in the parameter for the last k."""
        return self.reach[i] / self.rooms[k]

    @property
    def rooms(self) -> list[Any]:
        """Rooms of the states, then of the parameter."""
        return [*self.room, self.room_r]


def bound_of(
    functions: RateFunctions,
    middle: Sequence[Any],
    spread: Sequence[Any],
    r: Any,
    clock: Any,
    floors: Sequence[float],
    guess: float,
    likely: Sequence[float] = (),
) -> Bound:
    """The bound over a disc as large as it holds, beginning with a guess of its radius.

    Parameters
    ----------
    middle, spread
        Box of starts: exact balls, and half-widths.
    r
        Ball of the parameter.
    floors
        Least reach of each state.
    likely
        A reach to try first.

    Raises
    ------
    NotEnclosed
        None was found.
    SwitchingTouched
        Starts lie on a switching surface.
    """
    radius = guess
    touched: SwitchingTouched | None = None
    with working(BOUND_BITS):
        room_r = max(PARAMETER_ROOM * abs(float(r)), LEAST_ROOM)
        wide = arb(r.mid(), (r.rad() + room_r).abs_upper())
        parameter = acb(wide, arb(0, wide.rad()))
        for _ in range(TRIALS):
            try:
                reach = _tested(functions, middle, spread, parameter, clock, floors, likely, radius)
            except SwitchingTouched as error:
                touched, reach = error, None
            likely = ()
            if reach is not None:
                room = [arb(ROOM * value) for value in reach]
                return Bound(arb(radius), [arb(value) for value in reach], room, arb(room_r))
            radius *= SHRINK
    if touched is not None:
        raise touched
    raise NotEnclosed("no bound of the orbit was found even over very short times")


def _tested(
    functions: RateFunctions,
    middle: Sequence[Any],
    spread: Sequence[Any],
    parameter: Any,
    clock: Any,
    floors: Sequence[float],
    likely: Sequence[float],
    radius: float,
) -> list[float] | None:
    """A reach that passes the test over a disc of this radius, or None."""
    spreads = [float(value.abs_upper()) for value in spread]
    least = [max(floor, 8 * value) for floor, value in zip(floors, spreads, strict=True)]
    reach = [max(a, b) for a, b in zip(least, likely, strict=True)] if likely else least
    disc = acb(arb(clock, radius), arb(0, radius))
    for _ in range(ROUNDS):
        starts = [s + arb(ROOM * b) for s, b in zip(spread, reach, strict=True)]
        try:
            near = _coefficients(functions, middle, starts, parameter, acb(clock), TERMS - 1)
            far = _coefficients(functions, middle, [arb(b) for b in reach], parameter, disc, TERMS)
        except NotAnalytic:
            return None
        needed = []
        for start, first, last in zip(starts, near, far, strict=True):
            size = start
            for k in range(1, TERMS):
                size = size + abs(first[k]).abs_upper() * arb(radius) ** k
            needed.append((size + abs(last[TERMS]).abs_upper() * arb(radius) ** TERMS).abs_upper())
        if not all(size.is_finite() for size in needed):
            return None
        # All in balls: this is the test itself.
        if all(size < arb(b) for size, b in zip(needed, reach, strict=True)):
            return reach
        wanted = [SWELL * float(size) for size in needed]
        reach = [max(b, want) for want, b in zip(wanted, reach, strict=True)]
        straight = [float(abs(first[1]).abs_upper()) * radius for first in near]
        if any(b > MOST_REACH * max(pair) for b, *pair in zip(reach, least, straight, strict=True)):
            return None
    return None


def _coefficients(
    functions: RateFunctions,
    middle: Sequence[Any],
    half: Sequence[Any],
    parameter: Any,
    clock: Any,
    most: int,
) -> list[list[Any]]:
    """Taylor coefficients up to t^most of the solutions from anywhere in a complex box."""
    series = [[acb(m + arb(0, b), arb(0, b))] for m, b in zip(middle, half, strict=True)]
    for k in range(most):
        flint.ctx.cap = k + 1
        states = [acb_series(row, k + 1) for row in series]
        for row, rate in zip(
            series, functions.disc(*states, parameter, acb_series([clock, 1], k + 1)), strict=True
        ):
            row.append(_coefficient(rate, k) / (k + 1))
    return series


def _coefficient(rate: Any, k: int) -> Any:
    if isinstance(rate, acb_series):
        return rate[k]
    return rate if k == 0 else acb(0)
