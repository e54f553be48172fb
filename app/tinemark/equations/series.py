"""Formulas over truncated power series, for python-flint's `arb_series` (balls as coefficients).

The same printed code as for balls runs on series: only the functions it calls differ. A coefficient
that comes out encloses the true one for all values in the coefficients that went in, so what is found of
a Taylor polynomial this way is rigorous as it stands (Johansson, 2017).
"""

from __future__ import annotations

from collections.abc import Callable, Iterator, Sequence
from contextlib import contextmanager
from functools import lru_cache
from operator import methodcaller
from typing import Any

import flint
from flint import arb, arb_series, fmpq

from tinemark.systems.balls import ball_tools, compiled
from tinemark.systems.emit import is_zero
from tinemark.systems.errors import SwitchingTouched
from tinemark.systems.expression import Expr

SeriesFunction = Callable[..., tuple[Any, ...]]
_BALL = ball_tools()


@contextmanager
def working(bits: int, length: int = 2) -> Iterator[None]:
    """Balls of `bits` bits and series of at most `length` coefficients, restored on leaving."""
    before = flint.ctx.prec, flint.ctx.cap
    flint.ctx.prec, flint.ctx.cap = bits, length
    try:
        yield
    finally:
        flint.ctx.prec, flint.ctx.cap = before


def _either(name: str, over_series: Callable[[Any], Any]) -> Callable[[Any], Any]:
    """A function of one argument, a series or anything that the function over balls takes."""
    plain = _BALL[f"ball_{name}"]

    def function(x: Any) -> Any:
        return over_series(x) if isinstance(x, arb_series) else plain(x)

    return function


def _sinh(x: Any) -> Any:
    return (x.exp() - (-x).exp()) / 2


def _cosh(x: Any) -> Any:
    return (x.exp() + (-x).exp()) / 2


def _tanh(x: Any) -> Any:
    # By the side where the exponential falls: its square stays below one.
    if x[0] > 0:
        return -_tanh(-x)
    square = (x * 2).exp()
    return (square - 1) / (square + 1)


def _power(x: Any, y: Any) -> Any:
    if not isinstance(x, arb_series) and not isinstance(y, arb_series):
        return _BALL["ball_pow"](x, y)
    if isinstance(y, fmpq) and y.q == 1:
        y = int(y.p)
    if isinstance(y, int):
        return x**y
    # General powers are those of a positive base.
    base = x if isinstance(x, arb_series) else arb_series([arb(x)])
    return (base.log() * y).exp()


def _first(x: Any) -> Any:
    return x[0] if isinstance(x, arb_series) else x


def _less(left: Any, right: Any) -> bool:
    # Whether the whole step lies on one side is asked of the step's enclosure; here its start decides.
    return bool(_BALL["ball_less"](_first(left), _first(right)))


def _abs(x: Any) -> Any:
    return -x if _less(x, 0) else x


def _min(a: Any, b: Any) -> Any:
    return a if _less(a, b) else b


def _max(a: Any, b: Any) -> Any:
    return b if _less(a, b) else a


def _floor(x: Any) -> Any:
    return _BALL["ball_floor"](_first(x))


def _atan2(y: Any, x: Any) -> Any:
    if not isinstance(x, arb_series) and not isinstance(y, arb_series):
        return _BALL["ball_atan2"](y, x)
    across, along = arb(_first(y)), arb(_first(x))
    if along > 0:
        return (_as_series(y) / x).atan()
    if across > 0:
        return arb.pi() / 2 - (_as_series(x) / y).atan()
    if across < 0:
        return -arb.pi() / 2 - (_as_series(x) / y).atan()
    raise SwitchingTouched("the orbit touches a switching surface of the formula")


def _as_series(x: Any) -> Any:
    return x if isinstance(x, arb_series) else arb_series([arb(x)])


class _Circle:
    """Sine and cosine of the same argument, worked out together: most formulas that ask one ask both."""

    def __init__(self) -> None:
        self.argument: Any = None
        self.pair: tuple[Any, Any] = (None, None)

    def look(self, x: Any) -> tuple[Any, Any]:
        if x is not self.argument:
            self.argument, self.pair = x, x.sin_cos()
        return self.pair


_SERIES: dict[str, Any] = {
    **_BALL,
    "ball_less": _less,
    "ball_abs": _abs,
    "ball_min": _min,
    "ball_max": _max,
    "ball_floor": _floor,
    "ball_pow": _power,
    "ball_atan2": _atan2,
    "ball_value": lambda x: x if isinstance(x, arb_series) else _BALL["ball_value"](x),
    "ball_sinh": _either("sinh", _sinh),
    "ball_cosh": _either("cosh", _cosh),
    "ball_tanh": _either("tanh", _tanh),
}
for _name in ("tan", "asin", "acos", "atan", "exp", "log", "sqrt"):
    _SERIES[f"ball_{_name}"] = _either(_name, methodcaller(_name))


@lru_cache(maxsize=256)
def series_function(expressions: tuple[Expr, ...], names: tuple[str, ...]) -> SeriesFunction:
    """Compile expressions to one Python function over power series.

    Parameters
    ----------
    expressions
        What to compute, sharing sub-expressions.
    names
        Names in the order of the function's arguments, each a series or a ball.

    Returns
    -------
    callable
        f(*series) -> one series an expression; None where the expression is the constant zero.
        Precision and length are those in force. Outside a function's domain coefficients are not finite, or
        it raises `ArithmeticError`.
    """
    zero = tuple(is_zero(expression) for expression in expressions)
    wanted = tuple(expr for expr, nothing in zip(expressions, zero, strict=True) if not nothing)
    circle = _Circle()
    tools = {
        **_SERIES,
        "ball_sin": _either("sin", lambda x: circle.look(x)[0]),
        "ball_cos": _either("cos", lambda x: circle.look(x)[1]),
    }
    function = compiled(wanted, names, tools) if wanted else _nothing

    def evaluate(*values: Any) -> tuple[Any, ...]:
        # What is remembered of the last argument may be of another precision.
        circle.argument = None
        try:
            found = iter(function(*values))
        except ValueError as error:
            # A series that may begin with zero divides nothing.
            raise ArithmeticError("the orbit left the domain of a formula") from error
        return tuple(None if nothing else _as_series(next(found)) for nothing in zero)

    return evaluate


def _nothing(*_: Any) -> tuple[Any, ...]:
    return ()


def value_at(coefficients: Sequence[Any], time: Any) -> Any:
    """A polynomial's value at a ball of times."""
    return flint.arb_poly(list(coefficients))(time)
