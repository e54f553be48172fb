"""Angles counted in half turns: sin(pi*u) is taken from u itself.

The product pi*u would be rounded, and then divided by pi again to find the turn. Counted in half turns
the reduction is a subtraction, exact for every double, and what is left is a polynomial: fewer operations
and no rounded angle, however many turns there are. Errors stay below 2 units in the last place, 3 for tan;
whole and half multiples of pi come out exactly, at any size.
"""

from __future__ import annotations

import numpy as np

from tinemark.systems.expression import ONE, Call, Cond, Expr, Pi, walk
from tinemark.systems.lane_math import Real, lane_fma, lane_function

HALF_TURNS = {"sin": "sinpi", "cos": "cospi", "tan": "tanpi"}
"""Functions of an angle, and what they are called for an angle counted in half turns."""

# Adding this rounds to even numbers, that is to whole turns.
_ROUND_EVEN = 13510798882111488.0  # 1.5 * 2**53
_PI, _PI_REST = 3.141592653589793, 1.2246467991473532e-16


def in_half_turns(expr: Expr) -> Expr:
    """The formula with sin, cos and tan of pi times something taken in half turns.

    The result is for evaluation in doubles alone: "sinpi" and the like are no functions of formulas.
    """
    angles: dict[int, Expr | None] = {}
    changed: dict[int, Expr] = {}
    for node in walk(expr):
        angles[id(node)] = _half_turns(node, angles, changed)
        changed[id(node)] = _changed(node, angles, changed)
    return changed[id(expr)]


def _half_turns(node: Expr, angles: dict[int, Expr | None], changed: dict[int, Expr]) -> Expr | None:
    """The node divided by pi, where pi is a factor of it; its operands are known already."""
    match node:
        case Pi():
            return ONE
        case Call("neg", (a,)) if (turns := angles[id(a)]) is not None:
            return Call("neg", (turns,))
        case Call("mul", (a, b)):
            if (turns := angles[id(a)]) is not None:
                return changed[id(b)] if turns == ONE else Call("mul", (turns, changed[id(b)]))
            if (turns := angles[id(b)]) is not None:
                return changed[id(a)] if turns == ONE else Call("mul", (changed[id(a)], turns))
        case Call("div", (a, b)) if (turns := angles[id(a)]) is not None:
            return Call("div", (turns, changed[id(b)]))
        case Call("add" | "sub" as fn, (a, b)):
            first, second = angles[id(a)], angles[id(b)]
            if first is not None and second is not None:
                return Call(fn, (first, second))
    return None


def _changed(node: Expr, angles: dict[int, Expr | None], changed: dict[int, Expr]) -> Expr:
    match node:
        case Call(fn, (a,)) if fn in HALF_TURNS and (turns := angles[id(a)]) is not None:
            return Call(HALF_TURNS[fn], (turns,))
        case Call(fn, args):
            parts = tuple(changed[id(arg)] for arg in args)
            return node if all(a is b for a, b in zip(parts, args, strict=True)) else Call(fn, parts)
        case Cond(left, op, right, then, other):
            return Cond(changed[id(left)], op, changed[id(right)], changed[id(then)], changed[id(other)])
    return node


@lane_function
def _sinpi_reduced(m: Real) -> Real:
    """sin(pi*m) on [-1/2, 1/2]."""
    z = m * m
    q = lane_fma(7.76870769341599e-07, z, -2.1910228116192702e-05)
    q = lane_fma(q, z, 0.00046630238331901193)
    q = lane_fma(q, z, -0.007370431007664793)
    q = lane_fma(q, z, 0.0821458866261827)
    q = lane_fma(q, z, -0.5992645293218859)
    q = lane_fma(q, z, 2.5501640398773757)
    q = lane_fma(q, z, -5.16771278004997)
    q = lane_fma(q, z, _PI_REST)
    return lane_fma(m, _PI, m * q)


@lane_function
def lane_sinpi(u: Real) -> Real:
    """sin(pi*u); nan where u is infinite."""
    g = u - ((u + _ROUND_EVEN) - _ROUND_EVEN)
    a = abs(g)
    b = 1.0 - a
    m = b if b < a else a  # noqa: FURB136  # keeps nan
    # Beyond 2**52 doubles are whole numbers and the rounding is coarser than a turn.
    m = 0.0 if m < 0.0 else m  # noqa: FURB136  # keeps nan
    return np.copysign(_sinpi_reduced(m), g)


@lane_function
def lane_cospi(u: Real) -> Real:
    """cos(pi*u); nan where u is infinite."""
    # Above zero the rounding is to even numbers up to 2**52 and farther; below, only that far.
    v = abs(u)
    a = abs(v - ((v + _ROUND_EVEN) - _ROUND_EVEN))
    m = 0.5 - a
    # As above: what is more than half a turn from an even number, is an even number itself.
    return _sinpi_reduced(0.5 if a > 1.0 else m)


@lane_function
def lane_tanpi(u: Real) -> Real:
    """tan(pi*u); nan where u is infinite."""
    return lane_sinpi(u) / lane_cospi(u)
