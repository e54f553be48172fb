"""The ledger's lines as a table model: texts, tips and names of every cell; notes can be edited."""

from __future__ import annotations

from collections.abc import Sequence

from PySide6.QtCore import QAbstractTableModel, QModelIndex, QObject, QPersistentModelIndex, Qt, Signal

from tinemark.window.ledger_lines import (
    HEADER_TIPS,
    HEADERS,
    Column,
    Entry,
    HeadingEntry,
    MissingEntry,
    OnsetEntry,
    cell_text,
    cell_tip,
    missing_words,
)

Index = QModelIndex | QPersistentModelIndex
ROW_ID = Qt.ItemDataRole.UserRole + 1
ENTRY = Qt.ItemDataRole.UserRole + 2


class LedgerModel(QAbstractTableModel):
    """Table model over a frozen ledger. Only notes can be edited; an edit is asked for by `note_edited`."""

    note_edited = Signal(str, str)

    def __init__(self, parent: QObject | None = None) -> None:
        super().__init__(parent)
        self._entries: tuple[Entry, ...] = ()

    def show_entries(self, entries: Sequence[Entry]) -> None:
        """Show other lines. Where only single lines differ, only those are told of."""
        new = tuple(entries)
        old = self._entries
        if [_identity(e) for e in new] == [_identity(e) for e in old]:
            self._entries = new
            for number, (before, after) in enumerate(zip(old, new, strict=True)):
                if before != after:
                    self.dataChanged.emit(self.index(number, 0), self.index(number, len(Column) - 1))
            return
        self.beginResetModel()
        self._entries = new
        self.endResetModel()

    def entry(self, index: Index | int) -> Entry | None:
        """The line of an index."""
        number = index if isinstance(index, int) else index.row()
        return self._entries[number] if 0 <= number < len(self._entries) else None

    def row_number(self, row_id: str) -> int:
        """The table's line of a ledger row, -1 when it is not there."""
        lines = (n for n, e in enumerate(self._entries) if isinstance(e, OnsetEntry) and e.row.id == row_id)
        return next(lines, -1)

    @property
    def entries(self) -> tuple[Entry, ...]:
        """All lines."""
        return self._entries

    # -- what Qt asks ----------------------------------------------------------------------

    def rowCount(self, parent: Index = QModelIndex()) -> int:  # noqa: B008
        """Lines."""
        return 0 if parent.isValid() else len(self._entries)

    def columnCount(self, parent: Index = QModelIndex()) -> int:  # noqa: B008
        """Columns."""
        return 0 if parent.isValid() else len(Column)

    def flags(self, index: Index) -> Qt.ItemFlag:
        """Onsets can be selected, their notes edited; headings and holes are passed over by the keys."""
        entry = self.entry(index)
        if not isinstance(entry, OnsetEntry):
            return Qt.ItemFlag.NoItemFlags
        flags = Qt.ItemFlag.ItemIsEnabled | Qt.ItemFlag.ItemIsSelectable | Qt.ItemFlag.ItemNeverHasChildren
        return flags | Qt.ItemFlag.ItemIsEditable if index.column() == Column.NOTE else flags

    def headerData(
        self, section: int, orientation: Qt.Orientation, role: int = Qt.ItemDataRole.DisplayRole
    ) -> object:
        """Names of the columns and what they mean."""
        if orientation is not Qt.Orientation.Horizontal:
            return None
        column = Column(section)
        if role == Qt.ItemDataRole.DisplayRole:
            return HEADERS[column]
        if role in (Qt.ItemDataRole.ToolTipRole, Qt.ItemDataRole.AccessibleDescriptionRole):
            return HEADER_TIPS[column]
        if role == Qt.ItemDataRole.TextAlignmentRole:
            return int(Qt.AlignmentFlag.AlignLeft | Qt.AlignmentFlag.AlignVCenter)
        return None

    def data(self, index: Index, role: int = Qt.ItemDataRole.DisplayRole) -> object:
        """Texts, tips and names of a cell."""
        entry = self.entry(index)
        if entry is None:
            return None
        if role == ENTRY:
            return entry
        if isinstance(entry, OnsetEntry):
            return self._onset_data(entry, Column(index.column()), role)
        if role in (Qt.ItemDataRole.DisplayRole, Qt.ItemDataRole.AccessibleTextRole) and index.column() == 0:
            return entry.text if isinstance(entry, HeadingEntry) else missing_words(entry)
        return None

    def _onset_data(self, entry: OnsetEntry, column: Column, role: int) -> object:
        if role == ROW_ID:
            return entry.row.id
        if role == Qt.ItemDataRole.DisplayRole:
            return cell_text(entry, column)
        if role == Qt.ItemDataRole.EditRole and column is Column.NOTE:
            return entry.row.note
        if role in (Qt.ItemDataRole.ToolTipRole, Qt.ItemDataRole.AccessibleDescriptionRole):
            return cell_tip(entry, column)
        if role == Qt.ItemDataRole.AccessibleTextRole:
            return f"{HEADERS[column]} {cell_text(entry, column)}"
        return None

    def setData(self, index: Index, value: object, role: int = Qt.ItemDataRole.EditRole) -> bool:
        """Ask for a note to be changed; the new ledger brings it."""
        entry = self.entry(index)
        if (
            role != Qt.ItemDataRole.EditRole
            or not isinstance(entry, OnsetEntry)
            or index.column() != Column.NOTE
        ):
            return False
        text = " ".join(str(value).split())
        if text != entry.row.note:
            self.note_edited.emit(entry.row.id, text)
        return True


def _identity(entry: Entry) -> tuple[str, ...]:
    match entry:
        case HeadingEntry():
            return ("heading", entry.ladder)
        case OnsetEntry():
            return ("onset", entry.row.id)
        case MissingEntry():
            return ("missing", entry.ladder, str(entry.first))
