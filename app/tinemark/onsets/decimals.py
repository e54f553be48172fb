"""Decimal texts of enclosures, rounded outward in exact arithmetic."""

from __future__ import annotations

from dataclasses import dataclass
from fractions import Fraction

GUARD_DIGITS = 2
"""Digits that `value` carries beyond those asked for, so that rounding it costs none of them."""


@dataclass(frozen=True)
class EnclosureTexts:
    """Decimal texts of a value and of the ends of an interval that holds it."""

    value: str
    lower: str
    upper: str


def leading_power(value: Fraction) -> int:
    """The e for which 10^e <= |value| < 10^(e+1); 0 for zero."""
    if value == 0:
        return 0
    size = abs(value)
    power = len(str(size.numerator)) - len(str(size.denominator))
    while Fraction(10) ** power > size:
        power -= 1
    while Fraction(10) ** (power + 1) <= size:
        power += 1
    return power


def decimal_places(magnitude: Fraction, digits: int) -> int:
    """Decimal places that give a number of this magnitude `digits` significant digits."""
    return digits - 1 - leading_power(magnitude)


def fixed_text(units: int, places: int) -> str:
    """Text of units * 10^-places."""
    if places <= 0:
        return str(units * 10**-places)
    sign = "-" if units < 0 else ""
    digits = str(abs(units)).rjust(places + 1, "0")
    return f"{sign}{digits[:-places]}.{digits[-places:]}"


def rounded(value: Fraction, places: int) -> int:
    """Units of 10^-places nearest to a value, ties to even."""
    return round(value * Fraction(10) ** places)


def places_shown(lower: Fraction, upper: Fraction, places: int, digits: int, size: Fraction) -> int:
    """Decimal places for an enclosure: those worked for; where it holds zero those of a number of some size.

    Zero, as far as it can be told, has no significant digits; its digits are those of a number of that size.
    """
    if not lower <= 0 <= upper:
        return places
    return min(places, decimal_places(size, digits + GUARD_DIGITS))


def enclosure_texts(
    lower: Fraction, upper: Fraction, places: int, *, centre: Fraction | None = None
) -> EnclosureTexts:
    """Texts of an interval: the ends rounded outward with some room, the value to nearest.

    The ends carry two places more than the value, and are moved out where the rounded value
    would lie beyond them, so that lower <= value <= upper holds for the texts as well.

    Parameters
    ----------
    lower, upper
        Ends of the interval.
    places
        Decimal places of the value.
    centre
        What the value shows; the interval's middle by default.
    """
    middle = (lower + upper) / 2 if centre is None else centre
    value = rounded(middle, places)
    fine = places + 2
    scale = Fraction(10) ** fine
    # Half a unit of room at least: what lies at the very end of a printed interval could not be proved anew.
    low = (lower * scale - Fraction(1, 2)).__floor__()
    high = (upper * scale + Fraction(1, 2)).__ceil__()
    shown = value * 100
    return EnclosureTexts(
        fixed_text(value, places), fixed_text(min(low, shown), fine), fixed_text(max(high, shown), fine)
    )
