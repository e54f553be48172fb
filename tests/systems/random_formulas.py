"""Random formula texts, and slow, obvious evaluators to hold the real ones against."""

from __future__ import annotations

import ast
import math
from collections.abc import Callable, Mapping
from fractions import Fraction
from typing import Any

from hypothesis import strategies as st

from tinemark.systems.expression import Call, Cond, Expr, Name, Num, Pi

NAMES = ("x", "y", "r")

LARGEST_MAGNITUDE = 30000
"""Powers of two beyond which the slow evaluator gives up: exact comparisons get too long."""

# How tightly each form binds, as Python's grammar has it.
_IF, _SUM, _PRODUCT, _SIGN, _POWER, _ATOM = range(6)
_Text = tuple[str, int]


def _at_least(part: _Text, level: int) -> str:
    return part[0] if part[1] >= level else f"({part[0]})"


def _binary(parts: tuple[_Text, str, _Text, bool]) -> _Text:
    left, op, right, loose = parts
    level = _SUM if op in "+-" else _PRODUCT
    gap = " " if loose else ""
    return (f"{_at_least(left, level)}{gap}{op}{gap}{_at_least(right, level + 1)}", level)


def _conditional(parts: tuple[_Text, _Text, str, _Text, _Text]) -> _Text:
    then, left, op, right, other = parts
    test = f"{_at_least(left, _SUM)} {op} {_at_least(right, _SUM)}"
    return (f"{_at_least(then, _SUM)} if {test} else {other[0]}", _IF)


def _between(parts: tuple[_Text, _Text, str, _Text, str, _Text, _Text]) -> _Text:
    then, low, first, middle, second, high, other = parts
    test = f"{_at_least(low, _SUM)} {first} {_at_least(middle, _SUM)} {second} {_at_least(high, _SUM)}"
    return (f"({_at_least(then, _SUM)} if {test} else {other[0]})", _ATOM)


def _decimals() -> st.SearchStrategy[str]:
    whole = st.integers(0, 30).map(str)
    pointed = st.tuples(st.integers(0, 9), st.integers(0, 999)).map(lambda p: f"{p[0]}.{p[1]:03}")
    odd = st.sampled_from(["0.5", ".25", "3.", "2e1", "1.5e-2", "4E+0", "07.5"])
    return st.one_of(whole, pointed, odd)


def formula_texts(functions: Mapping[str, int], *, max_leaves: int = 12) -> st.SearchStrategy[str]:
    """Formula texts in `NAMES` that call the given functions (name -> number of arguments)."""
    leaf = st.one_of(st.sampled_from(NAMES), _decimals()).map(lambda text: (text, _ATOM))

    def extend(inner: st.SearchStrategy[_Text]) -> st.SearchStrategy[_Text]:
        compare = st.sampled_from(["<", "<=", ">", ">="])
        forms = [
            st.tuples(inner, st.sampled_from("+-*/"), inner, st.booleans()).map(_binary),
            inner.map(lambda part: (f"-{_at_least(part, _SIGN)}", _SIGN)),
            inner.map(lambda part: (f"+{_at_least(part, _SIGN)}", _SIGN)),
            inner.map(lambda part: (f"({part[0]})", _ATOM)),
            st.tuples(inner, st.sampled_from(["2", "3", "-1", "(-2)", "0", "1", "+2"])).map(
                lambda pair: (f"{_at_least(pair[0], _ATOM)}**{pair[1]}", _POWER)
            ),
            st.tuples(inner, inner, compare, inner, inner).map(_conditional),
            st.tuples(inner, inner, compare, inner, compare, inner, inner).map(_between),
        ]
        for name, count in functions.items():
            arguments = st.tuples(*[inner] * count)
            forms.append(
                arguments.map(lambda parts, name=name: (f"{name}({', '.join(p[0] for p in parts)})", _ATOM))
            )
        return st.one_of(forms)

    return st.recursive(leaf, extend, max_leaves=max_leaves).map(lambda part: part[0])


class _Exactly(ast.NodeTransformer):
    def __init__(self, source: str) -> None:
        self.source = source

    def visit_Constant(self, node: ast.Constant) -> ast.AST:
        text = ast.get_source_segment(self.source, node)
        call = ast.Call(ast.Name("_number", ast.Load()), [ast.Constant(text)], [])
        return ast.copy_location(call, node)


def python_value(
    text: str, values: Mapping[str, Any], number: Callable[[str], Any], tools: Mapping[str, Any]
) -> Any:
    """What Python itself makes of a text of ours, each decimal read by `number`."""
    tree = ast.fix_missing_locations(_Exactly(text).visit(ast.parse(text, mode="eval")))
    space = {"__builtins__": {}, "_number": number, **tools, **values}
    return eval(compile(tree, "<truth>", "eval"), space)


RATIONAL_TOOLS: dict[str, Any] = {"abs": abs, "min": min, "max": max, "floor": math.floor}


def rational(expr: Expr, values: Mapping[str, Fraction]) -> Fraction:
    """Exact value of a formula of arithmetic, abs, min, max, floor and conditions."""
    match expr:
        case Num(value):
            return value
        case Name(name):
            return values[name]
        case Cond(left, op, right, then, other):
            holds = _holds(op, rational(left, values), rational(right, values))
            return rational(then if holds else other, values)
        case Call(fn, args):
            operands = [rational(arg, values) for arg in args]
            operations: dict[str, Callable[..., Any]] = {
                "add": lambda a, b: a + b,
                "sub": lambda a, b: a - b,
                "mul": lambda a, b: a * b,
                "div": lambda a, b: a / b,
                "neg": lambda a: -a,
                "pow": lambda a, b: a ** int(b),
                **RATIONAL_TOOLS,
            }
            return Fraction(operations[fn](*operands))
    raise AssertionError(expr)


def _holds(op: str, left: Any, right: Any) -> bool:
    return bool({"<": left < right, "<=": left <= right, ">": left > right, ">=": left >= right}[op])


def precise(expr: Expr, values: Mapping[str, Any]) -> Any:
    """Value of a formula in mpmath's numbers, at its precision in force.

    Raises
    ------
    ArithmeticError, ValueError
        A value is not real, or not defined.
    """
    import mpmath

    tools: dict[str, Callable[..., Any]] = {
        "add": lambda a, b: a + b,
        "sub": lambda a, b: a - b,
        "mul": lambda a, b: a * b,
        "div": lambda a, b: a / b,
        "neg": lambda a: -a,
        "pow": lambda a, b: a**b,
        "abs": abs,
        "min": min,
        "max": max,
    }

    def value(node: Expr) -> Any:
        match node:
            case Num(number):
                return mpmath.mpf(number.numerator) / number.denominator
            case Pi():
                return +mpmath.pi
            case Name(name):
                return mpmath.mpf(values[name])
            case Cond(left, op, right, then, other):
                return value(then if _holds(op, value(left), value(right)) else other)
            case Call(fn, args):
                operands = [value(arg) for arg in args]
                result = (tools[fn] if fn in tools else getattr(mpmath, fn))(*operands)
                if not isinstance(result, mpmath.mpf) or not mpmath.isfinite(result):
                    raise ArithmeticError(f"{fn} has no finite real value")
                if abs(mpmath.mag(result)) > LARGEST_MAGNITUDE and result != 0:
                    raise ArithmeticError(f"{fn} is too large or too small to compare in a test")
                return result
        raise AssertionError(node)

    return value(expr)
