"""Faces that keep their size relative to the interface's font, also when it changes under an open window."""

from __future__ import annotations

from collections.abc import Callable

from PySide6.QtCore import QEvent, QObject, QTimer
from PySide6.QtGui import QFont
from PySide6.QtWidgets import QWidget

from tinemark.window.theme import heading_font, mono_font, small_font

FACES: dict[str, Callable[[], QFont]] = {
    "number": mono_font,
    "words": lambda: small_font(1.0),
    "small": small_font,
    "heading": heading_font,
}
_FACE = "tinemark_face"


def wear(widget: QWidget, face: str) -> None:
    """Set a widget in one of `FACES`."""
    widget.setProperty(_FACE, face)
    font = FACES[face]()
    font.setFamilies([font.family()])  # a family left unset would stay the older one
    widget.setFont(font)


class FaceKeeper(QObject):
    """Sets every widget below a panel anew that wears a face, when the interface's font or style has changed.

    Qt hands a changed font on only to widgets with none of their own, and a new style sheet puts back
    the font that a widget had when it was first polished; so this runs after both are through.

    Parameters
    ----------
    root
        The panel.
    after
        What else depends on fonts: measured widths and heights.
    """

    def __init__(self, root: QWidget, after: Callable[[], None] | None = None) -> None:
        super().__init__(root)
        self._root, self._after, self._waiting = root, after, False
        root.installEventFilter(self)

    def eventFilter(self, watched: QObject, event: QEvent) -> bool:
        """Listen, and let everything pass."""
        kinds = (QEvent.Type.ApplicationFontChange, QEvent.Type.StyleChange, QEvent.Type.FontChange)
        if event.type() in kinds and watched is self._root and not self._waiting:
            self._waiting = True
            QTimer.singleShot(0, self, self.redress)
        return False

    def redress(self) -> None:
        """Set the faces anew now."""
        self._waiting = False
        for widget in self._root.findChildren(QWidget):
            face = widget.property(_FACE)
            if face:
                wear(widget, str(face))
        if self._after is not None:
            self._after()
