"""Signs of the kinds of onsets: a shape each, so that they differ without colour."""

from __future__ import annotations

import math

from PySide6.QtCore import QPointF, QRectF
from PySide6.QtGui import QPainterPath, QPolygonF

from tinemark.onsets.results import Kind

Corner = tuple[float, float]

_CROSS: tuple[Corner, ...] = (
    (-1.0, -0.55),
    (-0.55, -1.0),
    (0.0, -0.45),
    (0.55, -1.0),
    (1.0, -0.55),
    (0.45, 0.0),
    (1.0, 0.55),
    (0.55, 1.0),
    (0.0, 0.45),
    (-0.55, 1.0),
    (-1.0, 0.55),
    (-0.45, 0.0),
)
_FORK: tuple[Corner, ...] = (
    (-0.3, 1.0),
    (-0.3, 0.2),
    (-1.0, -0.6),
    (-0.55, -1.0),
    (0.0, -0.4),
    (0.55, -1.0),
    (1.0, -0.6),
    (0.3, 0.2),
    (0.3, 1.0),
)
_STAR: tuple[Corner, ...] = tuple(
    (
        (1.15 if number % 2 == 0 else 0.45) * math.sin(number * math.pi / 4),
        -(1.15 if number % 2 == 0 else 0.45) * math.cos(number * math.pi / 4),
    )
    for number in range(8)
)

CORNERS: dict[str, tuple[Corner, ...]] = {
    Kind.FLIP.value: ((0.0, -1.0), (1.0, 0.0), (0.0, 1.0), (-1.0, 0.0)),
    Kind.FOLD.value: ((0.0, -1.0), (1.0, 0.8), (-1.0, 0.8)),
    Kind.TRANSCRITICAL.value: _CROSS,
    Kind.PITCHFORK.value: _FORK,
    Kind.BORDER_COLLISION.value: ((-0.45, -1.1), (0.45, -1.1), (0.45, 1.1), (-0.45, 1.1)),
    Kind.CRISIS.value: _STAR,
}
"""Corners of a sign of size 1, y downwards; kinds that are not here are rings."""


def kind_path(kind: str, centre: QPointF, size: float) -> QPainterPath:
    """Outline of a kind's sign.

    Diamond for a flip, triangle for a fold, ring for a Neimark-Sacker point, cross for a transcritical point,
    fork for a pitchfork, bar for a border collision, star for a crisis; a ring where the kind is not known.
    """
    path = QPainterPath()
    corners = CORNERS.get(kind)
    if corners is None:
        path.addEllipse(QRectF(centre.x() - 0.9 * size, centre.y() - 0.9 * size, 1.8 * size, 1.8 * size))
        return path
    path.addPolygon(QPolygonF([QPointF(centre.x() + x * size, centre.y() + y * size) for x, y in corners]))
    path.closeSubpath()
    return path
