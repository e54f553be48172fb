"""Intervals at a stated precision, on the arithmetic of mpmath's `iv`.

The interval operations are those behind mpmath's `iv` context, called by the functions that take the
precision as an argument (`mpmath.libmp.libmpi`): `iv.prec` is one value per process, and nothing here reads
or sets it. Sums, products and quotients round outward exactly there.

mpmath's elementary functions do not promise the direction of rounding: they are worked out with some guard
bits and then rounded. Here they are taken at ends of intervals with `GUARD_BITS` bits more than asked for
and widened by 2^(GUARD_BITS / 2) units of that precision, far beyond the few units they are off by.
Monotone functions are taken at both ends; sine and cosine at the middle, with the half-width added, since
neither moves faster than its argument. What is not defined on a whole interval raises `Undecided`.
"""

from __future__ import annotations

from collections.abc import Callable
from fractions import Fraction
from typing import Any, TypeAlias

from mpmath import libmp
from mpmath.libmp import libmpi

from tinemark.verify.claims import Undecided

Interval: TypeAlias = tuple[Any, Any]
"""Lower and upper end, as mpmath's raw floating-point numbers."""

GUARD_BITS = 32
LARGEST_POWER = 64
"""Powers of two beyond which the argument of a function is not worked with."""

ZERO: Interval = (libmp.fzero, libmp.fzero)
ONE: Interval = (libmp.fone, libmp.fone)

add = libmpi.mpi_add
sub = libmpi.mpi_sub
mul = libmpi.mpi_mul
neg = libmpi.mpi_neg


def of_fraction(value: Fraction, bits: int) -> Interval:
    """The narrowest interval that holds a rational."""
    p, q = value.numerator, value.denominator
    if q == 1 and p.bit_length() <= bits:
        exact = libmp.from_int(p)
        return exact, exact
    return libmp.from_rational(p, q, bits, "f"), libmp.from_rational(p, q, bits, "c")


def to_fraction(end: Any) -> Fraction:
    """An end as the rational it is.

    Raises
    ------
    Undecided
        It is infinite.
    """
    sign, mantissa, exponent, _ = end
    if not mantissa:
        if exponent:
            raise Undecided("a value is not bounded")
        return Fraction(0)
    if abs(int(exponent)) > 100_000:
        raise Undecided("a value is beyond all bounds")
    whole = -int(mantissa) if sign else int(mantissa)
    return Fraction(whole * 2**exponent) if exponent >= 0 else Fraction(whole, 2**-exponent)


def ends(x: Interval) -> tuple[Fraction, Fraction]:
    """Both ends as rationals; raises `Undecided` where one is infinite."""
    return to_fraction(x[0]), to_fraction(x[1])


def is_finite(x: Interval) -> bool:
    """Whether both ends are numbers."""
    return all(mantissa or not exponent for _, mantissa, exponent, _ in x)


def sign(x: Interval) -> int:
    """1 or -1 where all of an interval has that sign, else 0."""
    if libmp.mpf_sign(x[0]) > 0 and is_finite(x):
        return 1
    if libmp.mpf_sign(x[1]) < 0 and is_finite(x):
        return -1
    return 0


def middle(x: Interval, bits: int) -> Interval:
    """A point of the interval near its middle. At `bits` bits or more than the ends have, it lies inside."""
    point = libmp.mpf_shift(libmp.mpf_add(x[0], x[1], bits, "n"), -1)
    return point, point


def div(x: Interval, y: Interval, bits: int) -> Interval:
    """Quotient; `Undecided` where the divisor may be zero."""
    if sign(y) == 0:
        raise Undecided("a divisor may be zero there")
    quotient: Interval = libmpi.mpi_div(x, y, bits)
    return quotient


def whole_power(x: Interval, n: int, bits: int) -> Interval:
    """x^n for a whole n >= 0, by squaring; mpmath's own power does not promise its rounding."""
    result, square = ONE, x
    while n:
        if n & 1:
            result = mul(result, square, bits) if result is not ONE else square
        n >>= 1
        if n:
            square = libmpi.mpi_square(square, bits)
    return result


def sqrt(x: Interval, bits: int) -> Interval:
    """Square root of a positive interval."""
    if sign(x) <= 0:
        raise Undecided("a square root is taken at or below zero there")
    return _rising(libmp.mpf_sqrt, x, bits)


def exp(x: Interval, bits: int) -> Interval:
    """Exponential."""
    return _rising(libmp.mpf_exp, x, bits)


def log(x: Interval, bits: int) -> Interval:
    """Logarithm of a positive interval."""
    if sign(x) <= 0:
        raise Undecided("a logarithm is taken at or below zero there")
    if x == ONE:
        return ZERO
    return _rising(libmp.mpf_log, x, bits)


def atan(x: Interval, bits: int) -> Interval:
    """Arc tangent."""
    return _rising(libmp.mpf_atan, x, bits)


def asin(x: Interval, bits: int) -> Interval:
    """Arc sine inside -1 and 1."""
    if sign(sub(ONE, x, bits)) <= 0 or sign(add(ONE, x, bits)) <= 0:
        raise Undecided("an arc sine is taken at or beyond 1 there")
    return _rising(libmp.mpf_asin, x, bits)


def pi(bits: int) -> Interval:
    """The circle constant."""
    return _widened(libmp.mpf_pi(bits + GUARD_BITS, "n"), bits)


def half_pi(bits: int) -> Interval:
    """A quarter turn."""
    low, high = pi(bits)
    return libmp.mpf_shift(low, -1), libmp.mpf_shift(high, -1)


def cos_sin(x: Interval, bits: int) -> tuple[Interval, Interval]:
    """Cosine and sine."""
    if x == ZERO:
        return ONE, ZERO
    point, _ = middle(x, bits + GUARD_BITS)
    _check_size(point)
    cosine, sine = libmp.mpf_cos_sin(point, bits + GUARD_BITS, "n")
    # Nothing is further from the point than the longer side.
    half = libmpi.mpi_abs(sub(x, (point, point), bits), bits)[1]
    # Near a zero the error is small against 1, not against the value.
    least = libmp.mpf_shift(libmp.fone, -bits)
    spread = libmp.mpf_add(half, least, bits, "c")
    return _within_one(_spread(cosine, spread, bits)), _within_one(_spread(sine, spread, bits))


def tanh(x: Interval, bits: int) -> Interval:
    """Hyperbolic tangent."""
    return _rising(libmp.mpf_tanh, x, bits)


def cosh_sinh(x: Interval, bits: int) -> tuple[Interval, Interval]:
    """Hyperbolic cosine and sine, by exponentials."""
    rising, falling = exp(x, bits), exp(neg(x), bits)
    cosh, sinh = add(rising, falling, bits), sub(rising, falling, bits)
    return _halved(cosh), _halved(sinh)


def whole_part(x: Interval) -> int | None:
    """Whole part of an interval that holds no whole number; None elsewhere."""
    if not is_finite(x):
        raise Undecided("a value is not bounded")
    low, high = (libmp.mpf_floor(end, 0, "f") for end in x)
    if low != high or low == x[0]:
        return None
    return int(to_fraction(low))


def _halved(x: Interval) -> Interval:
    return libmp.mpf_shift(x[0], -1), libmp.mpf_shift(x[1], -1)


def _check_size(point: Any) -> None:
    _, mantissa, exponent, length = point
    if (not mantissa and exponent) or exponent + length > LARGEST_POWER:
        raise Undecided("the argument of a function is beyond all bounds there")


def _rising(function: Callable[..., Any], x: Interval, bits: int) -> Interval:
    low, high = x
    _check_size(low)
    _check_size(high)
    bottom = _widened(function(low, bits + GUARD_BITS, "n"), bits)
    return bottom if low == high else (bottom[0], _widened(function(high, bits + GUARD_BITS, "n"), bits)[1])


def _widened(value: Any, bits: int) -> Interval:
    if value == libmp.fzero:
        return ZERO
    return _spread(value, libmp.mpf_shift(libmp.mpf_abs(value), -bits - GUARD_BITS // 2), bits)


def _spread(value: Any, by: Any, bits: int) -> Interval:
    return libmp.mpf_sub(value, by, bits, "f"), libmp.mpf_add(value, by, bits, "c")


def _within_one(x: Interval) -> Interval:
    low = libmp.fnone if libmp.mpf_lt(x[0], libmp.fnone) else x[0]
    high = libmp.fone if libmp.mpf_gt(x[1], libmp.fone) else x[1]
    return low, high


def of_whole(value: int) -> Interval:
    """A whole number, exactly."""
    exact = libmp.from_int(value)
    return exact, exact


def common(x: Interval, y: Interval) -> Interval:
    """What two intervals have in common; raises `Undecided` where that is nothing."""
    low = y[0] if libmp.mpf_gt(y[0], x[0]) else x[0]
    high = y[1] if libmp.mpf_lt(y[1], x[1]) else x[1]
    if not is_finite(x) or libmp.mpf_gt(low, high):
        raise Undecided("there is no such onset in the box")
    return low, high


def size_power(x: Interval) -> int:
    """The power of two just above the upper end's size; of zero a very low one."""
    _, mantissa, exponent, length = x[1]
    return int(exponent + length) if mantissa else -(10**6)
