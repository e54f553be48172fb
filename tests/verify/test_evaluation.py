"""The room's own parser, intervals and series, against the product's formulas and against mpmath.

The tests may hold both implementations against each other; the room itself imports nothing of the other.
"""

from __future__ import annotations

from fractions import Fraction
from typing import Any

import mpmath
import pytest
from hypothesis import assume, given, settings
from hypothesis import strategies as st
from random_formulas import NAMES, formula_texts, precise

from tinemark.systems.derivatives import derivative
from tinemark.systems.errors import FormulaError
from tinemark.systems.expression import ARITIES
from tinemark.systems.formula import read_formula
from tinemark.verify import intervals as iv
from tinemark.verify.claims import NotCheckable, Refused, Undecided
from tinemark.verify.formula import FUNCTIONS, parse
from tinemark.verify.series import ONE_STATE, Evaluator

BITS = 120
POINTS = st.tuples(*[st.fractions(-3, 3, max_denominator=64)] * len(NAMES))


def series_at(text: str, point: dict[str, Fraction], radius: Fraction = Fraction(0)) -> Any:
    """Series of a formula in x and r around a point, y put in."""
    program = parse(text, {"x", "r"}, {"y": point["y"]})

    def around(value: Fraction) -> iv.Interval:
        low, high = (iv.of_fraction(value + side * radius, BITS) for side in (-1, 1))
        return low[0], high[1]

    steady = {"r": {0: around(point["r"]), 2: iv.ONE}}
    return Evaluator(program, ONE_STATE, BITS, steady, ["x"])({"x": {0: around(point["x"]), 1: iv.ONE}})


def holds(interval: iv.Interval, value: Any) -> bool:
    low, high = (mpmath.mpf(end) for end in interval)
    return bool(low <= value <= high)


def exactly(value: Fraction) -> Any:
    return mpmath.mpf(value.numerator) / value.denominator


@settings(max_examples=250, deadline=None)
@given(formula_texts(ARITIES), POINTS)
def test_both_readers_agree_on_values(text: str, point: tuple[Fraction, ...]) -> None:
    try:
        expr = read_formula(text, NAMES)
    except FormulaError:
        assume(False)
    values = dict(zip(NAMES, point, strict=True))
    try:
        found = series_at(text, values)
    except (Undecided, NotCheckable):
        assume(False)
    with mpmath.workprec(4 * BITS):
        try:
            value = precise(expr, {name: exactly(number) for name, number in values.items()})
        except (ArithmeticError, ValueError):
            assume(False)
        assert holds(found[0], value)


SMOOTH = {name: count for name, count in ARITIES.items() if name not in ("abs", "min", "max", "floor")}
ORDERS = ("x", "r", "xx", "xr", "xxx")
TAYLOR = (1, 1, 2, 1, 6)


@settings(max_examples=40, deadline=None)
@given(formula_texts(SMOOTH, max_leaves=6), POINTS)
def test_series_hold_sympys_derivatives(text: str, point: tuple[Fraction, ...]) -> None:
    try:
        expr = read_formula(text, NAMES)
        values = dict(zip(NAMES, point, strict=True))
        found = series_at(text, values)
    except (FormulaError, Undecided, NotCheckable):
        assume(False)
    with mpmath.workprec(4 * BITS):
        numbers = {name: exactly(number) for name, number in values.items()}
        for place, (order, scale) in enumerate(zip(ORDERS, TAYLOR, strict=True), 1):
            by_hand = expr
            try:
                for name in order:
                    by_hand = derivative(by_hand, name)
                value = precise(by_hand, numbers) / scale
            except (ArithmeticError, ValueError, FormulaError):
                assume(False)
            assert holds(found.get(place, iv.ZERO), value), order


@pytest.mark.parametrize("name", FUNCTIONS)
@pytest.mark.parametrize("radius", [Fraction(1, 3), Fraction(1, 10**9)])
def test_functions_hold_all_values_on_a_box(name: str, radius: Fraction) -> None:
    """Values at both ends and between lie in the enclosure, and it is not far wider than need be."""
    others = ", y" if FUNCTIONS[name] == 2 else ""
    checked = 0
    for middle in (Fraction(n, 7) for n in range(-16, 17)):
        point = {"x": middle, "y": Fraction(2, 5), "r": Fraction(0)}
        try:
            found = series_at(f"{name}(x{others})", point, radius)
        except Undecided:
            continue
        expr = read_formula(f"{name}(x{others})", NAMES)
        with mpmath.workprec(2 * BITS):
            values = []
            for step in range(-4, 5):
                numbers = {n: exactly(v) for n, v in point.items()} | {
                    "x": exactly(middle + radius * step / 4)
                }
                values.append(precise(expr, numbers))
                assert holds(found[0], values[-1])
            spread = max(values) - min(values)
            low, high = (mpmath.mpf(end) for end in found[0])
            assert high - low <= 4 * spread + 4 * exactly(radius)
        checked += 1
    assert checked >= 4


def test_arguments_of_sine_and_cosine_are_reduced() -> None:
    with mpmath.workprec(1000):
        for value in (mpmath.pi * 10**6, mpmath.pi / 2, mpmath.mpf(10) ** 15 + 0.5, -mpmath.pi * 12345):
            point = mpmath.mpf(value)
            interval = (point._mpf_, point._mpf_)
            cosine, sine = iv.cos_sin(interval, BITS)
            assert holds(cosine, mpmath.cos(point))
            assert holds(sine, mpmath.sin(point))
    with pytest.raises(Undecided):
        iv.cos_sin(iv.of_fraction(Fraction(2) ** 70, BITS), BITS)


def test_nothing_touches_the_precision_of_the_process() -> None:
    before = mpmath.mp.prec, mpmath.iv.prec
    series_at(
        "sin(x) + exp(r*x)/(1 + x**2) - tanh(x)", {"x": Fraction(1, 3), "y": Fraction(0), "r": Fraction(2)}
    )
    assert (mpmath.mp.prec, mpmath.iv.prec) == before


@pytest.mark.parametrize(
    ("text", "value"),
    [
        ("-x**2", -4),
        ("2**-1", Fraction(1, 2)),
        ("2**3**2", 512),
        ("-2**2", -4),
        ("1 - 2 - 3", -4),
        ("8/4/2", 1),
        ("8/4*2", 4),
        ("- - 3", 3),
        ("x if 1 < x < 3 else 7", 2),
        ("x if 2 < 1 else 5 if x < 1 else 6", 6),
        ("max(1, x, 5, 3)", 5),
        ("(1 if x >= 1 else 2)*3", 3),
        ("floor(-0.5) + 1.5e1", 14),
    ],
)
def test_grammar(text: str, value: Fraction) -> None:
    point = {"x": Fraction(2), "y": Fraction(0), "r": Fraction(0)}
    assert iv.ends(series_at(text, point)[0]) == (value, value)


@pytest.mark.parametrize(
    "text",
    ["", "x +", "(x", "x)", "x y", "2x", "x ** ", "f(x)", "q", "x if 1 else 2", "sin()", "sin(x, x)", "x^2"],
)
def test_what_is_no_formula_is_refused(text: str) -> None:
    with pytest.raises(Refused):
        parse(text, {"x"}, {})


@pytest.mark.parametrize(
    "text",
    [
        "(" * 500 + "x" + ")" * 500,
        "-" * 1500 + "x",
        "x" + "+x" * 990,
        "x**1e9",
        "x**99",
        "1e999999*x",
        "9" * 3000,
    ],
)
def test_formulas_beyond_all_bounds_are_not_worked_with(text: str) -> None:
    try:
        series = series_at(text, {"x": Fraction(2), "y": Fraction(0), "r": Fraction(0)})
    except NotCheckable:
        return
    # A long sum is no deep one.
    assert iv.ends(series[0])[0] == 2 * 991


@pytest.mark.parametrize(
    "text", ["1/x", "log(x)", "sqrt(x)", "abs(x)", "floor(x)", "asin(x + 1)", "atan2(x, -1)"]
)
def test_what_is_not_defined_there_is_undecided(text: str) -> None:
    with pytest.raises(Undecided):
        series_at(text, {"x": Fraction(0), "y": Fraction(0), "r": Fraction(0)}, Fraction(1, 100))
    with pytest.raises(Undecided):
        series_at("exp(exp(exp(exp(x))))", {"x": Fraction(9), "y": Fraction(0), "r": Fraction(0)})


@settings(max_examples=300, deadline=None)
@given(
    *[st.fractions(-50, 50, max_denominator=10**12)] * 4,
    st.sampled_from(["add", "sub", "mul", "div", "square", "power"]),
)
def test_arithmetic_rounds_outward(
    a: Fraction, b: Fraction, c: Fraction, d: Fraction, operation: str
) -> None:
    """Against exact rationals, at a precision that has to round: every corner's value is inside."""
    bits = 24
    x, y = (
        (iv.of_fraction(min(low, high), bits)[0], iv.of_fraction(max(low, high), bits)[1])
        for low, high in ((a, b), (c, d))
    )
    try:
        result = {
            "add": lambda: iv.add(x, y, bits),
            "sub": lambda: iv.sub(x, y, bits),
            "mul": lambda: iv.mul(x, y, bits),
            "div": lambda: iv.div(x, y, bits),
            "square": lambda: iv.whole_power(x, 2, bits),
            "power": lambda: iv.whole_power(x, 5, bits),
        }[operation]()
    except Undecided:
        assert operation == "div"
        assert min(c, d) <= Fraction(1, 10**6)
        assert max(c, d) >= -Fraction(1, 10**6)
        return
    low, high = iv.ends(result)
    for first in (a, b, (a + b) / 2):
        for second in (c, d, (c + d) / 2):
            value = {
                "add": first + second,
                "sub": first - second,
                "mul": first * second,
                "div": first / second if second else None,
                "square": first**2,
                "power": first**5,
            }[operation]
            assert value is not None
            assert low <= value <= high
