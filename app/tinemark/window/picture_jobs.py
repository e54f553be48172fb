"""From a view to its picture: what is asked of the drawing desk, and which answer is shown."""

from __future__ import annotations

import math
from dataclasses import replace
from typing import Protocol

import numpy as np
from numpy.typing import NDArray
from PySide6.QtCore import QElapsedTimer, QObject, Qt, QTimer, Signal

from tinemark.density.request import PictureRequest, View
from tinemark.density.sampling import columns_distinct
from tinemark.document.session import Session, budget_steps
from tinemark.systems.system import System
from tinemark.window.bridge import Bridge, Painted, image_of
from tinemark.window.diagram import Diagram, Glimpse
from tinemark.window.picture_tones import Tones, table
from tinemark.window.status_line import StatusLine
from tinemark.window.theme import current_theme
from tinemark.work.pictures import PictureFailed, PictureMeasured, PictureWaits

TOO_DEEP = "Columns are closer than double precision can tell; a click still refines."


KEPT = 8
HOLD_MS = 80


class DeskLike(Protocol):
    """What is needed of `work.pictures.PictureDesk`."""

    def request(self, request: PictureRequest, budget_steps: int) -> int: ...  # noqa: D102
    def glimpse(  # noqa: D102
        self, request: PictureRequest, tone: str, colours: NDArray[np.uint32]
    ) -> NDArray[np.uint32] | None: ...
    def cancel(self) -> None: ...  # noqa: D102


class PictureJobs(QObject):
    """Asks for pictures of what the session shows; the newest wins, and a stale answer is dropped."""

    measured = Signal(float)
    """Largest error of a sample of equations, as a share of a state's size; nan where it is not known."""

    _wants = Signal()

    def __init__(
        self, diagram: Diagram, status: StatusLine, bridge: Bridge, parent: QObject | None = None
    ) -> None:
        super().__init__(parent)
        self._diagram = diagram
        self._status = status
        self._bridge = bridge
        self.desk: DeskLike | None = None
        self._wanted: tuple[PictureRequest, int] | None = None
        self._asked: dict[int, PictureRequest] = {}
        self._newest_shown = 0
        self._waiting_steps = 0
        self._in_flight = 0
        self._since = QElapsedTimer()
        self._shown_system = ""
        self._tones: Tones | None = None
        # Everything that happens in one turn of the event loop asks for one picture. A posted call comes
        # before the widgets are painted: the desk draws while the window shows the old picture stretched.
        self._posted = False
        self._wants.connect(self._ask_posted, Qt.ConnectionType.QueuedConnection)
        self._soon = QTimer(self)
        self._soon.setSingleShot(True)
        self._soon.timeout.connect(self._ask)
        # Connected before the window is: a gesture's first look is on screen before the session has changed.
        diagram.view_wanted.connect(self._look)

    def attach(self, desk: DeskLike) -> None:
        """The drawing desk is there."""
        self.desk = desk
        self._soon.start(0)

    def show(self, session: Session, system: System) -> None:
        """Have the session's picture drawn, if it is another one than is being drawn."""
        picture, parts = session.picture, self._diagram.parts
        request = PictureRequest(
            system=system,
            parameter=session.parameter,
            observe=session.observe,
            view=session.view,
            columns=parts.columns,
            rows=parts.rows,
            rule=picture.rule,
            transient_steps=picture.transient_steps,
            starts=picture.starts,
            accuracy=picture.accuracy,
        )
        identity = f"{system!r}{session.parameter}{session.observe}"
        if identity != self._shown_system:
            self._shown_system = identity
            self._asked.clear()
            self._diagram.show_waiting("")
            self._diagram.forget_picture()
            self._status.show_steps(0)
            self.measured.emit(math.nan)
        self._set_tones(session)
        wanted = (request, budget_steps(picture.budget, system))
        if wanted != self._wanted:
            self._look(session.view)
            self._wanted = wanted
            glimpse = self._diagram.glimpse
            if glimpse is not None and glimpse.view == session.view:
                # There is something to see: what is around it is painted first, undisturbed by the desk.
                self._soon.start(0)
            elif not self._posted:
                self._posted = True
                self._wants.emit()

    def _set_tones(self, session: Session) -> None:
        theme = current_theme()
        thickness = max(1, round(self._diagram.devicePixelRatioF()))
        palette = session.picture.palette or theme.picture
        tones = Tones(session.picture.tone, palette, theme.plot, theme.dark, thickness)
        if tones == self._tones:
            return
        self._tones = tones
        self._bridge.set_tones(tones)
        if self._diagram.field is not None and self._asked:
            self._bridge.on_field(self._newest_shown, self._diagram.field)

    def _look(self, view: View) -> None:
        """Show a first look at a view at once, where there is one and the old picture does not tell more."""
        if self.desk is None or self._wanted is None or self._tones is None or not self._asked:
            return
        request = self._wanted[0]
        shown = self._diagram.glimpse
        moved_only = (view.width, view.height) == (request.view.width, request.view.height)
        if moved_only or (shown is not None and shown.view == view):
            return
        # On a screen with fine pixels a branch is drawn several of them wide (`picture_tones.toned`).
        coarse = self._tones.thickness
        looked = replace(request, view=view, columns=request.columns // coarse, rows=request.rows // coarse)
        pixels = self.desk.glimpse(looked, self._tones.tone, table(self._tones))
        if pixels is not None:
            self._diagram.show_glimpse(Glimpse(image_of(pixels), pixels, view))

    def _ask_posted(self) -> None:
        self._posted = False
        self._ask()

    def _ask(self) -> None:
        if self.desk is None or self._wanted is None:
            return
        if self._in_flight and self._since.elapsed() < HOLD_MS:
            # Let the picture under way show itself first, or a moving hand would never see one.
            self._soon.start(HOLD_MS - self._since.elapsed())
            return
        request, budget = self._wanted
        if not columns_distinct(request):
            self.desk.cancel()
            self._asked.clear()
            self._in_flight = 0
            self._diagram.show_notice(TOO_DEEP)
            self._status.show_steps(0)
            self.measured.emit(math.nan)
            return
        self._diagram.show_notice("")
        number = self.desk.request(request, budget)
        self._in_flight = number
        self._since.start()
        self._asked[number] = request
        for old in sorted(self._asked)[:-KEPT]:
            del self._asked[old]

    def take(self, painted: Painted) -> None:
        """A picture has come, on the window's thread."""
        # While the hand moves, a picture of a moment ago is shown where it belongs; no older one follows.
        request = self._asked.get(painted.number)
        if request is None or painted.number < self._newest_shown:
            return
        self._newest_shown = painted.number
        if painted.number == self._in_flight:
            self._in_flight = 0
            if self._soon.isActive():
                self._soon.start(0)
        if painted.field.steps > self._waiting_steps:
            self._diagram.show_waiting("")
        self._diagram.show_picture(painted.image, painted.pixels, painted.field, request.view)
        self._status.show_steps(painted.field.steps, "steps" if request.system.is_map else "samples")

    def hear(self, event: object) -> None:
        """The desk says that a picture is done or cannot be drawn; other events are not meant for us."""
        if isinstance(event, PictureWaits) and event.id in self._asked:
            self._waiting_steps = event.steps
            self._diagram.show_waiting(event.words)
        if isinstance(event, PictureMeasured) and event.id in self._asked:
            self.measured.emit(event.error)
        if isinstance(event, PictureFailed) and event.id in self._asked:
            self._diagram.show_waiting("")
            self._in_flight = 0
            self._diagram.show_notice(f"No picture: {event.error}.")
            self._status.show_words(f"No picture: {event.error}.", "warning")

    def stop(self) -> None:
        """Stop drawing; what has been drawn stays."""
        self._diagram.show_waiting("")
        if self.desk is not None:
            self.desk.cancel()

    def detach(self) -> None:
        """The desk is about to close; ask for nothing any more."""
        self._soon.stop()
        self.desk = None
