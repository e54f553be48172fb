"""The guide's typography: Qt reads the Markdown, this gives it measure, rhythm and the theme's colours."""

from __future__ import annotations

from PySide6.QtCore import Qt
from PySide6.QtGui import (
    QColor,
    QFont,
    QFontMetricsF,
    QTextBlock,
    QTextBlockFormat,
    QTextCharFormat,
    QTextCursor,
    QTextDocument,
    QTextFrameFormat,
    QTextLength,
    QTextTable,
    QTextTableFormat,
)
from PySide6.QtWidgets import QApplication

from tinemark.window.theme import Theme, mono_font

SCALES = {1: 1.55, 2: 1.2, 3: 1.05}
LINE_HEIGHT = 128.0


def style_document(document: QTextDocument, theme: Theme) -> None:
    """Dress a document that was read from Markdown."""
    base = QFont(QApplication.font())
    document.setDefaultFont(base)
    em = QFontMetricsF(base).height()
    document.setDocumentMargin(0)
    cursor = QTextCursor(document)
    cursor.beginEditBlock()
    block = document.begin()
    while block.isValid():
        _style_block(block, theme, base, em)
        block = block.next()
    for table in _tables(document):
        _style_table(table, theme, em)
    cursor.endEditBlock()
    _breathe(document, em)


def _style_block(block: QTextBlock, theme: Theme, base: QFont, em: float) -> None:
    cursor = QTextCursor(block)
    shape = QTextBlockFormat(block.blockFormat())
    level = shape.headingLevel()
    in_table = cursor.currentTable() is not None
    is_code = (
        shape.hasProperty(QTextBlockFormat.Property.BlockCodeFence)
        or shape.hasProperty(QTextBlockFormat.Property.BlockCodeLanguage)
        or (shape.nonBreakableLines() and not in_table)
    )
    if level:
        shape.setTopMargin(0 if level == 1 else em * 1.1)
        shape.setBottomMargin(em * (0.7 if level == 1 else 0.35))
    elif is_code:
        shape.setBackground(QColor(theme.sunken))
        shape.setTopMargin(em * 0.5 if not _continues(block.previous()) else 0)
        shape.setBottomMargin(em * 0.7 if not _continues(block.next()) else 0)
        shape.setLeftMargin(em * 0.4)
    elif in_table:
        shape.setTopMargin(em * 0.12)
        shape.setBottomMargin(em * 0.12)
    else:
        shape.setBottomMargin(em * (0.25 if block.textList() else 0.6))
    if not is_code:
        shape.setLineHeight(LINE_HEIGHT, QTextBlockFormat.LineHeightTypes.ProportionalHeight.value)
    cursor.setBlockFormat(shape)
    for fragment in _fragments(block):
        _style_fragment(fragment, theme, base, level, is_code)


def _style_fragment(cursor: QTextCursor, theme: Theme, base: QFont, level: int, is_code: bool) -> None:
    found = cursor.charFormat()
    changed = QTextCharFormat()
    if level:
        changed.setFontPointSize(base.pointSizeF() * SCALES.get(level, 1.0))
        changed.setFontWeight(QFont.Weight.DemiBold)
        changed.setForeground(QColor(theme.text))
    elif is_code or found.fontFixedPitch():
        face = mono_font(0.95)
        changed.setFontFamilies([face.family()])
        changed.setFontPointSize(face.pointSizeF())
        changed.setForeground(QColor(theme.text))
        if not is_code:
            changed.setBackground(QColor(theme.sunken))
    elif found.isAnchor():
        changed.setForeground(QColor(theme.accent))
    else:
        changed.setForeground(QColor(theme.text))
    cursor.mergeCharFormat(changed)


def _style_table(table: QTextTable, theme: Theme, em: float) -> None:
    shape = QTextTableFormat(table.format())
    shape.setBorder(0)
    shape.setCellSpacing(0)
    shape.setCellPadding(em * 0.28)
    shape.setTopMargin(em * 0.3)
    shape.setBottomMargin(em * 0.9)
    shape.setBorderCollapse(True)
    shape.setAlignment(Qt.AlignmentFlag.AlignLeft)
    shape.setWidth(QTextLength(QTextLength.Type.PercentageLength, 100))
    table.setFormat(shape)
    for row in range(table.rows()):
        for column in range(table.columns()):
            cell = table.cellAt(row, column)
            form = cell.format().toTableCellFormat()
            form.setBottomBorder(1)
            form.setBottomBorderStyle(QTextFrameFormat.BorderStyle.BorderStyle_Solid)
            form.setBottomBorderBrush(QColor(theme.edge if row == 0 else theme.line))
            form.setVerticalAlignment(QTextCharFormat.VerticalAlignment.AlignTop)
            cell.setFormat(form)
            if row == 0:
                inside = cell.firstCursorPosition()
                inside.setPosition(cell.lastCursorPosition().position(), QTextCursor.MoveMode.KeepAnchor)
                head = QTextCharFormat()
                head.setForeground(QColor(theme.muted))
                head.setFontWeight(QFont.Weight.Normal)
                inside.mergeCharFormat(head)


def _breathe(document: QTextDocument, em: float) -> None:
    root = document.rootFrame()
    shape = root.frameFormat()
    shape.setLeftMargin(em * 1.4)
    shape.setRightMargin(em * 1.4)
    shape.setTopMargin(em * 1.2)
    shape.setBottomMargin(em * 2)
    root.setFrameFormat(shape)


def _continues(block: QTextBlock) -> bool:
    return (
        block.isValid()
        and block.blockFormat().nonBreakableLines()
        and block.blockFormat().headingLevel() == 0
    )


def _fragments(block: QTextBlock) -> list[QTextCursor]:
    found = []
    walk = block.begin()
    while not walk.atEnd():
        piece = walk.fragment()
        if piece.isValid():
            cursor = QTextCursor(block.document())
            cursor.setPosition(piece.position())
            cursor.setPosition(piece.position() + piece.length(), QTextCursor.MoveMode.KeepAnchor)
            found.append(cursor)
        walk += 1
    return found


def _tables(document: QTextDocument) -> list[QTextTable]:
    return [frame for frame in document.rootFrame().childFrames() if isinstance(frame, QTextTable)]
