"""How the ledger's cells are drawn.

Numbers are aligned at the decimal sign, digit groups stand a thin gap apart, each status has its sign,
and headings run across.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence

from PySide6.QtCore import QModelIndex, QObject, QPersistentModelIndex, QPointF, QRectF, Qt
from PySide6.QtGui import QFont, QFontMetricsF, QPainter, QPen
from PySide6.QtWidgets import (
    QAbstractItemView,
    QLineEdit,
    QStyle,
    QStyledItemDelegate,
    QStyleOptionViewItem,
    QWidget,
)

from tinemark.document.rounding import THIN_SPACE
from tinemark.window.ledger_lines import (
    NOTHING,
    NUMBER_COLUMNS,
    Column,
    HeadingEntry,
    MissingEntry,
    OnsetEntry,
    cell_text,
    missing_words,
)
from tinemark.window.ledger_model import ENTRY
from tinemark.window.marks import paint_sign
from tinemark.window.theme import Theme, color, current_theme, heading_font, mono_font, small_font

PADDING = 6.0
MEASURED_LINES = 300
GROUP_GAP = 0.34
"""Width of the gap between digit groups, in digits: a monospaced face would give it a whole digit."""

Index = QModelIndex | QPersistentModelIndex


def number_width(text: str, metrics: QFontMetricsF) -> float:
    """Width of a number as `paint_number` draws it."""
    groups = text.count(THIN_SPACE)
    return metrics.horizontalAdvance(text.replace(THIN_SPACE, "")) + groups * _gap(metrics)


def before_sign(text: str) -> str:
    """The part of a number before its decimal sign, or before its brackets or exponent where it has none."""
    for number, letter in enumerate(text):
        if letter in ".(e\u2026":
            return text[:number]
    return text


def paint_number(painter: QPainter, text: str, left: float, box: QRectF, metrics: QFontMetricsF) -> None:
    """Draw a number from `left` on, its digit groups a thin gap apart."""
    for group in text.split(THIN_SPACE):
        width = metrics.horizontalAdvance(group)
        painter.drawText(
            QRectF(left, box.top(), width + 2, box.height()), Qt.AlignmentFlag.AlignVCenter, group
        )
        left += width + _gap(metrics)


def _gap(metrics: QFontMetricsF) -> float:
    return metrics.horizontalAdvance("0") * GROUP_GAP


def sign_size(font: QFont) -> float:
    """Half the height of a status sign beside text of a font."""
    return QFontMetricsF(font).height() * 0.30


def number_places(texts: Iterable[str], metrics: QFontMetricsF) -> tuple[float, float]:
    """Widest part before the decimal sign, and from it on, among some numbers."""
    # In a monospaced face only the counts of letters and gaps matter, so few numbers are really measured.
    shapes = {(len(before_sign(text)), len(text), text.count(THIN_SPACE)): text for text in texts}
    before = after = 0.0
    for text in shapes.values():
        whole = number_width(before_sign(text), metrics)
        before, after = max(before, whole), max(after, number_width(text, metrics) - whole)
    return before, after


class LedgerDelegate(QStyledItemDelegate):
    """Draws the ledger in the tokens of the theme that is on."""

    def __init__(self, parent: QObject | None = None) -> None:
        super().__init__(parent)
        self._places: dict[Column, float] = {}

    def measure(self, entries: Sequence[object], headers: Mapping[Column, float]) -> dict[Column, float]:
        """Widths that show every cell whole; keeps where the decimal signs of the number columns lie.

        Of very long ledgers the first lines stand for all: a number beyond them that is too wide ends
        in an ellipsis.
        """
        lines = [entry for entry in entries if isinstance(entry, OnsetEntry)][:MEASURED_LINES]
        widths = {}
        for column in Column:
            texts = {cell_text(entry, column) for entry in lines}
            if column in NUMBER_COLUMNS:
                before, after = number_places(texts - {NOTHING}, QFontMetricsF(mono_font()))
                self._places[column] = before
                widest = before + after
            else:
                metrics = QFontMetricsF(_column_font(column))
                widest = max((metrics.horizontalAdvance(text) for text in texts), default=0.0)
            if column is Column.STATUS:
                widest += 2 * sign_size(_body_font()) + 6
            widths[column] = max(headers[column], widest) + 2 * PADDING
        return widths

    def paint(self, painter: QPainter, option: QStyleOptionViewItem, index: Index) -> None:
        """Draw one cell."""
        theme, entry = current_theme(), index.data(ENTRY)
        box = QRectF(option.rect)
        painter.save()
        painter.setClipRect(box)
        match entry:
            case HeadingEntry():
                self._paint_heading(painter, theme, box, entry.text)
            case MissingEntry():
                self._paint_missing(painter, theme, box, missing_words(entry))
            case OnsetEntry():
                self._paint_ground(painter, theme, option, box, index)
                self._paint_cell(painter, theme, box, entry, Column(index.column()))
        painter.restore()

    def _paint_heading(self, painter: QPainter, theme: Theme, box: QRectF, text: str) -> None:
        painter.fillRect(box, color(theme.surface))
        painter.setPen(color(theme.line))
        painter.drawLine(box.bottomLeft() - QPointF(0, 0.5), box.bottomRight() - QPointF(0, 0.5))
        font = heading_font()
        painter.setFont(font)
        painter.setPen(color(theme.text))
        inner = box.adjusted(PADDING, 0, -PADDING, 0)
        shown = QFontMetricsF(font).elidedText(text, Qt.TextElideMode.ElideRight, inner.width())
        painter.drawText(inner, Qt.AlignmentFlag.AlignVCenter, shown)

    def _paint_missing(self, painter: QPainter, theme: Theme, box: QRectF, text: str) -> None:
        size = sign_size(_body_font())
        painter.setRenderHint(QPainter.RenderHint.Antialiasing)
        pen = QPen(color(theme.edge), 1.2)
        pen.setStyle(Qt.PenStyle.DotLine)
        painter.setPen(pen)
        painter.drawEllipse(QPointF(box.left() + PADDING + size, box.center().y()), size * 0.9, size * 0.9)
        painter.setFont(small_font())
        painter.setPen(color(theme.muted))
        painter.drawText(
            box.adjusted(PADDING + 2 * size + 8, 0, -PADDING, 0), Qt.AlignmentFlag.AlignVCenter, text
        )

    def _paint_ground(
        self, painter: QPainter, theme: Theme, option: QStyleOptionViewItem, box: QRectF, index: Index
    ) -> None:
        """Selected rows have a tint and a bar at the left; the row with the keys has an outline too."""
        chosen = bool(option.state & QStyle.StateFlag.State_Selected)
        hovered = bool(option.state & QStyle.StateFlag.State_MouseOver)
        painter.fillRect(
            box, color(theme.accent_soft if chosen else theme.surface if hovered else theme.raised)
        )
        if chosen and index.column() == 0:
            painter.fillRect(QRectF(box.left(), box.top(), 3, box.height()), color(theme.accent))
        view = option.widget
        if (
            isinstance(view, QAbstractItemView)
            and view.hasFocus()
            and view.currentIndex().row() == index.row()
        ):
            painter.setPen(QPen(color(theme.accent), 1.0))
            painter.drawLine(box.topLeft() + QPointF(0, 0.5), box.topRight() + QPointF(0, 0.5))
            painter.drawLine(box.bottomLeft() - QPointF(0, 0.5), box.bottomRight() - QPointF(0, 0.5))

    def _paint_cell(
        self, painter: QPainter, theme: Theme, box: QRectF, entry: OnsetEntry, column: Column
    ) -> None:
        text = cell_text(entry, column)
        inner = box.adjusted(PADDING, 0, -PADDING / 2, 0)
        painter.setPen(color(theme.text))
        if column in NUMBER_COLUMNS:
            metrics = QFontMetricsF(mono_font())
            painter.setFont(mono_font())
            before = self._places.get(column, 0.0)
            if text == NOTHING:
                painter.setPen(color(theme.muted))
            start = inner.left() + max(0.0, before - number_width(before_sign(text), metrics))
            room = inner.right() - start
            if number_width(text, metrics) > room + PADDING:
                text = metrics.elidedText(text, Qt.TextElideMode.ElideRight, room)
            paint_number(painter, text, start, inner, metrics)
            return
        if column is Column.STATUS:
            size = sign_size(_body_font())
            painter.setRenderHint(QPainter.RenderHint.Antialiasing)
            paint_sign(
                painter,
                theme,
                entry.row.onset.status.value,
                QPointF(inner.left() + size, inner.center().y()),
                size,
            )
            painter.setPen(color(theme.text))
            inner = inner.adjusted(2 * size + 6, 0, 0, 0)
        if column is Column.NOTE:
            painter.setPen(color(theme.muted))
        font = _column_font(column)
        painter.setFont(font)
        shown = QFontMetricsF(font).elidedText(text, Qt.TextElideMode.ElideRight, inner.width())
        painter.drawText(inner, Qt.AlignmentFlag.AlignVCenter, shown)

    def createEditor(self, parent: QWidget, *_: object) -> QWidget:
        """A line for the note, in place."""
        editor = QLineEdit(parent)
        editor.setAccessibleName("Note")
        editor.setMaxLength(2000)
        editor.setFrame(False)
        return editor

    def updateEditorGeometry(
        self,
        editor: QWidget,
        option: QStyleOptionViewItem,
        index: Index,  # noqa: ARG002
    ) -> None:
        """The whole cell, and no less than the line needs."""
        box = option.rect
        room = max(box.height(), editor.sizeHint().height())
        editor.setGeometry(box.x(), box.center().y() - room // 2, max(box.width(), 120), room)


def _body_font() -> QFont:
    return small_font(1.0)


def _column_font(column: Column) -> QFont:
    return mono_font() if column in (Column.LEVEL, Column.PERIOD) else _body_font()
