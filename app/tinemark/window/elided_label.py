"""A label that gives way: what does not fit is cut at the end and shown on hovering."""

from __future__ import annotations

from PySide6.QtCore import QSize, Qt
from PySide6.QtGui import QResizeEvent
from PySide6.QtWidgets import QLabel, QSizePolicy, QWidget


class ElidedLabel(QLabel):
    """One line of plain text, cut where the room ends.

    Parameters
    ----------
    greedy
        Takes all the room there is; otherwise no more than the text needs.
    """

    def __init__(self, *, greedy: bool = True, parent: QWidget | None = None) -> None:
        super().__init__(parent)
        self._words = ""
        self._greedy = greedy
        across = QSizePolicy.Policy.Ignored if greedy else QSizePolicy.Policy.Maximum
        self.setSizePolicy(across, QSizePolicy.Policy.Preferred)
        self.setTextFormat(Qt.TextFormat.PlainText)

    @property
    def words(self) -> str:
        """The whole text."""
        return self._words

    def set_words(self, words: str) -> None:
        """Show another text."""
        self._words = " ".join(words.split())
        self.updateGeometry()
        self._fit()

    def sizeHint(self) -> QSize:
        """The whole text's size."""
        whole = self.fontMetrics().horizontalAdvance(self._words) + 4
        return QSize(whole, super().sizeHint().height())

    def minimumSizeHint(self) -> QSize:
        """Room for a letter or two."""
        return QSize(min(24, self.sizeHint().width()), super().minimumSizeHint().height())

    def resizeEvent(self, event: QResizeEvent) -> None:
        """Cut anew."""
        super().resizeEvent(event)
        self._fit()

    def _fit(self) -> None:
        fitted = self.fontMetrics().elidedText(
            self._words, Qt.TextElideMode.ElideRight, max(self.width() - 2, 0)
        )
        self.setText(fitted)
        self.setToolTip(self._words if fitted != self._words else "")
