"""Quotients of polynomials with rational coefficients, exactly, in generators that are told apart by number.

Two quotients are equal when crosswise products are; nothing is ever cancelled by guessing. Whatever
becomes too large raises `Untold`.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from fractions import Fraction
from typing import TypeAlias

MOST_TERMS = 400
MOST_PRODUCTS = 10_000
MOST_BITS = 4000

Monomial: TypeAlias = tuple[tuple[int, int], ...]
"""(generator, exponent) pairs, rising by generator, exponents above zero."""
Polynomial: TypeAlias = Mapping[Monomial, Fraction]
"""Coefficients that are not zero."""


class Untold(Exception):
    """Algebra does not tell."""


@dataclass(frozen=True)
class Quotient:
    """above / below, the latter not the zero polynomial."""

    above: Polynomial
    below: Polynomial

    @property
    def is_zero(self) -> bool:
        """Whether it is zero."""
        return not self.above

    def number(self) -> Fraction | None:
        """The number it is, if it is one without generators."""
        if not self.above:
            return Fraction(0)
        if set(self.above) == {()} and set(self.below) == {()}:
            return self.above[()] / self.below[()]
        return None

    def __add__(self, other: Quotient) -> Quotient:
        if self.below == other.below:
            return reduced(_plus(self.above, other.above), self.below)
        above = _plus(product(self.above, other.below), product(other.above, self.below))
        return reduced(above, product(self.below, other.below))

    def __neg__(self) -> Quotient:
        return Quotient({place: -value for place, value in self.above.items()}, self.below)

    def __sub__(self, other: Quotient) -> Quotient:
        return self + -other

    def __mul__(self, other: Quotient) -> Quotient:
        return reduced(product(self.above, other.above), product(self.below, other.below))

    def __truediv__(self, other: Quotient) -> Quotient:
        if not other.above:
            raise Untold
        return reduced(product(self.above, other.below), product(self.below, other.above))

    def power(self, n: int) -> Quotient:
        """A whole power."""
        if n < 0:
            return number(1) / self.power(-n)
        result, square = number(1), self
        while n:
            if n & 1:
                result = result * square
            n >>= 1
            if n:
                square = square * square
        return result

    def equals(self, other: Quotient) -> bool:
        """Whether both are the same."""
        return (self - other).is_zero


def number(value: Fraction | int) -> Quotient:
    """A number as a quotient."""
    exact = Fraction(value)
    return Quotient({(): exact} if exact else {}, {(): Fraction(1)})


def generator(place: int) -> Quotient:
    """A generator as a quotient."""
    return Quotient({((place, 1),): Fraction(1)}, {(): Fraction(1)})


def reduced(above: Polynomial, below: Polynomial) -> Quotient:
    """A quotient whose denominator starts with 1, without the powers of generators that all terms share."""
    if not above:
        return number(0)
    shared = _shared([*above, *below])
    if shared:
        above, below = _without(above, shared), _without(below, shared)
    lead = below[min(below)]
    if lead != 1:
        above = {place: value / lead for place, value in above.items()}
        below = {place: value / lead for place, value in below.items()}
    return Quotient(above, below)


def _shared(monomials: list[Monomial]) -> dict[int, int]:
    shared = dict(monomials[0])
    for monomial in monomials[1:]:
        here = dict(monomial)
        shared = {place: min(power, here[place]) for place, power in shared.items() if place in here}
        if not shared:
            break
    return shared


def _without(polynomial: Polynomial, shared: Mapping[int, int]) -> Polynomial:
    return {
        tuple(
            (place, power - shared.get(place, 0)) for place, power in monomial if power > shared.get(place, 0)
        ): value
        for monomial, value in polynomial.items()
    }


def _plus(a: Polynomial, b: Polynomial) -> Polynomial:
    total = dict(a)
    for place, value in b.items():
        _add(total, place, value)
    return total


def product(a: Polynomial, b: Polynomial) -> Polynomial:
    """Product of two polynomials; raises `Untold` where it becomes too large."""
    if len(a) * len(b) > MOST_PRODUCTS:
        raise Untold
    total: dict[Monomial, Fraction] = {}
    for first, value in a.items():
        for second, factor in b.items():
            _add(total, _times(first, second), value * factor)
    if len(total) > MOST_TERMS:
        raise Untold
    return total


def _add(total: dict[Monomial, Fraction], place: Monomial, value: Fraction) -> None:
    new = total.get(place, Fraction(0)) + value
    if not new:
        total.pop(place, None)
        return
    if max(new.numerator.bit_length(), new.denominator.bit_length()) > MOST_BITS:
        raise Untold
    total[place] = new


def _times(a: Monomial, b: Monomial) -> Monomial:
    if not a or not b:
        return a or b
    powers = dict(a)
    for place, power in b:
        powers[place] = powers.get(place, 0) + power
    return tuple(sorted(powers.items()))
