"""The picture of an uncertainty budget: a bar for each share of the variance, the largest first."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction

from PySide6.QtCore import QEvent, QRectF, QSize, Qt
from PySide6.QtGui import QFontMetricsF, QPainter, QPaintEvent
from PySide6.QtWidgets import QSizePolicy, QWidget

from tinemark.document.tolerance_tables import share_text
from tinemark.window.panel_plot import line_pen
from tinemark.window.theme import color, current_theme, mono_font, small_font

LINE_HEIGHT = 1.7
BAR_HEIGHT = 0.62
GAP = 8.0
NAME_SHARE = 0.38
"""Most of the width that names may take."""


@dataclass(frozen=True)
class Bar:
    """One bar: what it stands for, and its share from 0 to 1."""

    words: str
    share: float
    text: str


def bars_of(shares: Sequence[tuple[str, Fraction | None]]) -> tuple[Bar, ...]:
    """Bars of (words, share) pairs, the largest first; shares that are not known have none."""
    bars = [Bar(words, float(share), share_text(share)) for words, share in shares if share is not None]
    return tuple(sorted(bars, key=lambda bar: -bar.share))


class ShareBars(QWidget):
    """The bars, each with its words before it and its percentage after it."""

    def __init__(self) -> None:
        super().__init__()
        self._bars: tuple[Bar, ...] = ()
        self.setAccessibleName("Shares of the variance")
        self.setSizePolicy(QSizePolicy.Policy.Expanding, QSizePolicy.Policy.Fixed)

    @property
    def bars(self) -> tuple[Bar, ...]:
        """What is drawn."""
        return self._bars

    def show_bars(self, bars: tuple[Bar, ...]) -> None:
        """Draw other bars."""
        self._bars = bars
        self.setAccessibleDescription("; ".join(f"{bar.words}: {bar.text}" for bar in bars))
        self.updateGeometry()
        self.update()

    def sizeHint(self) -> QSize:
        """A line a bar."""
        return QSize(200, round(self._line() * len(self._bars)) + 2)

    def minimumSizeHint(self) -> QSize:
        """The same height, any width."""
        return QSize(60, self.sizeHint().height())

    def changeEvent(self, event: QEvent) -> None:
        """Follow the font."""
        super().changeEvent(event)
        if event.type() in (QEvent.Type.FontChange, QEvent.Type.ApplicationFontChange):
            self.updateGeometry()

    def paintEvent(self, _event: QPaintEvent) -> None:
        """Names flush right before a common start, so that bars can be compared."""
        theme = current_theme()
        painter = QPainter(self)
        words, number = QFontMetricsF(small_font()), QFontMetricsF(mono_font(0.9))
        names = max((words.horizontalAdvance(bar.words) for bar in self._bars), default=0.0)
        left = min(names, NAME_SHARE * self.width()) + GAP
        room = max(self.width() - left - GAP - number.horizontalAdvance("100 %"), 1.0)
        line = self._line()
        for place, bar in enumerate(self._bars):
            top = place * line
            painter.setFont(small_font())
            painter.setPen(color(theme.text))
            name = words.elidedText(bar.words, Qt.TextElideMode.ElideRight, left - GAP)
            middle = Qt.AlignmentFlag.AlignVCenter
            painter.drawText(QRectF(0, top, left - GAP, line), middle | Qt.AlignmentFlag.AlignRight, name)
            height = BAR_HEIGHT * line
            box = QRectF(left, top + (line - height) / 2, room * bar.share, height)
            painter.fillRect(box, color(theme.accent))
            painter.setFont(mono_font(0.9))
            painter.setPen(color(theme.muted))
            end = QRectF(box.right() + GAP / 2, top, self.width() - box.right(), line)
            painter.drawText(end, middle | Qt.AlignmentFlag.AlignLeft, bar.text)
        if self._bars:
            painter.setPen(line_pen(theme.edge))
            painter.drawLine(round(left), 0, round(left), round(line * len(self._bars)))
        painter.end()

    @staticmethod
    def _line() -> float:
        return LINE_HEIGHT * QFontMetricsF(small_font()).height()
