"""From the session's probe value to the orbit in the probe panel."""

from __future__ import annotations

from typing import Protocol

from PySide6.QtCore import QObject

from tinemark.document.session import Session
from tinemark.systems.exact import fraction_text
from tinemark.systems.system import System
from tinemark.window.diagram import Diagram
from tinemark.window.panels import Panels
from tinemark.window.probe_panel import ProbePanel
from tinemark.work.probe import ProbeFailed, ProbeReady, ProbeRequest


class ProbeDeskLike(Protocol):
    """What is needed of `work.probe.ProbeDesk`."""

    def request(self, request: ProbeRequest) -> int: ...  # noqa: D102
    def cancel(self) -> None: ...  # noqa: D102


class ProbeJobs(QObject):
    """Asks for the orbit that the session probes, and shows the newest answer."""

    def __init__(
        self, panel: ProbePanel, diagram: Diagram, panels: Panels, parent: QObject | None = None
    ) -> None:
        super().__init__(parent)
        self._panel, self._diagram, self._panels = panel, diagram, panels
        self.desk: ProbeDeskLike | None = None
        self._wanted: ProbeRequest | None = None
        self._shown: ProbeRequest | None = None
        self._number = 0

    def attach(self, desk: ProbeDeskLike) -> None:
        """The desk is there; ask for what was waiting."""
        self.desk = desk
        self._ask()

    def detach(self) -> None:
        """The desk is about to close; ask for nothing any more."""
        self.desk = None

    def show(self, session: Session, system: System, *, reveal: bool) -> None:
        """Show the session's probe, and fold the panel when there is none.

        `reveal` opens the panel for a new probe; one that comes with an opened session waits folded.
        """
        self._diagram.show_probe(session.probe)
        if session.probe is None:
            if self._wanted is not None:
                self._wanted = None
                if self.desk is not None:
                    self.desk.cancel()
                self._panel.show_orbit(None, parameter=session.parameter)
                self._panels.set_open("probe", False)
            return
        wanted = ProbeRequest(
            system.with_diagram(session.parameter, session.observe), session.parameter, session.probe
        )
        if wanted == self._wanted:
            return
        self._wanted = wanted
        if reveal:
            self._panels.set_open("probe", True)
        self._ask()

    def _ask(self) -> None:
        if self.desk is not None and self._wanted is not None:
            self._number = self.desk.request(self._wanted)

    @property
    def is_up_to_date(self) -> bool:
        """Whether the orbit that is wanted is shown."""
        return self._wanted is None or self._shown == self._wanted

    def hear(self, event: object) -> None:
        """An answer of the probe's desk; others are not meant for us."""
        if isinstance(event, ProbeReady) and event.id == self._number and self._wanted is not None:
            request = self._shown = event.request
            states = request.system.states
            self._panel.show_orbit(
                event.orbit,
                parameter=request.parameter,
                value=_short(request),
                observe=request.system.observe,
                state=states[0].name if len(states) == 1 else "",
            )
        elif isinstance(event, ProbeFailed) and event.id == self._number and self._wanted is not None:
            self._panel.show_orbit(None, parameter=event.request.parameter, words=str(event.error))


def _short(request: ProbeRequest) -> str:
    """The value in at most 30 digits: a click's rational can be very long."""
    text = fraction_text(request.value)
    return text if len(text) <= 32 else fraction_text(request.value, 30)
