"""Where a box of solutions passes a section, and the derivatives of the map that takes it there.

Along each step the section's formula g is shown to keep its sign, or to rise or fall throughout, on every
piece of the step; the order of the pieces then tells which passages there are. What grazes the section
cannot be told and is refused.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from enum import Enum
from typing import Any

from flint import arb, arb_mat

from tinemark.equations.taylor_rates import SectionFunctions

FINEST = 12
"""A step is halved at most so often to tell what g does on it."""


class Grazes(Exception):
    """The orbit comes so near to the section that its passages cannot be counted."""


class Side(Enum):
    """Where the orbit is: at its start, which may lie on the section, above it or below."""

    START = "start"
    ABOVE = "above"
    BELOW = "below"


class Course(Enum):
    """What g does on a piece of a step."""

    POSITIVE = 1
    NEGATIVE = 2
    RISES = 3
    FALLS = 4


@dataclass(frozen=True)
class Local:
    """The section and the rates at a ball of states.

    Attributes
    ----------
    g, slope, slope_r
        The section's formula, its derivatives in the states (a row) and in the parameter.
    rate, turn, push
        Rates (a column), their derivatives in the states and in the parameter (a column).
    speed
        Rate of g.
    """

    g: Any
    slope: Any
    slope_r: Any
    rate: Any
    turn: Any
    push: Any
    speed: Any


def local_at(functions: SectionFunctions, states: Sequence[Any], r: Any) -> Local:
    """The section and the rates at a ball of states."""
    n = len(states)
    values = functions.first(*states, r)
    slope = arb_mat(1, n, list(values[1 : n + 1]))
    rates = arb_mat(n, 1, list(values[n + 2 : 2 * n + 2]))
    rest = values[2 * n + 2 :]
    speed = (slope * rates)[0, 0]
    return Local(
        values[0],
        slope,
        values[n + 1],
        rates,
        arb_mat(n, n, list(rest[: n * n])),
        arb_mat(n, 1, list(rest[n * n :])),
        speed,
    )


Piece = tuple[Course, float, float]
"""What g does on a stretch of a step, and from when to when."""


def courses(look: Callable[[float, float], Local], end: float, depth: int = FINEST) -> list[Piece]:
    """What g does on consecutive pieces of a step.

    Parameters
    ----------
    look
        (from, to) -> the section on that stretch of time, for the whole box.
    end
        The step's length.

    Raises
    ------
    Grazes
        A piece stays undecided.
    """
    found: list[Piece] = []

    def divide(start: float, stop: float, left: int) -> None:
        local = look(start, stop)
        if local.g > 0:
            found.append((Course.POSITIVE, start, stop))
        elif local.g < 0:
            found.append((Course.NEGATIVE, start, stop))
        elif local.speed > 0:
            found.append((Course.RISES, start, stop))
        elif local.speed < 0:
            found.append((Course.FALLS, start, stop))
        elif left == 0:
            raise Grazes("the orbit grazes the section")
        else:
            middle = (start + stop) / 2
            divide(start, middle, left - 1)
            divide(middle, stop, left - 1)

    divide(0.0, end, depth)
    return found


def passage(side: Side, found: Sequence[Piece], ends_above: bool) -> tuple[Side, tuple[float, float] | None]:
    """Follow the pieces of a step, at whose end g has a definite sign.

    Returns
    -------
    side, stretch
        Where the step ends, and the stretch of time in which it first passes the section upward, g rising
        throughout; None where it does not.

    Raises
    ------
    Grazes
        The order of the pieces leaves open what happens.
    """
    end = found[-1][2]
    last = (Course.POSITIVE if ends_above else Course.NEGATIVE, end, end)
    run: Course | None = None  # a stretch on which g rises or falls throughout
    begun = 0.0
    for course, start, _ in (*found, last):
        if course in (Course.RISES, Course.FALLS):
            if run is not None and run is not course:
                raise Grazes("the orbit turns round at the section")
            begun = start if run is None else begun
            run = course
            continue
        above = course is Course.POSITIVE
        if side is Side.START:
            if run is Course.FALLS or (run is Course.RISES and not above):
                raise Grazes("the orbit does not leave the section in the counted direction")
            side = Side.ABOVE if above else Side.BELOW
        elif side is Side.BELOW and above:
            if run is not Course.RISES:
                raise Grazes("the orbit turns round at the section")
            return Side.ABOVE, (begun, start)
        elif side is Side.ABOVE and not above:
            if run is not Course.FALLS:
                raise Grazes("the orbit turns round at the section")
            side = Side.BELOW
        run = None
    return side, None


@dataclass(frozen=True)
class Projected:
    """Derivatives after the flow has been stopped at the section."""

    first: Any
    second: Any | None


def projected(
    functions: SectionFunctions,
    states: Sequence[Any],
    r: Any,
    first: Any,
    vector: Any | None,
    second: Any | None,
) -> Projected:
    """Derivatives of the return map from those of the flow at the moment of passing.

    With y the state there, f the rates and s(e) the change of the moment along any change e of the start,
    the return map is y + s f + s^2 (Df f) / 2 + …, and s follows from g staying zero.

    Parameters
    ----------
    first
        (n, n + 1): derivative of the flow in the start's states and the parameter.
    vector
        (n): the image of a direction under it; None without one.
    second
        (n, n + 1): the derivative of that image.
    """
    n = len(states)
    local = local_at(functions, states, r)
    rows: list[list[Any]] = [[arb(0)] * (n + 1) for _ in range(n)]
    bent: list[list[Any]] = [[arb(0)] * (n + 1) for _ in range(n)]
    speed = local.speed
    along = delay = None
    if vector is not None:
        delay = -(local.slope * vector)[0, 0] / speed
        along = vector + local.rate * delay
    for k in range(n + 1):
        moved = arb_mat(n, 1, [first[i, k] for i in range(n)])
        by_r = int(k == n)
        late = -((local.slope * moved)[0, 0] + local.slope_r * by_r) / speed
        whole = moved + local.rate * late
        for i in range(n):
            rows[i][k] = whole[i, 0]
        if along is None or second is None:
            continue
        change = arb_mat(n, 1, [second[i, k] for i in range(n)])
        change = change + (local.turn * moved + local.push * by_r) * delay
        change = change + local.turn * vector * late + local.turn * local.rate * (delay * late)
        square = functions.pair(*states, r, *_entries(along), *_entries(whole))[0]
        if by_r:
            square = square + functions.slant(*states, r, *_entries(along))[0]
        later = -((local.slope * change)[0, 0] + square) / speed
        for i in range(n):
            bent[i][k] = (change + local.rate * later)[i, 0]
    flat = arb_mat(n, n + 1, [value for row in rows for value in row])
    if along is None or second is None:
        return Projected(flat, None)
    return Projected(flat, arb_mat(n, n + 1, [value for row in bent for value in row]))


def projected_curve(
    functions: SectionFunctions, states: Sequence[Any], r: Any, jets: Sequence[Any]
) -> list[Any]:
    """Coefficients of e, e^2, e^3 of a curve after the flow has been stopped at the section."""
    y1, y2, y3 = jets
    local = local_at(functions, states, r)
    rate, turn, slope, speed = local.rate, local.turn, local.slope, local.speed
    n = len(states)

    def stopped(change: Any, curved: Any) -> tuple[Any, Any]:
        late = -((slope * change)[0, 0] + curved) / speed
        return change + rate * late, late

    def pair(a: Any, b: Any) -> tuple[Any, Any]:
        values = functions.pair(*states, r, *_entries(a), *_entries(b))
        return values[0], arb_mat(n, 1, list(values[1:]))

    p1, s1 = stopped(y1, 0)
    turned = turn * rate
    square, bends = pair(y1, y1)[1], pair(p1, p1)[0]
    p2, s2 = stopped(y2 + turn * y1 * s1 + turned * (s1 * s1 / 2), bends / 2)
    # Derivatives of Df f: along y1, and along f itself.
    across = pair(y1, rate)[1] + turn * (turn * y1)
    onward = pair(rate, rate)[1] + turn * turned
    change = y3 + turn * y1 * s2 + (turn * y2 + square / 2) * s1 + turned * (s1 * s2)
    change = change + across * (s1 * s1 / 2) + onward * (s1**3 / 6)
    twist = pair(p1, p2)[0] + functions.third(*states, r, *_entries(p1))[0] / 6
    p3, _ = stopped(change, twist)
    return [p1, p2, p3]


def _entries(column: Any) -> list[Any]:
    return [column[i, 0] for i in range(column.nrows())]
