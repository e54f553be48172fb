"""The few drawn signs of the window, stroked in the theme's own ink at any scaling."""

from __future__ import annotations

from PySide6.QtCore import QPointF, QRectF, Qt
from PySide6.QtGui import QIcon, QPainter, QPainterPath, QPen, QPixmap

from tinemark.resources_path import resource
from tinemark.window.marks import paint_sign
from tinemark.window.theme import Theme, color

SIDE = 18
SCALES = (1.0, 1.25, 1.5, 2.0, 3.0)


def program_icon() -> QIcon:
    """The program's own sign: a branch that splits, and splits again, with one onset marked."""
    return QIcon(str(resource("icons", "tinemark.svg")))


def _back(path: QPainterPath) -> None:
    path.moveTo(11.5, 4)
    path.lineTo(6.5, 9)
    path.lineTo(11.5, 14)


def _forward(path: QPainterPath) -> None:
    path.moveTo(6.5, 4)
    path.lineTo(11.5, 9)
    path.lineTo(6.5, 14)


def _fit(path: QPainterPath) -> None:
    for x, y, dx, dy in ((3.5, 3.5, 1, 1), (14.5, 3.5, -1, 1), (14.5, 14.5, -1, -1), (3.5, 14.5, 1, -1)):
        path.moveTo(x + 4 * dx, y)
        path.lineTo(x, y)
        path.lineTo(x, y + 4 * dy)


def _pick(path: QPainterPath) -> None:
    # A branch that splits.
    path.moveTo(2, 9)
    path.lineTo(7, 9)
    path.cubicTo(QPointF(10, 9), QPointF(10, 4), QPointF(16, 4))
    path.moveTo(7, 9)
    path.cubicTo(QPointF(10, 9), QPointF(10, 14), QPointF(16, 14))


def _read(path: QPainterPath) -> None:
    for x0, y0, x1, y1 in ((9, 2, 9, 7), (9, 11, 9, 16), (2, 9, 7, 9), (11, 9, 16, 9)):
        path.moveTo(x0, y0)
        path.lineTo(x1, y1)


def _probe(path: QPainterPath) -> None:
    # An orbit in time.
    path.moveTo(2, 12)
    for x, y in ((5, 5), (8, 13), (11, 6), (14, 12), (16, 8)):
        path.lineTo(x, y)


STROKES = {"back": _back, "forward": _forward, "fit": _fit, "pick": _pick, "read": _read, "probe": _probe}


def stroke_icon(name: str, theme: Theme) -> QIcon:
    """One of `STROKES` as an icon, with a fainter picture for its disabled state."""
    icon = QIcon()
    for token, mode in ((theme.text, QIcon.Mode.Normal), (theme.edge, QIcon.Mode.Disabled)):
        for scale in SCALES:
            pixmap = _canvas(scale)
            painter = QPainter(pixmap)
            painter.setRenderHint(QPainter.RenderHint.Antialiasing)
            pen = QPen(
                color(token), 1.5, Qt.PenStyle.SolidLine, Qt.PenCapStyle.RoundCap, Qt.PenJoinStyle.RoundJoin
            )
            painter.setPen(pen)
            path = QPainterPath()
            STROKES[name](path)
            painter.drawPath(path)
            painter.end()
            icon.addPixmap(pixmap, mode)
    return icon


def status_icon(status: str, theme: Theme) -> QIcon:
    """The sign that a status has on the diagram."""
    icon = QIcon()
    for scale in SCALES:
        pixmap = _canvas(scale)
        painter = QPainter(pixmap)
        painter.setRenderHint(QPainter.RenderHint.Antialiasing)
        paint_sign(painter, theme, status, QRectF(0, 0, SIDE, SIDE).center())
        painter.end()
        icon.addPixmap(pixmap)
    return icon


def _canvas(scale: float) -> QPixmap:
    pixmap = QPixmap(round(SIDE * scale), round(SIDE * scale))
    pixmap.setDevicePixelRatio(scale)
    pixmap.fill(Qt.GlobalColor.transparent)
    return pixmap
