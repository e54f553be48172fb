"""Painting the diagram's parts. Plain functions over a painter, the theme and values; none keeps anything."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np
from numpy.typing import NDArray
from PySide6.QtCore import QPointF, QRectF, Qt
from PySide6.QtGui import QBrush, QFontMetricsF, QImage, QPainter, QPainterPath, QPen

from tinemark.density.request import View
from tinemark.window.theme import Theme, color
from tinemark.window.view_navigation import unit_x, unit_y


def paint_stretched(painter: QPainter, plot: QRectF, view: View, image: QImage, image_view: View) -> None:
    """A picture where its own view lies in the present one: stretched until its replacement comes."""
    left, right = unit_x(view, image_view.left), unit_x(view, image_view.right)
    bottom, top = unit_y(view, image_view.bottom), unit_y(view, image_view.top)
    # Only the part that is seen is handed to Qt: a deep zoom would ask for a target of millions of pixels.
    x0, x1 = max(left, 0.0), min(right, 1.0)
    y0, y1 = max(bottom, 0.0), min(top, 1.0)
    if x0 >= x1 or y0 >= y1:
        return
    target = QRectF(
        plot.left() + x0 * plot.width(),
        plot.bottom() - y1 * plot.height(),
        (x1 - x0) * plot.width(),
        (y1 - y0) * plot.height(),
    )
    across, up = image.width() / (right - left), image.height() / (top - bottom)
    source = QRectF((x0 - left) * across, (top - y1) * up, (x1 - x0) * across, (y1 - y0) * up)
    painter.save()
    painter.setRenderHint(QPainter.RenderHint.SmoothPixmapTransform, on=across * (x1 - x0) < image.width())
    painter.drawImage(target, image, source)
    painter.restore()


def runs(values: NDArray[np.generic]) -> Iterator[tuple[int, int, int]]:
    """Merged runs of equal neighbours: (first, one past the last, value)."""
    if len(values) == 0:
        return
    edges = np.flatnonzero(np.diff(values)) + 1
    starts = [0, *edges.tolist()]
    for start, stop in zip(starts, [*starts[1:], len(values)], strict=True):
        yield start, stop, int(values[start])


def paint_periods(
    painter: QPainter, theme: Theme, lane: QRectF, periods: NDArray[np.int32], left: float, width: float
) -> None:
    """Numerals of the periods over thin braces, one for each run of columns; a numeral only where it fits.

    `left` and `width` say where the columns lie, which is not the lane while a pan or a zoom is under way.
    """
    metrics = QFontMetricsF(painter.font())
    middle = lane.center().y()
    step = width / len(periods)
    painter.save()
    painter.setClipRect(lane.adjusted(-1, -1, 1, 1))
    for start, stop, period in runs(periods):
        x0, x1 = max(left + start * step, lane.left()), min(left + stop * step, lane.right())
        if period <= 0 or x1 - x0 < 2.5:
            continue
        text = str(period)
        room = metrics.horizontalAdvance(text) + 8
        foot = lane.bottom() - 2.5
        painter.setPen(QPen(color(theme.edge), 1.0))
        if x1 - x0 < room + 4:
            painter.drawLine(QPointF(x0 + 1, foot), QPointF(x1 - 1, foot))
            if x1 - x0 >= room - 6:
                painter.setPen(color(theme.text))
                painter.drawText(
                    QRectF(x0, lane.top(), x1 - x0, lane.height() - 4), Qt.AlignmentFlag.AlignCenter, text
                )
            continue
        centre = (x0 + x1) / 2
        for a, b, end in ((x0 + 1.5, centre - room / 2, x0 + 1.5), (centre + room / 2, x1 - 1.5, x1 - 1.5)):
            if b > a:
                painter.drawLine(QPointF(a, middle), QPointF(b, middle))
                painter.drawLine(QPointF(end, middle), QPointF(end, foot))
        painter.setPen(color(theme.text))
        painter.drawText(
            QRectF(centre - room / 2, lane.top(), room, lane.height()), Qt.AlignmentFlag.AlignCenter, text
        )
    painter.restore()


def paint_escaped(
    painter: QPainter,
    theme: Theme,
    area: QRectF,
    escaped: NDArray[np.bool_],
    left: float,
    width: float,
    word: str,
) -> None:
    """Columns whose orbit escaped, or has no sample: hatched, and named where the word fits."""
    if not escaped.any():
        return
    step = width / len(escaped)
    metrics = QFontMetricsF(painter.font())
    painter.save()
    painter.setClipRect(area)
    for start, stop, value in runs(escaped):
        if not value:
            continue
        x0, x1 = max(left + start * step, area.left()), min(left + stop * step, area.right())
        if x1 <= x0:
            continue
        where = QRectF(x0, area.top(), x1 - x0, area.height())
        painter.fillRect(where, QBrush(color(theme.edge, 0.45), Qt.BrushStyle.BDiagPattern))
        room = metrics.horizontalAdvance(word) + 14
        if where.width() > room:
            sign = QRectF(0, 0, room, metrics.height() + 6)
            sign.moveCenter(where.center())
            painter.setPen(Qt.PenStyle.NoPen)
            painter.setBrush(color(theme.plot))
            painter.drawRoundedRect(sign, 4, 4)
            painter.setPen(color(theme.muted))
            painter.drawText(sign, Qt.AlignmentFlag.AlignCenter, word)
    painter.restore()


def paint_reading_cross(painter: QPainter, theme: Theme, plot: QRectF, point: QPointF, words: str) -> None:
    """Crosshair with the reading beside it."""
    painter.setPen(QPen(color(theme.accent), 1.0))
    painter.drawLine(QPointF(plot.left(), point.y()), QPointF(plot.right(), point.y()))
    painter.drawLine(QPointF(point.x(), plot.top()), QPointF(point.x(), plot.bottom()))
    if words:
        paint_tag(painter, theme, plot, QPointF(point.x() + 10, point.y() - 10), words)


def paint_tag(painter: QPainter, theme: Theme, plot: QRectF, corner: QPointF, words: str) -> None:
    """A short label on its own ground with its lower left at `corner`, kept inside the plot."""
    metrics = QFontMetricsF(painter.font())
    lines = words.split("\n")
    wide = max(metrics.horizontalAdvance(line) for line in lines)
    tag = QRectF(0, 0, wide + 14, metrics.height() * len(lines) + 7)
    tag.moveBottomLeft(corner)
    tag.moveLeft(min(max(tag.left(), plot.left() + 3), plot.right() - tag.width() - 3))
    tag.moveTop(min(max(tag.top(), plot.top() + 3), plot.bottom() - tag.height() - 3))
    painter.save()
    painter.setRenderHint(QPainter.RenderHint.Antialiasing)
    painter.setPen(QPen(color(theme.edge), 1.0))
    painter.setBrush(color(theme.raised, 0.96))
    painter.drawRoundedRect(tag, 4, 4)
    painter.setPen(color(theme.text))
    painter.drawText(
        tag.adjusted(7, 3, -4, -3), Qt.AlignmentFlag.AlignLeft | Qt.AlignmentFlag.AlignVCenter, words
    )
    painter.restore()


def paint_box(painter: QPainter, theme: Theme, plot: QRectF, box: QRectF, words: str) -> None:
    """The rubber band: what will be left out is dimmed, the extents are written at the box."""
    outside = QPainterPath()
    outside.addRect(plot)
    inside = QPainterPath()
    inside.addRect(box)
    painter.fillPath(outside.subtracted(inside), color(theme.surface, 0.45))
    painter.setPen(QPen(color(theme.accent), 1.4))
    painter.setBrush(Qt.BrushStyle.NoBrush)
    painter.drawRect(box)
    paint_tag(painter, theme, plot, QPointF(box.left(), box.top() - 4), words)


def paint_notice(painter: QPainter, theme: Theme, plot: QRectF, words: str) -> None:
    """A card in the middle of the plot."""
    metrics = QFontMetricsF(painter.font())
    wide = min(metrics.horizontalAdvance(words) + 40, plot.width() - 40)
    card = QRectF(0, 0, wide, metrics.height() * 3.2)
    card.moveCenter(plot.center())
    painter.setPen(QPen(color(theme.line), 1.0))
    painter.setBrush(color(theme.raised))
    painter.drawRoundedRect(card, 6, 6)
    painter.setPen(color(theme.text))
    flags = Qt.AlignmentFlag.AlignCenter | Qt.TextFlag.TextWordWrap
    painter.drawText(card.adjusted(12, 2, -12, -2), int(flags), words)


def paint_pending(painter: QPainter, theme: Theme, plot: QRectF, point: QPointF, words: str) -> None:
    """The place of a click that is being worked on."""
    if not plot.contains(point):
        return
    painter.save()
    painter.setRenderHint(QPainter.RenderHint.Antialiasing)
    painter.setPen(QPen(color(theme.accent), 1.6))
    painter.setBrush(Qt.BrushStyle.NoBrush)
    painter.drawEllipse(point, 7, 7)
    painter.drawEllipse(point, 1.2, 1.2)
    painter.restore()
    paint_tag(painter, theme, plot, QPointF(point.x() + 11, point.y() - 9), words)
