"""Small plots in the panels' own dress: no menu, no buttons, few ticks, all colours from the theme."""

from __future__ import annotations

import math
from collections.abc import Sequence

import pyqtgraph as pg
from PySide6.QtCore import QEvent, Qt
from PySide6.QtGui import QColor, QFontMetricsF, QGuiApplication, QPen
from PySide6.QtWidgets import QGraphicsGridLayout, QSizePolicy

from tinemark.window.theme import Theme, color, current_theme, small_font

PLAIN = {"pen": None, "symbol": None, "antialias": False}


class PanelAxis(pg.AxisItem):
    """An axis with few, round ticks; whole numbers only where `whole` is set.

    Parameters
    ----------
    side
        "left" or "bottom".
    whole
        The quantity counts something (a level, a step), so no tick falls between two integers.
    """

    def __init__(self, side: str, *, whole: bool = False) -> None:
        super().__init__(side)
        self._whole = whole
        self._side = side
        self.enableAutoSIPrefix(False)
        self.setStyle(tickLength=-4, tickTextOffset=5, autoExpandTextSpace=True, hideOverlappingLabels=False)

    def tickValues(self, minVal: float, maxVal: float, size: float) -> list[tuple[float, list[float]]]:
        """Ticks as pyqtgraph asks for them: one level of (spacing, values)."""
        low, high = sorted((float(minVal), float(maxVal)))
        if not (math.isfinite(low) and math.isfinite(high)) or high <= low:
            return []
        metrics = QFontMetricsF(small_font())
        room = metrics.height() * 2.2 if self._side == "left" else metrics.horizontalAdvance("0.0000") * 1.5
        return [round_ticks(low, high, max(2, int(size / room)), whole=self._whole)]

    def tickStrings(self, values: Sequence[float], scale: float, spacing: float) -> list[str]:  # noqa: ARG002
        """Labels with just the decimals that the spacing needs."""
        if not values:
            return []
        if spacing and (max(abs(v) for v in values) >= 1e6 or spacing < 1e-6):
            return [f"{v:.3g}" for v in values]
        decimals = max(0, -math.floor(math.log10(spacing) + 1e-9)) if spacing > 0 else 0
        return [_with_minus(f"{v:.{decimals}f}") for v in values]


def round_ticks(low: float, high: float, most: int, *, whole: bool = False) -> tuple[float, list[float]]:
    """Spacing and places of about `most` ticks at most, 1, 2 or 5 times a power of ten apart."""
    raw = (high - low) / max(1, most)
    power = 10.0 ** math.floor(math.log10(raw))
    spacing = next((m * power for m in (1.0, 2.0, 5.0) if m * power >= raw * 0.85), 10 * power)
    if whole:
        spacing = max(1.0, float(round(spacing)))
    first = math.ceil(low / spacing - 1e-9)
    last = math.floor(high / spacing + 1e-9)
    return spacing, [n * spacing for n in range(first, last + 1)]


def _with_minus(text: str) -> str:
    """A true minus sign, and no minus before a zero."""
    if text.startswith("-"):
        return text[1:] if not text.strip("-0.") else "\u2212" + text[1:]
    return text


class PlotFrame(pg.GraphicsWidget):
    """Box and two axes, put together from pyqtgraph's parts.

    Its own `PlotItem` brings some hundred hidden widgets of a menu that nobody opens here, and each of
    them is dressed anew whenever the theme changes.
    """

    def __init__(self, axes: dict[str, PanelAxis]) -> None:
        super().__init__()
        self.vb = pg.ViewBox(enableMenu=False, enableMouse=False)
        self._axes = axes
        self._items: list[pg.PlotDataItem] = []
        self._used = 0
        grid = QGraphicsGridLayout()
        grid.setContentsMargins(1, 1, 1, 1)
        grid.setSpacing(0)
        self.setLayout(grid)
        grid.addItem(self.vb, 0, 1)
        for side, (row, column) in (("left", (0, 0)), ("bottom", (1, 1))):
            axis = axes[side]
            axis.linkToView(self.vb)
            axis.setZValue(0.5)
            grid.addItem(axis, row, column)
        grid.setRowStretchFactor(0, 100)
        grid.setColumnStretchFactor(1, 100)

    def getAxis(self, side: str) -> PanelAxis:
        """The axis "left" or "bottom"."""
        return self._axes[side]

    def plot(self, across: object, up: object, **look: object) -> pg.PlotDataItem:
        """Draw a curve or points over what is drawn, as `pyqtgraph.PlotDataItem` takes them."""
        self.make_items(self._used + 1)
        item = self._items[self._used]
        self._used += 1
        item.setData(across, up, **(PLAIN | look))
        item.setVisible(True)
        return item

    def make_items(self, count: int) -> None:
        """Have items for as many curves."""
        while len(self._items) < count:
            item = pg.PlotDataItem()
            item.setVisible(False)
            self._items.append(item)
            self.vb.addItem(item)

    def listDataItems(self) -> list[pg.PlotDataItem]:
        """What is drawn, in order."""
        return self._items[: self._used]

    def clear(self) -> None:
        """Take everything away that was drawn. The items are kept for what is drawn next: making one takes
        several times as long as giving it other data.
        """
        for item in self.listDataItems():
            item.setVisible(False)
        self._used = 0


class PanelPlot(pg.GraphicsView):
    """A plot that is looked at, not operated: it is sized by its data and never scrolls away.

    Subclasses or owners redraw in `redress`, which runs after every change of theme or font.
    """

    def __init__(self, *, across: str, up: str, whole_across: bool = False, name: str = "") -> None:
        super().__init__()
        self.plotItem = PlotFrame(
            {"left": PanelAxis("left"), "bottom": PanelAxis("bottom", whole=whole_across)}
        )
        self._labels = {"left": up, "bottom": across}
        self._dress: tuple[str, str] = ("", "")
        self.setAccessibleName(name)
        self.setSizePolicy(QSizePolicy.Policy.Expanding, QSizePolicy.Policy.Expanding)
        self.enableMouse(False)
        self.setCentralItem(self.plotItem)
        self.setFrameShape(self.Shape.NoFrame)
        self.setFocusPolicy(Qt.FocusPolicy.NoFocus)
        self.plotItem.setContentsMargins(2, 6, 10, 2)
        self.redress()

    def set_range(self, across: tuple[float, float], up: tuple[float, float], padding: float) -> None:
        """Show these ranges, with `padding` as a share of each beside them."""
        self.plotItem.vb.setRange(xRange=across, yRange=up, padding=padding)

    def set_labels(self, *, across: str, up: str) -> None:
        """Name the axes."""
        labels = {"left": up, "bottom": across}
        if labels != self._labels:
            self._labels = labels
            self._label_axes(current_theme())

    def redress(self) -> None:
        """Take every colour and font from the theme that is on, where they are not worn already: Qt tells of
        one change several times.
        """
        theme = current_theme()
        dress = (theme.name, small_font().toString())
        if dress == self._dress:
            return
        self._dress = dress
        self.setBackground(theme.plot)
        font = small_font(0.88)
        for side in ("left", "bottom"):
            axis = self.plotItem.getAxis(side)
            axis.setPen(line_pen(theme.edge))
            axis.setTickPen(line_pen(theme.edge))
            axis.setTextPen(QColor(theme.muted))
            axis.setTickFont(font)
        self._label_axes(theme)

    def _label_axes(self, theme: Theme) -> None:
        size = f"{max(6.0, small_font(0.9).pointSizeF()):.1f}pt"
        for side, text in self._labels.items():
            self.plotItem.getAxis(side).setLabel(text, color=theme.muted, **{"font-size": size})

    def changeEvent(self, event: QEvent) -> None:
        """Follow the theme and the font."""
        super().changeEvent(event)
        if event.type() in (QEvent.Type.PaletteChange, QEvent.Type.FontChange) and hasattr(self, "_labels"):
            self.redress()

    def wheelEvent(self, event: object) -> None:
        """Leave the wheel to the panel around the plot."""
        event.ignore()  # type: ignore[attr-defined]


def line_pen(token: str, width: float = 1.0, *, dashed: bool = False, alpha: float = 1.0) -> QPen:
    """A pen of constant width on screen, in device-independent pixels, in a token's colour."""
    pen = QPen(color(token, alpha))
    # A cosmetic pen counts the screen's own pixels.
    pen.setWidthF(width * QGuiApplication.instance().devicePixelRatio())
    pen.setCosmetic(True)
    pen.setCapStyle(Qt.PenCapStyle.FlatCap)
    if dashed:
        pen.setDashPattern([4.0, 3.0])
    return pen
