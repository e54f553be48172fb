"""Picking every onset of the view: the form, rows that come, one step back, cancel, and the last sentence."""

from __future__ import annotations

from dataclasses import replace
from fractions import Fraction

import pytest
from PySide6.QtCore import Qt
from PySide6.QtTest import QTest
from shell_window import FakeDesks, FakeRefinery, flip, window_on

from tinemark.onsets.results import Kind, SurveyRequest, SurveyResult
from tinemark.systems.errors import NoOnsetFound
from tinemark.window.survey_jobs import kept_words
from tinemark.work.jobs import Cancelled, Crashed, Failed, Finished, OnsetFound, Progressed

FOUND = (flip("3"), flip("3.4494897427831780982", before=2), replace(flip("3.8284"), kind=Kind.FOLD))


class SurveyingRefinery(FakeRefinery):
    """Records surveys as well."""

    def survey(self, request: SurveyRequest) -> int:
        self.asked.append(request)
        return len(self.asked)


@pytest.fixture
def desks() -> FakeDesks:
    made = FakeDesks()
    made.refinery = SurveyingRefinery()
    return made


@pytest.fixture
def window(tmp_path, qtbot, desks):
    with window_on(tmp_path, make=desks.make) as shown:
        qtbot.waitUntil(lambda: shown.surveys.desk is not None)
        yield shown


def asked(window, desks, period: str = "6") -> SurveyRequest:
    window.actions_by_name["survey"].trigger()
    assert window.survey_form.isVisible()
    window.survey_form.period.setText(period)
    QTest.keyClick(window.survey_form.period, Qt.Key.Key_Return)
    return desks.refinery.asked[-1]


def rows(window) -> int:
    return len(window.keeper.session.ledger.rows)


def test_the_form_asks_for_this_view_and_leaves(window, desks):
    request = asked(window, desks)
    view = window.keeper.session.view
    assert (request.start, request.stop, request.max_period) == (view.left, view.right, 6)
    assert request.parameter == "r" and not window.survey_form.isVisible()
    assert window.status.bar.isVisible() and window.surveys.busy


@pytest.mark.parametrize("typed", ["", "0", "65", "many", "2.5"])
def test_a_period_that_cannot_be_asked_for_is_said(window, desks, typed):
    window.survey_form.open()
    window.survey_form.period.setText(typed)
    window.survey_form.find_button.click()
    assert "whole number from 1 to 64" in window.survey_form.period.trouble.text()
    assert window.survey_form.isVisible() and not desks.refinery.asked


def test_escape_closes_the_form(window):
    window.survey_form.open()
    QTest.keyClick(window.survey_form.period, Qt.Key.Key_Escape)
    assert not window.survey_form.isVisible()


def test_rows_come_as_they_are_found_and_are_one_step_back(window, desks, qtbot):
    request = asked(window, desks)
    window._hear(OnsetFound(1, FOUND[0]))
    qtbot.waitUntil(lambda: rows(window) == 1)
    window._hear(Progressed(1, "following period 2", 0.4))
    assert window.status.words.words.startswith("1 onset so far: following period 2")
    window._hear(OnsetFound(1, FOUND[1]))
    qtbot.waitUntil(lambda: rows(window) == 2)
    window._hear(Finished(1, request, SurveyResult(FOUND, "2 flips and 1 fold")))
    assert rows(window) == 3
    assert window.status.words.words == "3 new rows. 2 flips and 1 fold."
    assert not window.status.bar.isVisible() and not window.surveys.busy
    assert window.keeper.undo_label == "pick every onset up to period 6"
    window.keeper.undo()
    assert rows(window) == 0
    window.keeper.redo()
    assert rows(window) == 3
    # Asked for again, the same onsets are not doubled.
    request = asked(window, desks)
    window._hear(Finished(2, request, SurveyResult(FOUND, "")))
    assert rows(window) == 3
    assert window.status.words.words == "0 new rows; 3 onsets were in the ledger already."


def test_cancel_keeps_what_was_found(window, desks):
    request = asked(window, desks)
    window._hear(OnsetFound(1, FOUND[0]))
    window.cancel()
    assert desks.refinery.cancelled == [1]
    window._hear(Cancelled(1, request))
    assert rows(window) == 1 and not window.surveys.busy
    assert window.status.words.words == "1 new row. Cancelled; what was found before is kept."


def test_failure_and_crash_are_said(window, desks):
    request = asked(window, desks)
    window._hear(Failed(1, request, NoOnsetFound("the range is empty")))
    assert window.status.words.words == "The range is empty."
    request = asked(window, desks)
    window._hear(Crashed(2, request, -9))
    assert "ended unexpectedly" in window.status.words.words
    assert window.status.words.property("rank") == "error" and not window.surveys.busy


def test_one_survey_at_a_time_and_none_for_formulas_that_are_gone(window, desks):
    request = asked(window, desks)
    window.surveys.ask(3)
    assert len(desks.refinery.asked) == 1 and "cancel it first" in window.status.words.words
    window.keeper.set_system(window.keeper.session.system_text.replace("r*x*(1 - x)", "r*x*(1 - x)**2"))
    window._hear(Finished(1, request, SurveyResult(FOUND, "")))
    assert rows(window) == 0 and not window.surveys.busy


def test_another_session_gets_nothing_of_it(window, desks):
    request = asked(window, desks)
    window.files.open_builtin("ricker")
    window._hear(OnsetFound(1, FOUND[0]))
    window._hear(Finished(1, request, SurveyResult(FOUND, "")))
    assert rows(window) == 0


def test_the_last_sentence():
    assert kept_words(0, 0) == ""
    assert kept_words(1, 0) == "1 new row."
    assert kept_words(2, 1) == "2 new rows; 1 onset was in the ledger already."


def test_values_are_asked_finer_than_a_pixel(window, desks):
    view = window.keeper.session.view
    middle = (view.left + view.right) / 2
    window.keeper.show_view(type(view)(middle, middle + Fraction(1, 10**20), view.bottom, view.top))
    assert asked(window, desks).digits > 24
