"""The smooth pieces of a piecewise formula, each extended beyond the surfaces that bound it.

Along a cycle each point lies on one side of every switching surface. With those sides fixed by hand the
formula is smooth, also on a surface and past it, so a cycle that touches a surface has derivatives on
each side (di Bernardo, Budd, Champneys & Kowalczyk, 2008, section 3.1).
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction
from functools import lru_cache
from typing import Any

from tinemark.onsets.ball_orbits import ball_of
from tinemark.onsets.one_map import OneMap, put_in
from tinemark.systems.balls import BallFunction, ball_function
from tinemark.systems.derivatives import derivative
from tinemark.systems.expression import PIECEWISE, Call, Cond, Expr, Num, children, walk
from tinemark.systems.plain import plain_function
from tinemark.systems.surfaces import Surface

Sides = tuple[int, ...]
"""For each surface of `switches`: -1 or +1, the sign of its formula; for a floor, its whole number."""


@lru_cache(maxsize=64)
def switches(one: OneMap) -> tuple[Surface, ...]:
    """The surfaces at which the map switches pieces, in the map's own names with the fixed parameters put in.

    Empty where the formula uses atan2, whose cut no choice of pieces extends.
    """
    found: dict[Surface, None] = {}
    for node in walk(one.exact_derivatives["f"]):
        if isinstance(node, Call) and node.fn == "atan2":
            return ()
        surface = _surface_of(node)
        if surface is not None:
            found[surface] = None
    return tuple(found)


def _surface_of(node: Expr) -> Surface | None:
    match node:
        case Cond(left, _, right, _, _):
            return Surface(Call("sub", (left, right)), "zero")
        case Call("min" | "max", args):
            return Surface(Call("sub", args), "zero")
        case Call("abs", (arg,)):
            return Surface(arg, "zero")
        case Call("floor", (arg,)):
            return Surface(arg, "integer")
    return None


def named_surface(one: OneMap, place: int) -> Surface:
    """A surface of `switches` in the words of the formula, the fixed parameters by name."""
    formula = dict(one.derivatives)["f"]
    named: dict[Surface, Surface] = {}
    for node in walk(formula):
        surface = _surface_of(node)
        if surface is not None:
            exact = Surface(put_in(surface.expr, dict(one.fixed)), surface.kind)
            named.setdefault(exact, surface)
    surface = switches(one)[place]
    return named.get(surface, surface)


def sides_at(one: OneMap, x: float, r: float) -> Sides:
    """On which side of each surface a state lies, to the accuracy of doubles."""
    surfaces = switches(one)
    values = _plain_surfaces(one)((x, r))
    return tuple(
        math_floor(float(value)) if surface.kind == "integer" else (1 if float(value) > 0 else -1)
        for surface, value in zip(surfaces, values, strict=True)
    )


def math_floor(value: float) -> int:
    """Whole part of a number; 0 where it has none."""
    return int(value // 1) if abs(value) < 1e15 else 0


@lru_cache(maxsize=64)
def _plain_surfaces(one: OneMap) -> Any:
    return plain_function([surface.expr for surface in switches(one)], (one.state, one.parameter))


@dataclass(frozen=True)
class SmoothPiece:
    """One piece, over balls: evaluate(x, r) -> f, f_x, f_r, then g, g_x, g_r of each surface's formula."""

    evaluate: BallFunction
    formula: Expr


@lru_cache(maxsize=512)
def smooth_piece(one: OneMap, sides: Sides) -> SmoothPiece:
    """The piece of a map that holds on these sides of its surfaces."""
    chosen: dict[Surface, int] = dict(zip(switches(one), sides, strict=True))
    formula = frozen(one.exact_derivatives["f"], chosen)
    exprs = [formula, derivative(formula, one.state), derivative(formula, one.parameter)]
    for surface in switches(one):
        expr = frozen(surface.expr, chosen)
        exprs += [expr, derivative(expr, one.state), derivative(expr, one.parameter)]
    return SmoothPiece(ball_function(tuple(exprs), (one.state, one.parameter)), formula)


def frozen(expr: Expr, chosen: Mapping[Surface, int]) -> Expr:
    """A formula with every switch set by hand."""
    done: dict[int, Expr] = {}
    for node in walk(expr):
        parts = tuple(done[id(child)] for child in children(node))
        surface = _surface_of(node)
        copy: Expr = node
        if surface is not None and surface in chosen:
            copy = _chosen_part(node, parts, chosen[surface])
        elif isinstance(node, Call):
            copy = Call(node.fn, parts)
        elif isinstance(node, Cond):
            left, right, then, other = parts
            copy = Cond(left, node.op, right, then, other)
        done[id(node)] = copy
    return done[id(expr)]


def _chosen_part(node: Expr, parts: Sequence[Expr], side: int) -> Expr:
    if isinstance(node, Cond):
        _, _, then, other = parts
        return then if (side < 0) == (node.op in ("<", "<=")) else other
    assert isinstance(node, Call)
    assert node.fn in PIECEWISE
    if node.fn == "abs":
        return Call("neg", (parts[0],)) if side < 0 else parts[0]
    if node.fn == "floor":
        return Num(Fraction(side))
    return parts[0] if (side < 0) == (node.fn == "min") else parts[1]


@dataclass(frozen=True)
class PieceWalk:
    """A cycle walked through with its pieces fixed, from one point back to it.

    Attributes
    ----------
    end
        f^p(x).
    multiplier, drift
        Derivatives of f^p in the state and in the parameter.
    first
        g, g_x, g_r of every surface at the first point.
    surfaces
        g of every surface at each of the other points.
    points
        The orbit, from the first point on.
    """

    end: Any
    multiplier: Any
    drift: Any
    first: tuple[tuple[Any, Any, Any], ...]
    surfaces: tuple[tuple[Any, ...], ...]
    points: tuple[Any, ...]


def walk_pieces(one: OneMap, word: Sequence[Sides], x: Any, r: Any) -> PieceWalk:
    """Walk once round, at the precision in force; x and r may be exact or wide balls.

    Boxes are carried in mean-value form (Moore, 1966), as in `ball_orbits`.
    """
    middle_r = r.mid()
    spread = r - middle_r
    u, v = ball_of_one(), 0 * r
    first: tuple[tuple[Any, Any, Any], ...] = ()
    others, points = [], []
    for place, sides in enumerate(word):
        piece = smooth_piece(one, sides)
        values = piece.evaluate(x, r)
        surfaces = tuple(zip(values[3::3], values[4::3], values[5::3], strict=True))
        if place == 0:
            first = surfaces
        else:
            others.append(tuple(surface[0] for surface in surfaces))
        points.append(x)
        fx, fr = values[1], values[2]
        middle = x.mid()
        # values[0] takes part so that leaving the formula's domain anywhere in the box is not overlooked.
        centre = piece.evaluate(middle, middle_r)[0] + 0 * values[0]
        v = fx * v + fr
        u = fx * u
        x = centre + fx * (x - middle) + fr * spread
    return PieceWalk(x, u, v, first, tuple(others), tuple(points))


def ball_of_one() -> Any:
    """The number 1 as a ball."""
    return ball_of(Fraction(1))
