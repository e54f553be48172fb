"""Keeps the panel of tolerances and margin in line with the session, while it is seen."""

from __future__ import annotations

from typing import TYPE_CHECKING

from PySide6.QtCore import QObject

from tinemark.document.margin import margin_to, nearest_margin, operating_point, rows_here
from tinemark.document.session import system_of, system_of_row
from tinemark.document.tolerance import budget_of

if TYPE_CHECKING:
    from tinemark.window.main_window import MainWindow


class ToleranceWork(QObject):
    """Shows the selected row of one window's session."""

    def __init__(self, window: MainWindow) -> None:
        super().__init__(window)
        self._window, self._keeper = window, window.keeper
        self._panel = window.tolerance_panel
        self._panel.system_wanted.connect(lambda: window.panels.set_open("system", True))
        window.lower.shown.connect(self._came_up)
        self._shown: tuple[object, ...] = ()

    def _came_up(self, _name: str) -> None:
        self.show()
        self._window.refresh_actions()

    def bring_up(self, name: str) -> None:
        """Show the ratios or the tolerances, with the ledger that they stand under."""
        self._window.panels.set_open("ledger", True)
        self._window.lower.show_panel(name)

    def show(self) -> None:
        """Show the session's margin and the selected row's budget; nothing is worked out while hidden."""
        if self._window.lower.current != "tolerances":
            return
        session, row = self._keeper.session, self._window.rows.selected_row
        # A session changes with every step of a pan, its margins do not.
        now = (session.ledger, session.system_text, session.parameter, session.probe, row)
        if now == self._shown:
            return
        self._shown = now
        system = None if row is None else system_of_row(session, row.id)
        budget = None if row is None or system is None else budget_of(row.onset, system)
        margin = None
        if row is not None and row in rows_here(session):
            margin = margin_to(row.onset, system_of(session), operating_point(session), row.id)
        rows = bool(session.ledger.rows)
        self._panel.show_tolerances(nearest_margin(session), row, budget, margin, has_rows=rows)
