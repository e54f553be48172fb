"""Formulas over boxes of complex numbers on which they are analytic, and over power series begun there.

Cauchy's estimates need more than a bound: the formula must be analytic on the whole box. So a root, a
logarithm or an inverse function whose box could touch a branch cut is refused here, where complex balls by
themselves would give the union of both branches.
"""

from __future__ import annotations

from collections.abc import Callable
from functools import lru_cache
from typing import Any

from flint import acb, acb_series, fmpq

from tinemark.systems.balls import ball_tools, compiled
from tinemark.systems.errors import SwitchingTouched
from tinemark.systems.expression import Expr

DiscFunction = Callable[..., tuple[Any, ...]]
_BALL = ball_tools()


class NotAnalytic(Exception):
    """A box is too large: the formula is not analytic on all of it as far as can be seen."""


def _complex(x: Any) -> Any:
    return x if isinstance(x, (acb, acb_series)) else acb(x)


def _start(x: Any) -> Any:
    """The box that a series begins with, or the box itself."""
    return x[0] if isinstance(x, acb_series) else _complex(x)


def _right_half(name: str) -> Callable[[Any], Any]:
    """A function that is analytic off the negative half line."""

    def function(x: Any) -> Any:
        if not _start(x).real > 0:
            raise NotAnalytic
        return getattr(_complex(x), name)()

    return function


def _unit_disc(name: str, sign: int) -> Callable[[Any], Any]:
    """A function that is analytic in the unit disc, and whose derivative is sign / sqrt(1 - x**2)."""

    def function(x: Any) -> Any:
        start = _start(x)
        if not abs(start) < 1:
            raise NotAnalytic
        value = getattr(start, name)()
        if not isinstance(x, acb_series):
            return value
        return value + (x.derivative() / (1 - x * x).sqrt()).integral() * sign

    return function


def _atan(x: Any) -> Any:
    start = _start(x)
    if not (start.real > 0 or start.real < 0 or abs(start) < 1):
        raise NotAnalytic
    return _complex(x).atan()


def _entire(name: str) -> Callable[[Any], Any]:
    # Poles give what is not finite, which is refused by whoever looks at the result.
    def function(x: Any) -> Any:
        return getattr(_complex(x), name)()

    return function


def _sinh(x: Any) -> Any:
    if not isinstance(x, acb_series):
        return _complex(x).sinh()
    return (x.exp() - (-x).exp()) / 2


def _cosh(x: Any) -> Any:
    if not isinstance(x, acb_series):
        return _complex(x).cosh()
    return (x.exp() + (-x).exp()) / 2


def _tanh(x: Any) -> Any:
    if not isinstance(x, acb_series):
        return _complex(x).tanh()
    # By the side where the exponential falls: its square stays below one.
    if x[0].real > 0:
        return -_tanh(-x)
    square = (x * 2).exp()
    return (square - 1) / (square + 1)


def _power(x: Any, y: Any) -> Any:
    if isinstance(y, fmpq) and y.q == 1:
        y = int(y.p)
    if isinstance(y, int):
        return _complex(x) ** y
    return (_right_half("log")(x) * y).exp()


def _less(left: Any, right: Any) -> bool:
    # The box of real parts holds all real states, so the branch that is taken holds for all of them.
    difference = _start(left).real - _start(right).real
    if difference < 0:
        return True
    if difference > 0:
        return False
    raise SwitchingTouched("the orbit touches a switching surface of the formula")


def _abs(x: Any) -> Any:
    return -x if _less(x, 0) else x


def _min(a: Any, b: Any) -> Any:
    return a if _less(a, b) else b


def _max(a: Any, b: Any) -> Any:
    return b if _less(a, b) else a


def _floor(x: Any) -> Any:
    return acb(_BALL["ball_floor"](_start(x).real))


def _atan2(y: Any, x: Any) -> Any:
    y, x = _complex(y), _complex(x)
    across, along = _start(y).real, _start(x).real
    if along > 0:
        return _atan(y / x)
    if across > 0:
        return acb.pi() / 2 - _atan(x / y)
    if across < 0:
        return -acb.pi() / 2 - _atan(x / y)
    raise SwitchingTouched("the orbit touches a switching surface of the formula")


_DISCS: dict[str, Any] = {
    **_BALL,
    "ball_less": _less,
    "ball_abs": _abs,
    "ball_min": _min,
    "ball_max": _max,
    "ball_floor": _floor,
    "ball_pow": _power,
    "ball_atan2": _atan2,
    "ball_atan": _atan,
    "ball_value": _complex,
    "ball_log": _right_half("log"),
    "ball_sqrt": _right_half("sqrt"),
    "ball_sinh": _sinh,
    "ball_cosh": _cosh,
    "ball_tanh": _tanh,
    "ball_asin": _unit_disc("asin", 1),
    "ball_acos": _unit_disc("acos", -1),
}
_DISCS.update({f"ball_{name}": _entire(name) for name in ("sin", "cos", "tan", "exp")})


@lru_cache(maxsize=64)
def disc_function(expressions: tuple[Expr, ...], names: tuple[str, ...]) -> DiscFunction:
    """Compile expressions to one function over complex boxes, or series that begin with one.

    Returns
    -------
    callable
        f(*boxes) -> tuple of enclosures, or of series that enclose those of every point of the boxes.
        The formulas are analytic on the boxes: it raises `NotAnalytic` where that cannot be seen, and
        `SwitchingTouched` where the real part of the boxes touches a switching surface. At poles the
        enclosures are not finite.
    """
    function = compiled(expressions, names, _DISCS)

    def evaluate(*values: Any) -> tuple[Any, ...]:
        try:
            return function(*values)
        except ValueError as error:
            # A series that may begin with zero divides nothing.
            raise NotAnalytic from error

    return evaluate
