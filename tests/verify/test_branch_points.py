"""Transcritical points and pitchforks of cycles that the parameter does not move."""

from __future__ import annotations

import dataclasses
from functools import lru_cache

import pytest
from claim_samples import box_by, claim_of, damaged, seal, shifted, with_formula
from running import click, own_map

from tinemark.onsets.results import Status
from tinemark.systems.library import builtin_system
from tinemark.verify.check import check
from tinemark.verify.claims import Claim, Outcome, Part


@lru_cache(maxsize=4)
def claim(kind: str) -> Claim:
    system = builtin_system("logistic") if kind == "transcritical" else own_map("r*x - x**3")
    onset = next(o for o in click(system, "1", "0.2").onsets if o.kind.value == kind)
    assert onset.status is Status.PROVED
    return claim_of(onset)


@pytest.mark.parametrize("kind", ["transcritical", "pitchfork"])
def test_they_are_confirmed_and_damage_is_named(kind: str) -> None:
    good = claim(kind)
    assert check(good).words == "confirmed"
    verdict = check(seal(shifted(good, "1e-15")))
    assert (verdict.outcome, verdict.part) == (Outcome.REFUSED, Part.VALUE)
    verdict = check(seal(box_by(good, "1e-15")))
    assert (verdict.outcome, verdict.part) == (Outcome.REFUSED, Part.BOX)
    verdict = check(damaged(good, digest="0" * 64))
    assert (verdict.outcome, verdict.part) == (Outcome.REFUSED, Part.DIGEST)
    other = "pitchfork" if kind == "transcritical" else "transcritical"
    verdict = check(damaged(dataclasses.replace(good, kind=other), kind=other, sealed=True))
    assert (verdict.outcome, verdict.part) == (Outcome.REFUSED, Part.KIND)
    verdict = check(dataclasses.replace(good, states=(("x", "0.25"),)))
    assert (verdict.outcome, verdict.part) == (Outcome.REFUSED, Part.STATE)


def test_the_pitchforks_side_is_looked_at() -> None:
    good = claim("pitchfork")
    assert good.criticality == "supercritical"
    turned = damaged(
        dataclasses.replace(good, criticality="subcritical"), criticality="subcritical", sealed=True
    )
    assert check(turned).part is Part.CRITICALITY
    # The other side: the pair is there where the origin is stable.
    assert check(with_formula(turned, "r*x - x**3", "r*x + x**3")).part is Part.DIGEST
    assert check(seal(with_formula(turned, "r*x - x**3", "r*x + x**3"))).words == "confirmed"


def test_an_identity_that_is_nearly_one_is_not_taken_for_one() -> None:
    good = claim("transcritical")
    nearly = seal(with_formula(good, "r*x*(1 - x)", "r*x*(1 - x) + 1e-40*r"))
    verdict = check(nearly)
    assert (verdict.outcome, verdict.part) == (Outcome.REFUSED, Part.FORMULA)
    nearly = seal(with_formula(claim("pitchfork"), "r*x - x**3", "r*x - x**3 + 1e-40*x**2"))
    assert check(nearly).outcome is not Outcome.CONFIRMED
