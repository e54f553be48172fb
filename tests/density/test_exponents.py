"""Lyapunov exponents and periods against exact and published values (check_values 4.4, 4.5, 5, 8)."""

from __future__ import annotations

import math

import numpy as np
import pytest
from naive_density import around, drawn, map_of, picture, view

from tinemark.density.kernels import BUFFER
from tinemark.density.periods import TRACE_STEPS, find_periods
from tinemark.density.request import SweepRule


def test_logistic_at_four_has_exponent_log_two() -> None:
    # Ulam and von Neumann 1947 (attribution from memory): exactly ln 2.
    field = drawn(picture("logistic", around("3.9999999999"), columns=64), 20000)
    assert field.lyapunov.mean() == pytest.approx(math.log(2), abs=3e-3)
    assert (field.period == 0).all()


def test_tent_has_the_logarithm_of_its_slope_everywhere() -> None:
    # Exactly ln mu (standard).
    request = picture("tent", view("1.05", "1.95"), columns=40)
    field = drawn(request, 1024)
    slopes = [1.05 + 0.9 * (2 * j + 1) / 80 for j in range(40)]
    assert field.lyapunov == pytest.approx(np.log(slopes), abs=1e-12)


def test_logistic_cycles_have_their_exact_exponents() -> None:
    # Fixed point 2 - r, two-cycle 4 + 2r - r**2 (exact).
    one = drawn(picture("logistic", view("2.2", "2.8"), columns=30), 1024)
    r = np.array([2.2 + 0.6 * (2 * j + 1) / 60 for j in range(30)])
    assert one.lyapunov == pytest.approx(np.log(abs(2 - r)), abs=1e-9)
    two = drawn(picture("logistic", view("3.1", "3.4"), columns=30), 1024)
    r = np.array([3.1 + 0.3 * (2 * j + 1) / 60 for j in range(30)])
    assert two.lyapunov == pytest.approx(0.5 * np.log(abs(4 + 2 * r - r**2)), abs=1e-9)


def test_superstable_cycle_has_exponent_minus_infinity() -> None:
    # r = 2: the fixed point 1/2 is the critical point, reached exactly.
    field = drawn(picture("logistic", around("2", "1e-30"), columns=1), 512)
    assert field.lyapunov[0] == -math.inf


def test_published_exponents_of_chaotic_columns() -> None:
    # check_values 4.5, recomputed there over 1e8 steps: 3.7: 0.35499(2), 3.9: 0.49605(4).
    for r, exponent in (("3.7", 0.35499), ("3.9", 0.49605)):
        field = drawn(picture("logistic", around(r), columns=64), 16000)
        assert field.lyapunov.mean() == pytest.approx(exponent, abs=4e-3)


def test_henon_has_its_published_exponent() -> None:
    # a = 1.4, b = 0.3: 0.41924(3) (check_values section 5; Sprott 2003 gives 0.41922, from memory).
    field = drawn(picture("henon", around("1.4"), columns=64), 16000)
    assert field.lyapunov.mean() == pytest.approx(0.41924, abs=4e-3)


WINDOWS = [
    # period, start, superstable, first flip: check_values section 4.4, recomputed to 28 digits.
    (3, "3.8284271247461900976", "3.8318740552833155684", "3.8414990075435078463"),
    (4, "3.9601018826899520122", "3.9602701272211526016", "3.9607686524066452561"),
    (5, "3.7381723752659623694", "3.7389149129706849931", "3.7411207566324402062"),
    (5, "3.9055718701724997884", "3.9057064698312903548", "3.9061074281398979401"),
    (5, "3.9902573074133835688", "3.9902670469737015182", "3.9902961855776536673"),
    (6, "3.6265531616949737259", "3.6275575295155232034", "3.6303887000124039397"),
    (6, "3.9375164189830306590", "3.9375364447545511046", "3.9375964666863451758"),
    (6, "3.9777604409369724410", "3.9777664222654729140", "3.9777843507370021203"),
]


@pytest.mark.parametrize(("period", "start", "superstable", "flip"), WINDOWS)
def test_periods_in_known_windows(period: int, start: str, superstable: str, flip: str) -> None:
    width = float(flip) - float(start)
    inside = drawn(picture("logistic", around(superstable, "1e-9"), columns=2, transient=4000), 1024)
    assert inside.period.tolist() == [period, period]
    after = drawn(
        picture("logistic", around(f"{float(flip) + 0.05 * width:.16f}"), columns=2, transient=4000), 1024
    )
    assert after.period.tolist() == [2 * period, 2 * period]


def test_periods_double_along_the_cascade() -> None:
    # Between the onsets of check_values section 4.1.
    for r, period in (
        ("2.9", 1),
        ("3.2", 2),
        ("3.5", 4),
        ("3.555", 8),
        ("3.566", 16),
        ("3.5692", 32),
        ("3.5697", 64),
    ):
        field = drawn(picture("logistic", around(r), columns=2, transient=6000), 1024)
        assert field.period.tolist() == [period, period], r


@pytest.mark.parametrize("reach", ["3e-4", "1e-4", "3e-5"])
def test_columns_beside_a_split_are_told_apart_long_before_they_settle(reach: str) -> None:
    # The multiplier differs from -1 by `reach`: settling to rounding would take 24/reach steps or more.
    for split, period in (("3", 1), ("3.4494897427831780982", 2)):
        below = drawn(picture("logistic", around(f"{float(split) - float(reach):.17g}"), columns=2), 10000)
        above = drawn(picture("logistic", around(f"{float(split) + float(reach):.17g}"), columns=2), 10000)
        assert set(below.period.tolist()) <= {0, period}
        assert set(above.period.tolist()) <= {0, 2 * period}
        if float(reach) >= 1e-4:
            assert below.period.any()
            assert above.period.any()


def test_wandering_orbits_have_no_period() -> None:
    for request in (
        picture("logistic", view("3.9", "3.9000001"), columns=200),
        picture("tent", view("1.3", "1.4"), columns=200),
        picture("delayed_logistic", view("2.02", "2.05", "0", "2"), columns=60, transient=3000),
    ):
        assert (drawn(request, 4096).period == 0).mean() > 0.95


def test_an_orbit_held_on_an_unstable_cycle_is_not_called_periodic() -> None:
    # x = 0 is a fixed point for every r, unstable for r > 1: the orbit stays there by exact arithmetic alone.
    field = drawn(picture(map_of("r*x*(1 - x)", start="0"), view("2", "3")), 512)
    assert (field.period == 0).all()
    assert field.lyapunov == pytest.approx(np.log([2 + (2 * j + 1) / 192 for j in range(96)]), abs=1e-12)


def test_period_finder_against_the_slow_version() -> None:
    rng = np.random.default_rng(11)
    noted = np.empty((80, 2, TRACE_STEPS))
    wanted = []
    for c in range(80):
        p = int(rng.integers(1, 65))
        cycle = rng.uniform(-5, 5, (2, p))
        noted[c] = np.tile(cycle, TRACE_STEPS // p + 1)[:, :TRACE_STEPS] * (
            1 + 1e-15 * rng.normal(size=TRACE_STEPS)
        )
        wanted.append(slow_period(noted[c, 0].tolist()))
    found = np.zeros(80, np.int32)
    find_periods(noted, found)
    assert found.tolist() == wanted
    noted[:, 0, 5] = np.nan
    find_periods(noted, found)
    assert not found.any()


def slow_period(values: list[float]) -> int:
    for p in range(1, 65):
        if all(abs(a - b) < 1e-10 for a, b in zip(values, values[p:], strict=False)):
            return p
    return 0


def test_several_starts_tell_the_least_stable_exponent() -> None:
    # Odd cubic: two mirrored attractors with the same exponent; a start at 0 stays on the unstable origin.
    system = map_of("r*x*(1 - x**2)", start="0", extra='range = ["-1", "1"]')
    request = picture(system, view("1.2", "1.9", "-1", "1"), rule=SweepRule.SEVERAL, starts=6)
    field = drawn(request, 8 * BUFFER)
    r = np.array([1.2 + 0.7 * (2 * j + 1) / 192 for j in range(96)])
    assert field.lyapunov == pytest.approx(np.log(r), abs=1e-12)
    assert not field.period.any()
    # Both branches are drawn: fixed points at plus and minus sqrt(1 - 1/r).
    assert field.counts[:50].any()
    assert field.counts[51:].any()
