"""The branch-free functions against mpmath, and compiled against not compiled."""

from __future__ import annotations

import os
import subprocess
import sys

import mpmath
import numpy as np
import pytest

from tinemark.systems import lane_math

NAN, INF = float("nan"), float("inf")
SPECIAL = [
    0.0,
    -0.0,
    1.0,
    -1.0,
    2.0,
    -3.0,
    0.5,
    -0.5,
    INF,
    -INF,
    NAN,
    5e-324,
    1e-310,
    1e308,
    -1e308,
    709.7,
    -745.0,
]


def spread(low: float, high: float, count: int = 400, signs: bool = True) -> np.ndarray:
    rng = np.random.default_rng(7)
    values = np.exp(rng.uniform(np.log(low), np.log(high), count))
    return values * rng.choice([-1.0, 1.0], count) if signs else values


def beside(points: np.ndarray) -> np.ndarray:
    return np.concatenate([points, np.nextafter(points, INF), np.nextafter(points, -INF)])


ARGUMENTS = {
    "exp": np.concatenate([spread(1e-20, 708.0), np.linspace(-708, 709.7, 300)]),
    "log": np.concatenate(
        [spread(1e-323, 1e308, signs=False), 1 + spread(1e-16, 0.4), beside(np.array([0.5, 1, 2]))]
    ),
    "sin": np.concatenate([spread(1e-300, 1.0), spread(1.0, 1e5), beside(np.arange(1, 200) * np.pi / 2)]),
    "cos": np.concatenate([spread(1e-300, 1.0), spread(1.0, 1e5), beside(np.arange(1, 200) * np.pi / 2)]),
    "tan": np.concatenate([spread(1e-300, 1.0), spread(1.0, 1e5)]),
    "asin": np.concatenate(
        [spread(1e-300, 1.0), np.linspace(-1, 1, 301), 1 - spread(1e-16, 0.1, signs=False)]
    ),
    "acos": np.concatenate(
        [spread(1e-300, 1.0), np.linspace(-1, 1, 301), 1 - spread(1e-16, 0.1, signs=False)]
    ),
    "atan": np.concatenate([spread(1e-300, 1e300), np.linspace(-4, 4, 301)]),
    "sinh": np.concatenate([spread(1e-300, 710.4), np.linspace(-3, 3, 301)]),
    "cosh": np.concatenate([spread(1e-300, 710.4), np.linspace(-3, 3, 301)]),
    "tanh": np.concatenate([spread(1e-300, 30.0), np.linspace(-3, 3, 301)]),
    "sqrt": spread(1e-323, 1e308, signs=False),
}
UNITS = {"exp": 1.0, "log": 1.0, "tan": 3.0, "sqrt": 0.5}
# What the two-part reduction of the angle functions leaves beside their zeros, for each unit of the argument.
REDUCTION = {"sin": 1e-33, "cos": 1e-33}


@pytest.mark.parametrize("name", ARGUMENTS)
def test_error_stays_within_the_stated_units_in_the_last_place(name: str) -> None:
    function = getattr(lane_math, f"lane_{name}")
    with mpmath.workprec(160):
        exact = getattr(mpmath, name)
        for x in ARGUMENTS[name]:
            value = exact(mpmath.mpf(float(x)))
            unit = float(np.spacing(abs(float(value))))
            allowed = UNITS.get(name, 2.0) * unit + REDUCTION.get(name, 0.0) * abs(float(x))
            assert abs(mpmath.mpf(float(function(x))) - value) <= allowed, x


@pytest.mark.parametrize("name", ["sin", "cos"])
def test_huge_angles_stay_within_their_absolute_error(name: str) -> None:
    function = getattr(lane_math, f"lane_{name}")
    with mpmath.workprec(200):
        for x in spread(1e5, 2.0**45):
            value = getattr(mpmath, name)(mpmath.mpf(float(x)))
            assert abs(mpmath.mpf(float(function(x))) - value) < 2.3e-16 + 1e-33 * abs(x), x


def test_angles_beyond_what_doubles_resolve_are_undefined() -> None:
    for x in (2.0**45, 1e17, 1e300, INF, -INF, NAN):
        for function in (lane_math.lane_sin, lane_math.lane_cos, lane_math.lane_tan):
            assert np.isnan(function(x))
            assert np.isnan(function(-x))


def test_powers_stay_within_two_units() -> None:
    rng = np.random.default_rng(3)
    pairs = [
        *zip(spread(1e-300, 1e300, signs=False), rng.uniform(-1, 1, 400), strict=True),
        *zip(rng.uniform(0.5, 2, 400), rng.uniform(-700, 700, 400), strict=True),
        *zip(1 + spread(1e-12, 0.3), spread(1.0, 1e12), strict=True),
        *zip(-rng.uniform(0.1, 9, 50), rng.integers(-30, 30, 50).astype(float), strict=True),
    ]
    with mpmath.workprec(200):
        for x, y in pairs:
            value = mpmath.power(mpmath.mpf(float(x)), int(y) if x < 0 else mpmath.mpf(float(y)))
            if 1e-307 < abs(value) < 1e308:
                error = abs(mpmath.mpf(float(lane_math.lane_pow(x, y))) - value)
                assert error <= 2 * np.spacing(abs(float(value))), (x, y)


LIBRARY = {
    "exp": np.exp,
    "log": np.log,
    "sinh": np.sinh,
    "cosh": np.cosh,
    "tanh": np.tanh,
    "atan": np.arctan,
    "asin": np.arcsin,
    "acos": np.arccos,
    "sqrt": np.sqrt,
    "floor": np.floor,
    "abs": np.abs,
}


def same(got: float, wanted: float, absolute: float = 0.0) -> bool:
    if np.isnan(wanted):
        return bool(np.isnan(got))
    return bool(got == wanted or abs(got - wanted) <= 4e-16 * abs(wanted) + absolute)


@pytest.mark.parametrize("name", LIBRARY)
def test_special_arguments_behave_as_in_the_library(name: str) -> None:
    with np.errstate(all="ignore"):
        for x in SPECIAL:
            # exp gives 0 below the smallest normal number, as its page says.
            slack = 2.3e-308 if name == "exp" else 0.0
            assert same(getattr(lane_math, f"lane_{name}")(x), LIBRARY[name](x), slack), x


@pytest.mark.parametrize(
    ("name", "library"), [("pow", np.power), ("atan2", np.arctan2), ("min", np.minimum), ("max", np.maximum)]
)
def test_special_pairs_behave_as_in_the_library(name: str, library: np.ufunc) -> None:
    with np.errstate(all="ignore"):
        for x in SPECIAL:
            for y in SPECIAL:
                wanted = library(x, y)
                if name == "pow" and x == -INF and np.isfinite(y) and y != np.floor(y):
                    wanted = NAN  # as for every other negative number; C makes an exception here
                assert same(getattr(lane_math, f"lane_{name}")(x, y), wanted), (x, y)


_PRINT_ALL = """
import numpy as np
from tinemark.systems import lane_math as m
rng = np.random.default_rng(5)
names = "exp log sin cos tan asin acos atan sinh cosh tanh sqrt floor"
for name in names.split():
    for x in rng.uniform(0.01, 1.0, 8):
        for scale in (1.0, -1.0, 30.0):
            with np.errstate(all="ignore"):
                print(name, float(getattr(m, "lane_" + name)(np.float64(x * scale))).hex())
for x, y in rng.uniform(0.1, 5.0, (12, 2)):
    print(float(m.lane_pow(x, y)).hex(), float(m.lane_atan2(x, -y)).hex())
"""


def test_compiled_and_interpreted_agree_to_the_last_bit() -> None:
    texts = []
    for switch in ("0", "1"):
        environment = os.environ | {"NUMBA_DISABLE_JIT": switch}
        run = subprocess.run(
            [sys.executable, "-c", _PRINT_ALL], env=environment, check=True, capture_output=True, text=True
        )
        texts.append(run.stdout)
    assert texts[0] == texts[1]
    assert texts[0].count("\n") > 300
