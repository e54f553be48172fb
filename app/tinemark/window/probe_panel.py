"""The probe: the orbit at one parameter value, as a time series and as a return plot."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt
from PySide6.QtCore import QEvent, Qt, QTimer, Signal
from PySide6.QtGui import QColor, QShowEvent
from PySide6.QtWidgets import (
    QHBoxLayout,
    QLabel,
    QLineEdit,
    QSplitter,
    QStackedLayout,
    QStackedWidget,
    QToolButton,
    QVBoxLayout,
    QWidget,
)

from tinemark.systems.errors import NumberError
from tinemark.systems.exact import exact, fraction_text
from tinemark.window.elided_label import ElidedLabel
from tinemark.window.faces import FaceKeeper, wear
from tinemark.window.field_editors import QuietCombo
from tinemark.window.panel_plot import PanelPlot, line_pen
from tinemark.window.theme import current_theme
from tinemark.work.probe import ProbeOrbit
from tinemark.work.waveform import Waveform

Floats = npt.NDArray[np.float64]
SETTLED_STEPS = 60
EARLY_STEPS = 60
MOST_REPEAT = 128
EMPTY = (
    "No probe yet.\n"
    "Click in the diagram with the probe tool, or type a parameter value above and press Enter."
)


class ProbePanel(QWidget):
    """Shows one orbit.

    Signals
    -------
    probe_closed
        The user has finished with the probe.
    value_entered : str
        A parameter value typed into the panel, valid as an exact decimal.
    """

    probe_closed = Signal()
    value_entered = Signal(str)

    def __init__(self, parent: QWidget | None = None) -> None:
        super().__init__(parent)
        self.setWindowTitle("Probe")
        self.setAccessibleName("Probe")
        self._orbit: ProbeOrbit | None = None
        self._words = ""
        self._dress = current_theme().name
        self._stale = True
        self._build_bar()
        self.series = PanelPlot(
            across="step", up="observed", whole_across=True, name="Time series of the orbit"
        )
        self.wave = PanelPlot(across="time", up="observed", name="Waveform of the orbit between its samples")
        self.returns = PanelPlot(across="this step", up="next step", name="Return plot of the orbit")
        self._plots = QSplitter(Qt.Orientation.Horizontal)
        self._plots.setChildrenCollapsible(False)
        self._times = QStackedWidget()
        self._times.addWidget(self.series)
        self._times.addWidget(self.wave)
        self._plots.addWidget(self._times)
        self._plots.addWidget(self.returns)
        self._plots.setStretchFactor(0, 3)
        self._plots.setStretchFactor(1, 2)
        self._empty = QLabel(EMPTY)
        self._empty.setAlignment(Qt.AlignmentFlag.AlignCenter)
        self._empty.setWordWrap(True)
        self._empty.setProperty("rank", "second")
        self._stack = QStackedLayout()
        self._stack.addWidget(self._empty)
        self._stack.addWidget(self._plots)
        outer = QVBoxLayout(self)
        outer.setContentsMargins(10, 8, 10, 8)
        outer.setSpacing(6)
        outer.addLayout(self._bar)
        outer.addLayout(self._stack, 1)
        self._faces = FaceKeeper(self, self._redress)

    def _build_bar(self) -> None:
        self._bar = QHBoxLayout()
        self._bar.setSpacing(8)
        self.name = QLabel("Parameter value")
        self.value = QLineEdit()
        wear(self.value, "number")
        self.value.setAccessibleName("Parameter value of the probe")
        self.value.setPlaceholderText("for example 3.5")
        self.value.setMaximumWidth(self.value.fontMetrics().horizontalAdvance("0" * 24))
        self.value.returnPressed.connect(self._enter_value)
        self.value.textEdited.connect(lambda: self._mark_value(""))
        self.name.setBuddy(self.value)
        self.value.setMinimumWidth(self.value.fontMetrics().horizontalAdvance("0" * 14))
        # The words give way in a narrow panel, not the value.
        self.words = ElidedLabel()
        self.words.setTextInteractionFlags(Qt.TextInteractionFlag.TextSelectableByMouse)
        self.words.setProperty("rank", "second")
        self.part = QuietCombo()
        self.part.addItem("settled orbit", "settled")
        self.part.addItem("from the start", "early")
        self.part.addItem("all steps", "all")
        self.part.setAccessibleName("Steps shown")
        self.part.currentIndexChanged.connect(self._draw)
        self.close_button = QToolButton()
        self.close_button.setText("Close probe")
        self.close_button.clicked.connect(self.probe_closed)
        for widget in (self.name, self.value):
            self._bar.addWidget(widget)
        self._bar.addWidget(self.words, 1)
        for widget in (self.part, self.close_button):
            self._bar.addWidget(widget)

    def show_orbit(
        self,
        orbit: ProbeOrbit | None,
        *,
        parameter: str = "",
        value: str = "",
        observe: str = "",
        state: str = "",
        words: str = "",
    ) -> None:
        """Show an orbit, or the empty state for None.

        Parameters
        ----------
        parameter, value
            Name and decimal text of the swept parameter.
        observe, state
            Names for the axes: the observed quantity, and the state of a one-state map.
        words
            A sentence on period and multiplier, where they are known; without an orbit, why there is none.
        """
        self._orbit = orbit
        if parameter:
            self.name.setText(parameter)
        shown = value or (fraction_text(orbit.parameter_value, 30) if orbit is not None else "")
        if orbit is not None and not (self.value.hasFocus() and self.value.isModified()):
            self.value.setText(shown)
            self._mark_value("")
        self._words = words
        self._names = (observe or "observed", state or observe or "observed")
        self._draw()

    def _draw(self) -> None:
        # A folded panel is drawn when it opens.
        self._stale = not self.isVisible()
        if self._stale:
            return
        orbit = self._orbit
        if orbit is None:
            self._stack.setCurrentWidget(self._empty)
            # Without an orbit, words say why there is none.
            self._empty.setText(self._words or EMPTY)
            self.words.set_words("")
            return
        self._stack.setCurrentWidget(self._plots)
        observed, escaped = finite_part(np.asarray(orbit.observed, dtype=np.float64))
        one_state = orbit.states.ndim == 2 and orbit.states.shape[1] == 1
        stepped = finite_part(np.asarray(orbit.states[:, 0], dtype=np.float64))[0] if one_state else observed
        part = steps_shown(len(observed), str(self.part.currentData()))
        observe, state = self._names
        what = "step" if orbit.times is None else "sample"
        self.part.setItemText(2, f"all {what}s")
        self.series.set_labels(across=what, up=observe)
        across = state if one_state else observe
        self.returns.set_labels(across=f"{across} at {what} n", up=f"{across} at {what} n + 1")
        is_wave = orbit.wave is not None and self.part.currentData() == "settled"
        self._times.setCurrentWidget(self.wave if is_wave else self.series)
        if orbit.wave is not None and is_wave:
            self.wave.set_labels(across="time since the start", up=observe)
            self._draw_wave(orbit.wave, observed)
        else:
            self._draw_series(observed, part)
        self._draw_returns(stepped[part.start : part.stop], orbit.map_curve if one_state else None)
        if escaped:
            seen = f"The orbit escapes after {len(observed)} {what}s."
            if orbit.times is not None:
                seen = f"The orbit has no sample after {len(observed)}: it escapes, or is sampled no more."
        else:
            seen = repeat_words(np.asarray(orbit.states, dtype=np.float64), what)
        said = [words for words in (self._words, seen if escaped or not self._words else "") if words]
        self.words.set_words(" ".join(said))

    def _draw_series(self, observed: Floats, part: range) -> None:
        theme = current_theme()
        plot = self.series.plotItem
        plot.clear()
        values = observed[part.start : part.stop]
        steps = np.arange(part.start, part.stop, dtype=np.float64)
        if not len(values):
            return
        dense = len(values) > 200
        plot.plot(
            steps, values, pen=line_pen(theme.edge, 1.0, alpha=0.35 if dense else 0.8), antialias=not dense
        )
        plot.plot(
            steps,
            values,
            pen=None,
            symbol="o",
            symbolSize=3 if dense else 6,
            antialias=True,
            symbolPen=None,
            symbolBrush=QColor(theme.accent),
        )
        _fit(self.series, float(steps[0]), float(steps[-1]), values)

    def _draw_wave(self, wave: Waveform, observed: Floats) -> None:
        theme = current_theme()
        plot = self.wave.plotItem
        plot.clear()
        plot.plot(wave.times, wave.observed, pen=line_pen(theme.text, 1.3), antialias=True)
        samples = observed[wave.first : wave.first + len(wave.sample_times)]
        plot.plot(
            wave.sample_times,
            samples,
            pen=None,
            symbol="o",
            symbolSize=6,
            antialias=True,
            symbolPen=None,
            symbolBrush=QColor(theme.accent),
        )
        _fit(self.wave, float(wave.times[0]), float(wave.times[-1]), wave.observed)

    def _draw_returns(self, values: Floats, curve: tuple[Floats, Floats] | None) -> None:
        theme = current_theme()
        plot = self.returns.plotItem
        plot.clear()
        if not len(values):
            return
        reach = [values]
        if curve is not None:
            across, up = (np.asarray(side, dtype=np.float64) for side in curve)
            keep = np.isfinite(across) & np.isfinite(up)
            across, up = across[keep], up[keep]
            plot.plot(across, up, pen=line_pen(theme.text, 1.6), antialias=True)
            reach += [across, up]
        low, high = _span(np.concatenate(reach))
        plot.plot([low, high], [low, high], pen=line_pen(theme.edge, 1.0, dashed=True), antialias=True)
        if curve is not None and len(values) > 1:
            plot.plot(*cobweb(values), pen=line_pen(theme.accent, 1.2, alpha=0.75))
        if len(values) > 1:
            plot.plot(
                values[:-1],
                values[1:],
                pen=None,
                symbol="o",
                symbolSize=3 if len(values) > 200 else 5,
                antialias=True,
                symbolPen=None,
                symbolBrush=QColor(theme.accent),
            )
        self.returns.set_range((low, high), (low, high), 0.03)

    def _enter_value(self) -> None:
        try:
            typed = exact(self.value.text())
        except NumberError as error:
            self._mark_value(str(error))
            return
        self._mark_value("")
        self.value_entered.emit(typed.text)

    def _mark_value(self, trouble: str) -> None:
        self.value.setProperty("invalid", bool(trouble))
        self.value.style().unpolish(self.value)
        self.value.style().polish(self.value)
        self.words.setProperty("rank", "error" if trouble else "second")
        self.words.style().unpolish(self.words)
        self.words.style().polish(self.words)
        if trouble:
            self.words.set_words(trouble)
        elif self.words.words != self._words:
            self.words.set_words(self._words)

    def prepare(self) -> None:
        """Make what the first orbit is drawn with, and draw one: symbols are made on their first use."""
        if self._orbit is not None:
            return
        values = np.linspace(0.0, 1.0, SETTLED_STEPS)
        self._draw_series(values, range(SETTLED_STEPS))
        self._draw_wave(Waveform(values, values, 0, values), values)
        self._draw_returns(values, (values, values))
        for plot in (self.series, self.wave, self.returns):
            plot.plotItem.clear()

    def showEvent(self, event: QShowEvent) -> None:
        """Draw what came while the panel was folded."""
        super().showEvent(event)
        if self._stale:
            self._draw()

    def changeEvent(self, event: QEvent) -> None:
        """Redraw in the new theme."""
        super().changeEvent(event)
        if event.type() == QEvent.Type.PaletteChange and self._dress != current_theme().name:
            self._dress = current_theme().name
            # In a turn of its own: a change of theme has enough to do. The plots' axes redress themselves.
            QTimer.singleShot(0, self, self._draw)

    def _redress(self) -> None:
        self.series.redress()
        self.wave.redress()
        self.returns.redress()
        self._draw()


def finite_part(values: Floats) -> tuple[Floats, bool]:
    """The values before the first that is no finite number, and whether there was one."""
    bad = np.flatnonzero(~np.isfinite(values))
    return (values[: bad[0]], True) if len(bad) else (values, False)


def repeat_words(states: Floats, what: str = "step") -> str:
    """What is seen of an orbit's period, as a sentence.

    The last steps are compared with those p steps earlier, for p up to `MOST_REPEAT`; agreement to a part in
    10**9 of the orbit's size counts. It is what the eye would say, not a proof: near an onset an orbit
    takes long to settle.

    Parameters
    ----------
    states
        Shape (steps, number of states), finite.
    what
        What one of them is: a step, or a sample.
    """
    steps = len(states)
    for period in range(1, min(MOST_REPEAT, steps // 4) + 1):
        # Over 64 steps at least: an orbit that creeps past a fold looks steady for a while.
        span = min(max(2 * period, 64), steps - period)
        tail = states[-span:]
        near = 1e-9 * max(float(np.abs(tail).max()), 1e-300)
        if float(np.abs(tail - states[-span - period : -period]).max()) <= near:
            steady = (
                "Settled to a steady state." if what == "step" else "Settled to period 1: every sample alike."
            )
            return steady if period == 1 else f"Settled to period {period}."
    return f"Not settled to any period up to {min(MOST_REPEAT, steps // 4)} in {steps} {what}s."


def steps_shown(steps: int, part: str) -> range:
    """Steps to draw: the "settled" end of the orbit, its "early" part, or "all"."""
    if part == "early":
        return range(min(steps, EARLY_STEPS))
    if part == "settled":
        return range(max(0, steps - SETTLED_STEPS), steps)
    return range(steps)


def cobweb(values: Floats) -> tuple[Floats, Floats]:
    """Corners of the cobweb path: up to the curve, across to the diagonal, and so on.

    Parameters
    ----------
    values
        Orbit of a one-state map, shape (n,).

    Returns
    -------
    across, up
        Shapes (2n - 1,).
    """
    across = np.repeat(values, 2)[: 2 * len(values) - 1]
    up = np.repeat(values, 2)[1:]
    return across, up


def _span(values: Floats) -> tuple[float, float]:
    low, high = float(values.min()), float(values.max())
    if high <= low:
        pad = abs(low) * 0.1 or 1.0
        return low - pad, high + pad
    return low, high


def _fit(plot: PanelPlot, left: float, right: float, values: Floats) -> None:
    low, high = _span(values)
    # A steady orbit that has settled to its last digit is a level line, not noise filling the plot.
    floor = 1e-3 * max(abs(low), abs(high))
    if high - low < floor:
        low, high = (low + high - floor) / 2, (low + high + floor) / 2
    plot.set_range((left, max(right, left + 1)), (low, high), 0.06)
