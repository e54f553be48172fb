"""Numbers for people: rounding to their uncertainty, digit groups, and the digits that hold.

Everything works on exact rationals, so that a value of a hundred digits is treated like one of
three. Rounding follows JCGM 100:2008 (GUM), clause 7.2.6: the uncertainty keeps at most two
significant digits, rounded up where rounding to the nearest would understate it (10.47 becomes
11, 28.05 becomes 28), and the estimate is rounded to match.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from fractions import Fraction

from tinemark.onsets.results import Onset, Status

THIN_SPACE = "\u2009"
ELLIPSIS = "\u2026"
MINUS = "\u2212"
PLUS_MINUS = "\u00b1"

UNDERSTATED_AT_MOST = Fraction(1, 100)
"""Share of an uncertainty that rounding may take away; anything more is rounded up instead."""

SHORT_DIGITS = 12
"""Significant digits of a proved value that are shown before "full digits" is asked for."""

_FIXED_FROM, _FIXED_TO = -7, 21  # powers of ten written without an exponent


@dataclass(frozen=True)
class Rounded:
    """A value and its uncertainty rounded alike: both are multiples of 10**-places."""

    value: Fraction
    uncertainty: Fraction
    places: int


def exponent(value: Fraction) -> int:
    """Power of ten of the leading digit: 0 for 1 to 9.99, -2 for 0.031; 0 for zero."""
    if value == 0:
        return 0
    top, bottom = abs(value.numerator), value.denominator
    # Bit lengths give the power of ten to within one, without writing the number out.
    guess = int((top.bit_length() - bottom.bit_length()) * 0.30103)
    power = guess - 2
    while Fraction(10) ** (power + 1) * bottom <= top:
        power += 1
    return power


def round_uncertainty(uncertainty: Fraction, digits: int = 2) -> tuple[Fraction, int]:
    """Round an uncertainty (> 0) to `digits` significant digits by GUM 7.2.6.

    Returns
    -------
    rounded, places
        `rounded` is a multiple of 10**-places and at least 99 % of `uncertainty`.
    """
    places = digits - 1 - exponent(uncertainty)
    scaled = uncertainty * Fraction(10) ** places
    whole = math.floor(scaled + Fraction(1, 2))
    if scaled - whole > scaled * UNDERSTATED_AT_MOST:
        whole += 1
    if whole == 10**digits:  # 0.0997 became 0.100: again two significant digits, one place less
        whole, places = whole // 10, places - 1
    return whole / Fraction(10) ** places, places


def round_pair(value: Fraction, uncertainty: Fraction, *, rigorous: bool = False) -> Rounded:
    """Round a value and its uncertainty (> 0) alike, by GUM 7.2.6.

    With `rigorous` the rounded interval contains the one given: what rounding the value takes
    away is added to the uncertainty, which is then always rounded up.
    """
    rounded, places = round_uncertainty(uncertainty)
    middle = round_to_places(value, places)
    if rigorous:
        scale = Fraction(10) ** places
        rounded = math.ceil((uncertainty + abs(value - middle)) * scale) / scale
    return Rounded(middle, rounded, places)


def round_to_places(value: Fraction, places: int) -> Fraction:
    """Round half to even to a multiple of 10**-places; `places` may be negative."""
    scale = Fraction(10) ** places
    return round(value * scale) / scale


def decimal_text(value: Fraction, places: int) -> str:
    """Decimal text with exactly `places` decimals (none when `places` <= 0), rounded half to even."""
    number = round_to_places(value, places)
    digits = f"{abs(number * 10 ** max(places, 0)).numerator:0{max(places, 0) + 1}d}"
    sign = "-" if number < 0 else ""
    if places <= 0:
        return sign + digits
    return f"{sign}{digits[:-places]}.{digits[-places:]}"


def group_digits(text: str, separator: str = THIN_SPACE) -> str:
    """Write the digits of a number in groups of three, both ways from the decimal sign.

    Everything that is not the number's mantissa (sign, brackets, exponent) stays as it is.
    """
    start = next((i for i, c in enumerate(text) if c.isdigit()), len(text))
    end = start
    while end < len(text) and (text[end].isdigit() or (text[end] == "." and "." not in text[start:end])):
        end += 1
    whole, point, after = text[start:end].partition(".")
    head = len(whole) % 3
    groups = [whole[:head]] if head else []
    groups += [whole[i : i + 3] for i in range(head, len(whole), 3)]
    tail = [after[i : i + 3] for i in range(0, len(after), 3)]
    return text[:start] + separator.join(groups) + point + separator.join(tail) + text[end:]


def plain(text: str) -> str:
    """The same text for copying: no thin spaces, an ASCII minus, no ellipsis."""
    return text.replace(THIN_SPACE, "").replace(MINUS, "-").replace(ELLIPSIS, "")


def concise(value: Fraction, uncertainty: Fraction, *, grouped: bool = True, rigorous: bool = False) -> str:
    """Concise form, as in 3.569 945 67(12): the brackets hold the uncertainty of the last digits.

    An uncertainty of 1 or more carries its own decimal sign, 123.4(1.2), so that it cannot be
    misread. A value known exactly (uncertainty 0) is written in full with no brackets.
    """
    if uncertainty == 0:
        return _finish(_exact_text(value), grouped)
    mantissa, spread, power = _without_power(value, uncertainty)
    rounded = round_pair(mantissa, spread, rigorous=rigorous)
    body = decimal_text(rounded.value, rounded.places)
    if rounded.uncertainty >= 1 or rounded.places <= 0:
        bracket = _finish(decimal_text(rounded.uncertainty, rounded.places), grouped)
    else:
        bracket = decimal_text(rounded.uncertainty * Fraction(10) ** rounded.places, 0)
    return _finish(body, grouped) + f"({bracket})" + (f"e{power}" if power else "")


def plus_minus(
    value: Fraction, uncertainty: Fraction, *, grouped: bool = True, rigorous: bool = False
) -> str:
    """Long form, as in 3.569 945 67 ± 0.000 000 12."""
    if uncertainty == 0:
        return _finish(_exact_text(value), grouped)
    mantissa, spread, power = _without_power(value, uncertainty)
    rounded = round_pair(mantissa, spread, rigorous=rigorous)
    body = _finish(decimal_text(rounded.value, rounded.places), grouped)
    width = _finish(decimal_text(rounded.uncertainty, rounded.places), grouped)
    return f"({body} {PLUS_MINUS} {width})e{power}" if power else f"{body} {PLUS_MINUS} {width}"


def _without_power(value: Fraction, uncertainty: Fraction) -> tuple[Fraction, Fraction, int]:
    """Take a power of ten out of very large and very small numbers."""
    power = exponent(max(abs(value), uncertainty))
    if _FIXED_FROM <= power < _FIXED_TO:
        return value, uncertainty, 0
    scale = Fraction(10) ** -power
    return value * scale, uncertainty * scale, power


def _exact_text(value: Fraction) -> str:
    """A finite decimal in full; anything else to 40 significant digits."""
    rest, twos, fives = value.denominator, 0, 0
    while rest % 2 == 0:
        rest, twos = rest // 2, twos + 1
    while rest % 5 == 0:
        rest, fives = rest // 5, fives + 1
    places = max(twos, fives) if rest == 1 else 39 - exponent(value)
    return decimal_text(value, places)


def _finish(text: str, grouped: bool) -> str:
    return minus_sign(group_digits(text)) if grouped else text


def minus_sign(text: str) -> str:
    """The text with the true minus sign before its number."""
    return MINUS + text[1:] if text.startswith("-") else text


def held_digits(lower: Fraction, upper: Fraction, *, most: int | None = None) -> str:
    """All digits that hold for every number between `lower` and `upper`.

    Where both ends begin with the same digits, these digits are returned, cut and not rounded, so
    that each is a digit of the true number. Where the interval lies across a round number (as
    2.999… to 3.000…1), so that the ends share few digits or none, the round number is returned
    with as many decimals as both ends round to; the true number then differs from it by at
    most half a unit of the last digit.

    Parameters
    ----------
    most
        Largest number of significant digits returned; None for all.

    Returns
    -------
    str
        Plain decimal text; empty when no digit holds.
    """
    if lower > upper:
        raise ValueError("lower must not exceed upper")
    if lower == upper:
        return _cut_to(_exact_text(lower), most)
    top = -exponent(upper - lower)
    shared = _shared_start(_cut_text(lower, top), _cut_text(upper, top))
    held = shared if any(c in "123456789" for c in shared) else ""
    for places in range(top, max(top - 3, 0), -1):
        middle = round_to_places(lower, places)
        if lower <= middle <= upper and round_to_places(upper, places) == middle:
            # One place more by rounding is not worth a last digit that is not the true one.
            if not held or places > _places_of(held) + 1:
                held = decimal_text(middle, places)
            break
    return _cut_to(held, most)


def _cut_text(value: Fraction, places: int) -> str:
    """Decimal text cut towards zero."""
    scale = Fraction(10) ** places
    scaled = abs(value) * scale
    cut = Fraction(scaled.numerator // scaled.denominator) / scale
    return ("-" if value < 0 else "") + decimal_text(cut, places)


def _shared_start(first: str, second: str) -> str:
    """Common start of two decimal texts of equally many whole digits; empty when a whole digit differs."""
    count = next((i for i, (a, b) in enumerate(zip(first, second, strict=False)) if a != b), None)
    if count is None:
        return first if len(first) == len(second) else ""
    point = first.find(".")
    if point < 0 or count <= point or second.find(".") != point:
        return ""
    return first[:count].removesuffix(".")


def _places_of(text: str) -> int:
    return len(text.partition(".")[2]) if text else -(10**9)


def _cut_to(text: str, most: int | None) -> str:
    """Keep the first `most` significant digits of a decimal text (whole digits always stay)."""
    if most is None:
        return text
    whole, point, after = text.partition(".")
    if not point:
        return text
    leading = whole.lstrip("-").lstrip("0")
    if leading:
        keep = most - len(leading)
    else:
        zeros = len(after) - len(after.lstrip("0"))
        keep = zeros + most if zeros < len(after) else most
    return whole if keep <= 0 else f"{whole}.{after[:keep]}"


def onset_text(onset: Onset, *, full: bool = False, grouped: bool = True) -> str:
    """The value of an onset as the ledger shows it.

    A proved value shows digits that hold: the first `SHORT_DIGITS` and an ellipsis, or all of
    them with `full`. An estimated or measured value is rounded to its uncertainty: the standard one in
    brackets, 3.569 945 67(12), or with `full` the expanded one (95 % coverage), value ± uncertainty
    (JCGM 100:2008, 7.2.2 and 7.2.4). A value read by eye carries half a pixel in both.
    """
    lower, upper = Fraction(onset.lower), Fraction(onset.upper)
    proved = onset.status is Status.PROVED
    everything = held_digits(lower, upper) if proved else ""
    if everything:
        text = everything if full else _cut_to(everything, SHORT_DIGITS)
        more = ELLIPSIS if grouped and text != everything else ""
        return _finish(text, grouped) + more
    if full or proved:
        value = onset.value_fraction if proved else _best(onset)
        return plus_minus(value, onset.half_width, grouped=grouped, rigorous=proved)
    eye = onset.status is Status.READ_BY_EYE
    return concise(_best(onset), onset.half_width / (1 if eye else 2), grouped=grouped)


def _best(onset: Onset) -> Fraction:
    """The value to be rounded to its uncertainty.

    The text of a value holds only decimals that hold; two more are shown with an uncertainty in brackets, and
    these must not be zeros made up: the middle of the interval has them.
    """
    value, lower, upper = onset.value_fraction, Fraction(onset.lower), Fraction(onset.upper)
    middle = (lower + upper) / 2
    return middle if abs(middle - value) <= Fraction(1, 2) / 10 ** max(_places_of(onset.value), 0) else value
