"""Formulas as exact quotients, to see that something holds identically and not only within an interval.

A program's value is put together from its names, from the circle constant and from functions of such
values. Two functions are one generator where their arguments are equal; nothing else is taken to be known
about them but parity, values at zero, half turns, and that a square root squared is its argument. So a
formula that comes out as zero is zero wherever it is defined, and one that does not may still be.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass, field
from fractions import Fraction
from math import isqrt

from tinemark.verify.formula import COMPARISONS, Program
from tinemark.verify.quotients import Polynomial, Quotient, Untold, generator, number, reduced
from tinemark.verify.switches import Sides, always, switch_of
from tinemark.verify.watching import Watch

ODD = ("sin", "asin", "atan", "sinh", "tanh")
EVEN = ("cos", "cosh")
UNITS_A_TERM = 0.05
"""Work of one product of terms, in the units of `watching`."""
AT_ZERO = {"sin": 0, "cos": 1, "asin": 0, "atan": 0, "sinh": 0, "cosh": 1, "tanh": 0, "exp": 1, "sqrt": 0}


@dataclass(frozen=True)
class Atom:
    """A function of quotients that counts as a generator; a name or the circle constant has no arguments."""

    function: str
    args: tuple[Quotient, ...] = ()


@dataclass
class Field:
    """Quotients in a growing list of generators."""

    watch: Watch = field(default_factory=Watch)
    atoms: list[Atom] = field(default_factory=list)

    def named(self, name: str) -> Quotient:
        """A name."""
        return self._generator(Atom(f"name {name}"))

    def pi(self) -> Quotient:
        """The circle constant."""
        return self._generator(Atom("pi"))

    def _generator(self, atom: Atom) -> Quotient:
        for place, known in enumerate(self.atoms):
            if known.function == atom.function and all(
                a.equals(b) for a, b in zip(known.args, atom.args, strict=True)
            ):
                return generator(place)
        self.atoms.append(atom)
        return generator(len(self.atoms) - 1)

    def value(self, program: Program, values: Mapping[str, Quotient], sides: Sides) -> Quotient:
        """A program's value where its names have these and every switch is set to a side.

        Raises
        ------
        Untold
            It goes beyond this algebra, or needs a switch that is not set.
        """
        done: dict[int, Quotient] = {}

        def at(place: int) -> Quotient:
            if place not in done:
                done[place] = self._step(program, place, values, sides, at)
            return done[place]

        # In the order they were written, so that a long sum is not a deep one.
        for place in always(program):
            try:
                at(place)
            except Untold:
                continue
        return at(len(program.steps) - 1)

    def _step(
        self,
        program: Program,
        place: int,
        values: Mapping[str, Quotient],
        sides: Sides,
        at: Callable[[int], Quotient],
    ) -> Quotient:
        step = program.steps[place]
        op = step.op
        if op == "number":
            return number(step.value)
        if op == "pi":
            return self.pi()
        if op == "name":
            return values[step.name]
        switch = switch_of(program, place)
        if switch is not None:
            side = sides.get(switch)
            if side is None:
                raise Untold
            if op in COMPARISONS:
                return at(step.args[2 if (side < 0) == (op in ("<", "<=")) else 3])
            if op == "floor":
                return number(side)
            first = at(step.args[0])
            if op == "abs":
                return -first if side < 0 else first
            return first if (side < 0) == (op == "min") else at(step.args[1])
        args = [at(arg) for arg in step.args]
        self._spend(*args, power=abs(int(step.value)) if op == "power" else 1)
        match op:
            case "add":
                return args[0] + args[1]
            case "sub":
                return args[0] - args[1]
            case "neg":
                return -args[0]
            case "mul":
                return args[0] * args[1]
            case "div":
                return args[0] / args[1]
            case "power":
                return self.tidied(args[0].power(int(step.value)))
            case "general power":
                return self._general_power(args[0], args[1])
            case "tan":
                return self.function("sin", args[0]) / self.function("cos", args[0])
            case "acos":
                return self.pi() * number(Fraction(1, 2)) - self.function("asin", args[0])
            case "atan2":
                raise Untold
        return self.function(op, args[0])

    def _spend(self, *args: Quotient, power: int = 1) -> None:
        """Count the work of an operation, by the terms that it has to do with."""
        terms = 1
        for arg in args:
            terms *= len(arg.above) + len(arg.below)
        self.watch.spend(UNITS_A_TERM * (terms + power * power))

    def function(self, name: str, u: Quotient) -> Quotient:
        """A function of one argument."""
        if u.is_zero and name in AT_ZERO:
            return number(AT_ZERO[name])
        known = u.number()
        if name == "log" and known == 1:
            return number(0)
        if name == "sqrt" and known is not None and known > 0:
            top, bottom = isqrt(known.numerator), isqrt(known.denominator)
            if top**2 == known.numerator and bottom**2 == known.denominator:
                return number(Fraction(top, bottom))
        if name in ("sin", "cos"):
            return self._turned(name, u)
        if name == "exp":
            return self._exp(u)
        return self._signed(name, u)

    def _signed(self, name: str, u: Quotient) -> Quotient:
        """A function by its parity."""
        negative = u.above[min(u.above)] < 0
        if negative and name in EVEN:
            return self._generator(Atom(name, (-u,)))
        if negative and name in ODD:
            return -self._generator(Atom(name, (-u,)))
        return self._generator(Atom(name, (u,)))

    def _turned(self, name: str, u: Quotient) -> Quotient:
        """Sine and cosine, with quarter turns taken off the argument."""
        pi = self.pi()
        (whole,) = pi.above
        turns = u.above.get(whole, Fraction(0)) if set(u.below) == {()} else Fraction(0)
        quarters = round(2 * turns)
        rest = u - pi * number(Fraction(quarters, 2))
        if quarters & 1:
            # sin(v + pi/2) = cos v, cos(v + pi/2) = -sin v.
            sign = -1 if name == "cos" else 1
            name = "sin" if name == "cos" else "cos"
            quarters -= 1
        else:
            sign = 1
        if quarters & 2:
            sign = -sign
        if rest.is_zero:
            return number(sign * AT_ZERO[name])
        sixth = pi * number(Fraction(1, 6))
        if name == "sin" and (rest.equals(sixth) or rest.equals(-sixth)):
            return number(Fraction(sign if rest.equals(sixth) else -sign, 2))
        found = self._signed(name, rest)
        return -found if sign < 0 else found

    def _exp(self, u: Quotient) -> Quotient:
        """The exponential of a sum as the product of its terms' exponentials."""
        if set(u.below) != {()}:
            terms = [u]
        else:
            terms = [Quotient({place: value}, u.below) for place, value in u.above.items()]
        result = number(1)
        for term in terms:
            if term.above[min(term.above)] < 0:
                result = result / self._generator(Atom("exp", (-term,)))
            else:
                result = result * self._generator(Atom("exp", (term,)))
        return result

    def _general_power(self, base: Quotient, exponent: Quotient) -> Quotient:
        power = exponent.number()
        if exponent.is_zero or base.equals(number(1)):
            return number(1)
        if power is not None and power.denominator == 1 and abs(power) <= 64:
            return self.tidied(base.power(int(power)))
        if power is not None and power.denominator == 2 and abs(power) <= 64:
            return self.tidied(self.function("sqrt", base).power(power.numerator))
        return self._generator(Atom("power", (base, exponent)))

    def tidied(self, u: Quotient) -> Quotient:
        """The same with squares of square roots replaced by what stands under them."""
        roots = {place for place, atom in enumerate(self.atoms) if atom.function == "sqrt"}
        if not roots:
            return u
        return self._tidied(u.above, roots) / self._tidied(u.below, roots)

    def _tidied(self, polynomial: Polynomial, roots: set[int]) -> Quotient:
        total = number(0)
        for monomial, value in polynomial.items():
            kept = tuple((p, n & 1 if p in roots else n) for p, n in monomial)
            term = reduced({tuple((p, n) for p, n in kept if n): value}, {(): Fraction(1)})
            for p, n in monomial:
                if p in roots and n > 1:
                    term = term * self.atoms[p].args[0].power(n // 2)
            total = total + term
        return total

    # Derivatives and replacements

    def slope(self, u: Quotient, name: str) -> Quotient:
        """Derivative with respect to a name; `Untold` where a function has none here."""
        self._spend(u, u)
        above, below = self._slope_of(u.above, name), self._slope_of(u.below, name)
        # (a/b)' = (a' - (a/b) b') / b
        one: Polynomial = {(): Fraction(1)}
        return self.tidied((above - u * below) / reduced(u.below, one))

    def _slope_of(self, polynomial: Polynomial, name: str) -> Quotient:
        one: Polynomial = {(): Fraction(1)}
        total = number(0)
        for monomial, value in polynomial.items():
            for place, power in monomial:
                inner = self._slope_of_atom(place, name)
                if inner.is_zero:
                    continue
                rest = tuple((p, n - (p == place)) for p, n in monomial if n > (p == place))
                total = total + reduced({rest: value * power}, one) * inner
        return total

    def _slope_of_atom(self, place: int, name: str) -> Quotient:
        atom = self.atoms[place]
        if not atom.args:
            return number(1 if atom.function == f"name {name}" else 0)
        u = atom.args[0]
        own = generator(place)
        if atom.function == "power":
            exponent = atom.args[1]
            return own * (
                self.slope(exponent, name) * self.function("log", u) + exponent * self.slope(u, name) / u
            )
        one = number(1)
        match atom.function:
            case "sin":
                outer = self.function("cos", u)
            case "cos":
                outer = -self.function("sin", u)
            case "exp":
                outer = own
            case "log":
                outer = one / u
            case "sqrt":
                outer = one / (own * number(2))
            case "atan":
                outer = one / (one + u * u)
            case "asin":
                outer = one / self.function("sqrt", one - u * u)
            case "sinh":
                outer = self.function("cosh", u)
            case "cosh":
                outer = self.function("sinh", u)
            case "tanh":
                outer = one - own * own
            case _:
                raise Untold
        return outer * self.slope(u, name)

    def replaced(self, u: Quotient, values: Mapping[str, Quotient]) -> Quotient:
        """The same with names replaced."""
        self._spend(u, u)
        return self.tidied(self._replaced(u.above, values) / self._replaced(u.below, values))

    def _replaced(self, polynomial: Polynomial, values: Mapping[str, Quotient]) -> Quotient:
        total = number(0)
        for monomial, value in polynomial.items():
            term = number(value)
            for place, power in monomial:
                term = term * self._atom_with(place, values).power(power)
            total = total + term
        return total

    def _atom_with(self, place: int, values: Mapping[str, Quotient]) -> Quotient:
        atom = self.atoms[place]
        if not atom.args:
            return values.get(atom.function.removeprefix("name "), generator(place))
        args = [self.replaced(arg, values) for arg in atom.args]
        if atom.function == "power":
            return self._general_power(args[0], args[1])
        return self.function(atom.function, args[0])
