"""The one line that says what to do at the first start. It leaves once both things have been done, or on
its cross.
"""

from __future__ import annotations

from PySide6.QtCore import Signal
from PySide6.QtGui import QPainter, QPaintEvent
from PySide6.QtWidgets import QHBoxLayout, QLabel, QSizePolicy, QToolButton, QWidget

from tinemark.window.theme import color, current_theme

WORDS = "Drag a box to zoom, click near a split to get its proved value."
WORDS_OF_EQUATIONS = "Drag a box to zoom, click near a split to get its value."
OTHER = "Other demo: resonator board"


class HintLine(QWidget):
    """The line, with the way to the other demonstration and a cross to close it.

    Signals
    -------
    dismissed
        The line has left for good.
    other_asked
        The other demonstration is wanted.
    """

    dismissed = Signal()
    other_asked = Signal()

    def __init__(self, parent: QWidget | None = None) -> None:
        super().__init__(parent)
        self.label = QLabel(WORDS)
        self.label.setSizePolicy(QSizePolicy.Policy.Ignored, QSizePolicy.Policy.Preferred)
        close = QToolButton()
        close.setText("\N{MULTIPLICATION SIGN}")
        close.setAccessibleName("Close the hint")
        close.setToolTip("Do not show this again")
        close.clicked.connect(self.dismiss)
        self.other = QToolButton()
        self.other.setText(OTHER)
        self.other.setToolTip("A second invented scenario, a driven circuit; both stand in the File menu")
        self.other.clicked.connect(self.other_asked)
        row = QHBoxLayout(self)
        row.setContentsMargins(26, 3, 12, 3)
        row.addWidget(self.label, 1)
        row.addWidget(self.other)
        row.addWidget(close)
        self._zoomed = self._picked = False

    def show_kind(self, *, is_map: bool) -> None:
        """Say what a click gives: onsets of equations are proved on request alone."""
        self.label.setText(WORDS if is_map else WORDS_OF_EQUATIONS)

    def zoomed(self) -> None:
        """The view has been zoomed for the first time."""
        self._zoomed = True
        self._leave_if_done()

    def picked(self) -> None:
        """A pick has been made for the first time."""
        self._picked = True
        self._leave_if_done()

    def _leave_if_done(self) -> None:
        if self._zoomed and self._picked and self.isVisibleTo(self.parentWidget()):
            self.dismiss()

    def dismiss(self) -> None:
        """Hide the line for good."""
        self.hide()
        self.dismissed.emit()

    def paintEvent(self, event: QPaintEvent) -> None:  # noqa: ARG002, D102
        theme = current_theme()
        painter = QPainter(self)
        face = self.rect().adjusted(12, 1, -12, -1)
        painter.fillRect(face, color(theme.sunken))
        painter.fillRect(face.left(), face.top(), 3, face.height(), color(theme.accent))
        painter.end()
