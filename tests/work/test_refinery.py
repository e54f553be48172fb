"""The refinery: events in order, cancel of every kind, crash, and nothing left at the end."""

from __future__ import annotations

import multiprocessing
import queue
import threading
from fractions import Fraction
from pathlib import Path

import pytest
import refinery_engines as engines

from tinemark.onsets.results import LadderRequest, LadderResult, RefineRequest, RefineResult
from tinemark.systems.errors import NoOnsetFound, TinemarkError
from tinemark.work.jobs import (
    ENDS,
    Cancelled,
    Crashed,
    Event,
    Failed,
    Finished,
    LevelFound,
    Progressed,
    Started,
)
from tinemark.work.refinery import Refinery

PATIENCE = 60
"""Seconds after which a test gives up; nothing here waits for time to pass."""


class Heard:
    """Events as they come, for the test's own thread."""

    def __init__(self) -> None:
        self.queue: queue.Queue[Event] = queue.Queue()
        self.threads: set[str] = set()

    def __call__(self, event: Event) -> None:
        self.threads.add(threading.current_thread().name)
        self.queue.put(event)

    def until_end(self, id_: int) -> list[Event]:
        """Events of one job up to its end."""
        events = []
        while True:
            event = self.queue.get(timeout=PATIENCE)
            if event.id == id_:
                events.append(event)
                if isinstance(event, ENDS):
                    return events

    def until(self, kind: type, id_: int) -> Event:
        while True:
            event = self.queue.get(timeout=PATIENCE)
            if isinstance(event, kind) and event.id == id_:
                return event


@pytest.fixture
def heard():
    return Heard()


@pytest.fixture
def refinery(heard):
    with Refinery(heard, engines.engine) as refinery:
        yield refinery
    assert multiprocessing.active_children() == []


def test_a_click_is_answered_with_its_progress(refinery, heard, logistic) -> None:
    request = engines.click(logistic)
    id_ = refinery.refine(request)
    started, looking, *others, finished = heard.until_end(id_)
    assert started == Started(id_)
    assert looking == Progressed(id_, "looking", 0.0)
    # A step that follows at once may be left out; nothing else may come.
    assert others in ([], [Progressed(id_, "polishing", 0.5)])
    assert finished == Finished(id_, request, RefineResult((engines.onset("3"),), finished.result.message))
    assert heard.threads == {"refinery"}


def test_a_ladder_tells_its_levels_as_they_come(refinery, heard, logistic) -> None:
    id_ = refinery.ladder(LadderRequest(logistic, "r", Fraction(3), Fraction(4), levels=3))
    events = heard.until_end(id_)
    assert [event.level.level for event in events if isinstance(event, LevelFound)] == [1, 2, 3]
    assert isinstance(events[-1].result, LadderResult)


def test_jobs_run_in_order_in_one_process(refinery, heard, logistic) -> None:
    ids = [refinery.refine(engines.click(logistic, near=Fraction(n))) for n in (1, 2, 3)]
    assert ids == sorted(set(ids))
    ends = [heard.until_end(id_)[-1] for id_ in ids]
    assert [end.result.onsets[0].value for end in ends] == ["1", "2", "3"]
    assert len({end.result.message for end in ends}) == 1


def test_an_error_of_ours_crosses_whole(refinery, heard, logistic) -> None:
    end = heard.until_end(refinery.refine(engines.click(logistic, engines.MISS)))[-1]
    assert isinstance(end, Failed)
    assert isinstance(end.error, NoOnsetFound)
    assert end.error.what_to_do == "zoom out"


def test_a_defect_is_told_and_the_process_goes_on(refinery, heard, logistic) -> None:
    first = heard.until_end(
        refinery.ladder(LadderRequest(logistic, "r", Fraction(3), Fraction(4), levels=1))
    )[-1]
    end = heard.until_end(refinery.refine(engines.click(logistic, engines.DEFECT)))[-1]
    assert isinstance(end, Failed)
    assert type(end.error) is TinemarkError
    assert "ZeroDivisionError: oops" in str(end.error)
    again = heard.until_end(refinery.refine(engines.click(logistic)))[-1]
    assert again.result.message == first.result.message


def test_a_running_job_stops_between_steps(refinery, heard, logistic) -> None:
    pid = heard.until_end(refinery.refine(engines.click(logistic)))[-1].result.message
    request = engines.click(logistic, engines.ENDLESS)
    id_ = refinery.refine(request)
    heard.until(Progressed, id_)
    refinery.cancel(id_)
    assert heard.until_end(id_)[-1] == Cancelled(id_, request)
    # The process answered, so it was kept.
    assert heard.until_end(refinery.refine(engines.click(logistic)))[-1].result.message == pid


def test_a_stuck_job_is_ended_with_its_process(refinery, heard, logistic) -> None:
    pid = heard.until_end(refinery.refine(engines.click(logistic)))[-1].result.message
    request = engines.click(logistic, engines.STUCK)
    id_ = refinery.refine(request)
    waiting = refinery.refine(engines.click(logistic))
    heard.until(Progressed, id_)
    refinery.cancel(id_)
    assert heard.until_end(id_)[-1] == Cancelled(id_, request)
    # What waited behind it is answered by another process.
    assert heard.until_end(waiting)[-1].result.message != pid


def test_a_waiting_job_is_cancelled_without_running(refinery, heard, logistic) -> None:
    first = refinery.refine(engines.click(logistic, engines.ENDLESS))
    second = refinery.refine(engines.click(logistic))
    heard.until(Progressed, first)
    refinery.cancel(second)
    assert [type(event) for event in heard.until_end(second)] == [Cancelled]
    refinery.cancel(first)
    assert isinstance(heard.until_end(first)[-1], Cancelled)


def test_cancelling_what_is_over_does_nothing(refinery, heard, logistic) -> None:
    id_ = refinery.refine(engines.click(logistic))
    assert isinstance(heard.until_end(id_)[-1], Finished)
    refinery.cancel(id_)
    refinery.cancel(999)
    assert isinstance(heard.until_end(refinery.refine(engines.click(logistic)))[-1], Finished)
    assert heard.queue.empty()


def test_a_crash_is_told_and_the_request_offered_again(refinery, heard, logistic) -> None:
    request = engines.click(logistic, engines.DIE)
    id_ = refinery.refine(request)
    waiting = refinery.refine(engines.click(logistic))
    end = heard.until_end(id_)[-1]
    assert end == Crashed(id_, request, 7)
    assert "exit code 7" in end.message
    assert isinstance(heard.until_end(waiting)[-1], Finished)
    again = refinery.submit(end.request)
    assert heard.until_end(again)[-1] == Crashed(again, request, 7)


def test_warming_comes_between_jobs(refinery, heard, logistic) -> None:
    refinery.warm(logistic)
    assert isinstance(heard.until_end(refinery.refine(engines.click(logistic)))[-1], Finished)


def test_close_does_not_wait_for_a_stuck_job(heard, logistic) -> None:
    refinery = Refinery(heard, engines.engine)
    id_ = refinery.refine(engines.click(logistic, engines.STUCK))
    refinery.refine(engines.click(logistic))
    heard.until(Progressed, id_)
    refinery.close()
    refinery.close()
    assert multiprocessing.active_children() == []
    assert heard.queue.empty()
    with pytest.raises(RuntimeError, match="closed"):
        refinery.refine(engines.click(logistic))


def test_close_before_the_process_is_up(heard) -> None:
    Refinery(heard, engines.engine).close()
    assert multiprocessing.active_children() == []


def test_a_process_that_cannot_start_is_told_and_not_tried_for_ever(heard, logistic, monkeypatch) -> None:
    from tinemark.work import worker

    # The child imports its target by name; this one it cannot import.
    def serve(*_: object) -> None: ...

    serve.__module__, serve.__qualname__ = "tinemark.work.worker", "no_such_function"
    monkeypatch.setattr(worker, "no_such_function", serve, raising=False)
    monkeypatch.setattr(worker, "serve", serve)
    with Refinery(heard, engines.engine) as refinery:
        id_ = refinery.refine(engines.click(logistic))
        assert isinstance(heard.until_end(id_)[-1], Crashed)
    assert multiprocessing.active_children() == []


def test_a_system_that_gives_no_process_is_told(heard, logistic, monkeypatch) -> None:
    faults = []
    monkeypatch.setattr(threading, "excepthook", lambda arguments: faults.append(arguments.exc_value))
    with Refinery(heard, engines.engine) as refinery:

        def refuse() -> None:
            raise OSError("no more processes")

        heard.until_end(refinery.refine(engines.click(logistic)))
        refinery._start_worker = refuse
        crashing, waiting = (refinery.refine(engines.click(logistic, engines.DIE)) for _ in range(2))
        assert isinstance(heard.until_end(crashing)[-1], Crashed)
        assert isinstance(heard.until_end(waiting)[-1], Crashed)
        assert "no more processes" in {str(fault) for fault in faults}
        # Once there are processes again, the next request gets one.
        del refinery._start_worker
        assert isinstance(heard.until_end(refinery.refine(engines.click(logistic)))[-1], Finished)
    assert multiprocessing.active_children() == []


def test_a_faulty_listener_does_not_stop_the_refinery(heard, logistic, monkeypatch) -> None:
    faults = []
    monkeypatch.setattr(threading, "excepthook", lambda arguments: faults.append(arguments.exc_value))

    def listener(event: Event) -> None:
        heard(event)
        if isinstance(event, Progressed):
            raise ValueError("listener's own fault")

    with Refinery(listener, engines.engine) as refinery:
        id_ = refinery.refine(engines.click(logistic))
        assert isinstance(heard.until_end(id_)[-1], Finished)
    assert {str(fault) for fault in faults} == {"listener's own fault"}


def test_posting_never_waits_for_the_worker(refinery, heard, logistic) -> None:
    """The window's thread posts; it must not be held up by a worker that is busy."""
    id_ = refinery.refine(engines.click(logistic, engines.STUCK))
    heard.until(Progressed, id_)
    ids = [refinery.refine(engines.click(logistic)) for _ in range(200)]
    for id_waiting in ids:
        refinery.cancel(id_waiting)
    assert all(isinstance(heard.until_end(id_waiting)[-1], Cancelled) for id_waiting in ids)
    refinery.cancel(id_)
    assert isinstance(heard.until_end(id_)[-1], Cancelled)


def test_requests_are_frozen() -> None:
    import dataclasses

    for kind in (RefineRequest, LadderRequest, *ENDS, Started, Progressed, LevelFound):
        assert kind.__dataclass_params__.frozen, kind
        assert dataclasses.fields(kind)


def test_the_real_engine_answers_a_click_proved(heard, logistic) -> None:
    """A click near the second flip of the logistic map, 1 + sqrt(6) (check_values.md 4.1, exact)."""
    with Refinery(heard) as refinery:
        refinery.warm(logistic)
        id_ = refinery.refine(RefineRequest(logistic, "r", Fraction("3.448"), Fraction("0.1")))
        end = heard.until_end(id_)[-1]
    assert isinstance(end, Finished)
    (onset,) = end.result.onsets
    assert onset.status.value == "proved"
    lower, upper = Fraction(onset.lower) - 1, Fraction(onset.upper) - 1
    assert lower**2 <= 6 <= upper**2
    assert upper - lower < Fraction(1, 10**19)


def test_the_real_engine_says_in_words_that_there_is_nothing(heard, logistic) -> None:
    with Refinery(heard) as refinery:
        id_ = refinery.refine(RefineRequest(logistic, "r", Fraction("3.2"), Fraction("0.05")))
        end = heard.until_end(id_)[-1]
    assert isinstance(end, Failed)
    assert isinstance(end.error, NoOnsetFound)


@pytest.mark.skipif(
    not Path("/proc/self/fd").exists(), reason="counts open files where the system shows them"
)
def test_nothing_stays_open(heard, logistic) -> None:
    def once() -> None:
        with Refinery(heard, engines.engine) as refinery:
            heard.until_end(refinery.refine(engines.click(logistic, engines.DIE)))
            id_ = refinery.refine(engines.click(logistic, engines.STUCK))
            heard.until(Progressed, id_)
            refinery.cancel(id_)
            heard.until_end(id_)
            heard.until_end(refinery.refine(engines.click(logistic)))

    once()  # The first spawn opens what all later ones share.
    before = len(list(Path("/proc/self/fd").iterdir()))
    once()
    assert len(list(Path("/proc/self/fd").iterdir())) == before
