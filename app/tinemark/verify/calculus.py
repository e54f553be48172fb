"""Real and complex intervals under one set of operations, for small matrices and for normal forms."""

from __future__ import annotations

from fractions import Fraction
from typing import Protocol, TypeAlias, TypeVar

from mpmath import libmp

from tinemark.verify import intervals as iv
from tinemark.verify.intervals import ONE, ZERO, Interval

Number = TypeVar("Number")
ComplexInterval: TypeAlias = tuple[Interval, Interval]
"""Real and imaginary part."""


class Calculus(Protocol[Number]):
    """What matrices and forms need of numbers, at one precision."""

    zero: Number
    one: Number

    def of(self, x: Interval) -> Number:
        """A real interval as a number."""

    def add(self, x: Number, y: Number) -> Number:
        """Sum."""

    def neg(self, x: Number) -> Number:
        """Negative."""

    def mul(self, x: Number, y: Number) -> Number:
        """Product."""

    def scaled(self, x: Interval, y: Number) -> Number:
        """Product with a real interval."""

    def div(self, x: Number, y: Number) -> Number:
        """Quotient; raises `Undecided` where the divisor may be zero."""

    def conjugate(self, x: Number) -> Number:
        """Conjugate; a real number itself."""

    def differs(self, x: Number) -> bool:
        """Whether a number is known to differ from zero."""

    def size(self, x: Number) -> float:
        """About how large a number is."""


class Real:
    """Intervals."""

    zero: Interval = ZERO
    one: Interval = ONE

    def __init__(self, bits: int) -> None:
        self.bits = bits

    def of(self, x: Interval) -> Interval:
        """A real interval as a number."""
        return x

    def add(self, x: Interval, y: Interval) -> Interval:
        """Sum."""
        total: Interval = iv.add(x, y, self.bits)
        return total

    def neg(self, x: Interval) -> Interval:
        """Negative."""
        turned: Interval = iv.neg(x)
        return turned

    def mul(self, x: Interval, y: Interval) -> Interval:
        """Product."""
        product: Interval = iv.mul(x, y, self.bits)
        return product

    def scaled(self, x: Interval, y: Interval) -> Interval:
        """Product with a real interval."""
        return self.mul(x, y)

    def div(self, x: Interval, y: Interval) -> Interval:
        """Quotient."""
        return iv.div(x, y, self.bits)

    def conjugate(self, x: Interval) -> Interval:
        """Conjugate."""
        return x

    def differs(self, x: Interval) -> bool:
        """Whether a number is known to differ from zero."""
        return iv.sign(x) != 0

    def size(self, x: Interval) -> float:
        """About how large a number is."""
        return abs(_float(x))


class Complex:
    """Pairs of intervals as complex numbers."""

    zero: ComplexInterval = (ZERO, ZERO)
    one: ComplexInterval = (ONE, ZERO)

    def __init__(self, bits: int) -> None:
        self.bits = bits

    def of(self, x: Interval) -> ComplexInterval:
        """A real interval as a number."""
        return x, ZERO

    def add(self, x: ComplexInterval, y: ComplexInterval) -> ComplexInterval:
        """Sum."""
        return iv.add(x[0], y[0], self.bits), iv.add(x[1], y[1], self.bits)

    def neg(self, x: ComplexInterval) -> ComplexInterval:
        """Negative."""
        return iv.neg(x[0]), iv.neg(x[1])

    def mul(self, x: ComplexInterval, y: ComplexInterval) -> ComplexInterval:
        """Product."""
        bits = self.bits
        real = iv.sub(iv.mul(x[0], y[0], bits), iv.mul(x[1], y[1], bits), bits)
        return real, iv.add(iv.mul(x[0], y[1], bits), iv.mul(x[1], y[0], bits), bits)

    def scaled(self, x: Interval, y: ComplexInterval) -> ComplexInterval:
        """Product with a real interval."""
        return iv.mul(x, y[0], self.bits), iv.mul(x, y[1], self.bits)

    def div(self, x: ComplexInterval, y: ComplexInterval) -> ComplexInterval:
        """Quotient."""
        bits = self.bits
        size = iv.add(iv.whole_power(y[0], 2, bits), iv.whole_power(y[1], 2, bits), bits)
        top = self.mul(x, self.conjugate(y))
        return iv.div(top[0], size, bits), iv.div(top[1], size, bits)

    def conjugate(self, x: ComplexInterval) -> ComplexInterval:
        """Conjugate."""
        return x[0], iv.neg(x[1])

    def differs(self, x: ComplexInterval) -> bool:
        """Whether a number is known to differ from zero."""
        return iv.sign(x[0]) != 0 or iv.sign(x[1]) != 0

    def size(self, x: ComplexInterval) -> float:
        """About how large a number is."""
        return abs(complex(_float(x[0]), _float(x[1])))


def _float(x: Interval) -> float:
    return float(libmp.to_float(x[0]))


def half(bits: int) -> Interval:
    """One half, exactly."""
    return iv.of_fraction(Fraction(1, 2), bits)
