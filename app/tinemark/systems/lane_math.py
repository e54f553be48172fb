"""Elementary functions without branches, for code that runs many orbits side by side.

A loop over lanes becomes vector code only when nothing in it branches or calls a library. Each
function here is one straight line: argument reduction in two or three fused parts (Cody and
Waite, 1980), a polynomial fitted by Remez's exchange, and selections at the end for the special
cases. Errors against exact values stay below 1 unit in the last place for exp and log, below 2 for
the others, 3 for tan; the angle functions have |x|*1e-33 on top, which shows only beside their
zeros. tests/density/test_lane_math.py measures all of it.

Not-a-number goes in and comes out, and infinities behave as in the C library. Two limits differ
from a library's: exp gives 0 below the smallest normal number, and the angle functions give nan
beyond 2**45, where doubles lie hundredths of a radian apart; an orbit out there counts as escaped.

The compiler must neither re-associate nor fuse what is written here, so these functions carry no
fast-math flags whatever the calling kernel allows itself.
"""

from __future__ import annotations

from collections.abc import Callable
from fractions import Fraction
from typing import Any, TypeAlias, TypeVar

import numba
import numpy as np
from llvmlite import ir
from numba.core import types
from numba.extending import intrinsic

Function = TypeVar("Function", bound=Callable[..., Any])
Real: TypeAlias = Any
"""A double; what numba and NumPy make of it is known to neither type checker nor reader."""


def lane_function(function: Function) -> Function:
    """The decorator of elementary functions: inlined into kernels, with arithmetic exactly as written."""
    compiled: Function = numba.njit(
        cache=True, nogil=True, fastmath=False, error_model="numpy", forceinline=True
    )(function)
    return compiled


def fma_exactly(a: float, b: float, c: float) -> float:
    """a*b + c rounded once; the slow form that serves where the compiler is off."""
    plain = a * b + c
    if not np.isfinite(plain):
        return plain
    try:
        return float(Fraction(float(a)) * Fraction(float(b)) + Fraction(float(c))) or plain
    except OverflowError:
        return plain


@intrinsic
def _fma_fused(_typing, _a, _b, _c):  # type: ignore[no-untyped-def]
    signature = types.float64(types.float64, types.float64, types.float64)

    def generate(_context, builder, _signature, arguments):  # type: ignore[no-untyped-def]
        return builder.fma(*arguments)

    return signature, generate


def _truncated_slowly(x: float) -> np.uint32:
    return np.uint32(int(x) % 2**32) if -2147483649.0 < x < 2147483648.0 else np.uint32(0x80000000)


@intrinsic
def _truncated_fused(_typing, _x):  # type: ignore[no-untyped-def]
    signature = types.uint32(types.float64)

    def generate(_context, builder, _signature, arguments):  # type: ignore[no-untyped-def]
        whole = builder.fptosi(arguments[0], ir.IntType(32))
        # Out of range the conversion gives no value at all in the compiler's eyes; frozen, it is some
        # number, which the caller's clamp then brings inside whatever it is.
        frozen = ir.instructions.Instruction(builder.block, whole.type, "freeze", [whole])
        builder._insert(frozen)  # noqa: SLF001 - llvmlite has no builder method for it
        return frozen

    return signature, generate


lane_fma: Any = fma_exactly if numba.config.DISABLE_JIT else _fma_fused
lane_whole: Any = _truncated_slowly if numba.config.DISABLE_JIT else _truncated_fused
"""Truncation to an unsigned 32-bit number. Negative, huge and undefined arguments give some large
number, or 0 for nan on some processors: clamp the result before it is used as an index."""

# Adding this rounds to a whole number, which then stands in the low bits of the sum.
_ROUND = 6755399441055744.0  # 1.5 * 2**52
_ROUND_BIASED = 6755399441055744.0 + 1023.0  # … and this one leaves an exponent field there
_SHIFT = np.uint64(52)
_SIGN = np.uint64(63)
_ONE = np.uint64(1)
_MANTISSA = np.uint64(0x000FFFFFFFFFFFFF)
_ROOT_HALF = np.uint64(0x3FE6A09E667F3BCD)  # bits of sqrt(1/2)
_LIFT = np.uint64((1024 << 52) - 0x3FE6A09E667F3BCD)
_WHOLE = np.uint64(0x4330000000000000)  # bits of 2**52
_WHOLE_LIFTED = 4503599627370496.0 + 1024.0
_SMALLEST_NORMAL = 2.2250738585072014e-308
_FURTHEST_ANGLE = 35184372088832.0  # 2**45

_LOG2_E = 1.4426950408889634
_LN2, _LN2_REST = 0.6931471805599453, 2.3190468138462996e-17
_LN2_SHORT, _LN2_SHORT_REST = 0.6931471805592082, 7.371002565167799e-13  # short one: 40 bits
_PI_INVERSE = 0.3183098861837907
_PI, _PI_REST = 3.141592653589793, 1.2246467991473532e-16
_HALF_PI, _QUARTER_PI, _QUARTER_PI_REST = 1.5707963267948966, 0.7853981633974483, 3.061616997868383e-17
_HALF_PI_REST = 6.123233995736766e-17
_TWO_THIRDS, _TWO_THIRDS_REST = 0.6666666666666666, 3.700743415417188e-17


@lane_function
def _exp_parts(x: Real, rest: Real, doublings: Real) -> Real:
    """exp(x + rest) * 2**doublings; the scaling is done in two halves, so that subnormals are kept."""
    c = 712.0 if x > 712.0 else x  # noqa: FURB136  # keeps nan
    c = -747.0 if c < -747.0 else c  # noqa: FURB136
    n = (c * _LOG2_E + _ROUND) - _ROUND
    r = lane_fma(-n, _LN2, c)
    r = lane_fma(-n, _LN2_REST, r) + rest
    q = lane_fma(2.5117989767413088e-08, r, 2.763129238959598e-07)
    q = lane_fma(q, r, 2.755721592313393e-06)
    q = lane_fma(q, r, 2.4801489911924246e-05)
    q = lane_fma(q, r, 0.00019841269917766636)
    q = lane_fma(q, r, 0.0013888888947042072)
    q = lane_fma(q, r, 0.008333333333307045)
    q = lane_fma(q, r, 0.04166666666651533)
    q = lane_fma(q, r, 0.166666666666667)
    q = lane_fma(q, r, 0.5000000000000012)
    p = lane_fma(r * r, q, r) + 1.0
    n = n + doublings
    half = (n * 0.5 + _ROUND) - _ROUND
    first = np.uint64(np.float64(half + _ROUND_BIASED).view(np.uint64) << _SHIFT).view(np.float64)
    second = np.uint64(np.float64((n - half) + _ROUND_BIASED).view(np.uint64) << _SHIFT).view(np.float64)
    return p * first * second


@lane_function
def lane_exp(x: Real) -> Real:
    """Exponential; 0 where the result would be below the smallest normal number."""
    t = lane_fma(x, _LOG2_E, _ROUND)
    n = t - _ROUND
    r = lane_fma(-n, _LN2, x)
    r = lane_fma(-n, _LN2_REST, r)
    q = lane_fma(2.5117989767413088e-08, r, 2.763129238959598e-07)
    q = lane_fma(q, r, 2.755721592313393e-06)
    q = lane_fma(q, r, 2.4801489911924246e-05)
    q = lane_fma(q, r, 0.00019841269917766636)
    q = lane_fma(q, r, 0.0013888888947042072)
    q = lane_fma(q, r, 0.008333333333307045)
    q = lane_fma(q, r, 0.04166666666651533)
    q = lane_fma(q, r, 0.166666666666667)
    q = lane_fma(q, r, 0.5000000000000012)
    q = lane_fma(q, r, 1.0)
    p = lane_fma(q, r, 1.0)
    # The whole number in the low bits of t goes straight onto the exponent field.
    power = np.float64(t).view(np.uint64) << _SHIFT
    scaled = np.uint64(np.float64(p).view(np.uint64) + power).view(np.float64)
    result = scaled if x > -708.3964185322641 else 0.0
    return result if x < 709.782712893384 else x + np.inf


@lane_function
def lane_log(x: Real) -> Real:
    """Natural logarithm: -inf at 0, nan below."""
    tiny = x < _SMALLEST_NORMAL
    y = x * 18014398509481984.0 if tiny else x
    bits = np.float64(y).view(np.uint64) + _LIFT
    k = np.uint64((bits >> _SHIFT) | _WHOLE).view(np.float64) - _WHOLE_LIFTED
    k = k - 54.0 if tiny else k
    m = np.uint64((bits & _MANTISSA) + _ROOT_HALF).view(np.float64)
    f = m - 1.0
    s = f / (2.0 + f)
    z = s * s
    q = lane_fma(0.13251508617427754, z, 0.13250098303136273)
    q = lane_fma(q, z, 0.15387091640538897)
    q = lane_fma(q, z, 0.18181775645270018)
    q = lane_fma(q, z, 0.22222222647048967)
    q = lane_fma(q, z, 0.28571428569084234)
    q = lane_fma(q, z, 0.40000000000006253)
    q = lane_fma(q, z, 0.6666666666666666)
    h = 0.5 * f * f
    small = lane_fma(s, lane_fma(z, q, h), k * _LN2_SHORT_REST)
    result = lane_fma(k, _LN2_SHORT, f - (h - small))
    result = result if x < np.inf else x
    return result if x > 0.0 else (-np.inf if x == 0.0 else np.nan)


@lane_function
def lane_pow(x: Real, y: Real) -> Real:
    """Power x**y; nan where x is negative and y is not whole."""
    a = abs(x)
    tiny = a < _SMALLEST_NORMAL
    v = a * 18014398509481984.0 if tiny else a
    bits = np.float64(v).view(np.uint64) + _LIFT
    k = np.uint64((bits >> _SHIFT) | _WHOLE).view(np.float64) - _WHOLE_LIFTED
    k = k - 54.0 if tiny else k
    m = np.uint64((bits & _MANTISSA) + _ROOT_HALF).view(np.float64)
    # log(m) = 2s + 2/3 s**3 + …, s = (m-1)/(m+1), the first two terms in pairs of doubles (Dekker, 1971).
    f = m - 1.0
    d = m + 1.0
    d_rest = m - (d - 1.0)
    s = f / d
    s_rest = lane_fma(-s, d_rest, lane_fma(-s, d, f)) / d
    z = s * s
    z_rest = lane_fma(s, s, -z) + 2.0 * s * s_rest
    c = s * z
    c_rest = lane_fma(s, z, -c) + (s * z_rest + s_rest * z)
    t = c * _TWO_THIRDS
    t_rest = lane_fma(c, _TWO_THIRDS, -t) + (c * _TWO_THIRDS_REST + c_rest * _TWO_THIRDS)
    q = lane_fma(0.11989168580614906, z, 0.11674799851185098)
    q = lane_fma(q, z, 0.13336318337291564)
    q = lane_fma(q, z, 0.15384556847179)
    q = lane_fma(q, z, 0.18181818870662264)
    q = lane_fma(q, z, 0.22222222217533655)
    q = lane_fma(q, z, 0.28571428571445123)
    q = lane_fma(q, z, 0.3999999999999998)
    top: Real = 2.0 * s + t
    tail = t - (top - 2.0 * s)
    tail = tail + (2.0 * s_rest + t_rest + c * z * q)
    whole = k * _LN2_SHORT
    log_high = whole + top
    log_low = top - (log_high - whole)
    log_low = log_low + lane_fma(k, _LN2_SHORT_REST, tail)
    fold = log_high + log_low
    log_low = log_low - (fold - log_high)
    log_high = fold
    finite = (a > 0.0) and (a < np.inf)
    high: Real = log_high if finite else (-np.inf if a == 0.0 else a)
    low: Real = log_low if finite else 0.0
    p = y * high
    rest = lane_fma(y, high, -p) + y * low
    rest = rest if abs(p) < 800.0 else 0.0
    size = _exp_parts(p, rest, 0.0)
    size = 1.0 if a == 1.0 else size
    half = 0.5 * y
    y_whole = np.floor(y) == y
    odd = y_whole and np.floor(half) != half
    result = size if x >= 0.0 else (-size if odd else (size if y_whole else np.nan))
    # A negative zero under an odd power keeps its sign only by 1/x; orbits do not need it.
    result = x + y if (x != x or y != y) else result
    return 1.0 if (y == 0.0 or x == 1.0) else result


@lane_function
def _sin_reduced(r: Real) -> Real:
    """Sine on [-pi/2, pi/2]."""
    z = r * r
    q = lane_fma(2.722249449528847e-15, z, -7.643097193994393e-13)
    q = lane_fma(q, z, 1.6058943921093008e-10)
    q = lane_fma(q, z, -2.5052106960004334e-08)
    q = lane_fma(q, z, 2.7557319212129985e-06)
    q = lane_fma(q, z, -0.00019841269841215273)
    q = lane_fma(q, z, 0.008333333333333212)
    q = lane_fma(q, z, -0.16666666666666666)
    return lane_fma(r * z, q, r)


@lane_function
def lane_sin(x: Real) -> Real:
    """Sine; nan beyond 2**45."""
    t = lane_fma(x, _PI_INVERSE, _ROUND)
    n = t - _ROUND
    r = lane_fma(-n, _PI, x)
    r = lane_fma(-n, _PI_REST, r)
    turn = np.float64(t).view(np.uint64) << _SIGN
    result = np.uint64(np.float64(_sin_reduced(r)).view(np.uint64) ^ turn).view(np.float64)
    return result if abs(x) < _FURTHEST_ANGLE else np.nan


@lane_function
def lane_cos(x: Real) -> Real:
    """Cosine; nan beyond 2**45."""
    # cos(r + (m + 1/2) pi) = -(-1)**m sin(r)
    t = lane_fma(x, _PI_INVERSE, -0.5) + _ROUND
    n = (t - _ROUND) + 0.5
    r = lane_fma(-n, _PI, x)
    r = lane_fma(-n, _PI_REST, r)
    turn = (np.float64(t).view(np.uint64) + _ONE) << _SIGN
    result = np.uint64(np.float64(_sin_reduced(r)).view(np.uint64) ^ turn).view(np.float64)
    return result if abs(x) < _FURTHEST_ANGLE else np.nan


@lane_function
def lane_tan(x: Real) -> Real:
    """Tangent; nan beyond 2**45."""
    return lane_sin(x) / lane_cos(x)


@lane_function
def _atan_positive(a: Real) -> Real:
    """Arc tangent of a >= 0, infinity included."""
    far = a > 2.414213562373095
    near = a <= 0.4142135623730951
    numerator = -1.0 if far else (a if near else a - 1.0)
    denominator = a if far else (1.0 if near else a + 1.0)
    t = numerator / denominator
    base = _HALF_PI if far else (0.0 if near else _QUARTER_PI)
    rest = _HALF_PI_REST if far else (0.0 if near else _QUARTER_PI_REST)
    z = t * t
    q = lane_fma(-0.017907339566705167, z, 0.03806494978342426)
    q = lane_fma(q, z, -0.05039330560866183)
    q = lane_fma(q, z, 0.05847897313123742)
    q = lane_fma(q, z, -0.06663105441163482)
    q = lane_fma(q, z, 0.07692060360062764)
    q = lane_fma(q, z, -0.09090897766946304)
    q = lane_fma(q, z, 0.11111110783807983)
    q = lane_fma(q, z, -0.14285714280203834)
    q = lane_fma(q, z, 0.1999999999995366)
    q = lane_fma(q, z, -0.333333333333332)
    return base + (lane_fma(t * z, q, rest) + t)


@lane_function
def lane_atan(x: Real) -> Real:
    """Arc tangent."""
    return np.copysign(_atan_positive(abs(x)), x)


@lane_function
def lane_atan2(y: Real, x: Real) -> Real:
    """Angle of the point (x, y), in (-pi, pi]."""
    a, b = abs(y), abs(x)
    low, high = (a, b) if a < b else (b, a)
    ratio = low / high if high > 0.0 else (high + low)
    ratio = 1.0 if (low == np.inf) else ratio
    angle = _atan_positive(ratio)
    angle = (_HALF_PI - angle) + _HALF_PI_REST if a > b else angle
    # copysign tells -0.0 from 0.0, as the C library does.
    angle = (_PI - angle) + _PI_REST if np.copysign(1.0, x) < 0.0 else angle
    angle = np.copysign(angle, y)
    return x + y if (x != x or y != y) else angle


@lane_function
def _asin_small(t: Real, z: Real) -> Real:
    """Arc sine of |t| <= 1/2, with z = t**2."""
    q = lane_fma(0.031981585691168476, z, -0.016326550514871814)
    q = lane_fma(q, z, 0.019594254802977138)
    q = lane_fma(q, z, 0.006503550983822869)
    q = lane_fma(q, z, 0.012174935229491052)
    q = lane_fma(q, z, 0.01388435153854521)
    q = lane_fma(q, z, 0.017359795532143053)
    q = lane_fma(q, z, 0.02237175194528388)
    q = lane_fma(q, z, 0.030381959395125287)
    q = lane_fma(q, z, 0.044642856821987334)
    q = lane_fma(q, z, 0.0750000000034478)
    q = lane_fma(q, z, 0.16666666666665375)
    return lane_fma(t * z, q, t)


@lane_function
def lane_asin(x: Real) -> Real:
    """Arc sine; nan outside [-1, 1]."""
    a = abs(x)
    inner = a <= 0.5
    z = a * a if inner else 0.5 * (1.0 - a)
    s = _asin_small(a if inner else np.sqrt(z), z)
    return np.copysign(s if inner else lane_fma(-2.0, s, _HALF_PI) + _HALF_PI_REST, x)


@lane_function
def lane_acos(x: Real) -> Real:
    """Arc cosine; nan outside [-1, 1]."""
    a = abs(x)
    inner = a <= 0.5
    z = a * a if inner else 0.5 * (1.0 - a)
    s = _asin_small(x if inner else np.sqrt(z), z)
    outer = 2.0 * s if x > 0.0 else lane_fma(-2.0, s, _PI) + _PI_REST
    return (_HALF_PI - (s - _HALF_PI_REST)) if inner else outer


@lane_function
def lane_sinh(x: Real) -> Real:
    """Hyperbolic sine."""
    a = abs(x)
    e = _exp_parts(a, 0.0, -1.0)
    far = e - 0.25 / e
    z = a * a
    q = lane_fma(7.759426604638952e-13, z, 1.6057236666871576e-10)
    q = lane_fma(q, z, 2.5052123444418118e-08)
    q = lane_fma(q, z, 2.755731915505737e-06)
    q = lane_fma(q, z, 0.00019841269841438535)
    q = lane_fma(q, z, 0.008333333333333137)
    q = lane_fma(q, z, 0.16666666666666669)
    return np.copysign(lane_fma(a * z, q, a) if a < 1.0 else far, x)


@lane_function
def lane_cosh(x: Real) -> Real:
    """Hyperbolic cosine."""
    e = _exp_parts(abs(x), 0.0, -1.0)
    return e + 0.25 / e


@lane_function
def lane_tanh(x: Real) -> Real:
    """Hyperbolic tangent."""
    a = abs(x)
    far = 1.0 - 2.0 / (lane_exp(a + a) + 1.0)
    z = a * a
    q = lane_fma(-1.7210833125788047e-05, z, 7.93772372986566e-05)
    q = lane_fma(q, z, -0.00023045062058973866)
    q = lane_fma(q, z, 0.000587214222515362)
    q = lane_fma(q, z, -0.0014552230382258713)
    q = lane_fma(q, z, 0.0035920388405725296)
    q = lane_fma(q, z, -0.008863226955269256)
    q = lane_fma(q, z, 0.02186948801594331)
    q = lane_fma(q, z, -0.053968253949874125)
    q = lane_fma(q, z, 0.133333333333009)
    q = lane_fma(q, z, -0.3333333333333313)
    return np.copysign(lane_fma(a * z, q, a) if a < 0.6 else far, x)


@lane_function
def lane_sqrt(x: Real) -> Real:
    """Square root; nan below 0."""
    return np.sqrt(x)


@lane_function
def lane_abs(x: Real) -> Real:
    """Absolute value."""
    return abs(x)


@lane_function
def lane_floor(x: Real) -> Real:
    """Largest whole number not above x, as a float."""
    return np.floor(x)


@lane_function
def lane_min(x: Real, y: Real) -> Real:
    """Smaller of two; nan when either is."""
    return x if (x < y or x != x) else y


@lane_function
def lane_max(x: Real, y: Real) -> Real:
    """Larger of two; nan when either is."""
    return x if (x > y or x != x) else y
