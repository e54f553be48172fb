"""From the ledger to its estimates: worked out off the window's thread, kept while a ladder stays the
same.
"""

from __future__ import annotations

from fractions import Fraction

from PySide6.QtCore import QObject

from tinemark.document.estimates import LadderEstimates, with_alpha
from tinemark.document.ledger import Ledger, estimates, ladder_ids, ladder_rows
from tinemark.document.row import Row
from tinemark.onsets.results import Kind, LadderResult
from tinemark.window.bridge import Bridge
from tinemark.window.ledger_panel import LedgerPanel
from tinemark.window.ratio_panel import RatioPanel

MOST_FOLLOWED = 32
"""Ladders whose alpha is remembered."""

Known = dict[tuple[Row, ...], LadderEstimates]


class RatioJobs(QObject):
    """Feeds the ledger's table and the ratio panel."""

    def __init__(
        self, bridge: Bridge, table: LedgerPanel, ratios: RatioPanel, parent: QObject | None = None
    ) -> None:
        super().__init__(parent)
        self._bridge, self._table, self._ratios = bridge, table, ratios
        self._ledger = Ledger()
        self._system_key = ""
        self._selected = ""
        self._known: Known = {}
        self._followed: list[LadderResult] = []

    def show(self, ledger: Ledger, system_key: str, selected: str) -> None:
        """Show a ledger at once, and its estimates as soon as they are there."""
        self._ledger, self._system_key, self._selected = ledger, system_key, selected
        self._show()
        ladders = {ladder_rows(ledger, name): name for name in ladder_ids(ledger)}
        missing = {rows: name for rows, name in ladders.items() if rows not in self._known}
        self._known = {rows: found for rows, found in self._known.items() if rows in ladders}
        if missing:
            self._bridge.call("ratios", lambda: _estimated(ledger, missing), self._take, self._fail)

    def keep_alpha(self, result: LadderResult) -> None:
        """Remember what a ladder that was followed says of its cycles, to be shown while its rows stay."""
        self._followed = [result, *self._followed[: MOST_FOLLOWED - 1]]

    @property
    def is_up_to_date(self) -> bool:
        """Whether the estimates of every ladder are there."""
        return all(ladder_rows(self._ledger, name) in self._known for name in ladder_ids(self._ledger))

    def select(self, row: str) -> None:
        """Show the ratios of the ladder that a row belongs to."""
        self._selected = row
        self._show_ratios()

    def _take(self, found: object) -> None:
        assert isinstance(found, dict)
        self._known.update(found)
        self._show()

    def _fail(self, error: BaseException) -> None:
        self._table.show_message(f"The ratios could not be worked out: {error}", "error")

    def _show(self) -> None:
        names = ladder_ids(self._ledger)
        rows = [ladder_rows(self._ledger, name) for name in names]
        found = [self._known[ladder] for ladder in rows if ladder in self._known]
        self._table.show_ledger(self._ledger, found, system_key=self._system_key)
        self._show_ratios()

    def _show_ratios(self) -> None:
        chosen = self._ledger.row(self._selected)
        ladder = chosen.ladder if chosen is not None and chosen.ladder else self._longest()
        rows = ladder_rows(self._ledger, ladder) if ladder else ()
        found = self._known.get(rows)
        followed = next((result for result in self._followed if _is_of(result, rows)), None)
        if found is not None and followed is not None:
            found = with_alpha(found, followed.alpha, followed.alpha_reason)
        self._ratios.show_estimates(found)

    def _longest(self) -> str:
        """The ladder with most rows stands for the ledger while none is selected."""
        return max(
            ladder_ids(self._ledger), key=lambda name: len(ladder_rows(self._ledger, name)), default=""
        )


def _is_of(result: LadderResult, rows: tuple[Row, ...]) -> bool:
    """Whether rows are the levels of a followed ladder, each with an interval that meets the level's own."""
    flips = {row.level: row.onset for row in rows if row.onset.kind is Kind.FLIP}
    return set(flips) == {item.level for item in result.levels} and all(
        Fraction(item.onset.lower) <= Fraction(flips[item.level].upper)
        and Fraction(flips[item.level].lower) <= Fraction(item.onset.upper)
        for item in result.levels
    )


def _estimated(ledger: Ledger, ladders: dict[tuple[Row, ...], str]) -> Known:
    """Estimates of the named ladders. The errands' thread."""
    found = ((rows, estimates(ledger, name)) for rows, name in ladders.items())
    return {rows: value for rows, value in found if value is not None}
