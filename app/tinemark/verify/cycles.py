"""Cycles of one-state maps, carried along in intervals with the derivatives that a proof needs.

The orbit of a box goes on in mean-value form, f(m, r_m) + f_x(X, R)(X - m) + f_r(X, R)(R - r_m) with m in X
and r_m in R (Moore, 1966), so that it widens by |f_x| a step and not by what a formula makes of
intervals that it sees twice.
"""

from __future__ import annotations

from collections.abc import Collection, Iterator
from dataclasses import dataclass, field
from fractions import Fraction

from tinemark.verify import intervals as iv
from tinemark.verify.claims import Undecided
from tinemark.verify.formula import Program
from tinemark.verify.intervals import ONE, ZERO, Interval
from tinemark.verify.series import ONE_STATE, SLOPE, SLOPES, VALUE, Evaluator, Shape
from tinemark.verify.switches import Switch, switches
from tinemark.verify.watching import Watch, cost_of

STEP_OPERATIONS = 12
"""What the chain rule costs a step, in operations of a formula."""
POINT_SHARE = 0.4
"""Work of a step at a point, against one with all derivatives."""
X, R, XX, XR, XXX = range(1, 6)
"""Places of the monomials in `ONE_STATE`."""


@dataclass(frozen=True)
class OneState:
    """A map of one state: its program, and the names of the state and the swept parameter."""

    program: Program
    state: str
    parameter: str
    watch: Watch = field(default_factory=Watch, compare=False)

    def cost(self, bits: int) -> float:
        """Work of one step with all derivatives."""
        return cost_of(len(self.program.steps) + STEP_OPERATIONS, bits)


@dataclass(frozen=True)
class End:
    """f^p on a box with its derivatives: u, v first in x and r; w, z, t for xx, xr, xxx."""

    x: Interval
    u: Interval
    v: Interval
    w: Interval
    z: Interval
    t: Interval
    visits: dict[int, Interval] = field(default_factory=dict)
    near: bool = False


def middle_orbit(
    one: OneState, x: Fraction, r: Fraction, steps: int, bits: int
) -> Iterator[tuple[int, Interval, Interval]]:
    """(n, f^n(x), slope of f^n) from n = 1 on, along midpoints: good numbers, no proof."""
    point, parameter = _point(x, bits), _point(r, bits)
    slope = ONE
    evaluate = _evaluator(one, SLOPE, bits, {0: parameter})
    cost = one.cost(bits) * POINT_SHARE
    for step in range(steps):
        one.watch.spend(cost)
        series = evaluate({one.state: {0: point, X: ONE}})
        slope = iv.middle(iv.mul(series.get(X, ZERO), slope, bits), bits)
        point = iv.middle(series[0], bits)
        check_bounded(point)
        yield step + 1, point, slope


def at_point(one: OneState, x: Interval, r: Interval, period: int, bits: int) -> tuple[Interval, Interval]:
    """Enclosures of f^p and of its slope at an exact point."""
    slopes = _evaluator(one, SLOPE, bits, {0: r})
    values = _evaluator(one, VALUE, bits, {0: r})
    here, slope = x, ONE
    cost = one.cost(bits) * POINT_SHARE
    for _ in range(period):
        one.watch.spend(cost)
        local = slopes({one.state: {0: here, X: ONE}}).get(X, ZERO)
        middle = iv.middle(here, bits)
        image = values({one.state: {0: middle}})[0]
        here = iv.add(image, iv.mul(local, iv.sub(here, middle, bits), bits), bits)
        slope = iv.mul(local, slope, bits)
        check_bounded(here)
    return here, slope


def on_box(
    one: OneState,
    x: Interval,
    r: Interval,
    period: int,
    bits: int,
    *,
    visits: Collection[int] = (),
    look_for: Interval | None = None,
) -> End:
    """Enclosures of f^p and its derivatives on a box.

    Parameters
    ----------
    visits
        Steps at which the orbit's box is kept.
    look_for
        Whether one of the orbit's boxes meets this interval is told as `near`.
    """
    whole = _evaluator(one, ONE_STATE, bits, {0: r, R: ONE})
    centre_r = iv.middle(r, bits)
    values = _evaluator(one, VALUE, bits, {0: centre_r})
    spread = iv.sub(r, centre_r, bits)
    add, mul = iv.add, iv.mul
    here, u, v, w, z, t = x, ONE, ZERO, ZERO, ZERO, ZERO
    kept: dict[int, Interval] = {}
    near = False
    cost = one.cost(bits)
    for step in range(period):
        one.watch.spend(cost)
        if step in visits:
            kept[step] = here
        if look_for is not None and not near:
            near = iv.sign(iv.sub(here, look_for, bits)) == 0
        local = whole({one.state: {0: here, X: ONE}})
        fx, fr = local.get(X, ZERO), local.get(R, ZERO)
        fxx, fxr, fxxx = (
            iv.mul(local[place], iv.of_fraction(Fraction(factor), bits), bits) if place in local else ZERO
            for place, factor in ((XX, 2), (XR, 1), (XXX, 6))
        )
        # Chain rule for f(f^n): third order first, since each line needs what the later ones replace.
        cube = mul(u, iv.whole_power(u, 2, bits), bits)
        mixed = mul(iv.of_fraction(Fraction(3), bits), mul(fxx, mul(u, w, bits), bits), bits)
        t = add(add(mul(fxxx, cube, bits), mixed, bits), mul(fx, t, bits), bits)
        z = add(mul(add(mul(fxx, v, bits), fxr, bits), u, bits), mul(fx, z, bits), bits)
        w = add(mul(fxx, iv.whole_power(u, 2, bits), bits), mul(fx, w, bits), bits)
        v = add(mul(fx, v, bits), fr, bits)
        u = mul(fx, u, bits)
        middle = iv.middle(here, bits)
        image = values({one.state: {0: middle}})[0]
        move = add(mul(fx, iv.sub(here, middle, bits), bits), mul(fr, spread, bits), bits)
        here = add(image, move, bits)
        check_bounded(here)
    return End(here, u, v, w, z, t, kept, near)


def sides_along(one: OneState, x: Interval, r: Interval, period: int, bits: int) -> list[dict[Switch, int]]:
    """For each point of a cycle the side of every switch that the formula meets there, on the whole box."""
    if not switches(one.program):
        return [{}] * period
    slopes = _evaluator(one, SLOPES, bits, {0: r, SLOPES.place(0, 1): ONE})
    centre_r = iv.middle(r, bits)
    values = _evaluator(one, VALUE, bits, {0: centre_r})
    spread = iv.sub(r, centre_r, bits)
    here, word = x, []
    for _ in range(period):
        one.watch.spend(one.cost(bits))
        sides: dict[Switch, int] = {}
        local = slopes({one.state: {0: here, X: ONE}}, sides)
        word.append(sides)
        middle = iv.middle(here, bits)
        at = values({one.state: {0: middle}})[0]
        move = iv.mul(local.get(X, ZERO), iv.sub(here, middle, bits), bits)
        drift = iv.mul(local.get(SLOPES.place(0, 1), ZERO), spread, bits)
        here = iv.add(at, iv.add(move, drift, bits), bits)
        check_bounded(here)
    return word


def _evaluator(one: OneState, shape: Shape, bits: int, parameter: dict[int, Interval]) -> Evaluator:
    return Evaluator(one.program, shape, bits, {one.parameter: parameter}, [one.state])


def _point(value: Fraction, bits: int) -> Interval:
    return iv.middle(iv.of_fraction(value, bits), bits)


def check_bounded(x: Interval) -> None:
    """Raise `Undecided` where an orbit escapes."""
    if not iv.is_finite(x) or x[1][2] + x[1][3] > 4096:
        raise Undecided("the orbit escapes")
