"""Holds the session: the one value that all parts show, how it changes, and the way back.

Every change goes through here, carries a label and can be undone, except moving about: views have their
own way back.
"""

from __future__ import annotations

from dataclasses import replace
from fractions import Fraction
from pathlib import Path

from PySide6.QtCore import QObject, Signal

from tinemark.density.request import View
from tinemark.document import history, views
from tinemark.document import session as sessions
from tinemark.document.first_view import first_view
from tinemark.document.history import Timeline
from tinemark.document.ledger import Ledger
from tinemark.document.session import PictureSettings, Session
from tinemark.systems.library import builtin_names, builtin_text

UNTITLED = "Untitled"
EDIT = "edit the system"


class SessionKeeper(QObject):
    """The session, its file and its history. Lives on the window's thread.

    Signals
    -------
    changed : Session | None, Session
        Before and after; None before a session that has been opened.
    title_changed
        Name of the file, or whether there is something to save.
    """

    changed = Signal(object, object)
    title_changed = Signal()

    def __init__(self, session: Session, *, path: Path | None = None, parent: QObject | None = None) -> None:
        super().__init__(parent)
        self._timeline = Timeline(session)
        self.system = sessions.system_of(session)
        self.path = path
        self._saved = session

    # --- file ----------------------------------------------------------------------------------------------

    @property
    def name(self) -> str:
        """What the title calls the session."""
        if self.path is not None:
            return self.path.name
        return self.session.title or UNTITLED

    @property
    def is_modified(self) -> bool:
        """Whether there is something that would be lost."""
        return _kept(self.session) != _kept(self._saved)

    @property
    def builtin(self) -> str:
        """Name of the built-in system whose text the session still holds unchanged; empty otherwise."""
        text = self.session.system_text
        return next((name for name in builtin_names() if builtin_text(name) == text), "")

    def open(self, session: Session, path: Path | None) -> None:
        """Put another session in place; the old one's history goes with it."""
        system = sessions.system_of(session)
        self._timeline = Timeline(session)
        self.system, self.path, self._saved = system, path, session
        self.changed.emit(None, session)
        self.title_changed.emit()

    def saved_as(self, path: Path, session: Session) -> None:
        """Say that a session has been written to a file."""
        self.path = path
        self._saved = session
        self.title_changed.emit()

    # --- changes -------------------------------------------------------------------------------------------

    @property
    def session(self) -> Session:
        """The present session."""
        return self._timeline.present

    def do(self, label: str, session: Session, *, merge: str = "") -> None:
        """Change the session under a label that Undo shows. A change that changes nothing is none.

        Successive changes with the same non-empty `merge` are one step back.
        """
        self._become(history.record(self._timeline, session, label, merge=merge))

    def _become(self, timeline: Timeline) -> None:
        before, after = self.session, timeline.present
        was_modified = self.is_modified
        if _diagram(before) != _diagram(after):
            self.system = sessions.system_of(after)
        self._timeline = timeline
        if before != after:
            self.changed.emit(before, after)
        if self.is_modified != was_modified or after.title != before.title:
            self.title_changed.emit()

    @property
    def undo_label(self) -> str:
        """What Undo would take back; empty when there is nothing."""
        return self._timeline.undo_label

    @property
    def redo_label(self) -> str:
        """What Redo would do again; empty when there is nothing."""
        return self._timeline.redo_label

    def undo(self) -> None:
        """Take the last change back."""
        self._become(history.undo(self._timeline))

    def redo(self) -> None:
        """Do the change again that was last taken back."""
        self._become(history.redo(self._timeline))

    def set_ledger(self, label: str, ledger: Ledger) -> None:
        """Change the ledger."""
        self.do(label, replace(self.session, ledger=ledger))

    def set_picture(self, picture: PictureSettings) -> None:
        """Change how the diagram is drawn."""
        self.do("change the picture", replace(self.session, picture=picture), merge="picture")

    def set_system(self, text: str, label: str = EDIT) -> None:
        """Put another system text in place.

        The view stays while the diagram shows the same quantities over the same ranges.

        Raises
        ------
        SystemFileError, FormulaError
            The text cannot be read. Nothing has changed.
        """
        self.do(label, sessions.with_system(self.session, text), merge=label if label == EDIT else "")

    # --- looking about -------------------------------------------------------------------------------------

    def show_view(self, view: View, *, goes_on: bool = False) -> None:
        """Show another view; `goes_on` when it belongs to the same gesture as the one before."""
        if goes_on:
            self._look(replace(self.session, view=view))
        else:
            self._look(sessions.with_view(self.session, view))

    def _look(self, session: Session) -> None:
        self._become(history.look(self._timeline, session))

    def fit_view(self) -> None:
        """Show the whole diagram."""
        self.show_view(first_view(self.system))

    def view_back(self) -> None:
        """Go back one view."""
        self._look(sessions.view_back(self.session))

    def view_forward(self) -> None:
        """Go forward one view."""
        self._look(sessions.view_forward(self.session))

    def set_probe(self, value: Fraction | None) -> None:
        """Probe the orbit at a parameter value, or none."""
        self._look(replace(self.session, probe=value))


def _kept(session: Session) -> Session:
    """The session without what changes by looking about."""
    return replace(session, view=_NOWHERE, history=views.ViewHistory(), probe=None)


_NOWHERE = View(Fraction(0), Fraction(1), Fraction(0), Fraction(1))


def _diagram(session: Session) -> tuple[str, str, str]:
    return session.system_text, session.parameter, session.observe
