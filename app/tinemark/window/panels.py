"""How the panels stand around the diagram, and how they fold away.

The rail at the left has a tab for each. The diagram comes first: in a narrow window the system card and
the probe start folded, so that the diagram keeps at least 60 % of the width.
"""

from __future__ import annotations

from PySide6.QtCore import QObject, Qt, Signal
from PySide6.QtWidgets import QFrame, QScrollArea, QSplitter, QStackedWidget, QWidget

from tinemark.window.layout_memory import LayoutMemory
from tinemark.window.rail import Rail

ROOMY = 1560
DRAWER = 345
LEDGER_SHARE = 0.34
LEDGER_LEAST = 340
LEDGER_MOST = 620
PROBE_HEIGHT = 230

NAMES = {
    "system": ("System", "F3"),
    "picture": ("Picture", "F4"),
    "probe": ("Probe", "F6"),
    "ledger": ("Ledger", "F7"),
}


class Panels(QObject):
    """The arrangement: rail, drawer with system card and picture settings, diagram over probe, ledger over
    ratios.

    Signals
    -------
    opened : str, bool
        A panel has been opened or folded.
    """

    opened = Signal(str, bool)

    def __init__(
        self,
        memory: LayoutMemory,
        centre: QWidget,
        system: QWidget,
        picture: QWidget,
        probe: QWidget,
        ledger: QWidget,
        ratios: QWidget,
    ) -> None:
        super().__init__(centre)
        self._memory = memory
        self.rail = Rail()
        self.tabs = {name: self.rail.add(words, keys) for name, (words, keys) in NAMES.items()}
        for name, tab in self.tabs.items():
            tab.clicked.connect(lambda _=False, n=name: self.toggle(n))
        self._drawer = QStackedWidget()
        self._drawer.setMinimumWidth(270)
        self._in_drawer = {"system": _scrolled(system), "picture": _scrolled(picture)}
        for widget in self._in_drawer.values():
            self._drawer.addWidget(widget)
        self._probe = probe
        self.column = QSplitter(Qt.Orientation.Vertical)
        self.right = QSplitter(Qt.Orientation.Vertical)
        self.across = QSplitter(Qt.Orientation.Horizontal)
        for splitter, parts in (
            (self.column, (centre, probe)),
            (self.right, (ledger, ratios)),
            (self.across, (self._drawer, self.column, self.right)),
        ):
            splitter.setChildrenCollapsible(False)
            splitter.setHandleWidth(5)
            for part in parts:
                splitter.addWidget(part)
        self.column.setStretchFactor(0, 1)
        self.right.setStretchFactor(0, 3)
        self.right.setStretchFactor(1, 2)
        self.across.setStretchFactor(1, 1)
        self._open = {"system": False, "picture": False, "probe": False, "ledger": True}
        self._was_roomy = False
        self._gave_way = False
        self._apply()

    def arrange(self, width: int, height: int) -> None:
        """First arrangement for a window of this size, and whatever is remembered of the last one."""
        roomy = width >= ROOMY
        self._open["system"] = self._memory.flag("system", roomy) and roomy
        self._open["picture"] = self._memory.flag("picture", False) and roomy and not self._open["system"]
        self._open["ledger"] = self._memory.flag("ledger", True)
        self._apply()
        right = round(min(max(width * LEDGER_SHARE, LEDGER_LEAST), LEDGER_MOST))
        drawer = DRAWER if self._drawer_open() else 0
        self.across.setSizes([DRAWER, max(width - drawer - right - self.rail.width() - 10, 1), right])
        self.column.setSizes([max(height - PROBE_HEIGHT, 1), PROBE_HEIGHT])
        self.right.setSizes([round(height * 0.58), round(height * 0.42)])
        for name, splitter in self._splitters():
            kept = self._memory.bytes_of(f"{name}-{'roomy' if roomy else 'narrow'}")
            if not kept.isEmpty():
                splitter.restoreState(kept)

    def window_resized(self, width: int) -> None:
        """Fold the drawer when a roomy window becomes a narrow one; what is opened in it then stays."""
        if self._was_roomy and width < ROOMY and self._drawer_open():
            for name in self._in_drawer:
                self.set_open(name, False)
        self._was_roomy = width >= ROOMY

    def keep(self, width: int) -> None:
        """Remember the arrangement."""
        for name, state in self._open.items():
            if name != "probe":
                self._memory.keep_flag(name, state or (name == "ledger" and self._gave_way))
        for name, splitter in self._splitters():
            self._memory.keep_bytes(f"{name}-{'roomy' if width >= ROOMY else 'narrow'}", splitter.saveState())

    def _splitters(self) -> tuple[tuple[str, QSplitter], ...]:
        return (("across", self.across), ("column", self.column), ("right", self.right))

    def is_open(self, name: str) -> bool:
        """Whether a panel is open."""
        return self._open[name]

    def toggle(self, name: str) -> None:
        """Open a panel that is folded, fold one that is open."""
        self.set_open(name, not self._open[name])

    def set_open(self, name: str, state: bool) -> None:
        """Open or fold a panel. System card and picture settings share the drawer."""
        if self._open[name] == state:
            return
        self._open[name] = state
        if state and name in self._in_drawer:
            for other in self._in_drawer:
                if other != name and self._open[other]:
                    self._open[other] = False
                    self.opened.emit(other, False)
        self._give_way(name, state)
        was_open = self._drawer.isVisibleTo(self.across)
        self._apply()
        if self._drawer_open() and not was_open:
            self._make_room()
        self.opened.emit(name, state)

    def _give_way(self, name: str, state: bool) -> None:
        """In a narrow window drawer and ledger stand in turn, so that the diagram keeps its share: the ledger
        folds for the drawer and comes back after it; a ledger that is opened folds the drawer.
        """
        narrow = 0 < self.across.width() < ROOMY - self.rail.width()
        if name in self._in_drawer:
            if state and narrow and self._open["ledger"]:
                self._gave_way = True
                self._open["ledger"] = False
                self.opened.emit("ledger", False)
            elif self._gave_way and not self._drawer_open():
                self._gave_way = False
                self._open["ledger"] = True
                self.opened.emit("ledger", True)
        elif name == "ledger":
            self._gave_way = False
            if state and narrow:
                for other in self._in_drawer:
                    if self._open[other]:
                        self._open[other] = False
                        self.opened.emit(other, False)

    def _make_room(self) -> None:
        """Give the drawer its width, taken from the diagram."""
        drawer, centre, right = self.across.sizes()
        self.across.setSizes([DRAWER, max(drawer + centre - DRAWER, 1), right])

    def _drawer_open(self) -> bool:
        return any(self._open[name] for name in self._in_drawer)

    def _apply(self) -> None:
        for name, widget in self._in_drawer.items():
            if self._open[name]:
                self._drawer.setCurrentWidget(widget)
        self._drawer.setVisible(self._drawer_open())
        self._probe.setVisible(self._open["probe"])
        self.right.setVisible(self._open["ledger"])
        for name, tab in self.tabs.items():
            tab.setChecked(self._open[name])


def _scrolled(widget: QWidget) -> QWidget:
    """The panel in a scroll area, unless it is one or brings its own."""
    if isinstance(widget, QScrollArea) or widget.findChildren(QScrollArea):
        return widget
    area = QScrollArea()
    area.setFrameShape(QFrame.Shape.NoFrame)
    area.setWidgetResizable(True)
    area.setHorizontalScrollBarPolicy(Qt.ScrollBarPolicy.ScrollBarAlwaysOff)
    area.setWidget(widget)
    return area
