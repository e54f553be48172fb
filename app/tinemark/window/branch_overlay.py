"""What the diagram keeps of its branches: the curves, and what of them the pointer is on."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from fractions import Fraction

from PySide6.QtCore import QPointF, QRectF, QSize, Qt
from PySide6.QtGui import QPainter, QPixmap

from tinemark.density.request import View
from tinemark.onsets.results import Kind
from tinemark.window import diagram_paint as paint
from tinemark.window.branch_curves import BranchCurves, CyclePoint, Spot, cycle_words, spot_words
from tinemark.window.marks import Mark
from tinemark.window.theme import Theme
from tinemark.window.view_navigation import unit_x


class BranchOverlay:
    """Curves of one view over the diagram of another."""

    def __init__(self) -> None:
        self.curves: BranchCurves | None = None
        self.point: CyclePoint | None = None
        self.spot: Spot | None = None
        self._drawn: tuple[object, ...] = ()
        self._layer = QPixmap()

    def show(self, curves: BranchCurves | None) -> None:
        """Have other curves, or none."""
        self.curves, self.point, self.spot = curves, None, None
        self._drawn, self._layer = (), QPixmap()

    def hover(self, view: View, plot: QRectF, position: QPointF | None) -> bool:
        """Find what a position is on; True where that has changed. An onset's sign comes before a curve."""
        before = self.point, self.spot
        self.point = self.spot = None
        if self.curves is not None and position is not None and plot.contains(position):
            self.spot = self.curves.spot_at(view, plot, position)
            if self.spot is None:
                self.point = self.curves.cycle_at(view, plot, position)
        return (self.point, self.spot) != before

    def sign(self) -> tuple[Kind, Fraction, Fraction] | None:
        """Kind, parameter and observed quantity of the onset's sign that the pointer is on."""
        if self.curves is None or self.spot is None:
            return None
        return self.spot.kind, *self.curves.value_at(self.spot.across, self.spot.up)

    def paint(self, painter: QPainter, theme: Theme, view: View, plot: QRectF, marks: Sequence[Mark]) -> None:
        """Draw the curves, and the onsets on them that have no mark."""
        if self.curves is None:
            return
        self._paint_curves(painter, theme, view, plot)
        if self.point is not None:
            self.curves.paint(painter, theme, view, plot, self.point.piece)
        taken = tuple(
            plot.left() + unit_x(view, mark.value) * plot.width()
            for mark in marks
            if view.left <= mark.value <= view.right
        )
        self.curves.paint_spots(painter, theme, view, plot, taken)

    def _paint_curves(self, painter: QPainter, theme: Theme, view: View, plot: QRectF) -> None:
        """The curves, from a layer that is drawn anew only when something has changed: thousands of dashes
        take 20 ms, and the diagram is painted for every move of the pointer.
        """
        assert self.curves is not None
        ratio = painter.device().devicePixelRatioF()
        drawn = (self.curves, theme.name, view, plot.getRect(), ratio)
        if drawn != self._drawn:
            self._drawn = drawn
            self._layer = QPixmap((plot.size() * ratio).toSize() + QSize(1, 1))
            self._layer.setDevicePixelRatio(ratio)
            self._layer.fill(Qt.GlobalColor.transparent)
            brush = QPainter(self._layer)
            brush.translate(-plot.topLeft())
            self.curves.paint(brush, theme, view, plot)
            brush.end()
        painter.drawPixmap(plot.topLeft(), self._layer)

    def words(self, place_words: Callable[[Fraction, Fraction], str]) -> str:
        """What the pointer is on; empty away from every curve."""
        if self.curves is None:
            return ""
        if self.spot is not None:
            at = self.curves.value_at(self.spot.across, self.spot.up)
            return f"{spot_words(self.spot)}\n{place_words(*at)}"
        if self.point is not None:
            at = self.curves.value_at(self.point.across, self.point.up)
            return f"{cycle_words(self.point)}\n{place_words(*at)}"
        return ""

    def paint_words(
        self, painter: QPainter, theme: Theme, view: View, plot: QRectF, place_words: Callable[..., str]
    ) -> None:
        """Write them beside what they are about."""
        words = self.words(place_words)
        if not words or self.curves is None:
            return
        about = self.spot or self.point
        assert about is not None
        place = self.curves.transform(view, plot).map(QPointF(about.across, about.up))
        paint.paint_tag(painter, theme, plot, place + QPointF(12, -12), words)
