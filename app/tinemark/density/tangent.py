"""Derivatives of formulas along a direction, for Lyapunov exponents.

Forward differentiation on the tree itself: the first picture of an own model must not wait for a
computer algebra system to be imported. Where a formula switches, the derivative is that of the piece
in force, which is what an exponent needs; it is taken on no surface.
"""

from __future__ import annotations

from collections.abc import Mapping
from fractions import Fraction

from tinemark.systems.expression import ONE, ZERO, Call, Cond, Expr, Name, Num, Pi, names_in

_TWO = Num(Fraction(2))


def tangent(expr: Expr, direction: Mapping[str, Expr]) -> Expr:
    """Derivative of a formula along a direction.

    Parameters
    ----------
    expr
        The formula.
    direction
        Rate of change of each name; names that are missing do not change.

    Returns
    -------
    Expr
        The rate of change of the formula.
    """
    memo: dict[int, Expr] = {}

    def rate(node: Expr) -> Expr:
        known = memo.get(id(node))
        if known is None:
            known = _rate(node)
            memo[id(node)] = known
        return known

    def _rate(node: Expr) -> Expr:
        match node:
            case Num() | Pi():
                return ZERO
            case Name(name):
                return direction.get(name, ZERO)
            case Cond(left, op, right, then, other):
                first, second = rate(then), rate(other)
                return first if first == second else Cond(left, op, right, first, second)
            case Call(fn, (a,)):
                return _of_one(fn, a, rate(a), node)
            case Call(fn, (a, b)):
                return _of_two(fn, a, b, rate(a), rate(b), node)
        raise TypeError(f"no expression: {node!r}")

    return rate(expr)


def depends_on(expr: Expr, name: str) -> bool:
    """Whether a formula uses a name."""
    return name in names_in(expr)


def _of_one(fn: str, a: Expr, da: Expr, node: Expr) -> Expr:
    if da == ZERO:
        return ZERO
    match fn:
        case "neg":
            return _neg(da)
        case "sin":
            return _mul(Call("cos", (a,)), da)
        case "cos":
            return _neg(_mul(Call("sin", (a,)), da))
        case "tan":
            return _mul(_add(ONE, _square(node)), da)
        case "asin":
            return _div(da, Call("sqrt", (_sub(ONE, _square(a)),)))
        case "acos":
            return _neg(_div(da, Call("sqrt", (_sub(ONE, _square(a)),))))
        case "atan":
            return _div(da, _add(ONE, _square(a)))
        case "sinh":
            return _mul(Call("cosh", (a,)), da)
        case "cosh":
            return _mul(Call("sinh", (a,)), da)
        case "tanh":
            return _mul(_sub(ONE, _square(node)), da)
        case "exp":
            return _mul(node, da)
        case "log":
            return _div(da, a)
        case "sqrt":
            return _div(da, _mul(_TWO, node))
        case "abs":
            return Cond(a, "<", ZERO, _neg(da), da)
        case "floor":
            return ZERO
    raise TypeError(f"no function of one argument: {fn}")


def _of_two(fn: str, a: Expr, b: Expr, da: Expr, db: Expr, node: Expr) -> Expr:
    if da == ZERO and db == ZERO:
        return ZERO
    match fn:
        case "add":
            return _add(da, db)
        case "sub":
            return _sub(da, db)
        case "mul":
            return _add(_mul(da, b), _mul(a, db))
        case "div":
            return _div(_sub(da, _mul(node, db)), b)
        case "pow":
            base = ZERO if da == ZERO else _mul(_mul(b, _power(a, _sub(b, ONE))), da)
            exponent = ZERO if db == ZERO else _mul(_mul(node, Call("log", (a,))), db)
            return _add(base, exponent)
        case "atan2":
            return _div(_sub(_mul(da, b), _mul(a, db)), _add(_square(a), _square(b)))
        case "min":
            return Cond(a, "<", b, da, db)
        case "max":
            return Cond(a, ">", b, da, db)
    raise TypeError(f"no function of two arguments: {fn}")


def _power(a: Expr, b: Expr) -> Expr:
    if b == ONE:
        return a
    return ONE if b == ZERO else Call("pow", (a, b))


def _square(a: Expr) -> Expr:
    return Call("mul", (a, a))


def _neg(a: Expr) -> Expr:
    return Num(-a.value) if isinstance(a, Num) else Call("neg", (a,))


def _add(a: Expr, b: Expr) -> Expr:
    if a == ZERO:
        return b
    return a if b == ZERO else Call("add", (a, b))


def _sub(a: Expr, b: Expr) -> Expr:
    if isinstance(a, Num) and isinstance(b, Num):
        return Num(a.value - b.value)
    if b == ZERO:
        return a
    return _neg(b) if a == ZERO else Call("sub", (a, b))


def _mul(a: Expr, b: Expr) -> Expr:
    if ZERO in (a, b):
        return ZERO
    if a == ONE:
        return b
    return a if b == ONE else Call("mul", (a, b))


def _div(a: Expr, b: Expr) -> Expr:
    return ZERO if a == ZERO else Call("div", (a, b))
