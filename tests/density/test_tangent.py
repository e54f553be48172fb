"""Derivatives along a direction against differences of high-order, and against exact rules."""

from __future__ import annotations

import numpy as np
import pytest

from tinemark.density.tangent import tangent
from tinemark.systems.expression import ONE, ZERO, Name
from tinemark.systems.formula import read_formula
from tinemark.systems.plain import plain_function

FORMULAS = [
    "3*x - 2*y + 5",
    "r*x*(1 - x)",
    "x*y/(1 + x**2)",
    "-x**3 + (x*y)**5",
    "(1 + x)**r",
    "x**y",
    "2**x",
    "sqrt(1 + x*x) - sqrt(y)",
    "x**-2 + y**0.3",
    "sin(x*y) + cos(r*x)",
    "tan(x/3)",
    "asin(x/4) + acos(y/5)",
    "atan(x*y) + atan2(y, x + 2)",
    "sinh(x) - cosh(y) + tanh(x*y)",
    "exp(r*(1 - x))*x",
    "log(x + y)/x",
    "abs(x - 5) + abs(y)",
    "min(x, y)*max(x*y, 2)",
    "floor(10*x)*y",
    "x*x if x < y else y*y*y",
    "sin(pi*x)",
]


@pytest.mark.parametrize("text", FORMULAS)
def test_tangent_is_the_slope_along_the_direction(text: str) -> None:
    names = ("x", "y", "r")
    formula = read_formula(text, names)
    value = plain_function([formula], names)
    rate = plain_function([tangent(formula, {"x": Name("u"), "y": Name("v")})], (*names, "u", "v"))
    x, y, r = np.array([0.37, 1.21]), np.array([1.9, 0.83]), 2.7
    u, v = 0.6, -0.8

    def along(h: float) -> np.ndarray:
        return np.asarray(value([x + h * u, y + h * v, r])[0], float)

    # Central difference of sixth order: error about h**6, rounding about 1e-16/h.
    h = 2e-3
    slope = (
        45 * (along(h) - along(-h)) - 9 * (along(2 * h) - along(-2 * h)) + along(3 * h) - along(-3 * h)
    ) / (60 * h)
    got = np.broadcast_to(np.asarray(rate([x, y, r, u, v])[0], float), slope.shape)
    assert got == pytest.approx(slope, rel=1e-9, abs=1e-9)


def test_what_does_not_change_has_no_tangent() -> None:
    assert tangent(read_formula("r*sin(r) + 2**r", ("x", "r")), {"x": ONE}) == ZERO
    assert tangent(read_formula("floor(x)", ("x",)), {"x": ONE}) == ZERO
