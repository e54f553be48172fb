"""Isolating the one zero of equations in a certificate's box, and narrowing it down.

Every zero in a box lies in the box's Krawczyk image. The box is cut down to that until the image lies
strictly inside: then there is exactly one zero, and it is in the image.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from fractions import Fraction
from typing import NoReturn

from tinemark.verify import intervals as iv
from tinemark.verify.claims import NotCheckable, Numbers, Part, Refused, Undecided
from tinemark.verify.intervals import Interval
from tinemark.verify.many_cycles import Carried
from tinemark.verify.many_equations import Equations, krawczyk, newton_step
from tinemark.verify.newton import Side, inside
from tinemark.verify.one_state import hull, is_within, prime_factors

CUTS = 4
"""How often a box is cut down to its image at one precision."""
NARROWER = 4
"""How often claims are tried to be told on a narrower box."""
MOST_EXTRA = 400
"""Steps of a cycle for which precision is added, two bits each, where claims are not told at once."""
NEWTON_STEPS = 6


def isolated(
    equations: Equations, box: Sequence[Interval], bits: int, end: Carried | None = None
) -> list[Interval]:
    """An enclosure of the one zero in a box; raises `Undecided` where that is not shown."""
    box = list(box)
    for _ in range(CUTS):
        found = krawczyk(equations, box, bits, end)
        if inside(found, [iv.ends(side) for side in box]):
            return found
        cut = [iv.common(x, y) for x, y in zip(found, box, strict=True)]
        if all(x == y for x, y in zip(cut, box, strict=True)):
            break
        box, end = cut, None
    raise Undecided("the interval Newton test does not map the box into itself")


def see_claims(
    equations: Equations,
    numbers: Numbers,
    period: int,
    found: list[Interval],
    bits: int,
    claims: Callable[[list[Interval], int], None],
) -> None:
    """See that the one zero lies between the printed ends, and what is claimed of it, on ever narrower boxes.

    Raises
    ------
    Refused
        It does not, or something else holds.
    NotCheckable
        It cannot be told.
    """
    is_within(numbers, found[equations.parameter])
    reason = ""
    for attempt in range(NARROWER):
        bits += 64 + attempt * 2 * min(period, MOST_EXTRA)
        try:
            found = krawczyk(equations, found, bits)
            if not is_within(numbers, found[equations.parameter]):
                raise Undecided("the enclosure does not become narrow enough for the printed ends")
            claims(found, bits)
            return
        except Undecided as error:
            reason = error.reason
    raise NotCheckable(reason)


def see_period(period: int, end: Carried, point: Sequence[Interval], bits: int) -> None:
    """Refuse a cycle that may close earlier."""
    for steps, place in end.visits.items():
        if all(iv.sign(iv.sub(x, y, bits)) == 0 for x, y in zip(place, point, strict=True)):
            raise Refused(
                Part.PERIOD,
                f"the cycle closes after {steps} steps already: its least period is not {period}",
            )


def see_not_earlier(equations: Equations, period: int, sides: Sequence[Side], bits: int) -> None:
    """Refuse a cycle that closes earlier on the whole box, as far as it can be gone along."""
    box = [hull(side, bits) for side in sides]
    for steps in sorted({period // prime for prime in prime_factors(period)}):
        try:
            point, _ = equations.place(box, bits)
            end = equations.carried(box, bits, second=False, steps=steps)
            see_period(period, Carried(end.x, end.first, visits={steps: end.x}), point, bits)
        except Undecided:
            return


def blame(
    equations: Equations,
    numbers: Numbers,
    period: int,
    start: Sequence[Fraction],
    sides: Sequence[Side],
    bits: int,
    reason: str,
) -> NoReturn:
    """Say which part is wrong, or that only the box is too wide; see `blame.find`.

    Parameters
    ----------
    start
        The unknowns, with the printed value for the parameter.
    sides
        The box's sides in the unknowns that it has.
    """
    see_not_earlier(equations, period, sides, bits)
    reached = _solved(equations, numbers, start, bits)
    room = 100 * (numbers.upper - numbers.lower)
    nothing = f"the formulas have no such onset where value and box say it is ({reason})"
    if reached is None:
        raise Refused(Part.FORMULA, nothing)
    r = reached[equations.parameter]
    in_box = all(low <= value <= high for value, (low, high) in zip(reached, sides, strict=False))
    if in_box and numbers.lower <= r <= numbers.upper:
        raise NotCheckable(
            f"the onset is where it is printed, but the box is too wide to prove it here ({reason})"
        )
    if in_box:
        raise Refused(Part.VALUE, "the onset in the box does not lie between the printed ends")
    if numbers.lower - room <= r <= numbers.upper + room:
        raise Refused(Part.BOX, f"{reason}; value and formula agree with each other")
    low, high = sides[equations.parameter]
    if low <= numbers.upper + room and high >= numbers.lower - room:
        raise Refused(Part.FORMULA, nothing)
    raise Refused(Part.BOX, f"{reason}; it is not where the value is")


def _solved(
    equations: Equations, numbers: Numbers, start: Sequence[Fraction], bits: int
) -> list[Fraction] | None:
    """Where Newton's method goes; None where nowhere."""
    place = [iv.middle(iv.of_fraction(value, bits), bits) for value in start]
    try:
        for _ in range(NEWTON_STEPS):
            move = newton_step(equations, place, bits)
            place = [iv.middle(iv.sub(old, by, bits), bits) for old, by in zip(place, move, strict=True)]
            last = iv.ends(move[equations.parameter])
            if max(abs(last[0]), abs(last[1])) < (numbers.upper - numbers.lower) / 10**6:
                return [iv.ends(side)[0] for side in place]
    except Undecided:
        return None
    return None
