"""Reflections x -> S x + c that a map of several states commutes with, and planes that it keeps.

S exchanges states in pairs and changes signs, S S = 1; c and the planes are short constants. Numbers only
suggest them; that they hold is shown by algebra, for all states and all values of the parameter.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass

from tinemark.verify import intervals as iv
from tinemark.verify.algebra import Field
from tinemark.verify.curves import known_number
from tinemark.verify.formula import Program, parse
from tinemark.verify.intervals import Interval
from tinemark.verify.many_cycles import Carried, ManyStates, Vector
from tinemark.verify.quotients import Quotient, Untold
from tinemark.verify.series import VALUE, Evaluator

Exchange = tuple[tuple[int, ...], tuple[int, ...]]
"""Component i of the image is signs[i] times component order[i]."""


@dataclass(frozen=True)
class Constant:
    """A number that is known exactly."""

    program: Program

    def at(self, bits: int) -> Interval:
        """Its enclosure."""
        return Evaluator(self.program, VALUE, bits, {}, ())({})[0]

    def exact(self, field: Field) -> Quotient:
        """Its value in algebra."""
        return field.value(self.program, {}, {})


def constant_in(value: Interval, bits: int) -> Constant | None:
    """The short constant in an interval, if there is one."""
    text = known_number(value, bits)
    return None if text is None else Constant(parse(text, (), {}))


@dataclass(frozen=True)
class Mirror:
    """x -> S x + c."""

    order: tuple[int, ...]
    signs: tuple[int, ...]
    shift: tuple[Constant, ...] = ()

    def turned(self, column: Sequence[Interval]) -> Vector:
        """S times a column."""
        return [
            column[at] if sign > 0 else iv.neg(column[at])
            for at, sign in zip(self.order, self.signs, strict=True)
        ]

    def image(self, point: Sequence[Interval], bits: int) -> Vector:
        """The mirror image of a point."""
        return [
            iv.add(side, part.at(bits), bits)
            for side, part in zip(self.turned(point), self.shift, strict=True)
        ]

    def of(self, end: Carried, bits: int) -> Carried:
        """f^q with its derivatives, seen in the mirror."""
        return Carried(
            self.image(end.x, bits),
            [self.turned(column) for column in end.first],
            {place: self.turned(column) for place, column in end.second.items()},
            end.visits,
            end.near,
        )

    @property
    def determinant(self) -> int:
        """Of S: 1 or -1."""
        pairs = sum(at > place for place, at in enumerate(self.order))
        negative = sum(sign < 0 for sign in self.signs)
        return -1 if (pairs + negative) & 1 else 1


def exchanges(size: int) -> Iterator[Exchange]:
    """Every S with S S = 1 but the unit, those that change few states first."""
    found: list[Exchange] = []

    def extend(order: list[int], signs: list[int]) -> None:
        place = next((i for i in range(size) if order[i] < 0), None)
        if place is None:
            found.append((tuple(order), tuple(signs)))
            return
        for other in range(place, size):
            if order[other] < 0:
                for sign in (1, -1):
                    longer, marks = order.copy(), signs.copy()
                    longer[place], longer[other] = other, place
                    marks[place] = marks[other] = sign
                    extend(longer, marks)

    extend([-1] * size, [1] * size)

    def changed(exchange: Exchange) -> int:
        return sum(at != place or sign < 0 for place, (at, sign) in enumerate(zip(*exchange, strict=True)))

    yield from sorted((each for each in found if changed(each)), key=changed)


def commutes(many: ManyStates, mirror: Mirror) -> bool:
    """Whether f(S x + c) = S f(x) + c for all states and parameter values, as far as algebra tells."""
    field = Field(many.watch)
    try:
        names = [field.named(name) for name in many.states]
        parameter = {many.parameter: field.named(many.parameter)}
        shift = [part.exact(field) for part in mirror.shift]

        def image(point: Sequence[Quotient]) -> list[Quotient]:
            return [
                (point[at] if sign > 0 else -point[at]) + part
                for at, sign, part in zip(mirror.order, mirror.signs, shift, strict=True)
            ]

        def ahead(point: Sequence[Quotient]) -> list[Quotient]:
            values = {**parameter, **dict(zip(many.states, point, strict=True))}
            return [field.value(program, values, {}) for program in many.programs]

        return all(
            field.tidied(x - y).is_zero for x, y in zip(ahead(image(names)), image(ahead(names)), strict=True)
        )
    except Untold:
        return False


@dataclass(frozen=True)
class Plane:
    """States that stay at constants from point to point of a cycle, whatever the others and the parameter do.

    `points` are the constants at each point, in the order of `fixed`.
    """

    fixed: tuple[int, ...]
    points: tuple[tuple[Constant, ...], ...]

    def free(self, size: int) -> tuple[int, ...]:
        """The other states."""
        return tuple(place for place in range(size) if place not in self.fixed)

    def put(self, box: Sequence[Interval], bits: int) -> Vector:
        """A first point whose fixed states are their constants."""
        point = list(box)
        for place, constant in zip(self.fixed, self.points[0], strict=True):
            point[place] = constant.at(bits)
        return point


def plane_through(many: ManyStates, boxes: Sequence[Sequence[Interval]], bits: int) -> Plane | None:
    """The largest such plane through a cycle given by boxes around its points; None where there is none."""
    table = [[constant_in(side, bits) for side in box] for box in boxes]
    fixed = [place for place in range(many.size) if all(row[place] is not None for row in table)]
    while fixed:
        staying = _staying(many, table, fixed)
        if staying == fixed:
            points = tuple(tuple(part for place in fixed if (part := row[place])) for row in table)
            return Plane(tuple(fixed), points)
        fixed = staying
    return None


def _staying(many: ManyStates, table: Sequence[Sequence[Constant | None]], fixed: Sequence[int]) -> list[int]:
    field = Field(many.watch)
    names = {name: field.named(name) for name in (*many.states, many.parameter)}
    staying = []
    for place in fixed:
        try:
            holds = True
            for step, row in enumerate(table):
                values = dict(names)
                for other in fixed:
                    constant = row[other]
                    assert constant is not None
                    values[many.states[other]] = constant.exact(field)
                following = table[(step + 1) % len(table)][place]
                assert following is not None
                image = field.value(many.programs[place], values, {})
                holds = holds and field.tidied(image - following.exact(field)).is_zero
        except Untold:
            holds = False
        if holds:
            staying.append(place)
    return staying


def area_factor(many: ManyStates) -> int:
    """1 or -1 where the derivative of a map of two states has that determinant everywhere; else 0."""
    if many.size != 2:
        return 0
    field = Field(many.watch)
    names = {name: field.named(name) for name in (*many.states, many.parameter)}
    try:
        rows = [
            [field.slope(field.value(program, names, {}), state) for state in many.states]
            for program in many.programs
        ]
        determinant = field.tidied(rows[0][0] * rows[1][1] - rows[0][1] * rows[1][0]).number()
    except Untold:
        return 0
    return int(determinant) if determinant in (1, -1) else 0


def preserves_areas(many: ManyStates, steps: int, mirror: Mirror | None) -> bool:
    """Whether f^steps, seen in the mirror, keeps areas and orientation exactly and everywhere."""
    factor = area_factor(many)
    return bool(factor**steps * (1 if mirror is None else mirror.determinant) == 1)
