"""Angles in half turns against exact values, however large, and at the ends of the doubles."""

from __future__ import annotations

import mpmath
import numpy as np
import pytest

from tinemark.systems import lane_turns

NAN, INF = float("nan"), float("inf")
RNG = np.random.default_rng(8)
ARGUMENTS = np.concatenate(
    [
        RNG.uniform(-2, 2, 600),
        RNG.uniform(-1, 1, 200) * 10.0 ** RNG.uniform(-300, 0, 200),
        RNG.uniform(-1, 1, 300) * 2.0 ** RNG.uniform(0, 52, 300),
        np.concatenate([np.nextafter(np.arange(-8, 9) / 2, sign * INF) for sign in (-1, 1)]),
    ]
)
UNITS = {"sinpi": 2.0, "cospi": 2.0, "tanpi": 3.0}


def exact_turn(name: str, u: float) -> mpmath.mpf:
    if name == "tanpi":
        return mpmath.sinpi(u) / mpmath.cospi(u)
    return getattr(mpmath, name)(mpmath.mpf(u))


@pytest.mark.parametrize("name", UNITS)
def test_error_stays_within_the_stated_units(name: str) -> None:
    function = getattr(lane_turns, f"lane_{name}")
    with mpmath.workprec(200):
        for u in map(float, ARGUMENTS):
            if name == "tanpi" and (2 * u) % 2 == 1:
                continue  # a pole
            exact = exact_turn(name, u)
            unit = float(np.spacing(abs(float(exact))))
            assert abs(mpmath.mpf(float(function(u))) - exact) <= UNITS[name] * unit, u


def test_whole_and_half_turns_are_exact_at_any_size() -> None:
    sizes = [0.0, 1.0, 3.0, 1e6, 2.0**45, 2.0**51, 2.0**52 - 1, 2.0**52, 2.0**52 + 1, 2.0**53 - 1, 2.0**53]
    sizes += [2.0**52 + 2, 2.0**53 + 2, 2.0**60 + 256, 3.0 * 2.0**80, 1.7e308]
    for whole in (*sizes, *(-size for size in sizes)):
        assert lane_turns.lane_sinpi(whole) == 0.0
        assert lane_turns.lane_cospi(whole) == (-1.0 if whole % 2 else 1.0)
    for whole in (0.0, 1.0, 7.0, 2.0**51 - 1, 2.0**51, 2.0**51 + 5, 2.0**52 - 1):
        assert lane_turns.lane_cospi(whole + 0.5) == 0.0
        assert lane_turns.lane_sinpi(whole + 0.5) == (-1.0 if whole % 2 else 1.0)
        assert lane_turns.lane_sinpi(-whole - 0.5) == (1.0 if whole % 2 else -1.0)


def test_what_is_no_angle_gives_none() -> None:
    for u in (INF, -INF, NAN):
        for name in UNITS:
            with np.errstate(all="ignore"):
                assert np.isnan(getattr(lane_turns, f"lane_{name}")(np.float64(u)))
