"""What to ask before a ladder is followed: from where to where, from which period, how many levels."""

from __future__ import annotations

from dataclasses import dataclass
from fractions import Fraction

from PySide6.QtWidgets import (
    QDialog,
    QDialogButtonBox,
    QFormLayout,
    QLabel,
    QLineEdit,
    QSpinBox,
    QVBoxLayout,
    QWidget,
)

from tinemark.systems.errors import NumberError
from tinemark.systems.exact import exact
from tinemark.window.theme import mono_font

MOST_LEVELS = 24
LONGEST_PERIOD = 4096


@dataclass(frozen=True)
class LadderQuestion:
    """Answers of the dialog, and what it offers first."""

    start: Fraction
    stop: Fraction
    base_period: int = 1
    levels: int = 8


class LadderDialog(QDialog):
    """The dialog; `answer` is None until it is accepted."""

    def __init__(
        self, parameter: str, offered: LadderQuestion, texts: tuple[str, str], parent: QWidget | None = None
    ) -> None:
        super().__init__(parent)
        self.setWindowTitle("Follow the ladder")
        self.answer: LadderQuestion | None = None
        words = QLabel(
            f"The cycle of the base period is followed from the first value of {parameter} towards the "
            "second; every doubling on the way becomes a row."
        )
        words.setWordWrap(True)
        words.setMinimumWidth(360)
        self.start, self.stop = (QLineEdit(text) for text in texts)
        for edit, name in ((self.start, "From"), (self.stop, "Towards")):
            edit.setFont(mono_font())
            edit.setAccessibleName(name)
            edit.textEdited.connect(self._forget_error)
        self.base = QSpinBox()
        self.base.setRange(1, LONGEST_PERIOD)
        self.base.setValue(offered.base_period)
        self.levels = QSpinBox()
        self.levels.setRange(1, MOST_LEVELS)
        self.levels.setValue(offered.levels)
        for spin, name in ((self.base, "Base period"), (self.levels, "Levels")):
            spin.setAccessibleName(name)
            spin.setFont(mono_font())
            spin.setButtonSymbols(QSpinBox.ButtonSymbols.NoButtons)
            spin.setMaximumWidth(90)
        self.error = QLabel()
        self.error.setProperty("rank", "error")
        self.error.setWordWrap(True)
        self.error.hide()
        form = QFormLayout()
        form.setHorizontalSpacing(16)
        form.setVerticalSpacing(8)
        form.addRow(f"From {parameter} =", self.start)
        form.addRow(f"Towards {parameter} =", self.stop)
        form.addRow("Base period", self.base)
        form.addRow("Levels", self.levels)
        buttons = QDialogButtonBox(QDialogButtonBox.StandardButton.Cancel)
        follow = buttons.addButton("Follow", QDialogButtonBox.ButtonRole.AcceptRole)
        follow.setDefault(True)
        buttons.accepted.connect(self.accept)
        buttons.rejected.connect(self.reject)
        column = QVBoxLayout(self)
        column.setContentsMargins(20, 18, 20, 14)
        column.setSpacing(12)
        column.addWidget(words)
        column.addLayout(form)
        column.addWidget(self.error)
        column.addWidget(buttons)
        self._offered, self._texts = offered, texts

    def accept(self) -> None:
        """Read the fields; a field that cannot be read keeps the dialog open and says why."""
        try:
            start = self._read(self.start, 0)
            stop = self._read(self.stop, 1)
        except NumberError as error:
            self._show_error(str(error))
            return
        if start == stop:
            self._show_error("The two ends are the same; the ladder needs a way to go.")
            return
        self.answer = LadderQuestion(start, stop, self.base.value(), self.levels.value())
        super().accept()

    def _read(self, edit: QLineEdit, which: int) -> Fraction:
        # An end that was not touched is taken as it is, beyond the digits that are shown.
        if edit.text() == self._texts[which]:
            return (self._offered.start, self._offered.stop)[which]
        text = edit.text().strip().replace("\N{MINUS SIGN}", "-")
        try:
            return exact(text, where=edit.accessibleName()).fraction
        except NumberError:
            edit.setFocus()
            raise

    def _show_error(self, words: str) -> None:
        self.error.setText(words)
        self.error.show()

    def _forget_error(self) -> None:
        self.error.hide()
