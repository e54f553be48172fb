"""The onset engine: what a click and a ladder request do, whatever the number of states.

Both are generators of steps; the caller owns progress and stopping, and may drop the generator at
any step. They run in the refinement process, since ball precision is one value per process.
"""

from __future__ import annotations

from collections.abc import Generator
from dataclasses import replace
from fractions import Fraction

from tinemark.onsets.results import (
    BranchRequest,
    BranchResult,
    Kind,
    LadderLevel,
    LadderRequest,
    LadderResult,
    Onset,
    RefineRequest,
    RefineResult,
    SharpenRequest,
    Status,
    Step,
    SurveyFind,
    SurveyRequest,
    SurveyResult,
)
from tinemark.systems.errors import NoOnsetFound, TinemarkError
from tinemark.systems.system import System

MOST_DIGITS = 250
"""Significant digits that may be asked for."""


def refine(request: RefineRequest) -> Generator[Step, None, RefineResult]:
    """Find, polish and prove the onset nearest to a click.

    Yields
    ------
    Step
        At safe points, some milliseconds apart.

    Returns
    -------
    RefineResult
        As the generator's value.

    Raises
    ------
    NoOnsetFound
        Nothing in reach; says what was looked at.
    """
    _check(request.digits)
    if not request.system.is_map:
        from tinemark.onsets.flow_engine import refine_flow

        result = yield from refine_flow(request)
    elif len(request.system.states) == 1:
        from tinemark.onsets.clicks import refine_one

        result = yield from refine_one(request)
    else:
        from tinemark.onsets.many_engine import refine_many

        result = yield from refine_many(request)
    from tinemark.onsets.sensitivities import with_sensitivities

    onsets: tuple[Onset, ...] = ()
    for onset in result.onsets:
        onsets += ((yield from with_sensitivities(request.system, onset)),)
    return replace(result, onsets=onsets)


def sharpen(request: SharpenRequest) -> Generator[Step, None, RefineResult]:
    """Raise an onset of a driven or free-running system to more digits, and prove it where that closes.

    Raises
    ------
    NoOnsetFound
        Why there are no more digits: the onset stands as it is.
    """
    from tinemark.onsets.flow_digits_row import sharpened
    from tinemark.onsets.many_polish import NotFound

    _check(request.digits)
    if request.system.is_map:
        raise NoOnsetFound("onsets of maps have all their digits at once")
    try:
        onset = yield from sharpened(request.system, request.onset, request.digits)
    except NotFound as error:
        raise NoOnsetFound(
            f"no more digits were found: {error}", what_to_do="the value stands as it was"
        ) from error
    words = "proved" if onset.status is Status.PROVED else f"estimated ({onset.reason})"
    return RefineResult((onset,), f"{onset.kind.value} at {onset.parameter} = {onset.value}, {words}")


def ladder(request: LadderRequest) -> Generator[Step | LadderLevel, None, LadderResult]:
    """Follow a cascade of flips level by level and prove each level.

    Yields
    ------
    Step or LadderLevel
        Progress, and each level as it is found.

    Returns
    -------
    LadderResult
        As the generator's value.

    Raises
    ------
    NoOnsetFound
        The cascade has no first level there; says what was looked at.
    """
    _check(request.digits)
    if request.base_period < 1 or request.levels < 1:
        raise TinemarkError("a ladder has a base period and levels of 1 or more")
    if not request.system.is_map:
        from tinemark.onsets.flow_ladder import ladder_flow

        levels = ladder_flow(request)
    elif len(request.system.states) == 1:
        from tinemark.onsets.ladder import ladder_one

        levels = ladder_one(request)
    else:
        from tinemark.onsets.many_engine import ladder_many

        levels = ladder_many(request)
    result = yield from _with_sensitivities(request, levels)
    return (yield from _with_alpha(request, result))


def _with_alpha(request: LadderRequest, result: LadderResult) -> Generator[Step, None, LadderResult]:
    if not request.system.is_map:
        return replace(result, alpha_reason="alpha is worked out for maps of one state")
    from tinemark.onsets.alpha import alpha_of_ladder

    found = yield from alpha_of_ladder(request.system, request.parameter, result.levels)
    number = found.estimate
    texts = (number.value, number.expanded_text) if number is not None else None
    return replace(result, alpha=texts, alpha_reason=found.reason)


def _with_sensitivities(
    request: LadderRequest, levels: Generator[Step | LadderLevel, None, LadderResult]
) -> Generator[Step | LadderLevel, None, LadderResult]:
    """Fill in how each level moves with the other parameters, as soon as it is found."""
    from tinemark.onsets.sensitivities import LONGEST_UNASKED, with_sensitivities

    filled: dict[int, LadderLevel] = {}
    while True:
        try:
            item = next(levels)
        except StopIteration as done:
            result: LadderResult = done.value
            besides: tuple[Onset, ...] = ()
            for onset in result.besides:
                besides += ((yield from with_sensitivities(request.system, onset, longest=LONGEST_UNASKED)),)
            levels_found = tuple(filled.get(item.level, item) for item in result.levels)
            return replace(result, levels=levels_found, besides=besides)
        if isinstance(item, LadderLevel):
            onset = yield from with_sensitivities(request.system, item.onset, longest=LONGEST_UNASKED)
            item = filled[item.level] = replace(item, onset=onset)
        yield item


def opening(
    request: LadderRequest, first: Onset, kinds: frozenset[Kind]
) -> Generator[Step, None, Onset | None]:
    """The onset, of some kinds, at which the cycle that splits first in a ladder appears.

    Yields
    ------
    Step
        At safe points.

    Returns
    -------
    Onset or None
        As the generator's value; None where there is none in reach.
    """
    from tinemark.onsets.opening import opening_of
    from tinemark.onsets.sensitivities import with_sensitivities

    onset = yield from opening_of(request, first, kinds)
    return None if onset is None else (yield from with_sensitivities(request.system, onset))


def survey(request: SurveyRequest) -> Generator[Step | SurveyFind, None, SurveyResult]:
    """Find every onset of a range, of cycles of least period up to a longest one, and prove each.

    For maps of one state all superstable cycles are found in ball arithmetic, and each is followed to the
    onsets at both ends of its stable stretch; the result's message says what its completeness rests on. For
    maps of several states settled orbits and their branches are followed, and more may be there.

    Yields
    ------
    Step or SurveyFind
        Progress with its share, and each onset as it is found.

    Returns
    -------
    SurveyResult
        As the generator's value.

    Raises
    ------
    NoOnsetFound
        The range is empty, or too narrow for double precision.
    """
    _check(request.digits)
    yield from _ready(request.system, request.parameter, (request.start + request.stop) / 2)
    from tinemark.onsets.sensitivities import with_sensitivities
    from tinemark.onsets.survey import survey_of

    found: list[tuple[Onset, Onset]] = []
    job = survey_of(request)
    while True:
        try:
            item = next(job)
        except StopIteration as done:
            result: SurveyResult = done.value
            filled = {id(bare): full for bare, full in found}
            return replace(result, onsets=tuple(filled[id(onset)] for onset in result.onsets))
        if isinstance(item, SurveyFind):
            full = yield from with_sensitivities(request.system, item.onset)
            found.append((item.onset, full))
            item = SurveyFind(full)
        yield item


def branches(request: BranchRequest) -> Generator[Step, None, BranchResult]:
    """Follow the cycles of a view as branches, stable or not, around folds and into what splits off.

    The work is bounded; the result's message says where a bound was met.

    Yields
    ------
    Step
        At safe points, some milliseconds apart.

    Returns
    -------
    BranchResult
        As the generator's value.

    Raises
    ------
    NoOnsetFound
        The view has no extent, or is too narrow for double precision.
    """
    if request.max_period < 1:
        raise TinemarkError("branches have a longest period of 1 or more")
    yield from _ready(request.system, request.parameter, (request.left + request.right) / 2)
    from tinemark.onsets.branch_survey import branches_of

    return (yield from branches_of(request))


def _ready(system: System, parameter: str, value: Fraction) -> Generator[Step, None, None]:
    """Refuse equations that have no return map there."""
    if not system.is_map:
        from tinemark.onsets.flow_limits import check_equations

        yield from check_equations(system, parameter, float(value))


def _check(digits: int) -> None:
    if not 1 <= digits <= MOST_DIGITS:
        raise TinemarkError(
            f"{digits} digits cannot be asked for", what_to_do=f"ask for 1 to {MOST_DIGITS} digits"
        )
