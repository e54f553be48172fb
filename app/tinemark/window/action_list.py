"""Everything that can be done, as data: words, keys, place in the menus, and the plain function that does it.

`ACTIONS` is the one list. Menus, the key page of the guide and the tests that every entry has its key
are made from it.
"""

from __future__ import annotations

from collections.abc import Callable
from fractions import Fraction
from typing import TYPE_CHECKING

from PySide6.QtCore import Qt
from PySide6.QtGui import QKeySequence

from tinemark.window.actions import Action
from tinemark.window.gestures import ZOOM_STEP

if TYPE_CHECKING:
    from tinemark.window.main_window import MainWindow

MENUS = {"File": "&File", "Edit": "&Edit", "View": "&View", "Find": "F&ind", "Help": "&Help"}
"""The menus in order, with the letter that opens each."""

NUDGE = 10


def _tool(name: str) -> Callable[[MainWindow], object]:
    return lambda w: w.set_tool(name)


def _theme(name: str) -> Callable[[MainWindow], object]:
    return lambda w: w.set_theme(name)


def _pan(right: int, up: int) -> Callable[[MainWindow], object]:
    return lambda w: w.diagram.gestures.pan(right, up)


def _nudge(right: int, up: int) -> Callable[[MainWindow], object]:
    return lambda w: w.diagram.gestures.move_cursor(right, up)


def _zoom(factor: Fraction) -> Callable[[MainWindow], object]:
    return lambda w: w.diagram.gestures.zoom(factor)


def _panel(name: str) -> Callable[[MainWindow], object]:
    return lambda w: w.panels.toggle(name)


def _panel_open(name: str) -> Callable[[MainWindow], bool]:
    return lambda w: w.panels.is_open(name)


def _lower(name: str) -> Callable[[MainWindow], object]:
    return lambda w: w.tolerances.bring_up(name)


def _lower_up(name: str) -> Callable[[MainWindow], bool]:
    return lambda w: w.panels.is_open("ledger") and w.lower.current == name


def _copy(form: str) -> Callable[[MainWindow], object]:
    return lambda w: w.rows.copy(form)


def _has_rows(w: MainWindow) -> bool:
    return bool(w.keeper.session.ledger.rows)


def _has_selection(w: MainWindow) -> bool:
    return w.rows.selected_row is not None


def _can_have_digits(w: MainWindow) -> bool:
    row = w.rows.selected_row
    return row is not None and w.rows.can_have_digits(row)


ACTIONS: tuple[Action, ...] = (
    Action(
        "open",
        "File",
        "Open…",
        lambda w: w.files.ask_open(),
        ("Ctrl+O",),
        tip="Open a session, or a system file of your own",
    ),
    Action(
        "demo",
        "File",
        "Open the hatchery demonstration",
        lambda w: w.files.open_demo(),
        ("Ctrl+Shift+D",),
        tip="A hatchery tank, an invented scenario: a return map",
    ),
    Action(
        "demo_board",
        "File",
        "Open the resonator board demonstration",
        lambda w: w.files.open_demo("resonator_board"),
        ("Ctrl+Shift+R",),
        tip="A driven resonator board in a test bay, an invented scenario: a driven circuit",
    ),
    Action("save", "File", "Save", lambda w: w.files.save(), ("Ctrl+S",), starts_group=True),
    Action("save_as", "File", "Save as…", lambda w: w.files.ask_save_as(), ("Ctrl+Shift+S",)),
    Action(
        "save_system",
        "File",
        "Save the system as a file…",
        lambda w: w.files.ask_save_system(),
        ("Ctrl+Shift+M",),
        tip="The system card's text as a TOML file",
    ),
    Action(
        "save_picture",
        "File",
        "Save the picture…",
        lambda w: w.files.ask_save_picture(),
        ("Ctrl+Shift+P",),
        enabled=lambda w: w.diagram.field is not None,
    ),
    Action("quit", "File", "Quit", lambda w: w.close(), ("Ctrl+Q",), starts_group=True),
    Action(
        "undo",
        "Edit",
        "Undo",
        lambda w: w.keeper.undo(),
        ("Ctrl+Z",),
        enabled=lambda w: bool(w.keeper.undo_label),
    ),
    Action(
        "redo",
        "Edit",
        "Redo",
        lambda w: w.keeper.redo(),
        ("Ctrl+Shift+Z", "Ctrl+Y"),
        enabled=lambda w: bool(w.keeper.redo_label),
    ),
    Action(
        "copy_tsv",
        "Edit",
        "Copy the ledger for a spreadsheet",
        _copy("tsv"),
        ("Ctrl+Shift+C",),
        enabled=_has_rows,
        starts_group=True,
    ),
    Action(
        "copy_markdown",
        "Edit",
        "Copy the ledger as Markdown",
        _copy("markdown"),
        ("Ctrl+Alt+M",),
        enabled=_has_rows,
    ),
    Action(
        "copy_latex", "Edit", "Copy the ledger as LaTeX", _copy("latex"), ("Ctrl+Alt+L",), enabled=_has_rows
    ),
    Action(
        "remove",
        "Edit",
        "Remove the selected row",
        lambda w: w.rows.remove_selected(),
        ("Ctrl+Backspace",),
        enabled=_has_selection,
        starts_group=True,
    ),
    Action(
        "back",
        "View",
        "Back one view",
        lambda w: w.keeper.view_back(),
        ("Backspace", "Alt+Left"),
        "diagram",
        enabled=lambda w: bool(w.keeper.session.history.back),
    ),
    Action(
        "forward",
        "View",
        "Forward one view",
        lambda w: w.keeper.view_forward(),
        ("Shift+Backspace", "Alt+Right"),
        "diagram",
        enabled=lambda w: bool(w.keeper.session.history.forward),
    ),
    Action(
        "fit",
        "View",
        "Whole diagram",
        lambda w: w.fit_view(),
        ("Home", "Ctrl+0"),
        "diagram",
        tip="The ranges that the system gives",
    ),
    Action("zoom_in", "View", "Zoom in", _zoom(ZOOM_STEP), ("+", "="), "diagram", starts_group=True),
    Action("zoom_out", "View", "Zoom out", _zoom(1 / ZOOM_STEP), ("-",), "diagram"),
    Action(
        "box_corner",
        "View",
        "Box corner at the cursor",
        lambda w: w.diagram.gestures.box_corner(),
        ("B",),
        "diagram",
        tip="Once for the first corner, once more to zoom to the box",
    ),
    Action("pan_left", "View/Move", "Move left", _pan(-1, 0), ("Left",), "diagram"),
    Action("pan_right", "View/Move", "Move right", _pan(1, 0), ("Right",), "diagram"),
    Action("pan_up", "View/Move", "Move up", _pan(0, 1), ("Up",), "diagram"),
    Action("pan_down", "View/Move", "Move down", _pan(0, -1), ("Down",), "diagram"),
    Action("cursor_left", "View/Cursor", "Cursor left", _nudge(-NUDGE, 0), ("Shift+Left",), "diagram"),
    Action("cursor_right", "View/Cursor", "Cursor right", _nudge(NUDGE, 0), ("Shift+Right",), "diagram"),
    Action("cursor_up", "View/Cursor", "Cursor up", _nudge(0, NUDGE), ("Shift+Up",), "diagram"),
    Action("cursor_down", "View/Cursor", "Cursor down", _nudge(0, -NUDGE), ("Shift+Down",), "diagram"),
    Action(
        "cursor_left_1",
        "View/Cursor",
        "Cursor one pixel left",
        _nudge(-1, 0),
        ("Ctrl+Shift+Left",),
        "diagram",
        starts_group=True,
    ),
    Action(
        "cursor_right_1",
        "View/Cursor",
        "Cursor one pixel right",
        _nudge(1, 0),
        ("Ctrl+Shift+Right",),
        "diagram",
    ),
    Action("cursor_up_1", "View/Cursor", "Cursor one pixel up", _nudge(0, 1), ("Ctrl+Shift+Up",), "diagram"),
    Action(
        "cursor_down_1",
        "View/Cursor",
        "Cursor one pixel down",
        _nudge(0, -1),
        ("Ctrl+Shift+Down",),
        "diagram",
    ),
    Action(
        "diagram_focus",
        "View",
        "Go to the diagram",
        lambda w: w.diagram.setFocus(Qt.FocusReason.ShortcutFocusReason),
        ("Ctrl+D",),
        starts_group=True,
    ),
    Action("system", "View", "System card", _panel("system"), ("F3",), checked=_panel_open("system")),
    Action("picture", "View", "Picture settings", _panel("picture"), ("F4",), checked=_panel_open("picture")),
    Action("probe_panel", "View", "Probe", _panel("probe"), ("F6",), checked=_panel_open("probe")),
    Action("ledger", "View", "Ledger and ratios", _panel("ledger"), ("F7",), checked=_panel_open("ledger")),
    Action("ratios", "View", "Ratios and limit", _lower("ratios"), ("F8",), checked=_lower_up("ratios")),
    Action(
        "tolerances",
        "View",
        "Tolerances and margin",
        _lower("tolerances"),
        ("F9",),
        tip="How far the operating point is from the nearest onset, and what each tolerance contributes",
        checked=_lower_up("tolerances"),
    ),
    Action(
        "branches",
        "View",
        "Branches",
        lambda w: w.branches.switch(),
        ("F5",),
        tip="Cycles of this view as curves, stable ones solid and unstable ones dashed",
        checked=lambda w: w.branches.on,
    ),
    Action(
        "theme_system",
        "View/Appearance",
        "As the desktop",
        _theme("system"),
        ("Ctrl+Alt+0",),
        checked=lambda w: w.memory.theme == "system",
    ),
    Action(
        "theme_light",
        "View/Appearance",
        "Light",
        _theme("light"),
        ("Ctrl+Alt+1",),
        checked=lambda w: w.memory.theme == "light",
    ),
    Action(
        "theme_dark",
        "View/Appearance",
        "Dark",
        _theme("dark"),
        ("Ctrl+Alt+2",),
        checked=lambda w: w.memory.theme == "dark",
    ),
    Action(
        "full_screen",
        "View",
        "Full screen",
        lambda w: w.toggle_full_screen(),
        ("F11",),
        checked=lambda w: w.isFullScreen(),
    ),
    Action(
        "tool_pick",
        "Find",
        "Tool: pick",
        _tool("pick"),
        ("1",),
        "diagram",
        checked=lambda w: w.diagram.tool == "pick",
    ),
    Action(
        "tool_read",
        "Find",
        "Tool: read by eye",
        _tool("read"),
        ("2",),
        "diagram",
        checked=lambda w: w.diagram.tool == "read",
    ),
    Action(
        "tool_probe",
        "Find",
        "Tool: probe",
        _tool("probe"),
        ("3",),
        "diagram",
        checked=lambda w: w.diagram.tool == "probe",
    ),
    Action(
        "use_tool",
        "Find",
        "Use the tool at the cursor",
        lambda w: w.diagram.gestures.use_cursor(),
        ("Return", "Enter"),
        "diagram",
        starts_group=True,
    ),
    Action(
        "read_here",
        "Find",
        "Read by eye at the cursor",
        lambda w: w.diagram.gestures.use_cursor("read"),
        ("Shift+Return", "Shift+Enter"),
        "diagram",
    ),
    Action(
        "probe_here",
        "Find",
        "Probe at the cursor",
        lambda w: w.diagram.gestures.use_cursor("probe"),
        ("Ctrl+Return", "Ctrl+Enter"),
        "diagram",
    ),
    Action(
        "refine",
        "Find",
        "Refine the selected row",
        lambda w: w.rows.refine_selected(),
        ("Ctrl+R",),
        enabled=_has_selection,
        starts_group=True,
    ),
    Action(
        "more_digits",
        "Find",
        "More digits of the selected row",
        lambda w: w.rows.more_digits_of_selected(),
        ("Ctrl+Alt+R",),
        enabled=_can_have_digits,
        tip="Integrate the equations in higher precision, and prove the onset where that closes",
    ),
    Action(
        "ladder",
        "Find",
        "Follow the ladder…",
        lambda w: w.rows.ask_ladder(),
        ("Ctrl+L",),
        tip="Find the successive onsets of a cascade, from the selected row or in this view",
    ),
    Action(
        "survey",
        "Find",
        "Pick every onset in this view…",
        lambda w: w.survey_form.open(),
        ("Ctrl+E",),
        tip="All onsets of the view's range, of cycles up to a period that you choose",
    ),
    Action(
        "check_proofs",
        "Find",
        "Check the proofs again",
        lambda w: w.proofs.check_all(),
        ("Ctrl+Shift+K",),
        enabled=_has_rows,
        tip="Every proved row of the ledger, by a second implementation that shares no code with the first",
    ),
    Action(
        "cancel",
        "Find",
        "Cancel",
        lambda w: w.cancel(),
        ("Ctrl+.",),
        tip="Stop the work under way",
        starts_group=True,
    ),
    Action("drop", "Find", "Drop the gesture", lambda w: w.drop_gesture(), ("Esc",), "diagram"),
    Action("guide", "Help", "Guide", lambda w: w.show_guide(), ("F1",)),
    Action("about", "Help", "About Tinemark", lambda w: w.show_about(), ("Ctrl+F1",)),
)


def key_page() -> list[tuple[str, str, str]]:
    """(menu, words, keys) of every action that has keys, for the guide."""
    return [
        (
            action.menu,
            action.words.rstrip("…"),
            " or ".join(
                QKeySequence(key).toString(QKeySequence.SequenceFormat.NativeText) for key in action.keys
            ),
        )
        for action in ACTIONS
        if action.keys
    ]
