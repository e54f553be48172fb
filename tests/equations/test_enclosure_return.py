"""Enclosures of return maps: closed forms lie inside, and points of a box stay inside its image."""

from __future__ import annotations

import random
from collections.abc import Callable, Sequence
from typing import Any

import pytest
from flint import acb, arb, arb_mat

from tinemark.equations.enclosure_bound import NotEnclosed
from tinemark.equations.enclosure_discs import NotAnalytic, disc_function
from tinemark.equations.enclosure_return import Carried, carry, carry_curve
from tinemark.equations.enclosure_section import Course, Grazes, Side, passage
from tinemark.equations.series import working
from tinemark.equations.taylor_rates import Rates, rates_of
from tinemark.systems.errors import SwitchingTouched, Unbounded
from tinemark.systems.formula import read_formula
from tinemark.systems.system_file import read_system_text

BITS = 100


def rates(states: dict[str, str], *, every: str = "", crosses: str = "", direction: str = "rising") -> Rates:
    """Rates in the parameter r."""
    lines = ['title = "test"', f'kind = "{"driven" if every else "flow"}"']
    for name in states:
        lines += [f"[states.{name}]", 'start = "0"']
    lines += ["[parameters.r]", 'value = "1"', "[rate]"]
    lines += [f'{name} = "{text}"' for name, text in states.items()]
    sample = [f'every = "{every}"'] if every else [f'crosses = "{crosses}"', f'direction = "{direction}"']
    lines += ["[sample]", *sample, "[diagram]", 'parameter = "r"', f'observe = "{next(iter(states))}"']
    return rates_of(read_system_text("\n".join(lines)), "r")


def finish(work):  # type: ignore[no-untyped-def]
    """The value of a generator."""
    while True:
        try:
            next(work)
        except StopIteration as done:
            return done.value


def returned(
    of: Rates, start: Sequence[Any], r: Any, vector: Sequence[Any] | None = None, bits: int = BITS
) -> Carried:
    """One return."""
    with working(200):
        box, parameter = [arb(value) for value in start], arb(r)
        along = None if vector is None else [arb(value) for value in vector]
    return finish(carry(of, box, parameter, bits, along))  # type: ignore[no-any-return]


def encloses(ball: Any, value: Any, width: float) -> bool:
    """Whether a ball holds a value, and is no wider than said."""
    return bool(ball.overlaps(value)) and float(ball.rad()) <= width


def test_a_damped_driven_oscillator_follows_its_closed_form() -> None:
    # x'' = -r x' - 10 x + 3 cos(2 pi t), by variation of constants with the complex roots.
    of = rates({"x": "v", "v": "-r*v - 10*x + 3*cos(2*pi*t)"}, every="1")
    found = returned(of, ("0.5", "-0.25"), "0.75", ("1", "0.5"))
    with working(200):
        half, x0, v0 = arb(3) / 8, arb(1) / 2, -arb(1) / 4
        turning = (10 - half * half).sqrt()
        w = 2 * arb.pi()
        forced = 3 / acb(10 - w * w, arb(3) / 4 * w)  # of exp(i w t)
        offset, rate = x0 - forced.real, v0 + w * forced.imag
        decay, c, s = (-half).exp(), turning.cos(), turning.sin()
        a, b = decay * (c + half / turning * s), decay * s / turning
        x = a * offset + b * rate + forced.real
        v = -10 * b * offset + (a - 2 * half * b) * rate - w * forced.imag
        assert encloses(found.image[0], x, 1e-29) and encloses(found.image[1], v, 1e-29)
        assert encloses(found.jacobian[0, 0], a, 1e-29) and encloses(found.jacobian[0, 1], b, 1e-29)
        assert encloses(found.jacobian[1, 0], -10 * b, 1e-28)
        assert encloses(found.jacobian[1, 1], a - 2 * half * b, 1e-29)
        # Linear: no second derivative in the states.
        assert all(encloses(entry, 0, 1e-8) for entry in found.bend.entries())


@pytest.mark.parametrize("every", ["1", "2*r", "3/(1 + r)"])
def test_the_period_may_depend_on_the_parameter(every: str) -> None:
    # x' = r x - x**3 over the period T: x / sqrt(e^(-2 r T) + x**2 (1 - e^(-2 r T)) / r).
    of = rates({"x": "r*x - x**3"}, every=every)
    found = returned(of, ("0.5",), "0.5", ("1",))
    from mpmath import diff, exp, mpf, nstr, sqrt, workdps

    def image(x, r):  # type: ignore[no-untyped-def]
        period = {"1": mpf(1), "2*r": 2 * r, "3/(1 + r)": 3 / (1 + r)}[every]
        gone = exp(-2 * r * period)
        return x / sqrt(gone + x**2 * (1 - gone) / r)

    with workdps(40), working(200):
        place = (mpf(1) / 2, mpf(1) / 2)
        pairs = [
            (found.image[0], image(*place), 1e-29),
            (found.jacobian[0, 0], diff(image, place, (1, 0)), 1e-28),
            (found.slope[0, 0], diff(image, place, (0, 1)), 1e-8),
            (found.bend[0, 0], diff(image, place, (2, 0)), 1e-6),
            (found.bend_r[0, 0], diff(image, place, (1, 1)), 1e-6),
        ]
        for ball, value, width in pairs:
            assert encloses(ball, arb(nstr(value, 30)) + arb(0, 1e-12 if width > 1e-20 else 1e-27), width)


SPIRAL = {"x": "r*x - y", "y": "x + r*y"}


def test_a_spiral_comes_back_after_a_whole_turn() -> None:
    # On the section y = 0, rising: x -> e^(2 pi r) x after the time 2 pi.
    of = rates(SPIRAL, crosses="y")
    found = returned(of, ("2", "0"), "-0.125", ("1", "0"))
    with working(200):
        factor = (-arb.pi() / 4).exp()
        assert encloses(found.time, 2 * arb.pi(), 1e-28)
        assert encloses(found.image[0], 2 * factor, 1e-28) and encloses(found.image[1], 0, 1e-28)
        assert encloses(found.jacobian[0, 0], factor, 1e-28)
        # A start above the section at (x, e) leaves it e / x radians late: e^(r (2 pi - e / x)) x.
        assert encloses(found.jacobian[0, 1], -arb(-0.125) * factor, 1e-28)
        assert encloses(found.slope[0, 0], 4 * arb.pi() * factor, 1e-7)
        assert encloses(found.bend_r[0, 0], 2 * arb.pi() * factor, 1e-6)
        assert all(encloses(found.jacobian[1, k], 0, 1e-28) for k in (0, 1))


def test_the_same_passage_is_found_in_the_falling_direction() -> None:
    falling = returned(rates(SPIRAL, crosses="y", direction="falling"), ("-2", "0"), "-0.125")
    with working(200):
        assert encloses(falling.image[0], -2 * (-arb.pi() / 4).exp(), 1e-28)


def test_a_nonlinear_return_has_its_second_and_third_derivatives() -> None:
    # Radius q' = q (r - q**2), angle' = 1: q -> q / sqrt(e^(-4 pi r) + q**2 (1 - e^(-4 pi r)) / r).
    of = rates({"x": "x*(r - x*x - y*y) - y", "y": "y*(r - x*x - y*y) + x"}, crosses="y")
    from mpmath import diff, exp, mpf, nstr, pi, sqrt, workdps

    def image(q, r):  # type: ignore[no-untyped-def]
        gone = exp(-4 * pi * r)
        return q / sqrt(gone + q**2 * (1 - gone) / r)

    found = returned(of, ("0.25", "0"), "0.125", ("1", "0"))
    one = [arb(1), arb(0)]
    nothing = [arb(0), arb(0)]
    curve = finish(carry_curve(of, [arb(0.25), arb(0)], arb(0.125), (one, nothing, nothing)))
    slanted = finish(carry_curve(of, [arb(0.25), arb(0)], arb(0.125), (one, one, one)))
    with workdps(40), working(200):
        place = (mpf(1) / 4, mpf(1) / 8)

        def exact(a: int, b: int = 0) -> Any:
            return arb(nstr(diff(image, place, (a, b)), 20)) + arb(0, 1e-12)

        assert encloses(found.bend[0, 0], exact(2), 1e-4)
        assert encloses(found.bend_r[0, 0], exact(1, 1), 1e-4)
        for order, factorial in ((1, 1), (2, 2), (3, 6)):
            assert encloses(curve[order - 1][0], exact(order) / factorial, 1e-3)
        # Along x + e + e**2 + e**3.
        assert encloses(slanted[1][0], exact(1) + exact(2) / 2, 1e-3)
        assert encloses(slanted[2][0], exact(1) + exact(2) + exact(3) / 6, 1e-3)


def test_the_first_of_several_passages_counts() -> None:
    # g = sin t + 0.9 sin 2 t of two rotations passes zero upward twice a turn.
    of = rates({"a": "b", "b": "-a", "c": "2*d", "d": "-2*c", "s": "r*0"}, crosses="a + c")
    found = returned(of, ("0", "1", "0", "0.9", "0"), "1", bits=60)
    with working(200):
        # The next zeros: cos t = -1/1.8 downward, then t = pi upward, since the slope there is 1.8 - 1 > 0.
        assert encloses(found.time, arb.pi(), 1e-15)


def test_a_start_beside_the_section_is_carried_to_it() -> None:
    # Clearly below: the first passage is the near one. All but on it: that one is left, and the next counts.
    rotation = rates({"x": "-y + 0*r", "y": "x"}, crosses="y")
    below = returned(rotation, ("1", "-0.0625"), "1", bits=60)
    on = returned(rotation, ("1", "-1e-9"), "1", bits=60)
    with working(100):
        assert encloses(below.time, (arb(1) / 16).atan(), 1e-15)
        assert encloses(on.time, 2 * arb.pi() + arb(1e-9).atan(), 1e-15)


def test_passages_are_counted_by_the_order_of_pieces() -> None:
    positive, negative, rises, falls = Course.POSITIVE, Course.NEGATIVE, Course.RISES, Course.FALLS

    def course(*kinds: Course) -> list[tuple[Course, float, float]]:
        return [(kind, float(k), k + 1.0) for k, kind in enumerate(kinds)]

    assert passage(Side.START, course(rises), True) == (Side.ABOVE, None)
    assert passage(Side.ABOVE, course(falls), True) == (Side.ABOVE, None)
    assert passage(Side.ABOVE, course(positive, falls, negative), False) == (Side.BELOW, None)
    assert passage(Side.BELOW, course(rises, rises, positive), True) == (Side.ABOVE, (0.0, 2.0))
    assert passage(Side.ABOVE, course(falls, negative, rises), True) == (Side.ABOVE, (2.0, 3.0))
    for refused in (course(falls, rises), course(rises, falls)):
        with pytest.raises(Grazes):
            passage(Side.BELOW, refused, False)
    with pytest.raises(Grazes):
        passage(Side.START, course(falls), False)


def test_grazing_and_never_crossing_are_told() -> None:
    # From (1, 0) the circle just touches x + 1 = 0.
    with pytest.raises(Grazes):
        returned(rates({"x": "-y + 0*r", "y": "x"}, crosses="x + 1"), ("1", "0"), "1", bits=40)
    with pytest.raises((Unbounded, NotEnclosed)):
        returned(rates({"x": "1 + x*x", "y": "r"}, crosses="x + 5"), ("0", "0"), "1", bits=40)


def test_what_is_not_analytic_on_the_box_is_refused() -> None:
    for text in ("sqrt(x)", "log(x)", "x**0.5"):
        function = disc_function((read_formula(text, ("x",), key="rate"),), ("x",))
        assert function(acb(arb(1, 0.5), arb(0, 0.5)))[0].is_finite()
        # Around the branch point complex balls would give a finite union of both branches.
        with pytest.raises(NotAnalytic):
            function(acb(arb(0.25, 0.5), arb(0, 0.5)))
    for text in ("asin(x)", "acos(x)", "atan(x)"):
        function = disc_function((read_formula(text, ("x",), key="rate"),), ("x",))
        with pytest.raises(NotAnalytic):
            function(acb(arb(0, 1.5), arb(0, 1.5)))
    with pytest.raises(SwitchingTouched):
        disc_function((read_formula("abs(x)", ("x",), key="rate"),), ("x",))(acb(arb(0.25, 0.5), arb(0, 0.5)))


def test_a_solution_that_leaves_its_domain_or_blows_up_is_refused() -> None:
    for text, start in (("x*x + 0*r", "2"), ("-sqrt(x)", "0.5")):
        with pytest.raises((NotEnclosed, ArithmeticError, Unbounded, SwitchingTouched)):
            returned(rates({"x": text}, every="1 + r"), (start,), "1", bits=40)


def test_a_switch_that_is_reached_is_refused_and_one_that_is_not_is_passed() -> None:
    kinked = rates({"x": "-abs(x) + 0*r"}, every="1")
    with working(200):
        assert encloses(returned(kinked, ("1",), "1").image[0], (-arb(1)).exp(), 1e-29)
    for text in ("-1 - abs(x)", "-1 if x < 0 else -2", "floor(x) - 1", "max(x, 0) - 1"):
        with pytest.raises(SwitchingTouched):
            returned(rates({"x": f"{text} + 0*r"}, every="1"), ("0.25",), "1", bits=40)


TANGLED = (
    ({"x": "y", "y": "-0.3*y + x - x**3 + r*cos(t)"}, {"every": "2*pi"}),
    ({"x": "y - sin(x*r)", "y": "-x + exp(sin(y)) - tanh(y*t)*sqrt(1 + x*x)"}, {"every": "1"}),
    ({"x": "atan2(y, 3 + x)*r - x", "y": "log(3 + sin(x + t)) - y"}, {"every": "1 + r/4"}),
    ({"x": "-y - z", "y": "x + 0.2*y", "z": "0.2 + z*(x - 2 - r)"}, {"crosses": "y"}),
    (
        {"x": "-y + 0.2*sin(r*y)", "y": "x - 0.1*x**3/(1 + y*y)"},
        {"crosses": "x - 0.1*r", "direction": "falling"},
    ),
)


@pytest.mark.parametrize("case", range(len(TANGLED)))
def test_every_point_of_a_box_stays_inside_its_image(case: int) -> None:
    states, sample = TANGLED[case]
    of = rates(states, **sample)
    n, dice = of.size, random.Random(case)
    middle = [1.5, 0.25, 0.5][:n] if case != 3 else [3.0, 0.0, 0.5]
    vector = [dice.uniform(-1, 1) for _ in range(n)]
    half = [10.0 ** dice.uniform(-9, -6) for _ in range(n + 1)]

    def parts(found: Carried) -> list[Any]:
        blocks = (found.jacobian, found.slope, found.bend, found.bend_r)
        entries = [entry for block in blocks if block is not None for entry in block.entries()]
        return [found.time, *found.image, *entries]

    def at(shift: Callable[[], float]) -> list[Any]:
        with working(200):
            box = [arb(m) + arb(h) * shift() for m, h in zip((*middle, 0.5), half, strict=True)]
        return parts(finish(carry(of, box[:n], box[n], BITS, [arb(value) for value in vector])))

    box = [arb(m, h) for m, h in zip((*middle, 0.5), half, strict=True)]
    whole = parts(finish(carry(of, box[:n], box[n], 53, [arb(value) for value in vector])))
    for _ in range(2):
        inside = at(lambda: dice.choice([-0.999, 0.999, dice.uniform(-0.999, 0.999)]))
        assert all(wide.overlaps(narrow) for wide, narrow in zip(whole, inside, strict=True))
    # Not by being wide for its own sake.
    assert all(float(ball.rad()) < 1e-3 for ball in whole[: n + 1])


LIMIT_CYCLE = {"x": "x*(r - x*x - y*y) - y", "y": "y*(r - x*x - y*y) + x"}
SLANTED = "y - 0.4 + (x - 0.3)*x + (r - 0.25)*y"


def test_the_multiplier_of_a_limit_cycle_does_not_depend_on_the_section() -> None:
    # The circle of radius 1/2 at r = 1/4 passes (0.3, 0.4) on a curved section; its multiplier is exp(-pi).
    found = returned(rates(LIMIT_CYCLE, crosses=SLANTED), ("0.3", "0.4"), "0.25")
    with working(200):
        assert encloses(found.time, 2 * arb.pi(), 1e-27)
        assert encloses(found.image[0], arb("0.3"), 1e-27) and encloses(found.image[1], arb("0.4"), 1e-27)
        assert encloses(found.jacobian[0, 0] + found.jacobian[1, 1], (-arb.pi()).exp(), 1e-26)
        assert encloses(found.jacobian.det(), 0, 1e-26)


@pytest.mark.parametrize("driven", [True, False])
def test_derivatives_are_those_of_the_image(driven: bool) -> None:
    # By differences of images that are known to 1e-30.
    if driven:
        of = rates({"x": "y*r - x*y", "y": "sin(x) - 0.1*y + cos(t)"}, every="2*pi/(6 + r)")
        start, value = ["0.5", "-0.25"], "1.25"
    else:
        of = rates(LIMIT_CYCLE, crosses=SLANTED)
        start, value = ["0.3125", "0.375"], "0.28125"
    n, step = 2, 2.0**-36
    along = [0.5, 0.25]
    found = returned(of, start, value, along)

    def moved(k: int, sign: int) -> Carried:
        with working(220):
            place = [arb(text) for text in (*start, value)]
            place[k] = place[k] + sign * arb(step)
        return finish(carry(of, place[:n], place[n], BITS))  # type: ignore[no-any-return]

    with working(220):
        direction = arb_mat(n, 1, along)
        for k in range(n + 1):
            plus, minus = moved(k, 1), moved(k, -1)
            turned = (plus.jacobian * direction - minus.jacobian * direction) / (2 * arb(step))
            for i in range(n):
                slope = (plus.image[i] - minus.image[i]) / (2 * arb(step))
                first = found.jacobian[i, k] if k < n else found.slope[i, 0]
                second = found.bend[i, k] if k < n else found.bend_r[i, 0]
                assert abs(first - slope) < 1e-7 and first.overlaps(slope + arb(0, 1e-17))
                assert abs(second - turned[i, 0]) < 1e-5 and second.overlaps(turned[i, 0] + arb(0, 1e-17))


def test_precision_is_restored() -> None:
    import flint

    before = flint.ctx.prec, flint.ctx.cap
    work = carry(rates({"x": "r - x"}, every="1"), [arb(1)], arb(2), 80)
    next(work)
    assert (flint.ctx.prec, flint.ctx.cap) == before
    finish(work)
    assert (flint.ctx.prec, flint.ctx.cap) == before
