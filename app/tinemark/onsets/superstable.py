"""Superstable cycles of a ladder: those that pass through a turning point of the map.

Between the flips that begin and end a cycle of a cascade its multiplier goes from +1 to -1, and is zero once:
there the cycle holds a turning point x_c of the map, f^p(x_c) = x_c. That is one equation in the parameter.
It is solved by the secant method from a place that the levels before predict, or between the two flips by
bisection where none do. The turning point itself is bisected on the sign of f_x, so that a maximum of any
order serves, also one at the kink of an absolute value's higher derivatives, where f_x has no simple zero.
"""

from __future__ import annotations

from collections.abc import Generator, Sequence
from dataclasses import dataclass
from fractions import Fraction
from typing import Any

from flint import arb

from tinemark.onsets.ball_orbits import ball_loops, ball_of, fraction_of, in_chunks, precision
from tinemark.onsets.float_map import float_map
from tinemark.onsets.one_map import OneMap
from tinemark.onsets.proofs import prime_factors
from tinemark.onsets.results import Step
from tinemark.onsets.scaling_steps import extrapolated
from tinemark.systems.balls import ball_function
from tinemark.systems.errors import SwitchingTouched

RELATIVE_BITS = 80
"""Bits to which a superstable parameter is placed within its gap."""
BISECTIONS = 12
"""Halvings of a gap before the secant method takes over, where no level before predicts."""
MOST_SECANTS = 40
FIRST_BRACKET = 2.0**-30
"""Half-width, as a share of the state's scale, of the first bracket tried around a turning point."""
WIDEST_BRACKET = 2.0**-3


class NoSuperstable(Exception):
    """No superstable cycle where one must lie; says why."""


@dataclass(frozen=True)
class Superstable:
    """The superstable cycle between two flips of a ladder.

    Attributes
    ----------
    level
        That of the flip in which the cycle was born.
    period, parameter
        The cycle's period, and the parameter value to `RELATIVE_BITS` bits of the gap.
    distance
        From the turning point to the cycle's point nearest to it, half a period on, with its sign.
    folded
        The same one step of the map later.
    """

    level: int
    period: int
    parameter: Fraction
    distance: Fraction
    folded: Fraction


def superstable_cycles(
    one: OneMap, base_period: int, flips: Sequence[Fraction]
) -> Generator[Step | Superstable, None, None]:
    """The superstable cycles born in successive flips of a ladder, the last flip's included.

    Parameters
    ----------
    base_period
        Least period of the cycle that the first flip splits.
    flips
        Parameter values of levels 1, 2, ...; at least two.

    Yields
    ------
    Step or Superstable
        Progress, and one cycle a level.

    Raises
    ------
    NoSuperstable
        No turning point of the map lies on a cycle between two of the flips.
    """
    search = yield from _turning_search(one, base_period, flips)
    shares: list[Fraction] = []
    for level in range(1, len(flips) + 1):
        gap = flips[level] - flips[level - 1] if level < len(flips) else _next_gap(flips)
        found = yield from search.between(level, flips[level - 1], gap, shares)
        shares.append((found.parameter - flips[level - 1]) / gap)
        yield found


def _next_gap(flips: Sequence[Fraction]) -> Fraction:
    following = extrapolated(flips)
    if following is None or len(flips) < 4:
        raise NoSuperstable("the flips do not tell how far the last cycle reaches")
    return following - flips[-1]


def _turning_search(
    one: OneMap, base_period: int, flips: Sequence[Fraction]
) -> Generator[Step, None, _Search]:
    """The turning point that the ladder's cycles pass through."""
    middle = float(flips[0] + flips[1]) / 2
    cycles = float_map(one)
    for place in cycles.critical_points(middle):
        search = _Search(one, base_period, place, cycles.scale)
        if (yield from search.changes_sign(flips[0], flips[1] - flips[0])):
            return search
    raise NoSuperstable("no turning point of the map lies on the cycle between the first two flips")


@dataclass(frozen=True)
class _Value:
    """f^p(x_c) - x_c at a share of a gap, with the turning point and parameter it belongs to."""

    share: Any
    miss: Any
    turning: Any
    r: Any


class _Search:
    """Superstable cycles through one turning point, which moves with the parameter.

    The turning point found last is where the next one is looked for; nothing else is remembered.
    """

    def __init__(self, one: OneMap, base_period: int, turning: float, scale: float) -> None:
        self.one = one
        self.base_period = base_period
        self.scale = scale
        self.orbit = ball_loops(one).orbit
        self._slope = ball_function((one.exact_derivatives["fx"],), (one.state, one.parameter))
        self._turning = Fraction(turning)

    def changes_sign(self, birth: Fraction, gap: Fraction) -> Generator[Step, None, bool]:
        """Whether f^p(x_c) - x_c has opposite signs near both ends of the first gap."""
        try:
            low = yield from self._value(2 * self.base_period, birth, gap, Fraction(1, 50), 120)
            high = yield from self._value(2 * self.base_period, birth, gap, Fraction(49, 50), 120)
        except NoSuperstable:
            return False
        with precision(120):
            return bool(low.miss * high.miss < 0)

    def between(
        self, level: int, birth: Fraction, gap: Fraction, shares: Sequence[Fraction]
    ) -> Generator[Step, None, Superstable]:
        """The superstable cycle born at a flip, at a share of the gap close to those of the levels before."""
        period = self.base_period * 2**level
        size = max(abs(birth), Fraction(1, 2**20))
        bits = RELATIVE_BITS + 60 + (size / abs(gap)).__ceil__().bit_length() + 3 * period.bit_length()
        if len(shares) < 3:
            start, other = yield from self._bisected(period, birth, gap, bits)
        else:
            # The shares converge as the ladder does; the last change bounds the next.
            start = shares[-1]
            other = start + max(abs(shares[-1] - shares[-2]) / 4, Fraction(1, 2**30))
        found = yield from self._secant(period, birth, gap, start, other, bits)
        with precision(bits):
            r = found.r
            turning = found.turning
        half = yield from self._run(turning, r, period // 2, bits)
        with precision(bits):
            distance = (half - turning).mid()
            folded = (self.orbit(half, r, 1) - self.orbit(turning, r, 1)).mid()
        yield from self._check_least(period, found, bits)
        return Superstable(level, period, fraction_of(r), fraction_of(distance), fraction_of(folded))

    def _bisected(
        self, period: int, birth: Fraction, gap: Fraction, bits: int
    ) -> Generator[Step, None, tuple[Fraction, Fraction]]:
        low, high = Fraction(1, 50), Fraction(49, 50)
        at_low = yield from self._value(period, birth, gap, low, bits)
        at_high = yield from self._value(period, birth, gap, high, bits)
        with precision(bits):
            if not at_low.miss * at_high.miss < 0:
                raise NoSuperstable(f"no superstable cycle of period {period} shows between its flips")
        for _ in range(BISECTIONS):
            middle = (low + high) / 2
            here = yield from self._value(period, birth, gap, middle, bits)
            with precision(bits):
                if here.miss * at_low.miss > 0:
                    low = middle
                else:
                    high = middle
        return low, high

    def _secant(
        self, period: int, birth: Fraction, gap: Fraction, start: Fraction, other: Fraction, bits: int
    ) -> Generator[Step, None, _Value]:
        before = yield from self._value(period, birth, gap, start, bits)
        now = yield from self._value(period, birth, gap, other, bits)
        for _ in range(MOST_SECANTS):
            with precision(bits):
                slope = now.miss - before.miss
                if slope == 0:
                    return now
                move = (-now.miss * (now.share - before.share) / slope).mid()
                share = (now.share + move).mid()
                done = abs(move) < arb(2) ** -RELATIVE_BITS
                inside = bool(share > 0) and bool(share < 1)
            if not inside:
                break
            before, now = now, (yield from self._value(period, birth, gap, fraction_of(share), bits))
            if done:
                return now
        raise NoSuperstable(f"the superstable cycle of period {period} could not be solved for")

    def _value(
        self, period: int, birth: Fraction, gap: Fraction, share: Fraction, bits: int
    ) -> Generator[Step, None, _Value]:
        yield Step("following superstable cycles")
        with precision(bits):
            placed = ball_of(share).mid()
            r = (ball_of(birth) + ball_of(gap) * placed).mid()
            turning = self._turning_at(r, bits)
        end = yield from self._run(turning, r, period, bits)
        with precision(bits):
            miss = (end - turning).mid()
            if not miss.is_finite():
                raise NoSuperstable("the orbit of the turning point escapes")
        return _Value(placed, miss, turning, r)

    def _run(self, x: Any, r: Any, steps: int, bits: int) -> Generator[Step, None, Any]:
        try:
            return (
                yield from in_chunks(
                    lambda now, n: self.orbit(now, r, n), x, steps, bits, "following superstable cycles"
                )
            )
        except SwitchingTouched as error:
            raise NoSuperstable("the cycle meets a switching surface") from error

    def _check_least(self, period: int, found: _Value, bits: int) -> Generator[Step, None, None]:
        """The cycle closes no sooner; half a period on is the distance itself."""
        for prime in prime_factors(self.base_period):
            end = yield from self._run(found.turning, found.r, period // prime, bits)
            with precision(bits):
                if abs(end - found.turning) < arb(2) ** (-bits // 2):
                    raise NoSuperstable(f"the superstable cycle closes after {period // prime} points")

    def _turning_at(self, r: Any, bits: int) -> Any:
        """The turning point at a parameter value, bisected around where it was; within a precision block."""
        middle = ball_of(self._turning).mid()
        half = FIRST_BRACKET * self.scale
        # Unequal halves: a bracket whose middle is the turning point itself would not tell its sides apart.
        low, high = middle - half, middle + half * 1.375
        while self._side(low, r) == self._side(high, r):
            half *= 8
            if half > WIDEST_BRACKET * self.scale:
                raise NoSuperstable("the turning point of the map is lost")
            low, high = middle - half, middle + half * 1.375
        side = self._side(low, r)
        for _ in range(bits):
            middle = ((low + high) / 2).mid()
            if self._side(middle, r) == side:
                low = middle
            else:
                high = middle
        self._turning = fraction_of(low)
        return low

    def _side(self, x: Any, r: Any) -> int:
        """Sign of f_x; 0 where it is zero, or the ball meets the surface that the turning point lies on."""
        try:
            slope = self._slope(x.mid(), r)[0]
        except SwitchingTouched:
            return 0
        return 1 if slope > 0 else -1 if slope < 0 else 0
