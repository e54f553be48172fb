"""Transcritical points and pitchforks of one-state maps, where two branches meet because something holds
exactly.

Two things can. A cycle whose points are known for every value of the parameter can be divided out of
f^p(x) = x: another branch crosses it where its multiplier is 1, at an angle where the second derivative
is not zero, as a pair where it is zero identically. And a cycle that is its own mirror image under x -> t
- x, with which the map commutes, loses that symmetry where g = t - f^(p/2) has the multiplier -1 there: a
flip of g (Kuznetsov, 2004, sections 4.7 and 7.4). What holds exactly is shown by `algebra`.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction
from typing import NoReturn

from tinemark.verify import intervals as iv
from tinemark.verify.algebra import Field
from tinemark.verify.claims import NotCheckable, Numbers, Paper, Part, Refused, Undecided
from tinemark.verify.curves import Curve, curves_through, fitted_centre
from tinemark.verify.cycles import OneState, on_box, sides_along
from tinemark.verify.intervals import ONE, Interval
from tinemark.verify.newton import image, inside
from tinemark.verify.one_state import (
    ends_of,
    hull,
    is_within,
    prime_factors,
    printed_side,
    see_box_at_value,
)
from tinemark.verify.quotients import Untold
from tinemark.verify.switches import Sides

ATTEMPTS = 4
LONGEST_KNOWN = 64
"""Longest cycle whose points are looked for as known ones."""
ONE_HALF, ONE_SIXTH, TWO = Fraction(1, 2), Fraction(1, 6), Fraction(2)
FAR = Fraction(1, 10**5)
"""A cycle that misses its beginning by more than this share closes later, if at all."""
NEAR = Fraction(1, 1000)
SLIGHTLY = Fraction(1, 10**9)
DISPROOF_BITS = 400
UNTOLD = "no identity of the formula was found that makes two branches meet there"


def prove(one: OneState, paper: Paper, numbers: Numbers, bits: int, printed: str | None) -> None:
    """Prove what the certificate claims.

    Raises
    ------
    Refused
        The claim is another one than what is there.
    NotCheckable
        What makes the branches meet is not recognised.
    """
    box = [hull(ends_of(numbers.states[0]), bits), hull(ends_of(numbers.parameter), bits)]
    _see_that_it_may_be(one, paper, box, bits)
    word = sides_along(one, box[0], box[1], paper.period, bits)
    known = _known_cycle(one, box, paper.period, word, bits)
    total = None if known else _mirror(one, box, paper.period, word, bits)
    if known is None and total is None:
        _blame(one, paper, numbers, box, bits, printed)
    reason = ""
    for _ in range(ATTEMPTS):
        try:
            if known is not None:
                _prove_known(one, paper, numbers, known, word[0], bits, printed)
            elif total is not None:
                _prove_mirrored(one, paper, numbers, total, bits, printed)
            return
        except Undecided as error:
            reason, bits = error.reason, bits * 3 // 2
    raise Refused(Part.BOX, reason)


def _see_that_it_may_be(one: OneState, paper: Paper, box: list[Interval], bits: int) -> None:
    """Refuse what is no cycle of this period, or none on which branches can meet, on the whole box."""
    steps = sorted({paper.period // prime for prime in prime_factors(paper.period)})
    try:
        end = on_box(one, box[0], box[1], paper.period, bits, visits=steps)
    except Undecided as error:
        raise Refused(Part.FORMULA, f"no cycle is where value and box say it is ({error.reason})") from error
    for step, place in end.visits.items():
        if iv.sign(iv.sub(place, box[0], bits)) == 0:
            raise Refused(
                Part.PERIOD,
                f"the cycle closes after {step} steps already: its least period is not {paper.period}",
            )
    gap = min(abs(edge) for edge in iv.ends(iv.sub(end.x, box[0], bits)))
    if iv.sign(iv.sub(end.x, box[0], bits)) and gap > FAR * max(ONE_HALF, *map(abs, iv.ends(box[0]))):
        raise Refused(Part.PERIOD, f"the cycle does not close after {paper.period} steps")
    if _is_far(iv.sub(end.u, ONE, bits)):
        raise Refused(Part.KIND, "the multiplier there is not +1, so no branches meet")
    if _is_far(end.v):
        raise Refused(Part.KIND, "the parameter moves the cycle there at first order, so no branches meet")


def _is_far(value: Interval) -> bool:
    """Whether a number that should be zero is another, not only a little off where a box was moved."""
    low, high = iv.ends(value)
    return low > NEAR or high < -NEAR


def _blame(
    one: OneState,
    paper: Paper,
    numbers: Numbers,
    box: list[Interval],
    bits: int,
    printed: str | None,
) -> NoReturn:
    """Say why no identity was found: the box or the formula was changed, or what holds is not known here."""
    there = printed_side(printed, bits, numbers)
    if there is not None and iv.sign(iv.sub(there, box[0], bits)):
        raise Refused(Part.BOX, "the box does not hold the printed cycle point")
    see_box_at_value(numbers)
    bits = max(2 * bits, DISPROOF_BITS)
    r = iv.middle(box[1], bits)
    tried = 0
    for curve in curves_through(one, _wider(box[0]), box[1], bits):
        tried += 1
        x, _ = curve.at(r, bits)
        if iv.sign(iv.sub(on_box(one, x, r, paper.period, bits).x, x, bits)) == 0:
            raise NotCheckable(UNTOLD)
    if paper.period % 2 == 0:
        half = on_box(one, box[0], box[1], paper.period // 2, bits).x
        for curve in curves_through(one, _wider(iv.add(box[0], half, bits)), box[1], bits):
            tried += 1
            x, t = iv.middle(box[0], bits), curve.at(r, bits)[0]
            images = [on_box(one, place, r, 1, bits).x for place in (x, iv.sub(t, x, bits))]
            if iv.sign(iv.sub(iv.add(*images, bits), t, bits)) == 0:
                raise NotCheckable(UNTOLD)
    if tried:
        raise Refused(
            Part.FORMULA, "nothing makes two branches meet there: no cycle stays, and no symmetry holds"
        )
    raise NotCheckable(UNTOLD)


def _wider(value: Interval) -> Interval:
    """An interval with room for what a slightly changed formula moves."""
    low, high = iv.ends(value)
    room = SLIGHTLY * max(Fraction(1), abs(low))
    return hull((low - room, high + room), DISPROOF_BITS)


# A cycle that is known for every value of the parameter


def _known_cycle(
    one: OneState, box: list[Interval], period: int, word: Sequence[Sides], bits: int
) -> Curve | None:
    """The curve of the cycle's first point; a cycle of more points must stay at numbers."""
    if period > LONGEST_KNOWN:
        return None
    field = Field(one.watch)
    values = {one.parameter: field.named(one.parameter)}
    for first in curves_through(one, box[0], box[1], bits):
        try:
            start = place = first.exact(field, values)
            for step, sides in enumerate(word):
                place = field.value(one.program, {**values, one.state: place}, sides)
                if step < period - 1 and place.equals(start):
                    raise Refused(Part.PERIOD, f"the cycle closes after {step + 1} steps already")
            if place.equals(start):
                return first
        except Untold:
            continue
    return None


def _prove_known(
    one: OneState,
    paper: Paper,
    numbers: Numbers,
    curve: Curve,
    sides: Sides,
    bits: int,
    printed: str | None,
) -> None:
    """The one unknown is the parameter, the one equation that the multiplier is 1."""
    side = ends_of(numbers.parameter)
    r = hull(side, bits)
    steps = sorted({paper.period // prime for prime in prime_factors(paper.period)})
    centre = iv.middle(r, bits)
    at_centre = on_box(one, curve.at(centre, bits)[0], centre, paper.period, bits)
    x, moves = curve.at(r, bits)
    whole = on_box(one, x, r, paper.period, bits)
    speed = iv.add(whole.z, iv.mul(whole.w, moves, bits), bits)
    if iv.sign(speed) == 0:
        raise Undecided("the multiplier may touch +1 in the box without crossing it")
    (found,) = image([iv.sub(at_centre.u, ONE, bits)], [[speed]], [centre], [r], bits)
    if not inside([found], [side]):
        raise Undecided("the interval Newton test does not map the box into itself")
    if not is_within(numbers, found):
        raise Undecided("the enclosure does not become narrow enough for the printed ends")
    x, _ = curve.at(found, bits)
    end = on_box(
        one, x, found, paper.period, bits, visits=steps, look_for=printed_side(printed, bits, numbers)
    )
    for place in end.visits.values():
        if iv.sign(iv.sub(place, x, bits)) == 0:
            raise Refused(Part.PERIOD, f"the cycle closes before {paper.period} steps")
    if printed is not None and not end.near:
        raise Refused(Part.STATE, "the printed cycle point does not belong to the cycle")
    if iv.sign(end.w):
        if paper.kind != "transcritical":
            raise Refused(Part.KIND, f"a branch crosses at an angle there: transcritical, no {paper.kind}")
        if paper.criticality:
            raise Refused(Part.CRITICALITY, "a transcritical point has none")
        return
    if paper.period > 1 or not _is_straight(one, curve, sides):
        raise Undecided("how the branches meet cannot be told on this box")
    _pitchfork(paper, iv.neg(end.t))


def _is_straight(one: OneState, curve: Curve, sides: Sides) -> bool:
    """Whether the second derivative is zero along the curve, identically."""
    field = Field(one.watch)
    values = {name: field.named(name) for name in (one.state, one.parameter)}
    try:
        bend = field.slope(field.slope(field.value(one.program, values, sides), one.state), one.state)
        return field.replaced(bend, {one.state: curve.exact(field, values)}).is_zero
    except Untold:
        return False


def _pitchfork(paper: Paper, coefficient: Interval) -> None:
    """Kind and side, by the cubic coefficient, which is positive where the pair is stable."""
    if paper.kind != "pitchfork":
        raise Refused(Part.KIND, f"a pair branches off there: a pitchfork, no {paper.kind}")
    side = iv.sign(coefficient)
    if side == 0:
        raise Undecided("the cubic coefficient of the pitchfork may be zero")
    there = "supercritical" if side > 0 else "subcritical"
    if paper.criticality != there:
        raise Refused(
            Part.CRITICALITY, f"the pitchfork is {there}, not {paper.criticality or 'without a side'}"
        )


# A cycle that is its own mirror image


@dataclass(frozen=True)
class _Half:
    """g = t - f^q on a box, q half the period: its value and derivatives, as of `End`."""

    x: Interval
    u: Interval
    v: Interval
    w: Interval
    z: Interval
    t: Interval


def _mirror(
    one: OneState, box: list[Interval], period: int, word: Sequence[Sides], bits: int
) -> Curve | None:
    """Twice the centre of the reflection that takes each point half the period on."""
    if period % 2:
        return None
    half = period // 2
    x, r = box
    total = iv.add(x, on_box(one, x, r, half, bits).x, bits)
    pairs = []
    for place, sides in enumerate(word):
        pair = (sides, word[(place + half) % period])
        if pair not in pairs:
            pairs.append(pair)
    for curve in curves_through(one, total, r, bits):
        if _commutes(one, curve, pairs):
            return curve
    centre = iv.mul(total, iv.of_fraction(ONE_HALF, bits), bits)
    fitted = fitted_centre(one, centre, r)
    if fitted is not None and _commutes(one, fitted.times(TWO), pairs):
        return fitted.times(TWO)
    return None


def _commutes(one: OneState, total: Curve, pairs: list[tuple[Sides, Sides]]) -> bool:
    """Whether f(t - x) = t - f(x) identically, for the pieces at a point and at its mirror image."""
    field = Field(one.watch)
    values = {name: field.named(name) for name in (one.state, one.parameter)}
    try:
        t = total.exact(field, values)
        turned = {**values, one.state: t - values[one.state]}
        return all(
            field.tidied(
                field.value(one.program, turned, there) + field.value(one.program, values, here) - t
            ).is_zero
            for here, there in pairs
        )
    except Untold:
        return False


def _prove_mirrored(
    one: OneState, paper: Paper, numbers: Numbers, total: Curve, bits: int, printed: str | None
) -> None:
    sides = [ends_of(numbers.states[0]), ends_of(numbers.parameter)]
    box = [hull(side, bits) for side in sides]
    whole = _half_way(one, total, box, paper.period // 2, bits)
    centre = [iv.middle(side, bits) for side in box]
    at = _half_way(one, total, centre, paper.period // 2, bits)
    residual = [iv.sub(at.x, centre[0], bits), iv.add(at.u, ONE, bits)]
    slopes = [[iv.sub(whole.u, ONE, bits), whole.v], [whole.w, whole.z]]
    found = image(residual, slopes, centre, box, bits)
    if not inside(found, sides):
        raise Undecided("the interval Newton test does not map the box into itself")
    if not is_within(numbers, found[1]):
        raise Undecided("the enclosure does not become narrow enough for the printed ends")
    # Once round, so that the formula is defined on the mirrored half as well.
    steps = sorted({paper.period // prime for prime in prime_factors(paper.period)})
    end = on_box(
        one,
        found[0],
        found[1],
        paper.period,
        bits,
        visits=steps,
        look_for=printed_side(printed, bits, numbers),
    )
    for step, place in end.visits.items():
        if iv.sign(iv.sub(place, found[0], bits)) == 0:
            raise Refused(
                Part.PERIOD,
                f"the cycle closes after {step} steps already: its least period is not {paper.period}",
            )
    if printed is not None and not end.near:
        raise Refused(Part.STATE, "the printed cycle point does not belong to the cycle")
    g = _half_way(one, total, found, paper.period // 2, bits)
    half = iv.of_fraction(ONE_HALF, bits)
    # Along the branch dx/dr = v / (1 - u) = v / 2, as for a flip.
    speed = iv.add(g.z, iv.mul(half, iv.mul(g.w, g.v, bits), bits), bits)
    if iv.sign(speed) == 0:
        raise Undecided("the symmetry may be touched without being lost")
    square = iv.mul(iv.mul(half, half, bits), iv.whole_power(g.w, 2, bits), bits)
    sixth = iv.mul(iv.of_fraction(ONE_SIXTH, bits), g.t, bits)
    _pitchfork(paper, iv.add(square, sixth, bits))


def _half_way(one: OneState, total: Curve, box: list[Interval], half: int, bits: int) -> _Half:
    end = on_box(one, box[0], box[1], half, bits)
    t, moves = total.at(box[1], bits)
    return _Half(
        iv.sub(t, end.x, bits),
        iv.neg(end.u),
        iv.sub(moves, end.v, bits),
        iv.neg(end.w),
        iv.neg(end.z),
        iv.neg(end.t),
    )
