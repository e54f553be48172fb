"""Where two branches of cycles of several states cross, solved for to many digits before any proof.

There f^p - x has a singular derivative and no push along its left null vector, so that the equations of a
fold are singular too. With an unfolding l they are regular (Moore 1980, Numer. Funct. Anal. Optim.
2:441):

    f^p(x, r) - x + l b = 0,   g(x, r) = 0,   w f^p_r = 0,

with g the bordering function of f^p_x - 1, zero where 1 is a multiplier, and w the left null vector that the
same bordered matrix gives (Govaerts 2000, chapter 4). Where branches cross, l comes out as zero.
"""

from __future__ import annotations

import math
from collections.abc import Generator
from dataclasses import dataclass
from typing import Any

import numpy as np
from flint import arb, arb_mat

from tinemark.onsets.ball_orbits import precision
from tinemark.onsets.many_cycles import Cycle, condensed
from tinemark.onsets.many_map import FloatManyMap, Floats, ManyMap, evaluators_along
from tinemark.onsets.many_polish import NotFound
from tinemark.onsets.many_preparation import worked_out
from tinemark.onsets.many_shooting import column, entries, in_turn
from tinemark.onsets.results import Step

MOST_STEPS = 40
UNFOLDED = 1e-6
"""A crossing whose unfolding, in scaled states, is larger than this is none: the branches miss each other."""
FIRST_FREE_STEP = 0.1
"""Share of the states' scale by which a first step may move."""


@dataclass(frozen=True)
class CrossingPoint:
    """A crossing of branches at one precision.

    Attributes
    ----------
    points
        Cycle points: p lists of n exact balls.
    r
        The parameter, an exact ball.
    vector, left
        Right and left null vectors of f^p_x - 1 at the first point, exact balls.
    bend
        w B(v, v) for these.
    unfolding
        Scaled size of l.
    last_step
        Size of the last Newton step in the parameter, and no less than rounding.
    """

    points: list[list[Any]]
    r: Any
    vector: list[Any]
    left: list[Any]
    bend: Any
    unfolding: float
    last_step: float


@dataclass(frozen=True)
class _State:
    residual: list[Any]
    vector: list[Any]
    left: list[Any]
    size: float


class _Equations:
    """The unfolded equations, for points scaled by the states' lengths and the parameter by a reach."""

    def __init__(self, many: ManyMap, period: int, border: tuple[Floats, Floats], scales: Floats) -> None:
        self.along = evaluators_along(many, period)
        self.n, self.period = many.size, period
        self.column, self.row = border
        self.scales = [float(value) for value in scales]

    def at(self, unknowns: list[Any], bits: int, text: str) -> Generator[Step, None, _State]:
        """Residuals at (x, r, l), x in units of the scales."""
        n, zeros = self.n, [0] * self.n
        with precision(bits):
            now = [value * scale for value, scale in zip(unknowns[:n], self.scales, strict=True)]
            start, r = now, unknowns[n]
            moved = arb_mat(n, n + 1, [int(i == j) for i in range(n) for j in range(n + 1)])

        def advance(place: int) -> None:
            nonlocal now, moved
            values = self.along[place].critical(*now, r, *zeros)
            jacobian = arb_mat(n, n, [value.mid() for value in values[n : n + n * n]])
            push = [value.mid() for value in values[n + n * n : 2 * n + n * n]]
            moved = (jacobian * moved).mid()
            moved = arb_mat(
                n, n + 1, [moved[i, j] + (push[i] if j == n else 0) for i in range(n) for j in range(n + 1)]
            ).mid()
            now = [value.mid() for value in values[:n]]

        yield from in_turn(self.period, bits, text, advance)
        with precision(bits):
            inverse = [1 / arb(scale) for scale in self.scales]
            # In scaled states, as the border is.
            matrix = [
                [moved[i, j] * inverse[i] * self.scales[j] - int(i == j) for j in range(n)] for i in range(n)
            ]
            slope = [moved[i, n] * inverse[i] for i in range(n)]
            rows = [[*matrix[i], arb(float(self.column[i]))] for i in range(n)]
            rows.append([*(arb(float(value)) for value in self.row), arb(0)])
            bordered = arb_mat(n + 1, n + 1, [value.mid() for row in rows for value in row])
            unit = column([arb(0)] * n + [arb(1)])
            try:
                right = entries(bordered.solve(unit, algorithm="approx"))
                left = entries(bordered.transpose().solve(unit, algorithm="approx"))
            except ZeroDivisionError as error:
                raise NotFound("the equations of the crossing are singular there") from error
            gaps = [
                (end - begin) * scale + unknowns[n + 1] * float(border)
                for end, begin, scale, border in zip(now, start, inverse, self.column, strict=True)
            ]
            pushed = sum((a * b for a, b in zip(left[:n], slope, strict=True)), arb(0))
            residual = [value.mid() for value in (*gaps, right[n], pushed)]
            size = max(abs(float(value)) for value in residual)
        return _State(residual, [v.mid() for v in right[:n]], [v.mid() for v in left[:n]], size)


def crossing_point(
    float_map: FloatManyMap, rough: Cycle, bits: int, scales: Floats, reach: float
) -> Generator[Step, None, CrossingPoint]:
    """Newton's method for a crossing of branches from a rough cycle near it.

    Raises
    ------
    NotFound
        No convergence, the parameter left its reach, or the branches miss each other.
    """
    many, n, text = float_map.many, float_map.many.size, f"polishing a crossing of period {rough.period}"
    yield from worked_out(many, 2)
    matrix = condensed(float_map, rough.points, rough.r).monodromy * scales / scales[:, None]
    if not np.isfinite(matrix).all():
        raise NotFound("the orbit left the domain of the formula")
    left, _, right = np.linalg.svd(matrix - np.eye(n))
    equations = _Equations(many, rough.period, (left[:, -1], right[-1]), scales)
    unit = reach or abs(rough.r) or 1.0
    with precision(bits):
        place = [arb(float(value / scale)) for value, scale in zip(rough.points[0], scales, strict=True)]
        place += [arb(float(rough.r)), arb(0)]
        step = arb(2) ** (-(bits // 2))
    last = math.inf
    for count in range(MOST_STEPS):
        here = yield from equations.at(place, bits, text)
        columns = []
        for at in range(n + 2):
            with precision(bits):
                shift = step * (unit if at == n else 1)
                beside = [value + (shift if k == at else 0) for k, value in enumerate(place)]
            there = yield from equations.at(beside, bits, text)
            with precision(bits):
                columns.append(
                    [((b - a) / shift).mid() for a, b in zip(here.residual, there.residual, strict=True)]
                )
        with precision(bits):
            table = arb_mat(n + 2, n + 2, [columns[j][i] for i in range(n + 2) for j in range(n + 2)])
            try:
                moves = entries(table.solve(column(here.residual), algorithm="approx"))
            except ZeroDivisionError as error:
                raise NotFound("the equations of the crossing are singular there") from error
            sizes = [abs(float(move)) for move in moves]
            if not all(map(math.isfinite, sizes)) or (count == 0 and max(sizes[:n]) > FIRST_FREE_STEP):
                raise NotFound("Newton's method found no crossing of branches")
            place = [(value - move).mid() for value, move in zip(place, moves, strict=True)]
            if abs(float(place[n]) - rough.r) > reach:
                raise NotFound("Newton's method left the neighbourhood")
            size = max(max(sizes[:n]), sizes[n] / unit)
        if size < 2.0 ** (-bits / 2) or (size < 2.0 ** (-bits / 3) and size > last / 4):
            # The last step was taken with differences: what it left is smaller than it by their error.
            left_over = max(
                sizes[n] * 2.0 ** (-bits / 4), 2.0 ** (8 - bits) * max(abs(float(place[n])), 1e-30)
            )
            return (yield from _finished(equations, place, here, left_over, bits, text))
        last = size
    raise NotFound("Newton's method did not converge")


def _finished(
    equations: _Equations, place: list[Any], near: _State, last_step: float, bits: int, text: str
) -> Generator[Step, None, CrossingPoint]:
    n = equations.n
    unfolding = abs(float(place[n + 1]))
    if unfolding > UNFOLDED:
        raise NotFound("the branches pass each other without crossing")
    with precision(bits):
        start = [value * scale for value, scale in zip(place[:n], equations.scales, strict=True)]
        r, step = place[n], arb(2) ** (-(bits // 3))
        length = sum((value * value for value in near.vector), arb(0)).sqrt()
        direction = [(value / length).mid() for value in near.vector]
    points: list[list[Any]] = []
    ends = []
    for side in (0, 1, -1):
        with precision(bits):
            now = [
                (value + side * step * move * scale).mid()
                for value, move, scale in zip(start, direction, equations.scales, strict=True)
            ]

        def advance(at: int, side: int = side) -> None:
            nonlocal now
            if side == 0:
                points.append(now)
            now = [value.mid() for value in equations.along[at].step(*now, r)]

        yield from in_turn(equations.period, bits, text, advance)
        ends.append(now)
    with precision(bits):
        weight = sum((abs(value) for value in near.left), arb(0))
        middle, ahead, behind = ends
        second = [(a - 2 * m + b) / step**2 for m, a, b in zip(middle, ahead, behind, strict=True)]
        pairs = zip(near.left, second, equations.scales, strict=True)
        bend = sum((p * value / scale for p, value, scale in pairs), arb(0)) / weight
        vector = [(value * scale).mid() for value, scale in zip(direction, equations.scales, strict=True)]
        left = [(value / scale).mid() for value, scale in zip(near.left, equations.scales, strict=True)]
        return CrossingPoint(points, r, vector, left, bend.mid(), unfolding, last_step)
