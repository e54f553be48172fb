"""Formulas are read as Python's own grammar reads them, and exactly."""

from __future__ import annotations

import itertools
from fractions import Fraction

import pytest
from hypothesis import assume, given, settings
from hypothesis import strategies as st
from random_formulas import NAMES, RATIONAL_TOOLS, formula_texts, python_value, rational

from tinemark.systems.errors import FormulaError
from tinemark.systems.expression import ARITIES, Call, Cond, Name, Num, Pi, names_in, walk
from tinemark.systems.formula import (
    MAX_DEPTH,
    MAX_INTEGER_EXPONENT,
    MAX_LENGTH,
    MAX_NAME_LENGTH,
    MAX_NODES,
    read_formula,
)

FRACTIONS = st.fractions(-4, 4, max_denominator=50)
RATIONAL_FUNCTIONS = {"abs": 1, "floor": 1, "min": 2, "max": 2}


def refusal(text: str) -> FormulaError | None:
    """Why a text is refused, or None where it is read."""
    try:
        read_formula(text, NAMES, key="next.x")
    except FormulaError as error:
        return error
    return None


@settings(max_examples=400, deadline=None)
@given(formula_texts(RATIONAL_FUNCTIONS), st.tuples(FRACTIONS, FRACTIONS, FRACTIONS))
def test_a_formula_means_what_python_says_in_exact_numbers(
    text: str, numbers: tuple[Fraction, Fraction, Fraction]
) -> None:
    values = dict(zip(NAMES, numbers, strict=True))
    try:
        expected = Fraction(python_value(text, values, Fraction, RATIONAL_TOOLS))
    except (ZeroDivisionError, OverflowError):
        assume(False)
    error = refusal(text)
    if error is not None:
        # Only what is wrong in every branch, such as 1/0 in one that is not taken, may be refused.
        assert "division by zero" in error.message or "constant" in error.message, text
        assume(False)
    assert rational(read_formula(text, NAMES), values) == expected


@settings(max_examples=150, deadline=None)
@given(
    formula_texts(dict(ARITIES), max_leaves=8),
    st.integers(0, 200),
    st.integers(0, 2),
    st.sampled_from(
        ["^", "..", "q", " (", ")", "[0]", "==", "lambda", "²", "\0", "'", ";", "@", ":=", "9z", "\n", "**-"]
    ),
)
def test_every_error_points_into_its_text(text: str, place: int, dropped: int, junk: str) -> None:
    place %= len(text) + 1
    spoiled = text[:place] + junk + text[place + dropped :]
    error = refusal(spoiled)
    if error is not None:
        assert 1 <= error.column <= max(len(spoiled), 1)
        assert error.key == "next.x"
        assert str(error).startswith(f"next.x, column {error.column}: ")


@settings(max_examples=300, deadline=None)
@given(st.text(max_size=60))
def test_any_text_is_read_or_refused(text: str) -> None:
    error = refusal(text)
    if error is None:
        assert names_in(read_formula(text, NAMES)) <= set(NAMES)
    else:
        assert 1 <= error.column <= max(len(text), 1)


@settings(max_examples=300, deadline=None)
@given(
    st.lists(
        st.sampled_from([*"xyr0129.()+-*/<>=, ", "**", " if ", " else ", "sin", "min", "pi", "1e9"]),
        max_size=14,
    )
)
def test_any_row_of_allowed_signs_is_read_or_refused(parts: list[str]) -> None:
    text = "".join(parts)
    error = refusal(text)
    assert error is None or 1 <= error.column <= max(len(text), 1)


@pytest.mark.parametrize(
    ("text", "column", "words"),
    [
        ("r*x^2", 4, "use ** for powers"),
        ("r*x*(1 - x", 5, "never closed"),
        ("r*x)", 4, "closes nothing"),
        ("r*q", 3, '"q" is neither'),
        ("rr*x", 1, 'did you mean "r"'),
        ("sine(x)", 1, 'did you mean "sin"'),
        ("r(1 - x)", 1, "write * between factors"),
        ("2*sin", 3, "give it its argument"),
        ("sin(x, y)", 1, "takes 1 argument, not 2"),
        ("atan2(x)", 1, "takes 2 arguments, not 1"),
        ("min(x)", 1, "2 or more"),
        ("sin()", 1, "takes 1 argument, not 0"),
        ("min(x, y, key=r)", 1, "no named arguments"),
        ("x < r", 1, "a if x < c else b"),
        ("1 if x else 2", 6, "comparison"),
        ("1 if x == 2 else 3", 6, "< <= > >="),
        ("x, y", 1, "decimals with a point"),
        ("1,5*x", 1, "decimals with a point"),
        ("x // y", 1, "floor(a/b)"),
        ("x % y", 3, "%"),
        ("x/0", 3, "division by zero"),
        ("0**-1", 4, "division by zero"),
        ("x**65", 4, "exponent"),
        ("t*x", 1, "time"),
        ("0x10", 1, "not a number"),
        ("1_000*x", 1, "not a number"),
        ("1j*x", 1, "not a number"),
        ("", 1, "empty"),
        ("   ", 1, "empty"),
        ("  r*q", 5, '"q"'),
        ("x.real", 1, "dot after a name"),
        ("x*(y)(r)", 3, "write * between factors"),
        ("x*(y + 1)(r)", 3, "only the listed functions"),
        ("1e400*x", 1, "power of ten"),
    ],
)
def test_errors_say_where_what_and_what_to_do(text: str, column: int, words: str) -> None:
    with pytest.raises(FormulaError) as caught:
        read_formula(text, NAMES, key="next.x")
    assert caught.value.column == column
    assert words in str(caught.value)


def test_decimals_are_the_rationals_they_spell() -> None:
    assert read_formula("0.3", []) == Num(Fraction(3, 10))
    assert read_formula("1e-3", []) == Num(Fraction(1, 1000))
    assert read_formula("0.1 + 0.2", []) == Num(Fraction(3, 10))
    assert read_formula("1/3", []) == Num(Fraction(1, 3))
    assert read_formula("-2**2", []) == Num(Fraction(-4))
    assert read_formula("2**-1", []) == Num(Fraction(1, 2))
    digits = "0." + "123456789" * 20
    assert read_formula(digits, []) == Num(Fraction(digits))


def test_every_listed_function_is_read() -> None:
    for name, count in ARITIES.items():
        text = f"{name}({', '.join('xyr'[:count])})"
        expr = read_formula(text, NAMES)
        assert expr == Call(name, tuple(Name(letter) for letter in "xyr"[:count]))
    assert read_formula("pi", []) == Pi()
    assert read_formula("min(x, y, r)", NAMES) == Call(
        "min", (Call("min", (Name("x"), Name("y"))), Name("r"))
    )


def test_a_name_of_the_users_wins_over_nothing_of_ours() -> None:
    # A state called like a constant of other systems is simply a name.
    assert read_formula("e*E*inf*nan*I", ["e", "E", "inf", "nan", "I"]) is not None
    assert isinstance(read_formula("t", ["t"]), Name)


def test_between_needs_both() -> None:
    expr = read_formula("1 if 0 < x <= r else 2", NAMES)
    assert isinstance(expr, Cond)
    for x, expected in (
        (Fraction(-1), 2),
        (Fraction(0), 2),
        (Fraction(1), 1),
        (Fraction(3), 1),
        (Fraction(4), 2),
    ):
        assert rational(expr, {"x": x, "r": Fraction(3), "y": Fraction(0)}) == expected


def test_limits_are_where_they_say() -> None:
    assert read_formula("x" + " " * (MAX_LENGTH - 1), NAMES) == Name("x")
    with pytest.raises(FormulaError, match="characters"):
        read_formula("x" + " " * MAX_LENGTH, NAMES)
    assert read_formula(f"x**{MAX_INTEGER_EXPONENT}", NAMES) is not None
    with pytest.raises(FormulaError, match="exponent"):
        read_formula(f"x**-{MAX_INTEGER_EXPONENT + 1}", NAMES)
    inside = MAX_DEPTH - 1
    assert read_formula("sin(" * inside + "x" + ")" * inside, NAMES) is not None
    with pytest.raises(FormulaError, match="nested"):
        read_formula("sin(" * MAX_DEPTH + "x" + ")" * MAX_DEPTH, NAMES)
    assert read_formula("a" * MAX_NAME_LENGTH, ["a" * MAX_NAME_LENGTH]) is not None


def test_a_long_sum_is_not_nested() -> None:
    terms = [f"{k}*x**{k % 7}" for k in range(1, 70)]
    expr = read_formula(" + ".join(terms), NAMES)
    value = Fraction(3, 2)
    expected = sum((k * value ** (k % 7) for k in range(1, 70)), Fraction(0))
    assert rational(expr, {"x": value, "y": value, "r": value}) == expected


def test_a_tree_is_bounded() -> None:
    text = "+".join(itertools.repeat("x", MAX_NODES))
    with pytest.raises(FormulaError, match="too long"):
        read_formula(text, NAMES)
    for node in walk(read_formula("x*(1 - x)*r", NAMES)):
        assert hash(node) == hash(node)
