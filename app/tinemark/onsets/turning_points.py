"""Turning points of a one-state map over an interval of its parameter, enclosed in ball arithmetic."""

from __future__ import annotations

from dataclasses import dataclass
from fractions import Fraction
from itertools import pairwise
from typing import Any

from flint import arb

from tinemark.onsets.ball_orbits import ball_of
from tinemark.onsets.float_map import float_map
from tinemark.onsets.one_map import OneMap
from tinemark.systems.balls import BallFunction, ball_floor, ball_function, ball_less
from tinemark.systems.errors import SwitchingTouched
from tinemark.systems.expression import Call, Expr, walk

CELLS = 48
DEEPEST = 2
"""How often a stretch of the state that stays undecided is divided into cells again."""
SIMPLE = 1000
"""Largest denominator of a turning point that is tried as an exact number."""
CONTRACTIONS = 5


@dataclass(frozen=True)
class Turning:
    """A turning point, and how it is known.

    Attributes
    ----------
    low, high
        It lies in this interval of the state for every parameter of the range.
    exact
        Its value where it is the same exact number throughout, else None.
    """

    low: Fraction
    high: Fraction
    exact: Fraction | None = None


@dataclass(frozen=True)
class TurningPoints:
    """Turning points in a range of the state; `proved` when there are certainly no others."""

    found: tuple[Turning, ...]
    proved: bool


class SlopeBalls:
    """The first and second derivatives of a map over balls (state, parameter)."""

    def __init__(self, one: OneMap) -> None:
        exprs = one.exact_derivatives
        names = (one.state, one.parameter)
        self.slope: BallFunction = ball_function((exprs["fx"],), names)
        self.bends: BallFunction = ball_function((exprs["fx"], exprs["fxx"], exprs["fxr"]), names)
        surfaces, angles = one.exact_surfaces, tuple(_angles(exprs["f"]))
        self.kinds = [surface.kind for surface in surfaces]
        self.sides = ball_function(tuple(surface.expr for surface in surfaces), names) if surfaces else None
        self.cuts = ball_function(angles, names) if angles else None

    def check_smooth(self, xs: Any, rs: Any) -> None:
        """Make sure that one smooth piece of the formula holds on all of the balls.

        Evaluation at middles does not see a surface, and derivatives may have lost it.

        Raises
        ------
        SwitchingTouched
            A switching surface may run through.
        """
        if self.sides is not None:
            for kind, side in zip(self.kinds, self.sides(xs, rs), strict=True):
                if kind == "zero":
                    ball_less(side, 0)
                else:
                    ball_floor(side)
        if self.cuts is not None:
            angles = self.cuts(xs, rs)
            for rise, run in zip(angles[::2], angles[1::2], strict=True):
                if rise.contains(0) and not run > 0:
                    raise SwitchingTouched("the orbit touches the cut of atan2")

    def over(self, xs: Any, rs: Any) -> Any:
        """The slope over balls, in mean-value form along the parameter.

        So that a parameter that is a factor of the formula, as so many are, does not blur its sign.
        """
        self.check_smooth(xs, rs)
        _, _, mixed = self.bends(xs, rs)
        middle = rs.mid()
        return self.slope(xs, middle)[0] + mixed * (rs - middle)


def _angles(formula: Expr) -> list[Expr]:
    """Arguments of every atan2 in a formula, in pairs."""
    return [
        arg for node in walk(formula) if isinstance(node, Call) and node.fn == "atan2" for arg in node.args
    ]


def turning_points(
    one: OneMap, slopes: SlopeBalls, rs: Any, extent: tuple[Fraction, Fraction]
) -> TurningPoints | None:
    """All turning points between two states, the same number of them throughout a ball of the parameter.

    Returns
    -------
    TurningPoints or None
        None where the ball is too wide to tell.
    """
    exact = _exact_ones(one, slopes, rs)
    found: list[Turning] = []
    proved = True
    waiting = [(*extent, 0)]
    while waiting:
        low, high, depth = waiting.pop()
        for a, b in _clusters(slopes, rs, low, high):
            turning = _decide(slopes, rs, a, b)
            inside = [c for c in exact if a < c < b]
            if turning is None and depth < DEEPEST:
                waiting.append((a, b, depth + 1))
            elif turning is None and len(inside) == 1:
                # A flat one (the second derivative is zero too): exact, but not shown to be alone there.
                found.append(Turning(inside[0], inside[0], inside[0]))
                proved = False
            elif turning is None:
                return None
            elif isinstance(turning, Turning):
                found.append(Turning(inside[0], inside[0], inside[0]) if len(inside) == 1 else turning)
    return TurningPoints(tuple(sorted(found, key=lambda item: item.low)), proved)


def _clusters(slopes: SlopeBalls, rs: Any, low: Fraction, high: Fraction) -> list[tuple[Fraction, Fraction]]:
    """Stretches of the state, each as long as possible, on which the slope may be zero."""
    # Uneven, so that no turning point of a plain formula lies on the edge of a cell.
    edges = [low + (high - low) * Fraction(1009 * k + (k % 3), 1009 * CELLS) for k in range(CELLS)]
    found: list[tuple[Fraction, Fraction]] = []
    for a, b in pairwise([*edges, high]):
        try:
            excluded = not slopes.over(ball_of(a).union(ball_of(b)), rs).contains(0)
        except SwitchingTouched:
            excluded = False
        if excluded:
            continue
        if found and found[-1][1] == a:
            found[-1] = (found[-1][0], b)
        else:
            found.append((a, b))
    return found


def _decide(slopes: SlopeBalls, rs: Any, a: Fraction, b: Fraction) -> Turning | bool | None:
    """The one turning point between two states, False where there is none, None where it is not decided."""
    try:
        _, bend, _ = slopes.bends(ball_of(a).union(ball_of(b)), rs)
        ends = [slopes.over(ball_of(end), rs) for end in (a, b)]
    except SwitchingTouched:
        return None
    if bend.contains(0) or not bend.is_finite():
        return None
    if any(end.contains(0) or not end.is_finite() for end in ends):
        return None
    return Turning(a, b) if (ends[0] < 0) != (ends[1] < 0) else False


def _exact_ones(one: OneMap, slopes: SlopeBalls, rs: Any) -> list[Fraction]:
    """Simple fractions at which the slope is exactly zero for every parameter."""
    found = []
    for x in float_map(one).critical_points(float(rs.mid())):
        guess = Fraction(x).limit_denominator(SIMPLE)
        if abs(float(guess) - x) > 1e-6 * float_map(one).scale:
            continue
        try:
            (slope,) = slopes.slope(ball_of(guess), rs)
        except SwitchingTouched:
            continue
        if slope.is_zero():
            found.append(guess)
    return found


def contracted(slopes: SlopeBalls, turning: Turning, rs: Any) -> tuple[Any, Any]:
    """Enclosures, over a ball of the parameter, of a turning point and of its derivative in the parameter.

    Interval Newton steps on f_x(x, r) = 0 (Moore 1966): a zero in the ball stays in it.
    """
    if turning.exact is not None:
        return ball_of(turning.exact), arb(0)
    xs = ball_of(turning.low).union(ball_of(turning.high))
    for _ in range(CONTRACTIONS):
        middle = xs.mid()
        _, bend, _ = slopes.bends(xs, rs)
        if bend.contains(0):
            break
        step = middle - slopes.slope(middle, rs)[0] / bend
        if not step.is_finite() or not step.overlaps(xs):
            break
        narrowed = step.intersection(xs)
        if not narrowed.rad() < 0.5 * xs.rad():
            xs = narrowed
            break
        xs = narrowed
    _, bend, mixed = slopes.bends(xs, rs)
    return xs, -mixed / bend
