"""Tolerances and margin: table, bars and sentences, the states without them, their place in the window."""

from __future__ import annotations

import dataclasses
import sys
from fractions import Fraction
from pathlib import Path

import pytest
from PySide6.QtCore import Qt
from PySide6.QtGui import QGuiApplication
from PySide6.QtWidgets import QApplication
from shell_window import FakeDesks, window_on

from tinemark.document import ledger as led
from tinemark.document.margin import NO_ROWS, OperatingPoint, margin_to
from tinemark.document.tolerance import budget_of
from tinemark.onsets.results import Criticality, Kind, Onset, Sensitivity, Status
from tinemark.resources_path import resource
from tinemark.systems.system_file import read_system_text
from tinemark.window.share_bars import ShareBars, bars_of
from tinemark.window.theme import DARK, LIGHT, apply_theme, current_theme
from tinemark.window.tolerance_panel import EMPTY_LEDGER, SELECT, TolerancePanel

TANK = resource("demo", "hatchery.toml").read_text(encoding="utf-8")
BARE = "\n".join(line for line in TANK.split("\n") if not line.startswith("tolerance"))
SLOPES = (
    Sensitivity("response", "-5263.40128914"),
    Sensitivity("harvest", "55.5555555556"),
    Sensitivity("capacity", "0"),
)


def flip(value: str, before: int = 1, slopes: tuple[Sensitivity, ...] = SLOPES) -> Onset:
    middle = Fraction(value)
    return Onset(
        "feed",
        Kind.FLIP,
        before,
        2 * before,
        Criticality.SUPERCRITICAL,
        value,
        f"{float(middle) - 1e-12:.12f}",
        f"{float(middle) + 1e-12:.12f}",
        15,
        Status.PROVED,
        states=(("stock", "37.9982427736"),),
        sensitivities=slopes,
    )


FIRST, SECOND = flip("105.268025782891"), flip("131.591412075582", 2)


@pytest.fixture
def panel(qtbot) -> TolerancePanel:
    made = TolerancePanel()
    qtbot.addWidget(made)
    made.resize(430, 330)
    made.show()
    return made


def shown(panel: TolerancePanel, onset: Onset = FIRST, text: str = TANK, point: str = "100") -> None:
    """Show one row, which is the nearest one too."""
    system = read_system_text(text)
    ledger, row_id = led.add(led.Ledger(), onset, led.place_of(system, "feed"))
    margin = margin_to(onset, system, OperatingPoint(Fraction(point)), row_id)
    panel.show_tolerances(margin, ledger.row(row_id), budget_of(onset, system), margin, has_rows=True)


def cells(panel: TolerancePanel) -> list[list[str]]:
    table = panel.table
    return [
        [table.item(row, column).text() for column in range(table.columnCount())]
        for row in range(table.rowCount())
    ]


def test_table_bars_and_sentence(panel):
    shown(panel)
    assert panel.margin.text().startswith("The onset at 105.27 lies 5.27 kg/day (5.3 %) above")
    assert panel.selected_margin.isHidden()
    assert cells(panel) == [
        ["response", "\u22125\u2009263.40", "0.000\u20094", "2.1", "93 %"],
        ["harvest", "55.555\u20096", "0.01", "0.56", "7 %"],
        ["capacity", "0", "2", "0", "0 %"],
    ]
    assert "standard uncertainty 2.2 kg/day" in panel.title.text()
    assert [bar.words for bar in panel.bars.bars] == ["response", "harvest", "capacity"]
    assert panel.bars.accessibleDescription() == "response: 93 %; harvest: 7 %; capacity: 0 %"
    assert sum(bar.share for bar in panel.bars.bars) == pytest.approx(1)
    assert panel.reason.isHidden()
    assert panel.enter.isHidden()
    assert panel.table.item(0, 1).toolTip() == "\u22125\u2009263.401\u2009289\u200914"


def test_all_rows_of_the_table_are_seen(panel):
    shown(panel)
    QApplication.processEvents()
    table = panel.table
    last = table.visualItemRect(table.item(table.rowCount() - 1, 0))
    assert last.bottom() <= table.viewport().height()
    assert table.horizontalHeader().length() <= table.viewport().width() + 1


def test_without_tolerances_it_says_where_they_are_entered(panel, qtbot):
    shown(panel, text=BARE)
    assert cells(panel)[0] == ["response", "\u22125\u2009263.40", "none given", "", ""]
    assert panel.margin.text().endswith("enter them in the system card.")
    assert panel.reason.isHidden()
    assert panel.bars.isHidden()
    assert panel.enter.isVisible()
    with qtbot.waitSignal(panel.system_wanted):
        panel.enter.click()
    # The setting's own tolerance counts for the margin, but not for the onset.
    shown(panel, text=BARE.replace('range = ["80", "165"]', 'range = ["80", "165"]\ntolerance = "1.5"'))
    assert panel.reason.text() == "No tolerances are given; enter them in the system card."
    assert panel.reason.isVisible()


def test_an_onset_without_derivatives_says_what_to_do(panel):
    shown(panel, flip("105.268025782891", slopes=()))
    assert cells(panel)[0][1] == "not known"
    assert "refine the row" in panel.reason.text()
    assert panel.enter.isHidden()


def test_the_value_s_own_uncertainty_has_a_bar_where_it_is_worth_one(panel):
    wide = dataclasses.replace(FIRST, status=Status.ESTIMATED, lower="103.3", upper="107.3")
    shown(panel, wide)
    assert "the value itself" in [bar.words for bar in panel.bars.bars]
    assert len(cells(panel)) == 3


def test_empty_states(panel):
    panel.show_tolerances(None, None, None, None)
    assert panel.margin.text() == EMPTY_LEDGER
    for part in (panel.title, panel.table, panel.bars, panel.reason, panel.enter):
        assert part.isHidden()
    panel.show_tolerances(None, None, None, None, has_rows=True)
    assert panel.margin.text() == NO_ROWS
    assert panel.reason.text() == SELECT


def test_everything_has_a_name_and_the_panel_follows_the_theme(panel, qapp):
    for part in (
        panel,
        panel.margin,
        panel.selected_margin,
        panel.title,
        panel.table,
        panel.bars,
        panel.reason,
    ):
        assert part.accessibleName()
    shown(panel)
    pictures = []
    for theme in (LIGHT, DARK):
        apply_theme(qapp, theme)
        QApplication.processEvents()
        image = panel.bars.grab().toImage()
        seen = {image.pixelColor(x, y).name() for x in range(image.width()) for y in range(image.height())}
        assert theme.accent in seen
        pictures.append(image)
    assert pictures[0] != pictures[1]
    qapp.setStyleSheet("")


def test_bars_are_as_long_as_their_shares(qtbot):
    assert bars_of((("a", None), ("b", Fraction(1, 4)), ("c", Fraction(3, 4))))[0].words == "c"
    bars = ShareBars()
    qtbot.addWidget(bars)
    bars.resize(300, 60)
    bars.show_bars(bars_of((("bb", Fraction(1, 4)), ("cc", Fraction(3, 4)))))
    image = bars.grab().toImage()
    accent = current_theme().accent
    line = bars.sizeHint().height() / 2
    lengths = [
        sum(image.pixelColor(x, round((place + 0.5) * line)).name() == accent for x in range(image.width()))
        for place in range(2)
    ]
    assert lengths[0] == pytest.approx(3 * lengths[1], abs=4)
    assert lengths[1] > 10


# In the window


@pytest.fixture
def window(tmp_path: Path):
    desks = FakeDesks()
    with window_on(tmp_path, make=desks.make, text=TANK) as made:
        place = led.place_of(made.keeper.system, "feed")
        ledger = made.keeper.session.ledger
        for onset in (FIRST, SECOND):
            ledger, _ = led.add(ledger, onset, place)
        made.keeper.set_ledger("pick", ledger)
        made.rows.select("r1")
        yield made


def test_the_menu_brings_it_up_and_the_ratios_back(window):
    assert window.lower.current == "ratios"
    window.panels.set_open("ledger", False)
    window.actions_by_name["tolerances"].trigger()
    assert window.panels.is_open("ledger")
    assert window.lower.current == "tolerances"
    assert window.tolerance_panel.isVisible()
    assert window.actions_by_name["tolerances"].isChecked()
    assert not window.actions_by_name["ratios"].isChecked()
    window.lower.buttons["ratios"].click()
    assert window.ratio_panel.isVisible()
    assert window.actions_by_name["ratios"].isChecked()


def test_it_follows_selection_probe_and_system(window):
    window.actions_by_name["tolerances"].trigger()
    panel = window.tolerance_panel
    assert "105.268" in panel.title.text()
    assert panel.selected_margin.isHidden()
    window.rows.select("r2")
    assert "131.591" in panel.title.text()
    assert panel.margin.text().startswith("The onset at 105.27")
    assert panel.selected_margin.text().startswith("Selected: The onset at 131.6")
    window.keeper.set_probe(Fraction(130))
    assert panel.margin.text().startswith("The onset at 131.59 lies 1.59 kg/day")
    assert "probe at 130" in panel.margin.text()
    window.keeper.set_probe(None)
    window.keeper.set_system(BARE)
    assert "none given" in cells(panel)[0]
    panel.enter.click()
    assert window.panels.is_open("system")
    window.keeper.undo()
    assert "93 %" in cells(panel)[0] or "96 %" in cells(panel)[0]


def test_a_copy_carries_them(window):
    window.rows.copy("tsv")
    text = QGuiApplication.clipboard().text()
    assert "harvest: 55.5555555556 (7 %)" in text
    window.rows.copy("markdown")
    assert "with k = 2 the margin is 5.3 +/- 5.3 kg/day" in QGuiApplication.clipboard().text()


def test_the_tabs_can_be_used_without_a_mouse(window):
    for button in window.lower.buttons.values():
        assert button.focusPolicy() & Qt.FocusPolicy.TabFocus
        assert button.accessibleName()
        assert "F8" in button.toolTip() or "F9" in button.toolTip()


@pytest.mark.skipif(sys.platform != "linux", reason="sizes of fonts differ")
def test_it_fits_the_narrow_ledger(panel):
    panel.resize(340, 330)
    shown(panel)
    QApplication.processEvents()
    assert panel.table.horizontalHeader().length() <= panel.table.viewport().width() + 1
    assert panel.table.isColumnHidden(3)
    panel.resize(500, 330)
    QApplication.processEvents()
    for _ in range(3):
        shown(panel)
        assert not panel.table.isColumnHidden(3)
