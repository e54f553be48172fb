"""The ledger: all picks in a table, one of them in detail, and what can be done with them."""

from __future__ import annotations

from collections.abc import Callable, Sequence

from PySide6.QtCore import QEvent, QItemSelection, QItemSelectionModel, QMargins, QPoint, Qt, Signal
from PySide6.QtGui import QAction, QContextMenuEvent, QFontMetricsF
from PySide6.QtWidgets import (
    QAbstractItemView,
    QHeaderView,
    QLabel,
    QMenu,
    QSplitter,
    QStackedLayout,
    QToolButton,
    QVBoxLayout,
    QWidget,
)

from tinemark.document.estimates import LadderEstimates
from tinemark.document.ledger import Ledger, estimates, ladder_ids
from tinemark.document.row import Row
from tinemark.onsets.results import Status
from tinemark.window.faces import FaceKeeper
from tinemark.window.field_editors import MenuButton
from tinemark.window.ledger_detail import LedgerDetail
from tinemark.window.ledger_lines import HEADERS, MAIN_COLUMNS, Column, OnsetEntry, entries_of
from tinemark.window.ledger_model import ROW_ID, LedgerModel
from tinemark.window.ledger_paint import LedgerDelegate
from tinemark.window.ledger_table import LedgerTable
from tinemark.window.theme import mono_font, small_font
from tinemark.window.wrapping_row import WrappingRow

COPY_FORMS = (("tsv", "Tab-separated text"), ("markdown", "Markdown"), ("latex", "LaTeX"))
DROPPED_FIRST = (Column.NOTE, Column.KIND, Column.GAP, Column.RATIO)
LEAST_NOTE = 90
LINE_HEIGHT = 1.65
REFINABLE = (Status.READ_BY_EYE, Status.ESTIMATED)
EMPTY = "No onsets yet.\nClick near a split in the diagram, and its onset is found and listed here."


class LedgerPanel(QWidget):
    """Shows a ledger.

    Signals
    -------
    row_selected : str
        Id of the row the user went to; empty when none is left selected.
    refine_requested, digits_requested, remove_requested : list
        Ids of rows.
    note_edited : str, str
        Row and new note.
    copy_requested : str
        "tsv", "markdown" or "latex".
    extend_ladder_requested : str
        Id of the ladder to follow further.
    """

    row_selected = Signal(str)
    refine_requested = Signal(list)
    digits_requested = Signal(list)
    remove_requested = Signal(list)
    note_edited = Signal(str, str)
    copy_requested = Signal(str)
    extend_ladder_requested = Signal(str)

    def __init__(self, parent: QWidget | None = None) -> None:
        super().__init__(parent)
        self.setWindowTitle("Ledger")
        self.setAccessibleName("Ledger")
        self.can_have_digits: Callable[[Row], bool] = lambda _: False
        self._quiet = False
        self._forced_narrow = False
        self._widths: dict[Column, float] = {}
        self.model = LedgerModel(self)
        self._build_table()
        self.detail = LedgerDetail()
        self._build_bar()
        self.message = QLabel()
        self.message.setWordWrap(True)
        self.message.setTextInteractionFlags(Qt.TextInteractionFlag.TextSelectableByMouse)
        self.message.hide()
        self._empty = QLabel(EMPTY)
        self._empty.setAlignment(Qt.AlignmentFlag.AlignCenter)
        self._empty.setWordWrap(True)
        self._empty.setMargin(16)
        self._empty.setProperty("rank", "second")
        self._parts = QSplitter(Qt.Orientation.Vertical)
        self._parts.addWidget(self.table)
        self._parts.addWidget(self.detail)
        self._parts.setStretchFactor(0, 3)
        self._parts.setStretchFactor(1, 2)
        self._parts.setCollapsible(0, False)
        self._parts.setSizes([300, 210])
        self._stack = QStackedLayout()
        self._stack.addWidget(self._empty)
        self._stack.addWidget(self._parts)
        outer = QVBoxLayout(self)
        outer.setContentsMargins(0, 0, 0, 0)
        outer.setSpacing(2)
        outer.addLayout(self._bar)
        outer.addWidget(self.message)
        outer.addLayout(self._stack, 1)
        self.model.note_edited.connect(self.note_edited)
        self.detail.note_edited.connect(self.note_edited)
        self._faces = FaceKeeper(self, self._measure)
        self.show_ledger(Ledger())

    def _build_table(self) -> None:
        self.table = LedgerTable()
        self.table.setAccessibleName("Onsets in the ledger")
        self.table.setModel(self.model)
        self._delegate = LedgerDelegate(self.table)
        self.table.setItemDelegate(self._delegate)
        self.table.setSelectionBehavior(QAbstractItemView.SelectionBehavior.SelectRows)
        self.table.setSelectionMode(QAbstractItemView.SelectionMode.ExtendedSelection)
        self.table.setEditTriggers(QAbstractItemView.EditTrigger.DoubleClicked)
        self.table.setHorizontalScrollMode(QAbstractItemView.ScrollMode.ScrollPerPixel)
        self.table.setTabKeyNavigation(False)
        self.table.setShowGrid(False)
        self.table.setWordWrap(False)
        self.table.setMouseTracking(True)
        self.table.setCornerButtonEnabled(False)
        self.table.verticalHeader().hide()
        self.table.verticalHeader().setSectionResizeMode(QHeaderView.ResizeMode.Fixed)
        header = self.table.horizontalHeader()
        header.setSectionsClickable(False)
        header.setHighlightSections(False)
        header.setMinimumSectionSize(24)
        self.table.setContextMenuPolicy(Qt.ContextMenuPolicy.CustomContextMenu)
        self.table.customContextMenuRequested.connect(self._open_menu)
        self.table.wished.connect(self._grant)
        self.table.resized.connect(self._fit_columns)
        self.table.selectionModel().selectionChanged.connect(self._selection_changed)

    def _build_bar(self) -> None:
        self._bar = WrappingRow(QMargins(6, 4, 6, 2), 2)
        menu = QMenu()
        self._add_copies(menu)
        self.copy_button = MenuButton("Copy as", menu)
        self.copy_button.setToolTip("Copy the ledger for a spreadsheet, a note or a paper")
        self.extend_button = self._tool(
            "Follow further", "Find the next levels of the selected ladder", self._extend
        )
        self.refine_button = self._tool(
            "Refine", "Work out the selected rows that were read by eye or estimated", self._refine
        )
        self.digits_button = self._tool(
            "More digits", "Integrate the equations of the selected rows to 20 digits or more", self._sharpen
        )
        self.remove_button = self._tool(
            "Remove", "Take the selected rows out of the ledger (Delete)", self._remove
        )
        self.detail_button = self._tool("Detail", "Show all digits of the selected row", self._toggle_detail)
        self.detail_button.setCheckable(True)
        self.detail_button.setChecked(True)
        for button in (
            self.extend_button,
            self.refine_button,
            self.digits_button,
            self.copy_button,
            self.remove_button,
            self.detail_button,
        ):
            self._bar.addWidget(button)

    def _tool(self, words: str, tip: str, do: Callable[[], None]) -> QToolButton:
        button = QToolButton()
        button.setText(words)
        button.setToolTip(tip)
        button.clicked.connect(do)
        return button

    # -- what others ask -------------------------------------------------------------------

    def show_ledger(
        self, ledger: Ledger, found: Sequence[LadderEstimates] | None = None, *, system_key: str = ""
    ) -> None:
        """Show a ledger. The selection stays on its rows where they are still there; nothing is emitted.

        Parameters
        ----------
        found
            Estimates of its ladders where they are at hand; they are worked out otherwise.
        system_key
            Key of the system on the card: ladders of another one say so.
        """
        if found is None:
            asked = (estimates(ledger, ladder) for ladder in ladder_ids(ledger))
            found = [estimate for estimate in asked if estimate is not None]
        kept = self.selected_ids()
        current = self.current_id()
        self._quiet = True
        try:
            self.model.show_entries(entries_of(ledger, found, system_key))
            self._span()
            self._measure()
            self._restore(kept, current)
        finally:
            self._quiet = False
        self._stack.setCurrentWidget(self._parts if ledger.rows else self._empty)
        self._refresh()

    def set_selected(self, row_id: str) -> None:
        """Select one row, or none for an empty or unknown id, without emitting `row_selected`."""
        self._quiet = True
        try:
            self._restore([row_id], row_id)
        finally:
            self._quiet = False
        self._refresh()

    def selected_ids(self) -> list[str]:
        """Ids of the selected rows, from top to bottom."""
        chosen = self.table.selectionModel().selectedRows(Column.LEVEL)
        return [
            str(index.data(ROW_ID)) for index in sorted(chosen, key=lambda i: i.row()) if index.data(ROW_ID)
        ]

    def current_id(self) -> str:
        """Id of the row that the keys are on, empty when there is none."""
        return str(self.table.currentIndex().data(ROW_ID) or "")

    def set_narrow(self, narrow: bool) -> None:
        """Keep to the four main columns; otherwise as many are shown as there is room for."""
        self._forced_narrow = narrow
        self._fit_columns()

    def show_message(self, words: str, rank: str = "second") -> None:
        """A sentence above the table; `rank` is "second", or "warning" or "error" for something wrong."""
        self.message.setText(words)
        self.message.setProperty("rank", rank)
        self.message.style().unpolish(self.message)
        self.message.style().polish(self.message)
        self.message.setVisible(bool(words))

    # -- inside ----------------------------------------------------------------------------

    def _span(self) -> None:
        self.table.clearSpans()
        for number, entry in enumerate(self.model.entries):
            if not isinstance(entry, OnsetEntry):
                self.table.setSpan(number, 0, 1, len(Column))

    def _measure(self) -> None:
        """Widths that show every cell whole, and the height of a line: anew with every ledger and font."""
        header = QFontMetricsF(small_font(1.0))
        titles = {column: header.horizontalAdvance(words) for column, words in HEADERS.items()}
        self._widths = self._delegate.measure(self.model.entries, titles)
        self._widths[Column.NOTE] = max(LEAST_NOTE, min(self._widths[Column.NOTE], 260))
        line = QFontMetricsF(mono_font()).height() * LINE_HEIGHT
        self.table.verticalHeader().setDefaultSectionSize(round(line))
        self._fit_columns()

    def _fit_columns(self) -> None:
        """As many columns as there is room for; the last one takes what is left."""
        widths = self._widths
        if not widths:
            return
        shown = list(MAIN_COLUMNS if self._forced_narrow else Column)
        room = self.table.viewport().width()
        for column in DROPPED_FIRST:
            if sum(widths[c] for c in shown) > room and column in shown:
                shown.remove(column)
        spare = max(0.0, room - sum(widths[c] for c in shown))
        last = shown[-1]
        for column in Column:
            self.table.setColumnHidden(column, column not in shown)
            if column in shown:
                width = widths[column] + (spare if column is last else 0.0)
                self.table.setColumnWidth(column, int(width))

    def _restore(self, ids: Sequence[str], current: str) -> None:
        model, chosen = self.table.selectionModel(), QItemSelection()
        for row_id in ids:
            number = self.model.row_number(row_id)
            if number >= 0:
                chosen.select(self.model.index(number, 0), self.model.index(number, len(Column) - 1))
        model.select(chosen, QItemSelectionModel.SelectionFlag.ClearAndSelect)
        number = self.model.row_number(current)
        if number >= 0:
            column = max(0, self.table.currentIndex().column())
            index = self.model.index(number, column if not self.table.isColumnHidden(column) else 0)
            model.setCurrentIndex(index, QItemSelectionModel.SelectionFlag.NoUpdate)
            self.table.scrollTo(index)

    def _selection_changed(self) -> None:
        if self._quiet:
            return
        self._refresh()
        ids = self.selected_ids()
        current = self.current_id()
        self.row_selected.emit(current if current in ids else ids[0] if ids else "")

    def _refresh(self) -> None:
        """Bring buttons and detail in line with the selection."""
        ids = self.selected_ids()
        entries = self._selected_entries()
        self.copy_button.setEnabled(bool(self.model.entries))
        self.extend_button.setEnabled(bool(self._selected_ladder()))
        self.refine_button.setEnabled(any(e.row.onset.status in REFINABLE for e in entries))
        self.digits_button.setVisible(any(self.can_have_digits(e.row) for e in entries))
        self.remove_button.setEnabled(bool(ids))
        self.detail_button.setEnabled(bool(self.model.entries))
        current = self.current_id()
        shown = next((e for e in entries if e.row.id == current), entries[0] if entries else None)
        self.detail.show_entry(shown)

    def _selected_entries(self) -> list[OnsetEntry]:
        ids = set(self.selected_ids())
        return [e for e in self.model.entries if isinstance(e, OnsetEntry) and e.row.id in ids]

    def _selected_ladder(self) -> str:
        ladders = {entry.row.ladder for entry in self._selected_entries()}
        return ladders.pop() if len(ladders) == 1 else ""

    def _extend(self) -> None:
        ladder = self._selected_ladder()
        if ladder:
            self.extend_ladder_requested.emit(ladder)

    def _refine(self) -> None:
        ids = [e.row.id for e in self._selected_entries() if e.row.onset.status in REFINABLE]
        if ids:
            self.refine_requested.emit(ids)

    def _sharpen(self) -> None:
        ids = [e.row.id for e in self._selected_entries() if self.can_have_digits(e.row)]
        if ids:
            self.digits_requested.emit(ids)

    def _remove(self) -> None:
        ids = self.selected_ids()
        if ids:
            self.remove_requested.emit(ids)

    def _toggle_detail(self) -> None:
        self.detail.setVisible(self.detail_button.isChecked())

    def _edit_note(self) -> None:
        index = self.table.currentIndex()
        if not index.isValid():
            return
        if self.table.isColumnHidden(Column.NOTE):
            self.detail_button.setChecked(True)
            self.detail.show()
            self.detail.edit_note()
        else:
            self.table.edit(self.model.index(index.row(), Column.NOTE))

    def _grant(self, wish: str) -> None:
        match wish:
            case "copy" if self.model.entries:
                self.copy_requested.emit("tsv")
            case "remove":
                self._remove()
            case "note":
                self._edit_note()

    def _add_copies(self, menu: QMenu) -> None:
        for form, words in COPY_FORMS:
            action = QAction(words, menu)
            action.setData(form)
            menu.addAction(action)
        menu.triggered.connect(self._copy_chosen)

    def _copy_chosen(self, action: QAction) -> None:
        form = str(action.data() or "")
        if form in dict(COPY_FORMS):
            self.copy_requested.emit(form)

    def context_menu(self) -> QMenu:
        """The menu of the selected rows; the caller shows it."""
        menu = QMenu(self)
        menu.setAttribute(Qt.WidgetAttribute.WA_DeleteOnClose)
        for words, possible, do in (
            ("Follow the ladder further", self.extend_button.isEnabled(), self._extend),
            ("Refine", self.refine_button.isEnabled(), self._refine),
            ("More digits", not self.digits_button.isHidden(), self._sharpen),
            ("Write a note", self.table.currentIndex().isValid(), self._edit_note),
            ("Remove", self.remove_button.isEnabled(), self._remove),
        ):
            action = menu.addAction(words)
            action.setEnabled(possible)
            action.triggered.connect(do)
        menu.addSeparator()
        copies = menu.addMenu("Copy the ledger as")
        self._add_copies(copies)
        return menu

    def _open_menu(self, place: QPoint) -> None:
        if self.model.entries:
            self.context_menu().popup(self.table.viewport().mapToGlobal(place))

    def contextMenuEvent(self, event: QContextMenuEvent) -> None:
        """The menu key opens the menu at the row, not at a corner."""
        if self.table.hasFocus() and self.table.currentIndex().isValid():
            box = self.table.visualRect(self.table.currentIndex())
            self._open_menu(box.bottomLeft())
        event.accept()

    def changeEvent(self, event: QEvent) -> None:
        """Draw anew in another theme."""
        super().changeEvent(event)
        if event.type() == QEvent.Type.PaletteChange and hasattr(self, "table"):
            self.table.viewport().update()
