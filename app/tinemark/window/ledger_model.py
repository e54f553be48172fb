"""The ledger as a table: ladders under headings, a line for each onset, a quiet line for each hole."""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from enum import IntEnum
from fractions import Fraction

from PySide6.QtCore import QAbstractTableModel, QModelIndex, QObject, QPersistentModelIndex, Qt, Signal

from tinemark.document.estimates import Estimate, LadderEstimates, LevelEstimate, estimate_text
from tinemark.document.ledger import Ledger, ladder_ids, ladder_rows, loose_rows, missing_levels
from tinemark.document.rounding import (
    ELLIPSIS,
    SHORT_DIGITS,
    group_digits,
    held_digits,
    minus_sign,
    onset_text,
    plus_minus,
)
from tinemark.document.row import Row
from tinemark.onsets.results import Criticality, Onset, Status

Index = QModelIndex | QPersistentModelIndex
ROW_ID = Qt.ItemDataRole.UserRole + 1
ENTRY = Qt.ItemDataRole.UserRole + 2
NOTHING = "\u2013"
MOST_DIGITS = 15

STATUS_MEANING = {
    Status.PROVED: "The enclosure holds with mathematical certainty for the formulas as typed.",
    Status.ESTIMATED: "Computed and polished; the interval is meant to hold the true value at 95 % coverage.",
    Status.READ_BY_EYE: "Set with the crosshair; uncertain by half a pixel of the view it was read in.",
    Status.MEASURED: "From bench data, with their uncertainty.",
}


class Column(IntEnum):
    """Columns in the order shown."""

    LEVEL = 0
    KIND = 1
    PERIOD = 2
    VALUE = 3
    GAP = 4
    RATIO = 5
    STATUS = 6
    NOTE = 7


HEADERS = {
    Column.LEVEL: "Level",
    Column.KIND: "Kind",
    Column.PERIOD: "Period",
    Column.VALUE: "Value",
    Column.GAP: "Gap",
    Column.RATIO: "Ratio",
    Column.STATUS: "Status",
    Column.NOTE: "Note",
}
HEADER_TIPS = {
    Column.LEVEL: "n for the n-th flip of the ladder, 0 for the fold that opens it",
    Column.KIND: "What happens at the onset",
    Column.PERIOD: "Least period before and after the onset",
    Column.VALUE: "Parameter value; brackets hold the standard uncertainty of the last digits, "
    "… stands for more known digits",
    Column.GAP: "Next onset minus this one",
    Column.RATIO: "This gap divided by the next one",
    Column.STATUS: "How far the value can be relied on",
    Column.NOTE: "Your own words: press F2 to write",
}
MAIN_COLUMNS = (Column.LEVEL, Column.PERIOD, Column.VALUE, Column.STATUS)
NUMBER_COLUMNS = (Column.VALUE, Column.GAP, Column.RATIO)


@dataclass(frozen=True)
class HeadingEntry:
    """The heading of a ladder; `ladder` is empty for onsets that belong to none."""

    ladder: str
    text: str


@dataclass(frozen=True)
class OnsetEntry:
    """One pick, and what its ladder says about its level."""

    row: Row
    level: LevelEstimate | None


@dataclass(frozen=True)
class MissingEntry:
    """Levels in a row that a ladder lacks below its highest known one."""

    ladder: str
    first: int
    last: int


Entry = HeadingEntry | OnsetEntry | MissingEntry


def entries_of(
    ledger: Ledger, estimates: Sequence[LadderEstimates], current_key: str = ""
) -> tuple[Entry, ...]:
    """Lines of the table: ladders as they were begun, levels rising, single onsets last.

    `current_key` is the key of the system on the card; ladders of other systems say so.
    """
    by_ladder = {estimate.ladder: estimate for estimate in estimates}
    lines: list[Entry] = []
    for ladder in ladder_ids(ledger):
        rows = ladder_rows(ledger, ladder)
        lines.append(HeadingEntry(ladder, _heading(rows, ledger, current_key)))
        lines += _ladder_lines(rows, missing_levels(ledger, ladder), by_ladder.get(ladder))
    loose = loose_rows(ledger)
    if loose:
        lines.append(HeadingEntry("", "Onsets outside a ladder"))
        lines += [OnsetEntry(row, None) for row in loose]
    return tuple(lines)


def _ladder_lines(
    rows: Sequence[Row], missing: Sequence[int], estimate: LadderEstimates | None
) -> Iterator[Entry]:
    known: Mapping[str, LevelEstimate] = (
        {level.row_id: level for level in estimate.levels if level.row_id} if estimate else {}
    )
    holes = set(missing)
    for row in rows:
        level = row.level or 0
        first = level
        while first - 1 in holes:
            first -= 1
        if first < level:
            yield MissingEntry(row.ladder, first, level - 1)
            holes -= set(range(first, level))
        yield OnsetEntry(row, known.get(row.id))


def _heading(rows: Sequence[Row], ledger: Ledger, current_key: str) -> str:
    first = rows[0]
    base = first.base_period or first.onset.period_before
    text = f"Ladder from period {base}, parameter {first.onset.parameter}"
    # Other parameters are named where they tell this ladder from another.
    others = {row.fixed for row in ledger.rows if row.system_key == first.system_key}
    if len(others) > 1 and first.fixed:
        text += " at " + ", ".join(f"{name} = {value}" for name, value in first.fixed)
    if current_key and first.system_key != current_key:
        text += " (of another system than the one on the card)"
    return text


def kind_words(onset: Onset) -> str:
    """Kind in words, with its criticality where that is known."""
    if onset.criticality in (Criticality.SUPERCRITICAL, Criticality.SUBCRITICAL):
        return f"{onset.criticality.value} {onset.kind.value}"
    return onset.kind.value


def period_words(onset: Onset) -> str:
    """Periods before and after: "4 → 8"; a fold makes a cycle out of none: "none → 3"."""
    if not onset.period_before and not onset.period_after:
        return NOTHING
    return f"{onset.period_before or 'none'} \u2192 {onset.period_after}"


def value_text(onset: Onset) -> str:
    """The value as the table shows it; digits beyond `MOST_DIGITS` are left to the detail."""
    text = onset_text(onset)
    if sum(letter.isdigit() for letter in text.partition("(")[0]) <= MOST_DIGITS:
        return text
    held = held_digits(Fraction(onset.lower), Fraction(onset.upper), most=SHORT_DIGITS)
    return minus_sign(group_digits(held)) + ELLIPSIS if held else text


def derived_text(estimate: Estimate | None) -> str:
    """A gap or ratio as the table shows it."""
    if estimate is None:
        return NOTHING
    text = estimate_text(estimate)
    if sum(letter.isdigit() for letter in text.partition("(")[0]) <= MOST_DIGITS:
        return text
    low, high = estimate.value - estimate.uncertainty, estimate.value + estimate.uncertainty
    held = held_digits(low, high, most=SHORT_DIGITS)
    return minus_sign(group_digits(held)) + ELLIPSIS if held else text


def full_text(estimate: Estimate | None) -> str:
    """A derived number with every digit worth having, for copying: "value ± uncertainty"."""
    return plus_minus(estimate.value, estimate.uncertainty, grouped=False) if estimate else ""


def level_words(row: Row) -> str:
    """Level as shown; empty outside a ladder."""
    return "" if row.level is None else str(row.level)


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


def cell_text(entry: OnsetEntry, column: Column) -> str:
    """What a cell shows."""
    onset, level = entry.row.onset, entry.level
    match column:
        case Column.LEVEL:
            return level_words(entry.row)
        case Column.KIND:
            return kind_words(onset)
        case Column.PERIOD:
            return period_words(onset)
        case Column.VALUE:
            return value_text(onset)
        case Column.GAP:
            return derived_text(level.gap if level else None)
        case Column.RATIO:
            return derived_text(level.ratio if level else None)
        case Column.STATUS:
            return onset.status.value
        case Column.NOTE:
            return entry.row.note


def cell_tip(entry: OnsetEntry, column: Column) -> str:
    """All digits of a number, or the reason why there is none."""
    onset, level = entry.row.onset, entry.level
    match column:
        case Column.VALUE:
            return f"{onset.parameter} = {onset.value}\nlower end {onset.lower}\nupper end {onset.upper}"
        case Column.GAP if level:
            return full_text(level.gap) or _sentence(level.gap_reason)
        case Column.RATIO if level:
            return full_text(level.ratio) or _sentence(level.ratio_reason)
        case Column.STATUS:
            meaning = STATUS_MEANING[onset.status]
            return f"{meaning}\n{_sentence(onset.reason)}" if onset.reason else meaning
        case Column.NOTE:
            return entry.row.note or "Press F2 to write a note."
        case _:
            return ""


def missing_words(entry: MissingEntry) -> str:
    """The quiet line of a hole in a ladder."""
    if entry.first == entry.last:
        return f"level {entry.first} missing: no gap and no ratio across it"
    return f"levels {entry.first} to {entry.last} missing: no gap and no ratio across them"


def _sentence(words: str) -> str:
    return words[:1].upper() + words[1:] if words else ""


def _identity(entry: Entry) -> tuple[str, ...]:
    match entry:
        case HeadingEntry():
            return ("heading", entry.ladder)
        case OnsetEntry():
            return ("onset", entry.row.id)
        case MissingEntry():
            return ("missing", entry.ladder, str(entry.first))
