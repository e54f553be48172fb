"""Cycles of maps of several states, carried along in intervals with the derivatives that a proof needs.

Coordinates are the states and, as the last one, the swept parameter, which stays as it is. As for one
state, the orbit's box goes on in mean-value form, here in frames that turn with it, and derivatives of
f^p are put together from those of f at each point by the chain rule.
"""

from __future__ import annotations

from collections.abc import Collection, Iterator, Sequence
from dataclasses import dataclass, field
from fractions import Fraction
from itertools import combinations_with_replacement
from math import factorial

from tinemark.verify import frames
from tinemark.verify import intervals as iv
from tinemark.verify.calculus import Calculus, Number, Real
from tinemark.verify.claims import Undecided
from tinemark.verify.formula import Program
from tinemark.verify.frames import Rows
from tinemark.verify.intervals import ONE, ZERO, Interval
from tinemark.verify.series import Evaluator, Series, Shape, shape_of
from tinemark.verify.switches import Sides, Switch
from tinemark.verify.watching import Watch, cost_of

Vector = list[Interval]
Tensor = Sequence[tuple[tuple[int, ...], Vector]]
"""Derivatives of one order that are not zero: (sorted coordinates, value of each state)."""


@dataclass(frozen=True)
class ManyStates:
    """A map of several states: a program for each, and the names of the states and the swept parameter."""

    programs: tuple[Program, ...]
    states: tuple[str, ...]
    parameter: str
    watch: Watch = field(default_factory=Watch, compare=False)

    @property
    def size(self) -> int:
        """How many states."""
        return len(self.states)

    @property
    def operations(self) -> int:
        """Steps of all formulas."""
        return sum(len(program.steps) for program in self.programs)

    def cost(self, bits: int, order: int) -> float:
        """Work of one step with derivatives up to an order."""
        many_at_once = float((self.size + 1) ** order) / 6
        return cost_of(self.operations + 4 * self.size**2, bits) * many_at_once

    def steps_of(self, period: int) -> int:
        """How many steps of an orbit are so many of the map."""
        return period

    def passed(self, step: int) -> int | None:
        """How many of the map's steps are done at a step of an orbit; None within one of them."""
        return step

    def local(self, order: int, r: Interval, bits: int) -> Local:
        """What tells the map's derivatives up to an order."""
        return Formulas(self, order, r, bits)


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

    @property
    def rows(self) -> Rows:
        """The derivative in the states, row by row."""
        size = len(self.x)
        return [[self.first[j][i] for j in range(size)] for i in range(size)]


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
    """Derivatives on a box of what an orbit does in one step.

    Parameters
    ----------
    r
        The swept parameter.
    """

    def __init__(self, many: ManyStates, order: int, r: Interval, bits: int) -> None:
        self.many, self.bits, self.order, self.r = many, bits, order, r
        self.shape = total_degree(many.size, order)
        self.units = (
            [self.shape.place(*(int(i == j) for j in range(many.size + 1))) for i in range(many.size + 1)]
            if order
            else []
        )

    def at(self, step: int, box: Sequence[Interval], sides: dict[Switch, int] | None = None) -> list[Series]:
        """One series a state; `sides` as `series.Evaluator` takes it."""
        raise NotImplementedError

    def parameter(self) -> Series:
        """The swept parameter as a series."""
        return {0: self.r} | ({self.units[-1]: ONE} if self.order else {})

    def values(self, box: Sequence[Interval]) -> dict[str, Series]:
        """The states as series."""
        return {
            name: {0: side} | ({self.units[place]: ONE} if self.order else {})
            for place, (name, side) in enumerate(zip(self.many.states, box, strict=True))
        }

    def tensor(self, series: Sequence[Series], order: int) -> Tensor:
        """Derivatives of one order that are not zero."""
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


class Formulas(Local):
    """A map's own derivatives, one evaluation a step."""

    def __init__(self, many: ManyStates, order: int, r: Interval, bits: int) -> None:
        super().__init__(many, order, r, bits)
        steady = {many.parameter: self.parameter()}
        self.evaluators = [
            Evaluator(program, self.shape, bits, steady, many.states) for program in many.programs
        ]

    def at(self, step: int, box: Sequence[Interval], sides: dict[Switch, int] | None = None) -> list[Series]:
        """One series a state; every step is the same."""
        del step
        values = self.values(box)
        return [evaluate(values, sides) for evaluate in self.evaluators]


@dataclass(frozen=True)
class Stretch:
    """One step of the orbit of a box.

    Attributes
    ----------
    here, after
        Upright boxes before and after the step.
    map, push
        Derivatives of f in the states and in the parameter, from this step's frame to the next one's.
    frame, back
        This step's frame, and the inverse of the next one's.
    next_frame
        The next step's frame.
    bends, twists
        Second and third derivatives, in upright coordinates; empty where not asked for.
    """

    here: Vector
    after: Vector
    map: Rows
    push: Vector
    frame: Rows
    back: Rows
    next_frame: Rows
    bends: Tensor
    twists: Tensor

    def shown(self, numbers: Calculus[Number], column: Sequence[Number]) -> list[Number]:
        """A column of this step's frame in upright coordinates."""
        return matrix_times(numbers, self.frame, column)

    def framed(self, numbers: Calculus[Number], column: Sequence[Number]) -> list[Number]:
        """A column in upright coordinates, after the step, in the next step's frame."""
        return matrix_times(numbers, self.back, column)


def walk(
    many: ManyStates,
    box: Sequence[Interval],
    r: Interval,
    period: int,
    bits: int,
    order: int,
    sides: Sides | None = None,
) -> Iterator[Stretch]:
    """Carry a box once round, with the map's derivatives up to an order; first and last frame are upright.

    `sides` are switches that are set at the first point, whatever the box says.

    Raises
    ------
    Undecided
        The orbit escapes, leaves a domain or touches a switching surface.
    """
    size = many.size
    centre_r = iv.middle(r, bits)
    spread = iv.sub(r, centre_r, bits)
    local, values = many.local(order, r, bits), many.local(0, centre_r, bits)
    upright = frames.unit(size)
    frame = upright
    here = list(box)
    middle = [iv.middle(side, bits) for side in here]
    offsets = [iv.sub(side, point, bits) for side, point in zip(here, middle, strict=True)]
    cost = many.cost(bits, order)
    steps = many.steps_of(period)
    for step in range(steps):
        many.watch.spend(cost)
        series = local.at(step, here, chosen(sides, step))
        slopes = local.tensor(series, 1)
        rows = [[ZERO] * size for _ in range(size)]
        push = [ZERO] * size
        for (j,), column in slopes:
            for i, value in enumerate(column):
                if j == size:
                    push[i] = value
                else:
                    rows[i][j] = value
        if frame is not upright:
            rows = frames.product(rows, frame, bits)
        following = frames.turned(rows) if step < steps - 1 else None
        if following is None:
            following = back = upright
        else:
            back = frames.inverse(following, bits)
            rows = frames.product(back, rows, bits)
            push = frames.applied(back, push, bits)
        images = [one[0] for one in values.at(step, middle, chosen(sides, step))]
        middle = [iv.middle(side, bits) for side in images]
        missed = [iv.sub(side, point, bits) for side, point in zip(images, middle, strict=True)]
        offsets = added(frames.applied(rows, offsets, bits), frames.applied(back, missed, bits), bits)
        offsets = [iv.add(x, iv.mul(y, spread, bits), bits) for x, y in zip(offsets, push, strict=True)]
        after = added(middle, frames.applied(following, offsets, bits), bits)
        check_bounded(after)
        bends = local.tensor(series, 2) if order > 1 else ()
        twists = local.tensor(series, 3) if order > 2 else ()
        yield Stretch(here, after, rows, push, frame, back, following, bends, twists)
        here, frame = after, following


def chosen(sides: Sides | None, step: int) -> dict[Switch, int] | None:
    """Switches to set at a step."""
    return None if sides is None or step else dict(sides)


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
    sides: Sides | None = None,
) -> Carried:
    """Carry a box and its derivatives once round; see `Carried`."""
    size = many.size
    real = Real(bits)
    first = [[ONE if i == a else ZERO for i in range(size)] for a in range(size + 1)]
    mixed = {
        (a, b): [ZERO] * size for a in range(size + 1) for b in range(a, size + 1) if second and a < size
    }
    kept: dict[int, Vector] = {}
    near = False
    here = list(box)
    for step, stretch in enumerate(walk(many, box, r, period, bits, 2 if second else 1, sides)):
        passed = many.passed(step)
        if passed is not None and passed in visits:
            kept[passed] = stretch.here
        if passed is not None and look_for is not None and not near:
            near = all(iv.sign(iv.sub(x, y, bits)) == 0 for x, y in zip(stretch.here, look_for, strict=True))
        if second:
            full = [[*stretch.shown(real, column), ZERO] for column in first]
            full[size][size] = ONE
            for (a, b), column in mixed.items():
                bent = stretch.framed(real, bilinear(real, stretch.bends, full[a], full[b]))
                mixed[a, b] = added(frames.applied(stretch.map, column, bits), bent, bits)
        first = [frames.applied(stretch.map, column, bits) for column in first]
        first[size] = added(first[size], stretch.push, bits)
        here = stretch.after
    return Carried(here, first, mixed, kept, near)


def matrix_times(numbers: Calculus[Number], rows: Rows, column: Sequence[Number]) -> list[Number]:
    """A real matrix applied to a column."""
    found = []
    for row in rows:
        total = numbers.zero
        for entry, value in zip(row, column, strict=True):
            if entry != ZERO and value != numbers.zero:
                total = numbers.add(total, numbers.scaled(entry, value))
        found.append(total)
    return found


def bilinear(
    numbers: Calculus[Number], bends: Tensor, u: Sequence[Number], v: Sequence[Number]
) -> list[Number]:
    """Second derivatives applied to two columns in all coordinates."""
    total = [numbers.zero] * (len(u) - 1)
    for (j, k), values in bends:
        factor = numbers.mul(u[j], v[k])
        if j != k:
            factor = numbers.add(factor, numbers.mul(u[k], v[j]))
        if factor != numbers.zero:
            _add_scaled(numbers, total, values, factor)
    return total


def trilinear(
    numbers: Calculus[Number],
    twists: Tensor,
    u: Sequence[Number],
    v: Sequence[Number],
    w: Sequence[Number],
) -> list[Number]:
    """Third derivatives applied to three columns in all coordinates."""
    total = [numbers.zero] * (len(u) - 1)
    for where, values in twists:
        factor = numbers.zero
        for i, j, k in _orders(where):
            factor = numbers.add(factor, numbers.mul(u[i], numbers.mul(v[j], w[k])))
        if factor != numbers.zero:
            _add_scaled(numbers, total, values, factor)
    return total


def _orders(where: tuple[int, ...]) -> set[tuple[int, int, int]]:
    i, j, k = where
    return {(i, j, k), (i, k, j), (j, i, k), (j, k, i), (k, i, j), (k, j, i)}


def _add_scaled(
    numbers: Calculus[Number], total: list[Number], values: Sequence[Interval], factor: Number
) -> None:
    for i, value in enumerate(values):
        if value != ZERO:
            total[i] = numbers.add(total[i], numbers.scaled(value, factor))


def added(a: Sequence[Interval], b: Sequence[Interval], bits: int) -> Vector:
    """Sum of two columns."""
    return [iv.add(x, y, bits) for x, y in zip(a, b, strict=True)]


def check_bounded(box: Sequence[Interval]) -> None:
    """Raise `Undecided` where an orbit escapes."""
    for side in box:
        if not iv.is_finite(side) or side[1][2] + side[1][3] > 4096:
            raise Undecided("the orbit escapes")
