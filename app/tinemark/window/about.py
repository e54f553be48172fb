"""About: version, licence, the caution."""

from __future__ import annotations

import platform

from PySide6.QtCore import Qt, qVersion
from PySide6.QtWidgets import (
    QDialog,
    QDialogButtonBox,
    QHBoxLayout,
    QLabel,
    QPlainTextEdit,
    QPushButton,
    QVBoxLayout,
    QWidget,
)

from tinemark import __version__
from tinemark.resources_path import resource
from tinemark.window.caution import CAUTION
from tinemark.window.icons import program_icon
from tinemark.window.theme import heading_font, mono_font

SIGN_SIDE = 56
TEXT_WIDTH = 440


def licence_text() -> str:
    """The licence that ships with the program."""
    folder = resource("licence")
    files = sorted(folder.iterdir()) if folder.is_dir() else []
    texts = [file.read_text(encoding="utf-8").strip() for file in files if file.is_file()]
    return (
        "\n\n".join(texts)
        or "MIT licence. The text is missing from this installation; install Tinemark again."
    )


class AboutDialog(QDialog):
    """The dialog. The licence unfolds below on request."""

    def __init__(self, parent: QWidget | None = None) -> None:
        super().__init__(parent)
        self.setWindowTitle("About Tinemark")
        sign = QLabel()
        sign.setPixmap(program_icon().pixmap(SIGN_SIDE, SIGN_SIDE))
        sign.setAccessibleName("Tinemark's sign")
        name = QLabel(f"Tinemark {__version__}")
        font = heading_font()
        font.setPointSizeF(max(font.pointSizeF(), 8) * 1.5)
        name.setFont(font)
        job = _paragraph("Where a periodically operated system stops repeating, as proved numbers.")
        made = _paragraph(f"Python {platform.python_version()}, Qt {qVersion()}. MIT licence.")
        made.setProperty("rank", "second")
        caution_title = QLabel("Caution")
        caution_title.setFont(heading_font())
        self.caution = _paragraph(CAUTION)
        self.licence = QPlainTextEdit(licence_text())
        self.licence.setReadOnly(True)
        self.licence.setFont(mono_font(0.85))
        self.licence.setAccessibleName("Licence")
        self.licence.setMinimumHeight(200)
        self.licence.hide()
        buttons = QDialogButtonBox(QDialogButtonBox.StandardButton.Close)
        buttons.rejected.connect(self.reject)
        unfold = QPushButton("Show the licence")
        unfold.clicked.connect(lambda: self._unfold(unfold))
        buttons.addButton(unfold, QDialogButtonBox.ButtonRole.ActionRole)

        head = QHBoxLayout()
        head.setSpacing(16)
        head.addWidget(sign, 0, Qt.AlignmentFlag.AlignTop)
        words = QVBoxLayout()
        words.setSpacing(4)
        for label in (name, job, made):
            words.addWidget(label)
        head.addLayout(words, 1)
        column = QVBoxLayout(self)
        column.setContentsMargins(22, 20, 22, 16)
        column.setSpacing(10)
        column.addLayout(head)
        column.addSpacing(6)
        column.addWidget(caution_title)
        column.addWidget(self.caution)
        column.addWidget(self.licence, 1)
        column.addSpacing(4)
        column.addWidget(buttons)

    def _unfold(self, button: QPushButton) -> None:
        self.licence.setVisible(not self.licence.isVisible())
        button.setText("Hide the licence" if self.licence.isVisible() else "Show the licence")
        self.adjustSize()


def _paragraph(text: str) -> QLabel:
    label = QLabel(text)
    label.setWordWrap(True)
    label.setFixedWidth(TEXT_WIDTH)
    label.setMinimumHeight(label.heightForWidth(TEXT_WIDTH))
    label.setTextInteractionFlags(
        Qt.TextInteractionFlag.TextSelectableByMouse | Qt.TextInteractionFlag.TextSelectableByKeyboard
    )
    return label
