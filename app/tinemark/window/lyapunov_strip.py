"""The strip below the plot: the Lyapunov exponent over the parameter, on the plot's own axis.

Sign is told by shape as well: filled below the zero line (the orbit settles), hatched above it (chaos).
"""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import NDArray
from pyqtgraph.functions import arrayToQPolygonF
from PySide6.QtCore import QPointF, QRectF, Qt
from PySide6.QtGui import QBrush, QFontMetricsF, QPainter, QPainterPath, QPen, QPixmap

from tinemark.window.diagram_paint import runs
from tinemark.window.theme import Theme, color

NAME = "Lyapunov exponent"


def strip_range(exponents: NDArray[np.float64]) -> tuple[float, float]:
    """Bottom and top of the strip: round numbers that hold what matters.

    Exponents fall to minus infinity at superstable points, so the bottom follows the bulk and the dips
    are cut.
    """
    known = exponents[np.isfinite(exponents)]
    if len(known) == 0:
        return -1.0, 0.5
    top = round_up(max(float(known.max()), 0.05))
    low = float(np.quantile(known, 0.08))
    bottom = -round_up(max(-low, top, 0.05)) if low < 0 else -top
    return bottom, top


def round_up(value: float) -> float:
    """The next 1, 2 or 5 times a power of ten."""
    power = 10.0 ** math.floor(math.log10(value))
    return next(step * power for step in (1.0, 2.0, 5.0, 10.0) if step * power >= value * (1 - 1e-9))


class LyapunovStrip:
    """Paints the strip. The curve of one field is drawn once and kept: a moving view only moves it."""

    def __init__(self) -> None:
        self._exponents: NDArray[np.float64] | None = None
        self._is_known = False
        self._range = (-1.0, 0.5)
        self._drawn_for: tuple[object, ...] = ()
        self._curve: QPixmap | None = None

    def show(self, exponents: NDArray[np.float64] | None) -> None:
        """Take the exponents of another field, or of none."""
        self._exponents, self._curve, self._drawn_for = exponents, None, ()
        self._is_known = exponents is not None and not np.isnan(exponents).all()
        self._range = strip_range(exponents) if exponents is not None else (-1.0, 0.5)

    def paint(
        self, painter: QPainter, theme: Theme, strip: QRectF, left: float, width: float, *, empty: bool
    ) -> None:
        """Paint ground, curve, zero line and scale.

        `left` and `width` say where the field's columns lie on the screen; `empty` leaves the curve out.
        """
        painter.fillRect(strip, color(theme.plot))
        bottom, top = self._range
        zero = strip.top() + top / (top - bottom) * strip.height()
        if self._exponents is not None and len(self._exponents) > 1 and not empty:
            ratio = painter.device().devicePixelRatio()
            wanted = (strip.width(), strip.height(), ratio, theme.name)
            if self._curve is None or self._drawn_for != wanted:
                self._curve, self._drawn_for = self._drawn(theme, strip, ratio), wanted
            painter.save()
            painter.setClipRect(strip)
            painter.drawPixmap(
                QRectF(left, strip.top(), width, strip.height()), self._curve, QRectF(self._curve.rect())
            )
            painter.restore()
        painter.setPen(QPen(color(theme.edge), 1.0))
        painter.drawLine(QPointF(strip.left(), zero), QPointF(strip.right(), zero))
        self._paint_scale(painter, theme, strip, zero, named=self._exponents is not None and not empty)

    def _drawn(self, theme: Theme, strip: QRectF, ratio: float) -> QPixmap:
        assert self._exponents is not None
        pixmap = QPixmap(math.ceil(strip.width() * ratio), math.ceil(strip.height() * ratio))
        pixmap.setDevicePixelRatio(ratio)
        pixmap.fill(Qt.GlobalColor.transparent)
        painter = QPainter(pixmap)
        painter.setRenderHint(QPainter.RenderHint.Antialiasing)
        bottom, top = self._range
        exponents = self._exponents
        known = np.isfinite(exponents) | np.isneginf(exponents)
        scale = strip.height() / (top - bottom)
        y = (top - np.clip(np.nan_to_num(exponents, nan=0.0), bottom * 1.2, top)) * scale
        x = (np.arange(len(exponents)) + 0.5) * strip.width() / len(exponents)
        for start, stop, value in runs(known):
            if value and stop - start > 1:
                _paint_curve(painter, theme, x[start:stop], y[start:stop], top * scale, strip)
        painter.end()
        return pixmap

    def _paint_scale(
        self, painter: QPainter, theme: Theme, strip: QRectF, zero: float, *, named: bool
    ) -> None:
        metrics = QFontMetricsF(painter.font())
        bottom, top = self._range
        painter.setPen(color(theme.muted))
        box = QRectF(0, 0, strip.left() - 8, metrics.height())
        right = Qt.AlignmentFlag.AlignRight | Qt.AlignmentFlag.AlignVCenter
        box.moveCenter(QPointF(box.width() / 2, zero))
        painter.drawText(box, right, "0")
        ends = (
            (top, strip.top() + metrics.height() / 2 - 3),
            (bottom, strip.bottom() - metrics.height() / 2 + 2),
        )
        for value, centre in ends if named else ():
            if abs(centre - zero) > metrics.height() * 0.9:
                box.moveCenter(QPointF(box.width() / 2, centre))
                painter.drawText(box, right, f"{value:+g}".replace("-", "\N{MINUS SIGN}"))
        words = NAME if self._is_known or not named else f"{NAME}: not known"
        tag = QRectF(0, 0, metrics.horizontalAdvance(words) + 6, metrics.height())
        tag.moveBottomLeft(QPointF(strip.left() + 4, strip.bottom() - 3))
        painter.fillRect(tag, color(theme.plot, 0.8))
        painter.drawText(tag, Qt.AlignmentFlag.AlignCenter, words)


def _paint_curve(
    painter: QPainter,
    theme: Theme,
    x: NDArray[np.float64],
    y: NDArray[np.float64],
    zero: float,
    strip: QRectF,
) -> None:
    points = arrayToQPolygonF(x, y)
    area = QPainterPath()
    area.addPolygon(points)
    area.lineTo(float(x[-1]), zero)
    area.lineTo(float(x[0]), zero)
    area.closeSubpath()
    painter.save()
    # The line covers the areas' edges, which therefore need no smoothing.
    painter.setRenderHint(QPainter.RenderHint.Antialiasing, on=False)
    painter.setClipRect(QRectF(0, zero, strip.width(), strip.height() - zero))
    painter.fillPath(area, color(theme.cool, 0.22))
    painter.setClipRect(QRectF(0, 0, strip.width(), zero))
    painter.fillPath(area, QBrush(color(theme.text, 0.75), Qt.BrushStyle.BDiagPattern))
    painter.restore()
    # A line one pixel wide is drawn thirty times as fast as any other.
    painter.setPen(QPen(color(theme.text), 1.0))
    painter.drawPolyline(points)
