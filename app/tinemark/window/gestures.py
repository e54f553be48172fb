"""The hand on the diagram: drags, clicks, wheel, and the keyboard's cursor. Turns them into the diagram's
signals.
"""

from __future__ import annotations

from fractions import Fraction
from typing import TYPE_CHECKING

from PySide6.QtCore import QElapsedTimer, QPointF, QRectF, Qt
from PySide6.QtGui import QMouseEvent, QPainter, QPen, QWheelEvent

from tinemark.density.request import View
from tinemark.window import diagram_paint as paint
from tinemark.window import view_navigation as nav
from tinemark.window.theme import Theme, color

if TYPE_CHECKING:
    from tinemark.window.diagram import Diagram

DRAG_LEAST = 5.0
ZOOM_STEP = Fraction(4, 5)
ONE_GESTURE_MS = 700
PAN_STEP = 8
STRAIGHT = 14.0


class Gestures:
    """State of the gesture under way on one diagram."""

    def __init__(self, diagram: Diagram) -> None:
        self.diagram = diagram
        self._left_from: QPointF | None = None
        self._pan_from: tuple[QPointF, View] | None = None
        self._panned = False
        self._box_corner: tuple[float, float] | None = None
        self._pointer: QPointF | None = None
        self._since = QElapsedTimer()
        self._kind = ""

    # --- mouse ---------------------------------------------------------------------------------------------

    def press(self, event: QMouseEvent) -> None:
        """Begin a zoom box, a click or a pan."""
        position = event.position()
        if event.button() == Qt.MouseButton.LeftButton and self._pan_from is None:
            self._box_corner = None
            self.diagram.cursor_place = None
            self._left_from = position
        elif event.button() == Qt.MouseButton.RightButton and self._left_from is None:
            self._pan_from, self._panned = (position, self.diagram.view), False
            self.diagram.setCursor(Qt.CursorShape.ClosedHandCursor)
        self._pointer = position
        self.diagram.update()

    def move(self, event: QMouseEvent) -> None:
        """Go on with the box or the pan, else say what the pointer is on."""
        diagram = self.diagram
        self._pointer = event.position()
        if self._pan_from is not None:
            self._pan_to(event.position())
        elif self._left_from is None:
            mark = diagram.mark_under(event.position())
            if (mark.row if mark else "") != diagram.hovered:
                diagram.hovered = mark.row if mark else ""
                diagram.setCursor(Qt.CursorShape.PointingHandCursor if mark else Qt.CursorShape.CrossCursor)
                diagram.update()
            self._hover(None if mark else event.position())
        if diagram.parts.plot.contains(event.position()) or self._left_from is not None:
            diagram.pointed.emit(*diagram.values_at(event.position()))
        else:
            diagram.pointed.emit(None, None)
        if self._left_from is not None or diagram.tool == "read":
            diagram.update()

    def _hover(self, position: QPointF | None) -> None:
        """See which branch a position is on."""
        diagram = self.diagram
        if diagram.branches.hover(diagram.view, diagram.parts.plot, position):
            diagram.update()

    def _pan_to(self, position: QPointF) -> None:
        assert self._pan_from is not None
        start, view = self._pan_from
        diagram, moved = self.diagram, position - start
        if not self._panned and abs(moved.x()) + abs(moved.y()) < DRAG_LEAST:
            return
        ratio = diagram.devicePixelRatioF()
        parts = diagram.parts
        across, up = abs(moved.x()), abs(moved.y())
        # A drag along one axis stays on it: a picture moved by whole columns alone can keep them.
        if up < STRAIGHT and across > 2 * up:
            moved.setY(0.0)
        elif across < STRAIGHT and up > 2 * across:
            moved.setX(0.0)
        columns, rows = round(-moved.x() * ratio), round(moved.y() * ratio)
        wanted = nav.panned(view, columns, rows, parts.columns, parts.rows)
        if wanted != diagram.view:
            diagram.view_wanted.emit(wanted, self._panned)
            self._panned = True

    def release(self, event: QMouseEvent) -> None:
        """End the gesture: zoom to the box, or click."""
        diagram = self.diagram
        if event.button() == Qt.MouseButton.RightButton and self._pan_from is not None:
            self._pan_from = None
            diagram.setCursor(Qt.CursorShape.CrossCursor)
        elif event.button() == Qt.MouseButton.LeftButton and self._left_from is not None:
            start, self._left_from = self._left_from, None
            if self._is_drag(start, event.position()):
                self._zoom_to(diagram.place_at(start), diagram.place_at(event.position()))
            else:
                self._click(event)
        diagram.update()

    @staticmethod
    def _is_drag(start: QPointF, end: QPointF) -> bool:
        return max(abs(end.x() - start.x()), abs(end.y() - start.y())) >= DRAG_LEAST

    def _zoom_to(self, one: tuple[float, float], other: tuple[float, float]) -> None:
        parts = self.diagram.parts
        # A box of no extent in one direction was meant along the other alone.
        (u0, v0), (u1, v1) = one, other
        if abs(u1 - u0) * parts.plot.width() < DRAG_LEAST:
            u0, u1 = 0.0, 1.0
        if abs(v1 - v0) * parts.plot.height() < DRAG_LEAST:
            v0, v1 = 0.0, 1.0
        self._kind = ""
        self.diagram.view_wanted.emit(nav.box(self.diagram.view, u0, v0, u1, v1), False)

    def _click(self, event: QMouseEvent) -> None:
        diagram, position = self.diagram, event.position()
        mark = diagram.mark_under(position)
        if mark and not diagram.parts.plot.contains(position):
            diagram.mark_chosen.emit(mark.row)
            return
        if not diagram.parts.plot.contains(position):
            return
        tool = diagram.tool
        if event.modifiers() & Qt.KeyboardModifier.ControlModifier:
            tool = "probe"
        elif event.modifiers() & Qt.KeyboardModifier.ShiftModifier:
            tool = "read"
        self._hover(position)
        self._use(tool, *diagram.values_at(position))

    def _use(self, tool: str, parameter: Fraction, observed: Fraction) -> None:
        sign = self.diagram.branches.sign() if tool == "pick" else None
        if sign is not None:
            self.diagram.sign_picked.emit(*sign)
            return
        signals = {
            "pick": self.diagram.picked,
            "read": self.diagram.read_by_eye,
            "probe": self.diagram.probe_wanted,
        }
        signals[tool].emit(parameter, observed)

    def wheel(self, event: QWheelEvent) -> None:
        """Zoom at the pointer, smoothly for fine wheels and touch pads."""
        turned = event.angleDelta().y() or event.angleDelta().x()
        event.accept()
        if turned == 0 or self._left_from is not None or self._pan_from is not None:
            return
        factor = Fraction(0.8 ** (turned / 120)).limit_denominator(10**6)
        self.zoom(factor, self.diagram.place_at(event.position()), "wheel")

    def leave(self) -> None:
        """The pointer has left the widget."""
        self._pointer = None
        self._hover(None)
        self.diagram.hovered = ""
        self.diagram.pointed.emit(None, None)
        self.diagram.update()

    # --- steps that keys and menus take --------------------------------------------------------------------

    def _goes_on(self, kind: str) -> bool:
        """Whether a step belongs to the same gesture as the last one: same kind, and soon after it."""
        goes_on = self._kind == kind and self._since.isValid() and self._since.elapsed() < ONE_GESTURE_MS
        self._kind = kind
        self._since.start()
        return goes_on

    def zoom(self, factor: Fraction, at: tuple[float, float] | None = None, kind: str = "key zoom") -> None:
        """Zoom by a factor of the extent at a place: the cursor's, or the middle."""
        u, v = at or self.diagram.cursor_place or (0.5, 0.5)
        wanted = nav.zoomed(self.diagram.view, u, v, factor)
        if wanted != self.diagram.view:
            self.diagram.view_wanted.emit(wanted, self._goes_on(kind))

    def pan(self, right: int, up: int) -> None:
        """Pan by eighths of the view."""
        parts = self.diagram.parts
        columns, rows = right * (parts.columns // PAN_STEP), up * (parts.rows // PAN_STEP)
        wanted = nav.panned(self.diagram.view, columns, rows, parts.columns, parts.rows)
        self.diagram.view_wanted.emit(wanted, self._goes_on("key pan"))

    def move_cursor(self, right: int, up: int) -> None:
        """Move the keyboard's cursor by pixels; it appears in the middle."""
        diagram = self.diagram
        u, v = diagram.cursor_place or (0.5, 0.5)
        parts = diagram.parts
        u = min(max(u + right / parts.plot.width(), 0.0), 1.0)
        v = min(max(v + up / parts.plot.height(), 0.0), 1.0)
        diagram.cursor_place = (u, v)
        diagram.pointed.emit(*nav.place(diagram.view, u, v))
        self._hover(self._on_screen((u, v)))
        diagram.update()

    def use_cursor(self, tool: str = "") -> bool:
        """Use a tool at the cursor; False, and the cursor appears, when there was none."""
        diagram = self.diagram
        if diagram.cursor_place is None:
            self.move_cursor(0, 0)
            return False
        self._use(tool or diagram.tool, *nav.place(diagram.view, *diagram.cursor_place))
        return True

    def box_corner(self) -> None:
        """First call: a corner of the zoom box at the cursor. Second call: zoom to the box."""
        diagram = self.diagram
        if diagram.cursor_place is None:
            self.move_cursor(0, 0)
        if self._box_corner is None:
            self._box_corner = diagram.cursor_place
        elif diagram.cursor_place is not None:
            corner, self._box_corner = self._box_corner, None
            one, other = self._on_screen(corner), self._on_screen(diagram.cursor_place)
            if self._is_drag(one, other):
                self._zoom_to(corner, diagram.cursor_place)
                diagram.cursor_place = (0.5, 0.5)
        diagram.update()

    def cancel(self) -> bool:
        """Drop the gesture under way; False when there was none."""
        diagram = self.diagram
        busy = self._left_from is not None or self._box_corner is not None or diagram.cursor_place is not None
        self._left_from, self._box_corner, diagram.cursor_place = None, None, None
        if self._pan_from is not None:
            (_, view), self._pan_from, busy = self._pan_from, None, True
            diagram.setCursor(Qt.CursorShape.CrossCursor)
            if self._panned:
                diagram.view_wanted.emit(view, True)
        diagram.update()
        return busy

    # --- what is seen of it --------------------------------------------------------------------------------

    def _on_screen(self, place: tuple[float, float]) -> QPointF:
        plot = self.diagram.parts.plot
        return QPointF(plot.left() + place[0] * plot.width(), plot.bottom() - place[1] * plot.height())

    def paint(self, painter: QPainter, theme: Theme) -> None:
        """Paint the rubber band, the keyboard's cursor and the reading cross."""
        diagram, plot = self.diagram, self.diagram.parts.plot
        corners: tuple[QPointF, QPointF] | None = None
        if (
            self._left_from is not None
            and self._pointer is not None
            and self._is_drag(self._left_from, self._pointer)
        ):
            corners = (
                self._on_screen(diagram.place_at(self._left_from)),
                self._on_screen(diagram.place_at(self._pointer)),
            )
        elif self._box_corner is not None and diagram.cursor_place is not None:
            corners = (self._on_screen(self._box_corner), self._on_screen(diagram.cursor_place))
        if corners is not None:
            paint.paint_box(painter, theme, plot, QRectF(*corners).normalized(), self._extents(*corners))
        if diagram.cursor_place is not None:
            self._paint_cursor(painter, theme, self._on_screen(diagram.cursor_place))
        elif (
            diagram.tool == "read"
            and corners is None
            and self._pointer is not None
            and plot.contains(self._pointer)
        ):
            paint.paint_reading_cross(painter, theme, plot, self._pointer, self._reading(self._pointer))

    def _extents(self, one: QPointF, other: QPointF) -> str:
        diagram, view = self.diagram, self.diagram.view
        (x0, y0), (x1, y1) = diagram.values_at(one), diagram.values_at(other)
        columns, rows = diagram.parts.columns, diagram.parts.rows
        names = diagram.labels
        low, high = sorted((x0, x1))
        across = (
            f"{nav.reading(low, view.width, columns)} \N{EN DASH} {nav.reading(high, view.width, columns)}"
        )
        low, high = sorted((y0, y1))
        up = f"{nav.reading(low, view.height, rows)} \N{EN DASH} {nav.reading(high, view.height, rows)}"
        return f"{names.parameter} {across}\n{names.observe} {up}"

    def _reading(self, position: QPointF) -> str:
        diagram = self.diagram
        parameter, _ = diagram.values_at(position)
        return f"{diagram.labels.parameter} {self.by_eye(parameter)}"

    def by_eye(self, parameter: Fraction) -> str:
        """A reading with its uncertainty, half a pixel, in the same decimals."""
        diagram = self.diagram
        half = diagram.view.width / diagram.parts.columns / 2
        decimals = max(0, 1 - nav.magnitude(half))
        return f"{nav.fixed(parameter, decimals)} \N{PLUS-MINUS SIGN} {nav.fixed(half, decimals)}"

    def _paint_cursor(self, painter: QPainter, theme: Theme, point: QPointF) -> None:
        painter.save()
        painter.setRenderHint(QPainter.RenderHint.Antialiasing)
        for width, token in ((4.0, theme.plot), (1.8, theme.accent)):
            painter.setPen(QPen(color(token), width))
            for dx, dy in ((1, 0), (-1, 0), (0, 1), (0, -1)):
                painter.drawLine(point + QPointF(4 * dx, 4 * dy), point + QPointF(13 * dx, 13 * dy))
        painter.restore()
        parameter, observed = self.diagram.values_at(point)
        words = self.diagram.words_at(parameter, observed)
        paint.paint_tag(painter, theme, self.diagram.parts.plot, point + QPointF(12, -12), words)
