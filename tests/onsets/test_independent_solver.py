"""The engine against mpmath as an independent solver: five maps, eight levels each.

The maps are written by hand, derivatives come from dual numbers written here, and mpmath's own solver
finds the root: no formula reader, derivative, Newton step or ball of ours takes part.
"""

from __future__ import annotations

from dataclasses import dataclass
from fractions import Fraction
from typing import Any

import mpmath
import pytest
from known_onsets import KnownLadder, ladder
from running import climb, system_of

from tinemark.onsets.results import Status

LEVELS = 8
DECIMALS = 40


@dataclass(frozen=True)
class Dual:
    """A value and its derivative in the starting point."""

    value: Any
    slope: Any

    def __add__(self, other: Any) -> Dual:
        other = _dual(other)
        return Dual(self.value + other.value, self.slope + other.slope)

    def __mul__(self, other: Any) -> Dual:
        other = _dual(other)
        return Dual(self.value * other.value, self.value * other.slope + self.slope * other.value)

    def __truediv__(self, other: Any) -> Dual:
        other = _dual(other)
        quotient = self.value / other.value
        return Dual(quotient, (self.slope - quotient * other.slope) / other.value)

    def __pow__(self, power: int) -> Dual:
        return Dual(self.value**power, power * self.value ** (power - 1) * self.slope)

    def __neg__(self) -> Dual:
        return Dual(-self.value, -self.slope)

    def __sub__(self, other: Any) -> Dual:
        return self + -_dual(other)

    def __rsub__(self, other: Any) -> Dual:
        return _dual(other) - self

    __radd__ = __add__
    __rmul__ = __mul__


def _dual(value: Any) -> Dual:
    return value if isinstance(value, Dual) else Dual(value, 0)


class DualMath:
    """The functions that the known maps use, over dual numbers."""

    pi = mpmath.pi

    @staticmethod
    def exp(x: Dual) -> Dual:
        """Exponential."""
        value = mpmath.exp(x.value)
        return Dual(value, value * x.slope)

    @staticmethod
    def sin(x: Dual) -> Dual:
        """Sine."""
        return Dual(mpmath.sin(x.value), mpmath.cos(x.value) * x.slope)


def _equations(known: KnownLadder, period: int) -> Any:
    def equations(x: Any, r: Any) -> tuple[Any, Any]:
        point = Dual(x, mpmath.mpf(1))
        for _ in range(period):
            point = _dual(known.formula(point, r, DualMath))
        return point.value - x, point.slope + 1

    return equations


def _start(known: KnownLadder, level: int) -> tuple[Any, Any]:
    """A rough place: the known value to ten digits, and an orbit settled a little before it."""
    r = float(known.onsets[level])
    before = float(known.onsets[level - 1]) if level else float(known.start)
    x = known.attracted
    for _ in range(20000):
        x = known.formula(x, r - 0.05 * (r - before))
    return mpmath.mpf(x), mpmath.mpf(f"{r:.10g}") + mpmath.mpf(10) ** -11


@pytest.mark.parametrize("name", ["logistic", "ricker", "sine", "Hassell", "Gaussian 6.2"])
def test_eight_levels_against_mpmath(name: str) -> None:
    """mpmath's root lies inside every proved interval, whose own width is far below its digits."""
    known = ladder(name)
    result = climb(system_of(known.system, known.values), known.start, known.stop, levels=LEVELS, digits=25)
    assert len(result.levels) == LEVELS
    with mpmath.workdps(DECIMALS):
        for level, found in enumerate(result.levels):
            root = mpmath.findroot(
                _equations(known, 2**level), _start(known, level), tol=mpmath.mpf(10) ** -60, maxsteps=12
            )
            value = Fraction(mpmath.nstr(root[1], 36))
            assert found.onset.status is Status.PROVED
            slack = Fraction(1, 10**28) * max(1, abs(value))
            assert Fraction(found.onset.lower) - slack <= value <= Fraction(found.onset.upper) + slack
