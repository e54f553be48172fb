"""Truncated power series with interval coefficients: derivatives without writing a formula for one.

A series stands for f(X + a, R + b) up to third order in a and to first order in b with at most one a:
the coefficients of 1, a, b, a^2, ab, a^3 (Taylor coefficients, so f_xx is twice that of a^2). Where the
coefficients are taken on a box they enclose those of every point of it. Coefficients known to be zero are
left out. Several states have one a each, and series to second order.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction
from functools import lru_cache
from typing import TypeAlias

from tinemark.verify import intervals as iv
from tinemark.verify.claims import Undecided
from tinemark.verify.formula import COMPARISONS, Instruction, Program
from tinemark.verify.intervals import ONE, Interval
from tinemark.verify.switches import Switch, always, switch_of
from tinemark.verify.taylor import FUNCTIONS, Function

Series: TypeAlias = dict[int, Interval]
"""Coefficients by the place of their monomial in the shape; place 0 is the value."""


@dataclass(frozen=True)
class Shape:
    """Which monomials are carried, as tuples of exponents; the first is the constant.

    `products[i]` lists (j, k) with monomial i times monomial j being monomial k of the shape.
    """

    monomials: tuple[tuple[int, ...], ...]
    products: tuple[tuple[tuple[int, int], ...], ...]
    order: int

    def place(self, *exponents: int) -> int:
        """Place of a monomial."""
        return self.monomials.index(exponents)


@lru_cache(maxsize=16)
def shape_of(monomials: tuple[tuple[int, ...], ...]) -> Shape:
    """The shape of a set of monomials that holds every factor of its members, the constant first."""
    places = {monomial: place for place, monomial in enumerate(monomials)}
    products = []
    for first in monomials:
        row = []
        for place, second in enumerate(monomials):
            product = tuple(a + b for a, b in zip(first, second, strict=True))
            if product in places:
                row.append((place, places[product]))
        products.append(tuple(row))
    return Shape(monomials, tuple(products), max(sum(monomial) for monomial in monomials))


VALUE = shape_of(((0, 0),))
SLOPE = shape_of(((0, 0), (1, 0)))
SLOPES = shape_of(((0, 0), (1, 0), (0, 1)))
ONE_STATE = shape_of(((0, 0), (1, 0), (0, 1), (2, 0), (1, 1), (3, 0)))


SWITCHING = (*COMPARISONS, "min", "max", "abs", "floor")


class Touching(Undecided):
    """An interval touches a switching surface; says which."""

    def __init__(self, switch: Switch) -> None:
        super().__init__("the orbit touches a switching surface of the formula")
        self.switch = switch


class Evaluator:
    """Evaluates a program on series of one shape at one precision.

    Steps that depend on none of the `moving` names are worked out once.
    """

    def __init__(
        self, program: Program, shape: Shape, bits: int, steady: Mapping[str, Series], moving: Sequence[str]
    ) -> None:
        self.steps, self.shape, self.bits = program.steps, shape, bits
        self.steady = steady
        self.moves = _moving(program, frozenset(moving))
        self.known: dict[int, Series] = {}
        self.always = always(program)
        self.switch = {
            place: switch
            for place in range(len(program.steps))
            if (switch := switch_of(program, place)) is not None
        }

    def __call__(self, values: Mapping[str, Series], sides: dict[Switch, int] | None = None) -> Series:
        """The program's series where the moving names have these.

        Parameters
        ----------
        sides
            Switches that are set to a side, whatever the values say; every other one that is met is told by
            the values and put in.

        Raises
        ------
        Undecided
            An interval leaves a function's domain.
        Touching
            It touches a switching surface.
        """
        done = self._done(values, sides)
        return self._step(len(self.steps) - 1, values, done, sides)

    def difference(self, place: int, values: Mapping[str, Series], sides: dict[Switch, int]) -> Series:
        """What the switch at a step compares: its first argument less its second, or its only one."""
        done: dict[int, Series] = {}
        step = self.steps[place]
        first = self._step(step.args[0], values, done, sides)
        if step.op == "floor" or step.op == "abs":
            return first
        return self._sum(first, self._negative(self._step(step.args[1], values, done, sides)))

    def _done(self, values: Mapping[str, Series], sides: dict[Switch, int] | None) -> dict[int, Series]:
        done: dict[int, Series] = {}
        if sides is not None:
            # What does not move may still hang on a switch that is set otherwise next time.
            self.known = {}
        # In the order they were written, so that a long sum is not a deep one; branches only as needed.
        for place in self.always:
            self._step(place, values, done, sides)
        return done

    def _step(
        self,
        place: int,
        values: Mapping[str, Series],
        done: dict[int, Series],
        sides: dict[Switch, int] | None,
    ) -> Series:
        keep = done if self.moves[place] else self.known
        if place not in keep:
            step = self.steps[place]
            if step.op in SWITCHING:
                keep[place] = self._switched(place, step, values, done, sides)
            else:
                args = [self._step(arg, values, done, sides) for arg in step.args]
                keep[place] = self._work(step, args, values)
        return keep[place]

    def _switched(
        self,
        place: int,
        step: Instruction,
        values: Mapping[str, Series],
        done: dict[int, Series],
        sides: dict[Switch, int] | None,
    ) -> Series:
        at = [self._step(arg, values, done, sides) for arg in step.args[:2]]
        switch = self.switch[place]
        side = None if sides is None else sides.get(switch)
        if side is None:
            side = self._side(step, switch, at)
            if sides is not None:
                sides[switch] = side
        if step.op in COMPARISONS:
            chosen = step.args[2 if (side < 0) == (step.op in ("<", "<=")) else 3]
            return self._step(chosen, values, done, sides)
        if step.op == "floor":
            return {0: iv.of_whole(side)}
        if step.op == "abs":
            return self._negative(at[0]) if side < 0 else at[0]
        return at[0] if (side < 0) == (step.op == "min") else at[1]

    def _side(self, step: Instruction, switch: Switch, at: Sequence[Series]) -> int:
        if step.op == "floor":
            whole = iv.whole_part(at[0][0])
            if whole is None:
                raise Touching(switch)
            return whole
        value = at[0][0] if step.op == "abs" else iv.sub(at[0][0], at[1][0], self.bits)
        side = iv.sign(value)
        if side == 0:
            raise Touching(switch)
        return side

    def _work(self, step: Instruction, args: Sequence[Series], values: Mapping[str, Series]) -> Series:
        op, bits = step.op, self.bits
        if op == "number":
            return {0: iv.of_fraction(step.value, bits)}
        if op == "pi":
            return {0: iv.pi(bits)}
        if op == "name":
            return values[step.name] if step.name in values else self.steady[step.name]
        match op:
            case "add":
                return self._sum(args[0], args[1])
            case "sub":
                return self._sum(args[0], self._negative(args[1]))
            case "neg":
                return self._negative(args[0])
            case "mul":
                return self._product(args[0], args[1])
            case "div":
                return self._quotient(args[0], args[1])
            case "power":
                return self._power(args[0], int(step.value))
            case "general power":
                return self._of(FUNCTIONS["exp"], self._product(args[1], self._of(FUNCTIONS["log"], args[0])))
            case "atan2":
                return self._angle(args[0], args[1])
            case "tan":
                return self._quotient(
                    self._of(FUNCTIONS["sin"], args[0]), self._of(FUNCTIONS["cos"], args[0])
                )
            case "acos":
                quarter: Series = {0: iv.half_pi(bits)}
                return self._sum(quarter, self._negative(self._of(FUNCTIONS["asin"], args[0])))
        return self._of(FUNCTIONS[op], args[0])

    def _sum(self, a: Series, b: Series) -> Series:
        if len(a) < len(b):
            a, b = b, a
        result = dict(a)
        for place, value in b.items():
            result[place] = iv.add(result[place], value, self.bits) if place in result else value
        return result

    def _negative(self, a: Series) -> Series:
        return {place: iv.neg(value) for place, value in a.items()}

    def _product(self, a: Series, b: Series) -> Series:
        if a is b:
            return self._square(a)
        bits = self.bits
        result: Series = {}
        for first, value in a.items():
            for second, place in self.shape.products[first]:
                if second in b:
                    term = iv.mul(value, b[second], bits)
                    result[place] = iv.add(result[place], term, bits) if place in result else term
        return result

    def _square(self, a: Series) -> Series:
        """Square of a series; the interval of a square is narrower than that of a product."""
        return self._product(a, dict(a)) | {0: iv.whole_power(a[0], 2, self.bits)}

    def _power(self, a: Series, n: int) -> Series:
        """Whole power by the chain rule, so that a occurs once in each coefficient."""
        if n == 0:
            return {0: ONE}
        if n < 0:
            return self._quotient({0: ONE}, self._power(a, -n))
        coefficients, factor = [], Fraction(1)
        for order in range(self.shape.order + 1):
            if order > n:
                break
            power = iv.whole_power(a[0], n - order, self.bits)
            coefficients.append(iv.mul(iv.of_fraction(factor, self.bits), power, self.bits))
            factor = factor * (n - order) / (order + 1)
        return self._compose(coefficients, a)

    def _quotient(self, a: Series, b: Series) -> Series:
        if list(b) == [0]:
            return {place: iv.div(value, b[0], self.bits) for place, value in a.items()}
        # 1/(b0 + e) = 1/b0 - e/b0^2 + e^2/b0^3 - ...
        inverse = iv.div(ONE, b[0], self.bits)
        coefficients = [inverse]
        for _ in range(self.shape.order):
            coefficients.append(iv.neg(iv.mul(coefficients[-1], inverse, self.bits)))
        return self._product(a, self._compose(coefficients, b))

    def _angle(self, y: Series, x: Series) -> Series:
        """Angle of the point (x, y), away from the cut along the negative x axis."""
        if iv.sign(x[0]) > 0:
            return self._of(FUNCTIONS["atan"], self._quotient(y, x))
        side = iv.sign(y[0])
        if side == 0:
            raise Undecided("the orbit touches the cut of atan2")
        quarter = iv.half_pi(self.bits)
        start: Series = {0: quarter if side > 0 else iv.neg(quarter)}
        return self._sum(start, self._negative(self._of(FUNCTIONS["atan"], self._quotient(x, y))))

    def _of(self, function: Function, a: Series) -> Series:
        """A function of one argument applied to a series."""
        order = self.shape.order if len(a) > 1 else 0
        return self._compose(function(a[0], order, self.bits), a)

    def _compose(self, coefficients: Sequence[Interval], a: Series) -> Series:
        """Sum c0 + c1 e + c2 e^2 + ... with e what a has beyond its value, by Horner's rule."""
        beyond = {place: value for place, value in a.items() if place}
        if not beyond or len(coefficients) == 1:
            return {0: coefficients[0]}
        result: Series = {0: coefficients[-1]}
        for coefficient in reversed(coefficients[:-1]):
            result = self._product(result, beyond) | {0: coefficient}
        return result


def _moving(program: Program, names: frozenset[str]) -> list[bool]:
    moves: list[bool] = []
    for step in program.steps:
        moves.append(step.name in names if step.op == "name" else any(moves[place] for place in step.args))
    return moves
