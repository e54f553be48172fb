"""The line at the foot of the window: coordinates, words, steps drawn, progress and Cancel."""

from __future__ import annotations

from PySide6.QtCore import Qt, Signal
from PySide6.QtGui import QPainter, QPaintEvent
from PySide6.QtWidgets import QHBoxLayout, QLabel, QProgressBar, QPushButton, QWidget

from tinemark.window.elided_label import ElidedLabel
from tinemark.window.theme import color, current_theme, mono_font

BAR_PX = 120


class StatusLine(QWidget):
    """What is under the pointer, what has just happened, and what is being worked on."""

    cancel_wanted = Signal()

    def __init__(self, parent: QWidget | None = None) -> None:
        super().__init__(parent)
        self.coordinates = QLabel()
        self.coordinates.setAccessibleName("Coordinates")
        self.coordinates.setFont(mono_font(0.92))
        self.words = ElidedLabel()
        self.words.setTextInteractionFlags(Qt.TextInteractionFlag.TextSelectableByMouse)
        self.words.setAccessibleName("Message")
        self.steps = QLabel()
        self.steps.setAccessibleName("Steps drawn")
        self.steps.setProperty("rank", "second")
        self.bar = QProgressBar()
        self.bar.setAccessibleName("Progress")
        self.bar.setTextVisible(False)
        self.bar.setFixedWidth(BAR_PX)
        self.cancel = QPushButton("Cancel")
        self.cancel.setToolTip("Stop the work under way (Ctrl+.)")
        self.cancel.setFocusPolicy(Qt.FocusPolicy.TabFocus)
        self.cancel.clicked.connect(self.cancel_wanted)
        row = QHBoxLayout(self)
        row.setContentsMargins(12, 3, 10, 4)
        row.setSpacing(14)
        row.addWidget(self.coordinates)
        row.addWidget(self.words, 1)
        row.addWidget(self.steps)
        row.addWidget(self.bar)
        row.addWidget(self.cancel)
        # The line keeps its height while the button comes and goes.
        self.setMinimumHeight(self.cancel.sizeHint().height() + 7)
        self.show_idle()

    def show_coordinates(self, words: str) -> None:
        """What the pointer is on; empty outside the plot."""
        self.coordinates.setText(words)
        # It only grows, so that the words beside it do not dance with the pointer.
        self.coordinates.setMinimumWidth(
            max(self.coordinates.minimumWidth(), self.coordinates.sizeHint().width())
        )

    def forget_width(self) -> None:
        """Let the coordinates' place shrink again, after the view has changed."""
        self.coordinates.setMinimumWidth(0)

    def show_words(self, words: str, rank: str = "") -> None:
        """A sentence; `rank` is "", "warning" or "error"."""
        self.words.setProperty("rank", rank)
        self.words.style().unpolish(self.words)
        self.words.style().polish(self.words)
        self.words.set_words(words)

    def forget_trouble(self) -> None:
        """Take a warning or an error away: what it was about is no longer in view."""
        if self.words.property("rank") in ("warning", "error"):
            self.show_words("")

    def show_steps(self, steps: int, what: str = "steps") -> None:
        """How many steps, or samples, the picture is made of."""
        self.steps.setText(f"{counted(steps)} {what} drawn" if steps else "")

    def show_busy(self, words: str, share: float | None) -> None:
        """Work under way; `share` is None where it is not known."""
        self.show_words(words)
        if share is None:
            self.bar.setRange(0, 0)
        else:
            self.bar.setRange(0, 1000)
            self.bar.setValue(round(1000 * share))
        self.bar.show()
        self.cancel.show()

    def show_idle(self) -> None:
        """Nothing is being worked on."""
        self.bar.hide()
        self.bar.setRange(0, 1000)
        self.cancel.hide()

    def paintEvent(self, event: QPaintEvent) -> None:  # noqa: ARG002, D102
        theme = current_theme()
        painter = QPainter(self)
        painter.fillRect(self.rect(), color(theme.surface))
        painter.fillRect(0, 0, self.width(), 1, color(theme.line))
        painter.end()


def counted(steps: int) -> str:
    """A large count in words: 3.2 million."""
    for size, word in ((10**12, "trillion"), (10**9, "billion"), (10**6, "million")):
        if steps >= size:
            return f"{steps / size:.1f} {word}"
    return f"{steps:,}".replace(",", "\N{THIN SPACE}")
