"""Single fields: what a number, a formula or a chooser looks like and how a mistake is shown on it."""

from __future__ import annotations

from PySide6.QtCore import QEvent, QLocale, QPointF, Qt, Signal
from PySide6.QtGui import (
    QFocusEvent,
    QFontMetrics,
    QKeyEvent,
    QPainter,
    QPaintEvent,
    QPen,
    QPolygonF,
    QWheelEvent,
)
from PySide6.QtWidgets import (
    QComboBox,
    QFrame,
    QGridLayout,
    QLabel,
    QLineEdit,
    QMenu,
    QPlainTextEdit,
    QToolButton,
    QVBoxLayout,
    QWidget,
)

from tinemark.window.faces import wear
from tinemark.window.theme import color, current_theme


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
        wear(self, "number")
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
        """Keep room for its digits."""
        super().changeEvent(event)
        if event.type() == QEvent.Type.FontChange and hasattr(self, "_digits"):
            self._narrow()


class QuietCombo(QComboBox):
    """A chooser that leaves the wheel to the page until it has the focus, and draws its own arrow."""

    def __init__(self) -> None:
        super().__init__()
        # The base style's drop-down is a raised box, which has no place on a flat outline.
        self.setStyleSheet("QComboBox::drop-down { border: none; width: 20px; }")

    def paintEvent(self, event: QPaintEvent) -> None:
        """The chooser, then its arrow."""
        super().paintEvent(event)
        theme = current_theme()
        painter = QPainter(self)
        painter.setRenderHint(QPainter.RenderHint.Antialiasing)
        pen = QPen(color(theme.muted if self.isEnabled() else theme.edge), 1.6)
        pen.setCapStyle(Qt.PenCapStyle.RoundCap)
        pen.setJoinStyle(Qt.PenJoinStyle.RoundJoin)
        painter.setPen(pen)
        x, y = self.width() - 14.0, self.height() / 2
        painter.drawPolyline(QPolygonF([QPointF(x - 4, y - 2), QPointF(x, y + 2), QPointF(x + 4, y - 2)]))
        painter.end()

    def wheelEvent(self, event: QWheelEvent) -> None:
        """Choose by wheel only with the focus."""
        if self.hasFocus():
            super().wheelEvent(event)
        else:
            event.ignore()


class MenuButton(QToolButton):
    """A flat button that opens a menu, its arrow beside the word."""

    def __init__(self, words: str, menu: QMenu) -> None:
        super().__init__()
        self.setText(words)
        self.setMenu(menu)
        menu.setParent(self, menu.windowFlags())
        self.setPopupMode(QToolButton.ToolButtonPopupMode.InstantPopup)
        self.setFocusPolicy(Qt.FocusPolicy.StrongFocus)
        self.setStyleSheet(
            "QToolButton { padding-right: 18px; } "
            "QToolButton::menu-indicator "
            "{ subcontrol-origin: border; subcontrol-position: right center; right: 5px; }"
        )


class CountEdit(FieldEdit):
    """A whole number between two bounds, checked when it is complete; the arrow keys step it.

    Signals
    -------
    counted : int
        A new number, within the bounds.
    """

    counted = Signal(int)

    def __init__(self, name: str, low: int, high: int, step: int) -> None:
        super().__init__(name, digits=8)
        self.low, self.high, self.step = low, high, step
        self._count = low
        self.trouble = QLabel()
        self.trouble.setProperty("rank", "error")
        self.trouble.setWordWrap(True)
        self.trouble.hide()
        self.setToolTip(f"{low} to {high}")
        self.editingFinished.connect(self._complete)

    @property
    def count(self) -> int:
        """The last good number."""
        return self._count

    def show_count(self, count: int) -> None:
        """Show a number; nothing is emitted."""
        self._count = count
        self.setText(str(count))
        self._say("")

    def keyPressEvent(self, event: QKeyEvent) -> None:
        """Step by the arrow keys."""
        way = {Qt.Key.Key_Up.value: 1, Qt.Key.Key_Down.value: -1}.get(event.key(), 0)
        if way:
            self.setText(str(min(max(self._count + way * self.step, self.low), self.high)))
            self._complete()
            return
        super().keyPressEvent(event)

    def _complete(self) -> None:
        digits = "".join(self.text().split())
        if not digits.isdecimal() or len(digits) > 12 or not self.low <= int(digits) <= self.high:
            self._say(f"Write a whole number from {self.low} to {self.high}.")
            return
        self._say("")
        if int(digits) != self._count:
            self._count = int(digits)
            self.counted.emit(self._count)

    def _say(self, words: str) -> None:
        self.trouble.setText(words)
        self.trouble.setVisible(bool(words))
        show_as(self, words)


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
