"""The newest request wins, and a stopped one is silent."""

from __future__ import annotations

import queue
import threading

import pytest

from tinemark.work.newest import NewestWins


@pytest.fixture
def desk():
    """A desk whose jobs say what happens to them and end when they are stopped or told to."""
    log: queue.Queue[tuple[str, str]] = queue.Queue()

    def run(id_: int, request: str, stop: threading.Event) -> None:
        log.put(("began", request))
        if request == "fault":
            raise ValueError(request)
        if request.startswith("long"):
            stop.wait(60)
        log.put(("stopped" if stop.is_set() else "ended", request))

    desk = NewestWins("test desk", run, threading.Event)
    yield desk, log
    desk.close()


def test_a_newer_request_stops_the_older(desk) -> None:
    desk, log = desk
    first = desk.submit("long 1")
    assert log.get(timeout=30) == ("began", "long 1")
    second = desk.submit("short")
    assert second > first
    assert [log.get(timeout=30) for _ in range(3)] == [
        ("stopped", "long 1"),
        ("began", "short"),
        ("ended", "short"),
    ]


def test_requests_in_between_are_dropped() -> None:
    began, held = threading.Event(), threading.Event()
    ran: list[str] = []

    def run(id_: int, request: str, stop: threading.Event) -> None:
        ran.append(request)
        began.set()
        held.wait(30)

    desk = NewestWins("test desk", run, threading.Event)
    try:
        desk.submit("first")
        assert began.wait(30)
        for request in ("second", "third", "last"):
            desk.submit(request)
        held.set()
        assert desk.wait_idle(30)
        assert ran == ["first", "last"]
    finally:
        desk.close()


def test_cancel_stops_and_leaves_the_desk_open(desk) -> None:
    desk, log = desk
    desk.submit("long 1")
    assert log.get(timeout=30) == ("began", "long 1")
    desk.cancel()
    assert log.get(timeout=30) == ("stopped", "long 1")
    desk.submit("short")
    assert log.get(timeout=30) == ("began", "short")


def test_a_fault_is_told_and_the_thread_lives(desk, monkeypatch) -> None:
    desk, log = desk
    faults = []
    monkeypatch.setattr(threading, "excepthook", lambda arguments: faults.append(arguments.exc_value))
    desk.submit("fault")
    assert desk.wait_idle(30)
    desk.submit("short")
    assert desk.wait_idle(30)
    assert [str(fault) for fault in faults] == ["fault"]
    assert log.queue[-1] == ("ended", "short")


def test_close_ends_a_running_job(desk) -> None:
    desk, log = desk
    desk.submit("long 1")
    assert log.get(timeout=30) == ("began", "long 1")
    desk.close()
    assert log.get(timeout=30) == ("stopped", "long 1")
    with pytest.raises(RuntimeError, match="closed"):
        desk.submit("short")
