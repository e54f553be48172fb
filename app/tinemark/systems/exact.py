"""Decimals taken exactly as written: 0.3 is 3/10, here and in every evaluator."""

from __future__ import annotations

import re
from dataclasses import dataclass
from fractions import Fraction

from tinemark.systems.errors import NumberError

MAX_DIGITS = 200
MAX_EXPONENT = 300
LARGEST = 10 ** (MAX_EXPONENT + 1)
"""Many digits and a power of ten may both be allowed, and yet make a number beyond all doubles."""
_DECIMAL = re.compile(r"[+-]?(?:(\d+)(?:\.(\d*))?|\.(\d+))(?:[eE]([+-]?\d{1,6}))?", re.ASCII)


@dataclass(frozen=True)
class Exact:
    """A decimal as typed, and the rational it spells."""

    text: str
    fraction: Fraction

    def __float__(self) -> float:
        return float(self.fraction)

    def __str__(self) -> str:
        return self.text


def exact(value: str | int | float | Fraction, *, where: str = "") -> Exact:
    """Read a decimal exactly.

    A float is read by its shortest decimal text, as Python prints it.

    Raises
    ------
    NumberError
        The text is no finite decimal, or has more than `MAX_DIGITS` digits, or a power of ten
        beyond `MAX_EXPONENT`.
    """
    if isinstance(value, Fraction):
        return Exact(fraction_text(value), value)
    text = repr(value) if isinstance(value, float) else str(value)
    text = text.strip()
    match = _DECIMAL.fullmatch(text) if len(text) <= 4 * MAX_DIGITS else None
    if match is None:
        shown = text if len(text) <= 40 else text[:37] + "..."
        shown = shown if shown.isprintable() else ascii(shown)[1:-1]
        hint = (
            "write a decimal point, not a comma"
            if "," in text
            else "write a finite decimal such as 3.45 or 2e-3"
        )
        raise NumberError(f'"{shown}" is not a number', where=where, what_to_do=hint)
    whole, after, bare, power = match.groups()
    digits = len(whole or "") + len(after or bare or "")
    if digits > MAX_DIGITS:
        raise NumberError(
            f"the number has {digits} digits", where=where, what_to_do=f"write at most {MAX_DIGITS} digits"
        )
    if power and abs(int(power)) > MAX_EXPONENT:
        raise NumberError(
            f"the power of ten {int(power)} is too large",
            where=where,
            what_to_do=f"stay between 1e-{MAX_EXPONENT} and 1e{MAX_EXPONENT}",
        )
    number = Fraction(text)
    if abs(number) > LARGEST:
        raise NumberError(
            "the number is too large",
            where=where,
            what_to_do=f"stay between -1e{MAX_EXPONENT} and 1e{MAX_EXPONENT}",
        )
    return Exact(text, number)


def fraction_text(value: Fraction, digits: int | None = None) -> str:
    """Decimal text of a rational.

    With `digits` None the text is exact where the rational is a finite decimal of at most
    `MAX_DIGITS` digits, and has 40 significant digits otherwise. With `digits` given it is
    rounded half to even to that many significant digits.
    """
    from decimal import ROUND_HALF_EVEN, Context, Decimal, Inexact

    if value == 0:
        return "0"
    if digits is None:
        context = Context(prec=MAX_DIGITS, rounding=ROUND_HALF_EVEN)
        result = context.divide(Decimal(value.numerator), Decimal(value.denominator))
        if context.flags[Inexact]:
            return fraction_text(value, 40)
    else:
        context = Context(prec=digits, rounding=ROUND_HALF_EVEN)
        result = context.divide(Decimal(value.numerator), Decimal(value.denominator))
    if -7 <= result.adjusted() <= 60:
        return format(result, "f")
    return format(result, "e").replace("e+", "e")
