"""Checking proofs again: what the second implementation takes, and that it refuses what was damaged."""

from __future__ import annotations

import sys
from collections.abc import Iterator
from fractions import Fraction
from pathlib import Path
from time import perf_counter

from benches.measuring import Figure, at_most, reading

TESTS = Path(__file__).resolve().parents[2] / "tests"
sys.path[:0] = [str(TESTS / "verify"), str(TESTS / "onsets")]

from claim_samples import claim_of, every_damage, seal  # noqa: E402
from sample_onsets import SAMPLES, sample  # noqa: E402

from tinemark.onsets import engine  # noqa: E402
from tinemark.onsets.results import LadderRequest, Onset  # noqa: E402
from tinemark.systems.library import builtin_system  # noqa: E402
from tinemark.verify.check import check  # noqa: E402
from tinemark.verify.claims import Claim, Outcome  # noqa: E402

LADDERS = (
    ("logistic", "2.8", "4", 10, 10.0),
    ("logistic", "2.8", "4", 14, None),
    ("henon", "0.2", "1.4", 6, 10.0),
    ("henon", "0.2", "1.4", 9, None),
)
"""System, ends, levels, and the seconds allowed where a target is set."""


def figures() -> Iterator[Figure]:
    """Seconds for whole ladders, every kind of proof once, and how many damaged claims are not refused."""
    for name, start, stop, levels, allowed in LADDERS:
        onsets = _ladder(name, start, stop, levels)
        claims = [claim_of(onset) for onset in onsets]
        began = perf_counter()
        refused = sum(check(claim).outcome is not Outcome.CONFIRMED for claim in claims)
        spent = perf_counter() - began
        words = f"{name}, {levels} levels checked again (s)"
        yield reading(words, spent) if allowed is None else at_most(words, spent, allowed)
        yield at_most(f"{name}, {levels} levels: not confirmed", refused + levels - len(onsets), 0)
        if allowed:
            yield at_most(f"{name}, damaged claims that were not refused", _passed(claims), 0)
    claims = [claim_of(sample(name)) for name in SAMPLES]
    unproved = sum(check(claim).outcome is not Outcome.CONFIRMED for claim in claims)
    yield at_most(f"{len(claims)} proofs of every kind: not confirmed", unproved, 0)
    yield at_most("every kind, damaged claims that were not refused", _passed(claims), 0)


def _passed(claims: list[Claim]) -> int:
    """Damaged claims that are not refused, their digests as they were and made to fit again."""
    passed = 0
    for claim in claims:
        for _, bad, _ in every_damage(claim):
            both = (bad,) if bad.paper is None else (bad, seal(bad))
            passed += sum(check(each).outcome is not Outcome.REFUSED for each in both)
    return passed


def _ladder(name: str, start: str, stop: str, levels: int) -> list[Onset]:
    system = builtin_system(name)
    request = LadderRequest(system, system.diagram_parameter, Fraction(start), Fraction(stop), levels=levels)
    steps = engine.ladder(request)
    while True:
        try:
            next(steps)
        except StopIteration as end:
            return [level.onset for level in end.value.levels]
