"""Files, undo, menus, memory: with fake desks."""

from __future__ import annotations

from fractions import Fraction

import pytest
from PySide6.QtCore import QTimer
from PySide6.QtGui import QImage, QKeySequence
from PySide6.QtWidgets import QApplication, QFileDialog, QMenu, QMessageBox, QPushButton
from shell_window import FakeDesks, flip, window_on

from tinemark.onsets.results import LadderLevel, LadderResult, RefineResult, Status
from tinemark.systems.errors import NoOnsetFound
from tinemark.systems.library import builtin_text
from tinemark.window.about import AboutDialog, licence_text
from tinemark.window.action_list import ACTIONS, MENUS, key_page
from tinemark.window.callout import Callout
from tinemark.window.caution import CAUTION
from tinemark.window.layout_memory import LayoutMemory
from tinemark.work.jobs import Crashed, Failed, Finished, LevelFound


@pytest.fixture
def desks():
    return FakeDesks()


@pytest.fixture
def window(qtbot, tmp_path, desks):
    with window_on(tmp_path / "memory", make=desks.make) as made:
        qtbot.waitUntil(lambda: made.onsets.refinery is not None)
        yield made


def pick(window, *onsets, message: str = "") -> int:
    """A click whose answer is `onsets`."""
    view = window.keeper.session.view
    window.rows.pick((view.left + view.right) / 2, (view.bottom + view.top) / 2)
    number = max(window.onsets.jobs)
    request = window.onsets.jobs[number].request
    window.bridge.event_came.emit(Finished(number, request, RefineResult(onsets, message)))
    return number


def press_when_asked(words: str, seen: list[str]) -> None:
    """Press a button of the question that is about to open."""

    def press() -> None:
        box = QApplication.activeModalWidget()
        assert isinstance(box, QMessageBox)
        seen.append(box.text())
        next(b for b in box.buttons() if b.text().replace("&", "") == words).click()

    QTimer.singleShot(0, press)


@pytest.mark.parametrize(
    ("button", "leaves"), [("Stay here", False), ("Go on without saving", True), ("Save", True)]
)
def test_unsaved_work_is_asked_about(window, tmp_path, button, leaves):
    assert window.files.may_leave()
    pick(window, flip("3.0"))
    assert window.isWindowModified()
    window.keeper.path = tmp_path / "asked.tinemark"
    seen: list[str] = []
    press_when_asked(button, seen)
    assert window.files.may_leave() is leaves
    assert seen and "not saved" in seen[0]
    assert (tmp_path / "asked.tinemark").exists() is (button == "Save")
    assert window.isWindowModified() is (button != "Save")


def test_closing_can_be_stayed(window):
    pick(window, flip("3.0"))
    seen: list[str] = []
    press_when_asked("Stay here", seen)
    assert not window.close() and window.isVisible()
    # Looking about alone is nothing to be asked about.
    window.keeper.undo()
    window.diagram.gestures.zoom(Fraction(1, 2))
    assert not window.isWindowModified() and window.files.may_leave()


def test_every_change_can_be_undone_by_its_label(window):
    start = window.keeper.session
    pick(window, flip("3.0"))
    (row,) = window.keeper.session.ledger.rows
    window.ledger_panel.note_edited.emit(row.id, "first split")
    window.ledger_panel.remove_requested.emit([row.id])
    assert not window.diagram.marks
    labels = []
    while window.keeper.undo_label:
        labels.append(window.actions_by_name["undo"].text())
        window.actions_by_name["undo"].trigger()
    assert labels == ["Undo: remove a row", "Undo: edit a note", "Undo: pick an onset"]
    assert window.keeper.session == start
    for _ in range(2):
        window.actions_by_name["redo"].trigger()
    assert window.keeper.session.ledger.rows[0].note == "first split"
    assert window.diagram.marks[0].words.endswith("first split")


def test_undo_does_not_throw_the_view_about(window):
    pick(window, flip("3.0"))
    window.diagram.gestures.zoom(Fraction(1, 2))
    view = window.keeper.session.view
    window.keeper.undo()
    assert window.keeper.session.view == view and not window.keeper.session.ledger.rows


def test_two_close_onsets_are_offered_at_the_place(window):
    pick(window, flip("3.0"), flip("3.01", 2), message="two onsets lie within a few pixels of the click")
    assert not window.keeper.session.ledger.rows
    callout = window.diagram.callout
    assert isinstance(callout, Callout) and [b.text() for b in callout.buttons][-1] == "Keep both"
    assert "period 2 to 4 at 3.01" in callout.buttons[1].text()
    callout.buttons[1].click()
    assert [row.onset.value for row in window.keeper.session.ledger.rows] == ["3.01"]
    assert window.diagram.callout is None
    pick(window, flip("3.0"), flip("3.01", 2))
    window.diagram.callout.buttons[2].click()
    assert len(window.keeper.session.ledger.rows) == 2


def test_what_went_wrong_is_said_at_the_click_and_a_crash_offers_the_same_again(window, desks):
    view = window.keeper.session.view
    window.rows.pick(view.left, view.bottom)
    request = desks.refinery.asked[-1]
    window.bridge.event_came.emit(Failed(1, request, NoOnsetFound("no onset in reach", what_to_do="zoom in")))
    assert window.diagram.callout.words == "No onset in reach; zoom in."
    window.rows.pick(view.left, view.bottom)
    window.bridge.event_came.emit(Crashed(2, request, -9))
    (again,) = window.diagram.callout.buttons
    assert window.status.words.property("rank") == "error"
    again.click()
    assert desks.refinery.asked[-1] == request and len(window.onsets.jobs) == 1
    assert not window.keeper.session.ledger.rows
    # Words about a place go with it.
    window.say_trouble("Something is wrong here.")
    window.diagram.gestures.zoom(Fraction(1, 2))
    assert window.diagram.callout is None and window.status.words.words == ""


def test_a_reading_is_refined_in_its_own_row(window, desks):
    window.rows.read_by_eye(Fraction("3.4495"), Fraction(1, 2))
    (row,) = window.keeper.session.ledger.rows
    window.ledger_panel.note_edited.emit(row.id, "by hand")
    window.ledger_panel.refine_requested.emit([row.id])
    request = desks.refinery.asked[-1]
    assert request.near == row.onset.value_fraction and request.observed is None
    found = flip("3.449489742783178", 2, "1e-15")
    window.bridge.event_came.emit(Finished(1, request, RefineResult((found,), "")))
    (refined,) = window.keeper.session.ledger.rows
    assert (refined.id, refined.note, refined.onset.status) == (row.id, "by hand", Status.PROVED)
    assert window.keeper.undo_label == "refine a row"


def test_a_ladder_is_kept_level_by_level_and_can_be_gone_on_with(window, desks):
    values = ("3.0", "3.449489742783178", "3.544090359551923", "3.564407266095433")
    levels = [LadderLevel(n, flip(value, 2 ** (n - 1))) for n, value in enumerate(values, start=1)]
    pick(window, levels[1].onset)
    window.ledger_panel.extend_ladder_requested.emit(window.keeper.session.ledger.rows[0].ladder)
    request = desks.refinery.asked[-1]
    assert request.base_period == 2 and request.start < Fraction(values[1]) < request.stop
    window.bridge.event_came.emit(LevelFound(2, levels[2]))
    assert window.status.words.words.startswith("Level 3: r = 3.5440")
    assert window.status.bar.isVisible()
    window.bridge.event_came.emit(Finished(2, request, LadderResult(2, tuple(levels[1:]), "")))
    rows = window.keeper.session.ledger.rows
    # Seen from period 2 it is the same ladder: its base period is kept.
    assert [(row.level, row.base_period) for row in rows] == [(2, 1), (3, 1), (4, 1)]
    assert window.status.words.words == "3 levels found."
    assert not window.status.bar.isVisible()


def test_copying_gives_columns(window):
    pick(window, flip("3.0"))
    window.actions_by_name["copy_tsv"].trigger()
    lines = QApplication.clipboard().text().splitlines()
    assert len(lines) >= 2 and len({line.count("\t") for line in lines}) == 1
    for form in ("markdown", "latex"):
        window.actions_by_name[f"copy_{form}"].trigger()
        assert "flip" in QApplication.clipboard().text()


# --- menus ----------------------------------------------------------------------------------------------


def test_everything_has_a_key_and_a_menu_entry(window):
    entries = {}

    def walk(menu: QMenu) -> None:
        for entry in menu.actions():
            if entry.menu() is not None:
                walk(entry.menu())
            elif not entry.isSeparator():
                entries[entry.objectName()] = entry

    for bar_entry in window.menuBar().actions():
        walk(bar_entry.menu())
    assert [entry.text() for entry in window.menuBar().actions()] == list(MENUS.values())
    for action in ACTIONS:
        assert action.keys, f"{action.name} has no key"
        shown = [
            key.toString(QKeySequence.SequenceFormat.PortableText) for key in entries[action.name].shortcuts()
        ]
        assert shown and len(shown) == len(action.keys)
    assert len(key_page()) == len(ACTIONS)


def test_no_key_means_two_things():
    seen: dict[str, str] = {}
    for action in ACTIONS:
        for key in action.keys:
            name = QKeySequence(key).toString()
            assert name, f"{key} is no key"
            assert name not in seen, f"{name}: {seen.get(name)} and {action.name}"
            seen[name] = action.name


def test_entries_are_grey_where_nothing_can_be_done(window):
    names = ("undo", "redo", "back", "forward", "copy_tsv", "remove", "refine", "save_picture")
    assert not any(window.actions_by_name[name].isEnabled() for name in names)
    pick(window, flip("3.0"))
    assert all(window.actions_by_name[name].isEnabled() for name in ("undo", "copy_tsv", "remove", "refine"))


# --- files ----------------------------------------------------------------------------------------------


def test_saving_asks_for_a_name_once(window, tmp_path, monkeypatch):
    target = tmp_path / "Logistic study"
    monkeypatch.setattr(QFileDialog, "getSaveFileName", lambda *_: (str(target), ""))
    pick(window, flip("3.0"))
    assert window.files.save()
    path = target.with_suffix(".tinemark")
    assert path.exists() and window.keeper.path == path
    monkeypatch.setattr(QFileDialog, "getSaveFileName", lambda *_: pytest.fail("asked twice"))
    assert window.files.save()


def test_what_cannot_be_opened_or_saved_is_said_and_loses_nothing(window, tmp_path):
    pick(window, flip("3.0"))
    before = window.keeper.session
    broken = tmp_path / "broken.tinemark"
    broken.write_bytes(b"PK\x03\x04 this is no archive")
    assert not window.files.open(broken)
    assert "broken.tinemark" in window.status.words.words and window.diagram.callout is not None
    wrong = tmp_path / "wrong.toml"
    wrong.write_text("title = 3", encoding="utf-8")
    assert not window.files.open(wrong)
    assert "wrong.toml" in window.status.words.words
    assert not window.files._save_to(tmp_path / "no such folder" / "a.tinemark")
    assert window.status.words.words.startswith("Not saved.")
    assert window.keeper.session == before and window.isWindowModified()


def test_an_own_system_file_opens_as_a_session(window, tmp_path):
    path = tmp_path / "own.toml"
    path.write_text(builtin_text("ricker"), encoding="utf-8")
    assert window.files.open(path)
    assert window.keeper.session.system_text == builtin_text("ricker")
    assert window.keeper.path is None and not window.isWindowModified()


def test_the_picture_and_the_system_are_saved_as_files(window, desks, qtbot, tmp_path, monkeypatch):
    desks.pictures.answer()
    qtbot.waitUntil(lambda: window.diagram.field is not None)
    target = tmp_path / "picture.png"
    monkeypatch.setattr(QFileDialog, "getSaveFileName", lambda *_: (str(target), ""))
    window.files.ask_save_picture()
    qtbot.waitUntil(lambda: window.status.words.words == "Saved picture.png.")
    image = QImage(str(target))
    assert image.width() > window.diagram.parts.columns and image.height() > window.diagram.parts.rows
    target = tmp_path / "own.toml"
    assert window.files.ask_save_system()
    assert target.read_text(encoding="utf-8") == builtin_text("logistic")
    target = tmp_path / "no such folder" / "own.toml"
    assert not window.files.ask_save_system() and window.status.words.words.startswith("Not saved.")
    window.files.ask_save_picture()
    qtbot.waitUntil(lambda: window.status.words.words.startswith("Not saved. own.toml: no such file"))


def test_recent_files(window, tmp_path):
    paths = [tmp_path / f"{name}.tinemark" for name in "ab"]
    for path in paths:
        assert window.files._save_to(path)
    menu = QMenu(window)
    window.files.fill_recent(menu)
    assert [entry.text() for entry in menu.actions()] == ["&1  b.tinemark", "&2  a.tinemark"]
    paths[0].unlink()
    menu.actions()[1].trigger()
    assert "no longer" in window.status.words.words
    window.files.fill_recent(menu)
    assert len(menu.actions()) == 1
    menu.deleteLater()


# --- memory ---------------------------------------------------------------------------------------------


def test_the_layout_is_remembered_and_the_users_own_is_not_touched(qtbot, tmp_path):
    folder = tmp_path / "memory"
    with window_on(folder) as window:
        window.panels.set_open("ledger", False)
        window.set_theme("dark")
        window.hint.dismiss()
        window.resize(1180, 720)
    with window_on(folder) as window:
        assert not window.panels.is_open("ledger")
        assert not window.hint.isVisible()
    assert LayoutMemory.open(folder).theme == "light"  # as window_on sets it
    assert {path.name for path in folder.iterdir()} == {"window.ini"}


def test_a_broken_memory_counts_as_empty(qtbot, tmp_path):
    (tmp_path / "window.ini").write_bytes(b"\x00\xff[[layout\nwindow=@Nonsense(1")
    with window_on(tmp_path) as window:
        assert window.isVisible() and window.panels.is_open("ledger")


@pytest.mark.parametrize("size", [(1280, 800), (1024, 640), (1920, 1080)])
def test_the_diagram_keeps_its_share_of_the_width(qtbot, tmp_path, size):
    with window_on(tmp_path, size=size) as window:
        QApplication.processEvents()
        if size[0] >= 1280:
            assert window.diagram.width() >= 0.6 * size[0]
        assert window.diagram.width() >= 0.5 * size[0]
        assert window.width() == size[0] and window.height() == size[1]


def test_the_hint_leaves_when_both_things_were_done(window):
    assert window.hint.isVisible() and "Drag a box to zoom" in window.hint.label.text()
    pick(window, flip("3.0"))
    assert window.hint.isVisible()
    window.diagram.gestures.zoom(Fraction(1, 2))
    assert not window.hint.isVisible() and window.memory.flag("hint_seen", False)


def test_about_carries_version_licence_and_the_whole_caution(qtbot):
    dialog = AboutDialog()
    assert dialog.caution.text() == CAUTION
    assert "MIT" in dialog.licence.toPlainText() and "Permission is hereby granted" in licence_text()
    dialog.findChildren(QPushButton)[-1].click()
    dialog.close()
    dialog.deleteLater()


def test_answers_for_a_session_that_is_gone_are_dropped(window, desks):
    view = window.keeper.session.view
    window.rows.pick(view.left, view.bottom)
    request = desks.refinery.asked[-1]
    window.files.open_demo()
    assert desks.refinery.cancelled == [1] and not window.diagram.pending
    rows = window.keeper.session.ledger.rows
    window.bridge.event_came.emit(Finished(1, request, RefineResult((flip("3.0"),), "")))
    assert window.keeper.session.ledger.rows == rows


def test_an_answer_for_formulas_that_were_edited_away_is_left_out(window, desks):
    view = window.keeper.session.view
    window.rows.pick(view.left, view.bottom)
    request = desks.refinery.asked[-1]
    window.keeper.set_system(builtin_text("cubic"))
    window.bridge.event_came.emit(Finished(1, request, RefineResult((flip("3.0"),), "")))
    assert not window.keeper.session.ledger.rows
    assert "edited while" in window.status.words.words


def test_a_defect_is_told_and_the_window_goes_on(window):
    from tinemark.window.app import _telling

    passed: list[object] = []
    hook = _telling(window, lambda *seen: passed.append(seen))
    hook(ValueError, ValueError("odd"), None)
    assert passed and "ValueError: odd" in window.status.words.words


def test_a_click_before_the_refinery_is_there_is_seen_and_kept(qtbot, tmp_path, desks):
    with window_on(tmp_path) as window:
        window.rows.pick(Fraction(3), Fraction(1, 2))
        assert [words for _, _, words in window.diagram.pending.values()] == [
            "getting ready\N{HORIZONTAL ELLIPSIS}"
        ]
        window.onsets.cancel()
        assert not window.diagram.pending and not window.status.cancel.isVisible()
        window.rows.pick(Fraction(3), Fraction(1, 2))
        window.onsets.attach(desks.refinery)
        assert list(window.diagram.pending) == [1] and len(desks.refinery.asked) == 1


def test_the_other_demo_is_one_click_away(window):
    window.hint.other.click()
    assert window.keeper.session.title.startswith("Invented example: resonator board")
    window.files.open_demo()
    assert "hatchery" in window.keeper.session.title
