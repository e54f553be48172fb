"""The desks and the refinery: made off the window's thread once the window is on screen, ended with it."""

from __future__ import annotations

import importlib
from collections.abc import Callable
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

from PySide6.QtCore import QObject, QTimer

from tinemark.systems.system import System
from tinemark.window.bridge import Bridge
from tinemark.window.collection import collect_as_ever, hold_collection, set_aside

if TYPE_CHECKING:
    from tinemark.window.main_window import MainWindow


LOADED_MS = 5000
"""By then everything that a start loads has been loaded."""


@dataclass(frozen=True)
class Made:
    """What the window hands its work to."""

    pictures: Any
    probes: Any
    refinery: Any


def make_all(bridge: Bridge) -> Made:
    """Make the desks and start the refinery's process. Imports what is heavy, so never the window's
    thread.
    """
    from tinemark.work.pictures import PictureDesk
    from tinemark.work.probe import ProbeDesk
    from tinemark.work.refinery import Refinery

    # The system card's reader, so that its first form does not wait for it.
    importlib.import_module("tomlkit")
    return Made(
        PictureDesk(bridge.on_field, bridge.on_event), ProbeDesk(bridge.on_event), Refinery(bridge.on_event)
    )


class Workers(QObject):
    """Keeps what `make_all` made."""

    def __init__(self, bridge: Bridge, window: MainWindow) -> None:
        super().__init__(window)
        self._bridge, self._window = bridge, window
        self._make: Callable[[Bridge], Made] = make_all
        self._made: Made | None = None
        self._to_warm: System | None = None
        self._closed = False
        self._loaded = QTimer(self)
        self._loaded.setSingleShot(True)
        self._loaded.timeout.connect(set_aside)

    def make_with(self, make: Callable[[Bridge], Made]) -> None:
        """Have them made by another function, before they are started."""
        self._make = make

    def start(self) -> None:
        """Make them, off the window's thread."""
        hold_collection()
        self._loaded.start(LOADED_MS)
        self._bridge.call("workers", self._make_or_close, self._take, self._fail)

    def _make_or_close(self) -> object:
        made = self._make(self._bridge)
        if self._closed:
            _close(made)
            return None
        self._made = made
        return made

    def _take(self, made: object) -> None:
        if not isinstance(made, Made):
            return
        window = self._window
        window.pictures.attach(made.pictures)
        window.probes.attach(made.probes)
        window.onsets.attach(made.refinery)
        window.branches.attach(made.refinery)
        window.surveys.attach(made.refinery)
        if self._to_warm is not None:
            made.refinery.warm(self._to_warm)

    def _fail(self, error: BaseException) -> None:
        self._window.status.show_words(f"The drawing and refining could not be started: {error}", "error")

    def warm(self, system: System) -> None:
        """Have a system's evaluators built before the first click."""
        self._to_warm = system
        if self._made is not None:
            self._made.refinery.warm(system)

    def close(self) -> None:
        """End the threads and the process. The bridge has been closed before, so nothing is made any more."""
        self._closed = True
        self._loaded.stop()
        collect_as_ever()
        made, self._made = self._made, None
        if made is not None:
            _close(made)


def _close(made: Made) -> None:
    for part in (made.pictures, made.probes, made.refinery):
        part.close()
