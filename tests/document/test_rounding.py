"""Rounding to the uncertainty, digit groups, and digits that hold."""

from __future__ import annotations

from fractions import Fraction

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from tinemark.document import rounding
from tinemark.document.rounding import THIN_SPACE, concise, group_digits, held_digits, plain, plus_minus
from tinemark.onsets.results import Criticality, Kind, Onset, Status

uncertainties = st.builds(
    lambda n, p: Fraction(n) * Fraction(10) ** p, st.integers(1, 10**9), st.integers(-130, 12)
)
values = st.builds(
    lambda n, p: Fraction(n) * Fraction(10) ** p, st.integers(-(10**120), 10**120), st.integers(-140, 2)
)


def test_the_gum_s_own_examples() -> None:
    # JCGM 100:2008, 7.2.6: u = 10.47 mOhm may be rounded up to 11 mOhm, u = 28.05 kHz to 28 kHz;
    # y = 10.057 62 Ohm with u = 27 mOhm becomes 10.058 Ohm.
    assert rounding.round_uncertainty(Fraction("10.47")) == (11, 0)
    assert rounding.round_uncertainty(Fraction("28.05")) == (28, 0)
    assert concise(Fraction("10.05762"), Fraction("0.027"), grouped=False) == "10.058(27)"
    # 7.2.2: m_S = 100.021 47(35) g.
    assert concise(Fraction("100.02147"), Fraction("0.00035")) == f"100.021{THIN_SPACE}47(35)"


@pytest.mark.parametrize(
    ("value", "uncertainty", "short", "long"),
    [
        ("3.56994567187", "0.00000012", "3.56994567(12)", "3.56994567 ± 0.00000012"),
        ("123.44", "1.23", "123.4(1.3)", "123.4 ± 1.3"),
        ("123.44", "12.3", "123(13)", "123 ± 13"),
        ("123456", "2801", "123500(2800)", "123500 ± 2800"),
        ("-0.0004", "0.5", "0.00(50)", "0.00 ± 0.50"),
        ("1.5", "0.0997", "1.50(10)", "1.50 ± 0.10"),
        ("-4.66920", "0.00101", "-4.6692(10)", "-4.6692 ± 0.0010"),
        ("1.5e-30", "2e-32", "1.500(20)e-30", "(1.500 ± 0.020)e-30"),
        ("3", "0", "3", "3"),
    ],
)
def test_forms(value: str, uncertainty: str, short: str, long: str) -> None:
    pair = Fraction(value), Fraction(uncertainty)
    assert concise(*pair, grouped=False) == short
    assert plus_minus(*pair, grouped=False) == long
    assert plain(plus_minus(*pair)) == long


@given(values, uncertainties)
def test_rounding_stays_within_its_unit(value: Fraction, uncertainty: Fraction) -> None:
    result = rounding.round_pair(value, uncertainty)
    unit = Fraction(10) ** -result.places
    assert abs(result.value - value) <= unit / 2
    assert (result.value / unit).denominator == 1
    assert 10 <= result.uncertainty / unit <= 99
    assert uncertainty * Fraction(99, 100) <= result.uncertainty <= uncertainty + unit


@given(values, uncertainties)
def test_rigorous_rounding_contains_the_interval(value: Fraction, uncertainty: Fraction) -> None:
    result = rounding.round_pair(value, uncertainty, rigorous=True)
    assert result.value - result.uncertainty <= value - uncertainty
    assert result.value + result.uncertainty >= value + uncertainty
    assert result.uncertainty <= uncertainty * Fraction(5, 4)


@given(values, uncertainties)
def test_the_concise_text_says_what_was_rounded(value: Fraction, uncertainty: Fraction) -> None:
    text = concise(value, uncertainty, grouped=False)
    body, _, rest = text.partition("(")
    bracket, _, power = rest.partition(")")
    unit = Fraction(1) if "." in bracket or "." not in body else Fraction(10) ** -len(body.partition(".")[2])
    scale = Fraction(10) ** int(power[1:] or 0)
    spread = Fraction(bracket) * unit * scale
    assert uncertainty * Fraction(99, 100) <= spread <= uncertainty * Fraction(111, 100)
    assert abs(Fraction(body) * scale - value) <= spread / 10


@given(values)
def test_grouping_keeps_every_digit(value: Fraction) -> None:
    text = rounding.decimal_text(value, 30)
    grouped = group_digits(text)
    assert plain(grouped) == text
    whole, _, after = grouped.lstrip("-").partition(".")
    assert all(len(part) == 3 for part in whole.split(THIN_SPACE)[1:])
    assert all(len(part) == 3 for part in after.split(THIN_SPACE)[:-1])


def test_groups_of_three_both_sides() -> None:
    assert group_digits("-1234567.1234567(12)", " ") == "-1 234 567.123 456 7(12)"
    assert group_digits("12", " ") == "12"
    assert group_digits("no number", " ") == "no number"


def test_digits_that_hold() -> None:
    # 1 + sqrt 6 = 3.449489742783178098197284...: cut, not rounded.
    lower = Fraction("3.44948974278317809819728407")
    upper = Fraction("3.44948974278317809819728408")
    assert held_digits(lower, upper) == "3.4494897427831780981972840"
    assert held_digits(lower, upper, most=12) == "3.44948974278"
    # An interval across a round number: its ends share no digit, the round number holds.
    assert held_digits(3 - Fraction(1, 10**20), 3 + Fraction(1, 10**20)) == "3." + "0" * 19
    assert held_digits(-Fraction(1, 10**5), Fraction(1, 10**5)) == "0.0000"
    assert held_digits(Fraction("0.4999999"), Fraction("0.5000001")) == "0.500000"
    assert held_digits(Fraction("-0.87265"), Fraction("-0.87261")) == "-0.8726"
    assert held_digits(Fraction("9.99999"), Fraction("10.00001")) == "10.0000"
    assert held_digits(Fraction(3, 8), Fraction(3, 8)) == "0.375"
    # Nothing holds.
    assert held_digits(Fraction("0.3"), Fraction("0.4")) == ""
    assert held_digits(Fraction(1000), Fraction(14000)) == ""
    assert held_digits(Fraction(-1), Fraction(7)) == ""
    with pytest.raises(ValueError, match="lower"):
        held_digits(Fraction(2), Fraction(1))


@settings(max_examples=300)
@given(
    values.filter(lambda v: abs(v) < 10**15),
    st.integers(0, 10**6),
    st.integers(1, 10**6),
    st.integers(-60, -3),
)
def test_held_digits_hold_for_every_number_inside(
    value: Fraction, below: int, above: int, power: int
) -> None:
    lower, upper = value - below * Fraction(10) ** power, value + above * Fraction(10) ** power
    text = held_digits(lower, upper)
    if not text:
        return
    places = len(text.partition(".")[2])
    unit = Fraction(10) ** -places
    shown = Fraction(text)
    for number in (lower, value, upper, (lower + upper) / 2):
        cut = shown == Fraction(int(number / unit)) * unit  # int() cuts towards zero
        assert cut or abs(number - shown) <= unit / 2
    # Not wasteful: at most three places short of what the width allows, unless digits carry.
    assert places <= -rounding.exponent(upper - lower)


def make(status: Status, value: str, lower: str, upper: str) -> Onset:
    return Onset("r", Kind.FLIP, 1, 2, Criticality.SUPERCRITICAL, value, lower, upper, 20, status)


def test_the_text_of_an_onset() -> None:
    proved = make(Status.PROVED, "3.4494897427831780982", "3.4494897427831780981", "3.4494897427831780983")
    assert plain(rounding.onset_text(proved)) == "3.44948974278"
    assert rounding.onset_text(proved).endswith(rounding.ELLIPSIS)
    assert rounding.onset_text(proved, full=True, grouped=False) == "3.449489742783178098"
    wide = make(Status.PROVED, "0.35", "0.3", "0.4")
    assert rounding.onset_text(wide, grouped=False) == "0.350 ± 0.050"
    estimated = make(Status.ESTIMATED, "3.44949", "3.44937", "3.44961")
    assert rounding.onset_text(estimated, grouped=False) == "3.449490(60)"
    assert rounding.onset_text(estimated, full=True, grouped=False) == "3.44949 ± 0.00012"
    eye = make(Status.READ_BY_EYE, "3.44949", "3.44937", "3.44961")
    assert rounding.onset_text(eye, grouped=False) == "3.44949(12)"


def test_hundreds_of_digits() -> None:
    value = Fraction("3." + "569945671870944901842005151386498936" * 8)
    text = concise(value, Fraction(12, 10**200), grouped=False)
    assert text.endswith("(12)")
    assert len(text) == len("3.") + 200 + len("(12)")


def test_decimals_shown_with_an_uncertainty_are_not_made_up() -> None:
    """The text of the value stops where its decimals hold; the interval knows two more."""
    found = make(Status.ESTIMATED, "0.86990869816", "0.8699086981574", "0.8699086981600")
    assert rounding.onset_text(found, grouped=False) == "0.8699086981587(13)"
