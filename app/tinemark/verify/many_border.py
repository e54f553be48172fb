"""Border collisions of maps of several states: as of one state (`border`), with one equation more a state."""

from __future__ import annotations

from collections.abc import Collection, Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction

from tinemark.verify import intervals as iv
from tinemark.verify import many_boxes
from tinemark.verify import many_cycles as mc
from tinemark.verify.algebra import Field
from tinemark.verify.calculus import Real
from tinemark.verify.claims import Claim, NotCheckable, Numbers, Paper, Part, Refused, Undecided
from tinemark.verify.frames import Rows
from tinemark.verify.intervals import ONE, ZERO, Interval
from tinemark.verify.many_border_following import BorderSide, check_periods
from tinemark.verify.many_cycles import Carried, Formulas, ManyStates, Vector
from tinemark.verify.many_states import printed_box
from tinemark.verify.matrices import solved
from tinemark.verify.newton import Side
from tinemark.verify.normal_form import dot
from tinemark.verify.one_state import ends_of, hull, prime_factors
from tinemark.verify.quotients import Untold, number
from tinemark.verify.series import Touching
from tinemark.verify.surface_words import check_words, compared
from tinemark.verify.switches import Sides, Switch, switch_of, switches

ATTEMPTS = 4
NEAR = Fraction(1, 1000)
"""So near to a surface a box counts as one beside it, in units of the states."""


@dataclass(frozen=True)
class Touched:
    """The touched switch, a step of a formula where it stands, and its two sides, the lower first."""

    switch: Switch
    formula: int
    step: int
    sides: tuple[int, int]

    @property
    def level(self) -> int:
        """What the switch's value is on the surface."""
        return self.sides[1] if self.switch.kind == "whole" else 0


@dataclass(frozen=True)
class BorderEquations:
    """That a cycle closes, the touched switch set to a side, and that its first point is on the surface."""

    many: ManyStates
    steps: int
    touched: Touched
    sides: Sides

    @property
    def parameter(self) -> int:
        """Place of the parameter among the unknowns."""
        return self.many.size

    def place(self, box: Sequence[Interval], bits: int) -> tuple[Vector, Interval]:
        """Cycle point and parameter."""
        del bits
        return list(box[:-1]), box[-1]

    def carried(
        self,
        box: Sequence[Interval],
        bits: int,
        *,
        second: bool = True,
        steps: int = 0,
        visits: Collection[int] = (),
        look_for: Sequence[Interval] | None = None,
    ) -> Carried:
        """f^p with its first derivatives on a box."""
        del second
        return mc.carried(
            self.many,
            box[:-1],
            box[-1],
            steps or self.steps,
            bits,
            visits=visits,
            look_for=look_for,
            sides=self.sides,
        )

    def surface(self, box: Sequence[Interval], bits: int) -> tuple[Interval, Vector, Interval]:
        """The surface's formula less its level, with its derivatives in the states and in the parameter."""
        local = Formulas(self.many, 1, box[-1], bits)
        evaluate = local.evaluators[self.touched.formula]
        series = evaluate.difference(self.touched.step, local.values(box[:-1]), dict(self.sides))
        slopes = [series.get(place, ZERO) for place in local.units]
        return iv.sub(series[0], iv.of_whole(self.touched.level), bits), slopes[:-1], slopes[-1]

    def residual(self, place: Sequence[Interval], there: Carried, bits: int) -> Vector:
        """The equations at a point."""
        gaps = [iv.sub(x, y, bits) for x, y in zip(there.x, place, strict=False)]
        return [*gaps, self.surface(place, bits)[0]]

    def slopes(self, box: Sequence[Interval], end: Carried, bits: int) -> Rows:
        """Derivatives of the equations on a box, row by row."""
        size = self.many.size
        rows = [
            [iv.sub(end.first[a][i], ONE, bits) if a == i else end.first[a][i] for a in range(size + 1)]
            for i in range(size)
        ]
        _, gradient, along = self.surface(box, bits)
        return [*rows, [*gradient, along]]


def prove(
    many: ManyStates,
    claim: Claim,
    paper: Paper,
    numbers: Numbers,
    bits: int,
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
    sides = [ends_of(side) for side in (*numbers.states, numbers.parameter)]
    reason = ""
    touched: Touched | None = None
    for _ in range(ATTEMPTS):
        box = [hull(side, bits) for side in sides]
        try:
            touched = _touched(many, box, bits)
            equations, found = _isolated(many, paper.period, touched, box, bits)
        except Undecided as error:
            reason, bits = error.reason, bits * 3 // 2
            continue
        _see(equations, claim, paper, numbers, found, bits)
        if claim.consequence:
            names = (*many.states, many.parameter)
            check_words(
                many.programs[touched.formula],
                (touched.step, touched.level),
                names,
                {name: value for name, value in constants.items() if name not in names},
                claim.consequence,
                many.watch,
            )
        return
    if touched is not None:
        _see_not_earlier(many, paper, touched, sides, bits)
    (low, high), room = sides[-1], 100 * (numbers.upper - numbers.lower)
    if low - room <= numbers.value <= high + room:
        raise Refused(Part.FORMULA, f"no such onset is where value and box say it is ({reason})")
    raise Refused(Part.BOX, f"{reason}; it is not where the value is")


def _see_not_earlier(
    many: ManyStates, paper: Paper, touched: Touched, sides: Sequence[Side], bits: int
) -> None:
    for side in touched.sides:
        equations = BorderEquations(many, paper.period, touched, {touched.switch: side})
        many_boxes.see_not_earlier(equations, paper.period, sides, bits)


def _touched(many: ManyStates, box: list[Interval], bits: int) -> Touched:
    """The one switch that the box touches at its first point, whichever side is taken of it."""
    local = Formulas(many, 0, box[-1], bits)
    found: Touched | None = None
    waiting: list[dict[Switch, int]] = [{}]
    while waiting:
        try:
            local.at(0, box[:-1], waiting.pop())
        except Touching as touching:
            if found is not None:
                raise Undecided(
                    "the cycle may touch a second switching surface at the same time"
                ) from touching
            found = _described(many, local, touching.switch, box)
            waiting = [{found.switch: side} for side in found.sides]
    if found is None:
        if _is_beside(many, box, bits):
            raise Undecided("the box's cycle point is not on the surface beside it")
        raise Refused(Part.KIND, "the cycle touches no switching surface there: no border collision")
    return found


def _described(many: ManyStates, local: Formulas, switch: Switch, box: list[Interval]) -> Touched:
    formula, step = next(
        (at, steps[switch])
        for at, program in enumerate(many.programs)
        if switch in (steps := switches(program))
    )
    if switch.kind != "whole":
        return Touched(switch, formula, step, (-1, 1))
    value = local.evaluators[formula].difference(step, local.values(box[:-1]), {})[0]
    low, high = iv.ends(value)
    if high - low > 1:
        raise Undecided("the box holds more than one whole number of the surface's formula")
    level = round((low + high) / 2)
    return Touched(switch, formula, step, (level - 1, level))


def _is_beside(many: ManyStates, box: list[Interval], bits: int) -> bool:
    """Whether a switching surface is near the box's cycle point: good numbers, no proof."""
    local = Formulas(many, 0, box[-1], bits)
    size = max(abs(edge) for side in box[:-1] for edge in iv.ends(side))
    for evaluate, program in zip(local.evaluators, many.programs, strict=True):
        for switch, step in switches(program).items():
            low, high = iv.ends(evaluate.difference(step, local.values(box[:-1]), {})[0])
            value = (low + high) / 2
            if switch.kind == "whole":
                value -= round(value)
            if abs(value) <= NEAR * max(Fraction(1), size):
                return True
    return False


def _isolated(
    many: ManyStates, period: int, touched: Touched, box: list[Interval], bits: int
) -> tuple[BorderEquations, list[Interval]]:
    """The equations of the side whose cycle reaches the surface in the box, and where."""
    reason = ""
    for side in touched.sides:
        equations = BorderEquations(many, period, touched, {touched.switch: side})
        try:
            return equations, many_boxes.isolated(equations, box, bits)
        except Undecided as error:
            reason = reason or error.reason
    raise Undecided(reason)


def _see(
    equations: BorderEquations,
    claim: Claim,
    paper: Paper,
    numbers: Numbers,
    found: list[Interval],
    bits: int,
) -> None:
    many, touched = equations.many, equations.touched
    (side,) = equations.sides.values()
    other = touched.sides[1] if side == touched.sides[0] else touched.sides[0]
    beyond = BorderEquations(many, paper.period, touched, {touched.switch: other})
    look_for = printed_box(many, claim.states, bits, numbers)
    steps = sorted({paper.period // prime for prime in prime_factors(paper.period)})
    claimed = (claim.period_before, claim.period_after)

    def claims(narrow: list[Interval], bits: int) -> None:
        end = equations.carried(narrow, bits, visits=steps, look_for=look_for)
        many_boxes.see_period(paper.period, end, narrow[:-1], bits)
        if paper.criticality:
            raise Refused(Part.CRITICALITY, "a border collision has none")
        if look_for is not None and not end.near:
            raise Refused(Part.STATE, "the printed cycle point does not belong to the cycle")
        here = _border_side(equations, side, end, narrow, bits)
        first, second = (each.carried(narrow, bits, steps=1) for each in (equations, beyond))
        if any(iv.sign(iv.sub(x, y, bits)) for x, y in zip(first.x, second.x, strict=True)):
            if claimed != (paper.period, 0):
                raise Refused(Part.PERIOD, "the formula jumps there, so the cycle ends")
            return
        if not _is_continuous(equations, beyond, narrow, bits):
            raise NotCheckable("it cannot be told whether the formulas are continuous across the surface")
        if not any(
            iv.sign(iv.sub(x, y, bits))
            for left, right in zip(first.first, second.first, strict=True)
            for x, y in zip(left, right, strict=True)
        ):
            raise Undecided("the formulas may have the same slopes on both sides of the surface: no kink")
        across = beyond.carried(narrow, bits)
        there = _border_side(beyond, other, across, narrow, bits)
        _, gradient, along = equations.surface(narrow, bits)
        check_periods(here, there, (gradient, along), paper.period, claimed, bits)

    many_boxes.see_claims(equations, numbers, paper.period, found, bits, claims)


def _border_side(
    equations: BorderEquations, side: int, end: Carried, narrow: list[Interval], bits: int
) -> BorderSide:
    """A side's derivatives, after it is seen that its cycle goes on and crosses the surface with speed."""
    size = equations.many.size
    rows, drift = end.rows, end.first[size]
    unit = [[iv.sub(ONE if i == j else ZERO, rows[i][j], bits) for j in range(size)] for i in range(size)]
    moved = solved(Real(bits), unit, drift)
    _, gradient, along = equations.surface(narrow, bits)
    speed = iv.sign(iv.add(dot(Real(bits), gradient, moved), along, bits))
    if speed == 0:
        raise Undecided("the cycle may touch the surface without crossing it")
    lower = side == equations.touched.sides[0]
    return BorderSide(rows, drift, -1 if lower else 1, lower == (speed > 0))


def _is_continuous(
    equations: BorderEquations, beyond: BorderEquations, narrow: list[Interval], bits: int
) -> bool:
    """Whether the pieces agree on the surface for all states and parameter values, exactly."""
    many, touched = equations.many, equations.touched
    uses = {
        step.op
        for program in many.programs
        for place, step in enumerate(program.steps)
        if switch_of(program, place) == touched.switch
    }
    if uses <= {"min", "max", "abs"}:
        # Smaller, larger and size are continuous wherever what they take is.
        return True
    algebra = Field(many.watch)
    values = {name: algebra.named(name) for name in (*many.states, many.parameter)}
    try:
        pieces = []
        for each in (equations, beyond):
            sides = dict(each.sides)
            Formulas(many, 0, narrow[-1], bits).at(0, narrow[:-1], sides)
            pieces.append([algebra.value(program, values, sides) for program in many.programs])
        g = compared(algebra, many.programs[touched.formula], touched.step, values) - number(touched.level)
        for state in many.states:
            slope = algebra.slope(g, state)
            if slope.is_zero or not algebra.slope(slope, state).is_zero:
                continue
            # The surface's formula is straight in this state, so where it is zero can be written down.
            rest = algebra.replaced(g, {state: number(0)})
            place = {state: -(rest / algebra.replaced(slope, {state: number(0)}))}
            return all(
                algebra.replaced(x - y, place).is_zero for x, y in zip(pieces[0], pieces[1], strict=True)
            )
    except Untold:
        return False
    return False
