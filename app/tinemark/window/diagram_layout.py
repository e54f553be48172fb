"""Where the parts of the diagram lie: lanes above the plot, the plot, the Lyapunov strip, the shared axis.

The plot's edges fall on whole device pixels, so that one column of counts is one column of the screen at
any scaling.
"""

from __future__ import annotations

from dataclasses import dataclass

from PySide6.QtCore import QRectF, QSizeF
from PySide6.QtGui import QFontMetricsF

STRIP_SHARE = 0.13
STRIP_LEAST = 44.0
STRIP_MOST = 96.0
RIGHT = 16.0
GAP = 8.0


@dataclass(frozen=True)
class DiagramLayout:
    """Rectangles in device-independent units, and the picture's size in device pixels."""

    names: QRectF
    marks: QRectF
    periods: QRectF
    plot: QRectF
    strip: QRectF
    axis: QRectF
    columns: int
    rows: int


def lay_out(size: QSizeF, ratio: float, metrics: QFontMetricsF, *, strip: bool = True) -> DiagramLayout:
    """Divide a widget's `size` at a device pixel `ratio`; `metrics` are those of the tick labels."""
    line = metrics.height()
    left = _snapped(metrics.horizontalAdvance("\N{MINUS SIGN}0.00000") + 14, ratio)
    lane = line + 4
    top = _snapped(6 + line + 2 + lane * 2 + 2, ratio)
    axis = 8 + line * 2 + 6
    strip_height = min(max(size.height() * STRIP_SHARE, STRIP_LEAST), STRIP_MOST) if strip else 0.0
    below = axis + (strip_height + GAP if strip else 0.0)
    columns = max(16, int((size.width() - left - RIGHT) * ratio))
    rows = max(16, int((size.height() - top - below) * ratio))
    plot = QRectF(left, top, columns / ratio, rows / ratio)
    strip_top = plot.bottom() + GAP
    return DiagramLayout(
        names=QRectF(14, 6, size.width() - 18, line),
        marks=QRectF(left, 6 + line + 2, plot.width() + RIGHT - 2, lane),
        periods=QRectF(left, plot.top() - lane - 1, plot.width(), lane),
        plot=plot,
        strip=QRectF(left, strip_top, plot.width(), strip_height),
        axis=QRectF(left, (strip_top + strip_height) if strip else plot.bottom(), plot.width(), axis),
        columns=columns,
        rows=rows,
    )


def _snapped(length: float, ratio: float) -> float:
    return round(length * ratio) / ratio
