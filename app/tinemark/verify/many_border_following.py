"""What follows a border collision of a continuous map of several states, from the derivatives of f^p on both
sides.

Signs of det(1 - M) tell a cycle that goes on from a pair that meets and vanishes (di Bernardo, Feigin,
Hogan & Homer, 1999). Past a collision with one stable side the two straight pieces are followed in
doubles; a cycle that they settle on counts only where intervals show that it is there and stable.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

from mpmath import libmp

from tinemark.verify import frames
from tinemark.verify import intervals as iv
from tinemark.verify.calculus import Real
from tinemark.verify.claims import NotCheckable, Part, Refused, Undecided
from tinemark.verify.frames import Rows
from tinemark.verify.intervals import ONE, ZERO, Interval
from tinemark.verify.many_cycles import Vector, added
from tinemark.verify.matrices import determinant, solved
from tinemark.verify.normal_form import dot

SQUARINGS = 14
SETTLING = 4000
LONGEST_FOLLOWING = 24
ESCAPED = 1e6


@dataclass(frozen=True)
class BorderSide:
    """One side: derivatives of f^p in the states and in r, -1 or 1, and where its branch lies."""

    rows: Rows
    drift: Vector
    sign: int
    below: bool


def check_periods(
    one: BorderSide,
    other: BorderSide,
    surface: tuple[Vector, Interval],
    period: int,
    claimed: tuple[int, int],
    bits: int,
) -> None:
    """See that the periods before and after are those that the two sides make of a cycle of this period.

    Parameters
    ----------
    surface
        Derivatives of the surface's formula in the states and in the parameter.

    Raises
    ------
    Refused
        They are others.
    NotCheckable
        What follows cannot be shown to.
    Undecided
        A multiplier may be on the circle.
    """
    signs = [iv.sign(determinant(_one_less(side.rows, bits), bits)) for side in (one, other)]
    if 0 in signs:
        raise Undecided("a one-sided multiplier may be +1: what follows is open")
    if signs[0] != signs[1]:
        _same((0, period), claimed)
        return
    stable = [_stable(side.rows, bits) for side in (one, other)]
    if stable[0] == stable[1]:
        _same((period, period), claimed)
        return
    before, after = (one, other) if stable[0] else (other, one)
    rounds = _followed(before, after, surface, bits)
    if rounds == 0 and claimed[1] > 0:
        raise NotCheckable("it cannot be shown here that a cycle of the claimed period follows")
    _same((period, rounds * period), claimed)


def _same(there: tuple[int, int], claimed: tuple[int, int]) -> None:
    if there != claimed:
        raise Refused(
            Part.PERIOD,
            f"the periods before and after it are {there[0]} and {there[1]}, "
            f"not {claimed[0]} and {claimed[1]}",
        )


def _one_less(rows: Rows, bits: int) -> Rows:
    unit = frames.unit(len(rows))
    return [
        [iv.sub(x, y, bits) for x, y in zip(left, right, strict=True)]
        for left, right in zip(unit, rows, strict=True)
    ]


def _stable(rows: Rows, bits: int) -> bool:
    """Whether all multipliers lie inside the circle, by a power's norm below 1 or a trace above n."""
    size = len(rows)
    power = [list(row) for row in rows]
    for _ in range(SQUARINGS):
        sums = []
        for row in power:
            total = ZERO
            for entry in row:
                largest = max(entry, iv.neg(entry), key=lambda side: libmp.to_float(side[1]))
                total = iv.add(total, (largest[1], largest[1]), bits)
            sums.append(total)
        if all(iv.sign(iv.sub(ONE, total, bits)) > 0 for total in sums):
            return True
        trace = ZERO
        for place in range(size):
            trace = iv.add(trace, power[place][place], bits)
        whole = iv.of_whole(size)
        if iv.sign(iv.sub(trace, whole, bits)) > 0 or iv.sign(iv.add(trace, whole, bits)) < 0:
            return False
        power = frames.product(power, power, bits)
    raise Undecided("a one-sided multiplier may be on the unit circle")


def _followed(before: BorderSide, after: BorderSide, surface: tuple[Vector, Interval], bits: int) -> int:
    """Rounds of the stable cycle that the straight pieces settle on past the onset; 0 where none is shown."""
    away = 1 if before.below else -1
    word = _word(before, after, surface, away)
    if not word:
        return 0
    sides = {before.sign: before, after.sign: after}
    size = len(before.drift)
    product, push = frames.unit(size), [ZERO] * size

    def moved(side: BorderSide) -> Vector:
        return side.drift if away > 0 else [iv.neg(entry) for entry in side.drift]

    for sign in word:
        side = sides[sign]
        product = frames.product(side.rows, product, bits)
        push = added(frames.applied(side.rows, push, bits), moved(side), bits)
    try:
        if not _stable(product, bits):
            return 0
        state = solved(Real(bits), _one_less(product, bits), push)
    except Undecided:
        return 0
    gradient, along = surface
    for sign in word:
        side = sides[sign]
        value = dot(Real(bits), gradient, state)
        value = iv.add(value, along if away > 0 else iv.neg(along), bits)
        if iv.sign(value) != sign:
            return 0
        state = added(frames.applied(side.rows, state, bits), moved(side), bits)
    return len(word)


def _word(
    before: BorderSide, after: BorderSide, surface: tuple[Vector, Interval], away: int
) -> Sequence[int]:
    """Sides that the straight pieces run through in turn in the end; none where they do not settle."""
    gradient = [_double(entry) for entry in surface[0]]
    offset = away * _double(surface[1])
    matrices = {
        side.sign: [[_double(entry) for entry in row] for row in side.rows] for side in (before, after)
    }
    pushes = {side.sign: [away * _double(entry) for entry in side.drift] for side in (before, after)}
    size = len(gradient)
    state = [0.0] * size
    far = ESCAPED * (1 + max(abs(entry) for push in pushes.values() for entry in push))
    signs: list[int] = []
    states: list[list[float]] = []
    for step in range(SETTLING + LONGEST_FOLLOWING + 1):
        sign = -1 if sum(x * y for x, y in zip(gradient, state, strict=True)) + offset < 0 else 1
        if step >= SETTLING:
            states.append(state)
            signs.append(sign)
        rows, push = matrices[sign], pushes[sign]
        state = [
            sum(x * y for x, y in zip(row, state, strict=True)) + more
            for row, more in zip(rows, push, strict=True)
        ]
        if not max(map(abs, state)) < far:
            return ()
    room = 1e-9 * (1 + max(abs(entry) for each in states for entry in each))
    for rounds in range(1, LONGEST_FOLLOWING + 1):
        if all(abs(x - y) < room for x, y in zip(states[rounds], states[0], strict=True)):
            return signs[:rounds]
    return ()


def _double(x: Interval) -> float:
    return float(libmp.to_float(x[0]))
