"""The equations of an onset of a map of several states, with enclosures of them and of their derivatives.

The unknowns are one cycle point x and the parameter r, and for a Neimark-Sacker onset the sum t of the
pair of multipliers. With A the derivative of f^p in x, the equations are f^p(x, r) = x and det(A + 1) = 0
for a flip, det(A - 1) = 0 for a fold, and for a Neimark-Sacker onset that z^2 - t z + 1 divides det(z -
A). Where the Krawczyk test succeeds the equations are regular at their zero. Together with a critical
multiplier that is simple, that alone says that a flip's multiplier crosses -1 with speed, and that at a
fold the parameter moves the cycle at first order and the tangency is of second order. A cycle that is its
own mirror image loses that in a flip of the map seen in the mirror. On a plane that the map takes into
itself the unknowns are the states that move in it, and the equation det(B - 1) = 0 is about the
derivative B across it.
"""

from __future__ import annotations

from collections.abc import Collection, Sequence
from dataclasses import dataclass
from typing import Protocol

from tinemark.verify import intervals as iv
from tinemark.verify import many_cycles as mc
from tinemark.verify import neimark_sacker as ns
from tinemark.verify.calculus import Real
from tinemark.verify.frames import Rows
from tinemark.verify.intervals import ONE, ZERO, Interval
from tinemark.verify.many_cycles import Carried, ManyStates, Vector
from tinemark.verify.matrices import (
    characteristic,
    determinant,
    slope_of_characteristic,
    slope_of_determinant,
)
from tinemark.verify.mirrors import Mirror, Plane
from tinemark.verify.newton import image, inverse, times
from tinemark.verify.normal_form import shifted


class Equations(Protocol):
    """Equations in unknowns, of which one is the parameter."""

    @property
    def parameter(self) -> int:
        """Place of the parameter among the unknowns."""

    def place(self, box: Sequence[Interval], bits: int) -> tuple[Vector, Interval]:
        """Cycle point and parameter."""

    def carried(
        self,
        box: Sequence[Interval],
        bits: int,
        *,
        second: bool = True,
        steps: int = 0,
        visits: Collection[int] = (),
        look_for: Sequence[Interval] | None = None,
    ) -> Carried:
        """The return map with its derivatives on a box; f itself for so many steps where given."""

    def residual(self, place: Sequence[Interval], there: Carried, bits: int) -> Vector:
        """The equations at a point."""

    def slopes(self, box: Sequence[Interval], end: Carried, bits: int) -> Rows:
        """Derivatives of the equations on a box, row by row."""


@dataclass(frozen=True)
class CycleEquations:
    """A return map's critical multipliers: `target` -1 or 1, or a pair on the circle where it is None."""

    many: ManyStates
    steps: int
    target: int | None
    mirror: Mirror | None = None

    @property
    def parameter(self) -> int:
        """Place of the parameter among the unknowns."""
        return self.many.size

    def place(self, box: Sequence[Interval], bits: int) -> tuple[Vector, Interval]:
        """Cycle point and parameter."""
        del bits
        return list(box[: self.many.size]), box[self.many.size]

    def carried(
        self,
        box: Sequence[Interval],
        bits: int,
        *,
        second: bool = True,
        steps: int = 0,
        visits: Collection[int] = (),
        look_for: Sequence[Interval] | None = None,
    ) -> Carried:
        """The return map with its derivatives on a box; f itself for so many steps where given."""
        point, r = self.place(box, bits)
        end = mc.carried(
            self.many, point, r, steps or self.steps, bits, second=second, visits=visits, look_for=look_for
        )
        return end if steps or self.mirror is None else self.mirror.of(end, bits)

    def residual(self, place: Sequence[Interval], there: Carried, bits: int) -> Vector:
        """The equations at a point."""
        point, _ = self.place(place, bits)
        gaps = [iv.sub(x, y, bits) for x, y in zip(there.x, point, strict=True)]
        if self.target is None:
            return [*gaps, *ns.rest(characteristic(there.rows, bits), place[-1], bits)]
        return [*gaps, determinant(off_target(there.rows, self.target, bits), bits)]

    def slopes(self, box: Sequence[Interval], end: Carried, bits: int) -> Rows:
        """Derivatives of the equations on a box, row by row."""
        size = self.many.size
        places = range(size)
        rows = [[_less_one(end, a, i, bits) for a in range(size + 1)] for i in places]
        moves = [[[_second(end, a, j, i) for j in places] for i in places] for a in range(size + 1)]
        if self.target is not None:
            matrix = off_target(end.rows, self.target, bits)
            return [*rows, [slope_of_determinant(matrix, move, bits) for move in moves]]
        t = box[-1]
        columns = [ns.rest(slope_of_characteristic(end.rows, move, bits), t, bits) for move in moves]
        columns.append(ns.slope_of_rest(characteristic(end.rows, bits), t, bits))
        return [*([*row, ZERO] for row in rows), *([column[k] for column in columns] for k in range(2))]


@dataclass(frozen=True)
class PlaneEquations:
    """A multiplier 1 across a plane that the map takes into itself; unknown are its free states and r."""

    many: ManyStates
    steps: int
    plane: Plane

    @property
    def parameter(self) -> int:
        """Place of the parameter among the unknowns."""
        return len(self.plane.free(self.many.size))

    def place(self, box: Sequence[Interval], bits: int) -> tuple[Vector, Interval]:
        """Cycle point and parameter."""
        point = [ZERO] * self.many.size
        for at, side in zip(self.plane.free(self.many.size), box, strict=False):
            point[at] = side
        return self.plane.put(point, bits), box[-1]

    def carried(
        self,
        box: Sequence[Interval],
        bits: int,
        *,
        second: bool = True,
        steps: int = 0,
        visits: Collection[int] = (),
        look_for: Sequence[Interval] | None = None,
    ) -> Carried:
        """f^p with its derivatives on a box."""
        point, r = self.place(box, bits)
        return mc.carried(
            self.many, point, r, steps or self.steps, bits, second=second, visits=visits, look_for=look_for
        )

    def residual(self, place: Sequence[Interval], there: Carried, bits: int) -> Vector:
        """The equations at a point."""
        free = self.plane.free(self.many.size)
        gaps = [iv.sub(there.x[at], side, bits) for at, side in zip(free, place, strict=False)]
        return [*gaps, determinant(off_target(self.across(there), 1, bits), bits)]

    def across(self, end: Carried) -> Rows:
        """The derivative across the plane."""
        return [[end.first[j][i] for j in self.plane.fixed] for i in self.plane.fixed]

    def along(self, end: Carried) -> Rows:
        """The derivative in the plane."""
        free = self.plane.free(self.many.size)
        return [[end.first[j][i] for j in free] for i in free]

    def slopes(self, box: Sequence[Interval], end: Carried, bits: int) -> Rows:
        """Derivatives of the equations on a box, row by row."""
        del box
        free, fixed = self.plane.free(self.many.size), self.plane.fixed
        moving = (*free, self.many.size)
        rows = [[_less_one(end, a, i, bits) for a in moving] for i in free]
        matrix = off_target(self.across(end), 1, bits)
        moves = [[[_second(end, a, j, i) for j in fixed] for i in fixed] for a in moving]
        return [*rows, [slope_of_determinant(matrix, move, bits) for move in moves]]


def _less_one(end: Carried, a: int, i: int, bits: int) -> Interval:
    difference: Interval = iv.sub(end.first[a][i], ONE if a == i else ZERO, bits)
    return difference


def _second(end: Carried, a: int, b: int, i: int) -> Interval:
    return end.second[min(a, b), max(a, b)][i]


def off_target(rows: Rows, target: int, bits: int) -> Rows:
    """A - m at a real critical multiplier m."""
    return shifted(Real(bits), rows, iv.of_whole(target))


def krawczyk(
    equations: Equations, box: Sequence[Interval], bits: int, end: Carried | None = None
) -> list[Interval]:
    """Krawczyk image of a box of all unknowns."""
    if end is None:
        end = equations.carried(box, bits)
    centre = [iv.middle(side, bits) for side in box]
    there = equations.carried(centre, bits, second=False)
    residual = equations.residual(centre, there, bits)
    return image(residual, equations.slopes(box, end, bits), centre, box, bits)


def newton_step(equations: Equations, place: Sequence[Interval], bits: int) -> list[Interval]:
    """What Newton's method takes off a point."""
    end = equations.carried(place, bits)
    near = inverse(equations.slopes(place, end, bits), bits)
    return times(near, equations.residual(place, end, bits), bits)
