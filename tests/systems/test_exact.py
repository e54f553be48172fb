"""Decimals are read exactly, or refused with a way on."""

from __future__ import annotations

import pickle
from decimal import Decimal
from fractions import Fraction

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from tinemark.systems import errors
from tinemark.systems.errors import FormulaError, NumberError, SystemFileError, TinemarkError
from tinemark.systems.exact import MAX_DIGITS, MAX_EXPONENT, exact, fraction_text


@settings(max_examples=200, deadline=None)
@given(st.decimals(allow_nan=False, allow_infinity=False, places=12, min_value=-(10**12), max_value=10**12))
def test_a_decimal_is_the_rational_it_spells(value: Decimal) -> None:
    assert exact(str(value)).fraction == Fraction(value)


@settings(max_examples=200, deadline=None)
@given(st.floats(allow_nan=False, allow_infinity=False, min_value=-1e290, max_value=1e290))
def test_a_float_is_read_as_it_is_printed(value: float) -> None:
    if value == 0 or abs(value) > 1e-290:
        number = exact(value)
        assert number.fraction == Fraction(repr(value))
        assert float(number) == value


@settings(max_examples=200, deadline=None)
@given(st.fractions(max_denominator=10**9))
def test_a_rational_survives_its_text(value: Fraction) -> None:
    text = fraction_text(value)
    bottom = value.denominator
    for prime in (2, 5):
        while bottom % prime == 0:
            bottom //= prime
    if bottom == 1:
        assert Fraction(text) == value
    else:
        assert abs(Fraction(text) - value) <= abs(value) / 10**39
    assert exact(value).fraction == value


def test_digits_are_rounded_half_to_even() -> None:
    assert fraction_text(Fraction(25, 10), 1) == "2"
    assert fraction_text(Fraction(35, 10), 1) == "4"
    assert fraction_text(Fraction(2, 3), 5) == "0.66667"
    assert fraction_text(Fraction(0), 5) == "0"
    assert fraction_text(Fraction(1, 10**9)) == "1e-9"


@pytest.mark.parametrize(
    "text",
    [
        *(
            "",
            " ",
            "nan",
            "inf",
            "-inf",
            "Infinity",
            "1/3",
            "0x10",
            "1_000",
            "1e",
            "e5",
            ".",
            "+",
            "--1",
            "1..2",
        ),
        *("1 2", "1,5", "1.5f", "\0", "\uff11", "\u0663", "1e400", "1e-400", "1e9999999"),
        *("9" * 201, "9" * 10**6, "0." + "1" * 10**5),
    ],
    ids=lambda text: ascii(text)[1:13] or "empty",
)
def test_what_is_no_number_is_refused(text: str) -> None:
    with pytest.raises(NumberError) as caught:
        exact(text, where="parameters.r.value")
    assert str(caught.value).startswith("parameters.r.value: ")
    assert caught.value.what_to_do
    assert len(str(caught.value)) < 300


@pytest.mark.parametrize("value", [float("nan"), float("inf"), float("-inf")])
def test_no_number_among_the_floats_is_refused(value: float) -> None:
    with pytest.raises(NumberError):
        exact(value)


def test_limits_are_where_they_say() -> None:
    assert exact("9" * MAX_DIGITS).fraction == 10**MAX_DIGITS - 1
    assert exact(f"1e{MAX_EXPONENT}").fraction == 10**MAX_EXPONENT
    assert exact(f"1e-{MAX_EXPONENT}").fraction == Fraction(1, 10**MAX_EXPONENT)
    assert exact(" +3.50 ").text == "+3.50"


def test_errors_cross_processes_whole() -> None:
    made: list[TinemarkError] = [
        FormulaError("bad", column=3, key="next.x", what_to_do="mend it"),
        SystemFileError("bad", file="a.toml", key="kind", line=2, column=5, what_to_do="mend it"),
        NumberError("bad", where="here", what_to_do="mend it"),
        errors.NoOnsetFound("none", where="there"),
    ]
    for error in made:
        copy = pickle.loads(pickle.dumps(error))
        assert type(copy) is type(error)
        assert str(copy) == str(error)
        assert vars(copy) == vars(error)
    assert str(made[0]) == "next.x, column 3: bad; mend it"
    assert str(made[1]) == "a.toml, line 2, kind, column 5: bad; mend it"
