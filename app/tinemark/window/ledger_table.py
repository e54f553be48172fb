"""The ledger's table widget: it passes on the wishes that its keys stand for."""

from __future__ import annotations

from PySide6.QtCore import QEvent, Qt, Signal
from PySide6.QtGui import QKeyEvent, QKeySequence, QResizeEvent
from PySide6.QtWidgets import QTableView


class LedgerTable(QTableView):
    """The table; its keys are passed on as wishes."""

    wished = Signal(str)
    resized = Signal()

    def resizeEvent(self, event: QResizeEvent) -> None:
        """Tell of it once the room inside is known."""
        super().resizeEvent(event)
        self.resized.emit()

    def event(self, event: QEvent) -> bool:
        """Take copy, remove and note keys before a menu of the window does, while the table has the focus."""
        if event.type() == QEvent.Type.ShortcutOverride and isinstance(event, QKeyEvent) and _wish(event):
            event.accept()
            return True
        return super().event(event)

    def keyPressEvent(self, event: QKeyEvent) -> None:
        """Pass on the wishes; move by the other keys."""
        wish = _wish(event)
        if wish:
            self.wished.emit(wish)
            event.accept()
            return
        super().keyPressEvent(event)


def _wish(event: QKeyEvent) -> str:
    if event.matches(QKeySequence.StandardKey.Copy):
        return "copy"
    if event.matches(QKeySequence.StandardKey.Delete):
        return "remove"
    return "note" if event.key() == Qt.Key.Key_F2 else ""
