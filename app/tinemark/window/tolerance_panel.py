"""What the tolerances make of an onset: the margin in a sentence, a table of contributions, their shares."""

from __future__ import annotations

from collections.abc import Sequence

from PySide6.QtCore import Qt, Signal
from PySide6.QtGui import QFontMetricsF, QResizeEvent
from PySide6.QtWidgets import (
    QAbstractItemView,
    QHeaderView,
    QLabel,
    QPushButton,
    QScrollArea,
    QSizePolicy,
    QTableWidget,
    QTableWidgetItem,
    QVBoxLayout,
    QWidget,
)

from tinemark.document.margin import NO_ROWS, Margin, margin_sentence
from tinemark.document.rounding import group_digits, minus_sign, onset_text
from tinemark.document.row import Row
from tinemark.document.tolerance import NO_TOLERANCES, Budget
from tinemark.document.tolerance_tables import (
    share_text,
    slope_text,
    standard_text,
    tolerance_text,
)
from tinemark.window.faces import FaceKeeper, wear
from tinemark.window.share_bars import ShareBars, bars_of
from tinemark.window.theme import mono_font

COLUMNS = ("parameter", "derivative", "tolerance", "contribution", "share")
TIPS = (
    "The other parameters of the system",
    "How far the onset moves per unit of the parameter",
    "Standard uncertainty of the parameter, from the system card",
    "Standard uncertainty that it causes in the onset",
    "Its share of the onset's variance",
)
EMPTY_LEDGER = (
    "No margin yet.\n"
    "Click near a split in the diagram: how far the operating point is from its onset stands here."
)
SELECT = "Select a row of the ledger to see what each tolerance contributes to it."
ENTER = "Enter tolerances"
OWN = "the value itself"
WORTH_A_BAR = 0.005
DROPPED = COLUMNS.index("contribution")
MARGINS = 27
"""Width that margins and a scroll bar take."""


class TolerancePanel(QWidget):
    """Shows budgets and margins.

    Signals
    -------
    system_wanted
        The user wants the system card, to enter tolerances there.
    """

    system_wanted = Signal()

    def __init__(self, parent: QWidget | None = None) -> None:
        super().__init__(parent)
        self.setWindowTitle("Tolerances and margin")
        self.setAccessibleName("Tolerances and margin")
        page = QWidget()
        inner = QVBoxLayout(page)
        inner.setContentsMargins(8, 6, 8, 8)
        inner.setSpacing(6)
        self.margin = self._words("Margin to the nearest onset")
        wear(self.margin, "words")
        self.selected_margin = self._words("Margin to the selected onset")
        self.selected_margin.setProperty("rank", "second")
        wear(self.selected_margin, "words")
        self.title = self._words("Uncertainty of the selected onset")
        wear(self.title, "heading")
        self.table = self._build_table()
        self.bars = ShareBars()
        self.reason = self._words("Why there is no combined uncertainty")
        self.reason.setProperty("rank", "second")
        self.enter = QPushButton(ENTER)
        self.enter.setToolTip("Open the system card (F3): every parameter has a field for its tolerance")
        self.enter.setSizePolicy(QSizePolicy.Policy.Maximum, QSizePolicy.Policy.Fixed)
        self.enter.clicked.connect(self.system_wanted)
        for part in (
            self.margin,
            self.selected_margin,
            self.title,
            self.table,
            self.bars,
            self.reason,
            self.enter,
        ):
            inner.addWidget(part)
        inner.addStretch(1)
        scroll = QScrollArea()
        scroll.setWidgetResizable(True)
        scroll.setHorizontalScrollBarPolicy(Qt.ScrollBarPolicy.ScrollBarAlwaysOff)
        scroll.setFocusPolicy(Qt.FocusPolicy.NoFocus)
        scroll.setWidget(page)
        outer = QVBoxLayout(self)
        outer.setContentsMargins(0, 0, 0, 0)
        outer.addWidget(scroll)
        self._faces = FaceKeeper(self, self._fit)
        self.show_tolerances(None, None, None, None)

    @staticmethod
    def _words(name: str) -> QLabel:
        label = QLabel()
        label.setWordWrap(True)
        label.setTextFormat(Qt.TextFormat.PlainText)
        label.setTextInteractionFlags(
            Qt.TextInteractionFlag.TextSelectableByMouse | Qt.TextInteractionFlag.TextSelectableByKeyboard
        )
        label.setAccessibleName(name)
        return label

    @staticmethod
    def _build_table() -> QTableWidget:
        table = QTableWidget(0, len(COLUMNS))
        table.setAccessibleName("Contributions of the parameters' tolerances")
        table.setHorizontalHeaderLabels(list(COLUMNS))
        for place, tip in enumerate(TIPS):
            table.horizontalHeaderItem(place).setToolTip(tip)
        table.setEditTriggers(QAbstractItemView.EditTrigger.NoEditTriggers)
        table.setSelectionBehavior(QAbstractItemView.SelectionBehavior.SelectRows)
        table.setTabKeyNavigation(False)
        table.setShowGrid(False)
        table.setWordWrap(False)
        table.setCornerButtonEnabled(False)
        table.setVerticalScrollBarPolicy(Qt.ScrollBarPolicy.ScrollBarAlwaysOff)
        table.verticalHeader().hide()
        table.verticalHeader().setSectionResizeMode(QHeaderView.ResizeMode.Fixed)
        header = table.horizontalHeader()
        header.setSectionsClickable(False)
        header.setHighlightSections(False)
        header.setMinimumSectionSize(24)
        header.setDefaultAlignment(Qt.AlignmentFlag.AlignRight | Qt.AlignmentFlag.AlignVCenter)
        table.horizontalHeaderItem(0).setTextAlignment(
            Qt.AlignmentFlag.AlignLeft | Qt.AlignmentFlag.AlignVCenter
        )
        table.setSizePolicy(QSizePolicy.Policy.Expanding, QSizePolicy.Policy.Fixed)
        return table

    def show_tolerances(
        self,
        nearest: Margin | None,
        row: Row | None,
        budget: Budget | None,
        margin: Margin | None,
        *,
        has_rows: bool = False,
    ) -> None:
        """Show the margin to the nearest onset, and one row's budget and margin.

        Parameters
        ----------
        nearest
            None where no row of the ledger belongs to the operating point.
        row, budget
            The selected row and its budget; None where none is selected, or its system is not known.
        margin
            From the operating point to the selected row; None where the row does not belong to it.
        has_rows
            Whether the ledger has any row.
        """
        self.margin.setText(margin_sentence(nearest) if nearest else NO_ROWS if has_rows else EMPTY_LEDGER)
        other = margin is not None and (nearest is None or nearest.row_id != margin.row_id)
        self.selected_margin.setText(f"Selected: {margin_sentence(margin)}" if margin and other else "")
        self.selected_margin.setVisible(other)
        self._show_budget(row, budget)
        if row is None and has_rows:
            self.reason.setText(SELECT)
            self.reason.show()
        elif nearest is not None and nearest.standard is None and budget and budget.reason == NO_TOLERANCES:
            self.reason.hide()  # the margin's own sentence says it
        self._fit()

    def _show_budget(self, row: Row | None, budget: Budget | None) -> None:
        known = row is not None and budget is not None
        self.title.setVisible(known)
        self.table.setVisible(known and bool(budget and budget.lines))
        self.bars.setVisible(known and bool(budget and budget.combined))
        self.reason.setVisible(known and bool(budget and budget.reason))
        wanted = known and bool(budget and budget.lines and not any(line.tolerance for line in budget.lines))
        self.enter.setVisible(wanted)
        if row is None or budget is None:
            return
        unit = f" {budget.unit}" if budget.unit else ""
        value = f"{budget.parameter} = {onset_text(row.onset)}{unit}"
        if budget.combined is not None:
            spread = _number(standard_text(budget.combined))
            self.title.setText(f"{value}: standard uncertainty {spread}{unit} with the tolerances")
        else:
            self.title.setText(value)
        self.reason.setText(f"{budget.reason[:1].upper()}{budget.reason[1:]}." if budget.reason else "")
        self.table.setRowCount(len(budget.lines))
        for place, line in enumerate(budget.lines):
            given = line.tolerance is not None
            cells = (
                line.parameter,
                _number(slope_text(line.derivative)) or "not known",
                _number(tolerance_text(line.tolerance)) if given else "none given",
                _number(standard_text(line.amount)),
                share_text(line.share),
            )
            tips = (line.unit, _number(line.derivative), f"in {line.unit}" if given and line.unit else "")
            self._fill(place, cells, (*tips, f"in {budget.unit}" if budget.unit else "", ""))
        shares = [(line.parameter, line.share) for line in budget.lines]
        if budget.own_share is not None and float(budget.own_share) >= WORTH_A_BAR:
            shares.append((OWN, budget.own_share))
        self.bars.show_bars(bars_of(shares))

    def _fill(self, place: int, cells: Sequence[str], tips: Sequence[str]) -> None:
        for column, (text, tip) in enumerate(zip(cells, tips, strict=True)):
            item = QTableWidgetItem(text)
            left = Qt.AlignmentFlag.AlignLeft if column == 0 else Qt.AlignmentFlag.AlignRight
            item.setTextAlignment(left | Qt.AlignmentFlag.AlignVCenter)
            if column and any(sign.isdigit() for sign in text):
                item.setFont(mono_font(0.95))
            item.setToolTip(tip if text else "")
            self.table.setItem(place, column, item)

    def resizeEvent(self, event: QResizeEvent) -> None:
        """Fit the table to the new width."""
        super().resizeEvent(event)
        self._fit()

    def _fit(self) -> None:
        """Columns as wide as they need to be, the first takes what is left; all rows are seen at once.

        Where there is no room for all, the contribution goes: derivative and tolerance tell it too.
        """
        line = round(QFontMetricsF(mono_font()).height() * 1.5)
        header = self.table.horizontalHeader()
        header.setSectionResizeMode(QHeaderView.ResizeMode.ResizeToContents)
        header.setSectionResizeMode(0, QHeaderView.ResizeMode.Stretch)
        # A hidden column has no size to measure.
        self.table.setColumnHidden(DROPPED, False)
        needed = sum(
            max(self.table.sizeHintForColumn(column), header.sectionSizeHint(column))
            for column in range(len(COLUMNS))
        )
        self.table.setColumnHidden(DROPPED, needed > self.width() - MARGINS)
        for place in range(self.table.rowCount()):
            self.table.setRowHeight(place, line)
        self.table.setFixedHeight(header.sizeHint().height() + line * self.table.rowCount() + 4)


def _number(text: str) -> str:
    return minus_sign(group_digits(text))
