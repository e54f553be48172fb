"""Plain evaluation against Python's own arithmetic."""

from __future__ import annotations

import math

import numpy as np
import pytest

from tinemark.systems.formula import read_formula
from tinemark.systems.plain import plain_function

NAMES = ("x", "r")
CASES = {
    "r*x*(1 - x)": lambda x, r: r * x * (1 - x),
    "x**3 - x/r": lambda x, r: x**3 - x / r,
    "-x + pi": lambda x, r: -x + math.pi,
    "sin(x) + cos(r) + tan(x)": lambda x, r: math.sin(x) + math.cos(r) + math.tan(x),
    "asin(x) + acos(x) + atan(r)": lambda x, r: math.asin(x) + math.acos(x) + math.atan(r),
    "atan2(x, r)": lambda x, r: math.atan2(x, r),
    "sinh(x) + cosh(x)*tanh(r)": lambda x, r: math.sinh(x) + math.cosh(x) * math.tanh(r),
    "exp(-x)*log(r)": lambda x, r: math.exp(-x) * math.log(r),
    "sqrt(x) + x**0.25": lambda x, r: math.sqrt(x) + x**0.25,
    "abs(x - r) + min(x, r)*max(x, 0.5)": lambda x, r: abs(x - r) + min(x, r) * max(x, 0.5),
    "floor(10*x)": lambda x, r: math.floor(10 * x),
    "x if x < 0.5 else r": lambda x, r: x if x < 0.5 else r,
    "x if x >= 0.5 else r": lambda x, r: x if x >= 0.5 else r,
    "0.1 + 0.2": lambda x, r: 0.1 + 0.2,
}


@pytest.mark.parametrize("text", CASES)
def test_numbers_and_arrays(text: str) -> None:
    function = plain_function([read_formula(text, NAMES)], NAMES)
    points = [(0.1, 3.7), (0.5, 2.0), (0.93, 0.25)]
    expected = [CASES[text](x, r) for x, r in points]
    assert [float(function(point)[0]) for point in points] == pytest.approx(expected, rel=1e-14)
    arrays = np.array(points).T
    assert np.broadcast_to(function([arrays[0], arrays[1]])[0], 3) == pytest.approx(expected, rel=1e-14)


def test_undefined_is_nan_and_overflow_is_infinite() -> None:
    function = plain_function(
        [read_formula(text, NAMES) for text in ("log(x)", "1/(x + 1)", "exp(r)")], NAMES
    )
    log, quotient, power = function((-1.0, 1000.0))
    assert math.isnan(log)
    assert math.isinf(quotient)
    assert math.isinf(power)


def test_several_formulas_share_their_parts() -> None:
    shared = read_formula("exp(x)", NAMES)
    assert plain_function([shared, shared], NAMES)((0.0, 1.0)) == (1.0, 1.0)
