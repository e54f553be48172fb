"""Where a piecewise formula switches from one smooth piece to the next."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass
from fractions import Fraction

from tinemark.systems.expression import ONE, PIECEWISE, Call, Cond, Expr, Num, walk

_SQUARE = Num(Fraction(2))


@dataclass(frozen=True)
class Surface:
    """A switching surface.

    `kind` "zero": the formula switches where `expr` is zero; "integer": where it is whole.
    """

    expr: Expr
    kind: str


def switching_surfaces(expressions: Iterable[Expr]) -> tuple[Surface, ...]:
    """Switching surfaces of the formulas, each once, in the order they are met."""
    found: dict[Surface, None] = {}
    for expression in expressions:
        for node in walk(expression):
            if isinstance(node, Cond):
                found[Surface(Call("sub", (node.left, node.right)), "zero")] = None
            elif isinstance(node, Call) and node.fn in PIECEWISE:
                if node.fn in ("min", "max"):
                    found[Surface(Call("sub", node.args), "zero")] = None
                else:
                    found[Surface(node.args[0], "zero" if node.fn == "abs" else "integer")] = None
            elif isinstance(node, Call) and node.fn == "atan2":
                # The angle jumps by a turn where y = 0 and x <= 0; x + sqrt(x**2 + y**2) is zero just there.
                y, x = node.args
                square = Call("add", (Call("pow", (x, _SQUARE)), Call("pow", (y, _SQUARE))))
                found[Surface(Call("add", (x, Call("sqrt", (square,)))), "zero")] = None
    return tuple(found)


def domain_edges(expressions: Iterable[Expr]) -> tuple[Surface, ...]:
    """Where formulas stop being defined: zero divisors, ends of roots, logarithms and inverse functions.

    A derivative may be defined beyond them (that of sqrt(x)**2 is 1 everywhere), so a proof that sees a
    formula through its derivatives has to look at them by themselves.
    """
    found: dict[Surface, None] = {}
    for expression in expressions:
        for node in walk(expression):
            edge = _edge(node)
            if edge is not None and not isinstance(edge, Num):
                found[Surface(edge, "zero")] = None
    return tuple(found)


def _edge(node: Expr) -> Expr | None:
    match node:
        case Call("div", (_, divisor)):
            return divisor
        case Call("log" | "sqrt", (u,)):
            return u
        case Call("pow", (_, Num(power))) if power.denominator == 1 and power >= 0:
            return None
        case Call("pow", (base, _)):
            return base
        case Call("asin" | "acos", (u,)):
            return Call("sub", (ONE, Call("pow", (u, _SQUARE))))
        case Call("tan", (u,)):
            return Call("cos", (u,))
    return None
