"""The picture desk with the real renderer: newest wins, kept columns, ends and errors."""

from __future__ import annotations

import queue
import threading
from fractions import Fraction

import numpy as np
import pytest

from tinemark.density import renderer
from tinemark.density.field import Field
from tinemark.density.first_look import first_look
from tinemark.density.request import PictureRequest, View
from tinemark.density.stopping import StopFlag
from tinemark.work.pictures import LOADING, PictureDesk, PictureDone, PictureFailed, PictureWaits

PATIENCE = 60


def request(system, left: str = "2.8", right: str = "4", columns: int = 64, rows: int = 40) -> PictureRequest:
    view = View(Fraction(left), Fraction(right), Fraction(0), Fraction(1))
    return PictureRequest(system, "r", "x", view, columns, rows, transient_steps=200)


class Heard:
    def __init__(self) -> None:
        self.queue: queue.Queue[tuple[int, object]] = queue.Queue()
        self.threads: set[str] = set()
        self.waits: list[PictureWaits] = []

    def field(self, id_: int, field: Field) -> None:
        self.threads.add(threading.current_thread().name)
        self.queue.put((id_, field))

    def event(self, event: object) -> None:
        if isinstance(event, PictureWaits):
            self.waits.append(event)
        else:
            self.queue.put((event.id, event))

    def picture(self, id_: int) -> tuple[list[Field], object]:
        """Fields and end of one request."""
        fields = []
        while True:
            got, thing = self.queue.get(timeout=PATIENCE)
            if got != id_:
                continue
            if isinstance(thing, PictureDone | PictureFailed):
                return fields, thing
            fields.append(thing)


@pytest.fixture
def heard():
    return Heard()


@pytest.fixture
def desk(heard):
    desk = PictureDesk(heard.field, heard.event)
    yield desk
    desk.close()


def test_fields_grow_up_to_the_budget(desk, heard, logistic) -> None:
    id_ = desk.request(request(logistic), 2048)
    fields, done = heard.picture(id_)
    steps = [field.steps for field in fields]
    assert len(fields) >= 2
    assert steps == sorted(steps)
    assert steps[-1] == 2048 * 64
    assert isinstance(done, PictureDone)
    assert done.steps == steps[-1]
    assert heard.threads == {"pictures"}


def test_the_picture_is_the_renderers(desk, heard, logistic) -> None:
    asked = request(logistic)
    *_, last = heard.picture(desk.request(asked, 1024))[0]
    *_, expected = renderer.progressive(asked, 1024, threads=1)
    assert np.array_equal(last.counts, expected.counts)
    assert np.array_equal(last.period, expected.period)


def test_the_newest_wins(desk, heard, logistic) -> None:
    asked = [request(logistic, left=f"2.{n}") for n in range(1, 9)]
    ids = [desk.request(each, 10_000_000) for each in asked[:-1]]
    last = desk.request(asked[-1], 1024)
    fields, done = heard.picture(last)
    assert fields
    assert done.request == asked[-1]
    assert all(id_ < last for id_ in ids)
    # Nothing comes after the newest has ended: the endless ones before it have been stopped.
    assert desk.wait_idle(PATIENCE)
    assert heard.queue.empty()


def test_cancel_stops_an_endless_picture_and_keeps_what_was_drawn(desk, heard, logistic) -> None:
    asked = request(logistic, columns=256, rows=200)
    first = desk.request(asked, 2_000_000_000)
    # The first look is kept by nobody.
    look = first_look(asked, StopFlag())
    field = look
    while field.steps <= look.steps:
        id_, field = heard.queue.get(timeout=PATIENCE)
        assert id_ == first
    desk.cancel()
    assert desk.wait_idle(PATIENCE)
    while not heard.queue.empty():
        _, field = heard.queue.get()
        assert isinstance(field, Field)
    # The same picture again goes on from there.
    again, _ = heard.picture(desk.request(asked, 1024))
    assert again[0].steps >= field.steps


def test_a_pan_by_whole_columns_equals_a_fresh_picture(desk, heard, logistic) -> None:
    heard.picture(desk.request(request(logistic, "2.8", "4.08"), 512))
    panned = request(logistic, "2.82", "4.1")
    *_, last = heard.picture(desk.request(panned, 512))[0]
    *_, fresh = renderer.progressive(panned, 512, threads=1)
    assert np.array_equal(last.counts, fresh.counts)


def test_a_first_look_is_had_at_once_when_the_system_has_been_drawn(desk, heard, logistic) -> None:
    colours = np.arange(256, dtype=np.uint32)
    asked = request(logistic)
    assert desk.glimpse(asked, "log", colours) is None
    heard.picture(desk.request(asked, 4096))
    assert desk.wait_idle(PATIENCE)
    look = desk.glimpse(request(logistic, "3.2", "3.4"), "log", colours)
    # Two branches, thin beside what lies between them.
    assert look.shape == (40, 64)
    assert 2 <= (look > 0).sum() / 64 <= 3
    assert desk.glimpse(request(logistic.with_value("r", "2")), "log", colours) is None


def test_before_the_compiler_is_loaded_a_first_look_is_handed_out(desk, heard, logistic) -> None:
    asked = request(logistic)
    fields, _ = heard.picture(desk.request(asked, 1024))
    look = first_look(asked, StopFlag())
    assert np.array_equal(fields[0].counts, look.counts)
    assert (heard.waits[0].words, heard.waits[0].steps) == (LOADING, look.steps)
    assert all(field.steps > look.steps for field in fields[1:])
    waited = len(heard.waits)
    # From then on the kernels are there.
    fields, _ = heard.picture(desk.request(request(logistic, "3"), 1024))
    assert len(heard.waits) == waited
    assert fields[0].steps % (128 * asked.columns) == 0


def test_where_doubles_end_nothing_is_drawn(desk, heard, logistic) -> None:
    deep = request(logistic, "3.5", "3.5000000000000000001")
    fields, end = heard.picture(desk.request(deep, 512))
    assert fields == []
    assert isinstance(end, PictureFailed)
    assert "double precision" in str(end.error)


def test_a_bad_request_is_told_and_the_next_one_drawn(desk, heard, logistic) -> None:
    from dataclasses import replace

    bad = replace(request(logistic), observe="nothing")
    fields, end = heard.picture(desk.request(bad, 512))
    assert fields == []
    assert isinstance(end, PictureFailed)
    assert "nothing" in str(end.error)
    fields, end = heard.picture(desk.request(request(logistic), 512))
    assert fields
    assert isinstance(end, PictureDone)


def test_close_while_drawing(heard, logistic) -> None:
    desk = PictureDesk(heard.field)
    desk.request(request(logistic), 2_000_000_000)
    heard.queue.get(timeout=PATIENCE)
    desk.close()
    desk.close()
    with pytest.raises(RuntimeError, match="closed"):
        desk.request(request(logistic))
