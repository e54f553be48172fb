"""The system card: the model by fields or as a text, checked while it is typed.

One TOML text is behind both sides. What is typed goes into that text, right or wrong; only a text
that reads as a system is passed on, so the last good one stays active until then.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence

from PySide6.QtCore import Qt, QTimer, Signal
from PySide6.QtGui import QKeySequence, QShortcut, QShowEvent
from PySide6.QtWidgets import (
    QButtonGroup,
    QFrame,
    QHBoxLayout,
    QLabel,
    QPushButton,
    QScrollArea,
    QStackedWidget,
    QToolButton,
    QVBoxLayout,
    QWidget,
)

from tinemark.systems.errors import TinemarkError
from tinemark.window.builtin_chooser import BuiltIn, BuiltinChooser, library_builtins
from tinemark.window.draft_edits import edited, renamed, with_kind, with_parameter, with_state, without
from tinemark.window.faces import FaceKeeper
from tinemark.window.system_draft import Trouble, check_text, line_of, read_draft, trouble_of
from tinemark.window.system_fields import SystemFields
from tinemark.window.system_text_edit import TomlEdit

WAIT_MS = 400
GOOD = "In use."


class SystemCard(QWidget):
    """Edits a system's text.

    Signals
    -------
    system_edited : str
        The whole TOML text, each time it has changed and reads as a system.
    builtin_chosen : str
        Name of a built-in system to open.
    """

    system_edited = Signal(str)
    builtin_chosen = Signal(str)

    def __init__(
        self,
        parent: QWidget | None = None,
        *,
        load_builtins: Callable[[], Sequence[BuiltIn]] = library_builtins,
    ) -> None:
        super().__init__(parent)
        self.setWindowTitle("System")
        self.setAccessibleName("System card")
        self._text = ""
        self._before = self._good = ""
        self._dropped = ""
        self._stale = False
        self._troubles: tuple[Trouble, ...] = ()
        self._timer = QTimer(self)
        self._timer.setSingleShot(True)
        self._timer.setInterval(WAIT_MS)
        self._timer.timeout.connect(self.check_now)
        self._build_head(load_builtins)
        self._build_sides()
        self._build_foot()
        outer = QVBoxLayout(self)
        outer.setContentsMargins(10, 8, 6, 8)
        outer.setSpacing(6)
        outer.addLayout(self._head)
        outer.addWidget(self.sentence)
        outer.addWidget(self.sides, 1)
        outer.addWidget(self._rule())
        outer.addWidget(self.verdict)
        outer.addLayout(self._foot)
        self._faces = FaceKeeper(self)
        take = QShortcut(QKeySequence("Ctrl+Return"), self)
        take.setContext(Qt.ShortcutContext.WidgetWithChildrenShortcut)
        take.activated.connect(self.check_now)

    def _build_head(self, load_builtins: Callable[[], Sequence[BuiltIn]]) -> None:
        self._head = QHBoxLayout()
        self._head.setSpacing(6)
        self.builtins = BuiltinChooser(load_builtins)
        self.builtins.chosen.connect(self._builtin_chosen)
        self._head.addWidget(self.builtins, 1)
        self._side_buttons: dict[str, QToolButton] = {}
        group = QButtonGroup(self)
        for side, words, tip in (
            ("fields", "Fields", "Edit the system field by field"),
            ("text", "Text", "Edit the system's whole TOML text"),
        ):
            button = QToolButton()
            button.setText(words)
            button.setToolTip(tip)
            button.setCheckable(True)
            group.addButton(button)
            button.clicked.connect(lambda _=False, name=side: self.show_side(name))
            self._side_buttons[side] = button
            self._head.addWidget(button)
        self._side_buttons["fields"].setChecked(True)
        self.sentence = QLabel()
        self.sentence.setWordWrap(True)
        self.sentence.setProperty("rank", "second")
        self.sentence.setAccessibleName("Where the system is met")
        self.sentence.hide()

    def _build_sides(self) -> None:
        self.fields = SystemFields()
        self.fields.changed.connect(self._fields_changed)
        self.fields.settled.connect(self._settled)
        self.fields.rename_asked.connect(self._rename)
        self.fields.add_asked.connect(self._add)
        self.fields.remove_asked.connect(self._remove)
        self.fields.kind_asked.connect(lambda kind: self._restructure(lambda text: with_kind(text, kind)))
        scroll = QScrollArea()
        scroll.setWidgetResizable(True)
        scroll.setHorizontalScrollBarPolicy(Qt.ScrollBarPolicy.ScrollBarAsNeeded)
        scroll.setFocusPolicy(Qt.FocusPolicy.NoFocus)
        scroll.setWidget(self.fields)
        self.text = TomlEdit()
        self.text.textChanged.connect(self._text_changed)
        self.sides = QStackedWidget()
        self.sides.addWidget(scroll)
        self.sides.addWidget(self.text)

    def _build_foot(self) -> None:
        self.verdict = QLabel(GOOD)
        self.verdict.setWordWrap(True)
        self.verdict.setTextFormat(Qt.TextFormat.PlainText)
        self.verdict.setAccessibleName("State of the system card")
        self.verdict.setTextInteractionFlags(Qt.TextInteractionFlag.TextSelectableByMouse)
        self._foot = QHBoxLayout()
        self._foot.setSpacing(6)
        self.go_button = self._button("Go to the mistake", self._go_to_mistake)
        self.back_button = self._button("Take back", self._take_back)
        self.back_button.setToolTip("Return to the system that is in use")
        self.restore_button = self._button("Bring back what was typed", self._bring_back)
        self.restore_button.setToolTip(
            "The unfinished text that was on the card before this system was opened"
        )
        self._foot.addStretch(1)
        self._show_verdict()

    def _button(self, words: str, do: Callable[[], None]) -> QPushButton:
        button = QPushButton(words)
        button.clicked.connect(do)
        button.hide()
        self._foot.addWidget(button)
        return button

    def _rule(self) -> QFrame:
        rule = QFrame()
        rule.setProperty("rank", "rule")
        return rule

    # -- what others ask -------------------------------------------------------------------

    def show_system(self, text: str, builtin: str = "") -> None:
        """Show the system that is in use; its text comes from outside (opened, chosen, undone).

        The echo of an edit of our own changes nothing here, so what has been typed since stays. A text
        with mistakes that is replaced is kept and can be brought back.
        """
        self.builtins.show_builtin(builtin)
        self._show_sentence()
        if text == self._good and text:
            return
        if self._text not in ("", self._good) and check_text(self._text)[0] is None:
            self._dropped = self._text
        self._timer.stop()
        self._before = self._good = text
        self._set_text(text)
        self._show_troubles(check_text(text)[1])

    def show_error(self, key: str, message: str) -> None:
        """Show a mistake that others found in the text on the card, under its field.

        A text that was passed on and refused is not the good one: the one before it is.
        """
        if self._text == self._good:
            self._good = self._before
        self._show_troubles((Trouble(key, message),))

    def show_side(self, side: str) -> None:
        """Show "fields" or "text". Fields need a text that is TOML; the mistake is shown otherwise."""
        if side == "fields" and read_draft(self._text) is None:
            self._side_buttons["text"].setChecked(True)
            self.check_now()
            self._go_to_mistake()
            return
        self._side_buttons[side].setChecked(True)
        if side == "text":
            self.text.show_text(self._text)
        else:
            self._show_fields()
        self.sides.setCurrentIndex(1 if side == "text" else 0)
        self._show_troubles(self._troubles)

    @property
    def side(self) -> str:
        """The side shown: "fields" or "text"."""
        return "text" if self.sides.currentIndex() == 1 else "fields"

    @property
    def current_text(self) -> str:
        """The text on the card, right or wrong."""
        return self._text

    @property
    def troubles(self) -> tuple[Trouble, ...]:
        """The mistakes in it."""
        return self._troubles

    def check_now(self) -> None:
        """Check the text, show its mistakes or pass it on, without waiting any longer."""
        self._timer.stop()
        system, troubles = check_text(self._text)
        self._show_troubles(troubles)
        if system is not None and self._text != self._good:
            self._before, self._good = self._good, self._text
            self.builtins.show_builtin("")
            self._show_sentence()
            self.system_edited.emit(self._text)

    # -- edits -----------------------------------------------------------------------------

    def _fields_changed(self, changes: Mapping[str, str | Sequence[str] | None]) -> None:
        try:
            self._text = edited(self._text, changes)
        except TinemarkError as error:
            # A section that is no section: the field keeps what was typed, the text must be mended first.
            self._show_troubles((trouble_of(error),))
            return
        self._wait()

    def _text_changed(self) -> None:
        self._text = self.text.toPlainText()
        self._wait()

    def _wait(self) -> None:
        self._timer.start()

    def _settled(self) -> None:
        if self._timer.isActive():
            self.check_now()

    def _add(self, section: str) -> None:
        self._restructure(with_state if section == "states" else with_parameter)

    def _remove(self, section: str, name: str) -> None:
        self._restructure(lambda text: without(text, section, name))

    def _rename(self, section: str, old: str, new: str) -> None:
        self._restructure(lambda text: renamed(text, section, old, new))

    def _restructure(self, change: Callable[[str], str]) -> None:
        try:
            self._text = change(self._text)
        except TinemarkError as error:
            self._show_troubles((trouble_of(error),))
            return
        # The form is built anew: not while one of its own fields is still telling of an edit.
        QTimer.singleShot(0, self, self._show_restructured)

    def _show_restructured(self) -> None:
        self._show_fields()
        self.check_now()

    def _set_text(self, text: str) -> None:
        self._text = text
        self.text.show_text(text)
        # A card that is folded away builds its form when it is opened, not while the window starts.
        self._stale = not self.isVisible()
        if not self._stale:
            self._show_text_anew()

    def _show_text_anew(self) -> None:
        self._stale = False
        if self.side == "fields" and not self._show_fields():
            self.show_side("text")

    def prepare(self) -> None:
        """Build what has not been built while the card was folded away."""
        if self._stale:
            self._show_text_anew()
            self._show_troubles(self._troubles)

    def showEvent(self, event: QShowEvent) -> None:
        """Build what is missing."""
        super().showEvent(event)
        self.prepare()

    def _show_fields(self) -> bool:
        draft = read_draft(self._text)
        if draft is not None:
            self.fields.show_draft(draft)
        return draft is not None

    def _builtin_chosen(self, name: str) -> None:
        self.builtin_chosen.emit(name)

    # -- mistakes --------------------------------------------------------------------------

    def _show_troubles(self, troubles: Sequence[Trouble]) -> None:
        self._troubles = tuple(troubles)
        self._homeless = self.fields.show_troubles(troubles)
        self.text.mark(*(self._line_of(trouble) for trouble in troubles))
        self._show_verdict()

    def _show_verdict(self) -> None:
        wrong = bool(self._troubles)
        if wrong:
            count = len(self._troubles)
            head = (
                f"Not in use: {count} mistake{'' if count == 1 else 's'}. The last good system stays active."
            )
            named = self._troubles if self.side == "text" else self._homeless
            words = "\n".join([head, *(_located(t, self._line_of(t)) for t in named)])
        else:
            words = GOOD
        self.verdict.setText(words)
        self.verdict.setProperty("rank", "error" if wrong else "second")
        self.verdict.style().unpolish(self.verdict)
        self.verdict.style().polish(self.verdict)
        self.go_button.setVisible(wrong)
        self.back_button.setVisible(wrong and bool(self._good))
        self.restore_button.setVisible(not wrong and bool(self._dropped))

    def _go_to_mistake(self) -> None:
        if not self._troubles:
            return
        first = self._troubles[0]
        if self.side == "fields" and self.fields.go_to(first):
            return
        if self.side == "fields":
            self.show_side("text")
        self.text.go_to(self._line_of(first) or 1, first.column if first.line else 0)

    def _line_of(self, trouble: Trouble) -> int:
        return trouble.line or line_of(self._text, trouble.key)

    def _take_back(self) -> None:
        self._timer.stop()
        self._dropped = self._text
        self._set_text(self._good)
        self._show_troubles(check_text(self._good)[1])

    def _bring_back(self) -> None:
        text, self._dropped = self._dropped, ""
        self._set_text(text)
        self.check_now()

    def _show_sentence(self) -> None:
        words = self.builtins.sentence()
        self.sentence.setText(words)
        self.sentence.setVisible(bool(words))


def _located(trouble: Trouble, line: int) -> str:
    place = f"Line {line}: " if line else ""
    words = trouble.words if not place else trouble.words[:1].lower() + trouble.words[1:]
    return place + words
