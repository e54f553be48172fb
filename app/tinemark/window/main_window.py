"""The main window: puts the parts together and lets them speak to each other. What they do stands in their
files.
"""

from __future__ import annotations

from fractions import Fraction
from pathlib import Path

from PySide6.QtCore import QEvent, Qt
from PySide6.QtGui import QAction, QCloseEvent, QGuiApplication, QResizeEvent
from PySide6.QtWidgets import QApplication, QHBoxLayout, QMainWindow, QMenu, QVBoxLayout, QWidget

from tinemark.density.request import View
from tinemark.document.session import Session
from tinemark.systems.errors import TinemarkError
from tinemark.systems.system import System
from tinemark.window.action_list import ACTIONS, MENUS
from tinemark.window.actions import qt_action
from tinemark.window.branch_jobs import BranchJobs
from tinemark.window.bridge import Bridge
from tinemark.window.diagram import Diagram, Labels
from tinemark.window.head_line import HeadLine
from tinemark.window.hint import HintLine
from tinemark.window.layout_memory import LayoutMemory
from tinemark.window.ledger_panel import LedgerPanel
from tinemark.window.lower_tabs import LowerTabs
from tinemark.window.onset_jobs import OnsetJobs
from tinemark.window.panels import Panels
from tinemark.window.picture_jobs import PictureJobs
from tinemark.window.probe_jobs import ProbeJobs
from tinemark.window.probe_panel import ProbePanel
from tinemark.window.proof_jobs import ProofJobs
from tinemark.window.ratio_jobs import RatioJobs
from tinemark.window.ratio_panel import RatioPanel
from tinemark.window.readying import Readying
from tinemark.window.row_work import RowWork
from tinemark.window.session_files import SessionFiles
from tinemark.window.session_keeper import SessionKeeper
from tinemark.window.settings_panel import SettingsPanel
from tinemark.window.status_line import StatusLine
from tinemark.window.survey_form import SurveyForm
from tinemark.window.survey_jobs import SurveyJobs
from tinemark.window.system_card import SystemCard
from tinemark.window.theme import THEMES, Theme, apply_theme, current_theme, system_theme
from tinemark.window.tolerance_panel import TolerancePanel
from tinemark.window.tolerance_work import ToleranceWork
from tinemark.window.workers import Workers

FIRST_SIZE = (1280, 800)
LEAST_SIZE = (1024, 640)
AT_REST_MS = 1000


class MainWindow(QMainWindow):
    """The one window.

    Parameters
    ----------
    keeper
        Holds the session.
    memory
        What is remembered between runs.
    """

    def __init__(self, keeper: SessionKeeper, memory: LayoutMemory) -> None:
        super().__init__()
        self.keeper = keeper
        self.memory = memory
        # Dressed before anything is made: a sheet that comes later goes through every widget once more.
        _dress(memory.theme)
        self.bridge = Bridge(self)
        self.diagram = Diagram()
        self.head = HeadLine()
        self.hint = HintLine()
        self.survey_form = SurveyForm()
        self.status = StatusLine()
        self.ledger_panel = LedgerPanel()
        self.ratio_panel = RatioPanel()
        self.tolerance_panel = TolerancePanel()
        self.system_card = SystemCard()
        self.settings_panel = SettingsPanel()
        self.probe_panel = ProbePanel()
        self._put_together()
        self.pictures = PictureJobs(self.diagram, self.status, self.bridge, self)
        self.onsets = OnsetJobs(self.diagram, self.status, self)
        self.probes = ProbeJobs(self.probe_panel, self.diagram, self.panels, self)
        self.ratios = RatioJobs(self.bridge, self.ledger_panel, self.ratio_panel, self)
        self.rows = RowWork(self)
        self.branches = BranchJobs(self)
        self.surveys = SurveyJobs(self)
        self.proofs = ProofJobs(self)
        self.tolerances = ToleranceWork(self)
        self.files = SessionFiles(self, keeper, memory)
        self.workers = Workers(self.bridge, self)
        folded = (self.probe_panel, self.system_card, self.settings_panel)
        self.readying = Readying([panel.prepare for panel in folded], folded, self)
        self._make_menus()
        self._connect()
        self._restore_layout()
        self.wear_theme()
        self._session_changed(None, keeper.session)
        self._title_changed()
        self.set_tool("pick")
        self.diagram.setFocus(Qt.FocusReason.OtherFocusReason)

    # --- building ------------------------------------------------------------------------------------------

    def _put_together(self) -> None:
        centre = QWidget()
        column = QVBoxLayout(centre)
        column.setContentsMargins(0, 0, 0, 0)
        column.setSpacing(0)
        for part in (self.head, self.hint, self.survey_form):
            column.addWidget(part)
        column.addWidget(self.diagram, 1)
        self.lower = LowerTabs(
            (
                ("ratios", "Ratios", "F8", self.ratio_panel),
                ("tolerances", "Tolerances and margin", "F9", self.tolerance_panel),
            )
        )
        self.panels = Panels(
            self.memory,
            centre,
            self.system_card,
            self.settings_panel,
            self.probe_panel,
            self.ledger_panel,
            self.lower,
        )
        row = QHBoxLayout()
        row.setSpacing(0)
        row.addWidget(self.panels.rail)
        row.addWidget(self.panels.across, 1)
        whole = QWidget()
        outer = QVBoxLayout(whole)
        outer.setContentsMargins(0, 0, 0, 0)
        outer.setSpacing(0)
        outer.addLayout(row, 1)
        outer.addWidget(self.status)
        self.setCentralWidget(whole)
        self.setMinimumSize(*LEAST_SIZE)

    def _make_menus(self) -> None:
        self.actions_by_name: dict[str, QAction] = {}
        menus: dict[str, QMenu] = {}
        for name, words in MENUS.items():
            menus[name] = self.menuBar().addMenu(words)
        for action in ACTIONS:
            if action.menu not in menus:
                parent, _, words = action.menu.partition("/")
                menus[action.menu] = menus[parent].addMenu(words)
            menu = menus[action.menu]
            if action.starts_group:
                menu.addSeparator()
            made = qt_action(action, self)
            menu.addAction(made)
            if action.where == "diagram":
                self.diagram.addAction(made)
            self.actions_by_name[action.name] = made
        recent = QMenu("Open recent", menus["File"])
        recent.aboutToShow.connect(lambda: self.files.fill_recent(recent))
        menus["File"].insertMenu(self.actions_by_name["demo"], recent)
        for name in ("back", "forward", "fit"):
            self.head.add_step(name, self.actions_by_name[name])

    def _connect(self) -> None:
        keeper, diagram = self.keeper, self.diagram
        keeper.changed.connect(self._session_changed)
        keeper.title_changed.connect(self._title_changed)
        self.bridge.picture_ready.connect(self.pictures.take)
        self.bridge.event_came.connect(self._hear)
        self.bridge.trouble.connect(self.say_trouble, Qt.ConnectionType.QueuedConnection)
        diagram.view_wanted.connect(self._view_wanted)
        diagram.resized.connect(self._ask_picture)
        diagram.probe_wanted.connect(lambda parameter, _: keeper.set_probe(parameter))
        diagram.pointed.connect(self._pointed)
        self.head.tool_chosen.connect(self.set_tool)
        self.status.cancel_wanted.connect(self.cancel)
        self.hint.dismissed.connect(lambda: self.memory.keep_flag("hint_seen", True))
        self.hint.other_asked.connect(lambda: self.files.open_demo("resonator_board"))
        self.rows.connect_parts()
        self.survey_form.survey_wanted.connect(self._survey)
        self.survey_form.closed.connect(lambda: self.diagram.setFocus(Qt.FocusReason.OtherFocusReason))
        self.system_card.system_edited.connect(self._system_edited)
        self.system_card.builtin_chosen.connect(self.files.open_builtin)
        self.settings_panel.settings_changed.connect(keeper.set_picture)
        self.pictures.measured.connect(self.settings_panel.show_measured)
        self.probe_panel.probe_closed.connect(lambda: keeper.set_probe(None))
        self.probe_panel.value_entered.connect(lambda text: keeper.set_probe(Fraction(text)))
        self.panels.opened.connect(self._panel_opened)
        QGuiApplication.styleHints().colorSchemeChanged.connect(self.wear_theme)
        QApplication.clipboard()  # made now, so that the first copy does not wait for it

    def _restore_layout(self) -> None:
        self.resize(*FIRST_SIZE)
        kept = self.memory.bytes_of("window")
        if not kept.isEmpty():
            self.restoreGeometry(kept)
        self.panels.arrange(self.width(), self.height())
        self.hint.setVisible(not self.memory.flag("hint_seen", False))

    # --- the session's changes -----------------------------------------------------------------------------

    def _session_changed(self, before: Session | None, after: Session) -> None:
        system = self.keeper.system
        if before is None:
            self.onsets.forget()
            self.surveys.forget()
            self.proofs.forget()
        self.diagram.show_view(after.view)
        if before is None or before.view != after.view:
            self.status.forget_width()
            self.status.forget_trouble()
        if before is None or (before.system_text, before.parameter, before.observe) != (
            after.system_text,
            after.parameter,
            after.observe,
        ):
            self._show_system(after, system)
        if before is None or before.picture != after.picture:
            self.settings_panel.show_settings(after.picture)
        if before is None or before.ledger != after.ledger or before.system_text != after.system_text:
            self.rows.show()
        if before is None:
            self.rows.select(after.ledger.rows[0].id if after.ledger.rows else "")
        self.rows.show_marks()
        self.tolerances.show()
        self.probes.show(after, system, reveal=before is not None)
        self.pictures.show(after, system)
        self.branches.show(after, system)
        self.refresh_actions()

    def _show_system(self, session: Session, system: System) -> None:
        swept = system.parameter(session.parameter)
        observed = next((s for s in system.states if s.name == session.observe), None)
        # An orbit of equations may be lost in other ways: a section that is not crossed, or stiff rates.
        lost = "escaped" if system.is_map else "no sample"
        unit = observed.unit if observed else ""
        self.diagram.show_labels(Labels(session.parameter, session.observe, swept.unit, unit, lost))
        self.diagram.close_callout()
        self.settings_panel.show_system(system)
        self.hint.show_kind(is_map=system.is_map)
        self.head.show_title(system.title, f"{session.observe} against {session.parameter}")
        self.system_card.show_system(session.system_text, self.keeper.builtin)
        self.workers.warm(system)
        self.readying.start(AT_REST_MS)

    def _title_changed(self) -> None:
        self.setWindowTitle(f"{self.keeper.name}[*] \N{EM DASH} Tinemark")
        self.setWindowModified(self.keeper.is_modified)
        self.refresh_actions()

    def refresh_actions(self) -> None:
        """Bring menus and buttons in line with what can be done now."""
        for action in ACTIONS:
            made = self.actions_by_name[action.name]
            if action.enabled is not None:
                made.setEnabled(action.enabled(self))
            if action.checked is not None:
                made.setChecked(action.checked(self))
        undo, redo = self.keeper.undo_label, self.keeper.redo_label
        self.actions_by_name["undo"].setText(f"Undo: {undo}" if undo else "Undo")
        self.actions_by_name["redo"].setText(f"Redo: {redo}" if redo else "Redo")

    # --- what the hand wants -------------------------------------------------------------------------------

    def _view_wanted(self, view: View, goes_on: bool) -> None:
        zoomed = view.width != self.keeper.session.view.width
        self.keeper.show_view(view, goes_on=goes_on)
        if zoomed:
            self.hint.zoomed()

    def _ask_picture(self) -> None:
        self.pictures.show(self.keeper.session, self.keeper.system)

    def _pointed(self, parameter: Fraction | None, observed: Fraction | None) -> None:
        known = parameter is not None and observed is not None
        self.status.show_coordinates(self.diagram.words_at(parameter, observed) if known else "")

    def set_tool(self, tool: str) -> None:
        """Take a tool in hand."""
        self.diagram.set_tool(tool)
        self.head.show_tool(tool)
        self.refresh_actions()

    def fit_view(self) -> None:
        """Show the whole diagram."""
        self.keeper.fit_view()

    def drop_gesture(self) -> None:
        """Escape: drop the gesture, else the callout, else the selection."""
        if self.diagram.callout is not None:
            self.diagram.close_callout()
        elif not self.diagram.gestures.cancel():
            self.rows.select("")

    @property
    def is_finding(self) -> bool:
        """Whether the refinery works on something that was asked for by hand."""
        return bool(self.onsets.jobs) or self.surveys.busy

    def _survey(self, max_period: int) -> None:
        self.surveys.ask(max_period)
        self.diagram.setFocus(Qt.FocusReason.OtherFocusReason)

    def cancel(self) -> None:
        """Stop the work under way."""
        checking = self.proofs.cancel()
        stopped = [jobs.cancel() for jobs in (self.onsets, self.surveys, self.branches)]
        if not any(stopped) and not checking:
            self.pictures.stop()
            self.status.show_words("Drawing stopped; the next view is drawn again.")

    # --- system, panels, theme -----------------------------------------------------------------------------

    def _system_edited(self, text: str) -> None:
        try:
            self.keeper.set_system(text)
        except TinemarkError as error:
            self.system_card.show_error(str(getattr(error, "key", "")), str(error))

    def _panel_opened(self, name: str, state: bool) -> None:
        if name == "probe" and not state and self.keeper.session.probe is not None:
            self.keeper.set_probe(None)
        self.refresh_actions()

    def set_theme(self, name: str) -> None:
        """Choose "system", "light" or "dark", for now and for the next start."""
        self.memory.theme = name
        self.wear_theme()

    def wear_theme(self) -> None:
        """Dress in the chosen theme."""
        self.head.wear(_dress(self.memory.theme))
        self._ask_picture()
        self.refresh_actions()

    def toggle_full_screen(self) -> None:
        """Fill the screen, or go back to a window."""
        self.setWindowState(self.windowState() ^ Qt.WindowState.WindowFullScreen)

    def show_guide(self) -> None:
        """Open the guide."""
        from tinemark.window.guide import open_guide

        open_guide(self)

    def show_about(self) -> None:
        """Open About."""
        from tinemark.window.about import AboutDialog

        dialog = AboutDialog(self)
        dialog.exec()
        dialog.deleteLater()

    def say_trouble(self, words: str) -> None:
        """Say what went wrong, in the middle of the diagram and in the status line; nobody has to click it
        away.
        """
        view = self.diagram.view
        middle = (view.left + view.right) / 2, (view.bottom + view.top) / 2
        self.diagram.show_callout(*middle, words)
        self.status.show_words(words, "error")

    # --- Qt ------------------------------------------------------------------------------------------------

    def _hear(self, event: object) -> None:
        self.onsets.hear(event)
        self.pictures.hear(event)
        self.probes.hear(event)
        self.branches.hear(event)
        self.surveys.hear(event)
        self.proofs.hear(event)

    def resizeEvent(self, event: QResizeEvent) -> None:  # noqa: D102
        super().resizeEvent(event)
        self.panels.window_resized(event.size().width())

    def changeEvent(self, event: QEvent) -> None:  # noqa: D102
        super().changeEvent(event)
        if event.type() == QEvent.Type.WindowStateChange and hasattr(self, "actions_by_name"):
            self.refresh_actions()

    def closeEvent(self, event: QCloseEvent) -> None:  # noqa: D102
        if not self.files.may_leave():
            event.ignore()
            return
        self.memory.keep_bytes("window", self.saveGeometry())
        self.panels.keep(self.width())
        self.memory.sync()
        self.hide()
        self.shut_down()
        event.accept()

    def shut_down(self) -> None:
        """End every thread and process. Nothing comes after it."""
        self.readying.stop()
        for jobs in (self.pictures, self.onsets, self.branches, self.surveys, self.probes):
            jobs.detach()
        self.bridge.close()
        self.proofs.detach()
        self.workers.close()

    def open_path(self, path: Path) -> None:
        """Open a file named at the start."""
        self.files.open(path)


def _dress(choice: str) -> Theme:
    """Apply the theme of a choice ("system" follows the desktop), where it is not worn already."""
    theme = THEMES.get(choice) or system_theme()
    app = QApplication.instance()
    if isinstance(app, QApplication) and (current_theme() != theme or not app.styleSheet()):
        apply_theme(app, theme)
    return theme
