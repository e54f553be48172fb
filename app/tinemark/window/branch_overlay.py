"""What the diagram keeps of its branches: the curves, and what of them the pointer is on."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from fractions import Fraction

from PySide6.QtCore import QPointF, QRectF
from PySide6.QtGui import QPainter

from tinemark.density.request import View
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

    def show(self, curves: BranchCurves | None) -> None:
        """Have other curves, or none."""
        self.curves, self.point, self.spot = curves, None, None

    def hover(self, view: View, plot: QRectF, position: QPointF | None) -> bool:
        """Find what a position is on; True where that has changed. An onset's sign comes before a curve."""
        before = self.point, self.spot
        self.point = self.spot = None
        if self.curves is not None and position is not None and plot.contains(position):
            self.spot = self.curves.spot_at(view, plot, position)
            if self.spot is None:
                self.point = self.curves.cycle_at(view, plot, position)
        return (self.point, self.spot) != before

    def snapped(self, parameter: Fraction, observed: Fraction) -> tuple[Fraction, Fraction]:
        """The place of the sign that the pointer is on, else the place given."""
        if self.curves is None or self.spot is None:
            return parameter, observed
        return self.curves.value_at(self.spot.across, self.spot.up)

    def paint(self, painter: QPainter, theme: Theme, view: View, plot: QRectF, marks: Sequence[Mark]) -> None:
        """Draw the curves, and the onsets on them that have no mark."""
        if self.curves is None:
            return
        self.curves.paint(painter, theme, view, plot, self.point.piece if self.point else -1)
        taken = tuple(
            plot.left() + unit_x(view, mark.value) * plot.width()
            for mark in marks
            if view.left <= mark.value <= view.right
        )
        self.curves.paint_spots(painter, theme, view, plot, taken)

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
