"""Rigorous passes: what they enclose, sampled in exact and high-precision arithmetic."""

from __future__ import annotations

import random
from fractions import Fraction

import mpmath
import pytest
from flint import arb
from known_onsets import LADDERS, KnownLadder
from running import system_of

from tinemark.onsets.ball_orbits import ball_loops, ball_of, fraction_of, precision
from tinemark.onsets.one_map import one_map, put_in
from tinemark.systems.formula import read_formula

STEPS = 24
BITS = 160


@pytest.mark.parametrize("known", LADDERS, ids=lambda known: known.name)
def test_box_holds_every_orbit_of_it(known: KnownLadder) -> None:
    """Orbits from random points of a box, and their derivatives by differences, lie in the carried balls."""
    system = system_of(known.system, known.values)
    loops = ball_loops(one_map(system, known.parameter))
    chance = random.Random(7)
    r = Fraction(known.onsets[2])
    x = Fraction(known.attracted)
    half = Fraction(1, 10**9)
    with precision(BITS):
        radius = ball_of(half).abs_upper()
        middle_x, middle_r = ball_of(x).mid(), ball_of(r).mid()
        box_x, box_r = arb(middle_x, radius), arb(middle_r, radius)
        one, zero = arb(1), arb(0)
        end, u, v, *_ = loops.box(
            box_x, box_r, middle_r, box_r - middle_r, one, zero, zero, zero, zero, STEPS
        )
        low, high = (fraction_of(part) for part in (end.lower(), end.upper()))
        slopes = [(float(part.lower()), float(part.upper())) for part in (u, v)]
    assert high - low < Fraction(1, 100)

    def after(start: mpmath.mpf, at: mpmath.mpf) -> mpmath.mpf:
        for _ in range(STEPS):
            start = known.formula(start, at, mpmath)
        return start

    with mpmath.workdps(50):
        nudge = mpmath.mpf(10) ** -20
        for _ in range(20):
            share_x, share_r = (Fraction(chance.randint(-100, 100), 100) for _ in range(2))
            here = mpmath.mpf(x.numerator) / x.denominator + mpmath.mpf(float(share_x)) * mpmath.mpf(
                "0.999e-9"
            )
            at = mpmath.mpf(r.numerator) / r.denominator + mpmath.mpf(float(share_r)) * mpmath.mpf("0.999e-9")
            value = after(here, at)
            assert low <= Fraction(mpmath.nstr(value, 40)) <= high
            found = (
                (after(here + nudge, at) - after(here - nudge, at)) / (2 * nudge),
                (after(here, at + nudge) - after(here, at - nudge)) / (2 * nudge),
            )
            for slope, (least, most) in zip(found, slopes, strict=True):
                assert least - 1e-9 * abs(least) <= slope <= most + 1e-9 * abs(most)


def test_point_orbit_keeps_its_digits() -> None:
    """A thousand steps on a stable cycle cost a few bits, where plain balls lose 1.8 bits a step."""
    loops = ball_loops(one_map(system_of("logistic"), "r"))
    with precision(200):
        r, x = ball_of(Fraction("3.5")), ball_of(Fraction("0.5")).mid()
        end, _ = loops.point(x, r.mid(), arb(1), 1000)
        assert end.rad() < arb(2) ** -180
        plain = x
        for _ in range(1000):
            plain = r * plain * (1 - plain)
        assert not plain.rad() < 1


def test_schwarzian_of_an_iterate() -> None:
    """The carried Schwarzian derivative is that of f^n: compared with differences in mpmath."""
    loops = ball_loops(one_map(system_of("ricker"), "r"))
    with precision(200):
        one, zero = arb(1), arb(0)
        x, r = ball_of(Fraction("0.7")).mid(), ball_of(Fraction("2.3")).mid()
        *_, schwarzian = loops.box(x, r, r, zero, one, zero, zero, zero, zero, 3)
        carried = float(schwarzian.mid())
    with mpmath.workdps(60):
        rate = mpmath.mpf("2.3")

        def third(x: mpmath.mpf) -> mpmath.mpf:
            for _ in range(3):
                x = x * mpmath.exp(rate * (1 - x))
            return x

        one_, two, three = (mpmath.diff(third, mpmath.mpf("0.7"), n) for n in (1, 2, 3))
        truth = three / one_ - mpmath.mpf(3) / 2 * (two / one_) ** 2
    assert carried == pytest.approx(float(truth), rel=1e-9)


def test_exact_values_are_put_in_exactly() -> None:
    """Fixed parameters enter as rationals, and a whole exponent becomes one."""
    expr = read_formula("r*x/(1 + x)**b + c", ["r", "x", "b", "c"])
    put = put_in(expr, {"b": Fraction(6), "c": Fraction(3, 10)})
    assert put == read_formula("r*x/(1 + x)**6 + 0.3", ["r", "x"])
