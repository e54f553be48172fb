"""Flips, folds and Neimark-Sacker onsets of maps of several states, proved again on the certificate's box.

The unknowns are one cycle point x and the parameter r. With A the derivative of f^p in x, the equations are
f^p(x, r) = x and det(A + 1) = 0 for a flip, det(A - 1) = 0 for a fold, det A = 1 for a Neimark-Sacker
onset of two states. Where the Krawczyk test succeeds the equations are regular at their zero. Together
with a critical multiplier that is simple, that alone says that a flip's multiplier crosses -1 with speed, and
that at a fold the parameter moves the cycle at first order and the tangency is of second order.
"""

from __future__ import annotations

from collections.abc import Sequence
from fractions import Fraction
from typing import NoReturn

from tinemark.verify import intervals as iv
from tinemark.verify import many_cycles as mc
from tinemark.verify import neimark_sacker
from tinemark.verify.claims import NEIMARK_SACKER, NotCheckable, Numbers, Paper, Part, Refused, Undecided
from tinemark.verify.decimals import last_unit, rational
from tinemark.verify.intervals import ONE, ZERO, Interval
from tinemark.verify.many_cycles import Carried, ManyStates
from tinemark.verify.matrices import (
    characteristic,
    check_off_circle,
    determinant,
    null_vector,
    slope_of_determinant,
    solved,
    without_root,
)
from tinemark.verify.newton import Side, image, inside, inverse, times
from tinemark.verify.one_state import STATE_UNITS, TARGETS, VALUE_UNITS, prime_factors

ATTEMPTS = 3
NEWTON_STEPS = 6
CIRCLE_BITS = 64
MOST_EXTRA = 400
"""Steps of a cycle for which precision is added, two bits each, once the onset is known to be there."""


def prove(
    many: ManyStates, paper: Paper, numbers: Numbers, bits: int, printed: Sequence[tuple[str, str]]
) -> None:
    """Prove what the certificate claims.

    Raises
    ------
    Refused
        The claim is another one than what is there.
    NotCheckable
        The onset is there, but the box is too wide for this implementation to prove it alone in it.
    """
    sides = [_ends(side) for side in (*numbers.states, numbers.parameter)]
    look_for = _printed(many, printed, bits)
    start = [_hull(side, bits) for side in sides]
    steps = sorted({paper.period // prime for prime in prime_factors(paper.period)})
    reason, found = "", None
    for _ in range(ATTEMPTS):
        try:
            *box, r = start
            end = mc.carried(many, box, r, paper.period, bits, second=True, visits=steps, look_for=look_for)
            found = _image(many, paper, start, end, bits)
        except Undecided as error:
            reason, found = error.reason, None
        if found is not None and inside(found, sides):
            break
        reason = reason or "the interval Newton test does not map the box into itself"
        found, bits = None, bits * 3 // 2
    if found is None:
        _blame(many, paper, numbers, sides, bits, reason)
    low, high = iv.ends(found[-1])
    unit = numbers.unit
    if high < numbers.lower or low > numbers.upper:
        raise Refused(Part.VALUE, "the onset in the box does not lie between the printed ends")
    if low > numbers.value + VALUE_UNITS * unit or high < numbers.value - VALUE_UNITS * unit:
        raise Refused(Part.VALUE, "the printed value is not the onset's, rounded")
    if not (numbers.lower <= low and high <= numbers.upper):
        _narrowed(many, paper, numbers, found, bits)
    # The one zero is in the image, and in the image of that: on so narrow a box signs are told best.
    bits += 2 * min(paper.period, MOST_EXTRA)
    try:
        *box, r = found
        start = _image(many, paper, found, mc.carried(many, box, r, paper.period, bits, second=True), bits)
        *box, r = start
        end = mc.carried(many, box, r, paper.period, bits, second=True, visits=steps, look_for=look_for)
    except Undecided as error:
        raise NotCheckable(error.reason) from error
    _least_period(paper, start, end, bits)
    if paper.kind == NEIMARK_SACKER:
        rows = _shifted(paper, end.first, many.size, bits)
        neimark_sacker.check_claims(many, paper, start, rows, bits)
    else:
        _multipliers(paper, end, bits)
        _criticality(many, paper, start, end, bits)
    if look_for is not None and not end.near:
        raise Refused(Part.STATE, "the printed cycle point does not belong to the cycle")


def _image(
    many: ManyStates, paper: Paper, box: Sequence[Interval], end: Carried, bits: int
) -> list[Interval]:
    centre = [iv.middle(side, bits) for side in box]
    *point, r = centre
    there = mc.carried(many, point, r, paper.period, bits)
    return image(
        _residual(paper, point, there, bits), _slopes(many.size, paper, end, bits), centre, box, bits
    )


def _shifted(paper: Paper, first: Sequence[Sequence[Interval]], size: int, bits: int) -> list[list[Interval]]:
    """Rows of the matrix whose determinant is zero at the onset, A - target; A itself where it is 1."""
    if paper.kind == NEIMARK_SACKER:
        return [[first[j][i] for j in range(size)] for i in range(size)]
    target = iv.of_whole(TARGETS[paper.kind])
    return [
        [iv.sub(first[j][i], target, bits) if i == j else first[j][i] for j in range(size)]
        for i in range(size)
    ]


def _residual(paper: Paper, point: Sequence[Interval], there: Carried, bits: int) -> list[Interval]:
    gaps = [iv.sub(x, y, bits) for x, y in zip(there.x, point, strict=True)]
    found = determinant(_shifted(paper, there.first, len(gaps), bits), bits)
    return [*gaps, iv.sub(found, ONE, bits) if paper.kind == NEIMARK_SACKER else found]


def _slopes(size: int, paper: Paper, end: Carried, bits: int) -> list[list[Interval]]:
    rows = [
        [iv.sub(end.first[a][i], ONE if a == i else ZERO, bits) for a in range(size + 1)] for i in range(size)
    ]
    shifted = _shifted(paper, end.first, size, bits)
    last = []
    for a in range(size + 1):
        moves = [[end.second[min(a, j), max(a, j)][i] for j in range(size)] for i in range(size)]
        last.append(slope_of_determinant(shifted, moves, bits))
    return [*rows, last]


def _least_period(paper: Paper, box: Sequence[Interval], end: Carried, bits: int) -> None:
    for steps, place in end.visits.items():
        if all(iv.sign(iv.sub(x, y, bits)) == 0 for x, y in zip(place, box, strict=False)):
            raise Refused(
                Part.PERIOD,
                f"the cycle closes after {steps} steps already: its least period is not {paper.period}",
            )


def _multipliers(paper: Paper, end: Carried, bits: int) -> None:
    """No multiplier but the critical one lies on the unit circle."""
    size = len(end.x)
    rows = [[end.first[j][i] for j in range(size)] for i in range(size)]
    others = without_root(characteristic(rows, bits), TARGETS[paper.kind], bits)
    try:
        check_off_circle(others, CIRCLE_BITS)
    except Undecided as error:
        raise Refused(Part.KIND, error.reason) from error


def _criticality(many: ManyStates, paper: Paper, box: Sequence[Interval], end: Carried, bits: int) -> None:
    if paper.kind == "fold":
        if paper.criticality:
            raise Refused(Part.CRITICALITY, "a fold has none")
        return
    try:
        side = iv.sign(_flip_coefficient(many, paper, box, end, bits))
    except Undecided:
        side = 0
    if side == 0:
        raise NotCheckable("the sign of the flip coefficient cannot be told on this box")
    there = "supercritical" if side > 0 else "subcritical"
    if paper.criticality != there:
        raise Refused(Part.CRITICALITY, f"the flip is {there}, not {paper.criticality or 'without a side'}")


def _flip_coefficient(
    many: ManyStates, paper: Paper, box: Sequence[Interval], end: Carried, bits: int
) -> Interval:
    """<p, C(q, q, q) + 3 B(q, w)> <p, q> with w = (1 - A)^-1 B(q, q): six times the coefficient, but for a
    positive factor (Kuznetsov, 2004, section 5.4). A q = -q, p A = -p; B and C are of f^p.
    """
    size = many.size
    rows = _shifted(paper, end.first, size, bits)
    q = null_vector(rows, bits)
    p = null_vector([list(column) for column in zip(*rows, strict=True)], bits)
    *point, r = box
    square, cube, _ = _along(many, point, r, paper.period, q, None, bits)
    rest = [
        [iv.sub(ONE if i == j else ZERO, end.first[j][i], bits) for j in range(size)] for i in range(size)
    ]
    w = solved(rest, square, bits)
    _, _, mixed = _along(many, point, r, paper.period, q, w, bits)
    three = iv.of_whole(3)
    inner = [iv.add(c, iv.mul(three, m, bits), bits) for c, m in zip(cube, mixed, strict=True)]
    product: Interval = iv.mul(_dot(p, inner, bits), _dot(p, q, bits), bits)
    return product


def _dot(a: Sequence[Interval], b: Sequence[Interval], bits: int) -> Interval:
    return times([a], b, bits)[0]


def _along(
    many: ManyStates,
    point: Sequence[Interval],
    r: Interval,
    period: int,
    q: Sequence[Interval],
    w: Sequence[Interval] | None,
    bits: int,
) -> tuple[list[Interval], list[Interval], list[Interval]]:
    """B(q, q), C(q, q, q) and B(q, w) of f^p, put together along the cycle."""
    local = mc.Local(many, 3 if w is None else 2, r, bits)
    centre_r = iv.middle(r, bits)
    values, spread = mc.Local(many, 0, centre_r, bits), iv.sub(r, centre_r, bits)
    zero = [ZERO] * many.size
    here, one, other = list(point), list(q), list(w) if w is not None else zero
    square, cube, mixed = zero, zero, zero
    three = iv.of_whole(3)
    for _ in range(period):
        series = local.at(here)
        slopes, bends = local.tensor(series, 1), local.tensor(series, 2)
        full = [*one, ZERO]
        if w is None:
            turned = mc.bilinear(bends, full, [*square, ZERO], bits)
            cube = mc.added(
                mc.linear(slopes, cube, None, bits),
                mc.added(
                    [iv.mul(three, value, bits) for value in turned],
                    mc.trilinear(local.tensor(series, 3), full, bits),
                    bits,
                ),
                bits,
            )
            square = mc.added(
                mc.linear(slopes, square, None, bits), mc.bilinear(bends, full, full, bits), bits
            )
        else:
            crossed = mc.bilinear(bends, full, [*other, ZERO], bits)
            mixed = mc.added(mc.linear(slopes, mixed, None, bits), crossed, bits)
            other = mc.linear(slopes, other, None, bits)
        one = mc.linear(slopes, one, None, bits)
        middle = [iv.middle(side, bits) for side in here]
        images = [found[0] for found in values.at(middle)]
        offsets = [iv.sub(side, at, bits) for side, at in zip(here, middle, strict=True)]
        here = mc.added(images, mc.linear(slopes, offsets, spread, bits), bits)
        mc.check_bounded(here)
    return square, cube, mixed


def _narrowed(many: ManyStates, paper: Paper, numbers: Numbers, found: Sequence[Interval], bits: int) -> None:
    """The one onset is in the image: narrower boxes tell on which side of a printed end it lies."""
    box = list(found)
    for _ in range(ATTEMPTS):
        bits = bits * 3 // 2
        *point, r = box
        end = mc.carried(many, point, r, paper.period, bits, second=True)
        box = _image(many, paper, box, end, bits)
        low, high = iv.ends(box[-1])
        if numbers.lower <= low and high <= numbers.upper:
            return
        if high < numbers.lower or low > numbers.upper:
            raise Refused(Part.VALUE, "the onset in the box does not lie between the printed ends")
    raise NotCheckable("the enclosure does not become narrow enough for the printed ends")


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
    r = reached[-1]
    in_box = all(low <= value <= high for value, (low, high) in zip(reached, sides, strict=True))
    if in_box and numbers.lower <= r <= numbers.upper:
        raise NotCheckable("the onset is where it is printed, but the box is too wide to prove it here")
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
        for _ in range(NEWTON_STEPS):
            *point, r = place
            end = mc.carried(many, point, r, paper.period, bits, second=True)
            move = times(
                inverse(_slopes(many.size, paper, end, bits), bits), _residual(paper, point, end, bits), bits
            )
            place = [iv.middle(iv.sub(old, by, bits), bits) for old, by in zip(place, move, strict=True)]
            last = iv.ends(move[-1])
            if max(abs(last[0]), abs(last[1])) < (numbers.upper - numbers.lower) / 10**6:
                return [iv.ends(side)[0] for side in place]
    except Undecided:
        return None
    return None


def _ends(side: Side) -> Side:
    middle, half = side
    return middle - half, middle + half


def _hull(side: Side, bits: int) -> Interval:
    return iv.of_fraction(side[0], bits)[0], iv.of_fraction(side[1], bits)[1]


def _printed(many: ManyStates, printed: Sequence[tuple[str, str]], bits: int) -> list[Interval] | None:
    if not printed:
        return None
    texts = dict(printed)
    found = []
    for name in many.states:
        value = rational(texts[name]) if name in texts else None
        if value is None:
            raise Refused(Part.STATE, "the printed cycle point is no point to work with")
        room = STATE_UNITS * last_unit(texts[name])
        found.append(_hull((value - room, value + room), bits))
    return found
