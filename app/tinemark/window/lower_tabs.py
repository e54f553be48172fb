"""Two panels in one place, below the ledger: one is seen, a button for each brings it up."""

from __future__ import annotations

from collections.abc import Sequence

from PySide6.QtCore import Qt, Signal
from PySide6.QtWidgets import QButtonGroup, QHBoxLayout, QStackedWidget, QToolButton, QVBoxLayout, QWidget


class LowerTabs(QWidget):
    """The panels, each with its name, words and key.

    Signals
    -------
    shown : str
        Name of the panel that has come up.
    """

    shown = Signal(str)

    def __init__(self, panels: Sequence[tuple[str, str, str, QWidget]]) -> None:
        super().__init__()
        self._names = [name for name, _, _, _ in panels]
        self._stack = QStackedWidget()
        self._group = QButtonGroup(self)
        self.buttons: dict[str, QToolButton] = {}
        row = QHBoxLayout()
        row.setContentsMargins(6, 4, 6, 0)
        row.setSpacing(2)
        for place, (name, words, key, panel) in enumerate(panels):
            button = QToolButton()
            button.setText(words)
            button.setToolTip(f"{panel.windowTitle()} ({key})")
            button.setAccessibleName(panel.windowTitle())
            button.setCheckable(True)
            button.setFocusPolicy(Qt.FocusPolicy.TabFocus)
            self._group.addButton(button, place)
            row.addWidget(button)
            self.buttons[name] = button
            self._stack.addWidget(panel)
        row.addStretch(1)
        outer = QVBoxLayout(self)
        outer.setContentsMargins(0, 0, 0, 0)
        outer.setSpacing(0)
        outer.addLayout(row)
        outer.addWidget(self._stack, 1)
        self._group.idClicked.connect(lambda place: self.show_panel(self._names[place]))
        self.buttons[self._names[0]].setChecked(True)

    @property
    def current(self) -> str:
        """Name of the panel that is up."""
        return self._names[self._stack.currentIndex()]

    def show_panel(self, name: str) -> None:
        """Bring a panel up."""
        self.buttons[name].setChecked(True)
        self._stack.setCurrentIndex(self._names.index(name))
        self.shown.emit(name)
