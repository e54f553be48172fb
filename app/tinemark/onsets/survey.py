"""Every onset of a range: what the onsets of a survey have in common, whatever the number of states."""

from __future__ import annotations

from collections.abc import Generator
from fractions import Fraction

from tinemark.onsets.results import Kind, Onset, Step, SurveyFind, SurveyRequest, SurveyResult
from tinemark.systems.errors import NoOnsetFound, TinemarkError
from tinemark.systems.exact import fraction_text

LONGEST = 64
"""Longest period that a survey may ask for."""
NARROWEST = Fraction(1, 10**9)


def survey_of(request: SurveyRequest) -> Generator[Step | SurveyFind, None, SurveyResult]:
    """Find the onsets of a range; see `engine.survey`.

    Raises
    ------
    NoOnsetFound
        The range is empty or too narrow.
    TinemarkError
        The longest period cannot be asked for.
    """
    if not 1 <= request.max_period <= LONGEST:
        raise TinemarkError(
            f"onsets of periods up to {request.max_period} cannot be asked for",
            what_to_do=f"ask for a longest period from 1 to {LONGEST}",
        )
    low, high = sorted((request.start, request.stop))
    if low == high:
        raise NoOnsetFound("the range is empty", what_to_do="give two different ends")
    if high - low < NARROWEST * max(abs(low), abs(high)):
        raise NoOnsetFound(
            f"the range is too narrow to be surveyed ({fraction_text(high - low, 3)})",
            what_to_do="widen it; single onsets in so narrow a view are found by a click",
        )
    if request.system.is_map and len(request.system.states) == 1:
        from tinemark.onsets.survey_one import survey_one

        return (yield from survey_one(request, low, high))
    from tinemark.onsets.survey_many import survey_many

    return (yield from survey_many(request, low, high))


def wanted(request: SurveyRequest, kind: Kind) -> bool:
    """Whether a kind was asked for."""
    return request.kinds is None or kind in request.kinds


def check_kinds(request: SurveyRequest, surveyed: frozenset[Kind], of_what: str) -> None:
    """Refuse a request for kinds of which none is looked for.

    Raises
    ------
    NoOnsetFound
        In words, with the kinds that are.
    """
    if request.kinds is None or request.kinds & surveyed:
        return
    asked = ", ".join(sorted(kind.value for kind in request.kinds)) or "none"
    looked = ", ".join(kind.value for kind in Kind if kind in surveyed)
    raise NoOnsetFound(
        f"of the kinds asked for ({asked}) none is looked for in a survey of {of_what}",
        what_to_do=f"ask for some of: {looked}",
    )


def left_out(request: SurveyRequest, surveyed: frozenset[Kind]) -> str:
    """Kinds asked for among others that a survey does not look for, as the end of a sentence."""
    if request.kinds is None or request.kinds <= surveyed:
        return ""
    names = ", ".join(kind.value for kind in Kind if kind in request.kinds - surveyed)
    return f"; not looked for in such a survey: {names}"


def same(a: Onset, b: Onset) -> bool:
    """Whether two onsets are one.

    Cycles that are mirror images of each other have theirs at the same value; they count as one, as a
    click shows them.
    """
    alike = a.kind is b.kind and (a.period_before, a.period_after) == (b.period_before, b.period_after)
    return alike and Fraction(a.lower) <= Fraction(b.upper) and Fraction(b.lower) <= Fraction(a.upper)


def counted(onsets: tuple[Onset, ...]) -> str:
    """Onsets by kind in words: 13 flips and 9 folds."""
    numbers: dict[str, int] = {}
    for onset in onsets:
        numbers[onset.kind.value] = numbers.get(onset.kind.value, 0) + 1
    words = [f"{number} {_plural(kind) if number != 1 else kind}" for kind, number in numbers.items()]
    if not words:
        return "no onset"
    return words[0] if len(words) == 1 else f"{', '.join(words[:-1])} and {words[-1]}"


def _plural(kind: str) -> str:
    if kind == Kind.CRISIS.value:
        return "crises"
    ending = " points" if kind in (Kind.NEIMARK_SACKER.value, Kind.TRANSCRITICAL.value) else "s"
    return kind + ending
