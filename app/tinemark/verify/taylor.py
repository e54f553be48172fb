"""Taylor coefficients of elementary functions on intervals, up to third order."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from fractions import Fraction
from typing import TypeAlias

from tinemark.verify import intervals as iv
from tinemark.verify.intervals import ONE, Interval

Function: TypeAlias = Callable[[Interval, int, int], list[Interval]]
"""Taylor coefficients of a function on an interval: function(x, order, bits), order at most 3."""


def _scaled(values: Sequence[Interval], factors: Sequence[Fraction], bits: int) -> list[Interval]:
    return [
        value if factor == 1 else iv.mul(iv.of_fraction(factor, bits), value, bits)
        for value, factor in zip(values, factors, strict=False)
    ]


_FACTORIALS = (Fraction(1), Fraction(1), Fraction(1, 2), Fraction(1, 6))


def _exp(x: Interval, order: int, bits: int) -> list[Interval]:
    return _scaled([iv.exp(x, bits)] * (order + 1), _FACTORIALS, bits)


def _log(x: Interval, order: int, bits: int) -> list[Interval]:
    found = [iv.log(x, bits)]
    if order:
        inverse = iv.div(ONE, x, bits)
        powers = [iv.whole_power(inverse, n, bits) for n in range(1, order + 1)]
        found += _scaled(powers, (Fraction(1), Fraction(-1, 2), Fraction(1, 3)), bits)
    return found


def _sqrt(x: Interval, order: int, bits: int) -> list[Interval]:
    root = iv.sqrt(x, bits)
    found = [root]
    for n in range(order):
        factor = (Fraction(1, 2) - n) / (n + 1)
        found.append(iv.mul(iv.of_fraction(factor, bits), iv.div(found[-1], x, bits), bits))
    return found


def _sin(x: Interval, order: int, bits: int) -> list[Interval]:
    cosine, sine = iv.cos_sin(x, bits)
    values = [sine, cosine, iv.neg(sine), iv.neg(cosine)]
    return _scaled(values[: order + 1], _FACTORIALS, bits)


def _cos(x: Interval, order: int, bits: int) -> list[Interval]:
    cosine, sine = iv.cos_sin(x, bits)
    values = [cosine, iv.neg(sine), iv.neg(cosine), sine]
    return _scaled(values[: order + 1], _FACTORIALS, bits)


def _cosh(x: Interval, order: int, bits: int) -> list[Interval]:
    cosh, sinh = iv.cosh_sinh(x, bits)
    return _scaled([cosh, sinh, cosh, sinh][: order + 1], _FACTORIALS, bits)


def _sinh(x: Interval, order: int, bits: int) -> list[Interval]:
    cosh, sinh = iv.cosh_sinh(x, bits)
    return _scaled([sinh, cosh, sinh, cosh][: order + 1], _FACTORIALS, bits)


def _tanh(x: Interval, order: int, bits: int) -> list[Interval]:
    # t' = 1 - t^2, t'' = -2 t t', t''' = -2 t'^2 - 2 t t''
    t = iv.tanh(x, bits)
    first = iv.sub(ONE, iv.whole_power(t, 2, bits), bits)
    second = _times(-2, iv.mul(t, first, bits), bits)
    third = _times(-2, iv.add(iv.whole_power(first, 2, bits), iv.mul(t, second, bits), bits), bits)
    return _scaled([t, first, second, third][: order + 1], _FACTORIALS, bits)


def _atan(x: Interval, order: int, bits: int) -> list[Interval]:
    # With q = 1 / (1 + x^2): q, -2 x q^2, (6 x^2 - 2) q^3.
    square = iv.whole_power(x, 2, bits)
    q = iv.div(ONE, iv.add(ONE, square, bits), bits)
    second = _times(-2, iv.mul(x, iv.whole_power(q, 2, bits), bits), bits)
    factor = iv.sub(_times(6, square, bits), iv.of_fraction(Fraction(2), bits), bits)
    third = iv.mul(factor, iv.whole_power(q, 3, bits), bits)
    return _scaled([iv.atan(x, bits), q, second, third][: order + 1], _FACTORIALS, bits)


def _asin(x: Interval, order: int, bits: int) -> list[Interval]:
    # With s = 1 / sqrt(1 - x^2): s, x s^3, (1 + 2 x^2) s^5.
    square = iv.whole_power(x, 2, bits)
    value = iv.asin(x, bits)
    s = iv.div(ONE, iv.sqrt(iv.sub(ONE, square, bits), bits), bits)
    second = iv.mul(x, iv.whole_power(s, 3, bits), bits)
    third = iv.mul(iv.add(ONE, _times(2, square, bits), bits), iv.whole_power(s, 5, bits), bits)
    return _scaled([value, s, second, third][: order + 1], _FACTORIALS, bits)


def _times(factor: int, x: Interval, bits: int) -> Interval:
    product: Interval = iv.mul(iv.of_fraction(Fraction(factor), bits), x, bits)
    return product


FUNCTIONS: Mapping[str, Function] = {
    "sin": _sin,
    "cos": _cos,
    "asin": _asin,
    "atan": _atan,
    "sinh": _sinh,
    "cosh": _cosh,
    "tanh": _tanh,
    "exp": _exp,
    "log": _log,
    "sqrt": _sqrt,
}
