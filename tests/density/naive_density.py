"""Slow, obvious versions of what the density room computes, and pictures to compare them on."""

from __future__ import annotations

import math
from collections.abc import Callable
from fractions import Fraction

import numpy as np

from tinemark.density.field import Field
from tinemark.density.renderer import append, create, snapshot
from tinemark.density.request import PictureRequest, SweepRule, View
from tinemark.systems.library import builtin_system
from tinemark.systems.system import System
from tinemark.systems.system_file import read_system_text

Step = Callable[[tuple[float, ...], float], tuple[float, ...]]


def logistic(state: tuple[float, ...], r: float) -> tuple[float, ...]:
    (x,) = state
    return (r * x * (1 - x),)


def counts(request: PictureRequest, step: Step, steps: int) -> np.ndarray:
    """Visits of the first state to the cells, shape (rows, columns)."""
    view = request.view
    result = np.zeros((request.rows, request.columns), np.uint32)
    for j in range(request.columns):
        parameter = float(view.left + view.width * (2 * j + 1) / (2 * request.columns))
        state = tuple(float(s.start) for s in request.system.states)
        for n in range(request.transient_steps + steps):
            state = step(state, parameter)
            if n >= request.transient_steps and math.isfinite(state[0]):
                row = math.floor((state[0] - float(view.bottom)) / float(view.height) * request.rows)
                if 0 <= row < request.rows:
                    result[row, j] += 1
    return result


def view(left: str, right: str, bottom: str = "0", top: str = "1") -> View:
    return View(Fraction(left), Fraction(right), Fraction(bottom), Fraction(top))


def picture(
    system: System | str,
    where: View,
    *,
    columns: int = 96,
    rows: int = 100,
    rule: SweepRule = SweepRule.FRESH,
    transient: int = 500,
    starts: int = 1,
    observe: str = "",
) -> PictureRequest:
    chosen = builtin_system(system) if isinstance(system, str) else system
    return PictureRequest(
        chosen,
        chosen.diagram_parameter,
        observe or chosen.observe,
        where,
        columns,
        rows,
        rule,
        transient,
        starts,
    )


def drawn(request: PictureRequest, steps: int) -> Field:
    drawing = create(request)
    append(drawing, steps)
    return snapshot(drawing)


def around(value: str, reach: str = "1e-12") -> View:
    """A narrow view with the value in the middle."""
    middle, half = Fraction(value), Fraction(reach)
    return View(middle - half, middle + half, Fraction(0), Fraction(1))


def map_of(
    formula: str, start: str = "0.4", parameters: str = 'r = { value = "1" }', extra: str = ""
) -> System:
    """A one-state system from its formula."""
    return read_system_text(
        f'title = "Test"\nkind = "map"\n[states.x]\nstart = "{start}"\n{extra}\n'
        f'[parameters]\n{parameters}\n[next]\nx = "{formula}"\n'
        '[diagram]\nparameter = "r"\nobserve = "x"\n'
    )
