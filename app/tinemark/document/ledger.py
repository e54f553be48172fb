"""The ledger: every pick, grouped in ladders. Each change gives a new ledger."""

from __future__ import annotations

from dataclasses import dataclass

from tinemark.document.estimates import LadderEstimates
from tinemark.document.row import Place, Row, place_of

__all__ = ["LadderEstimates", "Ledger", "Place", "Row", "place_of"]


@dataclass(frozen=True)
class Ledger:
    """Rows in the user's order, and the number the next row will carry."""

    rows: tuple[Row, ...] = ()
    next_number: int = 1

    def row(self, row_id: str) -> Row | None:
        """The row of that name, None when it is gone."""
        return next((row for row in self.rows if row.id == row_id), None)
