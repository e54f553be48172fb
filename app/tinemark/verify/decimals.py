"""Decimal texts as exact rationals, with limits."""

from __future__ import annotations

import re
from fractions import Fraction

MOST_DIGITS = 2000
MOST_POWER = 400
ROUNDED_DIGITS = 3
"""A state is printed with so many digits less than the value, at most."""
_NUMBER = re.compile(r"[+-]?(\d+\.?\d*|\.\d+)(?:[eE]([+-]?\d{1,4}))?", re.ASCII)


def rational(text: str) -> Fraction | None:
    """The rational that a decimal text spells; None where it is none, or too long to work with."""
    if len(text) > MOST_DIGITS:
        return None
    match = _NUMBER.fullmatch(text)
    if match is None or abs(int(match[2] or "0")) > MOST_POWER:
        return None
    return Fraction(text)


def last_unit(text: str) -> Fraction:
    """One unit of the last digit of a decimal text."""
    digits, _, power = text.lower().partition("e")
    _, _, after = digits.partition(".")
    return Fraction(10) ** (int(power or "0") - len(after))


def short(value: Fraction) -> str:
    """A rational with three digits, for sentences."""
    try:
        return f"{float(value):.3g}"
    except OverflowError:
        return "a huge number"


def significant_digits(text: str) -> int:
    """Digits of a decimal text from its first one above zero on; all of them where there is none."""
    digits = text.lower().partition("e")[0].lstrip("+-")
    # The zeros that end a whole number only fill it up.
    held = digits.rstrip("0") if "." not in digits else digits
    held = held.replace(".", "")
    return len(held.lstrip("0")) or len(digits)


def zeros_unit(text: str) -> Fraction:
    """One unit of the last digit before the zeros that end a whole number; of the last digit elsewhere."""
    plain = text.lstrip("+-")
    if not plain.isdecimal() or not plain.strip("0"):
        return last_unit(text)
    return Fraction(10) ** (len(plain) - len(plain.rstrip("0")))


def state_unit(text: str, digits: int) -> Fraction:
    """One unit of the last digit that counts of a text rounded to nearly so many significant digits.

    The zeros that end a whole number with more digits than that are what rounding put there.
    """
    plain = text.lstrip("+-")
    filled = Fraction(10) ** max(0, len(plain) - digits + ROUNDED_DIGITS)
    return min(zeros_unit(text), filled) if plain.isdecimal() else last_unit(text)
