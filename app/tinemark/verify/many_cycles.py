"""Cycles of maps of several states, carried along in intervals with the derivatives that a proof needs.

Coordinates are the states and, as the last one, the swept parameter, which stays as it is. As for one
state, the orbit's box goes on in mean-value form, and derivatives of f^p are put together from those of
f at each point by the chain rule.
"""

from __future__ import annotations

from collections.abc import Collection, Sequence
from dataclasses import dataclass, field
from fractions import Fraction
from itertools import combinations_with_replacement
from math import factorial

from tinemark.verify import intervals as iv
from tinemark.verify.claims import Undecided
from tinemark.verify.formula import Program
from tinemark.verify.intervals import ONE, ZERO, Interval
from tinemark.verify.series import Evaluator, Series, Shape, shape_of

Vector = list[Interval]


@dataclass(frozen=True)
class ManyStates:
    """A map of several states: a program for each, and the names of the states and the swept parameter."""

    programs: tuple[Program, ...]
    states: tuple[str, ...]
    parameter: str

    @property
    def size(self) -> int:
        """How many states."""
        return len(self.states)


@dataclass(frozen=True)
class Carried:
    """f^p on a box.

    Attributes
    ----------
    x
        Where the box ends.
    first
        first[a][i]: derivative of state i in coordinate a.
    second
        second[a, b][i] for a <= b: mixed second derivative; empty where not asked for. Twice in the
        parameter is left out.
    visits
        Boxes at some steps.
    near
        Whether one of the boxes meets what was looked for.
    """

    x: Vector
    first: list[Vector]
    second: dict[tuple[int, int], Vector] = field(default_factory=dict)
    visits: dict[int, Vector] = field(default_factory=dict)
    near: bool = False


def total_degree(size: int, order: int) -> Shape:
    """All monomials up to an order in `size` states and the parameter, the latter at most once."""
    monomials = []
    for degree in range(order + 1):
        for chosen in combinations_with_replacement(range(size + 1), degree):
            exponents = tuple(chosen.count(place) for place in range(size + 1))
            if exponents[-1] <= 1:
                monomials.append(exponents)
    return shape_of(tuple(monomials))


class Local:
    """The map's own derivatives on a box, one evaluation a step."""

    def __init__(self, many: ManyStates, order: int, r: Interval, bits: int) -> None:
        self.many, self.bits, self.order = many, bits, order
        self.shape = total_degree(many.size, order)
        units = (
            [self.shape.place(*(int(i == j) for j in range(many.size + 1))) for i in range(many.size + 1)]
            if order
            else []
        )
        self.units = units
        steady: dict[str, Series] = {many.parameter: {0: r} | ({units[-1]: ONE} if order else {})}
        self.evaluators = [
            Evaluator(program, self.shape, bits, steady, many.states) for program in many.programs
        ]

    def at(self, box: Sequence[Interval]) -> list[Series]:
        """One series a state."""
        values: dict[str, Series] = {
            name: {0: side} | ({self.units[place]: ONE} if self.order else {})
            for place, (name, side) in enumerate(zip(self.many.states, box, strict=True))
        }
        return [evaluate(values) for evaluate in self.evaluators]

    def tensor(self, series: Sequence[Series], order: int) -> list[tuple[tuple[int, ...], Vector]]:
        """Derivatives of one order that are not zero: (sorted coordinates, value of each state)."""
        found = []
        for place, monomial in enumerate(self.shape.monomials):
            if sum(monomial) != order or not any(place in one for one in series):
                continue
            scale = 1
            for exponent in monomial:
                scale *= factorial(exponent)
            factor = iv.of_fraction(Fraction(scale), self.bits)
            values = [iv.mul(factor, one[place], self.bits) if place in one else ZERO for one in series]
            where = tuple(i for i, exponent in enumerate(monomial) for _ in range(exponent))
            found.append((where, values))
        return found


def carried(
    many: ManyStates,
    box: Sequence[Interval],
    r: Interval,
    period: int,
    bits: int,
    *,
    second: bool = False,
    visits: Collection[int] = (),
    look_for: Sequence[Interval] | None = None,
) -> Carried:
    """Carry a box and its derivatives once round; see `Carried`."""
    size = many.size
    centre_r = iv.middle(r, bits)
    spread = iv.sub(r, centre_r, bits)
    local, values = Local(many, 2 if second else 1, r, bits), Local(many, 0, centre_r, bits)
    here = list(box)
    first = [[ONE if i == a else ZERO for i in range(size)] for a in range(size + 1)]
    mixed = {
        (a, b): [ZERO] * size for a in range(size + 1) for b in range(a, size + 1) if second and a < size
    }
    kept: dict[int, Vector] = {}
    near = False
    for step in range(period):
        if step in visits:
            kept[step] = here
        if look_for is not None and not near:
            near = all(iv.sign(iv.sub(x, y, bits)) == 0 for x, y in zip(here, look_for, strict=True))
        series = local.at(here)
        slopes = local.tensor(series, 1)
        if second:
            bends = local.tensor(series, 2)
            for (a, b), values_ab in mixed.items():
                new = linear(slopes, values_ab, None, bits)
                mixed[a, b] = added(
                    new, bilinear(bends, _full(first, a, size), _full(first, b, size), bits), bits
                )
        first = [linear(slopes, column, ONE if a == size else None, bits) for a, column in enumerate(first)]
        middle = [iv.middle(side, bits) for side in here]
        images = [one[0] for one in values.at(middle)]
        offsets = [iv.sub(side, point, bits) for side, point in zip(here, middle, strict=True)]
        here = added(images, linear(slopes, offsets, spread, bits), bits)
        check_bounded(here)
    return Carried(here, first, mixed, kept, near)


def _full(first: Sequence[Vector], a: int, size: int) -> Vector:
    """A column of first derivatives with the parameter's own at the end."""
    return [*first[a], ONE if a == size else ZERO]


def linear(
    slopes: Sequence[tuple[tuple[int, ...], Vector]],
    column: Sequence[Interval],
    own: Interval | None,
    bits: int,
) -> Vector:
    """First derivatives applied to a column of states and, where given, of the parameter."""
    size = len(column)
    total = [ZERO] * size
    for (j,), values in slopes:
        factor = column[j] if j < size else own
        if factor is not None and factor != ZERO:
            for i, value in enumerate(values):
                if value != ZERO:
                    total[i] = iv.add(total[i], iv.mul(value, factor, bits), bits)
    return total


def bilinear(
    bends: Sequence[tuple[tuple[int, ...], Vector]], u: Sequence[Interval], v: Sequence[Interval], bits: int
) -> Vector:
    """Second derivatives applied to two columns in all coordinates."""
    total: Vector | None = None
    for (j, k), values in bends:
        factor = iv.mul(u[j], v[k], bits)
        if j != k:
            factor = iv.add(factor, iv.mul(u[k], v[j], bits), bits)
        terms = [iv.mul(value, factor, bits) for value in values]
        total = terms if total is None else added(total, terms, bits)
    return total if total is not None else [ZERO] * (len(u) - 1)


def trilinear(bends: Sequence[tuple[tuple[int, ...], Vector]], u: Sequence[Interval], bits: int) -> Vector:
    """Third derivatives applied three times to one column in all coordinates."""
    total: Vector | None = None
    for where, values in bends:
        # How many of the ordered triples are this sorted one.
        ways = 6
        for coordinate in set(where):
            ways //= factorial(where.count(coordinate))
        factor = iv.of_fraction(Fraction(ways), bits)
        for coordinate in where:
            factor = iv.mul(factor, u[coordinate], bits)
        terms = [iv.mul(value, factor, bits) for value in values]
        total = terms if total is None else added(total, terms, bits)
    return total if total is not None else [ZERO] * (len(u) - 1)


def added(a: Sequence[Interval], b: Sequence[Interval], bits: int) -> Vector:
    """Sum of two columns."""
    return [iv.add(x, y, bits) for x, y in zip(a, b, strict=True)]


def check_bounded(box: Sequence[Interval]) -> None:
    """Raise `Undecided` where an orbit escapes."""
    for side in box:
        if not iv.is_finite(side) or side[1][2] + side[1][3] > 4096:
            raise Undecided("the orbit escapes")
