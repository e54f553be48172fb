"""Border collisions of one-state maps: a cycle that reaches a switching surface, crossing it with speed.

With the touched switch set to one side the formulas are smooth there, and the equations are f^p(x, r) = x
and g(x, r) = 0, g being what the switch compares and x the touching point (Nusse & Yorke, 1992). Every
other switch is told by the intervals. Where the formula is continuous across the surface, exactly, the
same point solves the equations of the other side, and both one-sided multipliers say what follows; where
it jumps the cycle ends.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from fractions import Fraction

from tinemark.verify import intervals as iv
from tinemark.verify.algebra import Field
from tinemark.verify.border_following import check_periods
from tinemark.verify.claims import Claim, NotCheckable, Numbers, Paper, Part, Refused, Undecided
from tinemark.verify.cycles import OneState, check_bounded
from tinemark.verify.intervals import ONE, ZERO, Interval
from tinemark.verify.newton import Side, image, inside
from tinemark.verify.one_state import ends_of, hull, is_within, printed_side
from tinemark.verify.quotients import Untold, number
from tinemark.verify.series import SLOPES, VALUE, Evaluator, Touching
from tinemark.verify.surface_words import check_words, compared
from tinemark.verify.switches import Switch, switch_of, switches

ATTEMPTS = 4
NEAR = Fraction(1, 1000)
"""So near to a surface a box counts as one beside it, in units of the state."""
X, R = 1, 2
"""Places of the monomials in `SLOPES`."""


@dataclass(frozen=True)
class Round:
    """The cycle once round with the touched switch on one side.

    f^p and g with their slopes, and f with its slope at the touching point.
    """

    end: Interval
    u: Interval
    v: Interval
    g: Interval
    gx: Interval
    gr: Interval
    first_slope: Interval
    first_image: Interval
    first_sides: dict[Switch, int]
    near: bool = False


@dataclass(frozen=True)
class Border:
    """The touched switch, where it stands in the formula, and its two sides, the lower first."""

    one: OneState
    switch: Switch
    place: int
    sides: tuple[int, int]

    @property
    def level(self) -> int:
        """What the switch's value is on the surface."""
        return self.sides[1] if self.switch.kind == "whole" else 0


def prove(
    one: OneState,
    claim: Claim,
    paper: Paper,
    numbers: Numbers,
    bits: int,
    printed: str | None,
    constants: Mapping[str, Fraction],
) -> None:
    """Prove what the certificate claims, and see that the words name the surface that is touched.

    Raises
    ------
    Refused
        The claim is another one than what is there.
    NotCheckable
        What happens there cannot be told here.
    """
    sides = [ends_of(numbers.states[0]), ends_of(numbers.parameter)]
    reason = ""
    for _ in range(ATTEMPTS):
        box = [hull(side, bits) for side in sides]
        try:
            border = _touched(one, box, bits)
            _prove_on(border, claim, paper, numbers, box, sides, bits, printed)
        except Undecided as error:
            reason, bits = error.reason, bits * 3 // 2
            continue
        if claim.consequence:
            names = (one.state, one.parameter)
            constants = {name: value for name, value in constants.items() if name not in names}
            check_words(
                one.program, (border.place, border.level), names, constants, claim.consequence, one.watch
            )
        return
    (low, high), room = sides[1], 100 * (numbers.upper - numbers.lower)
    if low - room <= numbers.value <= high + room:
        raise Refused(Part.FORMULA, f"no such onset is where value and box say it is ({reason})")
    raise Refused(Part.BOX, f"{reason}; it is not where the value is")


def _touched(one: OneState, box: list[Interval], bits: int) -> Border:
    """The one switch that the box touches at its first point, whichever side is taken of it.

    Raises
    ------
    Refused
        There is none near.
    Undecided
        There is none, or more than one.
    """
    evaluate = Evaluator(one.program, VALUE, bits, {one.parameter: {0: box[1]}}, [one.state])
    found: Switch | None = None
    waiting: list[dict[Switch, int]] = [{}]
    whole = (0, 0)
    while waiting:
        chosen = waiting.pop()
        try:
            evaluate({one.state: {0: box[0]}}, dict(chosen))
        except Touching as touching:
            if found is not None and touching.switch != found:
                raise Undecided(
                    "the cycle may touch a second switching surface at the same time"
                ) from touching
            found = touching.switch
            whole = _around(one, evaluate, found, box)
            waiting = [{found: side} for side in whole]
    if found is None:
        if _is_beside(one, box, bits):
            raise Undecided("the box's cycle point is not on the surface beside it")
        raise Refused(Part.KIND, "the cycle touches no switching surface there: no border collision")
    return Border(one, found, switches(one.program)[found], whole)


def _is_beside(one: OneState, box: list[Interval], bits: int) -> bool:
    """Whether a switching surface is near the box's cycle point: good numbers, no proof."""
    near = Evaluator(one.program, SLOPES, bits, {one.parameter: {0: box[1], R: ONE}}, [one.state])
    start = {one.state: {0: box[0], X: ONE}}
    for switch, place in switches(one.program).items():
        surface = near.difference(place, start, {})
        low, high = iv.ends(surface[0])
        value = (low + high) / 2
        if switch.kind == "whole":
            value -= round(value)
        low, high = iv.ends(surface.get(X, ONE))
        size = max(abs(edge) for edge in iv.ends(box[0]))
        if abs(value) <= NEAR * max(abs(low + high) / 2, Fraction(1)) * max(Fraction(1), size):
            return True
    return False


def _around(one: OneState, evaluate: Evaluator, switch: Switch, box: list[Interval]) -> tuple[int, int]:
    if switch.kind != "whole":
        return -1, 1
    place = switches(one.program)[switch]
    low, high = iv.ends(evaluate.difference(place, {one.state: {0: box[0]}}, {})[0])
    level = round((low + high) / 2)
    if high - low > 1:
        raise Undecided("the box holds more than one whole number of the surface's formula")
    return level - 1, level


def _prove_on(
    border: Border,
    claim: Claim,
    paper: Paper,
    numbers: Numbers,
    box: list[Interval],
    sides: list[Side],
    bits: int,
    printed: str | None,
) -> None:
    """The whole proof, from one side of the border or the other."""
    found, reasons = [], []
    for side in border.sides:
        try:
            found.append((side, _isolated(border, side, paper.period, box, sides, bits)))
        except Undecided as error:
            reasons.append(error.reason)
    if not found:
        raise Undecided(reasons[0])
    side, narrow = found[0]
    here = _round(border, side, paper.period, narrow, bits, printed_side(printed, bits, numbers))
    if not is_within(numbers, narrow[1]):
        raise Undecided("the enclosure does not become narrow enough for the printed ends")
    _regular(here, bits)
    if paper.criticality:
        raise Refused(Part.CRITICALITY, "a border collision has none")
    if printed is not None and not here.near:
        raise Refused(Part.STATE, "the printed cycle point does not belong to the cycle")
    other = border.sides[1] if side == border.sides[0] else border.sides[0]
    there = _round(border, other, paper.period, narrow, bits, None)
    claimed = (claim.period_before, claim.period_after)
    if iv.sign(iv.sub(here.first_image, there.first_image, bits)):
        if claimed != (paper.period, 0):
            raise Refused(Part.PERIOD, "the formula jumps there, so the cycle ends")
        return
    if not _is_continuous(border, here, there):
        raise NotCheckable("it cannot be told whether the formula is continuous across the surface")
    if iv.sign(iv.sub(here.first_slope, there.first_slope, bits)) == 0:
        raise Refused(Part.KIND, "the formula may have one slope on both sides of the surface: no kink")
    _regular(there, bits)
    check_periods(here.u, there.u, paper.period, claimed, bits)


def _isolated(
    border: Border, side: int, period: int, box: list[Interval], sides: list[Side], bits: int
) -> list[Interval]:
    """An enclosure of the one place in the box where this side's cycle reaches the surface."""
    whole = _round(border, side, period, box, bits, None)
    centre = [iv.middle(edge, bits) for edge in box]
    at = _round(border, side, period, centre, bits, None)
    residual = [iv.sub(at.end, centre[0], bits), at.g]
    slopes = [[iv.sub(whole.u, ONE, bits), whole.v], [whole.gx, whole.gr]]
    found = image(residual, slopes, centre, box, bits)
    if not inside(found, sides):
        raise Undecided("the interval Newton test does not map the box into itself")
    return found


def _round(
    border: Border, side: int, period: int, box: list[Interval], bits: int, look_for: Interval | None
) -> Round:
    one = border.one
    x, r = box
    centre_r = iv.middle(r, bits)
    spread = iv.sub(r, centre_r, bits)
    whole = Evaluator(one.program, SLOPES, bits, {one.parameter: {0: r, R: ONE}}, [one.state])
    values = Evaluator(one.program, VALUE, bits, {one.parameter: {0: centre_r}}, [one.state])
    here, u, v = x, ONE, ZERO
    g = gx = gr = first_slope = first_image = ZERO
    first_sides: dict[Switch, int] = {}
    near = False
    cost = one.cost(bits)
    for step in range(period):
        one.watch.spend(cost)
        if look_for is not None and not near:
            near = iv.sign(iv.sub(here, look_for, bits)) == 0
        sides = {border.switch: side} if step == 0 else {}
        start = {one.state: {0: here, X: ONE}}
        if step and iv.sign(iv.sub(here, x, bits)) == 0:
            raise Refused(
                Part.PERIOD,
                f"the cycle closes after {step} steps already: its least period is not {period}",
            )
        local = whole(start, sides)
        fx, fr = local.get(X, ZERO), local.get(R, ZERO)
        if step == 0:
            surface = whole.difference(border.place, start, dict(sides))
            g = iv.sub(surface[0], iv.of_whole(border.level), bits)
            gx, gr = surface.get(X, ZERO), surface.get(R, ZERO)
            first_slope, first_image, first_sides = fx, local[0], sides
        v = iv.add(iv.mul(fx, v, bits), fr, bits)
        u = iv.mul(fx, u, bits)
        middle = iv.middle(here, bits)
        at = values({one.state: {0: middle}}, dict(sides))[0]
        move = iv.add(iv.mul(fx, iv.sub(here, middle, bits), bits), iv.mul(fr, spread, bits), bits)
        here = iv.add(at, move, bits)
        check_bounded(here)
    return Round(here, u, v, g, gx, gr, first_slope, first_image, first_sides, near)


def _regular(here: Round, bits: int) -> None:
    """See that a side's cycle goes on with the parameter and crosses the surface with speed."""
    rest = iv.sub(ONE, here.u, bits)
    if iv.sign(rest) == 0:
        raise Undecided("a one-sided multiplier may be +1")
    along = iv.div(iv.mul(here.gx, here.v, bits), rest, bits)
    if iv.sign(iv.add(along, here.gr, bits)) == 0:
        raise Undecided("the cycle may touch the surface without crossing it")


def _is_continuous(border: Border, here: Round, there: Round) -> bool:
    """Whether the two pieces agree on the surface for every value of the parameter, exactly."""
    program, state = border.one.program, border.one.state
    uses = {step.op for place, step in enumerate(program.steps) if switch_of(program, place) == border.switch}
    if uses <= {"min", "max", "abs"}:
        # Smaller, larger and size are continuous wherever what they take is.
        return True
    algebra = Field(border.one.watch)
    values = {name: algebra.named(name) for name in (state, border.one.parameter)}
    try:
        pieces = [algebra.value(program, values, side.first_sides) for side in (here, there)]
        g = compared(algebra, program, border.place, values) - number(border.level)
        slope = algebra.slope(g, state)
        if slope.is_zero or not algebra.slope(slope, state).is_zero:
            return False
        # The surface's formula is straight in the state, so where it is zero can be written down.
        rest = algebra.replaced(g, {state: number(0)})
        place = -(rest / algebra.replaced(slope, {state: number(0)}))
        return algebra.replaced(pieces[0] - pieces[1], {state: place}).is_zero
    except Untold:
        return False
