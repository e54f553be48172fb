"""Taylor coefficients in time, enclosures of flows with their derivatives, and passages of a section."""

from __future__ import annotations

from fractions import Fraction

import mpmath
import pytest

from tinemark.verify import flow_pieces
from tinemark.verify import intervals as iv
from tinemark.verify import many_cycles as mc
from tinemark.verify.claims import NotCheckable, Undecided
from tinemark.verify.courses import Course, plan_of
from tinemark.verify.fixed import Jets
from tinemark.verify.flow_map import Equations, FlowMap
from tinemark.verify.flow_onsets import see_repeats
from tinemark.verify.flow_passages import ABOVE, BELOW, FALLS, RISES, see_once, see_passages
from tinemark.verify.flow_pieces import with_pieces
from tinemark.verify.formula import parse
from tinemark.verify.intervals import Interval
from tinemark.verify.series import SLOPE, VALUE
from tinemark.verify.system import Plain, Sample, programs, sampling
from tinemark.verify.watching import Watch

BITS = 75


def flow(rates: dict[str, str], every: str = "", crosses: str = "", direction: str = "rising") -> FlowMap:
    """A system of equations in the parameter r, without steps."""
    sample = Sample("driven" if every else "flow", every, crosses, direction)
    plain = Plain(tuple(rates), (("r", Fraction(0)),), tuple(rates.values()), sample)
    of_rates, of_sample = programs(plain, "r"), sampling(plain, "r")
    whole = of_rates if every else (*of_rates, of_sample)
    equations = Equations(plain.states, "r", plan_of(whole), plan_of((of_sample,)) if every else None)
    return FlowMap((), plain.states, "r", Watch(), equations)


def point(*values: str) -> list[Interval]:
    return [iv.of_fraction(Fraction(value), BITS) for value in values]


def holds(x: Interval, value: object, width: float = 1e-17) -> bool:
    low, high = (mpmath.mpf(end) for end in x)
    return bool(low <= value <= high and high - low < width)


@pytest.mark.parametrize(
    "formula",
    [
        "exp(sin(t))/cosh(t)",
        "log(1 + t)*sqrt(2 + t*t)",
        "tanh(t) - atan(t)*asin(t/2)",
        "tan(t/3)**3 + (1 + t)**(-2)",
        "(1 + t)**0.3*acos(t/4) + sinh(cos(t))",
        "pi*t/(1 + t)",
    ],
)
def test_coefficients_in_time_are_those_of_numerical_differentiation(formula: str) -> None:
    # mpmath differentiates its own functions numerically at many digits.
    program = parse(formula, {"t"}, {})
    jets = Jets(VALUE, 120, Watch())
    base = Fraction(1, 5)
    course = Course(plan_of((program,)), jets, {"t": [jets.constant(base), jets.one]})
    found = [course.advance()[0].get(0, (0, 0)) for _ in range(8)]
    names = {name: getattr(mpmath, name) for name in ("exp", "sin", "cosh", "log", "sqrt", "tanh", "atan")}
    names |= {name: getattr(mpmath, name) for name in ("asin", "tan", "acos", "sinh", "cos", "pi")}
    with mpmath.workdps(60):
        text = formula.replace("0.3", "(mpf(3)/10)")
        expected = mpmath.taylor(
            lambda t: eval(text, {"mpf": mpmath.mpf, "t": t, **names}), mpmath.mpf(1) / 5, 7
        )
        for side, value in zip(found, expected, strict=True):
            low, high = (mpmath.mpf(end) / mpmath.mpf(2) ** 120 for end in side)
            assert low - mpmath.mpf(10) ** -25 <= value <= high + mpmath.mpf(10) ** -25
            assert high - low < mpmath.mpf(10) ** -28


def test_products_enclose_every_sign() -> None:
    jets = Jets(SLOPE, 8, Watch())
    sides = [(-3, -1), (-2, 0), (-2, 5), (0, 3), (2, 4)]
    for a in sides:
        for b in sides:
            low, high = jets.products([(3, {0: a}, {0: b})])[0]
            exact = [Fraction(3 * x * y, 256) for x in a for y in b]
            assert low <= min(exact) < low + 1 and high - 1 < max(exact) <= high


def test_a_strobe_map_with_its_derivatives_is_that_of_the_solution() -> None:
    # x' = r x has the strobe map x exp(r T); with T = 2 r it is x exp(2 r^2).
    bare = flow({"x": "r*x"}, every="2*r")
    start, r = point("0.75"), point("0.5")[0]
    made = with_pieces(bare, start, r, 2, BITS)
    for period in (1, 2):
        end = mc.carried(made, start, r, period, BITS, second=True)
        with mpmath.workdps(50):
            grown = mpmath.exp(mpmath.mpf(period) / 2)
            assert holds(end.x[0], mpmath.mpf("0.75") * grown)
            assert holds(end.first[0][0], grown)
            assert holds(end.first[1][0], mpmath.mpf("0.75") * 2 * period * grown)
            assert holds(end.second[0, 1][0], 2 * period * grown)
            assert end.second[0, 0][0] == iv.ZERO or holds(end.second[0, 0][0], 0)


def test_a_return_to_a_section_with_its_derivatives_is_that_of_the_solution() -> None:
    # Turning at the rate 1 + r while the radius s = x^2 + y^2 obeys s' = 2 s (1 - s): in one turn of length T
    # = 2 pi/(1 + r) it goes to s/(s + (1 - s) exp(-2 T)). The section is left and met at y = 0, x > 0.
    bare = flow({"x": "x*(1 - x*x - y*y) - (1 + r)*y", "y": "y*(1 - x*x - y*y) + (1 + r)*x"}, crosses="y")
    start, r = point("1.25", "0"), point("0.5")[0]
    made = with_pieces(bare, start, r, 1, BITS)
    see_passages(made, start, r, BITS)
    end = mc.carried(made, start, r, 1, BITS, second=True)

    def after(x: object, q: object) -> object:
        s = x * x  # type: ignore[operator]
        return mpmath.sqrt(s / (s + (1 - s) * mpmath.exp(-4 * mpmath.pi / (1 + q))))  # type: ignore[operator]

    with mpmath.workdps(50):
        at = (mpmath.mpf("1.25"), mpmath.mpf("0.5"))
        assert holds(end.x[0], after(*at)) and holds(end.x[1], 0)
        assert holds(end.first[0][0], mpmath.diff(after, at, (1, 0)), 1e-15)
        assert holds(end.first[2][0], mpmath.diff(after, at, (0, 1)), 1e-15)
        assert holds(end.second[0, 0][0], mpmath.diff(after, at, (2, 0)), 1e-15)
        assert holds(end.second[0, 2][0], mpmath.diff(after, at, (1, 1)), 1e-15)
        for state in range(3):
            assert holds(end.first[state][1], 0)


def test_a_box_is_carried_to_where_its_points_go() -> None:
    bare = flow({"x": "r - x*x"}, every="1")
    start, r = point("0.1"), point("0.25")[0]
    made = with_pieces(bare, start, r, 1, BITS)
    wide = [(iv.of_fraction(Fraction("0.0999"), BITS)[0], iv.of_fraction(Fraction("0.1001"), BITS)[1])]
    low, high = iv.ends(mc.carried(made, wide, r, 1, BITS).x[0])
    for value in ("0.0999", "0.1", "0.1001"):
        # x' = 1/4 - x^2 with x = tanh(t/2 + c)/2.
        with mpmath.workdps(40):
            x = mpmath.mpf(value)
            there = mpmath.tanh(mpmath.mpf(1) / 2 + mpmath.atanh(2 * x)) / 2
            assert mpmath.mpf(low.numerator) / low.denominator <= there
            assert there <= mpmath.mpf(high.numerator) / high.denominator
    assert high - low < Fraction(3, 10000)


def test_an_orbit_that_escapes_is_undecided() -> None:
    # x' = x^2 from 1 is infinite at time 1.
    bare = flow({"x": "x*x"}, every="3")
    with pytest.raises(Undecided):
        with_pieces(bare, point("1"), point("0")[0], 1, BITS)


def test_an_orbit_that_does_not_come_back_is_given_up(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(flow_pieces, "MOST_PIECES", 20)
    bare = flow({"x": "1", "y": "-y"}, crosses="x")
    with pytest.raises(NotCheckable, match="20 steps"):
        with_pieces(bare, point("0", "1"), point("0")[0], 1, BITS)


ORDERS = [
    ([RISES, ABOVE, FALLS, BELOW, RISES], True),
    ([RISES, ABOVE, RISES, ABOVE, FALLS, BELOW, FALLS, BELOW, RISES], True),
    ([RISES, ABOVE, FALLS, BELOW, RISES, ABOVE, FALLS, BELOW, RISES], False),
    ([RISES, ABOVE, FALLS, RISES, ABOVE, FALLS, BELOW, RISES], False),
    ([RISES, ABOVE, RISES], False),
    ([RISES], False),
    ([], False),
    ([FALLS, BELOW, RISES], False),
    ([ABOVE, FALLS, BELOW, RISES], False),
    ([RISES, ABOVE, FALLS, BELOW], False),
    ([RISES, ABOVE, BELOW, RISES], False),
    ([RISES, ABOVE, FALLS, BELOW, FALLS, RISES], False),
]


@pytest.mark.parametrize(("parts", "expected"), ORDERS)
def test_only_a_first_passage_counts(parts: list[str], expected: bool) -> None:
    if expected:
        see_once(parts)
        return
    with pytest.raises(Undecided):
        see_once(parts)


@pytest.mark.parametrize(
    ("rate", "every", "expected"),
    [
        ("r*cos(1.2*t)*x", "2*pi/1.2", True),
        ("r*cos(1.2*t)*x", "pi/1.2", False),
        ("exp(sin(2*pi*t/r)) - x*cos(4*pi*t/r + x)", "r", True),
        ("exp(sin(2*pi*t)) - t", "1", False),
        ("x*t - x*t - x", "1", True),
        ("sin(6.28318530717958*t)", "1", False),
        ("sin(2*pi*t**2)", "1", False),
        ("-x", "r", True),
        ("cos(r*t)**2 - x", "pi/r", True),
        ("cos(r*t)", "2*pi/r", True),
    ],
)
def test_repeating_is_shown_by_algebra_alone(rate: str, every: str, expected: bool) -> None:
    plain = Plain(("x",), (("r", Fraction(1)),), (rate,), Sample("driven", every))
    arguments = plain, "r", programs(plain, "r"), sampling(plain, "r"), Watch()
    if expected:
        see_repeats(*arguments)
        return
    with pytest.raises(NotCheckable, match="repeat"):
        see_repeats(*arguments)
