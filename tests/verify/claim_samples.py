"""Claims of real onsets, and ways to damage them."""

from __future__ import annotations

import dataclasses
from typing import Any

from tinemark.onsets.results import Onset
from tinemark.verify.claims import Claim, Paper
from tinemark.verify.compare import digest_of


def claim_of(onset: Onset, **changes: Any) -> Claim:
    """The claim of an onset, spelled out field by field, some of them changed."""
    held = onset.certificate
    paper = held and Paper(
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
