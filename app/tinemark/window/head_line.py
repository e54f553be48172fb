"""The line above the diagram: what is shown, the three tools, and the way through the views."""

from __future__ import annotations

from PySide6.QtCore import QSize, Qt, Signal
from PySide6.QtGui import QAction, QResizeEvent
from PySide6.QtWidgets import QButtonGroup, QHBoxLayout, QToolButton, QWidget

from tinemark.window.diagram import TOOL_WORDS, TOOLS
from tinemark.window.elided_label import ElidedLabel
from tinemark.window.icons import stroke_icon
from tinemark.window.theme import Theme, heading_font

TOOL_TIPS = {
    "pick": "A click near a split refines it to a proved value (1)",
    "read": "A click reads the parameter by eye, half a pixel each way (2; or Shift with a click)",
    "probe": "A click shows the orbit at that parameter value (3; or Ctrl with a click)",
}

WORDS_FROM = 600


class HeadLine(QWidget):
    """Title at the left, tools and steps at the right."""

    tool_chosen = Signal(str)

    def __init__(self, parent: QWidget | None = None) -> None:
        super().__init__(parent)
        self.title = ElidedLabel(greedy=False)
        self.title.setFont(heading_font())
        self.subtitle = ElidedLabel()
        self.subtitle.setProperty("rank", "second")
        self._row = QHBoxLayout(self)
        self._row.setContentsMargins(14, 6, 12, 2)
        self._row.setSpacing(3)
        self._row.addWidget(self.title)
        self._row.addSpacing(8)
        self._row.addWidget(self.subtitle, 1)
        self._tools: dict[str, QToolButton] = {}
        group = QButtonGroup(self)
        for tool in TOOLS:
            button = QToolButton()
            button.setText(f" {TOOL_WORDS[tool]}")
            button.setCheckable(True)
            button.setToolButtonStyle(Qt.ToolButtonStyle.ToolButtonTextBesideIcon)
            button.setIconSize(QSize(18, 18))
            button.setToolTip(TOOL_TIPS[tool])
            button.setAccessibleName(f"Tool: {TOOL_WORDS[tool]}")
            button.clicked.connect(lambda _=False, name=tool: self.tool_chosen.emit(name))
            group.addButton(button)
            self._row.addWidget(button)
            self._tools[tool] = button
        self._row.addSpacing(10)
        self._steps: list[tuple[str, QToolButton]] = []

    def add_step(self, icon: str, action: QAction) -> None:
        """A button for one of the steps through the views."""
        button = QToolButton()
        button.setDefaultAction(action)
        button.setToolButtonStyle(Qt.ToolButtonStyle.ToolButtonIconOnly)
        button.setIconSize(QSize(18, 18))
        button.setAccessibleName(action.text().replace("&", ""))
        self._row.addWidget(button)
        self._steps.append((icon, button))

    def show_title(self, title: str, subtitle: str) -> None:
        """Name the system and the diagram."""
        self.title.set_words(title)
        self.subtitle.set_words(subtitle)

    def show_tool(self, tool: str) -> None:
        """Show which tool is in hand."""
        self._tools[tool].setChecked(True)

    def resizeEvent(self, event: QResizeEvent) -> None:
        """In a narrow line the tools go by their signs alone."""
        super().resizeEvent(event)
        narrow = event.size().width() < WORDS_FROM
        style = (
            Qt.ToolButtonStyle.ToolButtonIconOnly if narrow else Qt.ToolButtonStyle.ToolButtonTextBesideIcon
        )
        for button in self._tools.values():
            button.setToolButtonStyle(style)

    def wear(self, theme: Theme) -> None:
        """Draw the signs in the theme's ink."""
        for tool, button in self._tools.items():
            button.setIcon(stroke_icon(tool, theme))
        for icon, button in self._steps:
            button.defaultAction().setIcon(stroke_icon(icon, theme))
