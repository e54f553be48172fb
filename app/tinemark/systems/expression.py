"""The tree a formula is read into: the one source of every evaluator and derivative."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from fractions import Fraction
from typing import TypeAlias

ARITIES: dict[str, int] = {
    "sin": 1,
    "cos": 1,
    "tan": 1,
    "asin": 1,
    "acos": 1,
    "atan": 1,
    "atan2": 2,
    "sinh": 1,
    "cosh": 1,
    "tanh": 1,
    "exp": 1,
    "log": 1,
    "sqrt": 1,
    "abs": 1,
    "min": 2,
    "max": 2,
    "floor": 1,
}
"""Functions a formula may call, with how many arguments a node of each has."""

OPERATORS: dict[str, int] = {"add": 2, "sub": 2, "mul": 2, "div": 2, "pow": 2, "neg": 1}

PIECEWISE = frozenset({"abs", "min", "max", "floor"})
"""Functions made of smooth pieces that meet at a switching surface."""


@dataclass(frozen=True, slots=True)
class Num:
    """An exact rational."""

    value: Fraction


@dataclass(frozen=True, slots=True)
class Name:
    """A state, a parameter or time."""

    name: str


@dataclass(frozen=True, slots=True)
class Pi:
    """The circle constant."""


@dataclass(frozen=True, slots=True)
class Call:
    """An operator of `OPERATORS` or a function of `ARITIES` applied to its arguments."""

    fn: str
    args: tuple[Expr, ...]


@dataclass(frozen=True, slots=True)
class Cond:
    """`then` where `left op right` holds, else `other`; op is one of < <= > >=."""

    left: Expr
    op: str
    right: Expr
    then: Expr
    other: Expr


Expr: TypeAlias = Num | Name | Pi | Call | Cond

ZERO = Num(Fraction(0))
ONE = Num(Fraction(1))


def children(expr: Expr) -> tuple[Expr, ...]:
    """The operands of a node, in the order they are written."""
    if isinstance(expr, Call):
        return expr.args
    if isinstance(expr, Cond):
        return (expr.left, expr.right, expr.then, expr.other)
    return ()


def walk(expr: Expr) -> Iterator[Expr]:
    """Every node once per object, operands before the node that uses them."""
    seen: set[int] = set()
    stack: list[tuple[Expr, bool]] = [(expr, False)]
    while stack:
        node, ready = stack.pop()
        if ready:
            yield node
        elif id(node) not in seen:
            seen.add(id(node))
            stack.append((node, True))
            stack.extend((child, False) for child in reversed(children(node)))


def names_in(expr: Expr) -> frozenset[str]:
    """Names of the states, parameters and time that a formula uses."""
    return frozenset(node.name for node in walk(expr) if isinstance(node, Name))
