"""What the onsets of a ladder say together: ratios, limit, class of the cascade and the next onsets."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from decimal import Decimal
from fractions import Fraction
from itertools import pairwise

from tinemark.onsets.class_values import CLASSES, HIGHEST_COMPLETE_ORDER, CascadeClass, class_named
from tinemark.onsets.extrapolation import GAPS_DO_NOT_SHRINK, extrapolate, limit_of_class, usable_run
from tinemark.onsets.ladder_points import (
    Estimate,
    LadderPoint,
    LevelScaling,
    checked,
    gap_is_known,
    level_scalings,
    points_of,
)

__all__ = [
    "NONE",
    "UNDECIDED",
    "ClassVerdict",
    "Estimate",
    "LadderPoint",
    "LevelScaling",
    "Prediction",
    "Scaling",
    "class_verdict",
    "points_of",
    "scaling",
]

NONE = "none"
UNDECIDED = "undecided"
LEAST_LEVELS_FOR_A_CLASS = 4
LEAST_LEVELS_FOR_NO_CLASS = 6
WIDEST_FOR_A_CLASS = Fraction(1, 5)
"""A delta known to worse than this share of itself decides nothing."""
WIDEST_FOR_NO_CLASS = Fraction(1, 20)


@dataclass(frozen=True)
class Prediction:
    """Where an onset that is not known yet is expected (interval of at least 95 % coverage)."""

    level: int
    onset: Estimate


@dataclass(frozen=True)
class ClassVerdict:
    """Which cascade it is.

    Attributes
    ----------
    name
        A class's name, "none" or "undecided".
    consistent
        Whether delta's interval holds the class value; None when undecided.
    sentence
        The verdict and its grounds, for people.
    """

    name: str
    consistent: bool | None
    sentence: str


@dataclass(frozen=True)
class Scaling:
    """All that a ladder's onsets say together.

    Attributes
    ----------
    levels
        Gap and ratio at every level, missing ones included.
    limit, limit_reason
        Where the ladder accumulates, no class assumed; None, and then why.
    delta, delta_reason
        Where the ratios tend, no class assumed; None, and then why.
    verdict
        Class of the cascade.
    class_limit
        The limit if the verdict's class is taken for granted; None without one.
    predictions
        The next three onsets (one, where only three levels are known), nearest first.
    used_levels
        Levels that limit, delta and predictions rest on.
    alpha, alpha_reason
        How the cycles shrink, where it was worked out (`tinemark.onsets.alpha`: the onsets alone do not
        say); None, and then why; both empty where it was not asked for.
    """

    levels: tuple[LevelScaling, ...]
    limit: Estimate | None
    limit_reason: str
    delta: Estimate | None
    delta_reason: str
    verdict: ClassVerdict
    class_limit: Estimate | None
    predictions: tuple[Prediction, ...]
    used_levels: tuple[int, ...]
    alpha: Estimate | None = None
    alpha_reason: str = ""


def scaling(points: Sequence[LadderPoint]) -> Scaling:
    """Everything the onsets of one ladder say together.

    Parameters
    ----------
    points
        Onsets of one cascade in any order; levels may be missing, and the parameter may rise or fall.

    Returns
    -------
    Scaling
        Limit, delta and predictions rest on the last stretch of successive levels that are told apart.
        Their intervals have at least 95 % coverage if the cascade goes on as it has begun.

    Raises
    ------
    ValueError
        A level is given twice, or is below 1.
    """
    ordered = checked(points)
    told_apart = [
        later.level == earlier.level + 1 and gap_is_known(earlier, later)
        for earlier, later in pairwise(ordered)
    ]
    run = usable_run(ordered, told_apart)
    found = extrapolate(run)
    verdict = class_verdict(found.delta, len(run), found.delta_reason)
    known = class_named(verdict.name)
    return Scaling(
        levels=level_scalings(ordered),
        limit=found.limit,
        limit_reason=found.limit_reason,
        delta=found.delta,
        delta_reason=found.delta_reason,
        verdict=verdict,
        class_limit=limit_of_class(run, known) if known else None,
        predictions=tuple(Prediction(level, onset) for level, onset in found.predictions),
        used_levels=tuple(point.level for point in run) if found.limit else (),
    )


def class_verdict(delta: Estimate | None, levels: int, reason: str = "") -> ClassVerdict:
    """Which class a delta with its uncertainty belongs to.

    Parameters
    ----------
    delta
        As extrapolated; None when nothing is known.
    levels
        How many successive onsets it rests on: below four there is no verdict.
    reason
        Why delta is not known.
    """
    if levels < LEAST_LEVELS_FOR_A_CLASS:
        need = f"a class needs at least {LEAST_LEVELS_FOR_A_CLASS} successive onsets"
        return ClassVerdict(UNDECIDED, None, f"undecided: {need}")
    if delta is None:
        if reason == GAPS_DO_NOT_SHRINK and levels >= LEAST_LEVELS_FOR_NO_CLASS:
            return ClassVerdict(NONE, False, f"none: not a doubling cascade, since {reason}")
        why = reason or "the ratios do not say where they tend"
        return ClassVerdict(UNDECIDED, None, f"undecided: {why}")
    inside = [item for item in CLASSES if item.lies_within(delta.lower, delta.upper)]
    shown = f"delta {delta.value} ± {delta.expanded_text}"
    size = abs(delta.value_fraction)
    if size <= delta.expanded_fraction:
        return ClassVerdict(UNDECIDED, None, f"undecided: {shown} is too wide; more levels would tell")
    share = delta.expanded_fraction / size
    if len(inside) > 1:
        names = f"{inside[0].name} to {inside[-1].name}"
        return ClassVerdict(UNDECIDED, None, f"undecided: {shown} leaves open several classes, {names}")
    if len(inside) == 1 and share <= WIDEST_FOR_A_CLASS:
        return _verdict_for(inside[0], delta, shown)
    if len(inside) == 1:
        return ClassVerdict(UNDECIDED, None, f"undecided: {shown} is too wide; more levels would tell")
    return _verdict_without(delta, levels, shown, share)


def _verdict_for(found: CascadeClass, delta: Estimate, shown: str) -> ClassVerdict:
    if found.order > HIGHEST_COMPLETE_ORDER:
        sentence = f"undecided: {shown} lies near {found.name}, where orders are not all listed"
        if not _neighbours_excluded(found, delta):
            return ClassVerdict(UNDECIDED, None, sentence)
    value = f"{Decimal(found.delta):.6f}"
    return ClassVerdict(found.name, True, f"{found.name}: {shown} holds its value {value}, and no other")


def _neighbours_excluded(found: CascadeClass, delta: Estimate) -> bool:
    # Orders 9, 11 and 13 have no listed value; they lie about half a step away from 10 and 12.
    half_step = Fraction(1, 4)
    value = found.delta_fraction
    return value - half_step < delta.lower and delta.upper < value + half_step


def _verdict_without(delta: Estimate, levels: int, shown: str, share: Fraction) -> ClassVerdict:
    listed = [item for item in CLASSES if 0 < item.order <= HIGHEST_COMPLETE_ORDER]
    if delta.upper > listed[-1].delta_fraction:
        return ClassVerdict(UNDECIDED, None, f"undecided: {shown} is above the classes that are all listed")
    if levels < LEAST_LEVELS_FOR_NO_CLASS or share > WIDEST_FOR_NO_CLASS:
        return ClassVerdict(
            UNDECIDED, None, f"undecided: {shown} holds no class value; more levels would tell"
        )
    return ClassVerdict(NONE, False, f"none: not a doubling cascade, since {shown} holds no class value")
