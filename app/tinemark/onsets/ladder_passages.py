"""What a ladder meets besides its own flips: pitchforks that it passes, and folds that bound a jump.

A symmetric cycle has a multiplier that is a square and cannot flip. So the ladder of an odd map comes to a
pitchfork first, and goes on along one of the two branches that are each other's mirror images there.
"""

from __future__ import annotations

from collections.abc import Generator, Sequence
from dataclasses import dataclass, replace
from fractions import Fraction

from tinemark.onsets.branch_points import meetings_of
from tinemark.onsets.branches import Cycle
from tinemark.onsets.float_map import FloatMap
from tinemark.onsets.jumps import jump_of
from tinemark.onsets.one_map import OneMap
from tinemark.onsets.onset_words import short_number
from tinemark.onsets.polish import Lost, Rough, Settled
from tinemark.onsets.results import Kind, Onset, Status, Step
from tinemark.onsets.settling import settle_any

SYMMETRIC_LEVELS = 2
"""Levels whose cycle may have come from a symmetric one: beyond, the symmetry is lost for good."""


@dataclass(frozen=True)
class Passage:
    """A level of a ladder with what it says of a jump, and the onsets met on the way to it."""

    settled: Settled
    besides: tuple[Onset, ...]


def passage_to(
    one: OneMap, cycles: FloatMap, settled: Settled, level: int, since: Fraction, digits: int
) -> Generator[Step, None, Passage]:
    """Look back from a level's flip to where the ladder came from.

    Parameters
    ----------
    settled
        The flip of that level.
    since
        Parameter value of the level before, or of the ladder's start.
    """
    besides: list[Onset] = []
    onset = settled.onset
    if level <= SYMMETRIC_LEVELS:
        pitchfork = yield from _pitchfork_before(one, cycles, settled, since, digits)
        if pitchfork is not None:
            besides.append(pitchfork)
            words = (
                f"the ladder has passed the pitchfork of period {pitchfork.period_before} at "
                f"{pitchfork.parameter} = {short_number(pitchfork.value_fraction)} before this flip and goes "
                "on along one of the two branches that part there"
            )
            onset = replace(
                onset, consequence=f"{onset.consequence}; {words}" if onset.consequence else words
            )
    jump = yield from jump_of(one, replace(settled, onset=onset), digits, abs(settled.r - since))
    if jump.fold is not None:
        besides.append(jump.fold)
    return Passage(replace(settled, onset=jump.onset), tuple(besides))


def _pitchfork_before(
    one: OneMap, cycles: FloatMap, settled: Settled, since: Fraction, digits: int
) -> Generator[Step, None, Onset | None]:
    """The pitchfork at which the cycle that flips left a symmetric one, between `since` and the flip."""
    yield Step("looking for pitchforks on the way")
    r, reach = float(settled.r), abs(float(settled.r - since))
    flipping = Cycle(settled.onset.period_before, float(settled.x), r, -1.0)
    for crossing in meetings_of(cycles, flipping, settled.r, reach, ()).crossings:
        if crossing.kind is not Kind.PITCHFORK:
            continue
        rough = Rough(
            crossing.kind, crossing.period, Fraction(float(crossing.x)), Fraction(float(crossing.r))
        )
        try:
            found = (yield from settle_any(one, rough, digits, reach=Fraction(reach) / 10)).onset
        except Lost:
            continue
        inside = min(since, settled.r) < found.value_fraction < max(since, settled.r)
        if inside and found.kind is Kind.PITCHFORK:
            return found
    return None


def besides_words(besides: Sequence[Onset]) -> str:
    """The onsets met besides the levels, as a sentence without its stop; empty for none."""
    names = [
        f"the {onset.kind.value} of period {onset.period_before or onset.period_after} at "
        f"{onset.parameter} = {short_number(onset.value_fraction)} "
        f"({'proved' if onset.status is Status.PROVED else onset.status.value})"
        for onset in besides
    ]
    return f"on the way it met {' and '.join(names)}" if names else ""
