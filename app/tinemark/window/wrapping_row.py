"""A row of buttons that goes on in a second line in a narrow panel, instead of forcing the panel wide."""

from __future__ import annotations

from PySide6.QtCore import QMargins, QRect, QSize, Qt
from PySide6.QtWidgets import QLayout, QLayoutItem


class WrappingRow(QLayout):
    """Lays its widgets out from left to right, line by line, each as large as it wants to be."""

    def __init__(self, margins: QMargins, spacing: int) -> None:
        super().__init__()
        self._items: list[QLayoutItem] = []
        self.setContentsMargins(margins)
        self.setSpacing(spacing)

    def addItem(self, item: QLayoutItem) -> None:
        """Add at the end."""
        self._items.append(item)

    def count(self) -> int:
        """Number of items."""
        return len(self._items)

    def itemAt(self, place: int) -> QLayoutItem | None:  # type: ignore[override]
        """The item at a place, None beyond the last."""
        return self._items[place] if 0 <= place < len(self._items) else None

    def takeAt(self, place: int) -> QLayoutItem | None:  # type: ignore[override]
        """Remove and return an item."""
        return self._items.pop(place) if 0 <= place < len(self._items) else None

    def expandingDirections(self) -> Qt.Orientation:
        """None."""
        return Qt.Orientation(0)

    def hasHeightForWidth(self) -> bool:
        """More lines in less width."""
        return True

    def heightForWidth(self, width: int) -> int:
        """Height of all lines in a width."""
        return self._place(QRect(0, 0, width, 0), move=False)

    def setGeometry(self, box: QRect) -> None:
        """Place the widgets."""
        super().setGeometry(box)
        self._place(box, move=True)

    def sizeHint(self) -> QSize:
        """All in one line."""
        sizes = [item.sizeHint() for item in self._items]
        margins = self.contentsMargins()
        width = sum(size.width() for size in sizes) + self.spacing() * max(0, len(sizes) - 1)
        height = max((size.height() for size in sizes), default=0)
        return QSize(width + margins.left() + margins.right(), height + margins.top() + margins.bottom())

    def minimumSize(self) -> QSize:
        """The widest widget alone."""
        margins = self.contentsMargins()
        least = QSize(0, 0)
        for item in self._items:
            least = least.expandedTo(item.minimumSize())
        return least + QSize(margins.left() + margins.right(), margins.top() + margins.bottom())

    def _place(self, box: QRect, *, move: bool) -> int:
        inner = box.marginsRemoved(self.contentsMargins())
        x, y, line = inner.left(), inner.top(), 0
        for item in self._items:
            size = item.sizeHint()
            if line and x + size.width() > inner.right() + 1:
                x, y, line = inner.left(), y + line + self.spacing(), 0
            if move:
                item.setGeometry(QRect(x, y, size.width(), size.height()))
            x += size.width() + self.spacing()
            line = max(line, size.height())
        return y + line - box.top() + self.contentsMargins().bottom()
