"""Choosing a built-in system, each with the sentence on where it is met."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass

from PySide6.QtCore import QModelIndex, QPersistentModelIndex, QRectF, QSize, Qt, Signal
from PySide6.QtGui import QFontMetrics, QFontMetricsF, QPainter
from PySide6.QtWidgets import QComboBox, QStyle, QStyledItemDelegate, QStyleOptionViewItem

from tinemark.window.field_editors import QuietCombo
from tinemark.window.theme import color, current_theme, small_font

Index = QModelIndex | QPersistentModelIndex
NAME = Qt.ItemDataRole.UserRole
SENTENCE = Qt.ItemDataRole.UserRole + 1
OWN = "Own system"


@dataclass(frozen=True)
class BuiltIn:
    """A built-in system: its name in the library, its title, where it is met."""

    name: str
    title: str
    sentence: str


def library_builtins() -> tuple[BuiltIn, ...]:
    """The systems of the library, by title."""
    from tinemark.systems.library import builtin_names

    return tuple(
        sorted((library_builtin(name) for name in builtin_names()), key=lambda one: one.title.lower())
    )


def library_builtin(name: str) -> BuiltIn:
    """One system of the library."""
    from tinemark.systems.library import builtin_system

    system = builtin_system(name)
    return BuiltIn(name, system.title, " ".join(system.notes.split()))


class _TwoLines(QStyledItemDelegate):
    """A title, and under it the sentence, wrapped to `width`."""

    width = 400

    def _sentence_height(self, text: str, width: int) -> int:
        flags = Qt.TextFlag.TextWordWrap
        return QFontMetrics(small_font()).boundingRect(0, 0, width, 10_000, flags, text).height()

    def sizeHint(self, option: QStyleOptionViewItem, index: Index) -> QSize:
        # The list asks before it has its own width, so the width is set by the chooser.
        width = self.width
        text = str(index.data(SENTENCE) or "")
        height = QFontMetrics(option.font).height() + 12
        return QSize(width, height + (self._sentence_height(text, width - 26) if text else 0))

    def paint(self, painter: QPainter, option: QStyleOptionViewItem, index: Index) -> None:
        theme = current_theme()
        painter.save()
        box = QRectF(option.rect)
        chosen = bool(option.state & QStyle.StateFlag.State_Selected)
        painter.fillRect(box, color(theme.accent_soft if chosen else theme.raised))
        if chosen:
            painter.fillRect(QRectF(box.left(), box.top(), 3, box.height()), color(theme.accent))
        inner = box.adjusted(10, 5, -10, -5)
        painter.setFont(option.font)
        painter.setPen(color(theme.text))
        line = QFontMetricsF(option.font).height()
        painter.drawText(QRectF(inner.left(), inner.top(), inner.width(), line), 0, str(index.data()))
        painter.setFont(small_font())
        painter.setPen(color(theme.muted))
        below = QRectF(inner.left(), inner.top() + line + 1, inner.width(), inner.height() - line)
        painter.drawText(below, int(Qt.TextFlag.TextWordWrap), str(index.data(SENTENCE) or ""))
        painter.restore()


class BuiltinChooser(QuietCombo):
    """The chooser. Its list is read when it is first opened.

    Signals
    -------
    chosen : str
        Name of the built-in system that the user took.
    """

    chosen = Signal(str)

    def __init__(
        self,
        load: Callable[[], Sequence[BuiltIn]] = library_builtins,
        describe: Callable[[str], BuiltIn] = library_builtin,
    ) -> None:
        super().__init__()
        self._describe = describe
        self._load: Callable[[], Sequence[BuiltIn]] | None = load
        self.setAccessibleName("Built-in systems")
        self.setPlaceholderText(OWN)
        self.setCurrentIndex(-1)
        self.setSizeAdjustPolicy(QComboBox.SizeAdjustPolicy.AdjustToMinimumContentsLengthWithIcon)
        self.setMinimumContentsLength(12)
        self.setMaxVisibleItems(8)
        self._lines = _TwoLines(self.view())
        self.view().setItemDelegate(self._lines)
        self.view().setTextElideMode(Qt.TextElideMode.ElideRight)
        self.activated.connect(self._activated)

    def fill(self) -> None:
        """Read the list, once."""
        if self._load is None:
            return
        load, self._load = self._load, None
        shown = str(self.currentData(NAME) or "")
        self.clear()
        for one in load():
            self._add(one)
        self.show_builtin(shown)

    def _add(self, one: BuiltIn) -> None:
        self.addItem(one.title, one.name)
        place = self.count() - 1
        self.setItemData(place, one.sentence, SENTENCE)
        self.setItemData(place, one.sentence, Qt.ItemDataRole.ToolTipRole)
        self.setItemData(place, f"{one.title}. {one.sentence}", Qt.ItemDataRole.AccessibleTextRole)

    def show_builtin(self, name: str) -> None:
        """Show which built-in system is on; empty for an own one."""
        if name and self.findData(name, NAME) < 0:
            # One name must not cost the reading of the whole library: this runs while the window opens.
            self._add(self._describe(name))
        self.setCurrentIndex(self.findData(name, NAME) if name else -1)

    def sentence(self) -> str:
        """Where the system that is on is met; empty for an own one."""
        return str(self.currentData(SENTENCE) or "")

    def showPopup(self) -> None:
        """Open the list, wide enough to read."""
        self.fill()
        self._lines.width = max(self.width(), QFontMetrics(self.font()).averageCharWidth() * 66)
        self.view().setMinimumWidth(self._lines.width)
        super().showPopup()

    def keyPressEvent(self, event: object) -> None:
        """The arrow keys choose too, so the list must be there."""
        self.fill()
        super().keyPressEvent(event)

    def wheelEvent(self, event: object) -> None:
        """A turn of the wheel must not replace a system."""
        event.ignore()

    def _activated(self, place: int) -> None:
        self.chosen.emit(str(self.itemData(place, NAME)))
