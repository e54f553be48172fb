"""A window for the shell's tests: with fake desks that record what they are asked, or with the real ones."""

from __future__ import annotations

from collections.abc import Iterator
from contextlib import contextmanager
from fractions import Fraction
from pathlib import Path

import numpy as np
from PySide6.QtCore import QPoint
from PySide6.QtWidgets import QApplication

from tinemark.density.field import Field
from tinemark.density.request import PictureRequest
from tinemark.document.session import new_session
from tinemark.onsets.results import Criticality, Kind, LadderRequest, Onset, RefineRequest, Status
from tinemark.systems.library import builtin_text
from tinemark.window.app import application
from tinemark.window.layout_memory import LayoutMemory
from tinemark.window.main_window import MainWindow
from tinemark.window.session_keeper import SessionKeeper
from tinemark.window.workers import Made


class FakePictures:
    """Records requests; answers when told to."""

    def __init__(self, on_field) -> None:
        self.on_field = on_field
        self.asked: list[PictureRequest] = []
        self.cancelled = 0
        self.shade: int | None = None
        self.glimpsed: list[PictureRequest] = []

    def request(self, request: PictureRequest, budget_steps: int) -> int:
        self.asked.append(request)
        return len(self.asked)

    def glimpse(self, request: PictureRequest, tone: str, colours: np.ndarray) -> np.ndarray | None:
        """All cells of the colour `shade`, where there is one."""
        self.glimpsed.append(request)
        if self.shade is None:
            return None
        return np.full((request.rows, request.columns + request.columns % 2), colours[self.shade], np.uint32)

    def answer(self, number: int = 0) -> Field:
        """A field for the newest request, or for one by number: two lines, periods 1 and 2, then escape."""
        number = number or len(self.asked)
        request = self.asked[number - 1]
        rows, columns = request.rows, request.columns
        counts = np.zeros((rows, columns), np.uint32)
        counts[rows // 4, : columns // 2] = 1000
        counts[rows // 2, columns // 2 :] = 500
        third = columns // 3
        period = np.repeat([1, 2, 0], [third, third, columns - 2 * third]).astype(np.int32)
        escaped = np.zeros(columns, bool)
        escaped[-columns // 8 :] = True
        field = Field(counts, np.linspace(-1, 0.5, columns), period, escaped, 123_456)
        self.on_field(number, field)
        return field

    def cancel(self) -> None:
        self.cancelled += 1

    def close(self) -> None:
        pass


class FakeProbes:
    """Records requests."""

    def __init__(self) -> None:
        self.asked: list[object] = []

    def request(self, request: object) -> int:
        self.asked.append(request)
        return len(self.asked)

    def cancel(self) -> None:
        pass

    def close(self) -> None:
        pass


class FakeRefinery:
    """Records requests; the test hands the window their events."""

    def __init__(self) -> None:
        self.asked: list[RefineRequest | LadderRequest] = []
        self.cancelled: list[int] = []

    def refine(self, request: RefineRequest) -> int:
        self.asked.append(request)
        return len(self.asked)

    ladder = submit = refine

    def cancel(self, id_: int) -> None:
        self.cancelled.append(id_)

    def warm(self, system: object) -> None:
        pass

    def close(self) -> None:
        pass


class FakeDesks:
    """All three."""

    def __init__(self) -> None:
        self.refinery = FakeRefinery()
        self.probes = FakeProbes()
        self.pictures: FakePictures

    def make(self, bridge) -> Made:
        self.pictures = FakePictures(bridge.on_field)
        return Made(self.pictures, self.probes, self.refinery)


def flip(value: str, before: int = 1, half: str = "1e-20", status: Status = Status.PROVED) -> Onset:
    """A flip of the logistic map as the engine would hand it over."""
    middle, reach = Fraction(value), Fraction(half)
    return Onset(
        "r",
        Kind.FLIP,
        before,
        2 * before,
        Criticality.SUPERCRITICAL,
        value,
        str(float(middle - reach)),
        str(float(middle + reach)),
        20,
        status,
        states=(("x", "0.6666666666666666"),),
    )


@contextmanager
def window_on(
    folder: Path, system: str = "logistic", make=None, text: str = "", size: tuple[int, int] = (1280, 800)
) -> Iterator[MainWindow]:
    """A shown window on a system, with its memory in `folder`; closed, and its threads ended, afterwards."""
    application()
    memory = LayoutMemory.open(folder)
    memory.theme = "light"
    window = MainWindow(SessionKeeper(new_session(text or builtin_text(system))), memory)
    window.resize(*size)
    window.show()
    if make is not None:
        window.workers.make_with(make)
        window.workers.start()
    try:
        yield window
    finally:
        window.files.may_leave = lambda: True
        window.close()
        window.deleteLater()
        QApplication.processEvents()


def at(window: MainWindow, parameter: str | Fraction, observed: str | Fraction) -> QPoint:
    """Where on the diagram a pair of values is."""
    point = window.diagram.point(Fraction(parameter), Fraction(observed))
    return QPoint(round(point.x()), round(point.y()))
