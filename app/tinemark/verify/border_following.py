"""What follows a border collision of a continuous map, from intervals around its one-sided multipliers.

In the surface's formula s the return map is a s + m on one side and b s + m on the other, to first order,
with m passing zero at the collision (Nusse & Yorke, 1992; di Bernardo, Budd, Champneys & Kowalczyk, 2008,
section 3.1). Let a be the multiplier of the stable side. With b < -1 and a b <= -1 the only stable cycles
of the two straight pieces have one point on the side of b and k - 1 on that of a: such a cycle exists
where b a^(k-2) < -(1 + a + ... + a^(k-2)), and is stable where b a^(k-1) > -1.
"""

from __future__ import annotations

from fractions import Fraction

from tinemark.verify import intervals as iv
from tinemark.verify.claims import Part, Refused, Undecided
from tinemark.verify.intervals import ONE, Interval

LONGEST = 200


def check_periods(a: Interval, b: Interval, period: int, claimed: tuple[int, int], bits: int) -> None:
    """See that the periods before and after are those that the multipliers make of a cycle of this period.

    Raises
    ------
    Refused
        They are others.
    Undecided
        A multiplier may lie where one outcome gives way to another.
    """
    there = _periods(a, b, period, bits)
    if there != claimed:
        raise Refused(
            Part.PERIOD,
            f"the periods before and after it are {there[0]} and {there[1]}, "
            f"not {claimed[0]} and {claimed[1]}",
        )


def _periods(a: Interval, b: Interval, period: int, bits: int) -> tuple[int, int]:
    if _side(a, 1, bits) != _side(b, 1, bits):
        # Both cycles lie on one side of the onset: a pair that meets on the surface.
        return 0, period
    if not _stable(a, bits):
        a, b = b, a
    if not _stable(a, bits) or _side(b, -1, bits) > 0:
        return period, period
    return period, period * _rounds(a, b, bits)


def _rounds(a: Interval, b: Interval, bits: int) -> int:
    """Rounds of the stable cycle where |a| < 1 and b < -1; 0 where there is none."""
    both = iv.mul(a, b, bits)
    if _side(both, 1, bits) > 0:
        # a < 0: no two points in turn lie on its side, so every cycle's multiplier is above 1.
        return 0
    if _side(both, -1, bits) > 0:
        return 2
    power, total = ONE, ONE
    for rounds in range(2, LONGEST):
        # power is a^(rounds - 2), total 1 + a + ... + a^(rounds - 2).
        if iv.sign(iv.add(iv.mul(b, power, bits), total, bits)) == 0:
            raise Undecided("the one-sided multipliers lie where one outcome gives way to another")
        exists = iv.sign(iv.add(iv.mul(b, power, bits), total, bits)) < 0
        if not exists:
            return 0
        power = iv.mul(power, a, bits)
        if _side(iv.mul(b, power, bits), -1, bits) > 0:
            return rounds
        total = iv.add(total, power, bits)
    raise Undecided("no end was found to the cycles that may follow")


def _stable(x: Interval, bits: int) -> bool:
    return _side(x, 1, bits) < 0 < _side(x, -1, bits)


def _side(x: Interval, bound: int, bits: int) -> int:
    """On which side of 1 or -1 a number lies for certain."""
    side = iv.sign(iv.sub(x, iv.of_fraction(Fraction(bound), bits), bits))
    if side == 0:
        raise Undecided("a one-sided multiplier, or their product, may be +1 or -1: what follows is open")
    return side
