"""The refinery: one warm worker process for all refinements, seen from the main process.

The window's thread only posts messages; a thread of the refinery owns the process, its pipes
and the queue of jobs. Every event is called back on that thread.
"""

from __future__ import annotations

import contextlib
import multiprocessing
import sys
import threading
import time
from collections import deque
from collections.abc import Callable
from dataclasses import dataclass
from multiprocessing.connection import Connection, wait
from multiprocessing.context import SpawnProcess
from typing import Any, Self

from tinemark.onsets.results import (
    BranchRequest,
    LadderLevel,
    LadderRequest,
    RefineRequest,
    Step,
    SurveyFind,
    SurveyRequest,
)
from tinemark.systems.system import System
from tinemark.work import worker
from tinemark.work.jobs import (
    Cancelled,
    Crashed,
    Event,
    Failed,
    Finished,
    LevelFound,
    OnsetFound,
    OnsetRequest,
    Progressed,
    Started,
    new_id,
)

ANSWER_TIME = 0.3
"""Seconds in which a running job must answer a cancel; then its process is ended and replaced."""
STOP_TIME = 1.0
_CONTEXT = multiprocessing.get_context("spawn")


@dataclass
class _Running:
    id: int
    request: OnsetRequest
    cancel_by: float | None = None


@dataclass
class _Process:
    process: SpawnProcess
    requests: Connection
    events: Connection
    ready: bool = False
    hurried: bool = False
    running: _Running | None = None


class Refinery:
    """Runs refinements, ladders, surveys and branches in a worker process, one after the other.

    Parameters
    ----------
    on_event
        Called with every event, on the refinery's own thread.
    engine
        What turns a request into steps, in the worker; must be importable there.
    """

    def __init__(
        self, on_event: Callable[[Event], None], engine: worker.Engine = worker.engine_steps
    ) -> None:
        self._on_event = on_event
        self._engine = engine
        self._closed = False
        # What other threads post, and the pipe that wakes the refinery's thread for it.
        self._posted: deque[tuple[Any, ...]] = deque()
        self._wake_reader, self._wake_writer = _CONTEXT.Pipe(duplex=False)
        self._wake_lock = threading.Lock()
        # Touched by the refinery's thread alone.
        self._queue: deque[tuple[int, OnsetRequest]] = deque()
        self._warm: tuple[System | None] | None = (None,)
        self._worker: _Process | None = None
        self._failed_starts = 0
        self._thread = threading.Thread(target=self._work, name="refinery", daemon=True)
        self._thread.start()

    def __enter__(self) -> Self:
        return self

    def __exit__(self, *_: object) -> None:
        self.close()

    def refine(self, request: RefineRequest) -> int:
        """Queue a click; returns the id that its events carry. Any thread."""
        return self.submit(request)

    def ladder(self, request: LadderRequest) -> int:
        """Queue a ladder; returns the id that its events carry. Any thread."""
        return self.submit(request)

    def survey(self, request: SurveyRequest) -> int:
        """Queue a survey of a range; returns the id that its events carry. Any thread."""
        return self.submit(request)

    def branches(self, request: BranchRequest) -> int:
        """Queue the branches of a view; returns the id that its events carry. Any thread."""
        return self.submit(request)

    def submit(self, request: OnsetRequest) -> int:
        """Queue a request of any kind; returns the id that its events carry. Any thread."""
        if self._closed:
            raise RuntimeError("the refinery is closed")
        id_ = new_id()
        self._post(("run", id_, request))
        return id_

    def cancel(self, id_: int) -> None:
        """Cancel a job, waiting or running; `Cancelled` follows within about half a second.

        An id whose job is over is ignored. Any thread.
        """
        self._post(("cancel", id_))

    def warm(self, system: System) -> None:
        """Have the evaluators of a system built while nothing else runs. Any thread."""
        self._post(("warm", system))

    def close(self) -> None:
        """End the process and the thread; jobs that are left send no more events.

        Any thread but the refinery's own. A second call does nothing.
        """
        if not self._closed:
            self._closed = True
            self._post(("close",))
        self._thread.join()

    def _post(self, message: tuple[Any, ...]) -> None:
        self._posted.append(message)
        with self._wake_lock:
            if not self._wake_writer.closed:
                self._wake_writer.send_bytes(b"!")

    # From here on everything runs on the refinery's thread.

    def _work(self) -> None:
        try:
            while self._take_posted():
                try:
                    self._hand_out()
                    self._listen()
                except Exception:  # noqa: BLE001 - whatever fails here, no job may wait for ever
                    self._report_fault()
                    self._give_up()
        finally:
            if self._worker is not None:
                # It keeps nothing that would be lost; a friendly end would keep the window waiting.
                self._end(self._worker)
            with self._wake_lock:
                self._wake_writer.close()
            self._wake_reader.close()

    def _take_posted(self) -> bool:
        """Sort in what was posted; False when it was time to close."""
        while self._posted:
            match self._posted.popleft():
                case ("run", id_, request):
                    self._queue.append((id_, request))
                case ("cancel", id_):
                    self._cancel(id_)
                case ("warm", system):
                    self._warm = (system,)
                case ("close",):
                    return False
        return True

    def _cancel(self, id_: int) -> None:
        for job in self._queue:
            if job[0] == id_:
                self._queue.remove(job)
                self._tell(Cancelled(*job))
                return
        worker_ = self._worker
        if worker_ and worker_.running and worker_.running.id == id_ and worker_.running.cancel_by is None:
            worker_.running.cancel_by = time.monotonic() + ANSWER_TIME
            self._send(worker_, ("cancel", id_))

    def _hand_out(self) -> None:
        """Give the worker what comes next, if it is free."""
        if not self._queue and self._warm is None:
            return
        if self._worker is None:
            # A process that cannot even start is not started over and over for nothing.
            if not self._queue and self._failed_starts >= 2:
                return
            self._start_worker()
        worker_ = self._worker
        if worker_ is None or worker_.running is not None:
            return
        if not worker_.ready:
            if self._queue and not worker_.hurried:
                # A warming that goes on gives way at its next step.
                worker_.hurried = True
                self._send(worker_, ("hurry",))
            return
        if self._queue:
            id_, request = self._queue.popleft()
            worker_.running = _Running(id_, request)
            self._tell(Started(id_))
            self._send(worker_, ("run", id_, request))
        elif self._warm is not None:
            system = self._warm[0]
            self._warm = None
            # Jobs wait here meanwhile, where a cancel costs nothing.
            worker_.ready = False
            self._send(worker_, ("warm", system))

    def _send(self, worker_: _Process, message: tuple[Any, ...]) -> None:
        # Where it has died, its sentinel tells so next.
        with contextlib.suppress(OSError):
            worker_.requests.send(message)

    def _listen(self) -> None:
        """Wait for whatever comes next: a post, an event, the end of the process, or the end of patience."""
        worker_ = self._worker
        if worker_ is None:
            wait([self._wake_reader])
            self._drain_wake()
            return
        deadline = worker_.running.cancel_by if worker_.running else None
        patience = None if deadline is None else max(0.0, deadline - time.monotonic())
        signalled = wait([self._wake_reader, worker_.events, worker_.process.sentinel], patience)
        if self._wake_reader in signalled:
            self._drain_wake()
        try:
            # One at a time, so that a talkative job cannot keep a cancel from being heard; what a
            # dying process said last comes before its end.
            if worker_.events.poll():
                self._hear(worker_, worker_.events.recv())
            elif worker_.process.sentinel in signalled:
                self._bury(worker_)
                return
        except (EOFError, OSError):
            self._bury(worker_)
            return
        self._lose_patience(worker_)

    def _lose_patience(self, worker_: _Process) -> None:
        """Replace a process that has not answered a cancel in time."""
        running = worker_.running
        if running is None or running.cancel_by is None or time.monotonic() < running.cancel_by:
            return
        self._end(worker_)
        self._tell(Cancelled(running.id, running.request))
        # The next one is warmed at once: the user is likely to click again.
        self._warm = self._warm or (running.request.system,)

    def _drain_wake(self) -> None:
        while self._wake_reader.poll():
            self._wake_reader.recv_bytes()

    def _hear(self, worker_: _Process, message: tuple[Any, ...]) -> None:
        if message == ("ready",):
            worker_.ready, worker_.hurried = True, False
            self._failed_starts = 0
            return
        running = worker_.running
        if running is None or message[1] != running.id:
            return
        match message:
            case ("step", _, Step() as step) if running.cancel_by is None:
                self._tell(Progressed(running.id, step.text, step.share))
            case ("step", _, LadderLevel() as level) if running.cancel_by is None:
                self._tell(LevelFound(running.id, level))
            case ("step", _, SurveyFind() as find) if running.cancel_by is None:
                self._tell(OnsetFound(running.id, find.onset))
            case ("step", *_):
                pass
            case ("done", _, result):
                worker_.running = None
                self._tell(self._unless_cancelled(running, Finished(running.id, running.request, result)))
            case ("error", _, error):
                worker_.running = None
                self._tell(self._unless_cancelled(running, Failed(running.id, running.request, error)))
            case ("cancelled", _):
                worker_.running = None
                self._tell(Cancelled(running.id, running.request))

    def _unless_cancelled(self, running: _Running, event: Event) -> Event:
        # Who has cancelled is not surprised by an answer that crossed the cancel.
        return event if running.cancel_by is None else Cancelled(running.id, running.request)

    def _bury(self, worker_: _Process) -> None:
        """The process has died by itself."""
        code = self._end(worker_)
        running = worker_.running
        if not worker_.ready:
            self._failed_starts += 1
            if self._queue and self._failed_starts >= 2:
                # Without a working process nothing that waits would ever be answered.
                self._drop_queue(code)
        elif running is not None and running.cancel_by is not None:
            self._tell(Cancelled(running.id, running.request))
        elif running is not None:
            self._tell(Crashed(running.id, running.request, code))
        if self._warm is None and worker_.ready:
            self._warm = (running.request.system if running else None,)

    def _give_up(self) -> None:
        """After a fault of the system or of ours: end everything, and say so to whoever waits."""
        worker_, self._warm = self._worker, None
        code = self._end(worker_) if worker_ is not None else None
        if worker_ is not None and worker_.running is not None:
            self._tell(Crashed(worker_.running.id, worker_.running.request, code))
        self._drop_queue(code)

    def _drop_queue(self, code: int | None) -> None:
        waiting, self._queue = self._queue, deque()
        for id_, request in waiting:
            self._tell(Crashed(id_, request, code))

    def _start_worker(self) -> None:
        request_reader, request_writer = _CONTEXT.Pipe(duplex=False)
        event_reader, event_writer = _CONTEXT.Pipe(duplex=False)
        process = _CONTEXT.Process(
            target=worker.serve,
            args=(request_reader, event_writer, self._engine),
            name="refinement",
            daemon=True,
        )
        process.start()
        # Only the child holds these ends from now on, so that its death shows.
        request_reader.close()
        event_writer.close()
        self._worker = _Process(process, request_writer, event_reader)

    def _end(self, worker_: _Process) -> int | None:
        """End the process whatever it does, and give everything back; returns its exit code."""
        self._worker = None
        worker_.process.terminate()
        worker_.process.join(STOP_TIME)
        if worker_.process.is_alive():
            worker_.process.kill()
            worker_.process.join()
        code = worker_.process.exitcode
        worker_.process.close()
        worker_.requests.close()
        worker_.events.close()
        return code

    def _tell(self, event: Event) -> None:
        if self._closed:
            return
        try:
            self._on_event(event)
        except Exception:  # noqa: BLE001 - a fault of the listener must not leave the other jobs without one
            self._report_fault()

    def _report_fault(self) -> None:
        kind, error, trace = sys.exc_info()
        assert kind is not None
        threading.excepthook(threading.ExceptHookArgs((kind, error, trace, self._thread)))
