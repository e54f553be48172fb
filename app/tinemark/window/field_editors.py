"""Single fields: what a number, a formula or a chooser looks like and how a mistake is shown on it."""

from __future__ import annotations

from PySide6.QtCore import QEvent, QLocale, Signal
from PySide6.QtGui import QFocusEvent, QFontMetrics, QWheelEvent
from PySide6.QtWidgets import (
    QComboBox,
    QFrame,
    QGridLayout,
    QLabel,
    QLineEdit,
    QPlainTextEdit,
    QVBoxLayout,
    QWidget,
)

from tinemark.window.theme import mono_font


class FieldEdit(QLineEdit):
    """A monospaced line for a number, a name or a formula.

    Where the desktop writes decimals with a comma, a single comma typed or pasted into a number is
    taken as the point.
    """

    def __init__(self, name: str, *, number: bool = False, digits: int = 6) -> None:
        super().__init__()
        self.number = number
        self._digits = digits
        self.setAccessibleName(name)
        self.setFont(mono_font())
        self._narrow()

    def _narrow(self) -> None:
        self.setMinimumWidth(QFontMetrics(self.font()).horizontalAdvance("0") * self._digits + 18)

    def typed(self) -> str:
        """The text, a decimal comma of the desktop's locale made a point."""
        text = self.text()
        if self.number and QLocale().decimalPoint() == "," and text.count(",") == 1 and "." not in text:
            return text.replace(",", ".")
        return text

    def changeEvent(self, event: QEvent) -> None:
        """Keep the tabular face at the interface's size."""
        super().changeEvent(event)
        if event.type() == QEvent.Type.ApplicationFontChange:
            self.setFont(mono_font())
            self._narrow()


class QuietCombo(QComboBox):
    """A chooser that leaves the wheel to the page around it until it has the focus."""

    def wheelEvent(self, event: QWheelEvent) -> None:
        """Choose by wheel only with the focus."""
        if self.hasFocus():
            super().wheelEvent(event)
        else:
            event.ignore()


class NotesEdit(QPlainTextEdit):
    """Free text that reports when it is left."""

    left = Signal()

    def focusOutEvent(self, event: QFocusEvent) -> None:
        """Report and go on."""
        super().focusOutEvent(event)
        self.left.emit()


def show_as(editor: QWidget, words: str) -> None:
    """Show a field as wrong or right; the words also go to those who listen instead of look."""
    wrong = bool(words)
    editor.setAccessibleDescription(words)
    if bool(editor.property("invalid")) != wrong:
        editor.setProperty("invalid", wrong)
        editor.style().unpolish(editor)
        editor.style().polish(editor)


def field_grid(page: QVBoxLayout) -> QGridLayout:
    """A grid of fields at the end of a page: label, field, label, field, room."""
    frame = QFrame()
    grid = QGridLayout(frame)
    grid.setContentsMargins(0, 4, 0, 4)
    grid.setHorizontalSpacing(6)
    grid.setVerticalSpacing(4)
    grid.setColumnMinimumWidth(0, QFontMetrics(frame.font()).horizontalAdvance("tolerance ±"))
    grid.setColumnStretch(1, 3)
    grid.setColumnStretch(3, 2)
    page.addWidget(frame)
    return grid


def field_label(words: str, buddy: QWidget | None = None) -> QLabel:
    """A quiet label that belongs to a field."""
    label = QLabel(words)
    label.setProperty("rank", "second")
    if buddy is not None:
        label.setBuddy(buddy)
    return label
