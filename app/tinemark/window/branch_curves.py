"""Branches on the diagram: stable ones solid, unstable ones dashed, in one hue; what the pointer is on in
words.
"""

from __future__ import annotations

import cmath
from dataclasses import dataclass
from fractions import Fraction

import numpy as np
from numpy.typing import NDArray
from PySide6.QtCore import QPointF, QRectF, Qt
from PySide6.QtGui import QPainter, QPainterPath, QPen, QTransform

from tinemark.density.request import View
from tinemark.onsets.results import BranchResult, Kind
from tinemark.window.signs import kind_path
from tinemark.window.theme import Theme, color
from tinemark.window.view_navigation import unit_x, unit_y

NEAR = 6.0
SIGN_NEAR = 9.0
SIGN = 4.2
DASHES = (7.0, 5.0)


@dataclass(frozen=True)
class Spot:
    """An onset that a branch passes, as a place in shares of the branches' view."""

    kind: Kind
    period: int
    across: float
    up: float


@dataclass(frozen=True)
class CyclePoint:
    """The place of a branch that is nearest to the pointer."""

    period: int
    stable: bool
    across: float
    up: float
    multiplier: complex
    piece: int


class BranchCurves:
    """The branches of one view, ready to be drawn in any other.

    Parameters
    ----------
    result
        What the engine found.
    view
        The view it was asked for; the result's shares count in it.
    """

    def __init__(self, result: BranchResult, view: View) -> None:
        self.result, self.view = result, view
        self.spots = tuple(Spot(*passed) for passed in result.passed)
        self._lines = tuple(_path(piece.parameter, piece.observed) for piece in result.pieces)
        self._segments = _segments(result)

    def transform(self, view: View, plot: QRectF) -> QTransform:
        """From shares of the branches' view to places on the screen."""
        left, right = unit_x(view, self.view.left), unit_x(view, self.view.right)
        bottom, top = unit_y(view, self.view.bottom), unit_y(view, self.view.top)
        wide, high = (right - left) * plot.width(), (top - bottom) * plot.height()
        return QTransform(
            wide, 0.0, 0.0, -high, plot.left() + left * plot.width(), plot.bottom() - bottom * plot.height()
        )

    def paint(self, painter: QPainter, theme: Theme, view: View, plot: QRectF, only: int = -1) -> None:
        """Draw all pieces; or, stronger, only the one that the pointer is on."""
        shift = self.transform(view, plot)
        if not _sane(shift):
            return
        painter.save()
        painter.setClipRect(plot)
        painter.setRenderHint(QPainter.RenderHint.Antialiasing)
        painter.setBrush(Qt.BrushStyle.NoBrush)
        shown = [shift.map(line) for line in self._lines]
        # A casing in the ground's colour lets a line be seen over a dense picture.
        for number, (line, piece) in enumerate(zip(shown, self.result.pieces, strict=True)):
            if only not in (-1, number):
                continue
            wide = 1.5 if only == -1 else 2.8
            for pen in (QPen(color(theme.plot, 0.6), wide + 2.0), QPen(color(theme.branch), wide)):
                pen.setCapStyle(Qt.PenCapStyle.FlatCap)
                if not piece.stable:
                    # Dashes are counted in widths of the pen.
                    pen.setDashPattern([length / pen.widthF() for length in DASHES])
                painter.setPen(pen)
                painter.drawPath(line)
        painter.restore()

    def paint_spots(
        self, painter: QPainter, theme: Theme, view: View, plot: QRectF, taken: tuple[float, ...]
    ) -> None:
        """Draw a small open sign at each onset that a branch passes, but for those that a mark stands at.

        `taken` holds the marks' places across, in pixels.
        """
        painter.save()
        painter.setClipRect(plot)
        painter.setRenderHint(QPainter.RenderHint.Antialiasing)
        for spot, place in self.places(view, plot):
            if any(abs(place.x() - x) < 2.0 for x in taken):
                continue
            painter.setPen(QPen(color(theme.branch), 1.5))
            painter.setBrush(color(theme.plot))
            painter.drawPath(kind_path(spot.kind.value, place, SIGN))
        painter.restore()

    def places(self, view: View, plot: QRectF) -> list[tuple[Spot, QPointF]]:
        """The onsets passed that lie in the plot, with their places on the screen."""
        shift = self.transform(view, plot)
        if not _sane(shift):
            return []
        placed = [(spot, shift.map(QPointF(spot.across, spot.up))) for spot in self.spots]
        return [(spot, place) for spot, place in placed if plot.contains(place)]

    def spot_at(self, view: View, plot: QRectF, position: QPointF) -> Spot | None:
        """The onset passed that a position is on."""
        near = [
            ((place - position).manhattanLength(), spot)
            for spot, place in self.places(view, plot)
            if (place - position).manhattanLength() <= SIGN_NEAR
        ]
        return min(near, key=lambda pair: pair[0])[1] if near else None

    def cycle_at(self, view: View, plot: QRectF, position: QPointF) -> CyclePoint | None:
        """The cycle of the curve that a position is on; None away from every curve."""
        shift = self.transform(view, plot)
        ends, pieces, steps = self._segments
        if not len(pieces) or not _sane(shift):
            return None
        scale = np.array([shift.m11(), shift.m22()])
        start = ends[:, 0] * scale + (shift.dx() - position.x(), shift.dy() - position.y())
        reach = (ends[:, 1] - ends[:, 0]) * scale
        length = np.einsum("ij,ij->i", reach, reach)
        share = np.clip(-np.einsum("ij,ij->i", start, reach) / np.where(length > 0, length, 1.0), 0.0, 1.0)
        off = start + share[:, None] * reach
        distance = np.einsum("ij,ij->i", off, off)
        best = int(np.argmin(distance))
        if distance[best] > NEAR * NEAR:
            return None
        number, step, along = int(pieces[best]), int(steps[best]), float(share[best])
        piece = self.result.pieces[number]
        before, after = (complex(*piece.multipliers[place]) for place in (step, step + 1))
        across, up = ends[best, 0] + along * (ends[best, 1] - ends[best, 0])
        multiplier = before + along * (after - before)
        return CyclePoint(piece.period, piece.stable, float(across), float(up), multiplier, number)

    def value_at(self, across: float, up: float) -> tuple[Fraction, Fraction]:
        """Parameter and observed quantity at a place in shares."""
        view = self.view
        return view.left + Fraction(across) * view.width, view.bottom + Fraction(up) * view.height


def cycle_words(point: CyclePoint) -> str:
    """Period, stability and multiplier of a cycle, as a line of words."""
    kind = "Stable" if point.stable else "Unstable"
    what = "steady state" if point.period == 1 else f"cycle of period {point.period}"
    return f"{kind} {what}, {multiplier_words(point.multiplier)}"


def multiplier_words(multiplier: complex) -> str:
    """The largest multiplier: "multiplier -0.31", or a pair "multipliers 0.8 ± 0.6i (modulus 1)"."""
    real, imaginary = _short(multiplier.real), _short(abs(multiplier.imag))
    if abs(multiplier.imag) <= 1e-9 * max(1.0, abs(multiplier)):
        return f"multiplier {real}"
    modulus = _short(abs(multiplier))
    turn = _short(abs(cmath.phase(multiplier)) / (2 * cmath.pi))
    return (
        f"multipliers {real} \N{PLUS-MINUS SIGN} {imaginary}i (modulus {modulus}, {turn} of a turn a period)"
    )


def spot_words(spot: Spot) -> str:
    """What a sign on a branch stands for, and what a click does."""
    what = "a steady state" if spot.period == 1 else f"a cycle of period {spot.period}"
    return f"{spot.kind.value.capitalize()} of {what}\nA click finds its exact place"


def _short(number: float) -> str:
    return f"{number:.4g}".replace("-", "\N{MINUS SIGN}")


def _path(parameter: tuple[float, ...], observed: tuple[tuple[float, ...], ...]) -> QPainterPath:
    """One cycle point a line."""
    path = QPainterPath()
    for heights in observed:
        drawing = False
        for across, up in zip(parameter, heights, strict=True):
            if not (np.isfinite(across) and np.isfinite(up)):
                drawing = False
            elif drawing:
                path.lineTo(across, up)
            else:
                path.moveTo(across, up)
                drawing = True
    return path


def _segments(
    result: BranchResult,
) -> tuple[NDArray[np.float64], NDArray[np.int64], NDArray[np.int64]]:
    """All straight parts: their ends (n, 2 ends, 2 coordinates), their pieces and their places in these."""
    ends, pieces, steps = [], [], []
    for number, piece in enumerate(result.pieces):
        for heights in piece.observed:
            line = np.column_stack([piece.parameter, heights])
            if len(line) > 1:
                ends.append(np.stack([line[:-1], line[1:]], axis=1))
                pieces.append(np.full(len(line) - 1, number))
                steps.append(np.arange(len(line) - 1))
    if not ends:
        return np.empty((0, 2, 2)), np.empty(0, np.int64), np.empty(0, np.int64)
    joined = np.concatenate(ends)
    sound = np.isfinite(joined).all(axis=(1, 2))
    return joined[sound], np.concatenate(pieces)[sound], np.concatenate(steps)[sound]


def _sane(shift: QTransform) -> bool:
    """Whether the branches' view is not so much larger than the present one that Qt loses itself."""
    return all(abs(number) < 1e8 for number in (shift.m11(), shift.m22(), shift.dx(), shift.dy()))
