"""The line above the diagram that asks up to which period every onset of the view is wanted."""

from __future__ import annotations

from PySide6.QtCore import Qt, Signal
from PySide6.QtGui import QKeyEvent, QPainter, QPaintEvent
from PySide6.QtWidgets import QHBoxLayout, QLabel, QPushButton, QSizePolicy, QToolButton, QWidget

from tinemark.window.field_editors import CountEdit
from tinemark.window.theme import color, current_theme

LONGEST = 64
FIRST = 8


class SurveyForm(QWidget):
    """A number and a button; Enter asks, Escape closes.

    Signals
    -------
    survey_wanted : int
        Longest period.
    closed
        The form has been closed by hand.
    """

    survey_wanted = Signal(int)
    closed = Signal()

    def __init__(self, parent: QWidget | None = None) -> None:
        super().__init__(parent)
        self.setAccessibleName("Pick every onset in this view")
        self.period = CountEdit("Longest period", 1, LONGEST, 1)
        self.period.show_count(FIRST)
        self.period.setMaximumWidth(self.period.fontMetrics().horizontalAdvance("0" * 8))
        self.period.returnPressed.connect(self._ask)
        before = QLabel("Every onset in this view, of cycles up to &period")
        before.setBuddy(self.period)
        self.period.trouble.setWordWrap(False)
        self.period.trouble.setSizePolicy(QSizePolicy.Policy.Ignored, QSizePolicy.Policy.Preferred)
        self.find_button = QPushButton("Pick them")
        self.find_button.clicked.connect(self._ask)
        close = QToolButton()
        close.setText("\N{MULTIPLICATION SIGN}")
        close.setAccessibleName("Close")
        close.clicked.connect(self.leave)
        row = QHBoxLayout(self)
        row.setContentsMargins(26, 3, 12, 3)
        row.setSpacing(8)
        row.addWidget(before)
        row.addWidget(self.period)
        row.addWidget(self.find_button)
        row.addWidget(self.period.trouble, 1)
        row.addStretch(1)
        row.addWidget(close)
        self.hide()

    def open(self) -> None:
        """Show the line with the cursor in its field."""
        self.show()
        self.period.setFocus(Qt.FocusReason.ShortcutFocusReason)
        self.period.selectAll()

    def leave(self) -> None:
        """Hide the line."""
        self.hide()
        self.closed.emit()

    def _ask(self) -> None:
        # A press of the button does not end the editing everywhere.
        self.period.editingFinished.emit()
        if self.period.trouble.text():
            return
        self.hide()
        self.survey_wanted.emit(self.period.count)

    def keyPressEvent(self, event: QKeyEvent) -> None:  # noqa: D102
        if event.key() == Qt.Key.Key_Escape:
            self.leave()
            return
        super().keyPressEvent(event)

    def paintEvent(self, event: QPaintEvent) -> None:  # noqa: ARG002, D102
        theme = current_theme()
        painter = QPainter(self)
        face = self.rect().adjusted(12, 1, -12, -1)
        painter.fillRect(face, color(theme.sunken))
        painter.fillRect(face.left(), face.top(), 3, face.height(), color(theme.accent))
        painter.end()
