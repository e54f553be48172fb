"""The rail at the left edge: one upright tab for each panel that folds away. A tab says whether its panel
is open.
"""

from __future__ import annotations

from PySide6.QtCore import QRectF, QSize, Qt
from PySide6.QtGui import QPainter, QPaintEvent, QPen
from PySide6.QtWidgets import QAbstractButton, QSizePolicy, QVBoxLayout, QWidget

from tinemark.window.theme import color, current_theme

WIDTH = 30


class RailTab(QAbstractButton):
    """An upright tab; checked while its panel is open."""

    def __init__(self, words: str, keys: str, parent: QWidget | None = None) -> None:
        super().__init__(parent)
        self.setText(words)
        self.setCheckable(True)
        self.setToolTip(f"Show or fold the {words.lower()} ({keys})" if keys else words)
        self.setAccessibleName(f"{words} panel")
        self.setFocusPolicy(Qt.FocusPolicy.TabFocus)
        self.setSizePolicy(QSizePolicy.Policy.Fixed, QSizePolicy.Policy.Fixed)
        self.setAttribute(Qt.WidgetAttribute.WA_Hover)

    def sizeHint(self) -> QSize:  # noqa: D102
        return QSize(WIDTH, self.fontMetrics().horizontalAdvance(self.text()) + 26)

    def paintEvent(self, event: QPaintEvent) -> None:  # noqa: ARG002, D102
        theme = current_theme()
        painter = QPainter(self)
        painter.setRenderHint(QPainter.RenderHint.Antialiasing)
        face = QRectF(self.rect()).adjusted(3, 1, -3, -1)
        if self.isChecked() or self.underMouse():
            painter.setPen(Qt.PenStyle.NoPen)
            painter.setBrush(color(theme.raised if self.isChecked() else theme.sunken))
            painter.drawRoundedRect(face, 4, 4)
        if self.isChecked():
            painter.fillRect(QRectF(1, face.top() + 5, 2.5, face.height() - 10), color(theme.accent))
        if self.hasFocus():
            painter.setPen(QPen(color(theme.accent), 1.5))
            painter.setBrush(Qt.BrushStyle.NoBrush)
            painter.drawRoundedRect(face, 4, 4)
        painter.setPen(color(theme.text if self.isChecked() else theme.muted))
        painter.translate(0, self.height())
        painter.rotate(-90)
        painter.drawText(QRectF(0, 0, self.height(), self.width()), Qt.AlignmentFlag.AlignCenter, self.text())
        painter.end()


class Rail(QWidget):
    """Tabs stacked from the top."""

    def __init__(self, parent: QWidget | None = None) -> None:
        super().__init__(parent)
        self.setFixedWidth(WIDTH)
        self._column = QVBoxLayout(self)
        self._column.setContentsMargins(0, 8, 0, 8)
        self._column.setSpacing(4)
        self._column.addStretch(1)

    def add(self, words: str, keys: str) -> RailTab:
        """Put one more tab below the others."""
        tab = RailTab(words, keys, self)
        self._column.insertWidget(self._column.count() - 1, tab)
        return tab

    def paintEvent(self, event: QPaintEvent) -> None:  # noqa: ARG002, D102
        theme = current_theme()
        painter = QPainter(self)
        painter.fillRect(self.rect(), color(theme.surface))
        painter.fillRect(QRectF(self.width() - 1, 0, 1, self.height()), color(theme.line))
        painter.end()
