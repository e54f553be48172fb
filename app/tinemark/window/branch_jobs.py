"""From the resting view to its branches: asked for when the hand rests, dropped for anything more urgent."""

from __future__ import annotations

from typing import TYPE_CHECKING, Protocol

from PySide6.QtCore import QElapsedTimer, QObject, QTimer

from tinemark.density.request import View
from tinemark.document.session import Session
from tinemark.onsets.results import BranchRequest, BranchResult
from tinemark.systems.system import System
from tinemark.window.branch_curves import BranchCurves
from tinemark.window.onset_jobs import sentence
from tinemark.work.jobs import Cancelled, Crashed, Failed, Finished, Progressed

if TYPE_CHECKING:
    from tinemark.window.main_window import MainWindow

REST_MS = 350
"""The view has rested this long before its branches are asked for."""
LONG_MS = 600
"""Work that takes longer is shown in the status line."""
FLAG = "branches"


class BranchDesk(Protocol):
    """What is needed of `work.refinery.Refinery`."""

    def branches(self, request: BranchRequest) -> int: ...  # noqa: D102
    def cancel(self, id_: int) -> None: ...  # noqa: D102


class BranchJobs(QObject):
    """Keeps the branches of the view up to date while they are switched on; the newest view wins.

    The refinery works on one thing at a time, and a click comes first: what runs for a view is cancelled
    then, and asked for again when nothing else is under way.
    """

    def __init__(self, window: MainWindow) -> None:
        super().__init__(window)
        self._window = window
        self.desk: BranchDesk | None = None
        self.on = window.memory.flag(FLAG, False)
        self._wanted: BranchRequest | None = None
        self._number = 0
        self._asked: BranchRequest | None = None
        self._identity = ""
        self._told = False
        self._said = ""
        self._since = QElapsedTimer()
        self._soon = QTimer(self)
        self._soon.setSingleShot(True)
        self._soon.timeout.connect(self._ask)
        window.onsets.asked.connect(self.give_way)

    def attach(self, desk: BranchDesk) -> None:
        """The refinery is there."""
        self.desk = desk
        if self._wanted is not None:
            self._soon.start(REST_MS)

    def detach(self) -> None:
        """The refinery is about to close; ask for nothing any more."""
        self._soon.stop()
        self.desk, self._number = None, 0

    def switch(self) -> None:
        """Show the branches, or show them no more."""
        self.on = not self.on
        self._window.memory.keep_flag(FLAG, self.on)
        if self.on:
            self.show(self._window.keeper.session, self._window.keeper.system)
        else:
            self._stop()
            self._wanted = None
            self._window.diagram.show_branches(None)
        self._window.refresh_actions()

    def show(self, session: Session, system: System) -> None:
        """Have the branches of the session's view, if they are switched on and others than are there."""
        identity = f"{system!r}{session.parameter}{session.observe}"
        if identity != self._identity:
            self._identity = identity
            self._window.diagram.show_branches(None)
        if not self.on:
            return
        view = session.view
        wanted = BranchRequest(
            system, session.parameter, session.observe, view.left, view.right, view.bottom, view.top
        )
        if wanted != self._wanted:
            self._wanted = wanted
            self._stop()
            if self._said:
                self._say("")
            self._soon.start(REST_MS)

    @property
    def is_up_to_date(self) -> bool:
        """Whether nothing is waited for."""
        return not self._number and not self._soon.isActive()

    def give_way(self) -> None:
        """Something more urgent is about to be asked; go on after it."""
        if self._number:
            self._stop()
            self._soon.start(REST_MS)

    def cancel(self) -> bool:
        """Stop what runs, for this view; False when nothing did."""
        busy = bool(self._number)
        self._stop()
        return busy

    def _stop(self) -> None:
        self._soon.stop()
        if self._number and self.desk is not None:
            self.desk.cancel(self._number)
        self._number = 0
        self._rest()

    def _rest(self) -> None:
        if self._told and not self._window.is_finding:
            self._window.status.show_idle()
            self._window.status.show_words("")
        self._told = False

    def _say(self, words: str) -> None:
        """Say something that holds for one view, in place of what was said of another."""
        shown = self._window.status.words.words
        if not shown or shown == self._said:
            self._window.status.show_words(words)
            self._said = self._window.status.words.words if words else ""

    def _ask(self) -> None:
        if self.desk is None or self._wanted is None:
            return
        if self._window.is_finding:
            self._soon.start(REST_MS)
            return
        self._asked = self._wanted
        self._number = self.desk.branches(self._wanted)
        self._since.start()

    def hear(self, event: object) -> None:
        """An event of the refinery; those of other jobs are not meant for us."""
        if not self._number or getattr(event, "id", 0) != self._number:
            return
        if isinstance(event, Progressed):
            if self._since.elapsed() > LONG_MS:
                self._told = True
                self._window.status.show_busy(sentence(event.text), event.share)
            return
        if not isinstance(event, Finished | Failed | Cancelled | Crashed):
            return
        self._number = 0
        told = self._told
        self._rest()
        status = self._window.status
        if isinstance(event, Finished) and isinstance(event.result, BranchResult):
            request = event.request
            assert isinstance(request, BranchRequest)
            view = View(request.left, request.right, request.bottom, request.top)
            self._window.diagram.show_branches(BranchCurves(event.result, view))
            if told or self._said:
                self._say(sentence(event.result.message))
        elif isinstance(event, Failed):
            self._window.diagram.show_branches(None)
            status.show_words(sentence(f"No branches: {event.error}"), "warning")
        elif isinstance(event, Crashed):
            status.show_words(sentence(event.message), "error")
