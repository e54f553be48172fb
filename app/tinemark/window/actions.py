"""What an action is, and how it becomes one of Qt's."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import TYPE_CHECKING

from PySide6.QtCore import Qt
from PySide6.QtGui import QAction, QKeySequence

if TYPE_CHECKING:
    from tinemark.window.main_window import MainWindow


@dataclass(frozen=True)
class Action:
    """One thing to do.

    Attributes
    ----------
    name
        Its name in the code.
    menu, words
        Where it stands and what it is called there. A menu "View/Theme" is a submenu.
    run
        What it does to the window.
    keys
        Key sequences in Qt's portable text; the first one is shown.
    where
        "window", or "diagram" where the keys count only while the diagram has the focus.
    tip
        One sentence for the status line.
    checked
        For entries that are on or off: whether it is on now.
    enabled
        Whether it can be done now; None where it always can.
    starts_group
        A line stands above it.
    """

    name: str
    menu: str
    words: str
    run: Callable[[MainWindow], object]
    keys: tuple[str, ...] = ()
    where: str = "window"
    tip: str = ""
    checked: Callable[[MainWindow], bool] | None = None
    enabled: Callable[[MainWindow], bool] | None = None
    starts_group: bool = False


def qt_action(action: Action, window: MainWindow) -> QAction:
    """Qt's action for one of ours, owned by the window."""
    made = QAction(action.words, window)
    made.setObjectName(action.name)
    made.setShortcuts([QKeySequence(key, QKeySequence.SequenceFormat.PortableText) for key in action.keys])
    context = (
        Qt.ShortcutContext.WindowShortcut if action.where == "window" else Qt.ShortcutContext.WidgetShortcut
    )
    made.setShortcutContext(context)
    if action.tip:
        made.setStatusTip(action.tip)
    made.setCheckable(action.checked is not None)
    made.triggered.connect(lambda _=False: action.run(window))
    return made
