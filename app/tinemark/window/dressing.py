"""Dressing open windows in other colours without a pause: a few widgets a turn, nothing half-dressed seen."""

from __future__ import annotations

from collections.abc import Iterator

from PySide6.QtCore import QElapsedTimer, QObject, QTimer
from PySide6.QtWidgets import QAbstractScrollArea, QApplication, QWidget
from shiboken6 import isValid

TURN_MS = 10


class Dressing(QObject):
    """Has every widget of the application look its colours up anew. There is one for an application.

    Qt keeps the colours that it has looked up for a widget until that widget is polished anew. Windows keep
    still meanwhile and then show the new dress, one large part a turn; what is hidden comes last.
    """

    def __init__(self, app: QApplication) -> None:
        super().__init__(app)
        self._app = app
        self._still: list[QWidget] = []
        self._steps: Iterator[bool] = iter(())
        self._is_under_way = False

    @staticmethod
    def of(app: QApplication) -> Dressing:
        """The application's own."""
        return app.findChild(Dressing) or Dressing(app)

    @property
    def is_done(self) -> bool:
        """Whether every widget wears the colours there are."""
        return not self._is_under_way

    def start(self) -> None:
        """Dress all widgets: the first few now, the others in the turns that follow."""
        for window in self._app.topLevelWidgets():
            self._keep_still(window)
        self._steps = self._all()
        if not self._is_under_way:
            self._is_under_way = True
            self._go_on()

    def _go_on(self) -> None:
        spent = QElapsedTimer()
        spent.start()
        ends_turn = next(self._steps, None)
        while ends_turn is False and spent.elapsed() < TURN_MS:
            ends_turn = next(self._steps, None)
        if ends_turn is None:
            self._is_under_way = False
        else:
            QTimer.singleShot(0, self, self._go_on)

    def _all(self) -> Iterator[bool]:
        """Do a step each time; true where others have to have their turn after it."""
        widgets = self._app.allWidgets()
        seen = [widget.isVisible() for widget in widgets]
        for is_seen in (True, False):
            for widget, was_seen in zip(widgets, seen, strict=True):
                if was_seen is is_seen and isValid(widget):
                    self._dress(widget)
                    yield False
            yield from self._show()

    def _dress(self, widget: QWidget) -> None:
        font = widget.font()
        self._app.style().polish(widget)
        # Polishing puts back the font that the widget had when it was first polished.
        if widget.font() != font:
            widget.setFont(font)

    def _keep_still(self, widget: QWidget) -> None:
        if widget.isVisible() and widget.updatesEnabled():
            widget.setUpdatesEnabled(False)
            self._still.append(widget)

    def _show(self) -> Iterator[bool]:
        """Let windows be painted again: first without their tables and plots, then these one by one."""
        windows, self._still = self._still, []
        for window in windows:
            if isValid(window):
                window.setUpdatesEnabled(True)
                for part in window.findChildren(QAbstractScrollArea):
                    self._keep_still(part)
                yield True
        while self._still:
            part = self._still.pop()
            if isValid(part):
                part.setUpdatesEnabled(True)
                yield True
