"""Taylor polynomials of formulas and of solutions, against closed forms and mpmath's own series."""

from __future__ import annotations

import flint
import mpmath
import pytest
from flint import arb

from tinemark.equations.series import series_function, working
from tinemark.equations.taylor_arc import LOW_BITS, Arc, LowArc, arc_from
from tinemark.equations.taylor_rates import Rates, rate_functions
from tinemark.systems.expression import Expr
from tinemark.systems.formula import read_formula

BITS = 160
ORDER = 24


def read(*texts: str, names: tuple[str, ...]) -> tuple[Expr, ...]:
    """Formulas in these names."""
    return tuple(read_formula(text, names, key="rate") for text in texts)


def arc_of(
    texts: tuple[str, ...], start: tuple[str, ...], r: str = "1", clock: str = "0", order: int = ORDER
) -> Arc:
    """An arc of the system with these rates in x, y, z, r and t."""
    states = ("x", "y", "z")[: len(texts)]
    rates = Rates(states, "r", read(*texts, names=(*states, "r", "t")), None)
    with working(BITS):
        begun = [arb(value).mid() for value in start]
        parameter, time = arb(r).mid(), arb(clock).mid()
    return arc_from(rate_functions(rates), begun, parameter, time, order, BITS, low=order)


def holds(ball: arb, value: mpmath.mpf) -> bool:
    """Whether a ball holds a number known to 60 digits, and is itself narrow."""
    with working(260):
        apart = arb(mpmath.nstr(value, 62)) - ball
        return bool(apart.contains(0) or abs(apart).abs_upper() < arb(10) ** -38)


@pytest.mark.parametrize(
    ("text", "function"),
    [
        ("sin(x)", mpmath.sin),
        ("cos(x)", mpmath.cos),
        ("tan(x)", mpmath.tan),
        ("asin(x/4)", lambda x: mpmath.asin(x / 4)),
        ("acos(x/4)", lambda x: mpmath.acos(x / 4)),
        ("atan(x)", mpmath.atan),
        ("atan2(x, x**2 - 2)", lambda x: mpmath.atan2(x, x**2 - 2)),
        ("atan2(x, x - 3)", lambda x: mpmath.atan2(x, x - 3)),
        ("atan2(-x, x - 3)", lambda x: mpmath.atan2(-x, x - 3)),
        ("sinh(x)", mpmath.sinh),
        ("cosh(x)", mpmath.cosh),
        ("tanh(x)", mpmath.tanh),
        ("tanh(-3*x)", lambda x: mpmath.tanh(-3 * x)),
        ("exp(-x)", lambda x: mpmath.exp(-x)),
        ("log(x)", mpmath.log),
        ("sqrt(x)", mpmath.sqrt),
        ("x**5", lambda x: x**5),
        ("x**-2", lambda x: x**-2),
        ("x**0.75", lambda x: x ** mpmath.mpf("0.75")),
        ("x**x", lambda x: x**x),
        ("abs(x - 3)", lambda x: 3 - x),
        ("max(x, 1) + min(x, 1) + floor(x/2)", lambda x: x + 1),
        ("x*x if x > 1 else x", lambda x: x * x),
        ("1/(1 + x**2) - x/3", lambda x: 1 / (1 + x**2) - x / 3),
    ],
)
def test_every_function_has_its_series(text: str, function) -> None:  # type: ignore[no-untyped-def]
    function_of = series_function(read(text, names=("x",)), ("x",))
    with working(BITS, 9):
        start = arb(5) / 4
        (series,) = function_of(flint.arb_series([start, 1], 9))
        found = [series[k] for k in range(9)]
    with mpmath.workdps(80):
        # By differences in 80 digits: about 60 are left of the eighth derivative's.
        expected = mpmath.taylor(function, mpmath.mpf(5) / 4, 8)
        for ball, value in zip(found, expected, strict=True):
            with working(260):
                assert abs(ball - arb(mpmath.nstr(value, 40))) < arb(10) ** -25


def test_a_pole_is_met_term_by_term() -> None:
    # x' = x**2 from 3: x = 3 / (1 - 3 t), with the coefficients 3**(k + 1); its derivative in the start is
    # 1 / (1 - 3 t)**2.
    arc = arc_of(("x**2",), ("3",))
    for k in range(ORDER):
        assert arc.x[0][k].contains(3 ** (k + 1)), k
        assert arc.turn[0][0][k].contains((k + 1) * 3**k), k
        assert arc.x[0][k].rad() < arb(2) ** (-BITS + 40) * 3**k


def test_a_rotation_and_its_inverse() -> None:
    # x' = -r y, y' = r x at r = 2.
    arc = arc_of(("-r*y", "r*x"), ("1", "0"), r="2")
    with mpmath.workdps(60):
        for k, value in enumerate(mpmath.taylor(lambda t: mpmath.cos(2 * t), 0, ORDER - 1)):
            assert holds(arc.x[0][k], value)
            assert holds(arc.turn[0][0][k], value) and holds(arc.back[0][0][k], value)
        for k, value in enumerate(mpmath.taylor(lambda t: mpmath.sin(2 * t), 0, ORDER - 1)):
            assert holds(arc.turn[1][0][k], value) and holds(arc.back[0][1][k], value)


def test_a_driven_solution_and_its_variations_follow_the_closed_form() -> None:
    # x' = r x + t from x0: x = (x0 + 1/r**2 + clock/r) exp(r t) - (t + clock)/r - 1/r**2.
    x0, r, clock = "0.75", "0.5", "0.25"
    arc = arc_of(("r*x + t",), (x0,), r=r, clock=clock)
    with mpmath.workdps(60):

        def solution(t, p=None):  # type: ignore[no-untyped-def]
            c, begun, p = mpmath.mpf(clock), mpmath.mpf(x0), mpmath.mpf(r) if p is None else p
            return (begun + 1 / p**2 + c / p) * mpmath.exp(p * t) - (t + c) / p - 1 / p**2

        for k, value in enumerate(mpmath.taylor(solution, 0, 12)):
            assert holds(arc.x[0][k], value)
        with working(LOW_BITS, 13):
            slope = LowArc(arc, 13).slope()[0]
        in_r = mpmath.taylor(lambda t: mpmath.diff(lambda p: solution(t, p=p), mpmath.mpf(r)), 0, 8)
        for k, value in enumerate(in_r):
            assert abs(float(slope[k]) - float(value)) < 1e-14


def test_second_and_third_variations_of_a_bernoulli_equation() -> None:
    # x' = x - x**3 from x0 is x = x0 e^t / sqrt(1 + x0**2 (e^2t - 1)): its derivatives in x0, term by term.
    arc = arc_of(("x - x**3",), ("0.5",))
    with working(LOW_BITS, 12):
        low = LowArc(arc, 12)
        bend = low.bent([arb(1)], low.slope())
        two, three = low.curved([arb(1)], [arb(0)])
    with mpmath.workdps(50):

        def solution(t, start):  # type: ignore[no-untyped-def]
            return start * mpmath.exp(t) / mpmath.sqrt(1 + start**2 * (mpmath.exp(2 * t) - 1))

        def variation(order: int, terms: int):  # type: ignore[no-untyped-def]
            return mpmath.taylor(
                lambda t: mpmath.diff(lambda s: solution(t, s), mpmath.mpf(1) / 2, order), 0, terms
            )

        for k, value in enumerate(variation(2, 5)):
            assert abs(float(bend[0][0][k]) - float(value)) < 1e-10
            assert abs(float(two[0][k]) - float(value) / 2) < 1e-10
        for k, value in enumerate(variation(3, 4)):
            assert abs(float(three[0][k]) - float(value) / 6) < 1e-8


def test_doubling_gives_what_a_longer_series_begins_with() -> None:
    texts = ("-y - z", "x + 0.2*y", "0.2 + z*(x - r)")
    short, long = (arc_of(texts, ("1", "-2", "0.5"), r="2.5", order=order) for order in (7, 33))
    for row, more in zip(short.x, long.x, strict=True):
        assert len(row) == 7 and len(more) == 33
        assert all(a.overlaps(b) for a, b in zip(row, more, strict=False))


def test_a_solution_agrees_with_mpmath() -> None:
    texts = ("y", "-0.3*y + x - x**3 + r*cos(1.2*t)")
    arc = arc_of(texts, ("0.75", "-0.5"), r="0.25", order=40)
    with mpmath.workdps(40):
        solution = mpmath.odefun(
            lambda t, u: [
                u[1],
                -mpmath.mpf(3) / 10 * u[1] + u[0] - u[0] ** 3 + mpmath.cos(mpmath.mpf(6) / 5 * t) / 4,
            ],
            0,
            [mpmath.mpf("0.75"), mpmath.mpf("-0.5")],
        )
        expected = solution(mpmath.mpf(1) / 16)
    with working(BITS):
        for row, value in zip(arc.x, expected, strict=True):
            found = flint.arb_poly(row)(arb(1) / 16)
            assert abs(found - arb(mpmath.nstr(value, 38))) < arb(10) ** -34


def test_a_start_outside_a_domain_is_refused() -> None:
    with pytest.raises(ArithmeticError):
        arc_of(("log(x)",), ("-1",))
    with pytest.raises(ArithmeticError):
        arc_of(("1/x",), ("0",))


def test_exact_numbers_enter_exactly() -> None:
    # 0.1 is 1/10 and not the double next to it.
    arc = arc_of(("0.1*x",), ("1",))
    with working(BITS):
        assert arc.x[0][1].contains(arb(flint.fmpq(1, 10)))
        assert not arc.x[0][1].contains(arb(0.1))
