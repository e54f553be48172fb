"""The system card: fields and text over one TOML text, mistakes under their fields, nothing typed lost."""

from __future__ import annotations

import random
from contextlib import suppress

import pytest
from PySide6.QtCore import QLocale, Qt
from PySide6.QtGui import QKeyEvent
from PySide6.QtWidgets import QApplication, QLabel, QLineEdit, QToolButton

from tinemark.systems.errors import TinemarkError
from tinemark.systems.library import builtin_names, builtin_text
from tinemark.systems.system_file import read_system_text
from tinemark.window.builtin_chooser import SENTENCE, library_builtins
from tinemark.window.draft_edits import edited, renamed, with_parameter, with_state, without
from tinemark.window.system_card import SystemCard
from tinemark.window.system_draft import check_text, line_of, read_draft

TANK = """# a tank, invented
title = "Tank"
kind  = "map"
notes = "kept"   # why it is here

[states.n]
start = 0.50    # half full
range = ["0", "4"]

[parameters.r]
value = "2.3"   # nominal
tolerance = 0.02
[parameters.h]
value = "0.05"

[next]
n = "n*exp(r*(1 - n)) - h*n"  # Ricker's, less the harvest

[diagram]
parameter = "r"
observe   = "n"
"""


@pytest.fixture
def card(qtbot) -> SystemCard:
    widget = SystemCard()
    qtbot.addWidget(widget)
    widget.resize(340, 760)
    widget.show()
    widget.show_system(TANK)
    yield widget
    widget._timer.stop()


def type_into(editor: QLineEdit, text: str) -> None:
    editor.setText(text)
    editor.textEdited.emit(text)


def press(widget, key: Qt.Key, modifiers=Qt.KeyboardModifier.NoModifier) -> None:
    for kind in (QKeyEvent.Type.KeyPress, QKeyEvent.Type.KeyRelease):
        QApplication.sendEvent(widget, QKeyEvent(kind, key, modifiers))


# --- the text behind it (no window)


def test_draft_shows_numbers_as_typed():
    draft = read_draft(TANK)
    assert draft.states[0].start == "0.50"
    assert (draft.states[0].low, draft.states[0].high) == ("0", "4")
    assert [(p.name, p.value, p.tolerance) for p in draft.parameters] == [
        ("r", "2.3", "0.02"),
        ("h", "0.05", ""),
    ]
    assert read_draft("title = ") is None


@pytest.mark.parametrize("name", builtin_names())
def test_every_built_in_system_makes_a_draft_without_mistakes(name):
    text = builtin_text(name)
    system = read_system_text(text)
    draft = read_draft(text)
    assert draft.names == system.names
    assert tuple(s.formula for s in draft.states) == system.formulas
    assert check_text(text)[1] == ()


@pytest.mark.parametrize(
    "text", ["a = 1\n[states]\nx = 3", "states = 4", "[next]\nx = 1\n[parameters.r]", ""]
)
def test_texts_that_are_no_systems_make_a_draft_and_a_mistake(text):
    assert read_draft(text) is not None
    system, troubles = check_text(text)
    assert system is None
    assert troubles


def test_every_mistake_is_found_at_once():
    text = edited(
        TANK, {"next.n": "n^2", "parameters.r.value": "2,3", "states.n.start": "", "diagram.observe": "q"}
    )
    keys = {trouble.key: trouble for trouble in check_text(text)[1]}
    assert set(keys) == {"next.n", "parameters.r.value", "states.n.start", "diagram.observe"}
    assert "use ** for powers" in keys["next.n"].words
    assert keys["next.n"].column == 2
    assert "decimal point" in keys["parameters.r.value"].words


def test_renaming_follows_into_formulas_and_keeps_comments():
    text = renamed(TANK, "parameters", "r", "growth")
    system = read_system_text(text)
    assert system.parameter_names == ("growth", "h")
    assert system.formulas == ("n*exp(growth*(1 - n)) - h*n",)
    assert system.diagram_parameter == "growth"
    for comment in ("# a tank, invented", "# nominal", "# Ricker's, less the harvest"):
        assert comment in text
    text = renamed(text, "states", "n", "stock")
    system = read_system_text(text)
    assert system.state_names == ("stock",)
    assert system.formulas == ("stock*exp(growth*(1 - stock)) - h*stock",)
    assert system.observe == "stock"


def test_renaming_leaves_longer_names_and_functions_alone():
    text = edited(TANK, {"next.n": "n*exp(r*(1 - n)) - h*n + 0*sin(n)", "parameters.e.value": "1"})
    renamed_text = renamed(text, "parameters", "e", "k")
    assert read_system_text(renamed_text).formulas == ("n*exp(r*(1 - n)) - h*n + 0*sin(n)",)


def test_renaming_in_inline_tables_keeps_the_order():
    text = (
        'title = "t"\nkind = "map"\nstates = {x = {start = "0.1"}, y = {start = "0.2"}}\n'
        'parameters = {a = {value = "1"}}\nnext = {x = "a*y", y = "x"}\n'
    )
    system = read_system_text(renamed(text, "states", "x", "u"))
    assert system.state_names == ("u", "y")
    assert system.formulas == ("a*y", "u")


def test_renaming_adds_nothing_that_the_text_left_to_the_defaults():
    text = TANK[: TANK.index("[diagram]")]
    for section, old, new in (("states", "n", "stock"), ("parameters", "r", "growth")):
        assert "diagram" not in renamed(text, section, old, new)
        assert check_text(renamed(text, section, old, new))[1] == ()


WRECKS = (
    "[",
    "]",
    '"',
    "=",
    "\n",
    "#",
    "\x00",
    "é",
    "states = 4\n",
    "[next]\n",
    "next = []\n",
    "[[states.x]]\n",
    '"""',
)


@pytest.mark.parametrize("seed", range(4))
def test_wrecked_texts_raise_only_errors_of_ours(seed):
    rng = random.Random(seed)
    for _ in range(60):
        text = builtin_text(rng.choice(builtin_names()))
        for _ in range(rng.randint(1, 3)):
            place = rng.randrange(len(text))
            text = text[:place] + rng.choice(WRECKS) + text[place + rng.choice([0, 1, 20]) :]
        draft = read_draft(text)
        system, troubles = check_text(text)
        assert (system is None) == bool(troubles)
        assert line_of(text, "next.x") >= 0
        for name in [state.name for state in draft.states] if draft else ():
            for edit in (
                lambda t, n: edited(t, {f"next.{n}": "1", "diagram.observe": "1"}),
                lambda t, n: renamed(t, "states", n, "zz"),
                lambda t, n: without(t, "states", n),
                lambda t, n: with_parameter(with_state(t)),
            ):
                with suppress(TinemarkError):
                    edit(text, name)


def test_states_and_parameters_come_and_go():
    text = with_parameter(with_state(TANK))
    system = read_system_text(text)
    assert system.state_names == ("n", "y")
    assert system.parameter_names == ("r", "h", "b")
    back = read_system_text(without(without(text, "states", "y"), "parameters", "b"))
    assert back == read_system_text(TANK)
    assert "# half full" in text


@pytest.mark.parametrize(
    ("key", "line"),
    [
        ("title", 2),
        ("states.n.start", 7),
        ("parameters.r.value", 11),
        ("parameters.h.value", 14),
        ("next.n", 17),
        ("diagram.observe", 21),
        ("parameters.h.range", 13),
        ("name.h", 13),
        ("nothing", 0),
    ],
)
def test_line_of_a_key(key, line):
    assert line_of(TANK, key) == line


# --- fields


def test_fields_show_the_system_and_nothing_is_emitted(card, qtbot):
    with qtbot.assertNotEmitted(card.system_edited, wait=0):
        card.show_system(builtin_text("henon"), "henon")
    assert card.fields.editor("next.y").text() == "b*x"
    assert card.fields.editor("parameters.b.value").text() == "0.3"
    assert card.sentence.isVisible()
    assert card.verdict.text() == "In use."


def test_a_good_edit_is_passed_on_with_its_comments(card, qtbot):
    type_into(card.fields.editor("parameters.r.value"), "2.45")
    with qtbot.waitSignal(card.system_edited) as told:
        press(card.fields.editor("parameters.r.value"), Qt.Key.Key_Return)
    text = told.args[0]
    assert read_system_text(text).parameter("r").value.text == "2.45"
    assert 'value = "2.45"   # nominal' in text
    with qtbot.assertNotEmitted(card.system_edited, wait=0):
        card.check_now()


def test_an_edit_is_passed_on_after_a_moment_without_a_key(card, qtbot):
    type_into(card.fields.editor("next.n"), "n*exp(r*(1 - n))")
    with qtbot.waitSignal(card.system_edited, timeout=5000) as told:
        pass
    assert read_system_text(told.args[0]).formulas == ("n*exp(r*(1 - n))",)


def test_ctrl_enter_takes_an_edit_at_once(card, qtbot):
    type_into(card.fields.editor("title"), "Another tank")
    with qtbot.waitSignal(card.system_edited) as told:
        qtbot.keyClick(card.fields.editor("title"), Qt.Key.Key_Return, Qt.KeyboardModifier.ControlModifier)
    assert read_system_text(told.args[0]).title == "Another tank"


def test_mistakes_stand_under_their_fields_and_nothing_is_emitted(card, qtbot):
    with qtbot.assertNotEmitted(card.system_edited, wait=0):
        type_into(card.fields.editor("next.n"), "n^2")
        type_into(card.fields.editor("parameters.r.value"), "2,3")
        card.check_now()
    assert "use ** for powers" in card.fields.error_text("next.n")
    assert "decimal point" in card.fields.error_text("parameters.r.value")
    assert card.fields.error_text("parameters.h.value") == ""
    assert card.fields.editor("next.n").property("invalid")
    assert "use **" in card.fields.editor("next.n").accessibleDescription()
    assert "2 mistakes" in card.verdict.text()
    assert "last good system stays active" in card.verdict.text()
    assert card.fields.editor("next.n").text() == "n^2"
    card.go_button.click()
    assert card.fields.editor("parameters.r.value").hasFocus() or card.fields.editor("next.n").hasFocus()


def test_mending_a_mistake_clears_it(card, qtbot):
    type_into(card.fields.editor("next.n"), "n**")
    card.check_now()
    assert card.fields.error_text("next.n")
    type_into(card.fields.editor("next.n"), "r*n*(1 - n)")
    with qtbot.waitSignal(card.system_edited):
        card.check_now()
    assert card.fields.error_text("next.n") == ""
    assert not card.fields.editor("next.n").property("invalid")
    assert card.verdict.text() == "In use."


def test_optional_fields_can_be_emptied(card, qtbot):
    type_into(card.fields.editor("parameters.r.tolerance"), "")
    type_into(card.fields.editor("states.n.range", 0), "")
    type_into(card.fields.editor("states.n.range", 1), "")
    with qtbot.waitSignal(card.system_edited) as told:
        card.check_now()
    system = read_system_text(told.args[0])
    assert system.parameter("r").tolerance is None
    assert system.states[0].range is None


def test_half_a_range_is_a_mistake_under_the_range(card):
    type_into(card.fields.editor("states.n.range", 1), "")
    card.check_now()
    assert card.fields.error_text("states.n.range")


def test_echo_of_an_edit_keeps_what_was_typed_since(card, qtbot):
    type_into(card.fields.editor("parameters.r.value"), "2.45")
    with qtbot.waitSignal(card.system_edited) as told:
        card.check_now()
    type_into(card.fields.editor("parameters.r.value"), "2.456")
    card.show_system(told.args[0])
    assert card.fields.editor("parameters.r.value").text() == "2.456"


def test_undo_from_outside_shows_the_older_system(card, qtbot):
    type_into(card.fields.editor("parameters.r.value"), "2.45")
    with qtbot.waitSignal(card.system_edited):
        card.check_now()
    card.show_system(TANK)
    assert card.fields.editor("parameters.r.value").text() == "2.3"


def test_unfinished_text_can_be_taken_back_and_brought_back(card, qtbot):
    type_into(card.fields.editor("next.n"), "n*(")
    card.check_now()
    card.back_button.click()
    assert card.fields.editor("next.n").text() == "n*exp(r*(1 - n)) - h*n"
    assert card.troubles == ()
    card.restore_button.click()
    assert card.fields.editor("next.n").text() == "n*("
    assert card.troubles


def test_unfinished_text_survives_opening_another_system(card):
    type_into(card.fields.editor("next.n"), "n*(")
    card.show_system(builtin_text("logistic"), "logistic")
    assert card.fields.editor("next.x").text() == read_system_text(builtin_text("logistic")).formulas[0]
    assert card.restore_button.isVisible()
    card.restore_button.click()
    assert card.fields.editor("next.n").text() == "n*("


def test_names_are_changed_when_they_are_left(card, qtbot):
    name = card.fields.editor("name.r")
    name.setText("growth")
    with qtbot.waitSignal(card.system_edited) as told:
        name.editingFinished.emit()
    assert read_system_text(told.args[0]).formulas == ("n*exp(growth*(1 - n)) - h*n",)
    assert card.fields.editor("name.growth").text() == "growth"


@pytest.mark.parametrize(("new", "words"), [("h", "is taken"), ("2r", "is no name"), ("", "is no name")])
def test_impossible_names_are_said_under_the_name(card, qtbot, new, words):
    name = card.fields.editor("name.r")
    name.setText(new)
    with qtbot.assertNotEmitted(card.system_edited, wait=0):
        name.editingFinished.emit()
    assert words in card.fields.error_text("name.r")
    assert name.text() == new


def test_reserved_name_is_said_under_the_name(card, qtbot):
    name = card.fields.editor("name.r")
    name.setText("exp")
    name.editingFinished.emit()
    qtbot.waitUntil(lambda: bool(card.troubles))
    assert "meaning of its own" in card.fields.error_text("name.exp")


def test_adding_and_removing_by_the_buttons(card, qtbot):
    with qtbot.waitSignal(card.system_edited) as told:
        card.fields.add_asked.emit("parameters")
    assert read_system_text(told.args[0]).parameter_names == ("r", "h", "b")
    assert card.fields.editor("parameters.b.value").text() == "1"
    with qtbot.waitSignal(card.system_edited) as told:
        card.fields.remove_asked.emit("parameters", "b")
    assert read_system_text(told.args[0]) == read_system_text(TANK)


def test_removing_a_parameter_in_use_names_the_formula(card, qtbot):
    card.fields.remove_asked.emit("parameters", "h")
    qtbot.waitUntil(lambda: bool(card.troubles))
    assert '"h"' in card.fields.error_text("next.n")


def test_the_last_state_cannot_be_removed(card):
    buttons = [b for b in card.fields.findChildren(QToolButton) if b.accessibleName() == "Remove the state n"]
    assert len(buttons) == 1
    assert not buttons[0].isEnabled()


def test_diagram_choosers(card, qtbot):
    card.fields.swept.setCurrentIndex(card.fields.swept.findText("h"))
    with qtbot.waitSignal(card.system_edited) as told:
        card.fields.swept.activated.emit(card.fields.swept.currentIndex())
    assert read_system_text(told.args[0]).diagram_parameter == "h"
    type_into(card.fields.editor("diagram.observe"), "log(n)")
    with qtbot.waitSignal(card.system_edited) as told:
        card.check_now()
    assert read_system_text(told.args[0]).observe == "log(n)"


def test_notes_are_part_of_the_text(card, qtbot):
    card.fields.editor("notes").setPlainText("first line\nsecond line")
    with qtbot.waitSignal(card.system_edited) as told:
        card.check_now()
    assert read_system_text(told.args[0]).notes == "first line\nsecond line"


def test_decimal_comma_of_the_desktop_is_taken_in_numbers(card, qtbot):
    before = QLocale()
    QLocale.setDefault(QLocale(QLocale.Language.German, QLocale.Country.Germany))
    try:
        type_into(card.fields.editor("parameters.r.value"), "2,45")
        with qtbot.waitSignal(card.system_edited) as told:
            card.check_now()
        assert read_system_text(told.args[0]).parameter("r").value.text == "2.45"
        assert card.fields.editor("parameters.r.value").text() == "2,45"
    finally:
        QLocale.setDefault(before)


def test_error_from_outside_stands_under_its_field(card):
    card.show_error("next.n", "the formula cannot be compiled; simplify it")
    assert card.fields.error_text("next.n") == "the formula cannot be compiled; simplify it"
    card.show_error("", "the disk is full")
    assert "the disk is full" in card.verdict.text()


def test_a_refused_edit_can_be_taken_back(card, qtbot):
    type_into(card.fields.editor("next.n"), "n*exp(r*(1 - n))")
    card.system_edited.connect(lambda _: card.show_error("next.n", "it cannot be compiled"))
    card.check_now()
    assert card.fields.error_text("next.n") == "it cannot be compiled"
    card.back_button.click()
    assert card.fields.editor("next.n").text() == "n*exp(r*(1 - n)) - h*n"


def test_sections_that_are_none_are_said_and_the_typed_stays(card, qtbot):
    card.show_system(
        'title = "t"\nkind = "map"\nnext = 3\n[states.x]\nstart = "1"\n[parameters.a]\nvalue = "1"\n'
    )
    type_into(card.fields.editor("next.x"), "a*x")
    assert card.fields.editor("next.x").text() == "a*x"
    assert "section" in card.fields.error_text("next.x")
    card.fields.add_asked.emit("states")
    assert "section" in card.verdict.text()


def test_every_editor_has_a_name(card):
    for editor in card.fields.findChildren(QLineEdit):
        assert editor.accessibleName(), editor
    names = [e.accessibleName() for e in card.fields.findChildren(QLineEdit)]
    assert len(set(names)) == len(names)
    assert not any(label.text() == "" for label in card.fields.findChildren(QLabel) if label.isVisible())


# --- text side


def test_text_side_shows_the_same_text_and_marks_the_line(card, qtbot):
    card.show_side("text")
    assert card.text.toPlainText() == TANK
    with qtbot.assertNotEmitted(card.system_edited, wait=0):
        card.text.setPlainText(TANK.replace('"2.3"', '2.3"'))
        card.check_now()
    assert card.text.marked_lines == (11,)
    assert "Line 11" in card.verdict.text()
    card.go_button.click()
    assert card.text.textCursor().blockNumber() == 10
    card.show_side("fields")
    assert card.side == "text"
    card.text.setPlainText(TANK.replace("2.3", "2.4"))
    with qtbot.waitSignal(card.system_edited):
        card.check_now()
    card.show_side("fields")
    assert card.fields.editor("parameters.r.value").text() == "2.4"


def test_text_side_marks_the_line_of_a_wrong_formula(card):
    card.show_side("text")
    card.text.setPlainText(TANK.replace("exp(", "eval("))
    card.check_now()
    assert card.text.marked_lines == (17,)


def test_a_file_that_is_no_toml_opens_on_the_text_side(card):
    card.show_system("title = \n")
    assert card.side == "text"
    assert card.troubles


def test_text_side_paints_its_margin(card):
    card.show_side("text")
    card.text.setPlainText(TANK.replace("exp(", "eval("))
    card.check_now()
    assert not card.text.grab().isNull()
    assert card.text.margin_width() > 0


# --- built-in systems


def test_chooser_has_every_built_in_with_its_sentence(card, qtbot):
    assert card.builtins.count() == 0
    card.builtins.fill()
    assert card.builtins.count() == len(builtin_names())
    for place in range(card.builtins.count()):
        assert len(card.builtins.itemData(place, SENTENCE)) > 20
    with qtbot.waitSignal(card.builtin_chosen) as told:
        card.builtins.activated.emit(0)
    assert told.args[0] == library_builtins()[0].name


def test_an_edited_built_in_is_an_own_system(card, qtbot):
    card.show_system(builtin_text("logistic"), "logistic")
    assert card.builtins.currentIndex() >= 0
    type_into(card.fields.editor("parameters.r.value"), "3.21")
    with qtbot.waitSignal(card.system_edited):
        card.check_now()
    assert card.builtins.currentIndex() == -1
    assert not card.sentence.isVisible()
