"""The whole way with the real desks: look, click, prove, keep, save, open again."""

from __future__ import annotations

from fractions import Fraction

import pytest
from PySide6.QtCore import QPoint, Qt
from PySide6.QtTest import QTest
from PySide6.QtWidgets import QApplication, QMessageBox
from shell_window import at, window_on

from tinemark.document import ledger as ledgers
from tinemark.onsets.results import Status
from tinemark.window.ladder_questions import ladder_request, offered_question
from tinemark.window.onset_jobs import Job
from tinemark.window.theme import DARK, LIGHT
from tinemark.window.workers import make_all

CLICK = (Qt.MouseButton.LeftButton, Qt.KeyboardModifier.NoModifier)
# 1 + sqrt(6), the logistic map's second onset: OEIS A086180.
SECOND = Fraction("3.449489742783178098197284074705891391965")


@pytest.fixture
def window(qtbot, tmp_path):
    with window_on(tmp_path / "memory", make=make_all) as made:
        qtbot.waitUntil(lambda: made.diagram.field is not None, timeout=60_000)
        yield made


def test_look_click_prove_keep_and_reopen(window, qtbot, tmp_path):
    # Look: zoom to a box round the second onset.
    start, end = at(window, "3.40", "0.95"), at(window, "3.50", "0.75")
    QTest.mousePress(window.diagram, *CLICK, start)
    QTest.mouseMove(window.diagram, (start + end) / 2)
    QTest.mouseMove(window.diagram, end)
    QTest.mouseRelease(window.diagram, *CLICK, end)
    view = window.keeper.session.view
    # Of a system not drawn before, the first picture does not wait for its periods.
    qtbot.waitUntil(
        lambda: window.diagram.image_view == view and window.diagram.field.period.any(), timeout=60_000
    )
    field = window.diagram.field
    assert field.counts.shape == (window.diagram.parts.rows, window.diagram.parts.columns)
    assert field.period[5] == 2 and field.period[-5] == 4
    # Click: some pixels beside the split.
    QTest.mouseClick(window.diagram, *CLICK, at(window, SECOND, "0.85") + QPoint(4, 2))
    assert window.diagram.pending
    qtbot.waitUntil(lambda: not window.onsets.jobs, timeout=60_000)
    (row,) = window.keeper.session.ledger.rows
    assert row.onset.status is Status.PROVED and row.onset.digits >= 20
    assert Fraction(row.onset.lower) <= SECOND <= Fraction(row.onset.upper)
    assert not window.diagram.pending and not window.status.cancel.isVisible()
    assert window.diagram.marks[0].label == "2\N{RIGHTWARDS ARROW}4"
    assert "Proved" in window.status.words.words
    assert window.keeper.undo_label == "pick an onset"
    # The ladder from the whole diagram.
    window.fit_view()
    qtbot.waitUntil(lambda: window.diagram.image_view == window.keeper.session.view, timeout=30_000)
    question = offered_question(window.keeper.session.view, None, window.diagram.field)
    assert question.start < question.stop and question.base_period == 1
    window.onsets.ask(Job(ladder_request(window.keeper.system, window.keeper.session, question)))
    qtbot.waitUntil(lambda: not window.onsets.jobs, timeout=120_000)
    rows = window.keeper.session.ledger.rows
    assert sorted(row.level for row in rows) == list(range(1, 9))
    qtbot.waitUntil(lambda: len(window.ratios._known) == 1, timeout=30_000)
    # Its cycles' alpha stands beside delta (Briggs 1991), and goes where the ladder is another.
    panel = window.ratio_panel
    qtbot.waitUntil(lambda: panel.alpha.isVisibleTo(panel), timeout=30_000)
    assert panel.alpha.text().startswith("2.502")
    window.keeper.set_ledger("remove a row", ledgers.remove(window.keeper.session.ledger, [rows[-1].id]))
    assert not panel.alpha.isVisibleTo(panel)
    window.keeper.undo()
    # Keep.
    path = tmp_path / "kept.tinemark"
    assert window.isWindowModified()
    assert window.files._save_to(path)
    assert not window.isWindowModified() and window.windowTitle().startswith("kept.tinemark")
    kept = window.keeper.session
    window.files.open_demo()
    assert window.keeper.session != kept
    assert window.files.open(path)
    assert window.keeper.session == kept
    first = path.read_bytes()
    assert window.files._save_to(path) and path.read_bytes() == first
    assert window.memory.recent[0] == str(path.resolve())
    # Undo goes with the session; nothing is left of the old one's steps.
    assert not window.keeper.undo_label


def test_the_probe_shows_its_orbit(window, qtbot):
    QTest.mouseClick(
        window.diagram,
        Qt.MouseButton.LeftButton,
        Qt.KeyboardModifier.ControlModifier,
        at(window, "3.2", "0.5"),
    )
    qtbot.waitUntil(lambda: window.probe_panel._orbit is not None, timeout=30_000)
    assert window.probe_panel._orbit.parameter_value == window.keeper.session.probe


def test_no_onset_is_said_near_the_click(window, qtbot):
    # Nothing splits near r = 2.9 in a narrow view: the fixed point is stable all over it.
    view = window.keeper.session.view
    window.keeper.show_view(type(view)(Fraction("2.90"), Fraction("2.91"), view.bottom, view.top))
    QTest.mouseClick(window.diagram, *CLICK, at(window, "2.905", "0.5"))
    qtbot.waitUntil(lambda: not window.onsets.jobs, timeout=60_000)
    assert not window.keeper.session.ledger.rows
    assert window.diagram.callout is not None and window.diagram.callout.isVisible()
    assert window.status.words.words == window.diagram.callout.words
    window.diagram.setFocus()
    QTest.keyClick(window.diagram, Qt.Key.Key_Escape)
    assert window.diagram.callout is None


def test_the_theme_switches_and_the_picture_with_it(window, qtbot):
    before = window.diagram.image.pixel(3, 3)
    window.actions_by_name["theme_dark"].trigger()
    assert QApplication.palette().window().color().name() == DARK.surface
    qtbot.waitUntil(lambda: window.diagram.image.pixel(3, 3) != before, timeout=10_000)
    assert window.diagram.image.pixelColor(3, 3).name() == DARK.plot
    assert window.actions_by_name["theme_dark"].isChecked()
    assert window.memory.theme == "dark"
    window.set_theme("light")
    qtbot.waitUntil(lambda: window.diagram.image.pixelColor(3, 3).name() == LIGHT.plot, timeout=10_000)


def test_another_system_is_drawn_and_the_step_can_be_undone(window, qtbot):
    logistic = window.keeper.session
    window.files.open_builtin("ricker")
    assert window.diagram.field is None and window.keeper.system.title != ""
    qtbot.waitUntil(lambda: window.diagram.field is not None, timeout=60_000)
    assert window.keeper.undo_label == "open the built-in system ricker"
    window.keeper.undo()
    assert window.keeper.session.system_text == logistic.system_text
    qtbot.waitUntil(lambda: window.diagram.field is not None, timeout=60_000)


def test_a_cancelled_ladder_keeps_what_it_found(window, qtbot):
    question = offered_question(window.keeper.session.view, None, window.diagram.field)
    request = ladder_request(window.keeper.system, window.keeper.session, question)
    window.onsets.ask(Job(type(request)(**{**request.__dict__, "levels": 24})))
    qtbot.waitUntil(lambda: any(len(job.levels) >= 2 for job in window.onsets.jobs.values()), timeout=60_000)
    window.cancel()
    qtbot.waitUntil(lambda: not window.onsets.jobs, timeout=30_000)
    rows = window.keeper.session.ledger.rows
    assert 2 <= len(rows) < 24
    assert "Kept" in window.status.words.words
    assert not QApplication.activeModalWidget() or not isinstance(
        QApplication.activeModalWidget(), QMessageBox
    )


def test_closing_in_the_middle_of_things_leaves_nothing_behind(qtbot, tmp_path):
    with window_on(tmp_path, make=make_all) as window:
        qtbot.waitUntil(lambda: window.onsets.refinery is not None, timeout=60_000)
        window.rows.pick(Fraction(3), Fraction("0.66"))
        window.keeper.set_probe(Fraction("3.7"))
        window.diagram.gestures.zoom(Fraction(1, 2))
        window.files.may_leave = lambda: True
        window.close()
        QApplication.processEvents()
        assert not window.isVisible()
        # What still comes in is dropped, and nothing is asked of closed desks.
        window.diagram.gestures.zoom(Fraction(1, 2))
        window.keeper.set_probe(Fraction("3.8"))
        QApplication.processEvents()


def test_closing_before_the_desks_are_made_leaves_nothing_behind(qtbot, tmp_path):
    with window_on(tmp_path, make=make_all) as window:
        window.close()
