"""Ledger rows as marks on the diagram: a vertical line, a sign in the lane above the plot, a short label
where it fits.

The kind is told by the sign's shape; how far a value can be relied on by its filling and the line's style; a
jump by an arrowhead below the sign and in words. Nothing is told by colour alone.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction

from PySide6.QtCore import QPointF, QRectF, Qt
from PySide6.QtGui import QFontMetricsF, QPainter, QPainterPath, QPen, QPolygonF

from tinemark.density.request import View
from tinemark.onsets.results import Kind
from tinemark.window.signs import kind_path
from tinemark.window.theme import Theme, color
from tinemark.window.view_navigation import unit_x, unit_y

SIGN = 4.5
NEAR = 5.0

LINE_STYLES = {
    "proved": Qt.PenStyle.SolidLine,
    "estimated": Qt.PenStyle.DashLine,
    "read by eye": Qt.PenStyle.DotLine,
    "measured": Qt.PenStyle.DashDotLine,
}


@dataclass(frozen=True)
class Mark:
    """One ledger row on the diagram.

    `words` are shown on hovering; `status` is one of `LINE_STYLES`; `kind` is a kind's word; `jumps` where
    the change is a jump.
    """

    row: str
    value: Fraction
    observed: Fraction | None
    label: str
    status: str
    words: str
    kind: str = Kind.FLIP.value
    jumps: bool = False


def sign_path(status: str, centre: QPointF, size: float = SIGN, kind: str = Kind.FLIP.value) -> QPainterPath:
    """The sign's outline: the kind's for proved and estimated, ring for read by eye, square for measured."""
    if status in ("proved", "estimated"):
        return kind_path(kind, centre, size)
    path = QPainterPath()
    if status == "measured":
        path.addRect(QRectF(centre.x() - size * 0.8, centre.y() - size * 0.8, size * 1.6, size * 1.6))
    else:
        path.addEllipse(centre, size * 0.9, size * 0.9)
    return path


def paint_sign(
    painter: QPainter,
    theme: Theme,
    status: str,
    centre: QPointF,
    size: float = SIGN,
    kind: str = Kind.FLIP.value,
) -> None:
    """Filled for proved and measured, open otherwise; read by eye has a dot within."""
    painter.setPen(QPen(color(theme.accent), 1.4))
    solid = status in ("proved", "measured")
    painter.setBrush(color(theme.accent) if solid else color(theme.plot))
    painter.drawPath(sign_path(status, centre, size, kind))
    if status == "read by eye":
        painter.setBrush(color(theme.accent))
        painter.setPen(Qt.PenStyle.NoPen)
        painter.drawEllipse(centre, 1.3, 1.3)


def visible(marks: Sequence[Mark], view: View) -> list[tuple[float, Mark]]:
    """Marks inside the view as (place across, mark), left to right."""
    return sorted(
        ((unit_x(view, mark.value), mark) for mark in marks if view.left <= mark.value <= view.right),
        key=lambda pair: pair[0],
    )


def paint_marks(
    painter: QPainter,
    theme: Theme,
    marks: Sequence[Mark],
    view: View,
    plot: QRectF,
    lane: QRectF,
    bottom: float,
    selected: str,
    hovered: str,
    *,
    in_lane: bool = True,
) -> None:
    """Draw the marks: lines from the lane through the plot down to `bottom`, and signs and labels in the lane
    unless only the plot is painted.
    """
    shown = visible(marks, view)
    y = lane.center().y()
    painter.save()
    for u, mark in shown:
        x = plot.left() + u * plot.width()
        strong = mark.row in (selected, hovered)
        pen = QPen(color(theme.accent, 1.0 if strong else 0.62), 2.0 if strong else 1.0)
        pen.setStyle(LINE_STYLES.get(mark.status, Qt.PenStyle.DotLine))
        pen.setCapStyle(Qt.PenCapStyle.FlatCap)
        painter.setPen(pen)
        # An upright line needs no smoothing, and is drawn much faster without.
        painter.drawLine(QPointF(x, y + SIGN), QPointF(x, bottom))
    painter.setRenderHint(QPainter.RenderHint.Antialiasing)
    for u, mark in shown:
        x = plot.left() + u * plot.width()
        strong = mark.row in (selected, hovered)
        if mark.observed is not None and view.bottom <= mark.observed <= view.top:
            point = QPointF(x, plot.bottom() - unit_y(view, mark.observed) * plot.height())
            painter.setPen(QPen(color(theme.accent), 2.0 if strong else 1.4))
            painter.setBrush(Qt.BrushStyle.NoBrush)
            painter.drawEllipse(point, 4.5, 4.5)
        if mark.jumps:
            _paint_jump(painter, theme, QPointF(x, plot.top()))
    if in_lane:
        for u, mark in shown:
            x = plot.left() + u * plot.width()
            size = SIGN * (1.35 if mark.row in (selected, hovered) else 1.0)
            paint_sign(painter, theme, mark.status, QPointF(x, y), size, mark.kind)
        _paint_labels(painter, theme, shown, plot, lane, (selected, hovered))
    painter.restore()


def _paint_jump(painter: QPainter, theme: Theme, top: QPointF) -> None:
    """An arrowhead on the line, below the plot's upper edge."""
    corners = (QPointF(-5, 3), QPointF(5, 3), QPointF(0, 12))
    painter.setPen(QPen(color(theme.plot), 1.0))
    painter.setBrush(color(theme.accent))
    painter.drawPolygon(QPolygonF([top + corner for corner in corners]))


def _paint_labels(
    painter: QPainter,
    theme: Theme,
    shown: Sequence[tuple[float, Mark]],
    plot: QRectF,
    lane: QRectF,
    first: tuple[str, str],
) -> None:
    """Labels right of their signs where they cover neither a sign nor another label; selected ones first."""
    metrics = QFontMetricsF(painter.font())
    signs = [plot.left() + u * plot.width() for u, _ in shown]
    taken: list[tuple[float, float]] = [(x - SIGN - 2, x + SIGN + 2) for x in signs]
    for x, (_, mark) in sorted(zip(signs, shown, strict=True), key=lambda pair: pair[1][1].row not in first):
        width = metrics.horizontalAdvance(mark.label)
        for start in (x + SIGN + 4, x - SIGN - 4 - width):
            free = all(start + width < low or start > high for low, high in taken)
            if free and start >= lane.left() and start + width <= lane.right():
                painter.setPen(color(theme.accent if mark.row in first else theme.text))
                painter.drawText(
                    QRectF(start, lane.top(), width + 1, lane.height()),
                    Qt.AlignmentFlag.AlignVCenter,
                    mark.label,
                )
                taken.append((start - 3, start + width + 3))
                break


def mark_at(marks: Sequence[Mark], view: View, plot: QRectF, position: QPointF, lane: QRectF) -> Mark | None:
    """The mark under the pointer: anywhere near its sign in the lane, close to its line in the plot."""
    best: tuple[float, Mark] | None = None
    in_lane = lane.top() - 2 <= position.y() <= lane.bottom() + 2
    reach = 2 * NEAR if in_lane else NEAR / 2
    for u, mark in visible(marks, view):
        distance = abs(plot.left() + u * plot.width() - position.x())
        if distance <= reach and (best is None or distance < best[0]):
            best = (distance, mark)
    return best[1] if best else None
