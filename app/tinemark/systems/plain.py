"""Formulas over plain numbers or arrays, with nothing to compile: for single orbits and drawn curves.

Slower than a compiled kernel, and ready at once. Undefined operations give nan and overflow gives
inf, as in the compiled kernels.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from typing import Any, TypeAlias

import numpy as np
from numpy.typing import NDArray

from tinemark.systems.expression import Call, Cond, Expr, Name, Num, Pi, walk

Value: TypeAlias = "float | np.float64 | NDArray[np.float64]"

_FUNCTIONS: dict[str, Callable[..., Any]] = {
    "add": np.add,
    "sub": np.subtract,
    "mul": np.multiply,
    "div": np.divide,
    "pow": np.power,
    "neg": np.negative,
    "sin": np.sin,
    "cos": np.cos,
    "tan": np.tan,
    "asin": np.arcsin,
    "acos": np.arccos,
    "atan": np.arctan,
    "atan2": np.arctan2,
    "sinh": np.sinh,
    "cosh": np.cosh,
    "tanh": np.tanh,
    "exp": np.exp,
    "log": np.log,
    "sqrt": np.sqrt,
    "abs": np.abs,
    "min": np.minimum,
    "max": np.maximum,
    "floor": np.floor,
}
_COMPARISONS: dict[str, Callable[..., Any]] = {
    "<": np.less,
    "<=": np.less_equal,
    ">": np.greater,
    ">=": np.greater_equal,
}


def plain_function(
    expressions: Sequence[Expr], names: Sequence[str]
) -> Callable[[Sequence[Value]], tuple[Value, ...]]:
    """Evaluator of formulas over doubles.

    Parameters
    ----------
    expressions
        What to compute.
    names
        Names in the order in which their values are passed.

    Returns
    -------
    callable
        f(values) -> one result a formula. Arrays broadcast against each other; a formula in which
        no array occurs gives a number.
    """
    slots: dict[int, int] = {}
    fixed: list[Value | None] = [None] * len(names)
    program: list[tuple[int, Callable[..., Any], tuple[int, ...]]] = []
    places = {name: place for place, name in enumerate(names)}
    kept = list(expressions)  # ids serve as keys while the nodes live
    for expression in kept:
        for node in walk(expression):
            if id(node) in slots:
                continue
            if isinstance(node, Name):
                slots[id(node)] = places[node.name]
                continue
            slots[id(node)] = len(fixed)
            match node:
                case Num(value):
                    fixed.append(np.float64(float(value)))
                case Pi():
                    fixed.append(np.float64(np.pi))
                case Call(fn, args):
                    program.append((len(fixed), _FUNCTIONS[fn], tuple(slots[id(arg)] for arg in args)))
                    fixed.append(None)
                case Cond(left, op, right, then, other):
                    operands = tuple(slots[id(part)] for part in (left, right, then, other))
                    program.append((len(fixed), _choice(_COMPARISONS[op]), operands))
                    fixed.append(None)
    results = [slots[id(expression)] for expression in kept]

    def evaluate(values: Sequence[Value]) -> tuple[Value, ...]:
        room: list[Any] = fixed.copy()
        room[: len(values)] = values
        with np.errstate(all="ignore"):
            for place, function, operands in program:
                room[place] = function(*[room[operand] for operand in operands])
        return tuple(room[place] for place in results)

    return evaluate


def _choice(compare: Callable[..., Any]) -> Callable[..., Any]:
    def choose(left: Value, right: Value, then: Value, other: Value) -> Any:
        decided = compare(left, right)
        # For plain numbers picking one is several times faster than `where`.
        return (then if decided else other) if np.ndim(decided) == 0 else np.where(decided, then, other)

    return choose
