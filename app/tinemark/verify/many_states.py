"""Flips, folds and Neimark-Sacker onsets of maps of several states, proved again on the certificate's box."""

from __future__ import annotations

from collections.abc import Sequence

from tinemark.verify import intervals as iv
from tinemark.verify import many_boxes, neimark_sacker
from tinemark.verify.claims import NEIMARK_SACKER, Numbers, Paper, Part, Refused, Undecided
from tinemark.verify.conservative import see_conservative
from tinemark.verify.decimals import rational, state_unit
from tinemark.verify.intervals import Interval
from tinemark.verify.many_cycles import Carried, ManyStates
from tinemark.verify.many_equations import CycleEquations
from tinemark.verify.matrices import characteristic, check_off_circle, without_root
from tinemark.verify.mirrors import preserves_areas
from tinemark.verify.normal_form import flip_coefficient
from tinemark.verify.one_state import STATE_UNITS, TARGETS, ends_of, hull, prime_factors

ATTEMPTS = 3
SUM_ROOM = (8, 24, 64)
"""Half-widths tried around the sum of a pair, in bits above the widest side of the box."""


def prove(
    many: ManyStates, paper: Paper, numbers: Numbers, bits: int, printed: Sequence[tuple[str, str]]
) -> None:
    """Prove what the certificate claims.

    Raises
    ------
    Refused
        The claim is another one than what is there.
    NotCheckable
        The onset is there, but what is claimed of it cannot be told here.
    """
    sides = [ends_of(side) for side in (*numbers.states, numbers.parameter)]
    look_for = printed_box(many, printed, bits, numbers)
    equations = CycleEquations(many, paper.period, TARGETS.get(paper.kind))
    found, reason = None, ""
    for attempt in range(ATTEMPTS):
        box = [hull(side, bits) for side in sides]
        try:
            end = equations.carried(box, bits)
            if equations.target is None:
                t = _sum_box(equations, box, bits, attempt)
                # On the whole box, so that no pair with another sum is overlooked.
                neimark_sacker.check_alone(end.rows, t, bits)
                box.append(t)
            found = many_boxes.isolated(equations, box, bits, end)
            break
        except Undecided as error:
            reason, bits = error.reason, bits * 3 // 2
    if found is None:
        start = [*(middle for middle, _ in numbers.states), numbers.value]
        if equations.target is None:
            try:
                place = [iv.middle(iv.of_fraction(value, bits), bits) for value in start]
                there = equations.carried(place, bits, second=False)
                start.append(neimark_sacker.sum_near(there.rows, bits))
            except Undecided as error:
                raise Refused(Part.FORMULA, f"no such onset is there ({error.reason})") from error
        many_boxes.blame(equations, numbers, paper.period, start, sides, bits, reason)
    conservative = paper.kind != NEIMARK_SACKER and preserves_areas(many, paper.period, None)

    def claims(narrow: list[Interval], bits: int) -> None:
        end = see_cycle(equations, paper, narrow, bits, look_for)
        if paper.kind == NEIMARK_SACKER:
            m = neimark_sacker.check_pair(narrow[-1], end.rows, bits)
            neimark_sacker.check_side(many, paper, narrow[:-1], end.rows, m, bits)
        elif conservative:
            see_conservative(equations, paper, narrow, end.rows, bits)
        else:
            see_flip_or_fold(equations, paper, narrow, end, bits)

    many_boxes.see_claims(equations, numbers, paper.period, found, bits, claims)


def _sum_box(equations: CycleEquations, box: Sequence[Interval], bits: int, attempt: int) -> Interval:
    centre = [iv.middle(side, bits) for side in box]
    near = neimark_sacker.sum_near(equations.carried(centre, bits, second=False).rows, bits)
    widest = max(high - low for low, high in map(iv.ends, box))
    room = widest * 2 ** SUM_ROOM[attempt]
    return hull((near - room, near + room), bits)


def see_cycle(
    equations: CycleEquations,
    paper: Paper,
    narrow: Sequence[Interval],
    bits: int,
    look_for: Sequence[Interval] | None,
) -> Carried:
    """The return map on a narrow box, after the least period and the printed point have been looked at."""
    steps = sorted({paper.period // prime for prime in prime_factors(paper.period)})
    # Once round, so that a mirrored part is known to be defined as well.
    once = equations.carried(narrow, bits, second=False, steps=paper.period, visits=steps, look_for=look_for)
    point, _ = equations.place(narrow, bits)
    many_boxes.see_period(paper.period, once, point, bits)
    if look_for is not None and not once.near:
        raise Refused(Part.STATE, "the printed cycle point does not belong to the cycle")
    return once if equations.mirror is None else equations.carried(narrow, bits, second=False)


def see_flip_or_fold(
    equations: CycleEquations, paper: Paper, narrow: Sequence[Interval], end: Carried, bits: int
) -> None:
    """No other multiplier on the circle, and the claimed side of a flip, which may be one in a mirror."""
    target = equations.target
    assert target is not None
    check_off_circle(without_root(characteristic(end.rows, bits), target, bits), bits)
    if target > 0:
        if paper.criticality:
            raise Refused(Part.CRITICALITY, "a fold has none")
        return
    place = narrow[: equations.parameter + 1]
    coefficient = flip_coefficient(equations.many, place, end.rows, equations.steps, bits, equations.mirror)
    see_side(paper, iv.sign(coefficient))


def see_side(paper: Paper, side: int) -> None:
    """Compare the claimed criticality with a coefficient's sign, positive where the new cycle is stable."""
    if side == 0:
        raise Undecided(f"the sign of the {paper.kind}'s coefficient cannot be told on this box")
    there = "supercritical" if side > 0 else "subcritical"
    if paper.criticality != there:
        raise Refused(
            Part.CRITICALITY, f"the {paper.kind} is {there}, not {paper.criticality or 'without a side'}"
        )


def printed_box(
    many: ManyStates, printed: Sequence[tuple[str, str]], bits: int, numbers: Numbers
) -> list[Interval] | None:
    """Where a printed cycle point may lie; None where none is printed."""
    if not printed:
        return None
    texts = dict(printed)
    found = []
    for name in many.states:
        value = rational(texts[name]) if name in texts else None
        if value is None:
            raise Refused(Part.STATE, "the printed cycle point is no point to work with")
        room = STATE_UNITS * state_unit(texts[name], numbers.digits)
        found.append(hull((value - room, value + room), bits))
    return found
