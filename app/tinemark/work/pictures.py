"""The picture desk: draws the newest request on its own thread and hands out better and better fields."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import TYPE_CHECKING, TypeAlias

import numpy as np
from numpy.typing import NDArray

from tinemark.density.field import Field
from tinemark.density.first_look import first_look
from tinemark.density.request import PictureRequest
from tinemark.density.sampling import columns_distinct
from tinemark.density.stopping import StopFlag
from tinemark.systems.errors import TinemarkError
from tinemark.work.loading import load_engines
from tinemark.work.newest import NewestWins

if TYPE_CHECKING:
    from tinemark.density.glimpse import Glimpses
    from tinemark.density.renderer import Drawing
    from tinemark.systems.system import System

BUDGET_STEPS = 20_000
"""Steps a column after which a picture rests, where nothing else is asked."""

REHEARSED_LEVEL = 2048
"""Steps a column after which the kernels that a glimpse needs have been used."""


@dataclass(frozen=True)
class PictureDone:
    """A picture has reached its budget; no field of that id follows."""

    id: int
    request: PictureRequest
    steps: int


@dataclass(frozen=True)
class PictureFailed:
    """There is no picture, and why; no field of that id follows."""

    id: int
    request: PictureRequest
    error: TinemarkError


@dataclass(frozen=True)
class PictureWaits:
    """A picture waits for its kernels; what is shown meanwhile was drawn without them.

    Attributes
    ----------
    steps
        Steps of the first look that has been handed out; 0 where there was none. A field of more has come
        out of the kernels.
    words
        What it waits for, as a sentence without its full stop.
    """

    id: int
    request: PictureRequest
    steps: int
    words: str


@dataclass(frozen=True)
class PictureMeasured:
    """How accurate the samples of a picture of equations are.

    Attributes
    ----------
    error
        Largest error of one sample that was seen, as a share of each state's size; nan where no orbit tried
        has a sample.
    """

    id: int
    request: PictureRequest
    error: float


PictureEvent: TypeAlias = PictureMeasured | PictureDone | PictureFailed | PictureWaits

LOADING = "Loading the compiler"
COMPILING = "Compiling the formulas, or loading them as compiled before"
TUNING = "Compiling the equations, or loading them as compiled before, and measuring their steps"


class PictureDesk:
    """Draws pictures on a thread of its own; the newest request wins.

    Columns that the last picture has in common with the new one are kept, so that panning by whole
    columns draws only what is new, and asking for more steps goes on from where the orbits were.

    Parameters
    ----------
    on_field
        Called with an id and each field, on the desk's thread. Fields of a request that has been
        replaced are not handed out; one may cross the replacement by a hair: keep the newest id.
    on_event
        Called when a picture is done or cannot be drawn, on the desk's thread.
    threads
        Drawing threads; None for all cores.
    """

    def __init__(
        self,
        on_field: Callable[[int, Field], None],
        on_event: Callable[[PictureEvent], None] | None = None,
        threads: int | None = None,
    ) -> None:
        self._on_field = on_field
        self._on_event = on_event or _no_listener
        self._threads = threads
        # Touched by the desk's thread alone.
        self._drawing: Drawing | None = None
        self._tuned: set[tuple[System, str]] = set()
        # Made by the desk's thread, which loads the compiler; asked by any.
        self._glimpses: Glimpses | None = None
        self._desk: NewestWins[tuple[PictureRequest, int], StopFlag] = NewestWins(
            "pictures", self._run, StopFlag
        )

    def request(self, request: PictureRequest, budget_steps: int = BUDGET_STEPS) -> int:
        """Ask for a picture in place of every earlier one; returns its id. Any thread, at once."""
        return self._desk.submit((request, budget_steps))

    def glimpse(
        self, request: PictureRequest, tone: str, colours: NDArray[np.uint32]
    ) -> NDArray[np.uint32] | None:
        """Colours of a first look at a picture, drawn at once on the calling thread; None where none is had.

        Takes a few milliseconds, or next to nothing: there is no look before a picture of the same system
        has been drawn, and none at systems too slow for it (`density.glimpse`).
        """
        return self._glimpses.look(request, tone, colours) if self._glimpses is not None else None

    def cancel(self) -> None:
        """Stop drawing; what has been drawn stays for a later request of it. Any thread, at once."""
        self._desk.cancel()

    def wait_idle(self, timeout: float | None = None) -> bool:
        """Wait until nothing is drawn; False when that took longer than `timeout` seconds."""
        return self._desk.wait_idle(timeout)

    def close(self) -> None:
        """Stop drawing and end the thread. Any thread but the desk's."""
        self._desk.close()

    def _run(self, id_: int, asked: tuple[PictureRequest, int], stop: StopFlag) -> None:
        request, budget_steps = asked
        steps = 0
        try:
            if not columns_distinct(request):
                raise TinemarkError(
                    "the columns are closer than double precision can tell, so nothing is drawn",
                    what_to_do="a click there still refines, in higher precision",
                )
            if self._glimpses is None:
                steps = self._first_look(id_, request, stop)
                self._wait(id_, request, steps, LOADING, stop)
            # The compiler is loaded here and not with the window.
            load_engines(request.system, drawing=True)
            from tinemark.density import renderer
            from tinemark.density.glimpse import Glimpses, is_compiled

            glimpses = self._glimpses = self._glimpses or Glimpses()
            drawing = self._kept(request) or self._create(id_, request, steps, stop)
            self._drawing = drawing
            if request.system.is_map and not is_compiled(drawing.kernels.advance):
                steps = steps or self._first_look(id_, request, stop)
                self._wait(id_, request, steps, COMPILING, stop)
            if drawing.level:
                # What is kept is shown before anything is added to it.
                field = renderer.snapshot(drawing)
                steps = field.steps
                self._hand_out(id_, field, stop)
            fields = renderer.progressive(drawing, budget_steps, stop, self._threads)
            for field in fields:
                steps = field.steps
                self._hand_out(id_, field, stop)
                glimpses.learn(drawing)
                if drawing.level >= REHEARSED_LEVEL:
                    glimpses.rehearse()
        except TinemarkError as error:
            if not stop.is_set():
                self._on_event(PictureFailed(id_, request, error))
            return
        if not stop.is_set():
            self._on_event(PictureDone(id_, request, steps))

    def _create(self, id_: int, request: PictureRequest, steps: int, stop: StopFlag) -> Drawing:
        """A new drawing. That of equations is compiled first, and its integration steps are measured."""
        from tinemark.density import renderer

        if request.system.is_map:
            return renderer.create(request)
        from tinemark.density.strobe_kernels import picture_error

        known = (request.system, request.parameter)
        if known not in self._tuned:
            self._wait(id_, request, steps, TUNING, stop)
        drawing = renderer.create(request)
        self._tuned.add(known)
        if not stop.is_set():
            self._on_event(PictureMeasured(id_, request, picture_error(request)))
        return drawing

    def _first_look(self, id_: int, request: PictureRequest, stop: StopFlag) -> int:
        """Hand out a picture for which nothing has to be loaded, where there is one; returns its steps."""
        field = first_look(request, stop)
        if field is None:
            return 0
        self._hand_out(id_, field, stop)
        return field.steps

    def _wait(self, id_: int, request: PictureRequest, steps: int, words: str, stop: StopFlag) -> None:
        if not stop.is_set():
            self._on_event(PictureWaits(id_, request, steps, words))

    def _kept(self, request: PictureRequest) -> Drawing | None:
        from tinemark.density import renderer

        drawing = self._drawing
        if drawing is None or drawing.request == request:
            return drawing
        return renderer.shifted(drawing, request)

    def _hand_out(self, id_: int, field: Field, stop: StopFlag) -> None:
        if not stop.is_set():
            self._on_field(id_, field)


def _no_listener(event: PictureEvent) -> None:
    """For a desk whose owner looks at fields alone."""
