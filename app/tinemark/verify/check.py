"""Checking one claim: what can be compared first, the proof on the certificate's box, the digest last."""

from __future__ import annotations

import math
from collections.abc import Iterable, Iterator

from tinemark.verify import (
    blame,
    border,
    branch_points,
    flow_onsets,
    many_border,
    many_branch_points,
    many_states,
    one_state,
)
from tinemark.verify.claims import (
    BORDER_COLLISION,
    BRANCH_POINTS,
    KINDS,
    NEIMARK_SACKER,
    Claim,
    NotCheckable,
    Numbers,
    Outcome,
    Part,
    Refused,
    Undecided,
    Verdict,
)
from tinemark.verify.compare import compared, digest_verdict, same_digest
from tinemark.verify.cycles import OneState
from tinemark.verify.decimals import rational
from tinemark.verify.many_cycles import ManyStates
from tinemark.verify.system import programs
from tinemark.verify.watching import Watch

MOST_BITS = 8000
PASSES, PASSES_MANY = 1.5, 8.0
"""How often the cycle is gone through with all derivatives, about."""
CONFIRMED = Verdict(Outcome.CONFIRMED, Part.NOTHING, "")


def check_all(claims: Iterable[Claim]) -> Iterator[tuple[Claim, Verdict]]:
    """Check claims one after the other."""
    for claim in claims:
        yield claim, check(claim)


def check(claim: Claim, watch: Watch | None = None) -> Verdict:
    """Check one claim; never raises on account of what stands in it.

    `watch` bounds the work and hears of the progress.

    Confirmed means: on the certificate's box, the formulas of its system have exactly one onset of the
    claimed kind, of a cycle of exactly the claimed least period; it lies between the printed ends; what
    the claim says of its criticality holds; the printed cycle point belongs to it; and nothing that the
    digest covers was changed.
    """
    try:
        _check(claim, watch or Watch())
    except Refused as refused:
        return Verdict(Outcome.REFUSED, refused.part, refused.reason)
    except (NotCheckable, Undecided) as error:
        # What cannot be told of a certificate that was changed is told by its digest.
        changed = digest_verdict(claim)
        return changed or Verdict(Outcome.NOT_CHECKABLE, Part.NOTHING, error.reason)
    except (RecursionError, MemoryError, OverflowError):
        return Verdict(
            Outcome.NOT_CHECKABLE, Part.NOTHING, "the certificate is beyond what can be worked with"
        )
    return CONFIRMED


def _check(claim: Claim, watch: Watch) -> None:
    paper, numbers, plain = compared(claim)
    if paper.kind not in KINDS:
        raise NotCheckable(f"a {paper.kind[:40]} is not proved, so there is nothing to check")
    if paper.kind == NEIMARK_SACKER and len(plain.states) == 1 and plain.sample.kind == "map":
        raise Refused(Part.KIND, "a map of one state has no Neimark-Sacker onset")
    bits = _bits(numbers, paper.period)
    if bits > MOST_BITS:
        raise NotCheckable(f"the box asks for a precision of more than {MOST_BITS} bits")
    if plain.sample.kind != "map":
        flow_onsets.prove(plain, paper, numbers, bits, claim.states, watch)
        same_digest(claim, paper)
        return
    formulas = programs(plain, paper.parameter)
    if len(plain.states) > 1:
        many = ManyStates(formulas, plain.states, paper.parameter, watch)
        watch.expect(PASSES_MANY * paper.period * many.cost(bits, 2))
        if paper.kind == BORDER_COLLISION:
            many_border.prove(many, claim, paper, numbers, bits, dict(plain.values))
        elif paper.kind in BRANCH_POINTS:
            many_branch_points.prove(many, paper, numbers, bits, claim.states)
        else:
            many_states.prove(many, paper, numbers, bits, claim.states)
        same_digest(claim, paper)
        return
    one = OneState(formulas[0], plain.states[0], paper.parameter, watch)
    watch.expect(PASSES * paper.period * one.cost(bits))
    printed = dict(claim.states).get(one.state)
    if paper.kind == BORDER_COLLISION:
        border.prove(one, claim, paper, numbers, bits, printed, dict(plain.values))
        same_digest(claim, paper)
        return
    if paper.kind in BRANCH_POINTS:
        branch_points.prove(one, paper, numbers, bits, printed)
        same_digest(claim, paper)
        return
    try:
        one_state.prove(one, paper, numbers, bits, printed)
    except Undecided as error:
        start = numbers.states[0][0] if printed is None else rational(printed)
        blame.find(one, paper, numbers, bits, start, error.reason)
    same_digest(claim, paper)


def _bits(numbers: Numbers, period: int) -> int:
    """Precision for a first attempt: the box must be seen well inside, after a long way round."""
    least = min(half for _, half in (numbers.parameter, *numbers.states))
    if numbers.upper > numbers.lower:
        least = min(least, numbers.upper - numbers.lower)
    depth = max(0, least.denominator.bit_length() - least.numerator.bit_length())
    height = max(
        abs(middle).numerator.bit_length() - abs(middle).denominator.bit_length()
        for middle, _ in (numbers.parameter, *numbers.states)
    )
    return depth + max(0, height) + 32 + 4 * math.ceil(math.log2(period + 1))
