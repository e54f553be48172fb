"""Checking proofs again: what the second implementation takes, and that it refuses what was damaged."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import replace
from fractions import Fraction
from time import perf_counter

from benches.measuring import Figure, at_most, reading
from tinemark.onsets import engine
from tinemark.onsets.results import LadderRequest, Onset
from tinemark.systems.library import builtin_system
from tinemark.verify.check import check
from tinemark.verify.claims import Claim, Outcome, Paper

LADDERS = (
    ("logistic", "2.8", "4", 10, 10.0),
    ("logistic", "2.8", "4", 14, None),
    ("henon", "0.2", "1.4", 6, 10.0),
)
"""System, ends, levels, and the seconds allowed where a target is set."""


def figures() -> Iterator[Figure]:
    """Seconds for whole ladders, and how many damaged claims are not refused."""
    for name, start, stop, levels, allowed in LADDERS:
        onsets = _ladder(name, start, stop, levels)
        claims = [_claim(onset) for onset in onsets]
        began = perf_counter()
        refused = sum(check(claim).outcome is not Outcome.CONFIRMED for claim in claims)
        spent = perf_counter() - began
        words = f"{name}, {levels} levels checked again (s)"
        yield reading(words, spent) if allowed is None else at_most(words, spent, allowed)
        yield at_most(f"{name}, {levels} levels: not confirmed", refused + levels - len(onsets), 0)
        if allowed:
            passed = sum(
                check(bad).outcome is Outcome.CONFIRMED for claim in claims for bad in _damaged(claim)
            )
            yield at_most(f"{name}, damaged claims that were confirmed", passed, 0)


def _ladder(name: str, start: str, stop: str, levels: int) -> list[Onset]:
    system = builtin_system(name)
    request = LadderRequest(system, system.diagram_parameter, Fraction(start), Fraction(stop), levels=levels)
    steps = engine.ladder(request)
    while True:
        try:
            next(steps)
        except StopIteration as end:
            return [level.onset for level in end.value.levels]


def _claim(onset: Onset) -> Claim:
    held = onset.certificate
    assert held is not None
    paper = Paper(
        held.system_text,
        held.kind,
        held.period,
        held.parameter,
        held.criticality,
        held.precision,
        held.parameter_box,
        held.state_boxes,
        held.digest,
    )
    return Claim(
        name="",
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
    )


def _damaged(claim: Claim) -> Iterator[Claim]:
    """Value moved by 1e-15, wrong period, swapped kind and side, a moved box, another formula."""
    assert claim.paper is not None
    paper = claim.paper

    def moved(text: str) -> str:
        return f"{float(Fraction(text) + Fraction('1e-15')):.15f}"

    yield replace(claim, value=moved(claim.value), lower=moved(claim.lower), upper=moved(claim.upper))
    wrong = replace(claim, period_before=2 * claim.period_before, period_after=2 * claim.period_after)
    yield replace(wrong, paper=replace(paper, period=2 * paper.period))
    fold = replace(claim, kind="fold", period_before=0, period_after=paper.period, criticality="")
    yield replace(fold, paper=replace(paper, kind="fold", criticality=""))
    other = replace(claim, criticality="subcritical")
    yield replace(other, paper=replace(paper, criticality="subcritical"))
    middle, half = paper.parameter_box
    yield replace(claim, paper=replace(paper, parameter_box=(moved(middle), half)))
    head, mark, formulas = paper.system_text.partition("[next]")
    text = head + mark + formulas.replace('= "', '= "1e-12 + ', 1)
    yield replace(claim, paper=replace(paper, system_text=text))
