"""Picking every onset of the view: rows come as they are found, and all of them are one step back."""

from __future__ import annotations

from dataclasses import dataclass, field, replace
from typing import TYPE_CHECKING, Protocol

from PySide6.QtCore import QObject, QTimer

from tinemark.document import ledger as ledgers
from tinemark.onsets.results import Onset, SurveyRequest, SurveyResult
from tinemark.systems.errors import TinemarkError
from tinemark.window.onset_jobs import digits_for, sentence
from tinemark.work.jobs import Cancelled, Crashed, Failed, Finished, OnsetFound, Progressed

if TYPE_CHECKING:
    from tinemark.window.main_window import MainWindow

GATHER_MS = 250
"""Onsets that come within this time are put into the ledger together."""


class SurveyDesk(Protocol):
    """What is needed of `work.refinery.Refinery`."""

    def survey(self, request: SurveyRequest) -> int: ...  # noqa: D102
    def cancel(self, id_: int) -> None: ...  # noqa: D102


@dataclass
class _Survey:
    """A survey under way; `new` and `known` count the onsets that the ledger did not hold, and did."""

    request: SurveyRequest
    step: str
    waiting: list[Onset] = field(default_factory=list)
    seen: set[tuple[str, int, str]] = field(default_factory=set)
    new: int = 0
    known: int = 0


class SurveyJobs(QObject):
    """The one survey of a window."""

    def __init__(self, window: MainWindow) -> None:
        super().__init__(window)
        self._window = window
        self.desk: SurveyDesk | None = None
        self._running: _Survey | None = None
        self._number = 0
        self._count = 0
        self._gathered = QTimer(self)
        self._gathered.setSingleShot(True)
        self._gathered.timeout.connect(self._put_in)

    def attach(self, desk: SurveyDesk) -> None:
        """The refinery is there."""
        self.desk = desk

    def detach(self) -> None:
        """The refinery is about to close; ask for nothing any more."""
        self._gathered.stop()
        self.desk, self._running = None, None

    @property
    def busy(self) -> bool:
        """Whether a survey is under way."""
        return self._running is not None

    def ask(self, max_period: int) -> None:
        """Pick every onset of the view, of cycles up to a longest period."""
        status = self._window.status
        if self.desk is None:
            status.show_words("The refining is not ready yet; try again in a moment.", "warning")
            return
        if self._running is not None:
            status.show_words("A survey is under way already; cancel it first.", "warning")
            return
        session = self._window.keeper.session
        view = session.view
        request = SurveyRequest(
            self._window.keeper.system,
            session.parameter,
            view.left,
            view.right,
            max_period,
            digits_for(view),
        )
        self._count += 1
        self._running = _Survey(request, f"survey {self._count}")
        self._window.branches.give_way()
        self._number = self.desk.survey(request)
        status.show_busy("Looking for every onset in this view\N{HORIZONTAL ELLIPSIS}", None)

    def cancel(self) -> bool:
        """Cancel the survey, keeping what was found; False when there is none."""
        if self._running is None:
            return False
        if self.desk is not None:
            self.desk.cancel(self._number)
        return True

    def forget(self) -> None:
        """Cancel, and keep nothing more: the session it was asked for is gone."""
        if self.cancel():
            self._gathered.stop()
            self._running = None
            self._window.status.show_idle()

    # --- hearing -------------------------------------------------------------------------------------------

    def hear(self, event: object) -> None:
        """An event of the refinery; those of other jobs are not meant for us."""
        survey = self._running
        if survey is None or getattr(event, "id", 0) != self._number:
            return
        if isinstance(event, Progressed):
            found = len(survey.seen)
            words = f"{found} onset{'' if found == 1 else 's'} so far: {event.text}" if found else event.text
            self._window.status.show_busy(sentence(words), event.share)
        elif isinstance(event, OnsetFound):
            self._take(survey, event.onset)
        elif isinstance(event, Finished | Failed | Cancelled | Crashed):
            self._end(survey, event)

    def _take(self, survey: _Survey, onset: Onset) -> None:
        name = (onset.kind.value, onset.period_after, onset.value)
        if name in survey.seen:
            return
        survey.seen.add(name)
        survey.waiting.append(onset)
        if not self._gathered.isActive():
            self._gathered.start(GATHER_MS)

    def _put_in(self) -> None:
        """Put what has come into the ledger."""
        survey = self._running
        if survey is None or not survey.waiting:
            return
        onsets, survey.waiting = survey.waiting, []
        if not self._window.rows.knows(survey.request.system):
            self.cancel()
            return
        keeper = self._window.keeper
        ledger, place = keeper.session.ledger, ledgers.place_of(survey.request.system, onsets[0].parameter)
        try:
            for onset in onsets:
                before = len(ledger.rows)
                ledger, _ = ledgers.add(ledger, onset, place)
                added = len(ledger.rows) > before
                survey.new += added
                survey.known += not added
        except TinemarkError as error:
            self._window.status.show_words(sentence(str(error)), "warning")
            self.cancel()
        label = f"pick every onset up to period {survey.request.max_period}"
        keeper.do(label, replace(keeper.session, ledger=ledger), merge=survey.step)

    def _end(self, survey: _Survey, event: Finished | Failed | Cancelled | Crashed) -> None:
        self._gathered.stop()
        message, rank = "", ""
        if isinstance(event, Finished) and isinstance(event.result, SurveyResult):
            for onset in event.result.onsets:
                self._take(survey, onset)
            message = event.result.message
        elif isinstance(event, Failed):
            message, rank = str(event.error), "warning"
        elif isinstance(event, Cancelled):
            message = "Cancelled; what was found before is kept" if survey.seen else "Cancelled"
        elif isinstance(event, Crashed):
            message, rank = event.message, "error"
        self._gathered.stop()
        self._put_in()
        self._running = None
        status = self._window.status
        status.show_idle()
        status.show_words(f"{kept_words(survey.new, survey.known)} {sentence(message)}".strip(), rank)


def kept_words(new: int, known: int) -> str:
    """What a survey has put into the ledger, as a sentence; empty where it found nothing."""
    if not new and not known:
        return ""
    rows = f"{new} new row{'' if new == 1 else 's'}"
    if not known:
        return f"{rows}."
    was = "was" if known == 1 else "were"
    return f"{rows}; {known} onset{'' if known == 1 else 's'} {was} in the ledger already."
