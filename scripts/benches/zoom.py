"""From a zoom gesture to its first picture on screen, in the real window, against repainting a blank image.

Timed is what a hand would wait for: from the moment at which the window is handed the release of the mouse
that ends a zoom box, until the plot has been painted with newly drawn orbits of the new view and the painted
pixels have been handed to the screen. The old picture, stretched, does not count. Beside each zoom, in the
same process and before or after it in turn, a blank image item is given new pixels and repainted, pixels
handed over as well. Both windows are 1280x800; the ratio is the median over the pairs.

Run off screen and, where Xvfb or a display is there, against a real X server.
"""

from __future__ import annotations

import json
import os
import shutil
import statistics
import subprocess
import sys
import tempfile
import time
from collections.abc import Callable, Iterator
from fractions import Fraction
from functools import partial
from typing import Any

from benches.measuring import Figure, at_most, reading

SIZE = (1280, 800)
ZOOMS = 40
PATIENCE_S = 60.0
MOST_TIMES_BLANK = 3.0


def figures() -> Iterator[Figure]:
    """Times from the gesture to the painted picture over those of a blank image item, in turn; medians."""
    yield from _figures_on("offscreen", "off screen", None)
    if os.environ.get("DISPLAY") or shutil.which("Xvfb"):
        import screenshots

        with screenshots.display() as screen:
            yield from _figures_on("xcb", "X server", screen)


def _figures_on(platform: str, words: str, screen: str | None) -> Iterator[Figure]:
    with tempfile.TemporaryDirectory() as private:
        surroundings = os.environ | {
            "QT_QPA_PLATFORM": platform,
            "TINEMARK_CONFIG": private,
            "PYTHONPATH": os.pathsep.join(sys.path),
        }
        if screen is not None:
            surroundings["DISPLAY"] = screen
        told = subprocess.run(
            [sys.executable, "-m", "benches.zoom"],
            env=surroundings,
            capture_output=True,
            text=True,
            check=True,
            timeout=4 * PATIENCE_S,
        ).stdout
    measured = {name: [seconds * 1e3 for seconds in each] for name, each in json.loads(told).items()}
    ratio = statistics.median(
        ours / blank for ours, blank in zip(measured["first"], measured["blank"], strict=True)
    )
    middle = {name: statistics.median(each) for name, each in measured.items()}
    yield reading(f"{words}: from a zoom gesture to its first picture painted (ms)", middle["first"])
    yield reading(f"{words}: until axes, marks and strip are painted too (ms)", middle["around"])
    yield reading(f"{words}: until the first full picture is painted (ms)", middle["full"])
    yield reading(f"{words}: repainting a blank image item of that size (ms)", middle["blank"])
    yield at_most(
        f"{words}: first picture after a zoom, times repainting a blank image item", ratio, MOST_TIMES_BLANK
    )


class Watch:
    """Notes when the diagram has been painted, and with what."""

    def __init__(self, diagram_class: Any) -> None:
        self.first = self.around = self.full = 0.0
        self._began_at: Any = None
        paint, repaint = diagram_class.paintEvent, diagram_class.repaint

        def painted(diagram: Any, event: Any) -> None:
            paint(diagram, event)
            self._note(diagram, whole=event.rect() == diagram.rect())

        def repainted(diagram: Any, *area: Any) -> None:
            repaint(diagram, *area)
            # A repaint comes back when the pixels have been handed over.
            if self.first and diagram.view != self._began_at:
                self.first = time.perf_counter()

        diagram_class.paintEvent, diagram_class.repaint = painted, repainted

    def begin(self, view: Any) -> None:
        """Forget what was noted; what is shown of another view from now on is new."""
        self.first = self.around = self.full = 0.0
        self._began_at = view

    def _note(self, diagram: Any, *, whole: bool) -> None:
        now, view = time.perf_counter(), diagram.view
        if view == self._began_at:
            return
        full = diagram.image_view == view
        glimpsed = diagram.glimpse is not None and diagram.glimpse.view == view
        if full or glimpsed:
            self.first = self.first or now
            self.around = self.around or (now if whole else 0.0)
        if full:
            self.full = self.full or now


def run_zooms() -> dict[str, list[float]]:
    """Seconds of each zoom's stages and of each blank repaint. Runs in a process of its own."""
    import pyqtgraph as pg

    from tinemark.window.app import application, make_window
    from tinemark.window.diagram import Diagram

    watch = Watch(Diagram)
    app = application()
    window = make_window()
    window.resize(*SIZE)
    window.show()
    window.workers.start()
    rested = _rested(window)
    _until(app, rested)
    blank = pg.GraphicsView()
    blank.resize(*SIZE)
    item = pg.ImageItem(axisOrder="row-major")
    blank.addItem(item)
    blank.show()
    app.processEvents()
    measured: dict[str, list[float]] = {"first": [], "around": [], "full": [], "blank": []}
    for number in range(ZOOMS):
        # First one, then the other: whoever comes first finds the processor's memory cold.
        turn: list[Callable[[], None]] = [
            lambda: measured["blank"].append(_blank_repaint(blank, item)),
            partial(_zoom, app, window, watch, number, measured),
        ]
        for each in turn if number % 2 else reversed(turn):
            each()
        _until(app, rested)
        window.keeper.view_back()
        _until(app, rested)
    window.files.may_leave = lambda: True
    window.close()
    blank.close()
    return measured


def _zoom(app: Any, window: Any, watch: Watch, number: int, measured: dict[str, list[float]]) -> None:
    """A zoom box of another place and size each time, drawn with the mouse."""
    from PySide6.QtCore import QEvent, QPointF, Qt

    diagram = window.diagram
    plot = diagram.parts.plot
    share = Fraction(number, ZOOMS)
    corners = [
        QPointF(plot.left() + float(u) * plot.width(), plot.bottom() - float(v) * plot.height())
        for u, v in ((share / 2, share / 3), (share / 2 + Fraction(2, 5), share / 3 + Fraction(3, 5)))
    ]
    left, none = Qt.MouseButton.LeftButton, Qt.MouseButton.NoButton
    _send(diagram, QEvent.Type.MouseButtonPress, corners[0], left, left)
    _send(diagram, QEvent.Type.MouseMove, corners[1], none, left)
    app.processEvents()
    watch.begin(diagram.view)
    before = time.perf_counter()
    _send(diagram, QEvent.Type.MouseButtonRelease, corners[1], left, none)
    _until(app, lambda: watch.full > 0)
    for name in ("first", "around", "full"):
        measured[name].append(getattr(watch, name) - before)


def _send(diagram: Any, kind: Any, place: Any, button: Any, held: Any) -> None:
    from PySide6.QtCore import QPointF, Qt
    from PySide6.QtGui import QMouseEvent
    from PySide6.QtWidgets import QApplication

    everywhere = QPointF(diagram.mapToGlobal(place))
    event = QMouseEvent(kind, place, everywhere, button, held, Qt.KeyboardModifier.NoModifier)
    QApplication.sendEvent(diagram, event)


def _blank_repaint(view: Any, item: Any) -> float:
    import numpy as np

    picture = np.zeros((SIZE[1], SIZE[0], 4), np.uint8)
    before = time.perf_counter()
    item.setImage(picture, autoLevels=False)
    view.viewport().repaint()
    return time.perf_counter() - before


def _rested(window: Any) -> Callable[[], bool]:
    """True when the view is drawn and nothing is drawn any more: each zoom starts from rest."""

    def rested() -> bool:
        diagram, desk = window.diagram, window.pictures.desk
        return (
            desk is not None
            and diagram.field is not None
            and diagram.image_view == window.keeper.session.view
            and diagram.field.steps > 5_000_000
            and desk.wait_idle(0.0)
        )

    return rested


def _until(app: Any, done: Callable[[], bool]) -> None:
    from PySide6.QtCore import QEventLoop

    deadline = time.perf_counter() + PATIENCE_S
    while not done():
        if time.perf_counter() > deadline:
            raise SystemExit("the picture did not come")
        app.processEvents(QEventLoop.ProcessEventsFlag.AllEvents, 20)
        time.sleep(0.001)


if __name__ == "__main__":
    print(json.dumps(run_zooms()))
