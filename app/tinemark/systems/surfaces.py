"""Where a piecewise formula switches from one smooth piece to the next."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass

from tinemark.systems.expression import PIECEWISE, Call, Cond, Expr, walk


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
    return tuple(found)
