"""Truncated power series whose coefficients are intervals of whole numbers of a small unit.

Taylor coefficients in time, scaled to one step, fall off fast, and what counts of them is their size
against the state, not their own digits. So all of one integration are counted in the same unit 2^-bits:
sums are exact, and a sum of products is rounded outward once.
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from fractions import Fraction
from typing import TypeAlias

from mpmath import libmp

from tinemark.verify import intervals as iv
from tinemark.verify.claims import Undecided
from tinemark.verify.intervals import ONE, Interval
from tinemark.verify.series import Series, Shape
from tinemark.verify.taylor import FUNCTIONS
from tinemark.verify.watching import Watch

Side: TypeAlias = tuple[int, int]
"""Lower and upper end, in units."""
Jet: TypeAlias = dict[int, Side]
"""Coefficients by the place of their monomial in the shape; those known to be zero are left out."""

LARGEST = 512
"""Powers of two beyond which a state is taken to have escaped."""
PRODUCTS_A_UNIT = 100
"""Products of two coefficients that count as one unit of work."""


class Jets:
    """Arithmetic on power series of one shape in units of 2^-bits."""

    def __init__(self, shape: Shape, bits: int, watch: Watch) -> None:
        self.shape, self.bits, self.watch = shape, bits, watch
        self.one: Jet = {0: (1 << bits, 1 << bits)}
        self._rows = shape.products

    def side(self, x: Interval) -> Side:
        """An interval in units, rounded outward."""
        if not iv.is_finite(x) or iv.size_power(x) > LARGEST or iv.size_power(iv.neg(x)) > LARGEST:
            raise Undecided("the orbit escapes")
        return self._units(x[0]), -self._units(libmp.mpf_neg(x[1]))

    def _units(self, end: tuple[int, int, int, int]) -> int:
        """Whole units at or below an end."""
        sign, mantissa, exponent, _ = end
        whole = -int(mantissa) if sign else int(mantissa)
        shift = int(exponent) + self.bits
        return whole << shift if shift >= 0 else whole >> -shift

    def interval(self, side: Side) -> Interval:
        """Exactly the interval that a coefficient is."""
        low, high = (libmp.from_man_exp(end, -self.bits) for end in side)
        return low, high

    def jet(self, series: Series) -> Jet:
        """A series of intervals in units."""
        return {place: self.side(value) for place, value in series.items()}

    def series(self, jet: Jet) -> Series:
        """A series of intervals."""
        return {place: self.interval(side) for place, side in jet.items()}

    def constant(self, value: Fraction) -> Jet:
        """A rational."""
        if value == 0:
            return {}
        top = value.numerator << self.bits
        return {0: (top // value.denominator, -(-top // value.denominator))}

    def sum(self, a: Jet, b: Jet) -> Jet:
        """Sum."""
        if not b:
            return a
        found = dict(a)
        for place, (low, high) in b.items():
            if place in found:
                other = found[place]
                found[place] = (other[0] + low, other[1] + high)
            else:
                found[place] = (low, high)
        return found

    def negative(self, a: Jet) -> Jet:
        """Negative."""
        return {place: (-high, -low) for place, (low, high) in a.items()}

    def scaled(self, a: Jet, factor: Fraction) -> Jet:
        """Product with a rational."""
        top, bottom = factor.numerator, factor.denominator
        found = {}
        for place, (low, high) in a.items():
            first, second = (low * top, high * top) if top >= 0 else (high * top, low * top)
            found[place] = (first // bottom, -(-second // bottom))
        return found

    def product(self, a: Jet, b: Jet) -> Jet:
        """Product."""
        return self.products([(1, a, b)])

    def products(self, terms: Iterable[tuple[int, Jet, Jet]], divisor: int = 1) -> Jet:
        """Sum of products with whole weights that are not negative, divided by a positive whole number."""
        rows = self._rows
        lows: dict[int, int] = {}
        highs: dict[int, int] = {}
        count = 0
        for weight, a, b in terms:
            if len(b) < len(a):
                a, b = b, a
            for first, (al, ah) in a.items():
                if weight != 1:
                    al, ah = al * weight, ah * weight
                for second, place in rows[first]:
                    if second not in b:
                        continue
                    bl, bh = b[second]
                    count += 1
                    if al >= 0:
                        low = (al if bl >= 0 else ah) * bl
                        high = (ah if bh >= 0 else al) * bh
                    elif ah <= 0:
                        low = (al if bh >= 0 else ah) * bh
                        high = (ah if bl >= 0 else al) * bl
                    elif bl >= 0:
                        low, high = al * bh, ah * bh
                    elif bh <= 0:
                        low, high = ah * bl, al * bl
                    else:
                        low, high = min(al * bh, ah * bl), max(al * bl, ah * bh)
                    if place in lows:
                        lows[place] += low
                        highs[place] += high
                    else:
                        lows[place], highs[place] = low, high
        self.watch.spend(count / PRODUCTS_A_UNIT)
        whole = divisor << self.bits
        return {place: (low // whole, -(-highs[place] // whole)) for place, low in lows.items()}

    def inverse(self, a: Jet) -> Jet:
        """One divided by a series; raises `Undecided` where that may be by zero."""
        value = iv.div(ONE, self.interval(a.get(0, (0, 0))), self._working)
        coefficients = [value]
        for _ in range(self.shape.order):
            coefficients.append(iv.neg(iv.mul(coefficients[-1], value, self._working)))
        return self._composed(coefficients, a)

    def function(self, name: str, a: Jet) -> Jet:
        """A function of one argument; raises `Undecided` where it is not defined."""
        order = self.shape.order if len(a) > 1 else 0
        return self._composed(FUNCTIONS[name](self.interval(a.get(0, (0, 0))), order, self._working), a)

    @property
    def _working(self) -> int:
        return self.bits + 16

    def _composed(self, coefficients: Sequence[Interval], a: Jet) -> Jet:
        """Sum c0 + c1 e + c2 e^2 + … with e what a has beyond its value, by Horner's rule."""
        sides = [self.side(value) for value in coefficients]
        beyond = {place: side for place, side in a.items() if place}
        if not beyond:
            return {0: sides[0]}
        found: Jet = {0: sides[-1]}
        for side in reversed(sides[:-1]):
            found = self.product(found, beyond) | {0: side}
        return found
