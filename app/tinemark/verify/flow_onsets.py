"""Flips and folds of driven and free-running systems, proved again on the certificate's box.

The return map is enclosed by `flow_map`, and the proof is that of a map of several states. Besides it is
shown that the return map is what it is called: the rates repeat with the strobe, or the orbit passes the
section in the counted direction for the first time where it is stopped.
"""

from __future__ import annotations

from collections.abc import Sequence
from fractions import Fraction

from tinemark.verify import intervals as iv
from tinemark.verify.algebra import Field
from tinemark.verify.claims import NotCheckable, Numbers, Paper, Part, Refused, Undecided
from tinemark.verify.courses import plan_of
from tinemark.verify.flow_map import Equations, FlowMap
from tinemark.verify.flow_passages import see_passages
from tinemark.verify.flow_pieces import with_pieces
from tinemark.verify.formula import Program
from tinemark.verify.intervals import Interval
from tinemark.verify.many_cycles import Carried
from tinemark.verify.many_equations import CycleEquations, krawczyk
from tinemark.verify.many_states import printed_box, see_cycle, see_flip_or_fold
from tinemark.verify.newton import inside
from tinemark.verify.one_state import TARGETS, ends_of, hull, is_within, prime_factors, see_box_at_value
from tinemark.verify.quotients import Untold, number
from tinemark.verify.system import TIME, Plain, programs, sampling
from tinemark.verify.watching import Watch

KINDS = tuple(TARGETS)
ATTEMPTS = 2
COARSE_BITS = (72, 104)
"""Precision for derivatives beyond the first, and for signs."""
PASSES = 6
"""Work of a whole check, in that of going once along the cycle without derivatives, for a state or none."""
LEAST_WORK = 20_000.0
"""Work that is expected before it is known."""


def prove(
    plain: Plain, paper: Paper, numbers: Numbers, bits: int, printed: Sequence[tuple[str, str]], watch: Watch
) -> None:
    """Prove what the certificate claims.

    Raises
    ------
    Refused
        The claim is another one than what is there.
    NotCheckable, Undecided
        It cannot be told here.
    """
    if paper.kind not in KINDS:
        raise NotCheckable(f"a {paper.kind[:40]} of driven and free-running systems is not checked here")
    rates = programs(plain, paper.parameter)
    sample = sampling(plain, paper.parameter)
    driven = plain.sample.kind == "driven"
    equations = Equations(
        plain.states,
        paper.parameter,
        plan_of(rates if driven else (*rates, sample)),
        plan_of((sample,)) if driven else None,
    )
    if driven:
        see_repeats(plain, paper.parameter, rates, sample, watch)
    bare = FlowMap((), plain.states, paper.parameter, watch, equations)
    sides = [ends_of(side) for side in (*numbers.states, numbers.parameter)]
    look_for = printed_box(bare, printed, bits, numbers)
    reason = ""
    watch.expect(LEAST_WORK)
    for attempt in range(ATTEMPTS):
        box = [hull(side, bits) for side in sides]
        coarse = min(bits, COARSE_BITS[attempt])
        try:
            before = watch.spent
            flow = with_pieces(bare, box[:-1], box[-1], paper.period, bits)
            watch.expect(watch.spent + PASSES * (1 + flow.size) ** 2 * (watch.spent - before))
            cycle = CycleEquations(flow, paper.period, TARGETS[paper.kind])
            end = cycle.carried(box, coarse, second=True, visits=_earlier(paper.period))
            found = krawczyk(cycle, box, bits, end)
            if not inside(found, sides):
                see_box_at_value(numbers)
                see_possible(cycle, paper, box, end, coarse)
                raise Undecided("the interval Newton test does not map the box into itself")
            if not is_within(numbers, found[cycle.parameter]):
                raise Undecided("the enclosure does not become narrow enough for the printed ends")
            if not driven:
                see_passages(flow, found[:-1], found[-1], coarse)
            end = see_cycle(cycle, paper, found, bits, look_for)
            see_flip_or_fold(cycle, paper, found, end, coarse)
            return
        except Undecided as error:
            reason, bits = error.reason, bits * 3 // 2
    raise NotCheckable(f"no such onset could be shown in the box: {reason}")


def see_possible(
    cycle: CycleEquations, paper: Paper, box: Sequence[Interval], end: Carried, bits: int
) -> None:
    """Refuse a box in which there is certainly no such onset.

    Raises
    ------
    Refused
        No cycle closes there, it closes earlier, or no multiplier can be the critical one.
    """
    *gaps, critical = cycle.residual(box, end, bits)
    if any(iv.sign(gap) for gap in gaps):
        raise Refused(Part.FORMULA, f"the equations have no cycle of period {paper.period} in the box")
    if not iv.sign(critical):
        return
    for steps, place in end.visits.items():
        if not any(iv.sign(iv.sub(x, y, bits)) for x, y in zip(place, box, strict=False)):
            raise Refused(Part.PERIOD, f"the cycle there may close after {steps} samples already")
    for kind, target in TARGETS.items():
        other = CycleEquations(cycle.many, cycle.steps, target).residual(box, end, bits)
        if kind != paper.kind and not iv.sign(other[-1]):
            raise Refused(Part.KIND, f"no {paper.kind} is in the box, but a {kind} may be")
    raise Refused(Part.FORMULA, f"the equations have no {paper.kind} of such a cycle in the box")


def _earlier(period: int) -> list[int]:
    return sorted({period // prime for prime in prime_factors(period)})


def see_repeats(
    plain: Plain, parameter: str, rates: Sequence[Program], period: Program, watch: Watch
) -> None:
    """See by algebra that the rates are the same one strobe period later, whatever states and parameter are.

    Raises
    ------
    NotCheckable
        It is not so, or algebra does not tell.
    """
    field = Field(watch)
    names = {name: field.named(name) for name in (*plain.states, parameter, TIME)}
    try:
        # Time counted in periods, so that a period that stands below a line is cancelled there.
        long, share = field.value(period, names, {}), names[TIME]
        now, later = names | {TIME: long * share}, names | {TIME: long * (share + number(Fraction(1)))}
        same = all(
            field.tidied(field.value(rate, later, {}) - field.value(rate, now, {})).is_zero for rate in rates
        )
    except Untold:
        same = False
    if not same:
        raise NotCheckable("that the rates repeat with the strobe period is not seen here")
