"""What is done with the ledger's rows: keeping, selecting, refining, removing, copying, following ladders."""

from __future__ import annotations

from fractions import Fraction
from typing import TYPE_CHECKING

from PySide6.QtCore import QObject
from PySide6.QtGui import QGuiApplication

from tinemark.document import ledger as ledgers
from tinemark.document.row import Row
from tinemark.document.session import system_of_row
from tinemark.onsets.results import Kind, LadderResult, Onset, Status
from tinemark.systems.system import System
from tinemark.window.ladder_questions import further_levels, ladder_question, ladder_request
from tinemark.window.ledger_marks import marks_of
from tinemark.window.onset_jobs import LEAST_DIGITS, Job, digits_for, sentence
from tinemark.window.view_navigation import magnitude

if TYPE_CHECKING:
    from tinemark.window.main_window import MainWindow

MEASURED = "Measured rows, and rows whose system is not known any more, are left as they are."

SHARPENED = frozenset({Kind.FLIP, Kind.FOLD, Kind.NEIMARK_SACKER})
"""Kinds of onsets of equations that are solved for to many digits."""

MOST_SHARP_DIGITS = 60
"""The time that digits take grows with their cube."""

NO_MORE_DIGITS = (
    "More digits are worked out for estimated flips, folds and Neimark-Sacker points of equations, up to "
    f"{MOST_SHARP_DIGITS} digits."
)

EDITED = "The system was edited while this was worked out, so the answer is left out; click again."


def known_digits(onset: Onset) -> int:
    """Significant digits of an onset's value that its interval leaves certain."""
    half, value = onset.half_width, abs(onset.value_fraction)
    if not half:
        return MOST_SHARP_DIGITS
    return max(magnitude(value) - magnitude(half), 0) if value else 0


class RowWork(QObject):
    """Works on the rows of one window's session."""

    def __init__(self, window: MainWindow) -> None:
        super().__init__(window)
        self._window, self._keeper = window, window.keeper
        self.selected = ""

    def connect_parts(self) -> None:
        """Listen to the ledger's panel, the diagram and the answers of the refinery."""
        window, panel = self._window, self._window.ledger_panel
        window.diagram.picked.connect(self.pick)
        window.diagram.sign_picked.connect(self.pick_sign)
        window.diagram.read_by_eye.connect(self.read_by_eye)
        window.diagram.mark_chosen.connect(self.select)
        window.onsets.onsets_found.connect(self._keep_onsets)
        window.onsets.ladder_found.connect(self._keep_ladder)
        panel.row_selected.connect(self._selection_changed)
        panel.refine_requested.connect(self.refine)
        panel.digits_requested.connect(self.more_digits)
        panel.can_have_digits = self.can_have_digits
        panel.remove_requested.connect(self.remove)
        panel.note_edited.connect(self._note_edited)
        panel.copy_requested.connect(self.copy)
        panel.extend_ladder_requested.connect(self.extend_ladder)

    # --- selection -----------------------------------------------------------------------------------------

    @property
    def selected_row(self) -> Row | None:
        """The row that is selected."""
        return self._keeper.session.ledger.row(self.selected)

    def select(self, row: str) -> None:
        """Select a row in the ledger, on the diagram and for the ratios; empty for none."""
        self._window.ledger_panel.set_selected(row)
        self._selection_changed(row)

    def _selection_changed(self, row: str) -> None:
        self.selected = row
        self.show_marks()
        self._window.ratios.select(row)
        self._window.tolerances.show()
        self._window.refresh_actions()

    def show(self) -> None:
        """Show the session's ledger."""
        ledger = self._keeper.session.ledger
        if ledger.row(self.selected) is None:
            self.selected = ""
        self._window.ratios.show(ledger, self._keeper.system.key, self.selected)

    def show_marks(self) -> None:
        """Show the rows that belong to the diagram as marks."""
        session = self._keeper.session
        place = ledgers.place_of(self._keeper.system, session.parameter)
        marks = marks_of(session.ledger, place, session.observe)
        self._window.diagram.show_marks(marks, self.selected)

    # --- new rows ------------------------------------------------------------------------------------------

    def pick(self, parameter: Fraction, observed: Fraction) -> None:
        """A click: find its onset."""
        session = self._keeper.session
        self._window.onsets.pick(self._keeper.system, session.parameter, session.view, parameter, observed)
        self._window.hint.picked()

    def pick_sign(self, kind: Kind, parameter: Fraction, observed: Fraction) -> None:
        """A click on an onset that a branch passes: find that one, and none beside it."""
        session, system = self._keeper.session, self._keeper.system
        kinds = frozenset({kind})
        self._window.onsets.pick(system, session.parameter, session.view, parameter, observed, kinds)
        self._window.hint.picked()

    def read_by_eye(self, parameter: Fraction, _observed: Fraction) -> None:
        """A reading from the crosshair, uncertain by half a pixel."""
        session, diagram = self._keeper.session, self._window.diagram
        half = session.view.width / diagram.parts.columns / 2
        onset = ledgers.eye_pick(session.parameter, parameter, half)
        place = ledgers.place_of(self._keeper.system, session.parameter)
        try:
            ledger, row = ledgers.add(session.ledger, onset, place)
        except ledgers.LedgerFull as full:
            self._window.status.show_words(sentence(str(full)), "warning")
            return
        self._keeper.set_ledger("read by eye", ledger)
        self.select(row)
        words = f"Read by eye: {session.parameter} = {diagram.gestures.by_eye(parameter)}"
        self._window.status.show_words(words)

    def knows(self, system: System) -> bool:
        """Whether the session still holds the formulas of a system; if not, what was found is of no use."""
        session = self._keeper.session
        known = system.key == self._keeper.system.key or system.key in dict(session.systems)
        if not known:
            self._window.status.show_words(EDITED, "warning")
        return known

    def _keep_onsets(self, system: System, row: str, onsets: tuple[Onset, ...]) -> None:
        if not self.knows(system):
            return
        ledger = self._keeper.session.ledger
        place = ledgers.place_of(system, onsets[0].parameter)
        if row and ledger.row(row) is not None:
            refined = ledgers.replace_onset(ledger, row, onsets[0])
            if refined == ledger:
                self._window.status.show_words("The row already holds this onset as well as it is known.")
            self._keeper.set_ledger("refine a row", refined)
        else:
            try:
                ledger, rows = ledgers.add_all(ledger, onsets, place)
                row = rows[-1]
            except ledgers.LedgerFull as full:
                ledger, row = full.ledger, self.selected
                self._window.status.show_words(sentence(str(full)), "warning")
            else:
                if ledger == self._keeper.session.ledger:
                    self._window.status.show_words(
                        "This onset is in the ledger already; its row is selected."
                    )
            label = "pick an onset" if len(onsets) == 1 else f"pick {len(onsets)} onsets"
            self._keeper.set_ledger(label, ledger)
        self.select(row)

    def _keep_ladder(self, system: System, result: LadderResult) -> None:
        if result.levels and self.knows(system):
            place = ledgers.place_of(system, result.levels[0].onset.parameter)
            self._window.ratios.keep_alpha(result)
            try:
                ledger = ledgers.add_ladder(self._keeper.session.ledger, result, place)
            except ledgers.LedgerFull as full:
                ledger = full.ledger
                self._window.status.show_words(sentence(str(full)), "warning")
            self._keeper.set_ledger("follow the ladder", ledger)

    # --- changes -------------------------------------------------------------------------------------------

    def refine(self, rows: list[str]) -> None:
        """Work out rows that were read by eye or estimated."""
        session = self._keeper.session
        skipped = False
        for name in rows:
            row, system = session.ledger.row(name), system_of_row(session, name)
            if row is None or system is None or row.onset.status is Status.MEASURED:
                skipped = True
                continue
            self._window.onsets.refine_row(system, row, session.view)
        if skipped:
            self._window.status.show_words(MEASURED, "warning")

    def refine_selected(self) -> None:
        """Work out the selected rows."""
        self.refine(self._window.ledger_panel.selected_ids() or [self.selected])

    def can_have_digits(self, row: Row) -> bool:
        """Whether a row is one of equations, estimated, of a kind that can be solved for to many digits."""
        onset, system = row.onset, self._keeper.system
        if onset.status is not Status.ESTIMATED or onset.kind not in SHARPENED or not onset.states:
            return False
        known = system if system.key == row.system_key else system_of_row(self._keeper.session, row.id)
        return known is not None and not known.is_map and known_digits(onset) < MOST_SHARP_DIGITS

    def more_digits(self, rows: list[str]) -> None:
        """Integrate rows of equations to more digits, and prove them where that closes."""
        session = self._keeper.session
        asked = [row for name in rows if (row := session.ledger.row(name)) is not None]
        chosen = [row for row in asked if self.can_have_digits(row)]
        if not chosen:
            self._window.status.show_words(NO_MORE_DIGITS, "warning")
        for row in chosen:
            system = system_of_row(session, row.id)
            assert system is not None
            wanted = max(digits_for(session.view), LEAST_DIGITS)
            if known_digits(row.onset) >= wanted:
                wanted = known_digits(row.onset) + LEAST_DIGITS
            self._window.onsets.sharpen_row(system, row, min(wanted, MOST_SHARP_DIGITS))

    def more_digits_of_selected(self) -> None:
        """Integrate the selected rows to more digits."""
        self.more_digits(self._window.ledger_panel.selected_ids() or [self.selected])

    def remove(self, rows: list[str]) -> None:
        """Take rows out of the ledger."""
        ledger = ledgers.remove(self._keeper.session.ledger, rows)
        self._keeper.set_ledger("remove a row" if len(rows) == 1 else f"remove {len(rows)} rows", ledger)

    def remove_selected(self) -> None:
        """Take the selected rows out of the ledger."""
        self.remove(self._window.ledger_panel.selected_ids() or [self.selected])

    def _note_edited(self, row: str, text: str) -> None:
        self._keeper.set_ledger("edit a note", ledgers.note(self._keeper.session.ledger, row, text))

    def copy(self, form: str) -> None:
        """Put the ledger on the clipboard as "tsv", "markdown" or "latex"."""
        from tinemark.document.export import copy_text
        from tinemark.document.tolerance_tables import tolerances_of

        ledger = self._keeper.session.ledger
        text = copy_text(ledger, form, tolerances=tolerances_of(self._keeper.session))
        QGuiApplication.clipboard().setText(text)
        count = len(ledger.rows)
        self._window.status.show_words(f"Copied {count} row{'' if count == 1 else 's'}.")

    # --- ladders -------------------------------------------------------------------------------------------

    def ask_ladder(self) -> None:
        """Ask from where to where, then follow the ladder."""
        session = self._keeper.session
        question = ladder_question(self._window, session, self.selected_row, self._window.diagram.field)
        if question is not None:
            self._window.onsets.ask(Job(ladder_request(self._keeper.system, session, question)))

    def extend_ladder(self, ladder: str) -> None:
        """Find further levels of a ladder of the ledger."""
        found = further_levels(self._keeper.session, ladder, self._window.diagram.field)
        if isinstance(found, str):
            self._window.status.show_words(found, "warning")
        else:
            request, base_period = found
            self._window.onsets.ask(Job(request, base_period=base_period))
