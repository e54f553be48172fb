"""Decimal texts as exact rationals, with limits."""

from __future__ import annotations

import re
from fractions import Fraction

MOST_DIGITS = 2000
MOST_POWER = 400
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
