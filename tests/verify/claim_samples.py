"""Claims of real onsets of every kind, and ways to damage them: shared by tests and benches."""

from __future__ import annotations

import dataclasses
from collections.abc import Iterator
from fractions import Fraction
from typing import Any

from tinemark.onsets.results import Onset
from tinemark.verify.claims import Claim, Paper, Part
from tinemark.verify.compare import digest_of


def claim_of(onset: Onset, **changes: Any) -> Claim:
    """The claim of an onset, spelled out field by field, some of them changed."""
    held = onset.certificate
    paper = (
        None
        if held is None
        else Paper(
            system_text=held.system_text,
            kind=held.kind,
            period=held.period,
            parameter=held.parameter,
            criticality=held.criticality,
            precision=held.precision,
            parameter_box=held.parameter_box,
            state_boxes=held.state_boxes,
            digest=held.digest,
        )
    )
    claim = Claim(
        name="a row",
        status=onset.status.value,
        waits=False,
        kind=onset.kind.value,
        period_before=onset.period_before,
        period_after=onset.period_after,
        criticality=onset.criticality.value,
        parameter=onset.parameter,
        value=onset.value,
        lower=onset.lower,
        upper=onset.upper,
        states=onset.states,
        paper=paper,
        consequence=onset.consequence,
    )
    return dataclasses.replace(claim, **changes)


def damaged(claim: Claim, *, sealed: bool = False, **paper: Any) -> Claim:
    """The claim with fields of its certificate changed; `sealed` makes the digest fit again."""
    assert claim.paper is not None
    return seal(dataclasses.replace(claim, paper=dataclasses.replace(claim.paper, **paper)), sealed)


def seal(claim: Claim, really: bool = True) -> Claim:
    """The claim with a digest that fits it: what a careful forger would do."""
    assert claim.paper is not None
    if not really:
        return claim
    digest = digest_of(claim, claim.paper)
    return dataclasses.replace(claim, paper=dataclasses.replace(claim.paper, digest=digest))


def moved(text: str, by: str | Fraction) -> str:
    """A decimal text moved by an amount, in as many digits as it needs."""
    scaled = round((Fraction(text) + Fraction(by)) * 10**90)
    digits = str(abs(scaled)).rjust(91, "0")
    return f"{'-' if scaled < 0 else ''}{digits[:-90]}.{digits[-90:]}"


def shifted(claim: Claim, by: str) -> Claim:
    """Value and ends moved together."""
    return dataclasses.replace(
        claim, value=moved(claim.value, by), lower=moved(claim.lower, by), upper=moved(claim.upper, by)
    )


def box_by(claim: Claim, by: str) -> Claim:
    """The parameter's side of the box moved."""
    assert claim.paper is not None
    middle, half = claim.paper.parameter_box
    return damaged(claim, parameter_box=(moved(middle, by), half))


def with_formula(claim: Claim, old: str, new: str) -> Claim:
    """A part of the system's text replaced."""
    assert claim.paper is not None
    assert old in claim.paper.system_text
    return damaged(claim, system_text=claim.paper.system_text.replace(old, new))


SIDED = ("flip", "pitchfork", "Neimark-Sacker")
KINDS = ("flip", "fold", "transcritical", "pitchfork", "border collision", "Neimark-Sacker")


def of_kind(claim: Claim, kind: str, period: int) -> Claim:
    """The claim as one of another kind or period, in the row and in its certificate."""
    before, after = {"flip": (period, 2 * period), "fold": (0, period)}.get(kind, (period, period))
    side = (claim.criticality or "supercritical") if kind in SIDED else ""
    row = dataclasses.replace(claim, kind=kind, period_before=before, period_after=after, criticality=side)
    return damaged(row, kind=kind, period=period, criticality=side)


def every_damage(claim: Claim) -> Iterator[tuple[str, Claim, tuple[Part, ...]]]:
    """(what was done, the damaged claim, the names under which it may be refused) for a claim of any kind."""
    paper = claim.paper
    assert paper is not None
    period = paper.period
    wrong = (Part.KIND, Part.PERIOD, Part.FORMULA, Part.BOX, Part.CRITICALITY)
    yield "value moved by 1e-15", shifted(claim, "1e-15"), (Part.VALUE,)
    yield "value moved far", shifted(claim, "0.25"), (Part.VALUE,)
    yield "box moved by 1e-15", box_by(claim, "1e-15"), (Part.BOX,)
    yield "box moved far", box_by(claim, "0.5"), (Part.BOX, Part.FORMULA, Part.KIND, Part.PERIOD)
    name, middle, half = paper.state_boxes[0]
    states = ((name, moved(middle, "1e-9"), half), *paper.state_boxes[1:])
    yield "state's box moved", damaged(claim, state_boxes=states), wrong
    for text in ("1e-12 + ", "0.001 + "):
        head, mark, formulas = paper.system_text.partition("[next]")
        start, quote, rest = formulas.partition('"')
        altered = f"{head}{mark}{start}{quote}{text}({rest.replace(quote, ')' + quote, 1)}"
        yield f"formula with {text}", damaged(claim, system_text=altered), wrong
    for factor in (2, 3):
        before, after = claim.period_before, claim.period_after
        row = dataclasses.replace(claim, period_before=factor * before, period_after=factor * after)
        yield f"period times {factor}", damaged(row, period=factor * period), (Part.PERIOD,)
    for kind in KINDS:
        if kind != claim.kind:
            yield f"kind {kind}", of_kind(claim, kind, period), wrong
    if claim.criticality:
        other = "subcritical" if claim.criticality == "supercritical" else "supercritical"
        row = dataclasses.replace(claim, criticality=other)
        yield "side swapped", damaged(row, criticality=other), (Part.CRITICALITY,)
    else:
        row = dataclasses.replace(claim, criticality="supercritical")
        yield "side added", damaged(row, criticality="supercritical"), (Part.CRITICALITY,)
    far = tuple((name, moved(text, "0.0123")) for name, text in claim.states)
    yield "state moved", dataclasses.replace(claim, states=far), (Part.STATE, Part.BOX)
    if claim.kind == "border collision":
        head, mark, words = claim.consequence.partition("touches the surface ")
        for renamed in (f"{claim.states[0][0]}**3 = 0;", "nothing at all;", f"0.1 + {words}"):
            bad = dataclasses.replace(claim, consequence=head + mark + renamed)
            yield f"surface renamed {renamed[:9]}", bad, (Part.SURFACE,)
        after = {0: period, period: 2 * period}.get(claim.period_after, period)
        before = claim.period_before or period
        row = dataclasses.replace(claim, period_before=before, period_after=after)
        yield "what follows", row, (Part.PERIOD,)
    raised = dataclasses.replace(claim, status="estimated")
    yield "status lowered", raised, (Part.STATUS,)
    yield "raised without a proof", dataclasses.replace(claim, paper=None), (Part.STATUS,)
