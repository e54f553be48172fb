"""A number that is shown rounded and grouped, and copied with all its digits."""

from __future__ import annotations

from PySide6.QtCore import Qt, Signal
from PySide6.QtGui import QAction, QContextMenuEvent, QGuiApplication, QKeyEvent, QKeySequence
from PySide6.QtWidgets import QLabel, QMenu, QWidget

from tinemark.window.faces import wear

THIN_SPACES = "\u2009\u202f\u2007\u200a"


def plain_number(shown: str) -> str:
    """A shown number as another program reads it: no grouping, an ordinary minus sign."""
    return shown.translate({ord(space): None for space in THIN_SPACES} | {0x2212: "-"})


class NumberLabel(QLabel):
    """Selectable monospaced number.

    Copying the whole gives every digit that is known; copying a part gives that part without
    its grouping spaces. It takes the keyboard's focus, so that this works without a mouse.
    """

    copied = Signal(str)

    def __init__(self, name: str = "", parent: QWidget | None = None) -> None:
        super().__init__(parent)
        self._full = ""
        self._name = name
        self.setTextFormat(Qt.TextFormat.PlainText)
        self.setTextInteractionFlags(
            Qt.TextInteractionFlag.TextSelectableByMouse | Qt.TextInteractionFlag.TextSelectableByKeyboard
        )
        self.setFocusPolicy(Qt.FocusPolicy.StrongFocus)
        self.setAccessibleName(name)
        self._dress("number")

    @property
    def full(self) -> str:
        """The text that copying the whole gives."""
        return self._full

    def show_number(self, shown: str, full: str = "") -> None:
        """Show `shown`; copying gives `full`, or `shown` without its grouping where `full` is empty."""
        self._full = full or plain_number(shown)
        self.setText(shown)
        self.setToolTip(self._full if self._full != plain_number(shown) else "")
        self.setAccessibleName(f"{self._name} {self._full}".strip())
        if self._face != "number":
            self._dress("number")

    def show_words(self, words: str) -> None:
        """Show why there is no number, in the face of words."""
        self._full = words
        self.setText(words)
        self.setToolTip("")
        self.setAccessibleName(f"{self._name} {words}".strip())
        self._dress("words")

    def _dress(self, face: str) -> None:
        # By font alone: a style sheet that is applied anew would put an older font back.
        self._face = face
        wear(self, face)

    def copy(self) -> None:
        """Put the selected part, or all digits, on the clipboard."""
        part = self.selectedText()
        text = plain_number(part) if part and part != self.text() else self._full
        QGuiApplication.clipboard().setText(text)
        self.copied.emit(text)

    def keyPressEvent(self, event: QKeyEvent) -> None:
        """Copy by the platform's own key."""
        if event.matches(QKeySequence.StandardKey.Copy):
            self.copy()
            event.accept()
            return
        super().keyPressEvent(event)

    def contextMenuEvent(self, event: QContextMenuEvent) -> None:
        """Offer the copies in words."""
        menu = QMenu(self)
        menu.setAttribute(Qt.WidgetAttribute.WA_DeleteOnClose)
        menu.addAction(self._action(menu))
        menu.popup(event.globalPos())

    def _action(self, menu: QMenu) -> QAction:
        part = self.selectedText()
        words = "Copy the selected digits" if part and part != self.text() else "Copy all digits"
        action = QAction(words, menu)
        action.triggered.connect(self.copy)
        return action
