"""The equations of a border collision, for its derivatives: a cycle point lies on a switching surface.

With the piece fixed by hand that holds on one side of the surface, f^p(x) - x = 0 and g(x, r) = 0 are smooth
in the touching point x and the parameter r (di Bernardo, Budd, Champneys & Kowalczyk, 2008). Where the
formula is continuous across the surface both sides give the same derivatives; where it jumps, only that
side counts on which the point comes back to itself.
"""

from __future__ import annotations

import math
from collections.abc import Generator
from dataclasses import dataclass, replace
from fractions import Fraction
from functools import lru_cache
from typing import Any

import numpy as np

from tinemark.onsets.ball_orbits import ball_of, precision
from tinemark.onsets.one_map import put_in
from tinemark.onsets.results import Step
from tinemark.onsets.sensitivity_passes import Course, Passed, run_pass
from tinemark.onsets.smooth_pieces import frozen
from tinemark.systems.balls import ball_function
from tinemark.systems.derivatives import derivative
from tinemark.systems.expression import Expr
from tinemark.systems.plain import plain_function
from tinemark.systems.surfaces import Surface

ON_SURFACE = 1e-6
"""A point that misses its nearest surface by more than this touches none."""


@dataclass(frozen=True)
class Border:
    """A surface touched: its formula on the side in force, and the map's pieces on that side.

    `level` is the whole number at which a floor switches; 0 for any other surface.
    """

    first: Course
    surface: Expr
    level: int


def borders_at(course: Course, x: dict[str, Fraction], r: Fraction) -> tuple[Border, ...]:
    """Both sides of the surface that a point lies on; none where it lies on none."""
    surfaces = course.system.surfaces
    values = [x[name] for name in course.states] + [
        r if name == course.swept else course.fixed[name] for name in course.system.parameter_names
    ]
    measured = plain_function([surface.expr for surface in surfaces], course.system.names)
    heights = [float(value) for value in measured([np.float64(float(value)) for value in values])]
    levels = [
        round(g) if surface.kind == "integer" and math.isfinite(g) else 0
        for surface, g in zip(surfaces, heights, strict=True)
    ]
    misses = [
        abs(g - level) if math.isfinite(g) else math.inf for g, level in zip(heights, levels, strict=True)
    ]
    if not misses or not min(misses) <= ON_SURFACE:
        return ()
    touched = misses.index(min(misses))
    sides = [
        math.floor(g) if surface.kind == "integer" else (1 if g > 0 else -1)
        for surface, g in zip(surfaces, heights, strict=True)
        if math.isfinite(g)
    ]
    if len(sides) != len(surfaces):
        return ()
    level = levels[touched]
    pair = (level - 1, level) if surfaces[touched].kind == "integer" else (-1, 1)
    return tuple(
        _border(course, surfaces, touched, level, (*sides[:touched], side, *sides[touched + 1 :]))
        for side in pair
    )


def _border(
    course: Course, surfaces: tuple[Surface, ...], touched: int, level: int, sides: tuple[int, ...]
) -> Border:
    chosen = dict(zip(surfaces, sides, strict=True))
    pieces = tuple(frozen(formula, chosen) for formula in course.formulas)
    return Border(replace(course, formulas=pieces), frozen(surfaces[touched].expr, chosen), level)


def border_pass(
    course: Course, border: Border, x: list[Any], r: Any, period: int, bits: int
) -> Generator[Step, None, tuple[Passed, list[Any], Any]]:
    """One pass from the touching point.

    Returns
    -------
    passed, slopes, height
        Derivatives of f^p; of the surface's formula in all directions; and that formula's miss.
    """
    passed = yield from run_pass(course, (), [], x, r, period, bits, border.first)
    with precision(bits):
        height, *slopes = _surface(course, border.surface)(*x, r)
        height = (height - ball_of(Fraction(border.level))).mid()
        return passed, [slope.mid() for slope in slopes], height


@lru_cache(maxsize=64)
def _surface(course: Course, surface: Expr) -> Any:
    exprs = [surface, *(derivative(surface, name) for name in course.directions)]
    return ball_function(tuple(put_in(expr, course.fixed) for expr in exprs), (*course.states, course.swept))
