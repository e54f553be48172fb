"""Axis ticks that stay true at any depth: exact positions, short distinct labels, one common offset."""

from __future__ import annotations

from dataclasses import dataclass
from fractions import Fraction

from tinemark.systems.exact import fraction_text

LONGEST_LABEL = 8
"""Characters of a label; where full values need more, a common offset is split off."""


@dataclass(frozen=True)
class Ticks:
    """Ticks of one axis.

    Attributes
    ----------
    offset
        Decimal that is to be added to every label, exact; empty where the labels stand alone.
    positions
        Exact positions, rising.
    labels
        A decimal each, as "0.25" or "15e-12": offset + label is the position exactly.
    """

    offset: str
    positions: tuple[Fraction, ...]
    labels: tuple[str, ...]


def ticks(low: Fraction, high: Fraction, count: int) -> Ticks:
    """At most `count` ticks (at least 1) on multiples of 1, 2 or 5 times a power of ten.

    Parameters
    ----------
    low, high
        Ends of the axis, `low < high`.

    Raises
    ------
    ValueError
        The axis has no extent.
    """
    if not low < high:
        raise ValueError("an axis needs low < high")
    factor, power = _step(low, high, max(count, 1))
    step = factor * Fraction(10) ** power
    first = -((-low) // step)
    last = high // step
    positions = tuple(step * k for k in range(first, last + 1))
    plain = tuple(_label(position, power) for position in positions)
    if max(map(len, plain), default=0) <= LONGEST_LABEL:
        return Ticks("", positions, plain)
    # The offset keeps the digits above the axis's own extent.
    unit = Fraction(10) ** decade(high - low)
    offset = low // unit * unit
    if offset == 0:
        return Ticks("", positions, plain)
    return Ticks(
        _exact_text(offset), positions, tuple(_label(position - offset, power) for position in positions)
    )


def decade(value: Fraction) -> int:
    """Largest k with 10**k <= value, for value > 0; exact at any size."""
    k = len(str(value.numerator)) - len(str(value.denominator))
    return k if Fraction(10) ** k <= value else k - 1


def _step(low: Fraction, high: Fraction, count: int) -> tuple[int, int]:
    power = decade(high - low) - len(str(count)) - 1
    while True:
        for factor in (1, 2, 5):
            step = factor * Fraction(10) ** power
            if high // step + (-low) // step + 1 <= count:
                return factor, power
        power += 1


def _label(value: Fraction, power: int) -> str:
    """Text of a whole multiple of 10**power, the same way for every label of an axis."""
    digits = int(value / Fraction(10) ** power)
    if -7 < power <= 0:
        text = f"{abs(digits):0{1 - power}d}"
        whole, after = (text[:power], text[power:]) if power else (text, "")
        sign = "-" if digits < 0 else ""
        return f"{sign}{whole}.{after}" if after else sign + whole
    if digits == 0:
        return "0"
    if 0 < power < 6:
        return str(digits * 10**power)
    return f"{digits}e{power}"


def _exact_text(value: Fraction) -> str:
    # Offsets are finite decimals; those too long to be written out keep a power of ten.
    text = fraction_text(value)
    if Fraction(text) == value:
        return text
    power = 0
    while value.denominator != 1:
        value *= 10
        power -= 1
    return f"{value.numerator}e{power}"
