"""Identities of formulas that hold exactly: symmetries and cycles that the parameter does not move.

A pitchfork and a transcritical point need an equality to hold exactly, which no enclosure can show. A
formula can: here it is put into sympy node by node, over exact rationals, and what must vanish has to
cancel by algebra alone. What does not cancel counts as unknown, never as an identity.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from fractions import Fraction
from functools import lru_cache
from typing import Any

from tinemark.onsets.ball_orbits import ball_of, precision
from tinemark.onsets.one_map import OneMap
from tinemark.onsets.smooth_pieces import Sides, smooth_piece
from tinemark.systems.balls import ball_function
from tinemark.systems.derivatives import derivative
from tinemark.systems.expression import Call, Cond, Expr, Name, Num, Pi, children, names_in, walk

MOST_NODES = 150
MOST_DEGREE = 24
"""Largest formula that is checked, and its degree counted without cancelling: bounds what expanding costs."""
MOST_BITS = 64
SAMPLES, SAMPLE_BITS = 12, 200
"""How many places a formula is tried at before algebra is asked, and how precisely."""
LARGEST_DENOMINATOR = 10**6
_ANALYTIC = ("sin", "cos", "tan", "asin", "acos", "atan", "sinh", "cosh", "tanh", "exp", "log", "sqrt")


def replaced(expr: Expr, values: Mapping[str, Expr]) -> Expr:
    """A formula with names replaced by formulas; equal parts stay one object."""
    done: dict[int, Expr] = {}
    for node in walk(expr):
        parts = tuple(done[id(child)] for child in children(node))
        copy: Expr = node
        if isinstance(node, Name):
            copy = values.get(node.name, node)
        elif isinstance(node, Call):
            copy = Call(node.fn, parts)
        elif isinstance(node, Cond):
            left, right, then, other = parts
            copy = Cond(left, node.op, right, then, other)
        done[id(node)] = copy
    return done[id(expr)]


def vanishes(expr: Expr) -> bool:
    """Whether a formula is zero for all values of its names, as far as algebra shows it.

    Parameters
    ----------
    expr
        A formula without conditions, min, max, abs, floor and atan2; with any of them the answer is False.
    """
    if not _is_small(expr) or not _may_vanish(expr):
        return False
    import sympy

    try:
        whole = _to_sympy(expr, sympy)
        if whole == 0:
            return True
        whole = sympy.expand(whole)
        return bool(whole == 0 or sympy.cancel(sympy.together(whole)) == 0)
    except (ValueError, TypeError, ArithmeticError, NotImplementedError, AttributeError, RecursionError):
        return False


def _may_vanish(expr: Expr) -> bool:
    """Whether a formula is zero at sample places, as far as balls tell: algebra is slow, and most are not."""
    names = tuple(sorted(names_in(expr)))
    evaluate = ball_function((expr,), names)
    seen = 0
    for place in range(SAMPLES):
        with precision(SAMPLE_BITS):
            values = [
                ball_of(Fraction(7 * (place + 1) * (3 * count + 5) % 97 - 48, 41))
                for count in range(len(names))
            ]
            result = evaluate(*values)[0]
            if result.is_finite():
                seen += 1
                if not result.contains(0):
                    return False
    return seen > 0


def _is_small(expr: Expr) -> bool:
    degrees: dict[int, int] = {}
    for count, node in enumerate(walk(expr)):
        if count > MOST_NODES or isinstance(node, Cond):
            return False
        if isinstance(node, Num) and max(map(int.bit_length, node.value.as_integer_ratio())) > MOST_BITS:
            return False
        if isinstance(node, Call) and node.fn not in (*_ANALYTIC, "add", "sub", "mul", "div", "pow", "neg"):
            return False
        below = [degrees[id(child)] for child in children(node)]
        match node:
            case Name():
                degree = 1
            case Call("mul" | "div", _):
                degree = sum(below)
            case Call("pow", (_, Num(power))) if power.denominator == 1:
                degree = below[0] * abs(int(power))
            case _:
                degree = max(below, default=0)
        if degree > MOST_DEGREE:
            return False
        degrees[id(node)] = degree
    return True


def _to_sympy(expr: Expr, sympy: Any) -> Any:
    done: dict[int, Any] = {}
    for node in walk(expr):
        parts = [done[id(child)] for child in children(node)]
        match node:
            case Num(value):
                made = sympy.Rational(value.numerator, value.denominator)
            case Pi():
                made = sympy.pi
            case Name(name):
                # Symbols are real and named by us: a user's name could be one that sympy has plans for.
                made = sympy.Symbol(f"name_{name}", real=True)
            case Call("add", _):
                made = parts[0] + parts[1]
            case Call("sub", _):
                made = parts[0] - parts[1]
            case Call("mul", _):
                made = parts[0] * parts[1]
            case Call("div", _):
                made = parts[0] / parts[1]
            case Call("pow", _):
                made = parts[0] ** parts[1]
            case Call("neg", _):
                made = -parts[0]
            case Call(fn, _) if fn in _ANALYTIC:
                made = getattr(sympy, fn)(parts[0])
            case _:
                raise ValueError("not an analytic formula")
        done[id(node)] = made
    return done[id(expr)]


def nearby_constant(value: float, scale: float) -> Expr | None:
    """A short rational, or a short rational times pi, that a number is very near to."""
    within = 1e-8 * max(scale, abs(value))
    plain = Fraction(value).limit_denominator(10**3)
    if abs(float(plain) - value) <= within:
        return Num(plain)
    turns = Fraction(value / math.pi).limit_denominator(60)
    if abs(float(turns) * math.pi - value) <= within:
        return times_pi(turns)
    plain = Fraction(value).limit_denominator(LARGEST_DENOMINATOR)
    return Num(plain) if abs(float(plain) - value) <= within / 1e4 else None


def times_pi(turns: Fraction) -> Expr:
    """A rational times pi."""
    return Pi() if turns == 1 else Call("mul", (Num(turns), Pi()))


@lru_cache(maxsize=512)
def is_mirrored_along(one: OneMap, total: Expr, pairs: frozenset[tuple[Sides, Sides]]) -> bool:
    """Whether pieces of the map are mirror images, f(total - x) = total - f(x) for every x and parameter.

    Parameters
    ----------
    total
        Twice the centre of the reflection, a formula of the parameter alone.
    pairs
        Smooth pieces that hold at a place and at its mirror image.
    """
    mirror = Call("sub", (total, Name(one.state)))
    return all(
        vanishes(
            Call(
                "sub",
                (
                    Call(
                        "add",
                        (
                            replaced(smooth_piece(one, there).formula, {one.state: mirror}),
                            smooth_piece(one, here).formula,
                        ),
                    ),
                    total,
                ),
            )
        )
        for here, there in sorted(pairs)
    )


@lru_cache(maxsize=256)
def is_fixed_cycle(one: OneMap, points: tuple[Expr, ...], word: tuple[Sides, ...]) -> bool:
    """Whether these points are run through in turn whatever the parameter's value.

    Parameters
    ----------
    word
        Which smooth piece of the formula holds at each point; that it does is the caller's to show.
    """
    return all(
        vanishes(
            Call(
                "sub",
                (
                    replaced(smooth_piece(one, sides).formula, {one.state: point}),
                    points[(place + 1) % len(points)],
                ),
            )
        )
        for place, (point, sides) in enumerate(zip(points, word, strict=True))
    )


@lru_cache(maxsize=256)
def is_straight_at(one: OneMap, point: Expr, sides: Sides) -> bool:
    """Whether the second derivative in the state is zero at a point for every value of the parameter."""
    bend = derivative(smooth_piece(one, sides).formula, one.state, one.state)
    return vanishes(replaced(bend, {one.state: point}))
