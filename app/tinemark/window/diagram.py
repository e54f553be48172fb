"""The diagram: picture, axes, Lyapunov strip, period labels and ledger marks in one widget that paints for
itself.

It is shown values and says what the hand wants; it asks nobody for pictures and changes no session. All
signals are emitted on the window's thread.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction

from PySide6.QtCore import QEvent, QPointF, QRectF, QSize, QSizeF, Qt, Signal
from PySide6.QtGui import (
    QFontMetricsF,
    QHelpEvent,
    QImage,
    QMouseEvent,
    QPainter,
    QPaintEvent,
    QPen,
    QResizeEvent,
    QWheelEvent,
)
from PySide6.QtWidgets import QSizePolicy, QToolTip, QWidget

from tinemark.density.field import Field
from tinemark.density.request import View
from tinemark.window import diagram_paint as paint
from tinemark.window.axis import paint_bottom_axis, paint_left_axis
from tinemark.window.branch_curves import BranchCurves
from tinemark.window.branch_overlay import BranchOverlay
from tinemark.window.callout import Callout, Choice
from tinemark.window.diagram_layout import DiagramLayout, lay_out
from tinemark.window.gestures import Gestures
from tinemark.window.lyapunov_strip import LyapunovStrip
from tinemark.window.marks import Mark, mark_at, paint_marks
from tinemark.window.theme import color, current_theme, mono_font
from tinemark.window.view_navigation import place, reading, unit_x, unit_y

UNIT_VIEW = View(Fraction(0), Fraction(1), Fraction(0), Fraction(1))
TOOLS = ("pick", "read", "probe")
TOOL_WORDS = {"pick": "Pick", "read": "Read by eye", "probe": "Probe"}


@dataclass(frozen=True)
class Labels:
    """Names and units at the axes, and what a column is called whose orbit is lost."""

    parameter: str = ""
    observe: str = ""
    parameter_unit: str = ""
    observe_unit: str = ""
    lost: str = "escaped"


@dataclass(frozen=True)
class Glimpse:
    """A first look at a view, shown until its picture comes. `pixels` is the memory that `image` looks at."""

    image: QImage
    pixels: object
    view: View


class Diagram(QWidget):
    """The diagram.

    Signals
    -------
    view_wanted : View, bool
        Another view; True when it goes on with the gesture of the one before.
    picked, read_by_eye, probe_wanted : Fraction, Fraction
        Parameter and observed quantity under a click with one of the tools.
    sign_picked : Kind, Fraction, Fraction
        Kind and place of an onset that a branch passes, under a click.
    pointed : Fraction | None, Fraction | None
        What the pointer is on; None outside the plot.
    mark_chosen : str
        A click on a mark: its ledger row.
    resized : int, int
        Columns and rows of the plot in device pixels.
    """

    view_wanted = Signal(object, bool)
    picked = Signal(object, object)
    sign_picked = Signal(object, object, object)
    read_by_eye = Signal(object, object)
    probe_wanted = Signal(object, object)
    pointed = Signal(object, object)
    mark_chosen = Signal(str)
    resized = Signal(int, int)

    def __init__(self, parent: QWidget | None = None) -> None:
        super().__init__(parent)
        self.view = UNIT_VIEW
        self.labels = Labels()
        self.tool = "pick"
        self.field: Field | None = None
        self.image: QImage | None = None
        self._pixels: object = None
        self.image_view = UNIT_VIEW
        self.glimpse: Glimpse | None = None
        self._strip = LyapunovStrip()
        self.marks: tuple[Mark, ...] = ()
        self.selected = ""
        self.hovered = ""
        self.probe: Fraction | None = None
        self.notice = ""
        self.waiting = ""
        self.pending: dict[int, tuple[Fraction, Fraction, str]] = {}
        self.cursor_place: tuple[float, float] | None = None
        self.branches = BranchOverlay()
        self.gestures = Gestures(self)
        self.callout: Callout | None = None
        self.parts = lay_out(QSizeF(640, 480), 1.0, QFontMetricsF(self._font()))
        self.setMouseTracking(True)
        self.setFocusPolicy(Qt.FocusPolicy.StrongFocus)
        self.setContextMenuPolicy(Qt.ContextMenuPolicy.PreventContextMenu)
        self.setSizePolicy(QSizePolicy.Policy.Expanding, QSizePolicy.Policy.Expanding)
        self.setMinimumSize(320, 260)
        self.setAccessibleName("Bifurcation diagram")
        self.setAccessibleDescription(
            "Arrow keys pan, plus and minus zoom, Shift with arrow keys moves a cursor, "
            "Enter picks at the cursor."
        )
        self.setCursor(Qt.CursorShape.CrossCursor)

    # --- what is shown -------------------------------------------------------------------------------------

    def show_view(self, view: View) -> None:
        """Show another view at once, with whatever has been drawn of it so far."""
        if view != self.view:
            self.view = view
            self.close_callout()
            self.update()

    def show_picture(self, image: QImage, pixels: object, field: Field, view: View) -> None:
        """Replace the picture by one drawn for `view`. `pixels` is the memory that `image` looks at."""
        # The order counts: the old memory must outlive the old image.
        self.image = image
        self._pixels = pixels
        self.field, self.image_view = field, view
        if view == self.view:
            self.glimpse = None
        self._strip.show(field.lyapunov)
        self.update()

    def show_glimpse(self, glimpse: Glimpse) -> None:
        """Show another view with a first look at it: the plot before this returns, what is around it in the
        next turn.
        """
        self.glimpse, self.view = glimpse, glimpse.view
        self.close_callout()
        self.repaint(self.parts.plot.toAlignedRect())
        self.update()

    def forget_picture(self) -> None:
        """Drop a picture that belongs to another system."""
        self.image, self.field, self.glimpse = None, None, None
        self._strip.show(None)
        self.update()

    def show_labels(self, labels: Labels) -> None:
        """Name the axes."""
        self.labels = labels
        self.update()

    def show_marks(self, marks: Sequence[Mark], selected: str) -> None:
        """Show the ledger's rows, one of them emphasised."""
        self.marks, self.selected = tuple(marks), selected
        if all(mark.row != self.hovered for mark in marks):
            self.hovered = ""
        self.update()

    def show_branches(self, curves: BranchCurves | None) -> None:
        """Show the branches of a view, or none."""
        if curves is not self.branches.curves:
            self.branches.show(curves)
            self.update()

    def show_probe(self, value: Fraction | None) -> None:
        """Show where the probed orbit lies, or nothing."""
        self.probe = value
        self.update()

    def show_notice(self, words: str) -> None:
        """Say something calm over the plot; an empty text removes it."""
        if words != self.notice:
            self.notice = words
            self.update()

    def show_waiting(self, words: str) -> None:
        """Say at the foot of the plot what the picture waits for; an empty text removes it."""
        if words != self.waiting:
            self.waiting = words
            self.update()

    def set_tool(self, tool: str) -> None:
        """Choose what a plain click does: one of `TOOLS`."""
        self.tool = tool
        self.update()

    def add_pending(self, number: int, parameter: Fraction, observed: Fraction, words: str) -> None:
        """Mark the place of a click that is being worked on."""
        self.pending[number] = (parameter, observed, words)
        self.update()

    def remove_pending(self, number: int) -> None:
        """Take the mark of a click away."""
        if self.pending.pop(number, None) is not None:
            self.update()

    def show_callout(
        self, parameter: Fraction, observed: Fraction, words: str, choices: Sequence[Choice] = ()
    ) -> None:
        """Say something at a place of the plot, with buttons to choose from if there are any."""
        self.close_callout()
        self.callout = Callout(self, words, choices)
        self.callout.closed.connect(self._callout_closed)
        self.callout.point_at(self.point(parameter, observed), self.parts.plot)

    def close_callout(self) -> None:
        """Take the callout away, if there is one."""
        if self.callout is not None:
            self.callout.dismiss()

    def _callout_closed(self) -> None:
        self.callout = None
        self.setFocus(Qt.FocusReason.OtherFocusReason)

    # --- places --------------------------------------------------------------------------------------------

    def place_at(self, position: QPointF) -> tuple[float, float]:
        """(u, v) of a position, clamped to the plot."""
        plot = self.parts.plot
        u = (position.x() - plot.left()) / plot.width()
        v = (plot.bottom() - position.y()) / plot.height()
        return min(max(u, 0.0), 1.0), min(max(v, 0.0), 1.0)

    def values_at(self, position: QPointF) -> tuple[Fraction, Fraction]:
        """Parameter and observed quantity at a position."""
        return place(self.view, *self.place_at(position))

    def point(self, parameter: Fraction, observed: Fraction) -> QPointF:
        """Position of a pair of values."""
        plot = self.parts.plot
        return QPointF(
            plot.left() + unit_x(self.view, parameter) * plot.width(),
            plot.bottom() - unit_y(self.view, observed) * plot.height(),
        )

    def words_at(self, parameter: Fraction, observed: Fraction) -> str:
        """Both coordinates in the digits that the view can tell apart."""
        across = reading(parameter, self.view.width, self.parts.columns)
        up = reading(observed, self.view.height, self.parts.rows)
        return f"{self.labels.parameter} {across}   {self.labels.observe} {up}"

    def mark_under(self, position: QPointF) -> Mark | None:
        """The mark that a position is on."""
        return mark_at(self.marks, self.view, self.parts.plot, position, self.parts.marks)

    # --- Qt ------------------------------------------------------------------------------------------------

    def sizeHint(self) -> QSize:  # noqa: D102
        return QSize(820, 640)

    def _font(self):
        return mono_font(0.92)

    def lay_out_parts(self) -> None:
        """Divide the widget anew, and say so when the picture's size changes."""
        before: DiagramLayout = self.parts
        self.parts = lay_out(QSizeF(self.size()), self.devicePixelRatioF(), QFontMetricsF(self._font()))
        if (before.columns, before.rows) != (self.parts.columns, self.parts.rows):
            self.resized.emit(self.parts.columns, self.parts.rows)

    def resizeEvent(self, event: QResizeEvent) -> None:  # noqa: D102
        super().resizeEvent(event)
        self.close_callout()
        self.lay_out_parts()

    def changeEvent(self, event: QEvent) -> None:  # noqa: D102
        super().changeEvent(event)
        if event.type() in (QEvent.Type.PaletteChange, QEvent.Type.FontChange, QEvent.Type.StyleChange):
            self.lay_out_parts()
            self.update()

    def event(self, event: QEvent) -> bool:  # noqa: D102
        if event.type() == QEvent.Type.ToolTip and isinstance(event, QHelpEvent):
            mark = self.mark_under(QPointF(event.pos()))
            if mark:
                QToolTip.showText(event.globalPos(), mark.words, self)
            else:
                QToolTip.hideText()
                event.ignore()
            return True
        if event.type() == QEvent.Type.DevicePixelRatioChange:
            self.lay_out_parts()
        return super().event(event)

    def mousePressEvent(self, event: QMouseEvent) -> None:  # noqa: D102
        self.close_callout()
        self.gestures.press(event)

    def mouseMoveEvent(self, event: QMouseEvent) -> None:  # noqa: D102
        self.gestures.move(event)

    def mouseReleaseEvent(self, event: QMouseEvent) -> None:  # noqa: D102
        self.gestures.release(event)

    def wheelEvent(self, event: QWheelEvent) -> None:  # noqa: D102
        self.gestures.wheel(event)

    def leaveEvent(self, event: QEvent) -> None:  # noqa: D102
        super().leaveEvent(event)
        self.gestures.leave()

    def focusInEvent(self, event) -> None:  # noqa: D102
        super().focusInEvent(event)
        self.update()

    def focusOutEvent(self, event) -> None:  # noqa: D102
        super().focusOutEvent(event)
        self.update()

    # --- painting ------------------------------------------------------------------------------------------

    def paintEvent(self, event: QPaintEvent) -> None:  # noqa: D102
        painter = QPainter(self)
        painter.setFont(self._font())
        around = not self.parts.plot.toAlignedRect().contains(event.rect())
        if around:
            painter.fillRect(self.rect(), color(current_theme().surface))
        self._paint_picture(painter)
        if around:
            self._paint_around(painter)
        self._paint_over(painter, around=around)
        painter.end()

    def _picture_extent(self) -> tuple[float, float]:
        """Left edge and width of the drawn columns on the screen."""
        plot = self.parts.plot
        left, right = unit_x(self.view, self.image_view.left), unit_x(self.view, self.image_view.right)
        return plot.left() + left * plot.width(), (right - left) * plot.width()

    def _paint_picture(self, painter: QPainter) -> None:
        theme, plot, view = current_theme(), self.parts.plot, self.view
        glimpse = self.glimpse
        if self.notice or self.image is None:
            painter.fillRect(plot, color(theme.plot))
        elif glimpse is not None and glimpse.view == view != self.image_view:
            self._paint_glimpse(painter, glimpse.image)
        elif self.image_view == view and self.image.size() == QSize(self.parts.columns, self.parts.rows):
            painter.drawImage(plot, self.image)
        else:
            painter.fillRect(plot, color(theme.plot))
            paint.paint_stretched(painter, plot, view, self.image, self.image_view)
        if self.field is not None and not self.notice:
            extent = self._picture_extent()
            paint.paint_escaped(painter, theme, plot, self.field.escaped, *extent, self.labels.lost)
        if self.image is None and not self.notice:
            painter.setPen(color(theme.muted))
            painter.drawText(plot, Qt.AlignmentFlag.AlignCenter, "Drawing\N{HORIZONTAL ELLIPSIS}")

    def _paint_glimpse(self, painter: QPainter, image: QImage) -> None:
        plot, columns, rows = self.parts.plot, self.parts.columns, self.parts.rows
        thin = max(1, round(rows / image.height()))
        # Its last column may lie half outside the view.
        painter.drawImage(plot, image, QRectF(0, 0, min(image.width(), columns / thin), image.height()))

    def _paint_around(self, painter: QPainter) -> None:
        theme, parts, view, labels = current_theme(), self.parts, self.view, self.labels
        left, width = self._picture_extent()
        if self.field is not None and not self.notice:
            paint.paint_periods(painter, theme, parts.periods, self.field.period, left, width)
        self._strip.paint(painter, theme, parts.strip, left, width, empty=bool(self.notice))
        paint_left_axis(
            painter,
            theme,
            parts.plot,
            parts.names,
            view.bottom,
            view.top,
            labels.observe,
            labels.observe_unit,
        )
        paint_bottom_axis(
            painter, theme, parts.axis, view.left, view.right, labels.parameter, labels.parameter_unit
        )

    def _paint_over(self, painter: QPainter, *, around: bool) -> None:
        theme, parts, view = current_theme(), self.parts, self.view
        if self.probe is not None and view.left <= self.probe <= view.right:
            x = parts.plot.left() + unit_x(view, self.probe) * parts.plot.width()
            painter.setPen(QPen(color(theme.text, 0.8), 1.0, Qt.PenStyle.DashDotLine))
            painter.drawLine(QPointF(x, parts.plot.top()), QPointF(x, parts.strip.bottom()))
            paint.paint_tag(painter, theme, parts.plot, QPointF(x + 5, parts.plot.bottom() - 6), "probe")
        self.branches.paint(painter, theme, view, parts.plot, self.marks)
        paint_marks(
            painter,
            theme,
            self.marks,
            view,
            parts.plot,
            parts.marks,
            parts.strip.bottom(),
            self.selected,
            self.hovered,
            in_lane=around,
        )
        if self.notice:
            paint.paint_notice(painter, theme, parts.plot, self.notice)
        elif self.waiting:
            corner = parts.plot.bottomLeft() + QPointF(8, -8)
            paint.paint_tag(painter, theme, parts.plot, corner, f"{self.waiting}\N{HORIZONTAL ELLIPSIS}")
        for parameter, observed, words in self.pending.values():
            paint.paint_pending(painter, theme, parts.plot, self.point(parameter, observed), words)
        self.branches.paint_words(painter, theme, view, parts.plot, self.words_at)
        self.gestures.paint(painter, theme)
        if self.hasFocus():
            painter.setPen(QPen(color(theme.accent), 1.5))
            painter.setBrush(Qt.BrushStyle.NoBrush)
            painter.drawRect(parts.plot.adjusted(-1, -1, 1, 1))
