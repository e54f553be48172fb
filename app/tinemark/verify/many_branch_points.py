"""Pitchforks and transcritical points of maps of several states, which something that holds exactly makes.

A cycle that comes to its mirror image after q steps is a fixed point of g = S f^q + c, and loses its
symmetry where g has a multiplier -1: a flip of g, with all of a flip's claims (Swift & Wiesenfeld, 1984).
Where each point is its own image (q the whole period) the critical vector must be turned round by S. A
cycle on a plane that the map takes into itself is crossed by another branch where it has a multiplier 1
across the plane: at an angle where <p, B(q, q)> is not zero, q and p the critical vectors of f^p
(Kuznetsov, 2004, section 7.4).
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from fractions import Fraction
from typing import NoReturn

from tinemark.verify import intervals as iv
from tinemark.verify import many_boxes
from tinemark.verify import many_cycles as mc
from tinemark.verify.calculus import Real
from tinemark.verify.claims import NotCheckable, Numbers, Paper, Part, Refused, Undecided
from tinemark.verify.conservative import see_conservative
from tinemark.verify.intervals import ZERO, Interval
from tinemark.verify.many_cycles import Carried, ManyStates
from tinemark.verify.many_equations import CycleEquations, PlaneEquations, off_target
from tinemark.verify.many_states import printed_box, see_cycle, see_flip_or_fold
from tinemark.verify.matrices import characteristic, check_off_circle, determinant, without_root
from tinemark.verify.mirrors import (
    Mirror,
    Plane,
    commutes,
    constant_in,
    exchanges,
    plane_through,
    preserves_areas,
)
from tinemark.verify.normal_form import null_vectors, quadratic
from tinemark.verify.one_state import ends_of, hull, prime_factors, see_box_at_value

ATTEMPTS = 3
LONGEST_ON_PLANE = 64
NEAR = Fraction(1, 1000)
"""So near to zero a determinant has to be before a symmetry counts as one that may break there."""
UNTOLD = "no identity of the formulas was found that makes two branches meet there"


def prove(
    many: ManyStates, paper: Paper, numbers: Numbers, bits: int, printed: Sequence[tuple[str, str]]
) -> None:
    """Prove what the certificate claims.

    Raises
    ------
    Refused
        The claim is another one than what is there.
    NotCheckable
        What makes the branches meet is not recognised.
    """
    box = [hull(ends_of(side), bits) for side in (*numbers.states, numbers.parameter)]
    look_for = printed_box(many, printed, bits, numbers)
    whole = _once_round(many, paper, box, bits)
    if paper.kind == "transcritical":
        plane = _plane(many, paper, whole, bits)
        if next(_mirrors(many, paper, box, bits), None) is not None:
            raise Refused(Part.KIND, "a symmetry breaks there: a pitchfork, no transcritical point")
        if plane is None:
            _untold(many, paper, numbers, box, bits, look_for)
        _transcritical(PlaneEquations(many, paper.period, plane), paper, numbers, bits, look_for)
        return
    for mirror, steps in _mirrors(many, paper, box, bits):
        equations = CycleEquations(many, steps, -1, mirror)
        _pitchfork(equations, paper, numbers, bits, look_for)
        return
    if _plane(many, paper, whole, bits) is not None:
        raise Refused(Part.KIND, "a cycle on a plane is crossed there: transcritical, no pitchfork")
    _untold(many, paper, numbers, box, bits, look_for)


def _plane(many: ManyStates, paper: Paper, whole: Carried, bits: int) -> Plane | None:
    if paper.period > LONGEST_ON_PLANE:
        return None
    return plane_through(many, [whole.visits[step] for step in range(paper.period)], bits)


def _once_round(many: ManyStates, paper: Paper, box: list[Interval], bits: int) -> Carried:
    """f^p on the box; refuses what is no cycle of this period, or has no multiplier near 1."""
    early = sorted({paper.period // prime for prime in prime_factors(paper.period)})
    steps = range(paper.period) if paper.period <= LONGEST_ON_PLANE else early
    try:
        end = mc.carried(many, box[:-1], box[-1], paper.period, bits, visits=steps)
    except Undecided as error:
        raise Refused(Part.FORMULA, f"no cycle is where value and box say it is ({error.reason})") from error
    for step in early:
        if not any(_gap(x, y, bits) > 0 for x, y in zip(end.visits[step], box, strict=False)):
            raise Refused(
                Part.PERIOD,
                f"the cycle closes after {step} steps already: its least period is not {paper.period}",
            )
    if any(_gap(x, y, bits) > NEAR for x, y in zip(end.x, box, strict=False)):
        raise Refused(Part.PERIOD, f"the cycle does not close after {paper.period} steps")
    if _gap(determinant(off_target(end.rows, 1, bits), bits), ZERO, bits) > NEAR:
        raise Refused(Part.KIND, "no multiplier is +1 there, so no branches meet")
    return end


def _gap(x: Interval, y: Interval, bits: int) -> Fraction:
    low, high = iv.ends(iv.sub(x, y, bits))
    return max(Fraction(0), low, -high)


def _untold(
    many: ManyStates,
    paper: Paper,
    numbers: Numbers,
    box: list[Interval],
    bits: int,
    look_for: Sequence[Interval] | None,
) -> NoReturn:
    """Say why no identity was found: the box or the formula was changed, or what holds is not known here."""
    if look_for is not None and any(_gap(x, y, bits) > 0 for x, y in zip(look_for, box, strict=False)):
        raise Refused(Part.BOX, "the box does not hold the printed cycle point")
    see_box_at_value(numbers)
    end = mc.carried(many, box[:-1], box[-1], paper.period, bits)
    if any(_gap(x, y, bits) > 0 for x, y in zip(end.x, box, strict=False)):
        raise Refused(Part.FORMULA, "the cycle does not close where value and box say it does")
    raise NotCheckable(UNTOLD)


# Pitchforks


def _mirrors(many: ManyStates, paper: Paper, box: list[Interval], bits: int) -> Iterator[tuple[Mirror, int]]:
    """Reflections that the map commutes with and that take the cycle into itself, and after which steps."""
    period = paper.period
    for steps in (period, *([period // 2] if period % 2 == 0 else [])):
        end = mc.carried(many, box[:-1], box[-1], steps, bits)
        for order, signs in exchanges(many.size):
            bare = Mirror(order, signs)
            seen = [bare.turned(column) for column in end.first]
            rows = [[seen[j][i] for j in range(many.size)] for i in range(many.size)]
            if _gap(determinant(off_target(rows, -1, bits), bits), ZERO, bits) > NEAR:
                continue
            shift = [iv.sub(x, y, bits) for x, y in zip(box, bare.turned(end.x), strict=False)]
            known = [constant_in(part, bits) for part in shift]
            mirror = Mirror(order, signs, tuple(part for part in known if part is not None))
            if len(mirror.shift) == many.size and commutes(many, mirror):
                yield mirror, steps


def _pitchfork(
    equations: CycleEquations,
    paper: Paper,
    numbers: Numbers,
    bits: int,
    look_for: Sequence[Interval] | None,
) -> None:
    many, mirror = equations.many, equations.mirror
    assert mirror is not None
    sides = [ends_of(side) for side in (*numbers.states, numbers.parameter)]
    found, reason = None, ""
    for _ in range(ATTEMPTS):
        box = [hull(side, bits) for side in sides]
        try:
            found = many_boxes.isolated(equations, box, bits)
            break
        except Undecided as error:
            reason, bits = error.reason, bits * 3 // 2
    if found is None:
        start = [*(middle for middle, _ in numbers.states), numbers.value]
        many_boxes.blame(equations, numbers, paper.period, start, sides, bits, reason)
    conservative = preserves_areas(many, equations.steps, mirror)

    def claims(narrow: list[Interval], bits: int) -> None:
        if equations.steps == paper.period:
            _see_own_image(mirror, narrow, sides, bits)
        end = see_cycle(equations, paper, narrow, bits, look_for)
        if equations.steps == paper.period:
            _see_turned(mirror, end, bits)
        if conservative:
            see_conservative(equations, paper, narrow, end.rows, bits)
        else:
            see_flip_or_fold(equations, paper, narrow, end, bits)

    many_boxes.see_claims(equations, numbers, paper.period, found, bits, claims)


def _see_own_image(
    mirror: Mirror, narrow: Sequence[Interval], sides: Sequence[tuple[Fraction, Fraction]], bits: int
) -> None:
    """The image of the solution is one as well: where it lies in the box that holds one, it is the same."""
    image = mirror.image(narrow[:-1], bits)
    for side, (low, high) in zip(image, sides, strict=False):
        bottom, top = iv.ends(side)
        if not low <= bottom <= top <= high:
            raise Undecided("it cannot be told that the cycle's points are their own mirror images")


def _see_turned(mirror: Mirror, end: Carried, bits: int) -> None:
    """The critical vector goes over into plus or minus itself, so one component that differs tells."""
    q, _ = null_vectors(Real(bits), off_target(end.rows, -1, bits))
    same = [iv.sub(x, y, bits) for x, y in zip(mirror.turned(q), q, strict=True)]
    if not any(iv.sign(part) for part in same):
        raise Refused(Part.KIND, "the symmetry does not turn the critical direction round: no pitchfork")


# Transcritical points


def _transcritical(
    equations: PlaneEquations,
    paper: Paper,
    numbers: Numbers,
    bits: int,
    look_for: Sequence[Interval] | None,
) -> None:
    many, plane = equations.many, equations.plane
    free = plane.free(many.size)
    kept = [*(numbers.states[place] for place in free), numbers.parameter]
    sides = [ends_of(side) for side in kept]
    found, reason = None, ""
    for _ in range(ATTEMPTS):
        try:
            found = many_boxes.isolated(equations, [hull(side, bits) for side in sides], bits)
            break
        except Undecided as error:
            reason, bits = error.reason, bits * 3 // 2
    if found is None:
        start = [*(middle for middle, _ in kept[:-1]), numbers.value]
        many_boxes.blame(equations, numbers, paper.period, start, sides, bits, reason)
    if paper.criticality:
        raise Refused(Part.CRITICALITY, "a transcritical point has none")

    def claims(narrow: list[Interval], bits: int) -> None:
        point, r = equations.place(narrow, bits)
        steps = sorted({paper.period // prime for prime in prime_factors(paper.period)})
        end = equations.carried(narrow, bits, second=False, visits=steps, look_for=look_for)
        many_boxes.see_period(paper.period, end, point, bits)
        if look_for is not None and not end.near:
            raise Refused(Part.STATE, "the printed cycle point does not belong to the cycle")
        check_off_circle(without_root(characteristic(equations.across(end), bits), 1, bits), bits)
        if free:
            check_off_circle(characteristic(equations.along(end), bits), bits)
        # What leads off the plane from in it is zero exactly.
        rows = [
            [ZERO if i in plane.fixed and j in free else entry for j, entry in enumerate(row)]
            for i, row in enumerate(end.rows)
        ]
        q, p = null_vectors(Real(bits), off_target(rows, 1, bits))
        if iv.sign(quadratic(many, [*point, r], paper.period, q, p, bits)) == 0:
            raise Undecided("the branches may touch instead of crossing at an angle")

    many_boxes.see_claims(equations, numbers, paper.period, found, bits, claims)
