"""The ledger and the ratio panel, fed with real ledgers of the logistic map."""

from __future__ import annotations

from fractions import Fraction

import pytest
from PySide6.QtCore import QItemSelectionModel, QPoint, Qt
from PySide6.QtGui import QGuiApplication, QKeyEvent
from PySide6.QtWidgets import QApplication, QLineEdit

from tinemark.document import ledger as ledgers
from tinemark.document.ledger import Ledger, Place
from tinemark.document.rounding import decimal_text, plain
from tinemark.onsets.results import Criticality, Kind, Onset, Status
from tinemark.window.ledger_lines import (
    MAIN_COLUMNS,
    Column,
    HeadingEntry,
    MissingEntry,
    OnsetEntry,
    cell_text,
    cell_tip,
    entries_of,
)
from tinemark.window.ledger_model import LedgerModel
from tinemark.window.ledger_paint import before_sign
from tinemark.window.ledger_panel import LedgerPanel
from tinemark.window.number_label import NumberLabel, plain_number
from tinemark.window.ratio_panel import RatioPanel, near_classes, ratio_points

# Onsets of the logistic map, check_values.md section 4.1 (recomputed and enclosed there; the second to
# fourth are OEIS A086180, A086181 and A091517).
ONSETS = (
    "3.000000000000000000000000000000000000000",
    "3.449489742783178098197284074705891391965",
    "3.544090359551922853615965986604804540583",
    "3.564407266095432597773557586528982450657",
    "3.568759419543826431298210280025315370356",
    "3.569691609801396714288268706295466607186",
)
PLACE = Place("k" * 64, "r", ())


def flip(level: int, status: Status = Status.PROVED, digits: int = 25, base: int = 1) -> Onset:
    value = ONSETS[level - 1][: digits + 2]
    low, high = (decimal_text(Fraction(value) + side * Fraction(1, 10**digits), digits) for side in (-1, 1))
    period = base * 2 ** (level - 1)
    proved = status is Status.PROVED
    return Onset(
        "r",
        Kind.FLIP,
        period,
        2 * period,
        Criticality.SUPERCRITICAL if proved else Criticality.UNDECIDED,
        value,
        low,
        high,
        digits,
        status,
        "" if proved else "the cycle touches a switching surface",
        (("x", "0.66666666666666666667"),) if proved else (),
        (("least period", f"{period} points shown distinct"),) if proved else (),
    )


FOLD = Onset(
    "r",
    Kind.FOLD,
    0,
    3,
    Criticality.NOT_APPLICABLE,
    "3.8284271247461900976033774484",
    "3.8284271247461900976033774483",
    "3.8284271247461900976033774485",
    28,
    Status.PROVED,
)


def ledger_of(*onsets: Onset) -> Ledger:
    found = Ledger()
    for onset in onsets:
        found, _ = ledgers.add(found, onset, PLACE)
    return found


def with_hole() -> Ledger:
    return ledger_of(flip(1), flip(2), flip(4), flip(5, Status.ESTIMATED, 8), flip(6))


@pytest.fixture
def panel(qtbot) -> LedgerPanel:
    widget = LedgerPanel()
    qtbot.addWidget(widget)
    widget.resize(1000, 600)
    widget.show()
    return widget


def entries(found: Ledger) -> tuple:
    every = [ledgers.estimates(found, name) for name in ledgers.ladder_ids(found)]
    return entries_of(found, [e for e in every if e is not None])


def press(widget, key: Qt.Key, modifiers=Qt.KeyboardModifier.NoModifier) -> None:
    for kind in (QKeyEvent.Type.KeyPress, QKeyEvent.Type.KeyRelease):
        QApplication.sendEvent(widget, QKeyEvent(kind, key, modifiers))


# --- the lines of the table


def test_lines_are_grouped_under_headings_with_holes_said():
    eye = ledgers.eye_pick("r", Fraction("2.98"), Fraction(1, 1000))
    lines = entries(ledger_of(flip(6), flip(1), flip(2), flip(4), FOLD, eye))
    kinds = [type(line).__name__ for line in lines]
    assert kinds == [
        "HeadingEntry",
        "OnsetEntry",
        "OnsetEntry",
        "MissingEntry",
        "OnsetEntry",
        "MissingEntry",
        "OnsetEntry",
        "HeadingEntry",
        "OnsetEntry",
        "OnsetEntry",
    ]
    assert lines[0] == HeadingEntry(lines[0].ladder, "Ladder from period 1, parameter r")
    assert [line.row.level for line in lines if isinstance(line, OnsetEntry)][:4] == [1, 2, 4, 6]
    assert [(line.first, line.last) for line in lines if isinstance(line, MissingEntry)] == [(3, 3), (5, 5)]
    assert lines[7].text == "Onsets outside a ladder"


def test_a_run_of_missing_levels_takes_one_line():
    lines = entries(ledger_of(flip(5), flip(6)))
    holes = [line for line in lines if isinstance(line, MissingEntry)]
    assert [(hole.first, hole.last) for hole in holes] == [(1, 4)]


def test_ladders_of_other_systems_and_settings_say_so():
    found = ledger_of(flip(1))
    found, _ = ledgers.add(found, flip(2), Place("k" * 64, "r", (("h", "0.05"),)))
    found, _ = ledgers.add(found, flip(3), Place("z" * 64, "r", ()))
    words = [line.text for line in entries_of(found, (), "k" * 64) if isinstance(line, HeadingEntry)]
    assert words[0] == "Ladder from period 1, parameter r"
    assert words[1].endswith("parameter r at h = 0.05")
    assert "another system" in words[2]
    words = [line.text for line in entries_of(found, (), "z" * 64) if isinstance(line, HeadingEntry)]
    assert words[0] == "Ladder from period 1, parameter r"
    assert all("another system" in text for text in words[1:])


def test_cells_of_a_proved_onset():
    line = next(e for e in entries(ledger_of(flip(1), flip(2), flip(3))) if isinstance(e, OnsetEntry))
    assert cell_text(line, Column.LEVEL) == "1"
    assert cell_text(line, Column.KIND) == "supercritical flip"
    assert cell_text(line, Column.PERIOD) == "1 \u2192 2"
    assert cell_text(line, Column.STATUS) == "proved"
    # (sqrt 6 - 2)/(r_3 - r_2), from the same section: 4.7514462181...
    assert plain(cell_text(line, Column.RATIO)).startswith("4.751446")
    assert plain(cell_text(line, Column.GAP)).startswith("0.44948974")
    assert line.row.onset.value in cell_tip(line, Column.VALUE)
    assert line.row.onset.lower in cell_tip(line, Column.VALUE)


def test_cells_without_a_number_say_why():
    lines = [e for e in entries(with_hole()) if isinstance(e, OnsetEntry)]
    second = next(e for e in lines if e.row.level == 2)
    assert cell_text(second, Column.GAP) == cell_text(second, Column.RATIO) == "\u2013"
    assert "3" in cell_tip(second, Column.GAP)
    assert "missing" in cell_tip(second, Column.RATIO).lower()
    fifth = next(e for e in lines if e.row.level == 5)
    assert "switching surface" in cell_tip(fifth, Column.STATUS)
    assert cell_text(fifth, Column.STATUS) == "estimated"


def test_a_fold_is_none_before_and_an_eye_pick_has_no_periods():
    eye = ledgers.eye_pick("r", Fraction("2.98"), Fraction(1, 1000))
    lines = [e for e in entries(ledger_of(FOLD, eye)) if isinstance(e, OnsetEntry)]
    words = {e.row.onset.kind: cell_text(e, Column.PERIOD) for e in lines}
    assert words[Kind.FOLD] == "none \u2192 3"
    assert words[Kind.UNKNOWN] == "\u2013"


def test_shown_digits_of_an_enclosed_value_are_digits_of_the_number():
    for level in range(1, 7):
        line = next(e for e in entries(ledger_of(flip(level))) if isinstance(e, OnsetEntry))
        shown = plain(cell_text(line, Column.VALUE))
        assert len(shown) > 8
        assert ONSETS[level - 1].startswith(shown)


def test_many_estimated_digits_are_cut_in_the_table_and_kept_in_the_detail(panel):
    panel.show_ledger(ledger_of(flip(2, Status.ESTIMATED, 30)))
    line = next(e for e in panel.model.entries if isinstance(e, OnsetEntry))
    shown = cell_text(line, Column.VALUE)
    assert shown.endswith("\u2026")
    assert ONSETS[1].startswith(plain(shown))
    panel.set_selected("r1")
    assert panel.detail.value.full == line.row.onset.value


@pytest.mark.parametrize(
    ("text", "before"),
    [("3.449(12)", "3"), ("-12.5", "-12"), ("12(3)", "12"), ("7", "7"), ("2e12", "2"), ("3\u2026", "3")],
)
def test_where_the_decimal_sign_is(text, before):
    assert before_sign(text) == before


# --- the model


def test_model_reports_texts_names_and_flags(qtbot, qtmodeltester):
    model = LedgerModel()
    model.show_entries(entries(with_hole()))
    qtmodeltester.check(model)
    assert model.headerData(Column.RATIO, Qt.Orientation.Horizontal) == "Ratio"
    assert model.flags(model.index(0, 0)) == Qt.ItemFlag.NoItemFlags
    onset = model.index(1, Column.NOTE)
    assert onset.flags() & Qt.ItemFlag.ItemIsEditable
    assert not model.index(1, Column.VALUE).flags() & Qt.ItemFlag.ItemIsEditable
    assert model.data(model.index(1, Column.STATUS), Qt.ItemDataRole.AccessibleTextRole) == "Status proved"


def test_model_tells_only_of_lines_that_changed(qtbot):
    model = LedgerModel()
    before = with_hole()
    model.show_entries(entries(before))
    with qtbot.waitSignal(model.dataChanged) as told, qtbot.assertNotEmitted(model.modelReset):
        model.show_entries(entries(ledgers.note(before, "r2", "see the log")))
    assert told.args[0].row() == told.args[1].row() == 2


# --- the panel


def test_empty_state_says_the_next_step(panel):
    panel.show_ledger(Ledger())
    assert "No onsets yet" in panel._empty.text()
    assert "Click near a split" in panel._empty.text()
    assert panel._empty.isVisible()
    buttons = (panel.copy_button, panel.extend_button, panel.refine_button, panel.remove_button)
    assert not any(button.isEnabled() for button in buttons)


def test_selecting_emits_and_set_selected_does_not(panel, qtbot):
    panel.show_ledger(with_hole())
    with qtbot.assertNotEmitted(panel.row_selected):
        panel.set_selected("r3")
        panel.show_ledger(ledgers.note(with_hole(), "r1", "x"))
    assert panel.selected_ids() == ["r3"]
    number = panel.model.row_number("r2")
    place = panel.table.visualRect(panel.model.index(number, Column.VALUE)).center()
    with qtbot.waitSignal(panel.row_selected) as told:
        qtbot.mouseClick(panel.table.viewport(), Qt.MouseButton.LeftButton, pos=place)
    assert told.args == ["r2"]
    with qtbot.assertNotEmitted(panel.row_selected):
        panel.set_selected("")
    assert panel.selected_ids() == []


def test_arrow_keys_pass_over_headings_and_holes(panel, qtbot):
    panel.show_ledger(with_hole())
    panel.set_selected("r2")
    with qtbot.waitSignal(panel.row_selected) as told:
        press(panel.table, Qt.Key.Key_Down)
    assert told.args == ["r3"]
    with qtbot.waitSignal(panel.row_selected) as told:
        press(panel.table, Qt.Key.Key_Up)
    assert told.args == ["r2"]


def test_selection_stays_when_another_ledger_is_shown(panel, qtbot):
    panel.show_ledger(with_hole())
    panel.set_selected("r4")
    with qtbot.assertNotEmitted(panel.row_selected):
        panel.show_ledger(ledgers.remove(with_hole(), ["r1"]))
    assert panel.selected_ids() == ["r4"]
    panel.show_ledger(ledgers.remove(with_hole(), ["r4"]))
    assert panel.selected_ids() == []
    assert panel.detail._entry is None


def test_buttons_ask_for_what_they_say(panel, qtbot):
    eye = ledgers.eye_pick("r", Fraction("2.98"), Fraction(1, 1000))
    found = ledger_of(flip(1), flip(2), eye)
    panel.show_ledger(found)
    panel.set_selected("r1")
    assert not panel.refine_button.isEnabled()
    with qtbot.waitSignal(panel.extend_ladder_requested) as told:
        panel.extend_button.click()
    assert told.args == [found.row("r1").ladder]
    with qtbot.waitSignal(panel.remove_requested) as told:
        panel.remove_button.click()
    assert told.args == [["r1"]]
    panel.set_selected("r3")
    assert not panel.extend_button.isEnabled()
    with qtbot.waitSignal(panel.refine_requested) as told:
        panel.refine_button.click()
    assert told.args == [["r3"]]


def test_several_rows_are_removed_at_once_and_only_unproved_ones_refined(panel, qtbot):
    panel.show_ledger(with_hole())
    panel.table.setFocus()
    panel.set_selected("r3")
    number = panel.model.row_number("r4")
    panel.table.selectionModel().select(
        panel.model.index(number, 0),
        QItemSelectionModel.SelectionFlag.Select | QItemSelectionModel.SelectionFlag.Rows,
    )
    with qtbot.waitSignal(panel.remove_requested) as told:
        press(panel.table, Qt.Key.Key_Delete)
    assert told.args == [["r3", "r4"]]
    with qtbot.waitSignal(panel.refine_requested) as told:
        panel.refine_button.click()
    assert told.args == [["r4"]]


def test_copy_key_and_menu_ask_for_each_form(panel, qtbot):
    panel.show_ledger(with_hole())
    with qtbot.waitSignal(panel.copy_requested) as told:
        press(panel.table, Qt.Key.Key_C, Qt.KeyboardModifier.ControlModifier)
    assert told.args == ["tsv"]
    forms = []
    panel.copy_requested.connect(forms.append)
    for action in panel.copy_button.menu().actions():
        action.trigger()
    assert forms == ["tsv", "markdown", "latex"]


def test_context_menu_offers_the_same(panel, qtbot):
    panel.show_ledger(with_hole())
    panel.set_selected("r4")
    menu = panel.context_menu()
    words = {action.text(): action for action in menu.actions()}
    assert words["Refine"].isEnabled()
    with qtbot.waitSignal(panel.extend_ladder_requested):
        words["Follow the ladder further"].trigger()
    menu.deleteLater()


def test_menu_opens_at_the_row_by_key(panel):
    panel.show_ledger(with_hole())
    panel.set_selected("r1")
    panel._open_menu(QPoint(5, 5))
    menu = QApplication.activePopupWidget()
    assert menu is not None
    menu.close()


def test_note_is_edited_in_place(panel, qtbot):
    panel.show_ledger(with_hole())
    panel.set_selected("r2")
    panel.table.setFocus()
    press(panel.table, Qt.Key.Key_F2)
    editor = panel.table.viewport().findChild(QLineEdit)
    assert editor is not None
    editor.setText("  seen on   the bench ")
    with qtbot.waitSignal(panel.note_edited) as told:
        press(editor, Qt.Key.Key_Return)
    assert told.args == ["r2", "seen on the bench"]


def test_note_is_edited_in_the_detail_when_the_column_is_hidden(panel, qtbot):
    panel.show_ledger(with_hole())
    panel.set_narrow(True)
    panel.set_selected("r2")
    panel.table.setFocus()
    press(panel.table, Qt.Key.Key_F2)
    panel.detail.note.setText("blurred")
    with qtbot.waitSignal(panel.note_edited) as told:
        press(panel.detail.note, Qt.Key.Key_Return)
    assert told.args == ["r2", "blurred"]


def shown_columns(panel: LedgerPanel) -> tuple[Column, ...]:
    return tuple(c for c in Column if not panel.table.isColumnHidden(c))


def test_narrow_panel_keeps_the_main_columns(panel, qtbot):
    panel.show_ledger(with_hole())
    panel.resize(1100, 600)
    qtbot.waitUntil(lambda: shown_columns(panel) == tuple(Column))
    panel.resize(380, 600)
    qtbot.waitUntil(lambda: shown_columns(panel) == MAIN_COLUMNS)
    panel.resize(1100, 600)
    panel.set_narrow(True)
    assert shown_columns(panel) == MAIN_COLUMNS


def test_detail_has_all_digits_and_copies_them(panel, qtbot):
    panel.show_ledger(with_hole())
    panel.set_selected("r2")
    onset = flip(2)
    detail = panel.detail
    assert detail.value.full == onset.value
    assert detail.lower.full == onset.lower
    assert detail.upper.full == onset.upper
    assert plain_number(detail.value.text()) == onset.value
    detail.value.setFocus()
    press(detail.value, Qt.Key.Key_C, Qt.KeyboardModifier.ControlModifier)
    assert QGuiApplication.clipboard().text() == onset.value
    assert "points shown distinct" in detail.evidence.text()
    assert "missing" in detail.gap.text()
    assert detail.states.count() == 1
    panel.set_selected("")
    assert detail.value.isHidden()
    assert "Select a row" in detail.title.text()


def test_part_of_a_number_copies_without_its_gaps(qtbot):
    label = NumberLabel("value")
    qtbot.addWidget(label)
    label.show_number("\u22123.449\u2009489\u2009742\u2026", "-3.44948974278317809819")
    label.setSelection(0, 8)
    label.copy()
    assert QGuiApplication.clipboard().text() == "-3.44948"[: len(plain_number(label.text()[:8]))]
    label.setSelection(0, len(label.text()))
    label.copy()
    assert QGuiApplication.clipboard().text() == "-3.44948974278317809819"


def test_message_above_the_table(panel):
    panel.show_message("No onset in reach.", "warning")
    assert panel.message.isVisible()
    assert panel.message.property("rank") == "warning"
    panel.show_message("")
    assert not panel.message.isVisible()


def test_every_control_has_a_name(panel):
    panel.show_ledger(with_hole())
    for widget in (panel, panel.table, panel.detail, panel.detail.note, panel.detail.value):
        assert widget.accessibleName()


# --- ratios


@pytest.fixture
def ratios(qtbot) -> RatioPanel:
    widget = RatioPanel()
    qtbot.addWidget(widget)
    widget.resize(460, 460)
    widget.show()
    return widget


def estimates(found: Ledger):
    return ledgers.estimates(found, ledgers.ladder_ids(found)[0])


def test_ratio_panel_empty_state(ratios):
    assert ratios._empty.isVisible()
    assert "three onsets in a row" in ratios._empty.text()


@pytest.mark.parametrize("levels", [(1,), (1, 2)])
def test_too_few_onsets_say_so(ratios, levels):
    ratios.show_estimates(estimates(ledger_of(*(flip(level) for level in levels))))
    assert ratios.no_ratio.isVisible()
    assert not ratios.plot.isVisible()
    assert "Needs three onsets in a row" in ratios.no_ratio.text()
    assert str(len(levels)) in ratios.no_ratio.text()


def test_a_hole_is_named(ratios):
    ratios.show_estimates(estimates(ledger_of(flip(1), flip(2), flip(4), flip(5))))
    assert "3" in ratios.no_ratio.text()
    assert "missing" in ratios.no_ratio.text()


def test_ratios_limit_and_next_onset(ratios):
    found = estimates(ledger_of(*(flip(level) for level in range(1, 7))))
    ratios.show_estimates(found)
    assert ratios.plot.isVisible()
    points = ratio_points(found.levels)
    assert [p.level for p in points] == [1, 2, 3, 4]
    # check_values.md 4.1, delta_k
    assert [round(p.value, 6) for p in points] == [4.751446, 4.656251, 4.668242, 4.668739]
    assert ratios.verdict.text()
    # The accumulation point of OEIS A098587.
    limit = Fraction("3.5699456718709449018420051513864989367638369115148323781")
    assert abs(found.limit.value - limit) <= found.limit.uncertainty
    assert ratios.limit.text().startswith("r = ")
    assert "\u00b1" in ratios.limit.full
    assert ratios.next_name.text() == "onset 7"
    assert ratios.plot.accessibleDescription().startswith("level 1: 4.75145")


def test_reasons_stand_where_there_is_no_number(ratios):
    found = estimates(ledger_of(flip(1), flip(2), flip(3)))
    ratios.show_estimates(found)
    for label, number, reason in (
        (ratios.limit, found.limit, found.limit_reason),
        (ratios.delta, found.delta, found.delta_reason),
    ):
        if number is None:
            assert label.text().lower() == reason.lower()
        else:
            assert plain_number(label.text())


def test_only_near_class_values_are_drawn(ratios):
    found = estimates(ledger_of(*(flip(level) for level in range(1, 7))))
    near = near_classes(found.classes, ratio_points(found.levels))
    assert [c.name for c in near] == ["quadratic maximum"]
    assert near_classes(found.classes, ()) == ()


def test_level_axis_has_whole_ticks(ratios):
    ratios.show_estimates(estimates(ledger_of(*(flip(level) for level in range(1, 7)))))
    (low, high), _ = ratios.plot.plotItem.vb.viewRange()
    axis = ratios.plot.plotItem.getAxis("bottom")
    for size in (60, 200, 900):
        spacing, ticks = axis.tickValues(low, high, size)[0]
        assert spacing == int(spacing) >= 1
        assert all(tick == int(tick) for tick in ticks)
    assert axis.tickStrings([1.0, 2.0], 1.0, 1.0) == ["1", "2"]


def test_going_back_to_no_ladder(ratios):
    ratios.show_estimates(estimates(ledger_of(flip(1), flip(2), flip(3))))
    ratios.show_estimates(None)
    assert ratios._empty.isVisible()
