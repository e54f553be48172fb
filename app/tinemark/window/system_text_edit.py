"""The system's whole TOML text: line numbers, quiet colouring, wrong lines marked."""

from __future__ import annotations

import re

from PySide6.QtCore import QEvent, QPointF, QRect, QSize, Qt
from PySide6.QtGui import (
    QColor,
    QFont,
    QFontMetricsF,
    QPainter,
    QPaintEvent,
    QPolygonF,
    QResizeEvent,
    QSyntaxHighlighter,
    QTextCharFormat,
    QTextCursor,
    QTextDocument,
    QTextFormat,
)
from PySide6.QtWidgets import QPlainTextEdit, QTextEdit, QWidget

from tinemark.window.faces import wear
from tinemark.window.theme import color, current_theme

_COMMENT = re.compile(r"""^((?:[^"'#]|"(?:\\.|[^"\\])*"|'[^']*')*)(#.*)$""")
_HEADING = re.compile(r"^\s*\[[^\]]*\]")


class TomlColours(QSyntaxHighlighter):
    """Headings strong, keys plain, comments quiet."""

    def __init__(self, document: QTextDocument) -> None:
        super().__init__(document)
        self._heading, self._comment = QTextCharFormat(), QTextCharFormat()
        self.redress()

    def redress(self) -> None:
        """Take the theme's colours."""
        theme = current_theme()
        self._heading.setFontWeight(QFont.Weight.DemiBold)
        self._heading.setForeground(QColor(theme.accent))
        self._comment.setForeground(QColor(theme.muted))
        self._comment.setFontItalic(True)
        self.rehighlight()

    def highlightBlock(self, text: str) -> None:
        """Colour one line."""
        heading = _HEADING.match(text)
        if heading:
            self.setFormat(0, heading.end(), self._heading)
        comment = _COMMENT.match(text)
        if comment:
            self.setFormat(comment.start(2), len(text) - comment.start(2), self._comment)


class _Margin(QWidget):
    def __init__(self, editor: TomlEdit) -> None:
        super().__init__(editor)
        self._editor = editor

    def sizeHint(self) -> QSize:
        return QSize(self._editor.margin_width(), 0)

    def paintEvent(self, event: QPaintEvent) -> None:
        self._editor.paint_margin(self, event)


class TomlEdit(QPlainTextEdit):
    """Editor of the text; `mark` points at a wrong line by a sign in the margin and a tint."""

    def __init__(self, parent: QWidget | None = None) -> None:
        super().__init__(parent)
        self.setAccessibleName("The system as TOML text")
        wear(self, "number")
        self.setLineWrapMode(QPlainTextEdit.LineWrapMode.NoWrap)
        self.setTabChangesFocus(True)
        self._wrong: tuple[int, ...] = ()
        self._margin = _Margin(self)
        self._colours = TomlColours(self.document())
        self.blockCountChanged.connect(self._make_room)
        self.updateRequest.connect(self._scroll_margin)
        self._make_room()

    def show_text(self, text: str) -> None:
        """Show another text, without telling of a change; the place in it stays where that is possible."""
        if text == self.toPlainText():
            return
        line = self.textCursor().blockNumber()
        self.blockSignals(True)
        self.setPlainText(text)
        self.blockSignals(False)
        self._make_room()
        block = self.document().findBlockByNumber(min(line, self.blockCount() - 1))
        self.setTextCursor(QTextCursor(block))

    def mark(self, *lines: int) -> None:
        """Mark lines (from 1) as wrong; none at all when there are none."""
        self._wrong = tuple(line for line in lines if line)
        found = []
        for line in self._wrong:
            chosen = QTextEdit.ExtraSelection()
            chosen.format.setBackground(color(current_theme().error, 0.14))
            chosen.format.setProperty(QTextFormat.Property.FullWidthSelection, True)
            chosen.cursor = QTextCursor(self.document().findBlockByNumber(line - 1))
            found.append(chosen)
        self.setExtraSelections(found)
        self._margin.update()

    @property
    def marked_lines(self) -> tuple[int, ...]:
        """The lines marked as wrong."""
        return self._wrong

    def go_to(self, line: int, column: int = 0) -> None:
        """Put the cursor on a line (from 1) and column (from 1)."""
        block = self.document().findBlockByNumber(max(0, line - 1))
        cursor = QTextCursor(block)
        cursor.movePosition(
            QTextCursor.MoveOperation.Right,
            QTextCursor.MoveMode.MoveAnchor,
            max(0, min(column - 1, block.length() - 1)),
        )
        self.setTextCursor(cursor)
        self.ensureCursorVisible()
        self.setFocus(Qt.FocusReason.OtherFocusReason)

    # -- the margin ------------------------------------------------------------------------

    def margin_width(self) -> int:
        """Room for the sign and the longest line number."""
        metrics = QFontMetricsF(self.font())
        return int(
            metrics.horizontalAdvance("0" * max(2, len(str(self.blockCount())))) + metrics.height() + 6
        )

    def paint_margin(self, margin: QWidget, event: QPaintEvent) -> None:
        """Line numbers, and a filled triangle beside the wrong line."""
        theme = current_theme()
        painter = QPainter(margin)
        painter.fillRect(event.rect(), color(theme.surface))
        painter.setFont(self.font())
        metrics = QFontMetricsF(self.font())
        block = self.firstVisibleBlock()
        top = self.blockBoundingGeometry(block).translated(self.contentOffset()).top()
        while block.isValid() and top <= event.rect().bottom():
            height = self.blockBoundingRect(block).height()
            number = block.blockNumber() + 1
            wrong = number in self._wrong
            painter.setPen(color(theme.error if wrong else theme.muted))
            box = QRect(0, int(top), margin.width() - 6, int(height))
            painter.drawText(box, Qt.AlignmentFlag.AlignRight | Qt.AlignmentFlag.AlignVCenter, str(number))
            if wrong:
                self._paint_sign(painter, top + height / 2, metrics.height() * 0.3)
            block = block.next()
            top += height
        painter.end()

    def _paint_sign(self, painter: QPainter, y: float, size: float) -> None:
        painter.setRenderHint(QPainter.RenderHint.Antialiasing)
        painter.setBrush(color(current_theme().error))
        painter.setPen(Qt.PenStyle.NoPen)
        left = 3.0
        painter.drawPolygon(
            QPolygonF([QPointF(left, y - size), QPointF(left + 1.6 * size, y), QPointF(left, y + size)])
        )

    def _make_room(self) -> None:
        self.setViewportMargins(self.margin_width(), 0, 0, 0)
        self._place_margin()

    def _place_margin(self) -> None:
        inside = self.contentsRect()
        self._margin.setGeometry(QRect(inside.left(), inside.top(), self.margin_width(), inside.height()))

    def _scroll_margin(self, box: QRect, by: int) -> None:
        if by:
            self._margin.scroll(0, by)
        else:
            self._margin.update(0, box.y(), self._margin.width(), box.height())

    def resizeEvent(self, event: QResizeEvent) -> None:
        """Keep the margin beside the text."""
        super().resizeEvent(event)
        self._place_margin()

    def changeEvent(self, event: QEvent) -> None:
        """Take fonts and colours anew."""
        super().changeEvent(event)
        if not hasattr(self, "_colours"):
            return
        if event.type() == QEvent.Type.FontChange:
            self._make_room()
        elif event.type() == QEvent.Type.PaletteChange:
            self._colours.redress()
            self.mark(*self._wrong)
