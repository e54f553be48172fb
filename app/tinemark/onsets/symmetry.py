"""Reflections that a map commutes with, and curves x = c(r) that hold for every value of the parameter.

A map commutes with the reflection about c(r) where f(2 c - x) = 2 c - f(x). Numbers only suggest such a
centre: what it is as a formula of the parameter is guessed from constants, from parts of the map's own
formula, and by fitting; that it is one has to come out by algebra (`exact_identities`).
"""

from __future__ import annotations

import math
from collections.abc import Iterator
from dataclasses import dataclass
from fractions import Fraction
from functools import lru_cache
from typing import Any

from tinemark.onsets.ball_orbits import ball_of, fraction_of, precision
from tinemark.onsets.exact_identities import is_mirrored_along, nearby_constant
from tinemark.onsets.float_map import FloatMap, float_map
from tinemark.onsets.one_map import OneMap
from tinemark.onsets.smooth_pieces import Sides, sides_at, smooth_piece
from tinemark.systems.balls import ball_function
from tinemark.systems.derivatives import derivative
from tinemark.systems.expression import Call, Expr, Name, Num, names_in, walk
from tinemark.systems.plain import plain_function

FACTORS = tuple(map(Fraction, ("1", "2", "-1", "-2", "1/2", "-1/2")))
"""What a part of the formula may be multiplied by to be a centre, or twice one."""
NEAR = 1e-8
"""Share of the state's scale within which a curve passes through a place."""
MOST_PARTS = 40
GRID = 257
OFFSETS = (0.013, 0.047, 0.11)
"""Shares of the state's scale at which a centre is tried for oddness."""
FIT_BITS, FIT_PLACES, FIT_DENOMINATOR = 200, 6, 10**5


@dataclass(frozen=True)
class Curve:
    """A place or a sum of places that the parameter fixes: a formula of the parameter alone."""

    expr: Expr
    parameter: str

    def at(self, r: Any) -> Any:
        """Its value as a ball, at the precision in force."""
        return _ball_curve(self)(r)[0]

    def slope(self, r: Any) -> Any:
        """Its derivative in the parameter, as a ball."""
        return _ball_curve(self)(r)[1]

    def plain(self, r: float) -> tuple[float, float]:
        """Value and derivative in doubles."""
        value, slope = _plain_curve(self)((r,))
        return float(value), float(slope)

    def times(self, factor: int | Fraction) -> Curve:
        """A multiple of it."""
        return Curve(_multiple(Fraction(factor), self.expr), self.parameter)

    @property
    def moves(self) -> bool:
        """Whether it depends on the parameter."""
        return bool(names_in(self.expr))


@lru_cache(maxsize=256)
def _ball_curve(curve: Curve) -> Any:
    return ball_function((curve.expr, derivative(curve.expr, curve.parameter)), (curve.parameter,))


@lru_cache(maxsize=256)
def _plain_curve(curve: Curve) -> Any:
    return plain_function([curve.expr, derivative(curve.expr, curve.parameter)], (curve.parameter,))


def _multiple(factor: Fraction, expr: Expr) -> Expr:
    if factor == 1:
        return expr
    match expr:
        case Num(value):
            return Num(factor * value)
        case Call("mul", (Num(value), rest)):
            return _multiple(factor * value, rest) if factor * value != 1 else rest
    if factor == -1:
        return Call("neg", (expr,))
    return Call("mul", (Num(factor), expr))


def curves_through(one: OneMap, value: float, r: float, scale: float) -> Iterator[Curve]:
    """Curves that pass through a place at a parameter value, the simplest first."""
    constant = nearby_constant(value, scale)
    if constant is not None:
        yield Curve(constant, one.parameter)
    for part in _parts(one):
        for factor in FACTORS:
            curve = Curve(_multiple(factor, part), one.parameter)
            there, _ = curve.plain(r)
            if abs(there - value) <= NEAR * max(scale, abs(value)):
                yield curve


@lru_cache(maxsize=64)
def _parts(one: OneMap) -> tuple[Expr, ...]:
    """Parts of the formula that hold the parameter and not the state."""
    found: dict[Expr, None] = {}
    for node in walk(one.exact_derivatives["f"]):
        if names_in(node) == frozenset({one.parameter}):
            found[node] = None
    return tuple(found)[:MOST_PARTS]


def total_of_cycle(one: OneMap, points: list[float], r: float) -> tuple[Curve, tuple[Sides, ...]] | None:
    """Twice the centre about which a cycle of even period is its own mirror image, and so is the map there.

    Returns
    -------
    tuple or None
        The curve, and the smooth pieces that doubles tell at each point; None where no identity holds.
    """
    half = len(points) // 2
    cycles = float_map(one)
    word = tuple(sides_at(one, x, r) for x in points)
    pairs = frozenset((word[place], word[(place + half) % len(word)]) for place in range(max(half, 1)))
    total = points[0] + points[half % len(points)]
    for curve in curves_through(one, total, r, cycles.scale):
        if is_mirrored_along(one, curve.expr, pairs):
            return curve, word
    fitted = _fitted_through(one, total / 2, r)
    if fitted is not None and is_mirrored_along(one, fitted.times(2).expr, pairs):
        return fitted.times(2), word
    return None


def centres(one: OneMap, r: float) -> tuple[Curve, ...]:
    """Centres of the reflections that the map commutes with, as far as they are found.

    Only the fixed points are tried, since the centre of a reflection stays put.
    """
    # A little off round numbers, where plain formulas like to be degenerate.
    rounded = float(f"{r:.2g}")
    return _centres(one, rounded + 0.0137 * max(abs(rounded), 0.1))


@lru_cache(maxsize=256)
def _centres(one: OneMap, r: float) -> tuple[Curve, ...]:
    cycles = float_map(one)
    found = []
    for centre in _odd_places(cycles, r):
        curve = _centre_curve(one, centre, r)
        if curve is not None and curve not in found:
            found.append(curve)
    return tuple(found)


def _centre_curve(one: OneMap, centre: float, r: float) -> Curve | None:
    cycles = float_map(one)
    beside = [sides_at(one, centre + share * cycles.scale, r) for share in OFFSETS]
    across = [sides_at(one, centre - share * cycles.scale, r) for share in OFFSETS]
    pairs = frozenset(zip(beside, across, strict=True))
    for curve in curves_through(one, centre, r, cycles.scale):
        if is_mirrored_along(one, curve.times(2).expr, pairs):
            return curve
    fitted = _fitted_through(one, centre, r)
    if fitted is not None and is_mirrored_along(one, fitted.times(2).expr, pairs):
        return fitted
    return None


def _odd_places(cycles: FloatMap, r: float) -> list[float]:
    low, high = cycles.one.extent or (None, None)
    if low is None or high is None:
        points = cycles.points(float(cycles.one.start), r, 400)
        points = points[abs(points) < 1e100]
        if not len(points):
            return []
        reach = float(points.max() - points.min()) or 1.0
        left, right = float(points.min()) - reach, float(points.max()) + reach
    else:
        left, right = float(low), float(high)
    width = right - left

    def ahead(x: float) -> float:
        return float(cycles.points(x, r, 2)[1])

    grid = [left - 0.05 * width + 1.1 * width * (k + 0.371) / GRID for k in range(GRID)]
    gaps = [ahead(x) - x for x in grid]
    found: list[float] = []
    for place in range(1, GRID):
        before, after = gaps[place - 1], gaps[place]
        if not (math.isfinite(before) and math.isfinite(after)) or before * after > 0:
            continue
        a, b = grid[place - 1], grid[place]
        for _ in range(60):
            middle = 0.5 * (a + b)
            if (ahead(middle) - middle) * before > 0:
                a = middle
            else:
                b = middle
        centre = 0.5 * (a + b)
        misses = [
            abs(ahead(centre + share * cycles.scale) + ahead(centre - share * cycles.scale) - 2 * centre)
            for share in OFFSETS
        ]
        if all(miss <= 1e-9 * cycles.scale for miss in misses):
            found.append(centre)
    return found


def _fitted_through(one: OneMap, centre: float, r: float) -> Curve | None:
    scale = float_map(one).scale
    return _fitted(one, sides_at(one, centre, r), round(centre / scale, 2), round(r, 3))


@lru_cache(maxsize=64)
def _fitted(one: OneMap, sides: Sides, share: float, r: float) -> Curve | None:
    """A centre as a low polynomial or a fraction of two linear functions of the parameter, or none.

    A centre is an inflection, so that Newton's method for f_xx = 0 follows it along the parameter.
    """
    formula = smooth_piece(one, sides).formula
    bend = derivative(formula, one.state, one.state)
    if one.state not in names_in(bend):
        return None
    evaluate = ball_function((bend, derivative(bend, one.state)), (one.state, one.parameter))
    scale = float_map(one).scale
    start = Fraction(r).limit_denominator(1000)
    stride = Fraction(max(abs(r), 0.1)).limit_denominator(20) / 16
    places: list[tuple[Fraction, Fraction]] = []
    with precision(FIT_BITS):
        x = ball_of(Fraction(share * scale)).mid()
        for count in range(FIT_PLACES):
            at = ball_of(start + count * stride)
            for _ in range(30):
                value, slope = evaluate(x, at)
                step = (value / slope).mid()
                if not step.is_finite() or abs(step) > 10 * scale:
                    return None
                x = (x - step).mid()
                if abs(step) < 2.0 ** (10 - FIT_BITS) * scale:
                    break
            exact = fraction_of(x).limit_denominator(FIT_DENOMINATOR)
            if abs(fraction_of(x) - exact) > Fraction(1, 10**40):
                return None
            places.append((start + count * stride, exact))
    return _interpolated(places, Name(one.parameter))


def _interpolated(places: list[tuple[Fraction, Fraction]], name: Expr) -> Curve | None:
    (r0, c0), (r1, c1), (r2, c2) = places[:3]
    first, second = (c1 - c0) / (r1 - r0), (c2 - c1) / (r2 - r1)
    third = (second - first) / (r2 - r0)
    # Newton's form, opened: c0 + first (r - r0) + third (r - r0)(r - r1).
    a, b = c0 - first * r0 + third * r0 * r1, first - third * (r0 + r1)
    parameter = name.name if isinstance(name, Name) else ""
    if all(a + b * r + third * r * r == c for r, c in places):
        square = Call("mul", (Num(third), Call("pow", (name, Num(Fraction(2))))))
        return Curve(_sum((Num(a), _multiple(b, name) if b else None, square if third else None)), parameter)
    # c (1 + d r) = a + b r: three places give it.
    determinant = (r1 - r0) * (c2 * r2 - c0 * r0) - (r2 - r0) * (c1 * r1 - c0 * r0)
    if determinant == 0:
        return None
    b = ((c1 - c0) * (c2 * r2 - c0 * r0) - (c2 - c0) * (c1 * r1 - c0 * r0)) / determinant
    moved = c1 * r1 - c0 * r0
    if moved == 0:
        return None
    d = (b * (r1 - r0) - (c1 - c0)) / moved
    a = c0 * (1 + d * r0) - b * r0
    if not all(c * (1 + d * r) == a + b * r for r, c in places):
        return None
    above = _sum((Num(a), _multiple(b, name) if b else None))
    below = _sum((Num(Fraction(1)), _multiple(d, name)))
    return Curve(Call("div", (above, below)), parameter)


def _sum(terms: tuple[Expr | None, ...]) -> Expr:
    given = [term for term in terms if term is not None]
    if len(given) > 1 and given[0] == Num(Fraction(0)):
        given = given[1:]
    total = given[0]
    for term in given[1:]:
        total = Call("add", (total, term))
    return total
