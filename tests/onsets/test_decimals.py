"""Decimal texts of enclosures: always outward, always around the value."""

from __future__ import annotations

from fractions import Fraction

from hypothesis import given
from hypothesis import strategies as st

from tinemark.onsets.decimals import decimal_places, enclosure_texts, fixed_text, leading_power, rounded

NUMBERS = st.fractions(min_value=-(10**12), max_value=10**12)
WIDTHS = st.fractions(min_value=0, max_value=Fraction(1, 1000)).filter(lambda width: width > 0)


@given(NUMBERS, WIDTHS, st.integers(-3, 30))
def test_texts_enclose_interval_and_value(lower: Fraction, width: Fraction, places: int) -> None:
    """The texts' interval holds the exact one, and the rounded value as well."""
    texts = enclosure_texts(lower, lower + width, places)
    low, value, high = (Fraction(text) for text in (texts.lower, texts.value, texts.upper))
    assert low <= lower
    assert high >= lower + width
    assert low <= value <= high
    unit = Fraction(10) ** -places
    assert abs(value - (lower + width / 2)) <= unit / 2
    # Each end is moved out by up to one and a half of its own places, a hundredth of the unit.
    assert high - low <= width + unit * Fraction(103, 100)


@given(NUMBERS.filter(lambda number: number != 0))
def test_leading_power(number: Fraction) -> None:
    """10^e <= |number| < 10^(e+1)."""
    power = leading_power(number)
    assert Fraction(10) ** power <= abs(number) < Fraction(10) ** (power + 1)


@given(NUMBERS.filter(lambda number: number != 0), st.integers(1, 40))
def test_significant_digits(number: Fraction, digits: int) -> None:
    """Rounded to the places worked out, a number keeps its digits."""
    places = decimal_places(number, digits)
    shown = Fraction(fixed_text(rounded(number, places), places))
    assert abs(shown - number) <= abs(number) * Fraction(10) ** (1 - digits) / 2


def test_examples() -> None:
    """Signs, zeros and places, by hand."""
    assert fixed_text(-5, 3) == "-0.005"
    assert fixed_text(12345, 2) == "123.45"
    assert fixed_text(12, -2) == "1200"
    texts = enclosure_texts(Fraction("2.99999999"), Fraction("3.00000001"), 4)
    assert (texts.value, texts.lower, texts.upper) == ("3.0000", "2.999999", "3.000001")
