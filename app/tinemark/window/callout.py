"""A few words at the place they are about, with buttons where there is something to choose. Never a box in
the way.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass

from PySide6.QtCore import QEvent, QPointF, QRectF, Qt, Signal
from PySide6.QtGui import QKeyEvent, QPainter, QPainterPath, QPaintEvent, QPen
from PySide6.QtWidgets import QHBoxLayout, QLabel, QPushButton, QSizePolicy, QVBoxLayout, QWidget

from tinemark.window.theme import color, current_theme

WIDEST_PX = 340


@dataclass(frozen=True)
class Choice:
    """A button: its words, and what it does."""

    words: str
    act: Callable[[], None]


class Callout(QWidget):
    """Words near a place of the plot. Escape, its cross, a choice or the next gesture take it away."""

    closed = Signal()

    def __init__(self, parent: QWidget, words: str, choices: Sequence[Choice] = ()) -> None:
        super().__init__(parent)
        self.setObjectName("callout")
        self.setCursor(Qt.CursorShape.ArrowCursor)
        self.setAccessibleName(words)
        self.words = words
        label = QLabel(words)
        label.setWordWrap(True)
        label.setTextInteractionFlags(Qt.TextInteractionFlag.TextSelectableByMouse)
        label.setSizePolicy(QSizePolicy.Policy.Preferred, QSizePolicy.Policy.Minimum)
        label.setFixedWidth(min(WIDEST_PX, label.fontMetrics().horizontalAdvance(words) + 4))
        close = QPushButton("\N{MULTIPLICATION SIGN}")
        close.setFlat(True)
        close.setFixedSize(22, 22)
        close.setStyleSheet("QPushButton { border: none; padding: 0; background: transparent; }")
        close.setAccessibleName("Close")
        close.setToolTip("Close (Esc)")
        close.clicked.connect(self.dismiss)
        top = QHBoxLayout()
        top.addWidget(label, 1)
        top.addWidget(close, 0, Qt.AlignmentFlag.AlignTop)
        column = QVBoxLayout(self)
        column.setContentsMargins(12, 9, 7, 10)
        column.setSpacing(6)
        column.addLayout(top)
        self.buttons: list[QPushButton] = []
        for choice in choices:
            button = QPushButton(choice.words)
            button.clicked.connect(lambda _=False, act=choice.act: self._chosen(act))
            column.addWidget(button, 0, Qt.AlignmentFlag.AlignLeft)
            self.buttons.append(button)

    def point_at(self, place: QPointF, within: QRectF) -> None:
        """Show the callout beside a place, inside a rectangle of the parent."""
        self.adjustSize()
        x = (
            place.x() + 14
            if place.x() + 14 + self.width() < within.right()
            else place.x() - 14 - self.width()
        )
        y = (
            place.y() + 12
            if place.y() + 12 + self.height() < within.bottom()
            else place.y() - 12 - self.height()
        )
        x = min(max(x, within.left() + 4), max(within.left() + 4, within.right() - self.width() - 4))
        y = min(max(y, within.top() + 4), max(within.top() + 4, within.bottom() - self.height() - 4))
        self.move(round(x), round(y))
        self.show()
        self.raise_()
        if self.buttons:
            self.buttons[0].setFocus(Qt.FocusReason.OtherFocusReason)

    def dismiss(self) -> None:
        """Take the callout away."""
        self.hide()
        self.closed.emit()
        self.deleteLater()

    def _chosen(self, act: Callable[[], None]) -> None:
        self.dismiss()
        act()

    def keyPressEvent(self, event: QKeyEvent) -> None:  # noqa: D102
        if event.key() == Qt.Key.Key_Escape:
            self.dismiss()
        else:
            super().keyPressEvent(event)

    def mousePressEvent(self, event: QEvent) -> None:  # noqa: D102
        event.accept()

    def paintEvent(self, event: QPaintEvent) -> None:  # noqa: ARG002, D102
        theme = current_theme()
        painter = QPainter(self)
        painter.setRenderHint(QPainter.RenderHint.Antialiasing)
        path = QPainterPath()
        path.addRoundedRect(QRectF(self.rect()).adjusted(0.5, 0.5, -0.5, -0.5), 6, 6)
        painter.fillPath(path, color(theme.raised))
        painter.setPen(QPen(color(theme.edge), 1.0))
        painter.drawPath(path)
        painter.fillRect(QRectF(0.5, 8, 3, self.height() - 16), color(theme.accent))
        painter.end()
