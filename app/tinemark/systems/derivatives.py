"""Exact derivatives of formulas, by sympy, kept small and safe for any formula that can be read.

A formula is handed to sympy in pieces of bounded size, rebuilt node by node (no text is ever parsed
again), and the pieces are joined by the chain rule. So the cost and the size of a derivative grow
in proportion to the formula (Wengert 1964, Commun. ACM 7:463), where differentiating it whole can
swell without bound. Whatever has no rule of use in sympy, namely abs, min, max, floor, conditions,
atan2, powers with a named exponent, and exp, stays a node of ours and has its rule here. A derivative
of a piecewise formula holds inside each of its pieces; on a switching surface it means nothing.

sympy is imported on first use: it takes half a second that a program which only draws can spare.
"""

from __future__ import annotations

from collections.abc import Sequence
from functools import lru_cache
from itertools import combinations_with_replacement

from tinemark.systems.expression import ZERO, Call, Cond, Expr, Name, Num
from tinemark.systems.forest import Forest
from tinemark.systems.sympy_piece import Piece
from tinemark.systems.system import System


@lru_cache(maxsize=4096)
def derivative(expr: Expr, *names: str) -> Expr:
    """Partial derivative of a formula.

    Parameters
    ----------
    expr
        Formula.
    names
        Names to differentiate by, one after the other: ``derivative(e, "x", "r")`` is the mixed
        second derivative. With no name it is the formula itself.

    Returns
    -------
    Expr
        The derivative, exact. Equal sub-formulas are one object. The derivative of floor is 0;
        on a switching surface the value is that of one of the two sides.

    Raises
    ------
    FormulaError
        The derivative comes out infinite or imaginary whatever the values.
    """
    forest = Forest()
    result = forest.whole(expr)
    rules = _Rules(forest)
    for name in names:
        result = rules.derivative(result, name)
    return result


def jacobian(system: System) -> tuple[tuple[Expr, ...], ...]:
    """Matrix of d(next state i)/d(state j), row by row."""
    return tuple(tuple(derivative(expr, name) for name in system.state_names) for expr in system.expressions)


def partials(
    expressions: Sequence[Expr], names: Sequence[str], order: int
) -> dict[tuple[int, tuple[str, ...]], Expr]:
    """All partial derivatives up to an order, each once.

    Returns
    -------
    dict
        (which expression, names) -> derivative. The names of a key stand in the order of `names`;
        derivatives that are zero are left out. The key with no names is the expression itself.
    """
    found: dict[tuple[int, tuple[str, ...]], Expr] = {}
    for place, expr in enumerate(expressions):
        found[place, ()] = expr
        for degree in range(1, order + 1):
            for combination in combinations_with_replacement(names, degree):
                result = derivative(expr, *combination)
                if result != ZERO:
                    found[place, combination] = result
    return found


class _Rules:
    """Derivatives of the nodes of a forest: the chain rule, and the rules that are ours."""

    def __init__(self, forest: Forest) -> None:
        self.forest = forest
        self.known: dict[tuple[int, str], Expr] = {}

    def derivative(self, node: Expr, name: str) -> Expr:
        """Derivative of a node of the forest."""
        if not self.forest.varies(node, name):
            return self.forest.number(0)
        key = (id(node), name)
        if key not in self.known:
            by_rule = self.by_rule(node, name)
            self.known[key] = (
                Piece(self.forest, name, self.derivative).derivative(node) if by_rule is None else by_rule
            )
        return self.known[key]

    def by_rule(self, node: Expr, name: str) -> Expr | None:
        """Derivative of a node that sympy does not see into; None for all others."""
        call, number = self.forest.call, self.forest.number
        match node:
            case Name():
                return number(1)
            case Cond(left, op, right, then, other):
                return self.forest.choose(
                    left, op, right, self.derivative(then, name), self.derivative(other, name)
                )
            case Call("floor", _):
                return number(0)
            case Call("abs", (u,)):
                slope = self.derivative(u, name)
                return self.forest.choose(u, "<", number(0), call("neg", slope), slope)
            case Call("min" | "max" as fn, (a, b)):
                return self.forest.choose(
                    a, "<" if fn == "min" else ">", b, self.derivative(a, name), self.derivative(b, name)
                )
            case Call("exp", (u,)):
                # By sympy exp(u)**2 would turn into exp(2*u), a second exponential to compute.
                return call("mul", node, self.derivative(u, name))
            case Call("atan2", (y, x)):
                across = call(
                    "sub",
                    call("mul", x, self.derivative(y, name)),
                    call("mul", y, self.derivative(x, name)),
                )
                two = number(2)
                return call(
                    "div",
                    across,
                    call("add", call("pow", x, two), call("pow", y, two)),
                )
            case Call("pow", (base, exponent)) if not isinstance(exponent, Num):
                slope = self.derivative(base, name)
                if not self.forest.varies(exponent, name):
                    # Not base**exponent/base, which has no value at base 0.
                    lower = call("pow", base, call("sub", exponent, number(1)))
                    return call("mul", call("mul", exponent, lower), slope)
                # base**exponent = exp(exponent*log(base)), for a positive base.
                turn = call("mul", self.derivative(exponent, name), call("log", base))
                grow = call("div", call("mul", exponent, slope), base)
                return call("mul", node, call("add", turn, grow))
        return None
