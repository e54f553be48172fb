"""Ratios of a ladder against level, with what follows from them: limit, delta, class and next onset."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

from PySide6.QtCore import QEvent, QPointF, QRectF, Qt
from PySide6.QtGui import QFontMetricsF, QPainter, QPen
from PySide6.QtWidgets import (
    QGridLayout,
    QLabel,
    QScrollArea,
    QSizePolicy,
    QSplitter,
    QStackedLayout,
    QVBoxLayout,
    QWidget,
)

from tinemark.document.estimates import ClassValue, Estimate, LadderEstimates, LevelEstimate, estimate_text
from tinemark.window.faces import FaceKeeper, wear
from tinemark.window.ledger_detail import grouped
from tinemark.window.ledger_lines import full_text
from tinemark.window.number_label import NumberLabel
from tinemark.window.panel_plot import PanelPlot, line_pen
from tinemark.window.theme import color, current_theme, small_font

NO_LADDER = "No ratios yet.\nSelect a row of a ladder. A ratio needs three onsets in a row."
NO_RATIO = "Needs three onsets in a row for a ratio"
NEAR_SHARE = 0.2
"""A class value is drawn where it lies within this share of its own size of some ratio."""
BAR_LEAST = 3.0


@dataclass(frozen=True)
class RatioPoint:
    """One ratio to draw."""

    level: int
    value: float
    spread: float


def ratio_points(levels: Sequence[LevelEstimate]) -> tuple[RatioPoint, ...]:
    """The ratios that are known, by level."""
    return tuple(
        RatioPoint(level.level, float(level.ratio.value), float(level.ratio.uncertainty))
        for level in levels
        if level.ratio is not None
    )


def near_classes(classes: Sequence[ClassValue], points: Sequence[RatioPoint]) -> tuple[ClassValue, ...]:
    """Class values worth drawing: those close to some ratio, and always the closest of all."""
    if not points or not classes:
        return ()

    def distance(reference: ClassValue) -> float:
        return min(max(0.0, abs(p.value - float(reference.delta)) - p.spread) for p in points)

    closest = min(classes, key=distance)
    return tuple(c for c in classes if c is closest or distance(c) <= NEAR_SHARE * float(c.delta))


class RatioPlot(PanelPlot):
    """The plot: whole levels across, ratios up, class values as labelled lines."""

    def __init__(self) -> None:
        super().__init__(across="level", up="ratio", whole_across=True, name="Ratio against level")
        self._points: tuple[RatioPoint, ...] = ()
        self._classes: tuple[ClassValue, ...] = ()
        self._delta: Estimate | None = None
        self.setMinimumHeight(120)

    def show_ratios(
        self, points: Sequence[RatioPoint], classes: Sequence[ClassValue], delta: Estimate | None
    ) -> None:
        """Draw other ratios; the range follows them."""
        self._points, self._classes, self._delta = tuple(points), near_classes(classes, points), delta
        self._show_all()
        self.viewport().update()

    def _show_all(self) -> None:
        """All bars and all drawn class values, with room at the edges."""
        if not self._points:
            self.set_range((0.5, 4.5), (0.0, 10.0), 0)
            return
        ends = [float(c.delta) for c in self._classes]
        typical = sorted(abs(p.value) for p in self._points)[len(self._points) // 2]
        for point in self._points:
            # One hopeless bar must not flatten all the others.
            spread = min(point.spread, 2 * typical)
            ends += [point.value - spread, point.value + spread]
        low, high = min(ends), max(ends)
        room = max((high - low) * 0.16, 0.02 * abs(typical), 1e-9)
        levels = [p.level for p in self._points]
        across = (min(levels) - 0.5, max(max(levels), min(levels) + 2) + 0.5)
        self.set_range(across, (low - room, high + room), 0)

    def paintEvent(self, event: QEvent) -> None:
        """The plot's own frame, then the marks, which keep their size on screen."""
        super().paintEvent(event)
        if not self._points:
            return
        painter = QPainter(self.viewport())
        painter.setRenderHint(QPainter.RenderHint.Antialiasing)
        box = self.plotItem.vb.sceneBoundingRect()
        painter.setClipRect(box)
        self._paint_classes(painter, box)
        self._paint_points(painter)
        painter.end()

    def _at(self, level: float, ratio: float) -> QPointF:
        return self.plotItem.vb.mapViewToScene(QPointF(level, ratio))

    def _paint_classes(self, painter: QPainter, box: QRectF) -> None:
        theme = current_theme()
        if self._delta is not None:
            low, high = (
                self._at(0, float(self._delta.value + sign * self._delta.uncertainty)).y() for sign in (-1, 1)
            )
            # A band that fills the plot says nothing.
            if low - high < 0.5 * box.height():
                painter.fillRect(QRectF(box.left(), high, box.width(), low - high), color(theme.accent, 0.14))
        font = small_font(0.88)
        painter.setFont(font)
        metrics = QFontMetricsF(font)
        places = [self._at(p.level, p.value) for p in self._points]
        for reference in self._classes:
            y = self._at(0, float(reference.delta)).y()
            painter.setPen(line_pen(theme.edge, 1.0, dashed=True))
            painter.drawLine(QPointF(box.left(), y), QPointF(box.right(), y))
            words = f"{reference.name} {float(reference.delta):.3f}"
            label = _free_place(box, y, metrics.horizontalAdvance(words) + 6, metrics.height(), places)
            painter.setPen(color(theme.muted))
            painter.drawText(label, Qt.AlignmentFlag.AlignCenter, words)

    def _paint_points(self, painter: QPainter) -> None:
        theme = current_theme()
        places = [self._at(p.level, p.value) for p in self._points]
        painter.setPen(line_pen(theme.accent, 1.0, alpha=0.45))
        for (one, here), (other, there) in zip(
            zip(self._points, places, strict=True),
            list(zip(self._points, places, strict=True))[1:],
            strict=False,
        ):
            if other.level == one.level + 1:
                painter.drawLine(here, there)
        pen = QPen(color(theme.accent), 1.5)
        pen.setCapStyle(Qt.PenCapStyle.FlatCap)
        for point, place in zip(self._points, places, strict=True):
            top = self._at(point.level, point.value + point.spread).y()
            bottom = self._at(point.level, point.value - point.spread).y()
            painter.setPen(pen)
            if bottom - top > 2 * BAR_LEAST:
                painter.drawLine(QPointF(place.x(), top), QPointF(place.x(), bottom))
                for y in (top, bottom):
                    painter.drawLine(QPointF(place.x() - 4, y), QPointF(place.x() + 4, y))
            painter.setPen(Qt.PenStyle.NoPen)
            painter.setBrush(color(theme.accent))
            painter.drawEllipse(place, 3.5, 3.5)


def _free_place(box: QRectF, y: float, width: float, height: float, points: Sequence[QPointF]) -> QRectF:
    """Room for a line's label beside the line: where it covers no point, if there is such a place."""
    lefts = (box.right() - width - 2, box.left() + 4, box.center().x() - width / 2)
    tops = [top for top in (y - height - 3, y + 3) if box.top() <= top and top + height <= box.bottom()]
    rooms = [QRectF(left, top, width, height) for left in lefts for top in tops or (y + 3,)]
    free = (room for room in rooms if not any(room.adjusted(-4, -4, 4, 4).contains(p) for p in points))
    return next(free, rooms[0])


class RatioPanel(QWidget):
    """Shows what a ladder's onsets say together; None, and what to do, where there is no ladder."""

    def __init__(self, parent: QWidget | None = None) -> None:
        super().__init__(parent)
        self.setWindowTitle("Ratios and limit")
        self.setAccessibleName("Ratios and limit")
        self._estimates: LadderEstimates | None = None
        self.plot = RatioPlot()
        self.no_ratio = QLabel(NO_RATIO)
        self.no_ratio.setProperty("rank", "second")
        self.no_ratio.setAlignment(Qt.AlignmentFlag.AlignCenter)
        self.no_ratio.setWordWrap(True)
        self.no_ratio.setMinimumHeight(60)
        self._above = QWidget()
        self._above_stack = QStackedLayout(self._above)
        self._above_stack.addWidget(self.plot)
        self._above_stack.addWidget(self.no_ratio)
        self._parts = QSplitter(Qt.Orientation.Vertical)
        self._parts.setChildrenCollapsible(False)
        self._parts.addWidget(self._above)
        self._parts.addWidget(self._build_words())
        self._parts.setStretchFactor(0, 1)
        self._parts.setStretchFactor(1, 0)
        self._empty = QLabel(NO_LADDER)
        self._empty.setProperty("rank", "second")
        self._empty.setAlignment(Qt.AlignmentFlag.AlignCenter)
        self._empty.setWordWrap(True)
        self._empty.setMargin(16)
        self._stack = QStackedLayout(self)
        self._stack.addWidget(self._empty)
        self._stack.addWidget(self._parts)
        self._faces = FaceKeeper(self)
        self.show_estimates(None)

    def _build_words(self) -> QWidget:
        page = QWidget()
        outer = QVBoxLayout(page)
        outer.setContentsMargins(8, 6, 8, 8)
        outer.setSpacing(6)
        self.verdict = QLabel()
        self.verdict.setWordWrap(True)
        self.verdict.setTextFormat(Qt.TextFormat.PlainText)
        self.verdict.setTextInteractionFlags(
            Qt.TextInteractionFlag.TextSelectableByMouse | Qt.TextInteractionFlag.TextSelectableByKeyboard
        )
        self.verdict.setAccessibleName("Class of the cascade")
        wear(self.verdict, "heading")
        outer.addWidget(self.verdict)
        grid = QGridLayout()
        grid.setHorizontalSpacing(10)
        grid.setVerticalSpacing(4)
        grid.setColumnStretch(1, 1)
        self.limit = self._number(grid, "limit", "Where the ladder accumulates and the cascade ends")
        self.class_limit_name, self.class_limit = self._named_number(
            grid, "limit given the class", "The limit if the class is taken for granted"
        )
        self.delta = self._number(grid, "delta", "What the ratios tend to")
        self.alpha_name, self.alpha = self._named_number(
            grid, "alpha", "By which factor the cycles shrink from level to level"
        )
        self.next_name, self.next = self._named_number(grid, "next onset", "Where to look for the next split")
        outer.addLayout(grid)
        self.coverage = QLabel(
            "Brackets hold the standard uncertainty of the last digits; bars reach to 95 % coverage."
        )
        self.coverage.setProperty("rank", "second")
        wear(self.coverage, "small")
        self.coverage.setWordWrap(True)
        outer.addWidget(self.coverage)
        outer.addStretch(1)
        scroll = QScrollArea()
        scroll.setWidgetResizable(True)
        scroll.setHorizontalScrollBarPolicy(Qt.ScrollBarPolicy.ScrollBarAlwaysOff)
        scroll.setFocusPolicy(Qt.FocusPolicy.NoFocus)
        scroll.setMinimumHeight(80)
        scroll.setWidget(page)
        return scroll

    def _named_number(self, grid: QGridLayout, words: str, tip: str) -> tuple[QLabel, NumberLabel]:
        line = grid.rowCount()
        name = QLabel(words)
        name.setProperty("rank", "second")
        name.setToolTip(tip)
        number = NumberLabel(words)
        number.setWordWrap(True)
        number.setSizePolicy(QSizePolicy.Policy.Ignored, QSizePolicy.Policy.Preferred)
        grid.addWidget(name, line, 0, Qt.AlignmentFlag.AlignTop)
        grid.addWidget(number, line, 1)
        return name, number

    def _number(self, grid: QGridLayout, words: str, tip: str) -> NumberLabel:
        return self._named_number(grid, words, tip)[1]

    def show_estimates(self, estimates: LadderEstimates | None) -> None:
        """Show one ladder's estimates; reasons in words stand where there is no number."""
        self._estimates = estimates
        if estimates is None:
            self._stack.setCurrentWidget(self._empty)
            return
        self._stack.setCurrentWidget(self._parts)
        points = ratio_points(estimates.levels)
        self._above_stack.setCurrentWidget(self.plot if points else self.no_ratio)
        self.no_ratio.setText(no_ratio_words(estimates))
        self.plot.show_ratios(points, estimates.classes, estimates.delta)
        self.plot.setAccessibleDescription(
            "; ".join(f"level {p.level}: {p.value:.6g}" for p in points) or self.no_ratio.text()
        )
        self.verdict.setText(_sentence(estimates.verdict))
        _show(self.limit, estimates.limit, estimates.limit_reason, estimates.parameter)
        for widget in (self.class_limit_name, self.class_limit):
            widget.setVisible(estimates.class_limit is not None)
        if estimates.class_limit is not None:
            _show(self.class_limit, estimates.class_limit, "", estimates.parameter)
        _show(self.delta, estimates.delta, estimates.delta_reason, "")
        for widget in (self.alpha_name, self.alpha):
            widget.setVisible(bool(estimates.alpha or estimates.alpha_reason))
        _show(self.alpha, estimates.alpha, estimates.alpha_reason, "")
        if estimates.predictions:
            first = estimates.predictions[0]
            self.next_name.setText(f"onset {first.level}")
            _show(self.next, first.onset, "", estimates.parameter)
        else:
            self.next_name.setText("next onset")
            _show(self.next, None, estimates.limit_reason, "")
        self.coverage.setVisible(any((estimates.limit, estimates.delta, estimates.predictions)))
        if estimates.used_levels:
            levels = ", ".join(str(level) for level in estimates.used_levels)
            self.verdict.setToolTip(f"Limit, delta and predictions rest on levels {levels}.")
        else:
            self.verdict.setToolTip("")


def no_ratio_words(estimates: LadderEstimates) -> str:
    """Why a ladder has no ratio at all."""
    known = [level.level for level in estimates.levels if level.onset is not None and level.level > 0]
    if len(known) < 3:
        have = f"There {'is' if len(known) == 1 else 'are'} {len(known) or 'none'} so far."
        return f"{NO_RATIO}. {have}\nFollow the ladder further, or click near the next split."
    missing = [level.level for level in estimates.levels if level.onset is None]
    holes = ", ".join(str(level) for level in missing)
    return f"{NO_RATIO}. Level {holes} is missing.\nClick near that split to fill the hole."


def _show(label: NumberLabel, estimate: Estimate | None, reason: str, name: str) -> None:
    if estimate is None:
        label.show_words(_sentence(reason) or "Nothing can be said yet")
        return
    prefix = f"{name} = " if name else ""
    label.show_number(prefix + estimate_text(estimate), full_text(estimate))
    label.setToolTip(grouped(full_text(estimate)))


def _sentence(words: str) -> str:
    return words[:1].upper() + words[1:] if words else ""
