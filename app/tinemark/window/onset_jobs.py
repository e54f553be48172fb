"""From a click to a row: what is asked of the refinery, what is said while it works, and what comes of the
answer.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, field, replace
from fractions import Fraction
from typing import Protocol

from PySide6.QtCore import QObject, Signal

from tinemark.density.request import View
from tinemark.document.row import Row
from tinemark.onsets.results import (
    Kind,
    LadderLevel,
    LadderRequest,
    LadderResult,
    Onset,
    RefineRequest,
    RefineResult,
    SharpenRequest,
)
from tinemark.systems.errors import TinemarkError
from tinemark.systems.system import System
from tinemark.window.callout import Choice
from tinemark.window.diagram import Diagram
from tinemark.window.ledger_marks import kind_words, refined_sentence
from tinemark.window.status_line import StatusLine
from tinemark.window.view_navigation import magnitude
from tinemark.work.jobs import Cancelled, Crashed, Failed, Finished, LevelFound, Progressed, Started

LEAST_DIGITS = 20
SPARE_DIGITS = 8
MOST_DIGITS = 150
SIGN_SHARE = 50
"""A sign of an onset is searched around within this part of the view."""
WAITING = "getting ready\N{HORIZONTAL ELLIPSIS}"


class RefineryLike(Protocol):
    """What is needed of `work.refinery.Refinery`."""

    def refine(self, request: RefineRequest) -> int: ...  # noqa: D102
    def ladder(self, request: LadderRequest) -> int: ...  # noqa: D102
    def submit(self, request: SharpenRequest) -> int: ...  # noqa: D102
    def cancel(self, id_: int) -> None: ...  # noqa: D102


@dataclass
class Job:
    """A request under way.

    Attributes
    ----------
    row
        The row to be refined; empty for a new pick.
    parameter, observed
        Where the click fell.
    levels
        Levels found so far.
    base_period
        Base period of the ladder that is gone on with; 0 where the request's own counts.
    """

    request: RefineRequest | LadderRequest | SharpenRequest
    row: str = ""
    parameter: Fraction = Fraction(0)
    observed: Fraction = Fraction(0)
    levels: list[LadderLevel] = field(default_factory=list)
    base_period: int = 0


def digits_for(view: View) -> int:
    """Digits that a value needs in this view: never fewer than 20, and always finer than a pixel."""
    largest = max(abs(view.left), abs(view.right))
    depth = magnitude(largest) - magnitude(view.width) if largest else 0
    return min(max(LEAST_DIGITS, depth + SPARE_DIGITS), MOST_DIGITS)


class OnsetJobs(QObject):
    """Keeps the jobs of the refinery and turns their events into rows and words.

    Signals
    -------
    onsets_found : (System, str row, tuple[Onset, ...])
        Onsets to keep; `row` names the row they refine, empty for new ones.
    ladder_found : (System, LadderResult)
        Levels to keep.
    asked
        Something is about to be asked of the refinery.
    """

    onsets_found = Signal(object, str, object)
    ladder_found = Signal(object, object)
    asked = Signal()

    def __init__(self, diagram: Diagram, status: StatusLine, parent: QObject | None = None) -> None:
        super().__init__(parent)
        self._diagram = diagram
        self._status = status
        self.refinery: RefineryLike | None = None
        self.jobs: dict[int, Job] = {}
        self._early: list[Job] = []

    # --- asking --------------------------------------------------------------------------------------------

    def attach(self, refinery: RefineryLike) -> None:
        """The refinery is there; ask what was waiting for it."""
        self.refinery = refinery
        early, self._early = self._early, []
        for number, job in enumerate(early, start=1):
            self._diagram.remove_pending(-number)
            self.ask(job)

    def detach(self) -> None:
        """The refinery is about to close; ask for nothing any more."""
        self.jobs.clear()
        self.refinery = None

    def pick(
        self,
        system: System,
        parameter: str,
        view: View,
        near: Fraction,
        observed: Fraction,
        kinds: frozenset[Kind] | None = None,
    ) -> None:
        """A click; with `kinds`, on a place that is known to be one of these within a part of a pixel."""
        near_by = 1 if kinds is None else SIGN_SHARE
        width, height = view.width / near_by, view.height / near_by
        request = RefineRequest(system, parameter, near, width, observed, height, digits_for(view), kinds)
        self.ask(Job(request, "", near, observed))

    def refine_row(self, system: System, row: Row, view: View) -> None:
        """A row to be worked out: searched for along its parameter, within the view and its own
        uncertainty.
        """
        near = row.onset.value_fraction
        reach = max(4 * row.onset.half_width, abs(near) / 10**6)
        width = max(view.width, reach) if row.onset.parameter == self._diagram.labels.parameter else reach
        request = RefineRequest(system, row.onset.parameter, near, width, None, None, digits_for(view))
        self.ask(Job(request, row.id, near, (view.bottom + view.top) / 2))

    def sharpen_row(self, system: System, row: Row, digits: int) -> None:
        """A row of equations to be integrated to more digits."""
        self.ask(Job(SharpenRequest(system, row.onset, digits), row.id, row.onset.value_fraction))

    def ask(self, job: Job) -> None:
        """Hand a job to the refinery, now or as soon as it is there."""
        self.asked.emit()
        if self.refinery is None:
            self._early.append(job)
            if isinstance(job.request, RefineRequest):
                self._diagram.add_pending(-len(self._early), job.parameter, job.observed, WAITING)
            self._status.show_busy(WAITING.capitalize(), None)
            return
        if isinstance(job.request, RefineRequest):
            number = self.refinery.refine(job.request)
            self._diagram.add_pending(number, job.parameter, job.observed, "refining\N{HORIZONTAL ELLIPSIS}")
            self._status.show_busy("Refining\N{HORIZONTAL ELLIPSIS}", None)
        elif isinstance(job.request, SharpenRequest):
            number = self.refinery.submit(job.request)
            words = f"Integrating to {job.request.digits} digits"
            self._status.show_busy(f"{words}\N{HORIZONTAL ELLIPSIS}", None)
        else:
            number = self.refinery.ladder(job.request)
            self._status.show_busy("Following the ladder\N{HORIZONTAL ELLIPSIS}", None)
        self.jobs[number] = job

    def cancel(self) -> bool:
        """Cancel everything under way; False when there was nothing."""
        busy = bool(self.jobs or self._early)
        for number in range(1, len(self._early) + 1):
            self._diagram.remove_pending(-number)
        self._early.clear()
        if self.refinery is not None:
            for number in self.jobs:
                self.refinery.cancel(number)
        if busy and not self.jobs:
            self._status.show_idle()
        return busy

    def forget(self) -> None:
        """Cancel everything, and keep nothing of it: the session it was asked for is gone."""
        self.cancel()
        for number in self.jobs:
            self._diagram.remove_pending(number)
        self.jobs.clear()
        self._status.show_idle()

    # --- hearing -------------------------------------------------------------------------------------------

    def hear(self, event: object) -> None:
        """An event of the refinery, on the window's thread; events of unknown jobs are dropped."""
        number = getattr(event, "id", 0)
        job = self.jobs.get(number)
        if job is None:
            return
        if isinstance(event, Started):
            return
        if isinstance(event, Progressed):
            self._status.show_busy(sentence(event.text), event.share)
            return
        if isinstance(event, LevelFound):
            self._level_found(job, event.level)
            return
        del self.jobs[number]
        self._diagram.remove_pending(number)
        if not self.jobs:
            self._status.show_idle()
        if isinstance(event, Finished):
            self._finished(job, event.result)
        elif isinstance(event, Failed):
            self._failed(job, event.error)
        elif isinstance(event, Cancelled):
            self._cancelled(job)
        elif isinstance(event, Crashed):
            self._crashed(job, event.message)

    def _level_found(self, job: Job, level: LadderLevel) -> None:
        job.levels.append(level)
        wanted = job.request.levels if isinstance(job.request, LadderRequest) else 0
        share = len(job.levels) / wanted if wanted else None
        value = level.onset.value[:18]
        self._status.show_busy(
            f"Level {level.level}: {level.onset.parameter} = {value}\N{HORIZONTAL ELLIPSIS}", share
        )

    def _finished(self, job: Job, result: RefineResult | LadderResult) -> None:
        system = job.request.system
        # Words first: who keeps the onsets may have more to say.
        if isinstance(result, LadderResult):
            count = len(result.levels)
            words = f"{count} level{'' if count == 1 else 's'} found."
            self._status.show_words(f"{words} {sentence(result.message)}".strip())
            self._keep_ladder(job, result)
        elif len(result.onsets) == 1 or (job.row and result.onsets):
            self._status.show_words(refined_sentence(result.onsets[0]))
            self.onsets_found.emit(system, job.row, result.onsets[:1])
        elif result.onsets:
            self._offer(job, system, result)
        else:
            self._say(job, sentence(result.message) or "No onset in reach.", "warning")

    def _offer(self, job: Job, system: System, result: RefineResult) -> None:
        def keep(*onsets: Onset) -> Callable[[], None]:
            return lambda: self.onsets_found.emit(system, "", onsets)

        choices = [Choice(_choice_words(onset), keep(onset)) for onset in result.onsets]
        choices.append(Choice("Keep both" if len(choices) == 2 else "Keep all", keep(*result.onsets)))
        words = sentence(result.message) or "Two onsets are close to the click. Which one is meant?"
        self._diagram.show_callout(job.parameter, job.observed, words, choices)
        self._status.show_words(words)

    def _failed(self, job: Job, error: TinemarkError) -> None:
        words = sentence(str(error))
        if job.levels and isinstance(job.request, LadderRequest):
            self._keep_levels(job, words)
        else:
            self._say(job, words, "warning")

    def _cancelled(self, job: Job) -> None:
        if job.levels and isinstance(job.request, LadderRequest):
            self._keep_levels(job, "Cancelled.")
        else:
            self._status.show_words("Cancelled.")

    def _keep_levels(self, job: Job, words: str) -> None:
        assert isinstance(job.request, LadderRequest)
        count = len(job.levels)
        self._status.show_words(f"{words} Kept {count} level{'' if count == 1 else 's'} found before.")
        self._keep_ladder(job, LadderResult(job.request.base_period, tuple(job.levels), words))

    def _keep_ladder(self, job: Job, result: LadderResult) -> None:
        result = replace(result, base_period=job.base_period or result.base_period)
        self.ladder_found.emit(job.request.system, result)

    def _crashed(self, job: Job, words: str) -> None:
        again = Choice("Try again", lambda: self.ask(replace(job, levels=[])))
        place = self._place(job)
        self._diagram.show_callout(*place, sentence(words), [again])
        self._status.show_words(sentence(words), "error")

    def _say(self, job: Job, words: str, rank: str) -> None:
        if isinstance(job.request, RefineRequest):
            self._diagram.show_callout(*self._place(job), words)
        self._status.show_words(words, rank)

    def _place(self, job: Job) -> tuple[Fraction, Fraction]:
        if isinstance(job.request, RefineRequest):
            return job.parameter, job.observed
        view = self._diagram.view
        return (view.left + view.right) / 2, (view.bottom + view.top) / 2


def _choice_words(onset: Onset) -> str:
    return f"{kind_words(onset)} at {onset.value[:14]}"


def sentence(words: str) -> str:
    """Words with a capital and a full stop."""
    words = words.strip()
    if not words:
        return ""
    words = words[0].upper() + words[1:]
    return words if words.endswith((".", "!", "?", "\N{HORIZONTAL ELLIPSIS}")) else words + "."
