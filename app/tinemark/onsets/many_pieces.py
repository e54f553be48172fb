"""The smooth pieces of a piecewise map of several states, one chosen at each point of a cycle.

With the sides of all switching surfaces fixed by hand a formula is smooth on a surface and past it, so that a
cycle that touches one has derivatives on each side (di Bernardo, Budd, Champneys & Kowalczyk, 2008, 3.1).
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace
from functools import lru_cache
from typing import Any

import numpy as np
from flint import arb_mat

from tinemark.onsets.many_map import FloatManyMap, Floats, Linearised, ManyMap, float_many_map
from tinemark.onsets.many_shooting import column, entries
from tinemark.onsets.one_map import put_in
from tinemark.onsets.smooth_pieces import Sides, frozen, math_floor
from tinemark.systems.balls import BallFunction, ball_function
from tinemark.systems.derivatives import derivative
from tinemark.systems.expression import Call, Expr, walk
from tinemark.systems.plain import plain_function
from tinemark.systems.surfaces import Surface, domain_edges, switching_surfaces

Word = tuple[Sides, ...]
"""Sides of the surfaces at each point of a cycle."""


@lru_cache(maxsize=64)
def switches(many: ManyMap) -> tuple[Surface, ...]:
    """The surfaces at which the map switches; none where a formula uses atan2, whose cut no piece extends."""
    if any(isinstance(node, Call) and node.fn == "atan2" for f in many.formulas for node in walk(f)):
        return ()
    return switching_surfaces(many.formulas)


def named_switch(many: ManyMap, place: int) -> Surface:
    """A surface of `switches` in the words of the user's formulas, the fixed parameters by name."""
    system = many.system
    fixed = {p.name: p.value.fraction for p in system.parameters if p.name != many.parameter}
    wanted = switches(many)[place]
    for surface in switching_surfaces(system.expressions):
        if Surface(put_in(surface.expr, fixed), surface.kind) == wanted:
            return surface
    return wanted


def surface_values(many: ManyMap, points: Floats, r: float) -> Floats:
    """(p, surfaces, n + 2): each surface's formula at each point, and its derivatives in the states and r."""
    values = _plain_surfaces(many)([*points.T, np.float64(r)])
    table = np.empty((len(values), len(points)))
    for place, value in enumerate(values):
        table[place] = value
    return table.T.reshape(len(points), len(switches(many)), many.size + 2)


@lru_cache(maxsize=64)
def _plain_surfaces(many: ManyMap) -> Callable[..., tuple[Any, ...]]:
    exprs: list[Expr] = []
    for surface in switches(many):
        exprs += [surface.expr, *(derivative(surface.expr, name) for name in many.names)]
    return plain_function(exprs, many.names)


def word_at(many: ManyMap, points: Floats, r: float) -> Word:
    """On which side of each surface the points of a cycle lie, to the accuracy of doubles."""
    kinds = [surface.kind for surface in switches(many)]
    return tuple(
        tuple(
            math_floor(float(value)) if kind == "integer" else (1 if value > 0 else -1)
            for kind, value in zip(kinds, row, strict=True)
        )
        for row in surface_values(many, points, r)[:, :, 0]
    )


def is_beyond(many: ManyMap, place: int, value: Any, side: int) -> bool:
    """Whether a surface's formula, a number or a ball, is on another side for certain."""
    if switches(many)[place].kind == "integer":
        return bool(value < side or value > side + 1)
    return bool(value < 0) if side > 0 else bool(value > 0)


def on_side(many: ManyMap, place: int, value: Any, side: int) -> bool:
    """Whether a surface's formula, a number or a ball, is on one side for certain."""
    if switches(many)[place].kind == "integer":
        return bool(value > side and value < side + 1)
    return bool(value > 0) if side > 0 else bool(value < 0)


@lru_cache(maxsize=512)
def piece_map(many: ManyMap, sides: Sides) -> ManyMap:
    """The piece of a map that holds on these sides, as a map of its own."""
    return replace(many, formulas=tuple(piece_of(many, formula, sides) for formula in many.formulas))


def piece_of(many: ManyMap, expr: Expr, sides: Sides) -> Expr:
    """A formula in the map's names with every switch set by hand."""
    return frozen(expr, dict(zip(switches(many), sides, strict=True)))


class WordMap:
    """A map with its piece fixed at each point of a cycle, in doubles; see `cycle_map.CycleMap`."""

    def __init__(self, float_map: FloatManyMap, word: Word) -> None:
        self.float_map, self.many, self.size = float_map, float_map.many, float_map.size
        self._pieces = [float_many_map(piece_map(float_map.many, sides)) for sides in word]

    def step(self, states: Floats, r: Floats | float) -> Floats:
        """States one step on, whatever pieces hold there."""
        return self.float_map.step(states, r)

    def observed(self, points: Floats, r: float) -> Floats:
        """Observed quantity at points of shape (p, n)."""
        return self.float_map.observed(points, r)

    def scales(self, r: float) -> Floats:
        """A length typical of each state."""
        return self.float_map.scales(r)

    def linearised(self, points: Floats, r: float) -> Linearised:
        """The pieces and their first derivatives at the cycle's points."""
        parts = [piece.linearised(point[None], r) for piece, point in zip(self._pieces, points, strict=True)]
        return Linearised(
            np.concatenate([part.image for part in parts]),
            np.concatenate([part.jacobian for part in parts]),
            np.concatenate([part.slope for part in parts]),
        )


@lru_cache(maxsize=512)
def _ball_piece(many: ManyMap, sides: Sides) -> BallFunction:
    """evaluate(*x, r) -> f, its Jacobian by rows, f_r; g and derivatives of each surface; domain edges."""
    names = many.names
    formulas = [piece_of(many, formula, sides) for formula in many.formulas]
    exprs: list[Expr] = list(formulas)
    exprs += [derivative(formula, state) for formula in formulas for state in many.states]
    exprs += [derivative(formula, many.parameter) for formula in formulas]
    for surface in switches(many):
        expr = piece_of(many, surface.expr, sides)
        exprs += [expr, *(derivative(expr, name) for name in names)]
    exprs += [edge.expr for edge in domain_edges(formulas)]
    return ball_function(tuple(exprs), names)


@dataclass(frozen=True)
class PieceWalk:
    """A cycle walked through with its pieces fixed, from one point back to it, over balls.

    Attributes
    ----------
    end
        f^p(x), a column.
    monodromy, drift
        Derivatives of f^p in the states (n, n) and in the parameter, a column.
    first
        (g, [g_x], g_r) of every surface at the first point.
    surfaces
        g of every surface at each of the other points.
    points
        The orbit, from the first point on.
    """

    end: Any
    monodromy: Any
    drift: Any
    first: tuple[tuple[Any, list[Any], Any], ...]
    surfaces: tuple[tuple[Any, ...], ...]
    points: tuple[list[Any], ...]


def walk_pieces(many: ManyMap, word: Word, x: list[Any], r: Any) -> PieceWalk:
    """Walk once round, at the precision in force; x and r may be exact or wide balls.

    Boxes are carried in mean-value form (Moore, 1966).
    """
    n, count = many.size, len(switches(many))
    middle_r = r.mid()
    spread = r - middle_r
    monodromy = arb_mat(n, n, [int(i == j) for i in range(n) for j in range(n)])
    drift = arb_mat(n, 1)
    first: tuple[tuple[Any, list[Any], Any], ...] = ()
    others, points = [], []
    width, start = n + 2, n + n * n + n
    for place, sides in enumerate(word):
        evaluate = _ball_piece(many, sides)
        values = evaluate(*x, r)
        surfaces = [values[start + k * width : start + (k + 1) * width] for k in range(count)]
        if place == 0:
            first = tuple((part[0], list(part[1:-1]), part[-1]) for part in surfaces)
        else:
            others.append(tuple(part[0] for part in surfaces))
        points.append(list(x))
        jacobian = arb_mat(n, n, list(values[n : n + n * n]))
        slope = column(list(values[n + n * n : start]))
        # An edge of the domain anywhere in the box shows as a value that is not finite or may be zero.
        for edge in values[start + count * width :]:
            if not edge.is_finite() or edge.contains(0):
                raise ArithmeticError("the box of a cycle point touches an edge of the formula's domain")
        middle = [value.mid() for value in x]
        centre = column(list(evaluate(*middle, middle_r)[:n]))
        away = column([value - at for value, at in zip(x, middle, strict=True)])
        drift = jacobian * drift + slope
        monodromy = jacobian * monodromy
        x = entries(centre + jacobian * away + slope * spread)
    return PieceWalk(column(x), monodromy, drift, first, tuple(others), tuple(points))
