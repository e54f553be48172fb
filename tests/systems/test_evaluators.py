"""Evaluators generated from formulas, against mpmath at high precision.

A formula's value in doubles must lie in its ball at 40 bits: wide enough for the rounding of
doubles through the same steps, and narrow enough to catch a wrong operation. A ball at any
precision must hold the value that mpmath finds at twice that precision.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence
from fractions import Fraction
from typing import Any

import mpmath
import numpy as np
import pytest
from flint import arb, ctx, fmpq
from hypothesis import assume, given, settings
from hypothesis import strategies as st
from random_formulas import NAMES, formula_texts, precise, python_value

from tinemark.systems import lane_math
from tinemark.systems.balls import ball_function
from tinemark.systems.derivatives import derivative
from tinemark.systems.emit import emit
from tinemark.systems.errors import FormulaError, SwitchingTouched
from tinemark.systems.expression import ARITIES, Call, Expr, Name, Num, walk
from tinemark.systems.formula import read_formula
from tinemark.systems.library import DEMO, builtin_names, builtin_system
from tinemark.systems.plain import plain_function
from tinemark.systems.surfaces import Surface, domain_edges, switching_surfaces

POINTS = st.tuples(*[st.fractions(-3, 3, max_denominator=64)] * len(NAMES))
LANE = {name: getattr(lane_math, name) for name in dir(lane_math) if name.startswith("lane_")}


def read(text: str) -> Expr:
    try:
        return read_formula(text, NAMES)
    except FormulaError:
        assume(False)
        raise


def scalar_function(expressions: Sequence[Expr], names: Sequence[str]) -> Callable[..., tuple[float, ...]]:
    """The statements that kernels are made of, run as plain Python over the lane functions."""
    bind = {name: f"a{place}" for place, name in enumerate(names)}
    results = [f"r{place}" for place in range(len(expressions))]
    body = emit(list(zip(results, expressions, strict=True)), bind, "native")
    lines = [f"def evaluate({', '.join(bind.values())}):", *(f"    {line}" for line in body)]
    space: dict[str, Any] = dict(LANE)
    exec("\n".join([*lines, f"    return ({', '.join(results)},)"]), space)
    function: Callable[..., tuple[float, ...]] = space["evaluate"]
    return function


def ball_at(expr: Expr, point: Sequence[Any], bits: int, names: Sequence[str] = NAMES) -> Any:
    """Value of a formula over balls at a precision."""
    before = ctx.prec
    ctx.prec = bits
    try:
        arguments = [arb(fmpq(v.numerator, v.denominator)) if isinstance(v, Fraction) else v for v in point]
        result = ball_function((expr,), tuple(names))(*arguments)[0]
        assert isinstance(result, arb)
        return result
    finally:
        ctx.prec = before


def near(value: float, box: Any) -> bool:
    middle, radius = float(box.mid()), float(box.rad())
    return abs(value - middle) <= 1.01 * radius + 1e-12 * abs(middle) + 1e-300


def doubles_agree(text: str, expr: Expr, point: Sequence[Fraction]) -> bool:
    """Whether the scalar statements and the plain evaluator give the formula's value, where it has one."""
    try:
        box = ball_at(expr, point, 40)
    except SwitchingTouched:
        return True
    if not box.is_finite() or float(box.rad()) > 1e-3 * (1 + abs(float(box.mid()))):
        return True
    floats = [float(value) for value in point]
    if any(Fraction(number) != value for number, value in zip(floats, point, strict=True)):
        return True
    with np.errstate(all="ignore"):
        try:
            scalar = scalar_function([expr], NAMES)(*[np.float64(number) for number in floats])[0]
        except ZeroDivisionError:  # of two constants of Python's own: never reached in a kernel
            scalar = math.nan
    plain = float(np.asarray(plain_function([expr], NAMES)([np.float64(number) for number in floats])[0]))
    return (near(float(scalar), box) and near(plain, box)) or overflows(expr, point)


def overflows(expr: Expr, point: Sequence[Fraction]) -> bool:
    """Whether a formula passes through a value that no double can hold."""
    parts = [ball_at(node, point, 40) for node in walk(expr)]
    return any(not part.is_finite() or abs(part) > arb(10) ** 300 for part in parts)


@settings(max_examples=150)
@given(formula_texts(dict(ARITIES), max_leaves=10), st.tuples(*[st.integers(-192, 192)] * len(NAMES)))
def test_doubles_agree_with_balls(text: str, numbers: tuple[int, ...]) -> None:
    expr = read(text)
    assert doubles_agree(text, expr, [Fraction(number, 64) for number in numbers])


@settings(max_examples=120)
@given(formula_texts(dict(ARITIES), max_leaves=10), POINTS, st.sampled_from([30, 53, 100, 220]))
def test_balls_hold_the_value_that_mpmath_finds(text: str, point: tuple[Fraction, ...], bits: int) -> None:
    expr = read(text)
    with mpmath.workprec(2 * bits + 60):
        values = {n: mpmath.mpf(v.numerator) / v.denominator for n, v in zip(NAMES, point, strict=True)}
        try:
            expected = precise(expr, values)
        except (ArithmeticError, ValueError):
            assume(False)
        try:
            box = ball_at(expr, point, bits)
        except SwitchingTouched:
            assume(False)
        assume(box.is_finite() and box.mid() < arb(2) ** 5000)
        assert holds(box, expected), text


def holds(box: Any, value: Any) -> bool:
    """Whether a ball holds a number, decided in exact integers."""
    middle, radius = (_rational(*part.man_exp()) for part in (box.mid(), box.rad()))
    if isinstance(value, mpmath.mpf):
        sign, mantissa, exponent, _ = value._mpf_
        value = _rational(-int(mantissa) if sign else int(mantissa), exponent)
    return bool(abs(value - middle) <= radius)


def _rational(mantissa: Any, exponent: Any) -> Fraction:
    shift = int(exponent)
    return Fraction(int(mantissa)) * (Fraction(2**shift) if shift >= 0 else Fraction(1, 2**-shift))


@settings(max_examples=60)
@given(
    formula_texts(dict(ARITIES), max_leaves=8),
    POINTS,
    st.tuples(*[st.fractions(0, Fraction(1, 8), max_denominator=512)] * len(NAMES)),
    st.lists(st.tuples(*[st.fractions(-1, 1, max_denominator=16)] * len(NAMES)), min_size=1, max_size=5),
)
def test_wide_balls_hold_the_value_at_every_point_inside(
    text: str,
    middle: tuple[Fraction, ...],
    radius: tuple[Fraction, ...],
    shifts: list[tuple[Fraction, ...]],
) -> None:
    expr = read(text)
    boxes = [arb(fmpq(m.numerator, m.denominator), float(r)) for m, r in zip(middle, radius, strict=True)]
    try:
        box = ball_at(expr, boxes, 80)
    except SwitchingTouched:
        assume(False)
    assume(box.is_finite() and box.mid() < arb(2) ** 5000)
    # Half the radius: the ball's own rounded radius is then surely larger.
    for shift in shifts:
        with mpmath.workprec(200):
            inside = [m + r * s * Fraction(1, 2) for m, r, s in zip(middle, radius, shift, strict=True)]
            values = {n: mpmath.mpf(v.numerator) / v.denominator for n, v in zip(NAMES, inside, strict=True)}
            try:
                expected = precise(expr, values)
            except ArithmeticError as error:
                assume("to compare" not in str(error))
                raise
            assert holds(box, expected), text


@pytest.mark.parametrize("name", [n for n in (*builtin_names(), DEMO) if builtin_system(n).is_map])
@pytest.mark.parametrize("order", [0, 1, 2])
def test_library_formulas_and_derivatives_in_doubles_and_balls(name: str, order: int) -> None:
    system = builtin_system(name)
    expressions = list(system.expressions)
    for _ in range(order):
        expressions = [
            derivative(expr, n)
            for expr in expressions
            for n in (*system.state_names, system.diagram_parameter)
        ]
    point = [state.start.fraction + Fraction(1, 97) for state in system.states]
    point += [parameter.value.fraction for parameter in system.parameters]
    floats = [np.float64(float(value)) for value in point]
    scalar = scalar_function(expressions, system.names)(*floats)
    plain = plain_function(expressions, system.names)(floats)
    with mpmath.workprec(300):
        values = {
            n: mpmath.mpf(v.numerator) / v.denominator for n, v in zip(system.names, point, strict=True)
        }
        for expr, in_scalar, in_plain in zip(expressions, scalar, plain, strict=True):
            expected = precise(expr, values)
            box = ball_at(expr, point, 128, system.names)
            assert holds(box, expected)
            assert float(box.rad()) <= 1e-30 * (1 + abs(float(expected)))
            assert float(in_scalar) == pytest.approx(float(expected), rel=1e-11, abs=1e-11)
            assert float(np.asarray(in_plain)) == pytest.approx(float(expected), rel=1e-11, abs=1e-11)


@settings(max_examples=120)
@given(formula_texts({}, max_leaves=10), st.tuples(*[st.integers(-192, 192)] * len(NAMES)))
def test_plain_numbers_are_pythons_own(text: str, numbers: tuple[int, ...]) -> None:
    """Same operations in the same order: equal to the last bit, but for constants that were folded."""
    expr = read(text)
    values = {name: number / 64 for name, number in zip(NAMES, numbers, strict=True)}
    try:
        expected = float(python_value(text, values, float, {}))
    except (ZeroDivisionError, OverflowError):
        assume(False)
    box = None
    try:
        box = ball_at(expr, [Fraction(number, 64) for number in numbers], 40)
    except SwitchingTouched:
        assume(False)
    assume(box is not None and box.is_finite() and near(expected, box))
    found = float(np.asarray(plain_function([expr], NAMES)([np.float64(v) for v in values.values()])[0]))
    assert near(found, box)


def test_arrays_give_what_single_numbers_give() -> None:
    text = "min(x, y) + (sin(x) if x < r else floor(y)**2) + abs(x - r)/(1 + y**2)"
    evaluate = plain_function([read_formula(text, NAMES)], NAMES)
    xs, ys = np.linspace(-2, 2, 41), np.linspace(3, -1, 41)
    whole = np.asarray(evaluate([xs, ys, np.float64(0.3)])[0])
    single = [float(np.asarray(evaluate([x, y, np.float64(0.3)])[0])) for x, y in zip(xs, ys, strict=True)]
    assert whole.tolist() == single


def test_undefined_operations_give_nan_or_inf_and_no_warning() -> None:
    cases = {"1/x": math.inf, "log(x)": -math.inf, "sqrt(x - 1)": math.nan, "exp(1000 + x)": math.inf}
    cases |= {"x/x": math.nan, "asin(2 + x)": math.nan, "(x - 1)**0.5": math.nan, "floor(1/x)": math.inf}
    for text, expected in cases.items():
        expr = read_formula(text, NAMES)
        zeros = [np.float64(0)] * len(NAMES)
        for value in (plain_function([expr], NAMES)(zeros)[0], _quiet(scalar_function([expr], NAMES), zeros)):
            assert float(np.asarray(value)) == expected or (math.isnan(expected) and math.isnan(value)), text


def _quiet(function: Callable[..., tuple[float, ...]], values: list[Any]) -> float:
    with np.errstate(all="ignore"):
        return float(function(*values)[0])


@pytest.mark.parametrize(
    ("text", "surfaces"),
    [
        ("r*x*(1 - x)", []),
        ("abs(x - r)", [("x - r", "zero")]),
        ("min(x, 1 - x)", [("x - (1 - x)", "zero")]),
        ("max(0, x)", [("0 - x", "zero")]),
        ("floor(x/r)", [("x/r", "integer")]),
        ("1 if x < r else 2", [("x - r", "zero")]),
        ("1 if 0 < x < r else 2", [("0 - x", "zero"), ("x - r", "zero")]),
        ("min(x, y, r)", [("x - y", "zero"), ("min(x, y) - r", "zero")]),
        ("abs(x) + abs(x)", [("x", "zero")]),
        ("atan2(y, x)", [("x + sqrt(x**2 + y**2)", "zero")]),
    ],
)
def test_switching_surfaces_are_recorded(text: str, surfaces: list[tuple[str, str]]) -> None:
    expected = {Surface(read_formula(expr, NAMES), kind) for expr, kind in surfaces}
    assert set(switching_surfaces([read_formula(text, NAMES)])) == expected


@pytest.mark.parametrize(
    ("text", "edges"),
    [
        ("r*x*(1 - x)", []),
        ("x**2 + x**0 + sin(x) + exp(x)/3", []),
        ("r/(1 + x)", ["1 + x"]),
        ("sqrt(x)**2 + x**0.5", ["x"]),
        ("x**-2 + log(y)", ["x", "y"]),
        ("x**r", ["x"]),
        ("asin(x) + acos(y)", ["1 - x**2", "1 - y**2"]),
        ("tan(x)", ["cos(x)"]),
        ("sqrt(2)*x", []),
        ("1/(1/x)", ["x", "1/x"]),
    ],
)
def test_edges_of_the_domain_are_recorded(text: str, edges: list[str]) -> None:
    expected = {Surface(read_formula(edge, NAMES), "zero") for edge in edges}
    assert set(domain_edges([read_formula(text, NAMES)])) == expected


@pytest.mark.parametrize(
    ("text", "inside", "outside"),
    [
        ("1/(x - 1)", "1.2 +/- 0.1", "1 +/- 0.1"),
        ("sqrt(x)", "0.2 +/- 0.1", "0.05 +/- 0.1"),
        ("x**1.5", "0.2 +/- 0.1", "0.05 +/- 0.1"),
        ("asin(x)", "0.8 +/- 0.1", "0.95 +/- 0.1"),
        ("tan(x)", "1.4 +/- 0.1", "1.5 +/- 0.1"),
        ("atan2(y - 1, x)", "0.2 +/- 0.01", "-0.2 +/- 0.01"),
    ],
)
def test_an_edge_tells_a_ball_that_is_inside_from_one_that_is_not(
    text: str, inside: str, outside: str
) -> None:
    expr = read_formula(text, NAMES)
    (surface,) = {*domain_edges([expr]), *switching_surfaces([expr])}
    for shown, defined in ((inside, True), (outside, False)):
        box = ball_at(surface.expr, [arb(shown), arb(1), arb(1)], 80)
        assert (box > 0 or box < 0) == defined


@pytest.mark.parametrize(
    ("text", "touching", "clear"),
    [
        ("abs(x)", "0 +/- 0.1", "0.2 +/- 0.1"),
        ("min(x, 1)", "1 +/- 0.001", "0.9 +/- 0.01"),
        ("max(x, 1)", "1 +/- 0.001", "1.1 +/- 0.01"),
        ("floor(x)", "3 +/- 0.001", "2.5 +/- 0.4"),
        ("1 if x < 2 else 3", "2 +/- 1e-10", "1.9 +/- 0.01"),
        ("1 if x >= 2 else 3", "2 +/- 1e-10", "2.1 +/- 0.01"),
        ("1 if 0 < x < 2 else 3", "0 +/- 1e-10", "1 +/- 0.5"),
    ],
)
def test_a_ball_on_a_surface_is_refused(text: str, touching: str, clear: str) -> None:
    expr = read_formula(text, NAMES)
    other = [arb(1), arb(1)]
    with pytest.raises(SwitchingTouched):
        ball_at(expr, [arb(touching), *other], 80)
    exactly = touching.split(" ", maxsplit=1)[0]
    with pytest.raises(SwitchingTouched):
        ball_at(expr, [arb(exactly), *other], 80)
    assert ball_at(expr, [arb(clear), *other], 80).is_finite()
    with pytest.raises(SwitchingTouched):
        ball_at(expr, [arb("nan"), *other], 80)


def test_balls_outside_a_domain_are_not_finite() -> None:
    for text in (
        "log(x)",
        "sqrt(x)",
        "1/x",
        "x**-1",
        "x**0.5",
        "x**r",
        "log(x - 1)",
        "asin(2 + x)",
        "tan(x*0 + pi/2)",
    ):
        box = ball_at(read_formula(text, NAMES), [arb("0 +/- 0.1"), arb(1), arb("0.5 +/- 0.1")], 80)
        assert not box.is_finite(), text


@pytest.mark.parametrize(
    ("text", "expected"),
    [
        ("(3 if x < 1 else 4)/7", Fraction(3, 7)),
        ("y + (3 if x < 1 else 4)/7", Fraction(10, 7)),
        ("min(x, 1)/7 + max(y, 3)/7", Fraction(1, 14) + Fraction(3, 7)),
        ("min(y + 3, 2)/max(r - 9, 3)", Fraction(2, 3)),
        ("max(y, 2)/3", Fraction(2, 3)),
        ("(2 if x < 1 else y)/(3 if x < 1 else r)", Fraction(2, 3)),
        ("abs(max(y, 2)*2 - 7)/3", Fraction(1)),
        ("-max(y, 2)/3", Fraction(-2, 3)),
        ("1/max(y, 3)**2", Fraction(1, 9)),
        ("max(y, 3)**-2", Fraction(1, 9)),
        ("max(y, 3)/7*x", Fraction(3, 14)),
        ("2 if x < 1 else y", Fraction(2)),
        ("7", Fraction(7)),
        ("1/3", Fraction(1, 3)),
    ],
)
def test_whole_numbers_in_balls_never_divide_as_pythons_own(text: str, expected: Fraction) -> None:
    """3/7 of two of Python's numbers is a double: a rounded value that would pass for exact."""
    box = ball_at(read_formula(text, NAMES), [Fraction(1, 2), Fraction(1), Fraction(2)], 200)
    assert holds(box, expected)
    assert float(box.rad()) < 1e-55


@pytest.mark.parametrize("fn", ["pow", "min", "max", "div"])
def test_constants_put_in_later_stay_exact(fn: str) -> None:
    # Where parameters are replaced by numbers, whole constants meet that no reader has folded.
    second = Fraction(-2) if fn == "pow" else Fraction(9)
    expr = Call("div", (Call(fn, (Num(Fraction(3)), Num(second))), Num(Fraction(7))))
    value = {"pow": Fraction(1, 9), "min": Fraction(3), "max": Fraction(9), "div": Fraction(1, 3)}[fn] / 7
    box = ball_at(Call("mul", (expr, Name("x"))), [Fraction(1)] * 3, 200)
    assert holds(box, value)


def test_a_division_by_a_constant_zero_is_no_crash() -> None:
    for text in ("1/min(x, 0)", "(1 if x < 1 else 2)/(0 if x < 1 else 1)"):
        assert not ball_at(read_formula(text, NAMES), [Fraction(1, 2)] * 3, 80).is_finite()


def test_constants_beyond_doubles_overflow_where_they_run() -> None:
    for constant, expected in (("1e270", math.inf), ("1e-270", 0.0)):
        square = Call("mul", (Num(Fraction(constant)), Num(Fraction(constant))))
        assert scalar_function([square], NAMES)(0.0, 0.0, 0.0)[0] == expected
        assert holds(ball_at(square, [Fraction(1)] * 3, 80), Fraction(constant) ** 2)
        slope = derivative(read_formula(f"{constant}*x*{constant}", NAMES), "x")
        assert scalar_function([slope], NAMES)(1.0, 0.0, 0.0)[0] == expected


def test_precision_in_force_is_the_one_that_counts() -> None:
    expr = read_formula("x*pi + 1/3", NAMES)
    radii = [float(ball_at(expr, [Fraction(1, 7)] * 3, bits).rad()) for bits in (30, 60, 120, 240, 60, 30)]
    for bits, radius in zip((30, 60, 120, 240, 60, 30), radii, strict=True):
        assert 2.0 ** -(bits + 4) < radius < 2.0 ** -(bits - 6)


def test_statements_compute_shared_parts_once() -> None:
    expr = read_formula("exp(r*x)*sin(exp(r*x)) + exp(x*r)", NAMES)
    text = "\n".join(emit([("y0", expr), ("y1", derivative(expr, "x"))], {n: n for n in NAMES}, "native"))
    assert text.count("lane_exp(") == 1
    assert text.count("lane_sin(") == 1


def test_targets_may_be_what_the_formulas_read() -> None:
    swap = [("x", read_formula("y", NAMES)), ("y", read_formula("x + y", NAMES))]
    lines = emit(swap, {n: n for n in NAMES}, "native")
    space: dict[str, Any] = {"x": 2.0, "y": 5.0, "r": 0.0, **LANE}
    exec("\n".join(lines), space)
    assert (space["x"], space["y"]) == (5.0, 7.0)


def test_names_of_the_user_never_reach_the_code() -> None:
    names = ["exp", "fmpq", "evaluate", "arb", "self", "u0", "r0", "a1", "lane_exp", "ball_pi"][1:]
    expr = read_formula("fmpq*2.5 + u0*r0 - a1/lane_exp*ball_pi + self*arb*evaluate", names)
    values = [Fraction(place, 7) for place in range(1, len(names) + 1)]
    f, evaluate, a, s, u, r, a1, lane, pi = values
    expected = f * Fraction(5, 2) + u * r - a1 / lane * pi + s * a * evaluate
    assert holds(ball_at(expr, values, 100, names), expected)
    found = scalar_function([expr], names)(*map(float, values))[0]
    assert found == pytest.approx(float(expected), rel=1e-14)


def test_a_formula_of_hundreds_of_terms_is_evaluated() -> None:
    text = " + ".join(f"{k % 10}*x" for k in range(120))
    expr = read_formula(text, NAMES)
    total = sum(k % 10 for k in range(120))
    assert scalar_function([expr], NAMES)(0.5, 0.0, 0.0)[0] == total / 2
    assert float(np.asarray(plain_function([expr], NAMES)([np.float64(0.5)] * 3)[0])) == total / 2
    assert holds(ball_at(expr, [Fraction(1, 2)] * 3, 60), Fraction(total, 2))
    assert derivative(expr, "x") == read_formula(str(total), NAMES)
