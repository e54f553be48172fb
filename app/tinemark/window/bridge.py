"""The one place where work's callbacks reach the window.

Worker threads call `on_field` and `on_event`; the window's thread gets the signals. Tone mapping runs
here on a thread of its own, so that neither the drawing nor the window waits for it; errands of the
window (probe orbits, estimates, files of pictures) on another. Between the two threads lies a mailbox
with room for one picture: a newer one takes the place of one that has not been looked at.
"""

from __future__ import annotations

import threading
from collections.abc import Callable
from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from PySide6.QtCore import QObject, Qt, Signal
from PySide6.QtGui import QImage

from tinemark.density.field import Field
from tinemark.window.picture_tones import Tones, toned


@dataclass(frozen=True)
class Painted:
    """A field with the image made of it. `pixels` is the memory that `image` looks at."""

    number: int
    field: Field
    pixels: NDArray[np.uint32]
    image: QImage


def image_of(pixels: NDArray[np.uint32]) -> QImage:
    """An image that looks at pixels 0xffRRGGBB, shape (rows, columns), which must outlive it."""
    rows, columns = pixels.shape
    return QImage(pixels.data, columns, rows, columns * 4, QImage.Format.Format_RGB32)


class Bridge(QObject):
    """Carries fields and events to the window's thread.

    Signals
    -------
    picture_ready : Painted
        The newest picture, on the window's thread.
    event_came : work.jobs.Event
        An event of the refinery or of another worker, on the window's thread, in order.
    trouble : str
        Something went wrong on the way, in words.
    """

    picture_ready = Signal(object)
    trouble = Signal(str)
    event_came = Signal(object)
    _knocked = Signal()
    _posted = Signal(object)
    _returned = Signal(str, int, object)

    def __init__(self, parent: QObject | None = None) -> None:
        super().__init__(parent)
        self._lock = threading.Lock()
        self._mail: Painted | None = None
        self._waiting: tuple[int, Field] | None = None
        self._toning = False
        self._closed = False
        self._tones: Tones | None = None
        self._toner = ThreadPoolExecutor(1, thread_name_prefix="toner")
        self._errands = ThreadPoolExecutor(1, thread_name_prefix="errands")
        self._thens: dict[str, tuple[int, Callable[[object], None], Callable[[BaseException], None]]] = {}
        self._count = 0
        self._knocked.connect(self._open_mail, Qt.ConnectionType.QueuedConnection)
        self._posted.connect(self.event_came, Qt.ConnectionType.QueuedConnection)
        self._returned.connect(self._hand_back, Qt.ConnectionType.QueuedConnection)

    def set_tones(self, tones: Tones) -> None:
        """How pictures are coloured from now on. The window's thread."""
        self._tones = tones

    def on_field(self, number: int, field: Field) -> None:
        """Take a field to be shown. Any thread."""
        with self._lock:
            if self._closed:
                return
            self._waiting = (number, field)
            if self._toning:
                return
            self._toning = True
            self._toner.submit(self._tone)

    def on_event(self, event: object) -> None:
        """Take an event. Any thread."""
        with self._lock:
            if self._closed:
                return
            self._posted.emit(event)

    def _tone(self) -> None:
        """Colour whatever waits, newest only, until nothing does. The toner's thread."""
        while True:
            with self._lock:
                waiting, self._waiting = self._waiting, None
                tones = self._tones
                if waiting is None or tones is None or self._closed:
                    self._toning = False
                    return
            number, field = waiting
            try:
                pixels = toned(field, tones)
            except Exception as error:  # noqa: BLE001 - the thread must go on, and the window says what it was
                with self._lock:
                    if not self._closed:
                        self.trouble.emit(f"The picture could not be coloured: {error}")
                continue
            image = image_of(pixels)
            with self._lock:
                knock = self._mail is None
                self._mail = Painted(number, field, pixels, image)
                if knock and not self._closed:
                    self._knocked.emit()

    def _open_mail(self) -> None:
        with self._lock:
            mail, self._mail = self._mail, None
        if mail is not None and not self._closed:
            self.picture_ready.emit(mail)

    def call(
        self,
        errand: str,
        function: Callable[[], object],
        then: Callable[[object], None],
        failed: Callable[[BaseException], None],
    ) -> None:
        """Run a function on the errands' thread and hand its result to `then`, or its error to `failed`.

        Both are called on the window's thread. Only the newest call of each errand is answered. The window's
        thread.
        """
        if self._closed:
            return
        self._count += 1
        number = self._count
        self._thens[errand] = (number, then, failed)
        self._errands.submit(self._run, errand, number, function)

    def forget(self, errand: str) -> None:
        """Let an errand go unanswered. The window's thread."""
        self._thens.pop(errand, None)

    def _run(self, errand: str, number: int, function: Callable[[], object]) -> None:
        newest = self._thens.get(errand)
        if newest is None or newest[0] != number:
            return
        outcome: tuple[bool, object]
        try:
            outcome = (True, function())
        except Exception as error:  # noqa: BLE001 - whatever it is, the window says it
            outcome = (False, error)
        with self._lock:
            if not self._closed:
                self._returned.emit(errand, number, outcome)

    def _hand_back(self, errand: str, number: int, outcome: tuple[bool, object]) -> None:
        entry = self._thens.get(errand)
        if self._closed or entry is None or entry[0] != number:
            return
        del self._thens[errand]
        worked, value = outcome
        if worked:
            entry[1](value)
        else:
            assert isinstance(value, BaseException)
            entry[2](value)

    def close(self) -> None:
        """Let nothing more through and end the toner's thread. The window's thread."""
        with self._lock:
            self._closed = True
            self._waiting = None
        self._thens.clear()
        self._toner.shutdown(wait=True, cancel_futures=True)
        self._errands.shutdown(wait=True, cancel_futures=True)
