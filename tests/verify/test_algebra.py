"""Exact algebra: what it calls zero is zero, and what is only nearly zero is not."""

from __future__ import annotations

import random
import re
from fractions import Fraction

import pytest

from tinemark.verify.algebra import Field
from tinemark.verify.claims import NotCheckable
from tinemark.verify.formula import parse
from tinemark.verify.quotients import Quotient, Untold, number
from tinemark.verify.watching import Watch

NAMES = ("x", "r")


def value(field: Field, text: str) -> Quotient:
    return field.value(parse(text, NAMES, {}), {name: field.named(name) for name in NAMES}, {})


@pytest.mark.parametrize(
    ("text", "zero"),
    [
        ("(x + r)**2 - x**2 - 2*x*r - r**2", True),
        ("x/(1 + x) + 1/(1 + x) - 1", True),
        ("sin(pi - x) - sin(x)", True),
        ("sin(2*pi - x) + sin(x)", True),
        ("cos(x + 3*pi/2) - sin(x)", True),
        ("cos(pi/3) - 1/2", True),
        ("tanh(r - x) + tanh(x - r)", True),
        ("exp(r - r*x)*exp(r*x) - exp(r)", True),
        ("sqrt(1 + x)*sqrt(x + 1) - 1 - x", True),
        ("(1 + x)**r - (x + 1)**r", True),
        ("acos(x) + asin(x) - pi/2", True),
        ("atan2(x, r) - atan2(x, r)", None),
        ("abs(x) - x", None),
        ("sqrt(x**2) - x", False),
        ("1e-300*x", False),
        ("sin(x) - x", False),
        ("sin(pi*x)", False),
        ("cos(x + pi/2) - sin(x)", False),
        ("exp(2*x) - exp(x)", False),
        ("3.14159265358979323846264338327950288 - pi", False),
    ],
)
def test_what_is_zero_for_all_values(text: str, zero: bool | None) -> None:
    field = Field()
    if zero is None:
        with pytest.raises(Untold):
            value(field, text)
    else:
        assert field.tidied(value(field, text)).is_zero is zero


def shown(field: Field, quotient: Quotient, x: Fraction, r: Fraction) -> Fraction:
    """A quotient of polynomials in x and r at a place."""
    at = field.replaced(quotient, {"x": number(x), "r": number(r)}).number()
    assert at is not None
    return at


def by_hand(text: str, x: Fraction, r: Fraction) -> Fraction:
    exact = re.sub(r"\((-?\d+)/(\d+)\)", r"F(\1, \2)", text)
    found = eval(exact, {"x": x, "r": r, "F": Fraction})
    assert isinstance(found, Fraction)
    return found


def test_values_and_slopes_of_random_quotients() -> None:
    """Against exact arithmetic on rationals, and slopes against differences."""
    generator = random.Random(1887)
    for _ in range(40):
        field = Field()
        terms = [
            f"({generator.randint(-9, 9)}/{generator.randint(1, 9)})*x**{generator.randint(0, 3)}"
            f"*r**{generator.randint(0, 2)}"
            for _ in range(4)
        ]
        text = f"({terms[0]} - {terms[1]})/(2 + ({terms[2]})**2 + x**2) + {terms[3]}"
        found = value(field, text)
        x, r = (Fraction(generator.randint(-50, 50), 17) for _ in range(2))
        assert shown(field, found, x, r) == by_hand(text, x, r)
        slope = shown(field, field.slope(found, "x"), x, r)
        step = Fraction(1, 10**30)
        ahead, back = (by_hand(text, x + side, r) for side in (step, -step))
        assert abs((ahead - back) / (2 * step) - slope) < Fraction(1, 10**20)


@pytest.mark.parametrize(
    "text",
    [
        "sin(x**2)",
        "cos(x/3)",
        "exp(x*r)",
        "log(2 + x)",
        "sqrt(3 + x)",
        "atan(x)",
        "sinh(x)",
        "tanh(x)",
        "asin(x/4)",
        "cosh(2*x)",
        "(2 + x)**r",
    ],
)
def test_slopes_of_functions_by_a_second_way(text: str) -> None:
    """(f(x) e)' e^-1 - f e'/e is f' again, whatever f: an identity that needs the slope to be right."""
    field = Field()
    whole, bare = value(field, f"({text})*exp(x)"), value(field, text)
    assert field.tidied(
        field.slope(whole, "x") / value(field, "exp(x)") - bare - field.slope(bare, "x")
    ).is_zero


def test_large_formulas_are_given_up() -> None:
    with pytest.raises(Untold):
        value(Field(), "(1 + x + r + x*r)**24*(1 - x + r)**24")
    with pytest.raises(NotCheckable):
        value(Field(Watch(minutes=1e-6)), "(1 + x + r)**9*(1 - x)**9 - x")
