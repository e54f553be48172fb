"""Elementary functions for processors with 512-bit registers (AVX-512), where tables cost one instruction.

A table of eight doubles is one register and looking eight lanes up in it one permutation; scaling by a
power of two with gradual underflow and overflow is an instruction too. Neither runs on the units that
multiply and add, which is what bounds an exponential otherwise.

These functions are never called: `lane_program` reads them. Without a compiler they are ordinary Python,
which is how the tests hold the compiled ones against them and against exact values.
"""

from __future__ import annotations

import math
import platform
from functools import cache
from typing import Any, TypeAlias

import numba
import numpy as np

from tinemark.systems.lane_math import fma_exactly as lane_fma

Real: TypeAlias = Any

NEEDED_FEATURES = ("avx512f", "avx512dq", "avx512bw", "avx512vl")

EIGHTHS = tuple(2.0 ** (j / 8) for j in range(8))
"""Powers of two by eighths, each within half a unit in the last place."""

_ROUND_EIGHTHS = 844424930131968.0  # 1.5 * 2**49: adding it rounds to whole eighths
_LOG2_E = 1.4426950408889634
_LN2, _LN2_REST = 0.6931471805599453, 2.3190468138462996e-17


@cache
def wide_registers() -> bool:
    """Whether compiled code may use 512-bit registers: compiler on, and this very processor's own code."""
    if numba.config.DISABLE_JIT or numba.config.CPU_NAME or numba.config.CPU_FEATURES:
        return False
    if platform.machine().lower() not in ("x86_64", "amd64"):
        return False
    import llvmlite.binding

    features = llvmlite.binding.get_host_cpu_features()
    return all(features.get(name, False) for name in NEEDED_FEATURES)


def lane_scaled(x: Real, exponent: Real) -> Real:
    """Scaled: x * 2**floor(exponent), rounded once; an instruction where it is compiled."""
    if math.isnan(x) or math.isnan(exponent):
        return math.nan
    try:
        return math.ldexp(x, math.floor(exponent))
    except OverflowError:
        return math.copysign(math.inf, x)


def lane_eighths(t: Real) -> Real:
    """Looked up: 2**(j/8), j the last three bits of t; a permutation where it is compiled."""
    return EIGHTHS[int(np.float64(t).view(np.uint64)) % 8]


def lane_exp(x: Real) -> Real:
    """Exponential, within 1.1 units in the last place; subnormal results are kept, unlike in `lane_math`."""
    c = 710.0 if x > 710.0 else x  # noqa: FURB136  # keeps nan
    c = -746.0 if c < -746.0 else c  # noqa: FURB136
    t = lane_fma(c, _LOG2_E, _ROUND_EIGHTHS)
    n = t - _ROUND_EIGHTHS
    r = lane_fma(-n, _LN2, c)
    r = lane_fma(-n, _LN2_REST, r)
    # (exp(r) - 1) / r on |r| <= log(2)/16
    q = lane_fma(0.00019842176749636047, r, 0.0013889705110294549)
    q = lane_fma(q, r, 0.00833333332480596)
    q = lane_fma(q, r, 0.041666666589919826)
    q = lane_fma(q, r, 0.16666666666666868)
    q = lane_fma(q, r, 0.500000000000018)
    q = lane_fma(q, r, 1.0)
    power = lane_eighths(t)
    return lane_scaled(lane_fma(power * r, q, power), n)


WIDE = {"lane_exp": lane_exp}
"""What goes before the functions of the same name in `lane_math`."""
