"""Comparing a certificate with its row: words, numbers, system and digest. No proof, and no arithmetic."""

from __future__ import annotations

import hashlib
import json

from tinemark.verify.claims import (
    BORDER_COLLISION,
    KINDS,
    Claim,
    NotCheckable,
    Numbers,
    Outcome,
    Paper,
    Part,
    Refused,
    Verdict,
)
from tinemark.verify.decimals import last_unit, rational, significant_digits, zeros_unit
from tinemark.verify.system import Plain, read

NOT_THE_ONE = "the certificate is not the one that was made with these numbers"


def mismatch(claim: Claim) -> Verdict | None:
    """Whether a certificate does not even fit its row; looks at words, numbers and the digest only.

    None where it fits. Nothing is proved by that, but nothing was changed by accident either.
    """
    try:
        paper, _, _ = compared(claim)
        same_digest(claim, paper)
    except Refused as refused:
        return Verdict(Outcome.REFUSED, refused.part, refused.reason)
    except NotCheckable as error:
        return Verdict(Outcome.NOT_CHECKABLE, Part.NOTHING, error.reason)
    return None


def compared(claim: Claim) -> tuple[Paper, Numbers, Plain]:
    """The certificate, its numbers and its system, all of which fit the row."""
    paper = _paper(claim)
    _same_words(claim, paper)
    numbers = _numbers(claim, paper)
    plain = read(paper.system_text)
    _same_system(claim, plain)
    if tuple(name for name, _, _ in paper.state_boxes) != plain.states:
        raise Refused(Part.BOX, "the box has other states than the system")
    return paper, numbers, plain


def _paper(claim: Claim) -> Paper:
    proved = claim.status == "proved"
    if claim.paper is None:
        if not proved:
            raise NotCheckable(f"it is {claim.status}, and claims no proof")
        raise Refused(Part.STATUS, "it says proved, and has no certificate; refine it to prove it again")
    if not proved and not claim.waits:
        raise Refused(Part.STATUS, f"it carries the certificate of a proof, and says {claim.status[:40]}")
    return claim.paper


def _same_words(claim: Claim, paper: Paper) -> None:
    """What stands in the row and in the certificate must be the same."""
    if claim.kind != paper.kind:
        raise Refused(Part.KIND, f"the row says {claim.kind[:40]}, the certificate {paper.kind[:40]}")
    if claim.parameter != paper.parameter:
        raise Refused(Part.PARAMETER, "the row and the certificate name different parameters")
    if claim.criticality != paper.criticality:
        raise Refused(
            Part.CRITICALITY,
            f'the row says "{claim.criticality[:40]}", the certificate "{paper.criticality[:40]}"',
        )
    if paper.period < 1 or not _periods_fit(claim, paper):
        raise Refused(Part.PERIOD, "the row's periods are not those of the certificate")


def _periods_fit(claim: Claim, paper: Paper) -> bool:
    period, before, after = paper.period, claim.period_before, claim.period_after
    if paper.kind == BORDER_COLLISION:
        return (before, after) == (0, period) or (before == period and after % period == 0 <= after)
    expected = {"flip": (period, 2 * period), "fold": (0, period)}
    return paper.kind not in KINDS or (before, after) == expected.get(paper.kind, (period, period))


def _numbers(claim: Claim, paper: Paper) -> Numbers:
    value, lower, upper = (rational(text) for text in (claim.value, claim.lower, claim.upper))
    if value is None or lower is None or upper is None:
        raise Refused(Part.VALUE, "the value or an end of its interval is no number to work with")
    if not lower <= value <= upper:
        raise Refused(Part.VALUE, "the value does not lie between its ends")
    sides = []
    for middle, half in (paper.parameter_box, *((m, h) for _, m, h in paper.state_boxes)):
        centre, size = rational(middle), rational(half)
        if centre is None or size is None:
            raise Refused(Part.BOX, "a side of the box is no number to work with")
        if size <= 0:
            raise Refused(Part.BOX, "a side of the box has no width above zero")
        sides.append((centre, size))
    # A whole number with more digits than were asked for ends in zeros that only fill it up.
    digits = significant_digits(claim.value)
    unit = max(last_unit(claim.value), min(zeros_unit(claim.value), 2 * (upper - lower)))
    return Numbers(value, unit, digits, lower, upper, sides[0], tuple(sides[1:]))


def _same_system(claim: Claim, plain: Plain) -> None:
    """Where the row says to which system it belongs, the certificate's must be that one."""
    if claim.formulas is not None and dict(claim.formulas) != dict(
        zip(plain.states, plain.formulas, strict=True)
    ):
        raise Refused(Part.FORMULA, "the certificate's formulas are not those of the row's system")
    if claim.sample is not None and claim.sample != plain.sample.texts:
        raise Refused(Part.SYSTEM, "the certificate's system is sampled otherwise than the row's")
    if claim.values is not None:
        known = dict(plain.values)
        for name, text in claim.values:
            if name not in known or known[name] != rational(text):
                raise Refused(Part.SYSTEM, f'the certificate has another value of "{name[:40]}" than the row')


def same_digest(claim: Claim, paper: Paper) -> None:
    """Refuse a digest that is not that of the certificate and the printed numbers."""
    if paper.digest != digest_of(claim, paper):
        raise Refused(Part.DIGEST, NOT_THE_ONE)


def digest_verdict(claim: Claim) -> Verdict | None:
    """A refusal where the digest of a proved row does not fit; None elsewhere."""
    if claim.paper is None or claim.paper.digest == digest_of(claim, claim.paper):
        return None
    return Verdict(Outcome.REFUSED, Part.DIGEST, NOT_THE_ONE)


def digest_of(claim: Claim, paper: Paper) -> str:
    """SHA-256 over the certificate and the printed numbers, as certificates define it."""
    content = [
        paper.system_text,
        paper.kind,
        paper.period,
        paper.parameter,
        paper.criticality,
        paper.precision,
        list(paper.parameter_box),
        [list(side) for side in paper.state_boxes],
        claim.value,
        claim.lower,
        claim.upper,
    ]
    return hashlib.sha256(json.dumps(content, separators=(",", ":")).encode()).hexdigest()
