"""The dress: one style sheet for every theme, colours from the palette, and few widgets to dress."""

from __future__ import annotations

import pytest
from PySide6.QtGui import QColor, QPalette
from PySide6.QtWidgets import (
    QApplication,
    QCheckBox,
    QLineEdit,
    QMenu,
    QScrollArea,
    QVBoxLayout,
    QWidget,
)

from tinemark.window import dressing
from tinemark.window.dressing import Dressing
from tinemark.window.panel_plot import PanelPlot
from tinemark.window.readying import Readying
from tinemark.window.style_sheet import ROLE_WORDS, style_sheet
from tinemark.window.theme import DARK, LIGHT, apply_theme, qt_palette


@pytest.fixture
def dressed(qapp, monkeypatch):
    yield lambda theme: apply_theme(qapp, theme)
    monkeypatch.undo()
    qapp.setStyleSheet("")


@pytest.mark.parametrize("theme", [LIGHT, DARK])
def test_palette_holds_every_token_of_the_sheet(theme):
    palette = qt_palette(theme)
    for token, words in ROLE_WORDS.items():
        role = QPalette.ColorRole["".join(part.capitalize() for part in words.split("-"))]
        assert palette.color(role) == QColor(getattr(theme, token)), token


def test_sheet_names_no_colour():
    assert "#" not in style_sheet() and "$" not in style_sheet()


def test_another_theme_reaches_every_widget_and_reads_no_sheet_anew(dressed, qtbot, qapp, monkeypatch):
    dressed(LIGHT)
    page = QWidget()
    qtbot.addWidget(page)
    seen, folded = QLineEdit(), QLineEdit()
    column = QVBoxLayout(page)
    column.addWidget(seen)
    column.addWidget(folded)
    page.resize(200, 100)
    page.show()
    folded.hide()
    monkeypatch.setattr(QApplication, "setStyleSheet", lambda *_: pytest.fail("the sheet was read anew"))
    for theme in (DARK, LIGHT, DARK):
        dressed(theme)
        qtbot.waitUntil(lambda: Dressing.of(qapp).is_done)
        folded.show()
        for edit in (seen, folded):
            assert edit.grab().toImage().pixelColor(edit.width() - 8, 6) == QColor(theme.raised)
        folded.hide()


def test_windows_keep_still_until_all_that_is_seen_is_dressed(dressed, qtbot, qapp, monkeypatch):
    dressed(LIGHT)
    page = QWidget()
    qtbot.addWidget(page)
    column = QVBoxLayout(page)
    edits = [QLineEdit() for _ in range(30)]
    for edit in edits:
        column.addWidget(edit)
    area = QScrollArea()
    column.addWidget(area)
    page.show()
    # No time for more than one widget a turn.
    monkeypatch.setattr(dressing, "TURN_MS", 0)
    turn = Dressing.of(qapp)._go_on
    still = []
    monkeypatch.setattr(dressing.QTimer, "singleShot", lambda *_: still.append(page.updatesEnabled()))
    dressed(DARK)
    turn()
    # Another theme in the middle takes over from there.
    dressed(LIGHT)
    while not Dressing.of(qapp).is_done:
        turn()
    assert still[0] is False and still[-1] is True
    assert page.updatesEnabled() and area.updatesEnabled()
    assert {edit.palette().color(QPalette.ColorRole.Base).name() for edit in edits} == {LIGHT.raised}


def test_a_plot_brings_no_menu_of_its_own(qtbot, qapp):
    before = len(qapp.allWidgets())
    plot = PanelPlot(across="step", up="x", name="plot")
    qtbot.addWidget(plot)
    new = len(qapp.allWidgets()) - before
    assert new <= 12
    assert not plot.findChildren(QMenu) and not plot.findChildren(QCheckBox)


def test_items_of_a_plot_are_used_again(qtbot):
    plot = PanelPlot(across="step", up="x", name="plot")
    qtbot.addWidget(plot)
    frame = plot.plotItem
    first = frame.plot([0, 1], [2, 3], pen="#ff0000", symbol="o")
    frame.clear()
    assert frame.listDataItems() == [] and not first.isVisible()
    again = frame.plot([0, 1, 2], [4, 5, 6])
    assert again is first and again.isVisible()
    assert again.opts["pen"] is None and again.opts["symbol"] is None
    assert list(again.getData()[1]) == [4, 5, 6]


def test_folded_panels_are_made_ready_in_small_steps(qtbot):
    panel = QWidget()
    qtbot.addWidget(panel)
    for _ in range(30):
        QLineEdit(panel)
    done = []
    readying = Readying([lambda: done.append("prepared")], [panel], panel)
    readying.start(0)
    qtbot.waitUntil(lambda: not readying._timer.isActive())
    assert done == ["prepared"]
    readying.start(10_000)
    readying.stop()
    assert not readying._timer.isActive()
