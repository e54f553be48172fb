"""The in-app guide: pages at the left, the page at the right, a search across all of them."""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path

from PySide6.QtCore import QEvent, Qt
from PySide6.QtGui import QKeyEvent, QKeySequence, QShortcut, QTextCursor, QTextDocument
from PySide6.QtWidgets import (
    QLabel,
    QLineEdit,
    QListWidget,
    QListWidgetItem,
    QSplitter,
    QTextBrowser,
    QVBoxLayout,
    QWidget,
)

from tinemark.window.faces import FaceKeeper
from tinemark.window.guide_pages import GuidePage, guide_pages
from tinemark.window.guide_style import style_document
from tinemark.window.theme import current_theme

PLACE = Qt.ItemDataRole.UserRole


class GuidePanel(QWidget):
    """Shows the guide.

    Parameters
    ----------
    keys
        (menu, what it does, keys) of every action, for the page of keys.
    folder
        Where the pages lie; None for those that ship with the program.
    """

    def __init__(
        self,
        parent: QWidget | None = None,
        *,
        keys: Sequence[tuple[str, str, str]] = (),
        folder: Path | None = None,
    ) -> None:
        super().__init__(parent)
        self.setWindowTitle("Guide")
        self.setAccessibleName("Guide")
        self.pages: tuple[GuidePage, ...] = guide_pages(keys, folder)
        self.search = QLineEdit()
        self.search.setPlaceholderText("Find in the guide")
        self.search.setAccessibleName("Find in the guide")
        self.search.setClearButtonEnabled(True)
        self.search.textChanged.connect(self._search)
        self.search.returnPressed.connect(self._next_find)
        self.list = QListWidget()
        self.list.setAccessibleName("Pages of the guide")
        self.list.setWordWrap(True)
        self.list.setSpacing(2)
        self.list.currentItemChanged.connect(self._page_chosen)
        self.nothing = QLabel("No page has these words.\nClear the field to see all pages.")
        self.nothing.setWordWrap(True)
        self.nothing.setProperty("rank", "second")
        self.nothing.hide()
        self.browser = QTextBrowser()
        self.browser.setAccessibleName("Page of the guide")
        self.browser.setOpenLinks(False)
        self.browser.setTabChangesFocus(True)
        self.browser.setFrameShape(QTextBrowser.Shape.NoFrame)
        left = QWidget()
        side = QVBoxLayout(left)
        side.setContentsMargins(8, 8, 4, 8)
        side.setSpacing(6)
        side.addWidget(self.search)
        side.addWidget(self.nothing)
        side.addWidget(self.list, 1)
        self._parts = QSplitter(Qt.Orientation.Horizontal)
        self._parts.setChildrenCollapsible(False)
        self._parts.addWidget(left)
        self._parts.addWidget(self.browser)
        self._parts.setStretchFactor(0, 0)
        self._parts.setStretchFactor(1, 1)
        self._parts.setSizes([230, 600])
        outer = QVBoxLayout(self)
        outer.setContentsMargins(0, 0, 0, 0)
        outer.addWidget(self._parts)
        find = QShortcut(QKeySequence(QKeySequence.StandardKey.Find), self)
        find.setContext(Qt.ShortcutContext.WidgetWithChildrenShortcut)
        find.activated.connect(self._go_to_search)
        self._fill()
        self._faces = FaceKeeper(self, self._redress)

    def _fill(self) -> None:
        for place, page in enumerate(self.pages):
            item = QListWidgetItem(page.title)
            item.setData(PLACE, place)
            self.list.addItem(item)
        if self.pages:
            self.list.setCurrentRow(0)
        else:
            self.browser.setPlainText("The pages of the guide are missing. Install Tinemark again.")

    def show_page(self, name: str) -> bool:
        """Show the page of a name (its file's stem); False when there is none."""
        for place, page in enumerate(self.pages):
            if page.name == name:
                self.list.setCurrentRow(place)
                return True
        return False

    @property
    def current_page(self) -> GuidePage | None:
        """The page shown."""
        item = self.list.currentItem()
        return self.pages[int(item.data(PLACE))] if item is not None else None

    def _page_chosen(self) -> None:
        page = self.current_page
        if page is None:
            return
        self.browser.setMarkdown(page.text)
        style_document(self.browser.document(), current_theme())
        self.browser.moveCursor(QTextCursor.MoveOperation.Start)
        self._mark_find()

    def _search(self, words: str) -> None:
        wanted = words.strip().lower()
        hits = []
        for place in range(self.list.count()):
            item = self.list.item(place)
            page = self.pages[int(item.data(PLACE))]
            found = wanted in page.text.lower()
            item.setHidden(not found)
            if found:
                hits.append(place)
        self.nothing.setVisible(not hits)
        if hits and self.list.currentRow() not in hits:
            self.list.setCurrentRow(hits[0])
        else:
            self.browser.moveCursor(QTextCursor.MoveOperation.Start)
            self._mark_find()

    def _mark_find(self) -> None:
        words = self.search.text().strip()
        if words:
            self.browser.find(words)

    def _next_find(self) -> None:
        words = self.search.text().strip()
        if words and not self.browser.find(words):
            self.browser.moveCursor(QTextCursor.MoveOperation.Start)
            self.browser.find(words, QTextDocument.FindFlag(0))

    def _go_to_search(self) -> None:
        self.search.setFocus(Qt.FocusReason.ShortcutFocusReason)
        self.search.selectAll()

    def keyPressEvent(self, event: QKeyEvent) -> None:
        """Escape closes the guide where it is a window of its own."""
        if event.key() == Qt.Key.Key_Escape and self.isWindow():
            self.close()
            return
        super().keyPressEvent(event)

    def changeEvent(self, event: QEvent) -> None:
        """Dress the page anew in another theme or font."""
        super().changeEvent(event)
        if event.type() == QEvent.Type.PaletteChange and hasattr(self, "_parts"):
            self._redress()

    def _redress(self) -> None:
        place = self.browser.verticalScrollBar().value()
        self._page_chosen()
        self.browser.verticalScrollBar().setValue(place)
