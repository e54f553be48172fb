"""Ball-arithmetic evaluators of formulas, for python-flint's `arb` (Johansson, 2017).

Numbers in a formula enter as exact rationals, so an evaluator holds at any precision. Where a
ball touches a switching surface no smooth piece holds on all of it, and `SwitchingTouched` is raised.
"""

from __future__ import annotations

import re
from collections.abc import Callable, Mapping, Sequence
from functools import lru_cache
from typing import Any, TypeAlias

import flint
from flint import arb, fmpq

from tinemark.systems.emit import emit
from tinemark.systems.errors import SwitchingTouched
from tinemark.systems.expression import ARITIES, Expr

BallFunction: TypeAlias = Callable[..., tuple[Any, ...]]
_RATIONAL = re.compile(r"fmpq\((-?\d+), (\d+)\)")


def ball_less(left: Any, right: Any) -> bool:
    """Whether left < right on the whole balls; raises `SwitchingTouched` where they overlap."""
    difference = arb(left) - right
    if difference < 0:
        return True
    if difference > 0:
        return False
    raise SwitchingTouched("the orbit touches a switching surface of the formula")


def ball_abs(x: Any) -> Any:
    """Absolute value away from zero."""
    return -x if ball_less(x, 0) else x


def ball_min(a: Any, b: Any) -> Any:
    """The smaller of two balls that do not overlap."""
    return a if ball_less(a, b) else b


def ball_max(a: Any, b: Any) -> Any:
    """The larger of two balls that do not overlap."""
    return b if ball_less(a, b) else a


def ball_floor(x: Any) -> Any:
    """Whole part of a ball that holds no whole number."""
    whole = arb(x).floor()
    if not whole.is_exact():
        raise SwitchingTouched("the orbit touches a switching surface of the formula")
    if arb(x).contains_integer():
        raise SwitchingTouched("the orbit touches a switching surface of the formula")
    return whole


def ball_div(a: Any, b: Any) -> Any:
    """Quotient of what may be whole numbers or rationals: exact, or not a number at division by zero."""
    if isinstance(a, (int, fmpq)) and isinstance(b, (int, fmpq)):
        return fmpq(a) / b if b != 0 else arb("nan")
    return a / b


def ball_value(x: Any) -> Any:
    """A result as a ball, also where a formula is constant on the piece in force."""
    return _ball(x)


def ball_sqrt(x: Any) -> Any:
    """Square root; a whole number is taken as a ball."""
    return _ball(x).sqrt()


def ball_pow(x: Any, y: Any) -> Any:
    """General power of a positive ball, or any power that arb defines."""
    return _ball(x) ** y


def ball_atan2(y: Any, x: Any) -> Any:
    """Angle of the point (x, y)."""
    return arb.atan2(arb(y), arb(x))


def ball_pi() -> arb:
    """The circle constant at the precision in force."""
    return _pi_at(flint.ctx.prec)


@lru_cache(maxsize=64)
def _pi_at(bits: int) -> arb:
    assert bits == flint.ctx.prec
    return arb.pi()


def _ball(x: Any) -> Any:
    return arb(x) if isinstance(x, (int, fmpq)) else x


def _method(name: str) -> Callable[[Any], Any]:
    def function(x: Any) -> Any:
        return getattr(_ball(x), name)()

    return function


_TOOLS: dict[str, Any] = {
    "fmpq": fmpq,
    "ball_less": ball_less,
    "ball_abs": ball_abs,
    "ball_min": ball_min,
    "ball_max": ball_max,
    "ball_floor": ball_floor,
    "ball_div": ball_div,
    "ball_value": ball_value,
    "ball_sqrt": ball_sqrt,
    "ball_pow": ball_pow,
    "ball_atan2": ball_atan2,
    "ball_pi": ball_pi,
}
_TOOLS.update({f"ball_{name}": _method(name) for name in ARITIES if f"ball_{name}" not in _TOOLS})


def ball_tools() -> dict[str, Any]:
    """The names that code printed by `emit` in the "ball" dialect calls, as a fresh namespace."""
    return dict(_TOOLS)


@lru_cache(maxsize=256)
def ball_function(expressions: tuple[Expr, ...], names: tuple[str, ...]) -> BallFunction:
    """Compile expressions to one Python function over balls.

    Parameters
    ----------
    expressions
        What to compute, sharing sub-expressions.
    names
        Names in the order of the function's arguments.

    Returns
    -------
    callable
        f(*balls) -> tuple of results, one an expression. All are balls, also where a
        formula is constant. It raises `SwitchingTouched` on a switching surface; outside a
        function's domain it gives balls that are not finite, as arb does.
    """
    return compiled(expressions, names, _TOOLS)


def compiled(expressions: Sequence[Expr], names: Sequence[str], tools: Mapping[str, Any]) -> BallFunction:
    """Compile expressions to one Python function, over whatever numbers the tools work on.

    Parameters
    ----------
    tools
        What stands for each name of `ball_tools`: for power series or complex balls, say, instead of balls.
    """
    source, constants = _source(expressions, names)
    space: dict[str, Any] = {**tools, **constants}
    # The source is our own print of checked nodes: names are replaced, texts never pass through.
    exec(compile(source, "<ball evaluator>", "exec"), space)  # noqa: S102
    function: BallFunction = space["evaluate"]
    return function


def _source(expressions: Sequence[Expr], names: Sequence[str]) -> tuple[str, dict[str, Any]]:
    bind = {name: f"a{place}" for place, name in enumerate(names)}
    results = [f"r{place}" for place in range(len(expressions))]
    lines = emit(list(zip(results, expressions, strict=True)), bind, "ball")
    constants: dict[str, Any] = {}

    def hoist(match: re.Match[str]) -> str:
        label = f"q{match[1].replace('-', 'm')}_{match[2]}"
        constants[label] = fmpq(int(match[1]), int(match[2]))
        return label

    body = [_RATIONAL.sub(hoist, line) for line in lines]
    text = "\n".join(
        [
            f"def evaluate({', '.join(bind.values())}):",
            *(f"    {line}" for line in body),
            f"    return ({', '.join(results)},)",
        ]
    )
    return text, constants
