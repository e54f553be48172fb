"""The diagram's two axes: a line, few short ticks, labels in the tabular face, the common offset written
once.
"""

from __future__ import annotations

from dataclasses import dataclass
from fractions import Fraction

from PySide6.QtCore import QPointF, QRectF, Qt
from PySide6.QtGui import QFontMetricsF, QPainter, QPen

from tinemark.density.ticks import ticks
from tinemark.window.theme import Theme, color

TICK = 5.0


@dataclass(frozen=True)
class AxisTicks:
    """Ticks of one axis as (share of the axis, label), and the offset common to all labels."""

    marks: tuple[tuple[float, str], ...]
    offset: str


def axis_ticks(low: Fraction, high: Fraction, room: float, each: float) -> AxisTicks:
    """Ticks for an axis of length `room` on which one label needs `each`."""
    found = ticks(low, high, max(2, int(room / each)))
    extent = high - low
    shares = [float((tick - low) / extent) for tick in found.positions]
    return AxisTicks(tuple(zip(shares, map(_signed, found.labels), strict=True)), found.offset)


def paint_bottom_axis(
    painter: QPainter, theme: Theme, area: QRectF, low: Fraction, high: Fraction, name: str, unit: str
) -> None:
    """The parameter axis along the top edge of `area`, its name at the right end below the labels."""
    metrics = QFontMetricsF(painter.font())
    found = axis_ticks(low, high, area.width(), metrics.horizontalAdvance("0.000000") * 1.35)
    y = area.top() + 2
    painter.setPen(QPen(color(theme.edge), 1.0))
    painter.drawLine(QPointF(area.left(), y), QPointF(area.right(), y))
    edge = area.left() - 40
    for share, label in found.marks:
        x = area.left() + share * area.width()
        painter.setPen(QPen(color(theme.edge), 1.0))
        painter.drawLine(QPointF(x, y), QPointF(x, y + TICK))
        width = metrics.horizontalAdvance(label)
        start = min(max(x - width / 2, area.left() - 44), area.right() + 14 - width)
        if start < edge:
            continue
        edge = start + width + 8
        painter.setPen(color(theme.muted))
        painter.drawText(
            QRectF(start, y + TICK + 1, width + 1, metrics.height()), Qt.AlignmentFlag.AlignLeft, label
        )
    painter.setPen(color(theme.text))
    row = QRectF(area.left() - 40, y + TICK + 2 + metrics.height(), area.width() + 40, metrics.height())
    painter.drawText(row, Qt.AlignmentFlag.AlignRight, axis_title(name, unit, found.offset))


def paint_left_axis(
    painter: QPainter,
    theme: Theme,
    plot: QRectF,
    title_row: QRectF,
    low: Fraction,
    high: Fraction,
    name: str,
    unit: str,
) -> None:
    """The observed quantity's axis at the left of the plot, its name above it."""
    metrics = QFontMetricsF(painter.font())
    found = axis_ticks(low, high, plot.height(), metrics.height() * 3.0)
    x = plot.left() - 2
    painter.setPen(QPen(color(theme.edge), 1.0))
    painter.drawLine(QPointF(x, plot.top()), QPointF(x, plot.bottom()))
    for share, label in found.marks:
        y = plot.bottom() - share * plot.height()
        painter.setPen(QPen(color(theme.edge), 1.0))
        painter.drawLine(QPointF(x - TICK, y), QPointF(x, y))
        painter.setPen(color(theme.muted))
        top = min(max(y - metrics.height() / 2, plot.top() - 4), plot.bottom() - metrics.height() + 4)
        painter.drawText(
            QRectF(0, top, x - TICK - 3, metrics.height()),
            Qt.AlignmentFlag.AlignRight | Qt.AlignmentFlag.AlignVCenter,
            label,
        )
    painter.setPen(color(theme.text))
    painter.drawText(title_row, Qt.AlignmentFlag.AlignLeft, axis_title(name, unit, found.offset))


def axis_title(name: str, unit: str, offset: str) -> str:
    """Name, unit, and what has to be added to every label."""
    text = f"{name} ({unit})" if unit else name
    if not offset:
        return text
    return f"{text} = {_signed(offset)} + label"


def _signed(label: str) -> str:
    """A decimal with a true minus sign in front."""
    return f"\N{MINUS SIGN}{label[1:]}" if label.startswith("-") else label
