"""Jobs as values: a frozen request with an id, and events that carry the id back.

An id is given once. Whoever waits for an answer remembers the id of the newest request and drops
every event of an older one.
"""

from __future__ import annotations

import itertools
from dataclasses import dataclass
from typing import TypeAlias

from tinemark.onsets.results import (
    BranchRequest,
    BranchResult,
    LadderLevel,
    LadderRequest,
    LadderResult,
    Onset,
    RefineRequest,
    RefineResult,
    SharpenRequest,
    SurveyRequest,
    SurveyResult,
)
from tinemark.systems.errors import TinemarkError

OnsetRequest: TypeAlias = RefineRequest | SharpenRequest | LadderRequest | SurveyRequest | BranchRequest
OnsetResult: TypeAlias = RefineResult | LadderResult | SurveyResult | BranchResult


@dataclass(frozen=True)
class Started:
    """The worker has taken the job up; jobs are done one after the other."""

    id: int


@dataclass(frozen=True)
class Progressed:
    """A running job says what it does; `share` is the part done (0 to 1), None where it is not known."""

    id: int
    text: str
    share: float | None = None


@dataclass(frozen=True)
class LevelFound:
    """A running ladder has found one more level."""

    id: int
    level: LadderLevel


@dataclass(frozen=True)
class OnsetFound:
    """A running survey has found one more onset; they come in no promised order."""

    id: int
    onset: Onset


@dataclass(frozen=True)
class Finished:
    """A job's answer; no event of that id follows."""

    id: int
    request: OnsetRequest
    result: OnsetResult


@dataclass(frozen=True)
class Failed:
    """A job that ended in an error of ours, `NoOnsetFound` among them; no event of that id follows."""

    id: int
    request: OnsetRequest
    error: TinemarkError


@dataclass(frozen=True)
class Cancelled:
    """A job that was cancelled; no event of that id follows."""

    id: int
    request: OnsetRequest


@dataclass(frozen=True)
class Crashed:
    """The worker process died at a job. No event of that id follows.

    Another process takes over the waiting jobs; `request` is offered again: handed back to
    `Refinery.submit` it runs anew.
    """

    id: int
    request: OnsetRequest
    exit_code: int | None

    @property
    def message(self) -> str:
        """The crash in words, with what to do."""
        return (
            f"the refinement process ended unexpectedly (exit code {self.exit_code}); "
            "nothing of the session is lost, try the same again"
        )


Event: TypeAlias = Started | Progressed | LevelFound | OnsetFound | Finished | Failed | Cancelled | Crashed
ENDS = (Finished, Failed, Cancelled, Crashed)
"""Events after which nothing more comes of their job."""


_numbers = itertools.count(1)


def new_id() -> int:
    """An id for a request: whole numbers from 1, each given once in this process, whatever is asked.

    Events of all desks may therefore share one listener. Any thread.
    """
    return next(_numbers)
