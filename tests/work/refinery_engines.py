"""Engines with known behaviour: what a job does is spelled by its number of digits."""

from __future__ import annotations

import os
import time
from collections.abc import Generator
from fractions import Fraction

from tinemark.onsets.results import (
    Criticality,
    Kind,
    LadderLevel,
    LadderRequest,
    LadderResult,
    Onset,
    RefineRequest,
    RefineResult,
    Status,
    Step,
)
from tinemark.systems.errors import NoOnsetFound

ANSWER, MISS, STUCK, DIE, DEFECT, ENDLESS = 20, 21, 22, 23, 24, 25


def onset(value: str) -> Onset:
    return Onset("r", Kind.FLIP, 1, 2, Criticality.SUPERCRITICAL, value, value, value, 20, Status.PROVED)


def engine(request: RefineRequest | LadderRequest) -> Generator[object, None, object]:
    yield Step("looking", 0.0)
    if isinstance(request, LadderRequest):
        levels = [LadderLevel(n, onset(str(n))) for n in range(1, request.levels + 1)]
        yield from levels
        return LadderResult(request.base_period, tuple(levels), str(os.getpid()))
    match request.digits:
        case 21:
            raise NoOnsetFound("no onset within the view", what_to_do="zoom out")
        case 22:
            # Hangs in one step, as a long library call would.
            time.sleep(600)
        case 23:
            os._exit(7)
        case 24:
            raise ZeroDivisionError("oops")
        case 25:
            while True:
                yield Step("still looking")
    yield Step("polishing", 0.5)
    return RefineResult((onset(str(request.near)),), str(os.getpid()))


def click(system, digits: int = ANSWER, near: Fraction = Fraction(3)) -> RefineRequest:
    return RefineRequest(system, "r", near, Fraction(1), digits=digits)
