"""Cycles on invariant planes: some states stay at constants there, whatever the others and the parameter do.

An empty patch stays empty, and a predator that is not there does not appear. Beside such a plane the map
is linear to first order, w -> B(u, r) w with u the states that move in it and w those that are constant, as
deviations. Where a cycle in the plane has a multiplier 1 across it, another branch of cycles crosses. Put a
minus sign after the last step, and that is a flip of (u, w) -> (F(u, r), -B(u, r) w), whose equations are
regular; w is zero in it because 1 is no multiplier of -B along the cycle.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from functools import lru_cache
from typing import Any

from tinemark.onsets.exact_identities import nearby_constant, replaced, vanishes
from tinemark.onsets.formula_words import formula_words
from tinemark.onsets.many_map import FloatManyMap, Floats, ManyMap
from tinemark.onsets.many_symmetry import constant_ball
from tinemark.systems.derivatives import derivative
from tinemark.systems.expression import ZERO, Call, Expr, Name

LONGEST = 8
"""Longest cycle whose points are tried as constants."""


@dataclass(frozen=True)
class Plane:
    """Constants that some states keep at the points of a cycle.

    Attributes
    ----------
    fixed
        Places of these states.
    points
        Their values at each point, in the order of `fixed`.
    """

    fixed: tuple[int, ...]
    points: tuple[tuple[Expr, ...], ...]

    def at(self, many: ManyMap, place: int) -> dict[str, Expr]:
        """The constants at a point, by the names of the states."""
        names = [many.states[at] for at in self.fixed]
        return dict(zip(names, self.points[place % len(self.points)], strict=True))

    def put(self, place: int, states: Sequence[Any]) -> list[Any]:
        """A point of balls whose fixed states are their constants, at the precision in force."""
        point = list(states)
        for at, value in zip(self.fixed, self.points[place % len(self.points)], strict=True):
            point[at] = constant_ball(value)
        return point

    def words(self, many: ManyMap) -> str:
        """Which cycle it is, such as x = 0, y = 0."""
        names = [many.states[at] for at in self.fixed]
        first = [
            f"{name} = {formula_words(value)}" for name, value in zip(names, self.points[0], strict=True)
        ]
        return ", ".join(first)


def plane_of(float_map: FloatManyMap, points: Floats, scales: Floats) -> Plane | None:
    """The largest invariant plane that a cycle lies on, exactly; None where there is none."""
    many = float_map.many
    if len(points) > LONGEST:
        return None
    table = [
        [nearby_constant(float(value), float(scale)) for value, scale in zip(point, scales, strict=True)]
        for point in points
    ]
    fixed = tuple(at for at in range(many.size) if all(row[at] is not None for row in table))
    while fixed:
        constants = tuple(tuple(part for at in fixed if (part := row[at]) is not None) for row in table)
        plane = Plane(fixed, constants)
        holding = _holding(many, plane)
        if holding == fixed:
            return plane
        fixed = holding
    return None


@lru_cache(maxsize=128)
def _holding(many: ManyMap, plane: Plane) -> tuple[int, ...]:
    """The fixed states that are still at their constants one step on, whatever the free ones are."""
    count = len(plane.points)
    return tuple(
        at
        for column, at in enumerate(plane.fixed)
        if all(
            vanishes(
                Call(
                    "sub",
                    (
                        replaced(many.formulas[at], plane.at(many, place)),
                        plane.points[(place + 1) % count][column],
                    ),
                )
            )
            for place in range(count)
        )
    )


@lru_cache(maxsize=64)
def map_beside(many: ManyMap, plane: Plane) -> ManyMap:
    """(u, w) -> (F(u, r), B(u, r) w) at each point, with a minus sign before B after the last."""
    count = len(plane.points)
    steps = []
    for place in range(count):
        constants = plane.at(many, place)
        formulas = []
        for at, formula in enumerate(many.formulas):
            if at not in plane.fixed:
                formulas.append(replaced(formula, constants))
                continue
            total: Expr = ZERO
            for other in plane.fixed:
                slope = replaced(derivative(formula, many.states[other]), constants)
                if slope != ZERO:
                    term = Call("mul", (slope, Name(many.states[other])))
                    total = term if total == ZERO else Call("add", (total, term))
            formulas.append(Call("neg", (total,)) if place == count - 1 and total != ZERO else total)
        steps.append(replace(many, formulas=tuple(formulas)))
    return replace(many, steps=tuple(steps))
