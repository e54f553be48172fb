"""Changes of a session, undo, views as texts, and where a diagram is first looked at."""

from __future__ import annotations

from fractions import Fraction

import onset_samples as known
import pytest
from hypothesis import given
from hypothesis import strategies as st
from session_samples import CUBIC_TEXT, LOGISTIC_TEXT, fractions, full_session, pick, sessions, views

from tinemark.density.request import SweepRule, View
from tinemark.document import history as his
from tinemark.document import ledger as led
from tinemark.document import session as ses
from tinemark.document.first_view import first_view
from tinemark.document.history import Timeline
from tinemark.document.session import PictureSettings, Session
from tinemark.document.views import (
    MAX_VIEWS,
    ViewHistory,
    ViewText,
    back,
    forward,
    leave,
    number_of,
    number_text,
    tidy,
    view_of,
    view_text,
)
from tinemark.systems.errors import FormulaError, NumberError, SystemFileError
from tinemark.systems.library import builtin_names, builtin_system, builtin_text
from tinemark.systems.system_file import read_system_text

DRIVEN = """\
title = "Low pass"
kind = "driven"
[states.x]
start = "0"
[parameters.a]
value = "1"
range = ["0.5", "2"]
[rate]
x = "-x + a*cos(t)"
[sample]
every = "2*pi"
"""

# Views


@given(fractions)
def test_numbers_come_back_exactly(value: Fraction) -> None:
    assert number_of(number_text(value)) == value


@given(views)
def test_views_come_back_exactly(view: View) -> None:
    assert view_of(view_text(view)) == view


def test_view_texts_are_read_as_written() -> None:
    text = ViewText("2.8", "-1/3", "0", "1")
    assert view_text(View(Fraction("2.8"), Fraction(-1, 3), Fraction(0), Fraction(1))) == text
    with pytest.raises(NumberError, match="no width"):
        view_of(text)
    for wrong in ("", "x", "1/0", "1e5", "nan", "1_0", "0x1", "1" * 2000):
        with pytest.raises(NumberError):
            number_of(wrong)


def test_back_and_forward() -> None:
    a, b, c = (View(Fraction(0), Fraction(n), Fraction(0), Fraction(1)) for n in (1, 2, 3))
    history = leave(leave(ViewHistory(), a), b)
    history, view = back(history, c)
    assert view == b
    history, view = back(history, view)
    assert view == a
    assert back(history, view) == (history, a)
    history, view = forward(history, view)
    assert view == b
    # A new view forgets what lay ahead.
    assert forward(leave(history, view), c) == (ViewHistory((a, b)), c)
    for n in range(2 * MAX_VIEWS):
        history = leave(history, View(Fraction(0), Fraction(n + 1), Fraction(0), Fraction(1)))
    assert len(history.back) == MAX_VIEWS


@given(views)
def test_tidy_views_look_the_same_and_are_short(view: View) -> None:
    neat = tidy(view)
    assert abs(neat.left - view.left) <= view.width / 1_000_000
    assert abs(neat.right - view.right) <= view.width / 1_000_000
    assert abs(neat.top - view.top) <= view.height / 1_000_000
    assert neat.left < neat.right
    step = neat.width
    places = next(n for n in range(-40, 400) if (neat.left * Fraction(10) ** n).denominator == 1)
    assert Fraction(10) ** -places * 30_000_000 > step or places <= 0


# First views


def test_first_view_is_what_the_system_says() -> None:
    view = first_view(builtin_system("logistic"))
    assert (view.bottom, view.top) == (0, 1)
    system = builtin_system("logistic")
    swept = system.parameter(system.diagram_parameter)
    assert swept.range is not None
    assert (view.left, view.right) == (swept.range[0].fraction, swept.range[1].fraction)


@pytest.mark.parametrize("name", [*builtin_names(), "hatchery"])
def test_every_built_in_has_a_first_view(name: str) -> None:
    view = ses.new_session(builtin_text(name)).view
    assert view.left < view.right
    assert view.bottom < view.top


def test_first_view_of_an_own_observable_holds_its_orbits() -> None:
    text = LOGISTIC_TEXT.replace('observe = "x"', 'observe = "10*x - 3"').replace(
        'range = ["2.8", "4.0"]', ""
    )
    view = ses.new_session(text).view
    assert (view.left, view.right) == (Fraction("1.6"), Fraction("4.8"))
    # Orbits settle within 0 <= x <= 1; beyond r = 4 they escape and say nothing.
    assert -4 < view.bottom < view.top < 8
    assert view.top > 6
    escaping = LOGISTIC_TEXT.replace("r*x*(1 - x)", "x**2 + 5").replace('range = ["0", "1"]', "")
    assert (ses.new_session(escaping).view.bottom, ses.new_session(escaping).view.top) == (-1, 1)


# Changes


def test_a_new_session() -> None:
    session = ses.new_session(LOGISTIC_TEXT)
    assert session.system_text == LOGISTIC_TEXT
    assert (session.parameter, session.observe, session.title) == ("r", "x", "Logistic growth")
    assert ses.new_session(ses.system_of(session)).view == session.view
    with pytest.raises(SystemFileError):
        ses.new_session("title = 3")


def test_editing_a_formula_keeps_the_view_and_changing_the_diagram_does_not() -> None:
    session = full_session()
    edited = ses.with_system(session, LOGISTIC_TEXT.replace("(1 - x)", "(1 - x**2)"))
    assert (edited.view, edited.history) == (session.view, session.history)
    assert edited.title == session.title
    ranged = ses.with_system(session, LOGISTIC_TEXT.replace('"4.0"', '"3.9"'))
    assert ranged.view.right == Fraction("3.9")
    with pytest.raises(FormulaError):
        ses.with_system(session, LOGISTIC_TEXT.replace("(1 - x)", "(1 - z)"))


def test_the_session_s_own_diagram_survives_an_edit() -> None:
    text = LOGISTIC_TEXT.replace("[next]", '[parameters.s]\nvalue = "1"\n[next]').replace("r*x*", "s*r*x*")
    session = ses.with_diagram(ses.new_session(text), "s", "x**2")
    edited = ses.with_system(session, text.replace("as measured", "as guessed"))
    assert (edited.parameter, edited.observe, edited.view) == ("s", "x**2", session.view)
    assert ses.system_of(edited).diagram_parameter == "s"
    # Gone with its parameter.
    assert ses.with_system(session, LOGISTIC_TEXT).parameter == "r"
    with pytest.raises(SystemFileError, match="no parameter"):
        ses.with_diagram(session, "q", "x")
    with pytest.raises(FormulaError):
        ses.with_diagram(session, "r", "x +")


def test_samples_of_equations_have_a_smaller_budget_than_steps_of_maps() -> None:
    driven = read_system_text(DRIVEN)
    for name, steps in ses.BUDGETS.items():
        assert ses.budget_steps(name, builtin_system("logistic")) == steps
        assert 100 <= ses.budget_steps(name, driven) <= steps / 8


def test_an_untouched_title_goes_with_its_system() -> None:
    session = ses.new_session(LOGISTIC_TEXT)
    assert ses.with_system(session, CUBIC_TEXT).title == "Cubic"
    assert ses.with_system(ses.with_words(session, title="Mine"), CUBIC_TEXT).title == "Mine"


def test_rows_of_a_system_at_other_values() -> None:
    text = LOGISTIC_TEXT.replace("[next]", '[parameters.s]\nvalue = "1"\n[next]').replace("r*x*", "s*r*x*")
    session = pick(ses.new_session(text), known.flip("3", 1))
    later = ses.with_system(session, text.replace('value = "1"', 'value = "0.9"'))
    system = ses.system_of_row(later, "r1")
    assert system is not None
    assert system.parameter("s").value.fraction == 1
    assert ses.system_of(later).parameter("s").value.fraction == Fraction("0.9")


def test_unused_texts_of_systems_are_dropped() -> None:
    session = ses.with_system(full_session(), CUBIC_TEXT)
    assert len(session.systems) == 1
    emptied = ses.with_ledger(session, led.remove(session.ledger, [row.id for row in session.ledger.rows]))
    assert emptied.systems == ()


def test_looking_around_is_no_change() -> None:
    session = full_session()
    looked = ses.with_probe(ses.view_back(session), Fraction(3))
    assert looked != session
    assert not ses.changed(looked, session)
    assert ses.changed(ses.with_words(looked, notes="x"), session)
    assert ses.changed(ses.with_picture(session, PictureSettings(SweepRule.FORWARD)), session)
    noted = ses.with_ledger(session, led.note(session.ledger, "r1", "x"))
    assert ses.changed(noted, session)


def test_the_whole_view_can_be_gone_back_to() -> None:
    session = ses.new_session(LOGISTIC_TEXT)
    near = ses.with_view(session, View(Fraction(3), Fraction("3.1"), Fraction(0), Fraction(1)))
    assert ses.whole_view(near) == session.view
    assert ses.view_back(near).view == session.view
    assert ses.view_forward(ses.view_back(near)) == near
    assert ses.with_view(near, near.view) is near


# Undo


def test_undo_and_redo() -> None:
    first = ses.new_session(LOGISTIC_TEXT)
    second = pick(first, known.flip(known.LOGISTIC[0], 1))
    third = ses.with_words(second, notes="n")
    line = his.record(his.record(Timeline(first), second, "pick at 3.000"), third, "notes")
    assert (line.undo_label, line.redo_label) == ("notes", "")
    line = his.undo(his.undo(line))
    assert line.present == first
    assert (line.undo_label, line.redo_label) == ("", "pick at 3.000")
    assert his.undo(line) == line
    line = his.redo(line)
    assert line.present == second
    # Another change forgets what was undone.
    line = his.record(line, ses.with_words(second, notes="m"), "notes")
    assert his.redo(line) == line
    assert his.record(line, line.present, "nothing") == line


def test_typing_is_one_step() -> None:
    line = Timeline(ses.new_session(LOGISTIC_TEXT))
    for text in ("s", "se", "see"):
        line = his.record(line, ses.with_words(line.present, notes=text), "notes", merge="notes")
    assert len(line.done) == 1
    assert his.undo(line).present.notes == ""
    assert his.redo(his.undo(line)).present.notes == "see"
    # Typed back to where it began: nothing to undo.
    line = his.record(line, ses.with_words(line.present, notes=""), "notes", merge="notes")
    assert line.done == ()


def test_undo_leaves_the_view_alone_unless_it_was_the_diagram_s() -> None:
    line = Timeline(ses.new_session(LOGISTIC_TEXT))
    line = his.record(line, pick(line.present, known.flip(known.LOGISTIC[0], 1)), "pick")
    near = View(Fraction(3), Fraction("3.1"), Fraction(0), Fraction(1))
    line = his.look(line, ses.with_view(line.present, near))
    undone = his.undo(line)
    assert (undone.present.view, undone.present.ledger.rows) == (near, ())
    assert his.redo(undone).present == line.present
    ranged = ses.with_system(line.present, LOGISTIC_TEXT.replace('"4.0"', '"3.9"'))
    line = his.record(line, ranged, "edit")
    assert his.undo(line).present.view == near
    assert his.redo(his.undo(line)).present.view == ranged.view


@given(st.lists(sessions(), min_size=1, max_size=4), st.lists(st.booleans(), max_size=12))
def test_undoing_everything_comes_back_to_the_beginning(steps: list[Session], ways: list[bool]) -> None:
    begin = ses.new_session(LOGISTIC_TEXT)
    line = Timeline(begin)
    for number, step in enumerate(steps):
        line = his.record(line, step, f"step {number}")
    for way in ways:
        line = his.undo(line) if way else his.redo(line)
    while line.redo_label:
        line = his.redo(line)
    assert not ses.changed(line.present, steps[-1])
    while line.undo_label:
        line = his.undo(line)
    assert not ses.changed(line.present, begin)
