"""Opening and saving: dialogs, recent files, and the question about unsaved work.

What goes wrong is said in the status line and beside the diagram, with the file named; the session in
the window is never touched by a file that could not be read.
"""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING

from PySide6.QtCore import QStandardPaths
from PySide6.QtWidgets import QFileDialog, QMenu, QMessageBox

from tinemark.document.session import Session, demo_session, new_session
from tinemark.document.session_file import open_session, save_session
from tinemark.systems.errors import TinemarkError
from tinemark.systems.library import DEMO, builtin_text
from tinemark.systems.system_file import read_system_file
from tinemark.window.axis import axis_title
from tinemark.window.layout_memory import LayoutMemory
from tinemark.window.proof_jobs import opening_words
from tinemark.window.session_keeper import SessionKeeper
from tinemark.window.theme import current_theme

if TYPE_CHECKING:
    from tinemark.window.main_window import MainWindow

SUFFIX = ".tinemark"
SESSIONS = f"Tinemark sessions (*{SUFFIX})"
SYSTEMS = "System files (*.toml)"
PICTURES = "Pictures (*.png)"
DEMO_WORDS = {DEMO: "hatchery tank", "resonator_board": "resonator board"}
MAX_SYSTEM_BYTES = 256 * 1024


class SessionFiles:
    """Files of one window."""

    def __init__(self, window: MainWindow, keeper: SessionKeeper, memory: LayoutMemory) -> None:
        self._window, self._keeper, self._memory = window, keeper, memory

    # --- opening -------------------------------------------------------------------------------------------

    def ask_open(self) -> None:
        """Ask for a session or a system file, and open it."""
        kinds = f"Sessions and systems (*{SUFFIX} *.toml);;{SESSIONS};;{SYSTEMS}"
        name, _ = QFileDialog.getOpenFileName(self._window, "Open", self._folder(), kinds)
        if name:
            self.open(Path(name))

    def open(self, path: Path) -> bool:
        """Open a file; False when it was not opened, and then the window says why."""
        try:
            if path.suffix.lower() == ".toml":
                read_system_file(path)
                session = new_session(path.read_text(encoding="utf-8-sig"))
                return self._show(session, None, f"Opened the system {path.name}.")
            session = open_session(path)
        except TinemarkError as error:
            self._say(str(error))
            return False
        if not self._show(session, path, f"Opened {path.name}. {opening_words(session)}".strip()):
            return False
        self._memory.add_recent(path)
        return True

    def open_demo(self, name: str = DEMO) -> bool:
        """Open one of the demonstrations."""
        return self._show(demo_session(name), None, f"The {DEMO_WORDS[name]} is an invented scenario.")

    def open_builtin(self, name: str) -> bool:
        """Put a built-in system on the card. The ledger stays, and the step can be undone."""
        try:
            self._keeper.set_system(builtin_text(name), f"open the built-in system {name}")
        except TinemarkError as error:
            self._say(str(error))
            return False
        return True

    def _show(self, session: Session, path: Path | None, words: str) -> bool:
        if not self.may_leave():
            return False
        self._keeper.open(session, path)
        self._window.status.show_words(words)
        return True

    def fill_recent(self, menu: QMenu) -> None:
        """Fill the menu of recent files."""
        menu.clear()
        names = self._memory.recent
        for number, name in enumerate(names, start=1):
            entry = menu.addAction(f"&{number}  {Path(name).name}")
            entry.setToolTip(name)
            entry.setStatusTip(name)
            entry.triggered.connect(lambda _=False, chosen=name: self.open_recent(chosen))
        if not names:
            menu.addAction("None yet").setEnabled(False)

    def open_recent(self, name: str) -> None:
        """Open one of the recent files; one that is gone leaves the list."""
        path = Path(name)
        if not path.exists():
            self._memory.drop_recent(name)
            self._say(f"{path.name} is no longer in {path.parent}; it has been taken off the list.")
            return
        self.open(path)

    # --- saving --------------------------------------------------------------------------------------------

    def save(self) -> bool:
        """Save to the session's file, asking for one where there is none; False when nothing was saved."""
        return self._save_to(self._keeper.path) if self._keeper.path is not None else self.ask_save_as()

    def ask_save_as(self) -> bool:
        """Ask for a file and save to it."""
        offered = str(Path(self._folder()) / f"{_file_name(self._keeper.name)}{SUFFIX}")
        path = self._ask_target("Save the session", offered, SESSIONS, SUFFIX)
        return self._save_to(path) if path is not None else False

    def _save_to(self, path: Path) -> bool:
        session = self._keeper.session
        try:
            save_session(session, path)
        except (TinemarkError, OSError) as error:
            self._say(_not_saved(path, error))
            return False
        self._keeper.saved_as(path, session)
        self._memory.add_recent(path)
        self._window.status.show_words(f"Saved {path.name}.")
        return True

    def ask_save_system(self) -> bool:
        """Ask for a file and write the system's TOML text to it."""
        offered = str(Path(self._folder()) / f"{_file_name(self._keeper.system.title)}.toml")
        path = self._ask_target("Save the system as a file", offered, SYSTEMS, ".toml")
        if path is None:
            return False
        try:
            path.write_text(self._keeper.session.system_text, encoding="utf-8")
        except OSError as error:
            self._say(_not_saved(path, error))
            return False
        self._window.status.show_words(f"Saved {path.name}.")
        return True

    def ask_save_picture(self) -> None:
        """Ask for a file and write the picture's counts to it as PNG, off the window's thread."""
        field = self._window.diagram.field
        if field is None:
            return
        offered = str(Path(self._folder()) / f"{_file_name(self._keeper.name)}.png")
        path = self._ask_target("Save the picture", offered, PICTURES, ".png")
        if path is None:
            return
        session, diagram, labels = self._keeper.session, self._window.diagram, self._window.diagram.labels
        palette = session.picture.palette or current_theme().picture
        across = axis_title(labels.parameter, labels.parameter_unit, "")
        up = axis_title(labels.observe, labels.observe_unit, "")
        view, title = diagram.image_view, session.title or self._keeper.system.title

        def write() -> None:
            from tinemark.density.png import Frame, write_picture_png

            write_picture_png(
                field, path, session.picture.tone, palette, frame=Frame(view, across, up, title)
            )

        self._window.bridge.call(
            "picture file",
            write,
            lambda _: self._window.status.show_words(f"Saved {path.name}."),
            lambda error: self._say(_not_saved(path, error)),
        )

    def _ask_target(self, title: str, offered: str, kinds: str, suffix: str) -> Path | None:
        name, _ = QFileDialog.getSaveFileName(self._window, title, offered, kinds)
        if not name:
            return None
        path = Path(name)
        return path if path.suffix else path.with_suffix(suffix)

    # --- leaving -------------------------------------------------------------------------------------------

    def may_leave(self) -> bool:
        """Ask about unsaved work; False when the user would rather stay."""
        if not self._keeper.is_modified:
            return True
        box = QMessageBox(self._window)
        box.setIcon(QMessageBox.Icon.NoIcon)
        box.setWindowTitle("Unsaved changes")
        box.setText(f"{self._keeper.name} has changes that are not saved.")
        box.setInformativeText("Save them, or go on without?")
        save = box.addButton("Save", QMessageBox.ButtonRole.AcceptRole)
        discard = box.addButton("Go on without saving", QMessageBox.ButtonRole.DestructiveRole)
        stay = box.addButton("Stay here", QMessageBox.ButtonRole.RejectRole)
        box.setDefaultButton(save)
        box.setEscapeButton(stay)
        box.exec()
        chosen = box.clickedButton()
        box.deleteLater()
        if chosen is save:
            return self.save()
        return chosen is discard

    def _folder(self) -> str:
        if self._keeper.path is not None:
            return str(self._keeper.path.parent)
        recent = self._memory.recent
        if recent:
            return str(Path(recent[0]).parent)
        return QStandardPaths.writableLocation(QStandardPaths.StandardLocation.DocumentsLocation)

    def _say(self, words: str) -> None:
        self._window.say_trouble(words)


def _file_name(title: str) -> str:
    """A title as a file's name: no folders, nothing that a file system refuses."""
    kept = "".join(c if c.isalnum() or c in " -_.,()" else " " for c in title)
    name = " ".join(kept.split()).strip(". ")
    return name.removesuffix(SUFFIX)[:80] or "session"


def _not_saved(path: Path, error: BaseException) -> str:
    """Why a file was not written, without the system's own jargon."""
    if isinstance(error, OSError):
        return f"Not saved. {path.name}: {(error.strerror or str(error)).lower()}; choose another place."
    return f"Not saved. {error}"
