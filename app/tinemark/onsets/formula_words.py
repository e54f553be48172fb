"""Formulas printed back as a user would type them, for words about surfaces and points."""

from __future__ import annotations

from fractions import Fraction

from tinemark.systems.exact import fraction_text
from tinemark.systems.expression import Call, Cond, Expr, Name, Num, Pi

_INFIX = {"add": (" + ", 1), "sub": (" - ", 1), "mul": ("*", 2), "div": ("/", 2), "pow": ("**", 4)}
_UNARY = 3
_ATOM = 5
MOST_CHARACTERS = 120


def formula_words(expr: Expr) -> str:
    """Text of a formula; of a very long one its beginning."""
    text = _printed(expr)[0]
    return text if len(text) <= MOST_CHARACTERS else text[: MOST_CHARACTERS - 1] + "…"


def equation_words(expr: Expr) -> str:
    """Text of `expr = 0`, a difference printed as both its sides."""
    if isinstance(expr, Call) and expr.fn == "sub":
        left, right = (formula_words(arg) for arg in expr.args)
        return f"{left} = {right}"
    return f"{formula_words(expr)} = 0"


def _printed(expr: Expr) -> tuple[str, int]:
    match expr:
        case Num(value):
            text = _number(value)
            return text, 2 if "/" in text else _UNARY if value < 0 else _ATOM
        case Name(name):
            return name, _ATOM
        case Pi():
            return "pi", _ATOM
        case Cond(left, op, right, then, other):
            parts = [formula_words(part) for part in (then, left, right, other)]
            return f"{parts[0]} if {parts[1]} {op} {parts[2]} else {parts[3]}", 0
        case Call("neg", (arg,)):
            return f"-{_inside(arg, _UNARY)}", _UNARY
        case Call(fn, (left, right)) if fn in _INFIX:
            sign, rank = _INFIX[fn]
            first = _inside(left, rank + (fn == "pow"))
            second = _inside(right, rank + (fn in ("sub", "div")))
            return f"{first}{sign}{second}", rank
        case Call(fn, args):
            return f"{fn}({', '.join(formula_words(arg) for arg in args)})", _ATOM
    raise AssertionError(expr)


def _inside(expr: Expr, rank: int) -> str:
    text, own = _printed(expr)
    return text if own >= rank else f"({text})"


def _number(value: Fraction) -> str:
    text = fraction_text(value, 12)
    return text if Fraction(text) == value else f"{value.numerator}/{value.denominator}"
