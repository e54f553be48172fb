"""The fields of the system card: an editor for each thing a system's text says, mistakes under it."""

from __future__ import annotations

from collections.abc import Callable, Sequence

from PySide6.QtCore import Qt, Signal
from PySide6.QtGui import QFontMetrics
from PySide6.QtWidgets import (
    QGridLayout,
    QHBoxLayout,
    QLabel,
    QLineEdit,
    QMenu,
    QPlainTextEdit,
    QPushButton,
    QToolButton,
    QVBoxLayout,
    QWidget,
)

from tinemark.systems.formula import NAME
from tinemark.systems.system import MAX_MAP_STATES, MAX_RATE_STATES
from tinemark.window.faces import wear
from tinemark.window.field_editors import (
    FieldEdit,
    MenuButton,
    NotesEdit,
    QuietCombo,
    field_grid,
    field_label,
    show_as,
)
from tinemark.window.sample_fields import DirectionChooser, KindChooser, build_sample
from tinemark.window.system_draft import Draft, DraftParameter, DraftState, Trouble

_MOST_STATES = {"map": MAX_MAP_STATES}


class SystemFields(QWidget):
    """The form.

    Signals
    -------
    changed : dict
        Dotted key -> new text, list of texts, or None to remove it.
    rename_asked : str, str, str
        Section ("states" or "parameters"), old name, new name.
    add_asked, remove_asked
        Section; section and name.
    kind_asked : str
        Another kind of system.
    settled
        An editor was left or Enter was pressed: no need to wait longer.
    """

    changed = Signal(dict)
    rename_asked = Signal(str, str, str)
    add_asked = Signal(str)
    remove_asked = Signal(str, str)
    kind_asked = Signal(str)
    settled = Signal()

    def __init__(self, parent: QWidget | None = None) -> None:
        super().__init__(parent)
        self._shape: tuple[object, ...] = ()
        self._editors: dict[str, list[QWidget]] = {}
        self._errors: dict[str, QLabel] = {}
        self._error_rows: dict[str, tuple[QGridLayout, int]] = {}
        self._names: tuple[str, ...] = ()
        self.direction: DirectionChooser | None = None
        self._troubles: tuple[Trouble, ...] = ()
        self._body = QWidget()
        self._outer = QVBoxLayout(self)
        self._outer.setContentsMargins(0, 0, 0, 0)
        self._outer.addWidget(self._body)

    # -- what others ask -------------------------------------------------------------------

    def show_draft(self, draft: Draft) -> None:
        """Show what a text says; fields that say so already are left alone, with their cursors."""
        shape = (draft.kind, tuple(s.name for s in draft.states), tuple(p.name for p in draft.parameters))
        self._names = draft.names
        if shape != self._shape:
            self._shape = shape
            self._build(draft)
        self._fill(draft)

    def show_troubles(self, troubles: Sequence[Trouble]) -> tuple[Trouble, ...]:
        """Put each mistake under its field; returns those that have no field here."""
        self._troubles = tuple(troubles)
        homeless: list[Trouble] = []
        words: dict[str, Trouble] = {}
        for trouble in troubles:
            key = self._home(trouble.key)
            if key:
                words.setdefault(key, trouble)
            else:
                homeless.append(trouble)
        for key in {*self._errors, *words}:
            trouble = words.get(key)
            self._say(key, trouble.words if trouble else "")
        return tuple(homeless)

    def go_to(self, trouble: Trouble) -> bool:
        """Put the cursor where a mistake is; False when it has no field here."""
        key = self._home(trouble.key)
        editors = self._editors.get(key, [])
        if not editors:
            return False
        editor = editors[0]
        editor.setFocus(Qt.FocusReason.OtherFocusReason)
        if isinstance(editor, QLineEdit) and trouble.column:
            editor.setCursorPosition(min(trouble.column - 1, len(editor.text())))
        return True

    def editor(self, key: str, which: int = 0) -> QWidget:
        """The editor of a field; a range has two."""
        return self._editors[key][which]

    def error_text(self, key: str) -> str:
        """The mistake shown under a field, empty when there is none."""
        label = self._errors.get(key)
        return "" if label is None or label.isHidden() else label.text()

    # -- building --------------------------------------------------------------------------

    def _build(self, draft: Draft) -> None:
        focused = next((k for k, es in self._editors.items() if any(e.hasFocus() for e in es)), "")
        self._editors, self._errors, self._error_rows = {}, {}, {}
        old, self._body = self._body, QWidget()
        self._outer.replaceWidget(old, self._body)
        old.hide()
        old.deleteLater()
        page = QVBoxLayout(self._body)
        page.setContentsMargins(2, 2, 6, 2)
        page.setSpacing(4)
        self._build_title(page)
        most = _MOST_STATES.get(draft.kind, MAX_RATE_STATES)
        self._heading(page, "States", "states", "Add a state", len(draft.states) < most)
        for state in draft.states:
            self._build_state(page, state, draft.section, removable=len(draft.states) > 1)
        if draft.section == "rate":
            self._heading(page, "Sample")
            self.direction = build_sample(self, field_grid(page), draft)
        self._heading(page, "Parameters", "parameters", "Add a parameter", True)
        for parameter in draft.parameters:
            self._build_parameter(page, parameter, removable=len(draft.parameters) > 1)
        self._heading(page, "Diagram")
        self._build_diagram(page, draft)
        self._heading(page, "Notes")
        notes = NotesEdit()
        notes.setAccessibleName("Notes on the system")
        notes.setTabChangesFocus(True)
        notes.setFixedHeight(QFontMetrics(notes.font()).lineSpacing() * 4 + 16)
        notes.textChanged.connect(lambda: self._notes_changed(notes))
        notes.left.connect(self.settled)
        self.register("notes", notes)
        page.addWidget(notes)
        page.addWidget(self._error("notes"))
        page.addStretch(1)
        if focused and focused in self._editors:
            self._editors[focused][0].setFocus()

    def _build_title(self, page: QVBoxLayout) -> None:
        grid = field_grid(page)
        title = QLineEdit()
        title.setAccessibleName("Title of the system")
        title.textEdited.connect(lambda: self.changed.emit({"title": title.text()}))
        title.editingFinished.connect(self.settled)
        self.register("title", title)
        grid.addWidget(field_label("Title", title), 0, 0)
        grid.addWidget(title, 0, 1, 1, 4)
        self.error_row(grid, 1, "title")
        self.kind = KindChooser()
        self.kind.chosen.connect(self.kind_asked)
        self.register("kind", self.kind)
        grid.addWidget(field_label("Kind", self.kind), 2, 0)
        grid.addWidget(self.kind, 2, 1, 1, 4)
        self.error_row(grid, 3, "kind")

    def _build_state(self, page: QVBoxLayout, state: DraftState, section: str, *, removable: bool) -> None:
        name, key = state.name, f"states.{state.name}"
        grid = field_grid(page)
        self._name_row(grid, "states", name, "state", removable)
        formula_key = f"{section}.{name}"
        words = f"{name} one step later, formula" if section == "next" else f"Rate of {name}, formula"
        formula = self.line(formula_key, words, digits=12)
        after = field_label(f"{section} {name} =", formula)
        wear(after, "number")
        grid.addWidget(after, 2, 0)
        grid.addWidget(formula, 2, 1, 1, 4)
        self.error_row(grid, 3, formula_key)
        start = self.line(f"{key}.start", f"Start of {name}", number=True)
        unit = self.line(f"{key}.unit", f"Unit of {name}", optional=True, digits=4)
        grid.addWidget(field_label("start", start), 4, 0)
        grid.addWidget(start, 4, 1)
        grid.addWidget(field_label("unit", unit), 4, 2)
        grid.addWidget(unit, 4, 3, 1, 2)
        self.error_row(grid, 5, f"{key}.start")
        self._range_row(grid, 6, key, name)

    def _build_parameter(self, page: QVBoxLayout, parameter: DraftParameter, *, removable: bool) -> None:
        name, key = parameter.name, f"parameters.{parameter.name}"
        grid = field_grid(page)
        self._name_row(grid, "parameters", name, "parameter", removable)
        value = self.line(f"{key}.value", f"Value of {name}", number=True)
        unit = self.line(f"{key}.unit", f"Unit of {name}", optional=True, digits=4)
        grid.addWidget(field_label("value", value), 2, 0)
        grid.addWidget(value, 2, 1)
        grid.addWidget(field_label("unit", unit), 2, 2)
        grid.addWidget(unit, 2, 3, 1, 2)
        self.error_row(grid, 3, f"{key}.value")
        self._range_row(grid, 4, key, name)
        tolerance = self.line(f"{key}.tolerance", f"Tolerance of {name}", number=True, optional=True)
        tolerance.setToolTip(f"Standard uncertainty of {name}, in its unit. May be left empty.")
        grid.addWidget(field_label("tolerance ±", tolerance), 6, 0)
        grid.addWidget(tolerance, 6, 1)
        self.error_row(grid, 7, f"{key}.tolerance")

    def _name_row(self, grid: QGridLayout, section: str, name: str, what: str, removable: bool) -> None:
        edit = FieldEdit(f"Name of the {what} {name}", digits=4)
        edit.setText(name)
        edit.editingFinished.connect(lambda: self._rename(section, name, edit))
        self.register(f"name.{name}", edit)
        remove = QToolButton()
        remove.setText("Remove")
        remove.setAccessibleName(f"Remove the {what} {name}")
        remove.setEnabled(removable)
        remove.setToolTip(f"Remove {name}" if removable else f"A system needs one {what} at least")
        remove.clicked.connect(lambda: self.remove_asked.emit(section, name))
        grid.addWidget(field_label("name", edit), 0, 0)
        grid.addWidget(edit, 0, 1)
        grid.addWidget(remove, 0, 3, 1, 2, Qt.AlignmentFlag.AlignRight)
        self.error_row(grid, 1, f"name.{name}")

    def _range_row(self, grid: QGridLayout, row: int, key: str, name: str) -> None:
        full = f"{key}.range"
        low = FieldEdit(f"Lower end of the range of {name}", number=True)
        high = FieldEdit(f"Upper end of the range of {name}", number=True)

        def emit() -> None:
            ends = [low.typed(), high.typed()]
            self.changed.emit({full: ends if any(ends) else None})

        for edit in (low, high):
            edit.setToolTip("Range of the first view. May be left empty.")
            edit.textEdited.connect(emit)
            edit.editingFinished.connect(self.settled)
            self.register(full, edit)
        grid.addWidget(field_label("range", low), row, 0)
        grid.addWidget(low, row, 1)
        grid.addWidget(field_label("to", high), row, 2)
        grid.addWidget(high, row, 3, 1, 2)
        self.error_row(grid, row + 1, full)

    def _build_diagram(self, page: QVBoxLayout, draft: Draft) -> None:
        grid = field_grid(page)
        self.swept = QuietCombo()
        self.swept.setAccessibleName("Swept parameter")
        self.swept.addItems([p.name for p in draft.parameters])
        self.swept.activated.connect(lambda: self.choose({"diagram.parameter": self.swept.currentText()}))
        self.register("diagram.parameter", self.swept)
        grid.addWidget(field_label("swept", self.swept), 0, 0)
        grid.addWidget(self.swept, 0, 1, 1, 4)
        self.error_row(grid, 1, "diagram.parameter")
        observe = self.line("diagram.observe", "Observed quantity, a state or a formula", digits=10)
        observe.setToolTip("A state, or a formula in the states")
        menu = QMenu()
        for state in draft.states:
            menu.addAction(state.name, _choice(self, state.name, observe))
        choose = MenuButton("Choose", menu)
        choose.setAccessibleName("Choose a state to observe")
        line = QHBoxLayout()
        line.setSpacing(4)
        line.addWidget(observe, 1)
        line.addWidget(choose)
        grid.addWidget(field_label("observed", observe), 2, 0)
        grid.addLayout(line, 2, 1, 1, 4)
        self.error_row(grid, 3, "diagram.observe")

    def _heading(
        self, page: QVBoxLayout, words: str, section: str = "", add: str = "", possible: bool = False
    ) -> None:
        line = QHBoxLayout()
        line.setContentsMargins(0, 10, 0, 0)
        label = QLabel(words)
        wear(label, "heading")
        line.addWidget(label)
        line.addStretch(1)
        if add:
            button = QPushButton(add)
            button.setEnabled(possible)
            button.clicked.connect(lambda: self.add_asked.emit(section))
            line.addWidget(button)
        page.addLayout(line)
        if section:
            page.addWidget(self._error(section))

    # -- single fields ---------------------------------------------------------------------

    def line(
        self, key: str, name: str, *, number: bool = False, optional: bool = False, digits: int = 6
    ) -> FieldEdit:
        """An editor of one text, registered under its key."""
        edit = FieldEdit(name, number=number, digits=digits)
        edit.textEdited.connect(
            lambda: self.changed.emit({key: (edit.typed() or None) if optional else edit.typed()})
        )
        edit.editingFinished.connect(self.settled)
        self.register(key, edit)
        return edit

    def register(self, key: str, editor: QWidget) -> None:
        """Make an editor findable by its key."""
        self._editors.setdefault(key, []).append(editor)

    def error_row(self, grid: QGridLayout, row: int, key: str) -> None:
        """Say where a mistake in a field is shown."""
        # Labels for mistakes are made when there is one: most fields never have any.
        self._error_rows[key] = (grid, row)

    def _error(self, key: str) -> QLabel:
        label = QLabel()
        label.setProperty("rank", "error")
        label.setWordWrap(True)
        label.setTextFormat(Qt.TextFormat.PlainText)
        label.setTextInteractionFlags(Qt.TextInteractionFlag.TextSelectableByMouse)
        label.hide()
        self._errors[key] = label
        return label

    def _fill(self, draft: Draft) -> None:
        self.kind.show_kind(draft.kind)
        self._set("title", draft.title)
        self._set("notes", draft.notes)
        self._set("diagram.observe", draft.observe)
        self.swept.setCurrentIndex(self.swept.findText(draft.parameter))
        if draft.kind == "driven":
            self._set("sample.every", draft.every)
        elif draft.section == "rate":
            self._set("sample.crosses", draft.crosses)
            if self.direction is not None:
                self.direction.show_direction(draft.direction)
        for state in draft.states:
            key = f"states.{state.name}"
            self._set(f"{draft.section}.{state.name}", state.formula)
            self._set(f"{key}.start", state.start)
            self._set(f"{key}.unit", state.unit)
            self._set(f"{key}.range", state.low, state.high)
        for parameter in draft.parameters:
            key = f"parameters.{parameter.name}"
            self._set(f"{key}.value", parameter.value)
            self._set(f"{key}.unit", parameter.unit)
            self._set(f"{key}.tolerance", parameter.tolerance)
            self._set(f"{key}.range", parameter.low, parameter.high)

    def _set(self, key: str, *texts: str) -> None:
        for editor, text in zip(self._editors[key], texts, strict=True):
            if isinstance(editor, FieldEdit) and editor.typed() != text:
                editor.setText(text)
                editor.setCursorPosition(0)
            elif isinstance(editor, QPlainTextEdit) and editor.toPlainText() != text:
                editor.blockSignals(True)
                editor.setPlainText(text)
                editor.blockSignals(False)
            elif (
                isinstance(editor, QLineEdit) and not isinstance(editor, FieldEdit) and editor.text() != text
            ):
                editor.setText(text)
                editor.setCursorPosition(0)

    def _rename(self, section: str, old: str, edit: FieldEdit) -> None:
        new = edit.text().strip()
        if new == old:
            self._name_trouble(old, "")
        elif not NAME.fullmatch(new):
            self._name_trouble(old, f'"{new}" is no name; use a letter, then letters, digits and _')
        elif new in self._names:
            self._name_trouble(old, f'"{new}" is taken; choose another name')
        else:
            self.rename_asked.emit(section, old, new)

    def _name_trouble(self, name: str, words: str) -> None:
        self._say(f"name.{name}", words)

    def _say(self, key: str, words: str) -> None:
        """Put a mistake under a field, or take it away."""
        if key not in self._errors and words:
            grid, row = self._error_rows[key]
            grid.addWidget(self._error(key), row, 0, 1, 5)
        if key in self._errors:
            self._errors[key].setText(words)
            self._errors[key].setVisible(bool(words))
        for editor in self._editors.get(key, []):
            show_as(editor, words)

    def choose(self, changes: dict[str, str]) -> None:
        """Change fields at once, as a chooser does."""
        self.changed.emit(changes)
        self.settled.emit()

    def _notes_changed(self, notes: NotesEdit) -> None:
        self.changed.emit({"notes": notes.toPlainText() or None})

    def _home(self, key: str) -> str:
        """The field a mistake belongs to: its own, or the nearest one that contains it."""
        parts = key.split(".")
        while parts:
            near = ".".join(parts)
            if near in self._errors or near in self._error_rows:
                return near
            parts.pop()
        return ""


def _choice(fields: SystemFields, name: str, observe: FieldEdit) -> Callable[[], None]:
    def choose() -> None:
        observe.setText(name)
        fields.choose({"diagram.observe": name})

    return choose
