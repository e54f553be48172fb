"""A thread on which the newest request wins: the one before it is stopped, those between are dropped."""

from __future__ import annotations

import sys
import threading
from collections.abc import Callable
from typing import Generic, Protocol, TypeVar

from tinemark.work.jobs import new_id
from tinemark.work.priority import step_back

Request = TypeVar("Request")


class Stop(Protocol):
    """What `threading.Event` and `density.stopping.StopFlag` share."""

    def set(self) -> None:
        """Ask for the end."""

    def is_set(self) -> bool:
        """Whether the end was asked for."""


StopKind = TypeVar("StopKind", bound=Stop)


class NewestWins(Generic[Request, StopKind]):
    """Runs one request at a time on a thread of its own; a newer one stops it.

    Parameters
    ----------
    name
        Name of the thread.
    run
        run(id, request, stop), on that thread. It returns soon once `stop` is set, and from then
        on tells nobody anything.
    make_stop
        Makes the flag of one run.
    """

    def __init__(
        self, name: str, run: Callable[[int, Request, StopKind], None], make_stop: Callable[[], StopKind]
    ) -> None:
        self._run = run
        self._make_stop = make_stop
        self._change = threading.Condition()
        # All below is guarded by `_change`.
        self._next: tuple[int, Request] | None = None
        self._stop: Stop = make_stop()
        self._busy = False
        self._closed = False
        self._thread = threading.Thread(target=self._work, name=name, daemon=True)
        self._thread.start()

    def submit(self, request: Request) -> int:
        """Put a request in place of every earlier one; returns its id. Any thread, at once."""
        with self._change:
            if self._closed:
                raise RuntimeError("this desk is closed")
            id_ = new_id()
            self._next = (id_, request)
            self._stop.set()
            self._change.notify_all()
        return id_

    def cancel(self) -> None:
        """Drop what waits and stop what runs. Any thread, at once."""
        with self._change:
            self._next = None
            self._stop.set()

    def wait_idle(self, timeout: float | None = None) -> bool:
        """Wait until nothing runs or waits; False when that took longer than `timeout` seconds."""
        with self._change:
            return self._change.wait_for(lambda: self._next is None and not self._busy, timeout)

    def close(self) -> None:
        """Stop what runs and end the thread. Any thread but its own; a second call does nothing."""
        with self._change:
            self._closed = True
            self._next = None
            self._stop.set()
            self._change.notify_all()
        self._thread.join()

    def _work(self) -> None:
        step_back()
        while True:
            with self._change:
                self._busy = False
                self._change.notify_all()
                self._change.wait_for(lambda: self._next is not None or self._closed)
                if self._next is None:
                    return
                (id_, request), self._next = self._next, None
                self._busy = True
                self._stop = stop = self._make_stop()
            try:
                self._run(id_, request, stop)
            except Exception:  # noqa: BLE001 - one bad request must not leave the later ones without a thread
                kind, error, trace = sys.exc_info()
                assert kind is not None
                threading.excepthook(threading.ExceptHookArgs((kind, error, trace, self._thread)))
