"""Flips, folds and pitchforks of maps of two states that preserve areas: both multipliers meet.

With det A = 1 exactly, A the derivative of the return map, both multipliers are -1 at a flip and 1 at a
fold. The generic case is A - m = c v l, not zero, with l v = 0. At a flip the doubled cycle is found at K
s^2 + (l A' v) dr = 0 with K = <l, C(v, v, v) + 3 B(v, (1 - A)^-1 B(v, v))> / 6, A' the derivative along
the cycle, while the trace moves by -c (l A' v) dr: the doubled cycle is stable where the other is not,
that is, where c K < 0 (reduced after Lyapunov and Schmidt; Meyer, 1970). That the trace passes -2 with
speed, or at a fold that the tangency is of second order, is the regularity of the equations.
"""

from __future__ import annotations

from collections.abc import Sequence

from tinemark.verify import intervals as iv
from tinemark.verify.calculus import Real
from tinemark.verify.claims import Paper, Part, Refused, Undecided
from tinemark.verify.frames import Rows
from tinemark.verify.intervals import Interval
from tinemark.verify.many_equations import CycleEquations, off_target
from tinemark.verify.normal_form import cubic, null_vectors


def see_conservative(
    equations: CycleEquations, paper: Paper, narrow: Sequence[Interval], rows: Rows, bits: int
) -> None:
    """See that the multipliers meet in a Jordan block, and on which side the doubled cycle is.

    Raises
    ------
    Refused
        It is on the other side.
    Undecided
        Either cannot be told.
    """
    target = equations.target
    assert target is not None
    matrix = off_target(rows, target, bits)
    v, left = null_vectors(Real(bits), matrix)
    factor = _factor(matrix, v, left)
    if target > 0:
        if paper.criticality:
            raise Refused(Part.CRITICALITY, "a fold has none")
        return
    place = narrow[: equations.parameter + 1]
    side = -factor * iv.sign(
        cubic(equations.many, place, rows, equations.steps, v, left, bits, equations.mirror)
    )
    if side == 0:
        raise Undecided(f"the sign of the {paper.kind}'s coefficient cannot be told on this box")
    there = "supercritical" if side > 0 else "subcritical"
    if paper.criticality != there:
        raise Refused(
            Part.CRITICALITY, f"the {paper.kind} is {there}, not {paper.criticality or 'without a side'}"
        )


def _factor(matrix: Rows, v: Sequence[Interval], left: Sequence[Interval]) -> int:
    """Sign of c in c v l."""
    for row, x in zip(matrix, v, strict=True):
        for entry, y in zip(row, left, strict=True):
            sign = iv.sign(entry) * iv.sign(x) * iv.sign(y)
            if sign:
                return sign
    raise Undecided("the multipliers may meet without a Jordan block")
