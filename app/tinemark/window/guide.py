"""The guide's own window, one for each main window."""

from __future__ import annotations

from PySide6.QtCore import Qt
from PySide6.QtGui import QFontMetrics
from PySide6.QtWidgets import QWidget

from tinemark.window.action_list import key_page
from tinemark.window.guide_panel import GuidePanel


def open_guide(parent: QWidget, page: str = "") -> GuidePanel:
    """Show the guide beside its window, or raise it where it is open already.

    Parameters
    ----------
    page
        Stem of the page's file to open at; empty for the one that was read last.
    """
    panel = parent.findChild(GuidePanel)
    if panel is None:
        panel = GuidePanel(parent, keys=key_page())
        panel.setWindowFlag(Qt.WindowType.Window)
        em = QFontMetrics(panel.font()).height()
        panel.resize(56 * em, 40 * em)
    if page:
        panel.show_page(page)
    panel.show()
    panel.raise_()
    panel.activateWindow()
    return panel
