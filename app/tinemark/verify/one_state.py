"""Flips and folds of one-state maps, proved again on the certificate's box.

The unknowns are a cycle point x and the parameter r; the equations f^p(x, r) = x and f^p_x(x, r) = -1 for a
flip, +1 for a fold. Krawczyk's test shows the one zero and encloses it; the other claims are signs
of intervals over the enclosure's box.
"""

from __future__ import annotations

from fractions import Fraction

from tinemark.verify import intervals as iv
from tinemark.verify.claims import Numbers, Paper, Part, Refused, Undecided
from tinemark.verify.cycles import End, OneState, at_point, on_box
from tinemark.verify.decimals import rational, state_unit
from tinemark.verify.intervals import ONE, Interval
from tinemark.verify.newton import Side, image, inside

ATTEMPTS, ATTEMPTS_LONG = 4, 2
LONG = 2**12
"""Cycles from here on are tried less often with more bits, and not gone along to find what is to blame."""
VALUE_UNITS = Fraction(3, 5)
"""How far, in units of its last digit, a value may lie from the onset: half, and the enclosure's width."""
STATE_UNITS = Fraction(3, 5)
"""The same for a printed cycle point: 0.1 is not a rounded zero."""
TARGETS = {"flip": -1, "fold": 1}


def prove(one: OneState, paper: Paper, numbers: Numbers, bits: int, printed: str | None) -> None:
    """Prove what the certificate claims.

    Raises
    ------
    Undecided
        The test on the box does not succeed: box, formula, period or kind is not what it was.
    Refused
        The test succeeds, and the claim is another one than what is there.
    """
    sides = [ends_of(numbers.states[0]), ends_of(numbers.parameter)]
    target = iv.of_fraction(Fraction(TARGETS[paper.kind]), bits)
    start = [hull(side, bits) for side in sides]
    box, reason = start, ""
    steps = sorted({paper.period // prime for prime in prime_factors(paper.period)})
    for _ in range(ATTEMPTS if paper.period < LONG else ATTEMPTS_LONG):
        try:
            end = on_box(
                one,
                box[0],
                box[1],
                paper.period,
                bits,
                visits=steps,
                look_for=printed_side(printed, bits, numbers),
            )
            centre = [iv.middle(side, bits) for side in box]
            there, slope = at_point(one, centre[0], centre[1], paper.period, bits)
            residual = [iv.sub(there, centre[0], bits), iv.sub(slope, target, bits)]
            slopes = [[iv.sub(end.u, ONE, bits), end.v], [end.w, end.z]]
            found = image(residual, slopes, centre, box, bits)
        except Undecided as error:
            reason = error.reason
            found = None
        if found is None or not inside(found, sides):
            # More bits may help; from the whole box again.
            reason = reason or "the interval Newton test does not map the box into itself"
            bits, box = bits * 3 // 2, start
            continue
        if is_within(numbers, found[1]):
            _least_period(paper, box[0], end, bits)
            _claims(paper, end, bits)
            if printed is not None and not end.near:
                raise Refused(Part.STATE, "the printed cycle point does not belong to the cycle")
            return
        # The one onset is in the image: a narrower box, and more bits, tell on which side of the end it lies.
        bits = bits * 3 // 2
        box, sides = found, [_widened(side) for side in found]
        start = box
    raise Undecided(reason or "the enclosure does not become narrow enough for the printed ends")


def is_within(numbers: Numbers, found: Interval) -> bool:
    """Whether an enclosure of the onset lies between the printed ends for certain.

    Raises
    ------
    Refused
        It lies beyond them, or the printed value is not the onset's, rounded.
    """
    low, high = iv.ends(found)
    if high < numbers.lower or low > numbers.upper:
        raise Refused(Part.VALUE, "the onset in the box does not lie between the printed ends")
    far = VALUE_UNITS * numbers.unit
    if low > numbers.value + far or high < numbers.value - far:
        raise Refused(Part.VALUE, "the printed value is not the onset's, rounded")
    return numbers.lower <= low and high <= numbers.upper


def see_box_at_value(numbers: Numbers) -> None:
    """Refuse a box that is not where the printed value is."""
    low, high = ends_of(numbers.parameter)
    if high < numbers.lower or low > numbers.upper:
        raise Refused(Part.BOX, "the box is not where the value is")


def ends_of(side: Side) -> Side:
    """Lower and upper end of a side given by its middle and half-width."""
    middle, half = side
    return middle - half, middle + half


def _widened(side: Interval) -> Side:
    low, high = iv.ends(side)
    room = (high - low) / 4
    return low - room, high + room


def hull(side: Side, bits: int) -> Interval:
    """Interval from one end to the other."""
    return iv.of_fraction(side[0], bits)[0], iv.of_fraction(side[1], bits)[1]


def printed_side(text: str | None, bits: int, numbers: Numbers) -> Interval | None:
    """Where a printed cycle point may lie; None where none is printed."""
    if text is None:
        return None
    value = rational(text)
    if value is None:
        raise Refused(Part.STATE, "the printed cycle point is no number to work with")
    room = STATE_UNITS * state_unit(text, numbers.digits)
    return hull((value - room, value + room), bits)


def _least_period(paper: Paper, first: Interval, end: End, bits: int) -> None:
    for steps, place in end.visits.items():
        if iv.sign(iv.sub(place, first, bits)) == 0:
            raise Refused(
                Part.PERIOD,
                f"the cycle closes after {steps} steps already: its least period is not {paper.period}",
            )


def _claims(paper: Paper, end: End, bits: int) -> None:
    if paper.kind == "fold":
        if iv.sign(end.v) == 0:
            raise Refused(Part.KIND, "the parameter may not move the cycle at first order: no true fold")
        if iv.sign(end.w) == 0:
            raise Refused(Part.KIND, "the tangency may be of higher order: no true fold")
        if paper.criticality:
            raise Refused(Part.CRITICALITY, "a fold has none")
        return
    half = iv.of_fraction(Fraction(1, 2), bits)
    # Along the branch dx/dr = v / (1 - u) = v / 2 where the multiplier u is -1.
    speed = iv.add(end.z, iv.mul(half, iv.mul(end.w, end.v, bits), bits), bits)
    if iv.sign(speed) == 0:
        raise Refused(Part.KIND, "the multiplier may touch -1 without crossing it")
    # f_xx^2/4 + f_xxx/6 of f^p where its slope is -1 (Kuznetsov, 2004, section 4.5).
    square = iv.mul(iv.mul(half, half, bits), iv.whole_power(end.w, 2, bits), bits)
    coefficient = iv.add(square, iv.mul(iv.of_fraction(Fraction(1, 6), bits), end.t, bits), bits)
    side = iv.sign(coefficient)
    if side == 0:
        raise Refused(Part.CRITICALITY, "the flip coefficient may be zero, so its sign is not proved")
    there = "supercritical" if side > 0 else "subcritical"
    if paper.criticality != there:
        raise Refused(Part.CRITICALITY, f"the flip is {there}, not {paper.criticality or 'without a side'}")


def prime_factors(number: int) -> list[int]:
    """Distinct prime factors, rising."""
    found, divisor = [], 2
    while divisor * divisor <= number:
        if number % divisor == 0:
            found.append(divisor)
            while number % divisor == 0:
                number //= divisor
        divisor += 1
    return [*found, number] if number > 1 else found
