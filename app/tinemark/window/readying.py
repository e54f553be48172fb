"""Making folded panels ready while the hand rests, so that opening one takes no longer than painting it."""

from __future__ import annotations

from collections.abc import Callable, Iterator, Sequence

from PySide6.QtCore import QObject, QTimer
from PySide6.QtWidgets import QWidget
from shiboken6 import isValid

PAUSE_MS = 40
WIDGETS_A_STEP = 12

Step = Callable[[], object]


class Readying(QObject):
    """Does small steps one after the other, with pauses in which everything else has its turn.

    Parameters
    ----------
    prepare
        Functions of the panels: each builds what its panel needs before it can be shown, in well under
        50 ms.
    panels
        Their widgets are polished after that, a dozen a step.
    """

    def __init__(self, prepare: Sequence[Step], panels: Sequence[QWidget], parent: QObject) -> None:
        super().__init__(parent)
        self._prepare, self._panels = tuple(prepare), tuple(panels)
        self._steps: Iterator[object] = iter(())
        self._timer = QTimer(self)
        self._timer.timeout.connect(self._go_on)

    def start(self, wait_ms: int) -> None:
        """Begin anew after `wait_ms`: what is ready already takes no time."""
        self._steps = self._all()
        self._timer.start(wait_ms)

    def stop(self) -> None:
        """Do no more."""
        self._timer.stop()

    def _go_on(self) -> None:
        self._timer.setInterval(PAUSE_MS)
        if next(self._steps, self) is self:
            self._timer.stop()

    def _all(self) -> Iterator[object]:
        for prepare in self._prepare:
            yield prepare()
        for panel in self._panels:
            waiting = panel.findChildren(QWidget)
            for first in range(0, len(waiting), WIDGETS_A_STEP):
                for widget in waiting[first : first + WIDGETS_A_STEP]:
                    if isValid(widget):
                        widget.ensurePolished()
                yield None
