"""The equations of an onset of a map of several states, with enclosures of them and of their derivatives.

The unknowns are one cycle point x and the parameter r, and for a Neimark-Sacker onset the sum t of the
pair of multipliers. With A the derivative of f^p in x, the equations are f^p(x, r) = x and det(A + 1) = 0
for a flip, det(A - 1) = 0 for a fold, and for a Neimark-Sacker onset that z^2 - t z + 1 divides det(z -
A). Where the Krawczyk test succeeds the equations are regular at their zero. Together with a critical
multiplier that is simple, that alone says that a flip's multiplier crosses -1 with speed, and that at a
fold the parameter moves the cycle at first order and the tangency is of second order.
"""

from __future__ import annotations

from collections.abc import Sequence

from tinemark.verify import intervals as iv
from tinemark.verify import many_cycles as mc
from tinemark.verify import neimark_sacker as ns
from tinemark.verify.calculus import Real
from tinemark.verify.claims import NEIMARK_SACKER, Paper
from tinemark.verify.frames import Rows
from tinemark.verify.intervals import ONE, ZERO, Interval
from tinemark.verify.many_cycles import Carried, ManyStates
from tinemark.verify.matrices import (
    characteristic,
    determinant,
    slope_of_characteristic,
    slope_of_determinant,
)
from tinemark.verify.newton import image, inverse, times
from tinemark.verify.normal_form import shifted
from tinemark.verify.one_state import TARGETS


def krawczyk(
    many: ManyStates, paper: Paper, box: Sequence[Interval], bits: int, end: Carried | None = None
) -> list[Interval]:
    """Krawczyk image of a box of all unknowns."""
    if end is None:
        end = carried(many, paper, box, bits)
    centre = [iv.middle(side, bits) for side in box]
    there = mc.carried(many, *split(many, centre)[:2], paper.period, bits)
    return image(
        residual(many, paper, centre, there, bits), slopes(many, paper, box, end, bits), centre, box, bits
    )


def newton_step(many: ManyStates, paper: Paper, place: Sequence[Interval], bits: int) -> list[Interval]:
    """What Newton's method takes off a point."""
    end = carried(many, paper, place, bits)
    near = inverse(slopes(many, paper, place, end, bits), bits)
    return times(near, residual(many, paper, place, end, bits), bits)


def carried(many: ManyStates, paper: Paper, box: Sequence[Interval], bits: int) -> Carried:
    """f^p with its first and second derivatives on a box of all unknowns."""
    point, r, _ = split(many, box)
    return mc.carried(many, point, r, paper.period, bits, second=True)


def split(many: ManyStates, box: Sequence[Interval]) -> tuple[list[Interval], Interval, Interval]:
    """Cycle point, parameter, and the sum of the pair (zero where there is none)."""
    size = many.size
    return list(box[:size]), box[size], box[size + 1] if len(box) > size + 1 else ZERO


def residual(
    many: ManyStates, paper: Paper, place: Sequence[Interval], there: Carried, bits: int
) -> list[Interval]:
    """The equations at a point."""
    point, _, t = split(many, place)
    gaps = [iv.sub(x, y, bits) for x, y in zip(there.x, point, strict=True)]
    if paper.kind == NEIMARK_SACKER:
        return [*gaps, *ns.rest(characteristic(there.rows, bits), t, bits)]
    return [*gaps, determinant(off_target(paper, there.rows, bits), bits)]


def off_target(paper: Paper, rows: Rows, bits: int) -> Rows:
    """A - m at a real critical multiplier m."""
    return shifted(Real(bits), rows, iv.of_whole(TARGETS[paper.kind]))


def slopes(many: ManyStates, paper: Paper, box: Sequence[Interval], end: Carried, bits: int) -> Rows:
    """Derivatives of the equations on a box, row by row."""
    size = many.size
    _, _, t = split(many, box)
    rows = [
        [iv.sub(end.first[a][i], ONE if a == i else ZERO, bits) for a in range(size + 1)] for i in range(size)
    ]
    moves = [
        [[end.second[min(a, j), max(a, j)][i] for j in range(size)] for i in range(size)]
        for a in range(size + 1)
    ]
    if paper.kind != NEIMARK_SACKER:
        target = off_target(paper, end.rows, bits)
        return [*rows, [slope_of_determinant(target, move, bits) for move in moves]]
    columns = [ns.rest(slope_of_characteristic(end.rows, move, bits), t, bits) for move in moves]
    columns.append(ns.slope_of_rest(characteristic(end.rows, bits), t, bits))
    return [*([*row, ZERO] for row in rows), *([column[k] for column in columns] for k in range(2))]
