"""From a zoom to its first picture in the real window, against repainting a blank image of that size."""

from __future__ import annotations

import json
import os
import statistics
import subprocess
import sys
import tempfile
import time
from collections.abc import Iterator
from fractions import Fraction
from typing import Any

from benches.measuring import Figure, at_most, reading

SIZE = (1280, 800)
ZOOMS = 24
PATIENCE_S = 60.0
MOST_TIMES_BLANK = 3.0


def figures() -> Iterator[Figure]:
    """Time from the gesture to the painted picture, over that of a blank image item, in turn; medians."""
    with tempfile.TemporaryDirectory() as private:
        surroundings = os.environ | {
            "QT_QPA_PLATFORM": "offscreen",
            "TINEMARK_CONFIG": private,
            "PYTHONPATH": os.pathsep.join(sys.path),
        }
        told = subprocess.run(
            [sys.executable, "-m", "benches.zoom"],
            env=surroundings,
            capture_output=True,
            text=True,
            check=True,
            timeout=2 * PATIENCE_S,
        ).stdout
    zooms, blanks = json.loads(told)
    ratio = statistics.median(ours / blank for ours, blank in zip(zooms, blanks, strict=True))
    yield reading("from a zoom to its first picture painted (ms)", statistics.median(zooms) * 1e3)
    yield reading("repainting a blank image item of that size (ms)", statistics.median(blanks) * 1e3)
    yield at_most("first picture after a zoom, times repainting a blank image item", ratio, MOST_TIMES_BLANK)


def run_zooms() -> tuple[list[float], list[float]]:
    """Seconds of each zoom and of each blank repaint, in turn. Runs in a process of its own."""
    import pyqtgraph as pg

    from tinemark.window.app import application, make_window
    from tinemark.window.diagram import Diagram

    painted: list[tuple[Any, float]] = []
    paint = Diagram.paintEvent

    def noted(diagram: Any, event: Any) -> None:
        paint(diagram, event)
        painted.append((diagram.image_view, time.perf_counter()))

    Diagram.paintEvent = noted
    app = application()
    window = make_window()
    window.resize(*SIZE)
    window.show()
    window.workers.start()
    _until(app, lambda: window.diagram.field is not None and window.diagram.field.steps > 5_000_000)
    blank = pg.GraphicsView()
    blank.resize(*SIZE)
    item = pg.ImageItem(axisOrder="row-major")
    blank.addItem(item)
    blank.show()
    app.processEvents()
    zooms, blanks = [], []
    for number in range(ZOOMS):
        blanks.append(_blank_repaint(blank, item))
        zooms.append(_zoom(app, window, number, painted))
    window.files.may_leave = lambda: True
    window.close()
    blank.close()
    return zooms, blanks


def _zoom(app: Any, window: Any, number: int, painted: list[tuple[Any, float]]) -> float:
    """A view that has not been drawn before, like a box dragged somewhere in the diagram."""
    view = window.keeper.session.view
    left = Fraction(100) + Fraction(number, 3)
    wanted = type(view)(left, left + 30, Fraction(number % 5), Fraction(100))
    painted.clear()
    before = time.perf_counter()
    window.keeper.show_view(wanted)
    shown = window.keeper.session.view
    _until(app, lambda: any(view == shown for view, _ in painted))
    after = next(moment for view, moment in painted if view == shown)
    # The picture improves on; the next zoom starts from rest.
    _until(app, lambda: window.pictures.desk.wait_idle(0.0))
    return after - before


def _blank_repaint(view: Any, item: Any) -> float:
    import numpy as np

    picture = np.zeros((SIZE[1], SIZE[0], 4), np.uint8)
    before = time.perf_counter()
    item.setImage(picture, autoLevels=False)
    view.viewport().repaint()
    return time.perf_counter() - before


def _until(app: Any, done: Any) -> None:
    from PySide6.QtCore import QEventLoop

    deadline = time.perf_counter() + PATIENCE_S
    while not done():
        if time.perf_counter() > deadline:
            raise SystemExit("the picture did not come")
        app.processEvents(QEventLoop.ProcessEventsFlag.WaitForMoreEvents)


if __name__ == "__main__":
    print(json.dumps(run_zooms()))
