"""Flips, folds and Neimark-Sacker onsets of maps of several states, proved again on the certificate's box.

Every zero of the equations (`many_equations`) in a box lies in the box's Krawczyk image. The box is cut
down to that until the image lies strictly inside: then there is exactly one zero, and it is in the image.
What is claimed of it is told on ever narrower boxes around it.
"""

from __future__ import annotations

from collections.abc import Sequence
from fractions import Fraction
from typing import NoReturn

from tinemark.verify import intervals as iv
from tinemark.verify import many_cycles as mc
from tinemark.verify import many_equations as eq
from tinemark.verify import neimark_sacker
from tinemark.verify.claims import NEIMARK_SACKER, NotCheckable, Numbers, Paper, Part, Refused, Undecided
from tinemark.verify.decimals import rational, state_unit
from tinemark.verify.intervals import Interval
from tinemark.verify.many_cycles import Carried, ManyStates
from tinemark.verify.matrices import characteristic, check_off_circle, without_root
from tinemark.verify.newton import Side, inside
from tinemark.verify.normal_form import flip_coefficient
from tinemark.verify.one_state import STATE_UNITS, TARGETS, ends_of, hull, is_within, prime_factors

ATTEMPTS = 3
CUTS = 4
"""How often a box is cut down to its image at one precision."""
NEWTON_STEPS = 6
NARROWER = 4
"""How often claims are tried to be told on a narrower box."""
MOST_EXTRA = 400
"""Steps of a cycle for which precision is added, two bits each, once the onset is known to be there."""
SUM_ROOM = (8, 24, 64)
"""Half-widths tried around the sum of a pair, in bits above the widest side of the box."""


def prove(
    many: ManyStates, paper: Paper, numbers: Numbers, bits: int, printed: Sequence[tuple[str, str]]
) -> None:
    """Prove what the certificate claims.

    Raises
    ------
    Refused
        The claim is another one than what is there.
    NotCheckable
        The onset is there, but what is claimed of it cannot be told here.
    """
    sides = [ends_of(side) for side in (*numbers.states, numbers.parameter)]
    look_for = _printed(many, printed, bits, numbers)
    found, reason = None, ""
    for attempt in range(ATTEMPTS):
        try:
            found = _isolated(many, paper, sides, bits, attempt)
            break
        except Undecided as error:
            reason = error.reason
            bits = bits * 3 // 2
    if found is None:
        _blame(many, paper, numbers, sides, bits, reason)
    is_within(numbers, found[many.size])
    reason = ""
    for _ in range(NARROWER):
        bits += 2 * min(paper.period, MOST_EXTRA) + 64
        try:
            found = eq.krawczyk(many, paper, found, bits)
            end = _end(many, paper, found, bits, look_for)
            _claims(many, paper, numbers, found, end, bits)
        except Undecided as error:
            reason = error.reason
            continue
        if look_for is not None and not end.near:
            raise Refused(Part.STATE, "the printed cycle point does not belong to the cycle")
        return
    raise NotCheckable(reason)


def _isolated(
    many: ManyStates, paper: Paper, sides: Sequence[Side], bits: int, attempt: int
) -> list[Interval]:
    """An enclosure of the one zero in the certificate's box; raises `Undecided` where that is not shown."""
    box = [hull(side, bits) for side in sides]
    end: Carried | None = eq.carried(many, paper, box, bits)
    assert end is not None
    if paper.kind == NEIMARK_SACKER:
        t = _sum_box(many, paper, box, bits, attempt)
        # On the whole box, so that no pair with another sum is overlooked.
        neimark_sacker.check_alone(end.rows, t, bits)
        box.append(t)
    for _ in range(CUTS):
        found = eq.krawczyk(many, paper, box, bits, end)
        if inside(found, [iv.ends(side) for side in box]):
            return found
        cut = [iv.common(x, y) for x, y in zip(found, box, strict=True)]
        if all(x == y for x, y in zip(cut, box, strict=True)):
            break
        box, end = cut, None
    raise Undecided("the interval Newton test does not map the box into itself")


def _sum_box(many: ManyStates, paper: Paper, box: Sequence[Interval], bits: int, attempt: int) -> Interval:
    centre = [iv.middle(side, bits) for side in box]
    there = mc.carried(many, centre[:-1], centre[-1], paper.period, bits)
    near = neimark_sacker.sum_near(there.rows, bits)
    widest = max(high - low for low, high in map(iv.ends, box))
    room = widest * 2 ** SUM_ROOM[attempt]
    return hull((near - room, near + room), bits)


def _end(
    many: ManyStates, paper: Paper, box: Sequence[Interval], bits: int, look_for: Sequence[Interval] | None
) -> Carried:
    point, r, _ = eq.split(many, box)
    steps = sorted({paper.period // prime for prime in prime_factors(paper.period)})
    return mc.carried(many, point, r, paper.period, bits, visits=steps, look_for=look_for)


def _claims(
    many: ManyStates, paper: Paper, numbers: Numbers, box: Sequence[Interval], end: Carried, bits: int
) -> None:
    """Everything claimed besides that one onset is in the box; `Undecided` where it takes a narrower one."""
    point, r, t = eq.split(many, box)
    if not is_within(numbers, r):
        raise Undecided("the enclosure does not become narrow enough for the printed ends")
    for steps, place in end.visits.items():
        if all(iv.sign(iv.sub(x, y, bits)) == 0 for x, y in zip(place, point, strict=True)):
            raise Refused(
                Part.PERIOD,
                f"the cycle closes after {steps} steps already: its least period is not {paper.period}",
            )
    place = [*point, r]
    if paper.kind == NEIMARK_SACKER:
        m = neimark_sacker.check_pair(t, end.rows, bits)
        neimark_sacker.check_side(many, paper, place, end.rows, m, bits)
        return
    check_off_circle(without_root(characteristic(end.rows, bits), TARGETS[paper.kind], bits), bits)
    if paper.kind == "fold":
        if paper.criticality:
            raise Refused(Part.CRITICALITY, "a fold has none")
        return
    side = iv.sign(flip_coefficient(many, place, end.rows, paper.period, bits))
    if side == 0:
        raise Undecided("the sign of the flip coefficient cannot be told on this box")
    there = "supercritical" if side > 0 else "subcritical"
    if paper.criticality != there:
        raise Refused(Part.CRITICALITY, f"the flip is {there}, not {paper.criticality or 'without a side'}")


def _blame(
    many: ManyStates, paper: Paper, numbers: Numbers, sides: Sequence[Side], bits: int, reason: str
) -> NoReturn:
    """Say which part is wrong, or that only the box is too wide; see `blame`."""
    reached = _solved(many, paper, numbers, bits)
    room = 100 * (numbers.upper - numbers.lower)
    if reached is None:
        raise Refused(
            Part.FORMULA, f"the formulas have no such onset where value and box say it is ({reason})"
        )
    r = reached[many.size]
    in_box = all(low <= value <= high for value, (low, high) in zip(reached, sides, strict=False))
    if in_box and numbers.lower <= r <= numbers.upper:
        raise NotCheckable(
            f"the onset is where it is printed, but the box is too wide to prove it here ({reason})"
        )
    if in_box:
        raise Refused(Part.VALUE, "the onset in the box does not lie between the printed ends")
    if numbers.lower - room <= r <= numbers.upper + room:
        raise Refused(Part.BOX, f"{reason}; value and formula agree with each other")
    low, high = sides[-1]
    if low <= numbers.upper + room and high >= numbers.lower - room:
        raise Refused(
            Part.FORMULA, f"the formulas have no such onset where value and box say it is ({reason})"
        )
    raise Refused(Part.BOX, f"{reason}; it is not where the value is")


def _solved(many: ManyStates, paper: Paper, numbers: Numbers, bits: int) -> list[Fraction] | None:
    """Where Newton's method goes from the printed value and the box's cycle point; None where nowhere."""
    values = [*(middle for middle, _ in numbers.states), numbers.value]
    place = [iv.middle(iv.of_fraction(value, bits), bits) for value in values]
    try:
        if paper.kind == NEIMARK_SACKER:
            there = mc.carried(many, place[:-1], place[-1], paper.period, bits)
            near = neimark_sacker.sum_near(there.rows, bits)
            place.append(iv.middle(iv.of_fraction(near, bits), bits))
        for _ in range(NEWTON_STEPS):
            move = eq.newton_step(many, paper, place, bits)
            place = [iv.middle(iv.sub(old, by, bits), bits) for old, by in zip(place, move, strict=True)]
            last = iv.ends(move[many.size])
            if max(abs(last[0]), abs(last[1])) < (numbers.upper - numbers.lower) / 10**6:
                return [iv.ends(side)[0] for side in place]
    except Undecided:
        return None
    return None


def _printed(
    many: ManyStates, printed: Sequence[tuple[str, str]], bits: int, numbers: Numbers
) -> list[Interval] | None:
    if not printed:
        return None
    texts = dict(printed)
    found = []
    for name in many.states:
        value = rational(texts[name]) if name in texts else None
        if value is None:
            raise Refused(Part.STATE, "the printed cycle point is no point to work with")
        room = STATE_UNITS * state_unit(texts[name], numbers.digits)
        found.append(hull((value - room, value + room), bits))
    return found
