"""The onset engine: what a click and a ladder request do, whatever the number of states.

Both are generators of steps; the caller owns progress and stopping, and may drop the generator at
any step. They run in the refinement process, since ball precision is one value per process.
"""

from __future__ import annotations

from collections.abc import Generator

from tinemark.onsets.results import (
    LadderLevel,
    LadderRequest,
    LadderResult,
    RefineRequest,
    RefineResult,
    Step,
)
from tinemark.systems.errors import TinemarkError

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
    if len(request.system.states) == 1:
        from tinemark.onsets.clicks import refine_one

        return (yield from refine_one(request))
    from tinemark.onsets.many_engine import refine_many

    return (yield from refine_many(request))


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
    if len(request.system.states) == 1:
        from tinemark.onsets.ladder import ladder_one

        return (yield from ladder_one(request))
    from tinemark.onsets.many_engine import ladder_many

    return (yield from ladder_many(request))


def _check(digits: int) -> None:
    if not 1 <= digits <= MOST_DIGITS:
        raise TinemarkError(
            f"{digits} digits cannot be asked for", what_to_do=f"ask for 1 to {MOST_DIGITS} digits"
        )
