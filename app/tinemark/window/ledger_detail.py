"""Everything known of one onset, every digit to be selected and copied."""

from __future__ import annotations

from PySide6.QtCore import Qt, Signal
from PySide6.QtWidgets import QGridLayout, QLabel, QLineEdit, QScrollArea, QSizePolicy, QVBoxLayout, QWidget

from tinemark.document.rounding import MINUS, group_digits
from tinemark.window.faces import wear
from tinemark.window.ledger_lines import (
    STATUS_MEANING,
    OnsetEntry,
    full_text,
    kind_words,
    period_words,
)
from tinemark.window.ledger_marks import consequence_words
from tinemark.window.number_label import NumberLabel


class LedgerDetail(QScrollArea):
    """The detail below the ledger's table.

    Signals
    -------
    note_edited : str, str
        Row and new note.
    """

    note_edited = Signal(str, str)

    def __init__(self, parent: QWidget | None = None) -> None:
        super().__init__(parent)
        self.setAccessibleName("Detail of the selected onset")
        self.setWidgetResizable(True)
        self.setHorizontalScrollBarPolicy(Qt.ScrollBarPolicy.ScrollBarAlwaysOff)
        self.setFocusPolicy(Qt.FocusPolicy.NoFocus)
        self._entry: OnsetEntry | None = None
        self._page = QWidget()
        self.setWidget(self._page)
        self._grid = QGridLayout(self._page)
        self._grid.setContentsMargins(8, 8, 8, 8)
        self._grid.setHorizontalSpacing(10)
        self._grid.setVerticalSpacing(4)
        self._grid.setColumnStretch(1, 1)
        self.title = QLabel()
        wear(self.title, "heading")
        self.title.setWordWrap(True)
        self._grid.addWidget(self.title, 0, 0, 1, 2)
        self._line = 1
        self.value = self._number("value")
        self.lower = self._number("lower end")
        self.upper = self._number("upper end")
        self.gap = self._number("gap")
        self.ratio = self._number("ratio")
        self.states = QVBoxLayout()
        self.states.setSpacing(2)
        self._states_name = self._name("cycle point")
        self._grid.addLayout(self.states, self._line, 1)
        self._line += 1
        self.status = self._words("status")
        self.follows = self._words("what follows")
        self.evidence = self._words("checked")
        self.note = QLineEdit()
        self.note.setAccessibleName("Note on the onset")
        self.note.setPlaceholderText("Your own words")
        self.note.setMaxLength(2000)
        self.note.editingFinished.connect(self._note_done)
        self._name("note")
        self._grid.addWidget(self.note, self._line, 1)
        self._grid.setRowStretch(self._line + 1, 1)
        self.show_entry(None)

    def _name(self, words: str) -> QLabel:
        label = QLabel(words)
        label.setProperty("rank", "second")
        self._grid.addWidget(label, self._line, 0, Qt.AlignmentFlag.AlignTop)
        return label

    def _number(self, words: str) -> NumberLabel:
        self._name(words)
        number = NumberLabel(words)
        number.setWordWrap(True)
        number.setSizePolicy(QSizePolicy.Policy.Ignored, QSizePolicy.Policy.Preferred)
        self._grid.addWidget(number, self._line, 1)
        self._line += 1
        return number

    def _words(self, name: str) -> QLabel:
        self._name(name)
        label = QLabel()
        label.setWordWrap(True)
        label.setTextFormat(Qt.TextFormat.PlainText)
        label.setTextInteractionFlags(Qt.TextInteractionFlag.TextSelectableByMouse)
        label.setSizePolicy(QSizePolicy.Policy.Ignored, QSizePolicy.Policy.Preferred)
        self._grid.addWidget(label, self._line, 1)
        self._line += 1
        return label

    def show_entry(self, entry: OnsetEntry | None) -> None:
        """Show one onset; None shows what to do to see one."""
        self._entry = entry
        for place in range(1, self._grid.count()):
            item = self._grid.itemAt(place)
            widget = item.widget() if item else None
            if widget is not None:
                widget.setVisible(entry is not None)
        if entry is None:
            self._show_states(())
            self.title.setText("Select a row to see all its digits.")
            return
        onset = entry.row.onset
        level = "" if entry.row.level is None else f"Level {entry.row.level}: "
        self.title.setText(f"{level}{kind_words(onset)}, period {period_words(onset)}")
        self.value.show_number(grouped(onset.value), onset.value)
        self.lower.show_number(grouped(onset.lower), onset.lower)
        self.upper.show_number(grouped(onset.upper), onset.upper)
        found = entry.level
        for label, estimate, reason in (
            (self.gap, found.gap if found else None, found.gap_reason if found else ""),
            (self.ratio, found.ratio if found else None, found.ratio_reason if found else ""),
        ):
            full = full_text(estimate)
            if full:
                label.show_number(
                    grouped(full).replace(" \u00b1 ", " \u00b1 " if len(full) < 30 else "\n\u00b1 "), full
                )
            else:
                label.show_words(_sentence(reason) if found else "None outside a ladder.")
        self._show_states(onset.states)
        meaning = f"{onset.status.value}. {STATUS_MEANING[onset.status]}"
        self.status.setText(f"{meaning} {_sentence(onset.reason)}".strip())
        self.follows.setText(_sentence(consequence_words(onset)) or "nothing more than the periods say")
        self.evidence.setText(
            "\n".join(f"{claim}: {finding}" for claim, finding in onset.evidence) or "nothing"
        )
        if not self.note.hasFocus():
            self.note.setText(entry.row.note)

    def edit_note(self) -> None:
        """Put the cursor into the note."""
        if self._entry is not None:
            self.ensureWidgetVisible(self.note)
            self.note.setFocus(Qt.FocusReason.ShortcutFocusReason)
            self.note.selectAll()

    def _show_states(self, states: tuple[tuple[str, str], ...]) -> None:
        while self.states.count():
            item = self.states.takeAt(0)
            widget = item.widget() if item else None
            if widget is not None:
                widget.hide()
                widget.deleteLater()
        self._states_name.setVisible(bool(states))
        for name, text in states:
            number = NumberLabel(f"cycle point {name}")
            number.setWordWrap(True)
            number.setSizePolicy(QSizePolicy.Policy.Ignored, QSizePolicy.Policy.Preferred)
            number.show_number(f"{name} = {grouped(text)}", text)
            self.states.addWidget(number)

    def _note_done(self) -> None:
        if self._entry is None:
            return
        text = " ".join(self.note.text().split())
        if text != self._entry.row.note:
            self.note_edited.emit(self._entry.row.id, text)


def grouped(text: str) -> str:
    """Every number of a text in digit groups, with true minus signs before digits."""
    return " ".join(group_digits(part).replace("-", MINUS) for part in text.split(" "))


def _sentence(words: str) -> str:
    return words[:1].upper() + words[1:] + ("" if words.endswith((".", "!", "?")) else ".") if words else ""
