"""Checking proofs again, in a process of its own: one run at a time, ended at once by a cancel.

The second implementation is plain Python, so on a thread it would slow the window down.
"""

from __future__ import annotations

import contextlib
import multiprocessing
import signal
import threading
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from functools import partial
from multiprocessing.connection import Connection
from multiprocessing.process import BaseProcess
from typing import TypeAlias

from tinemark.verify.claims import Claim, Verdict
from tinemark.work.jobs import new_id

_CONTEXT = multiprocessing.get_context("spawn")

NamedClaims: TypeAlias = Sequence[tuple[str, Claim]]
"""Claims under the names of their rows."""


@dataclass(frozen=True)
class Checked:
    """So many proofs of so many have been checked, and a share (0 to 1) of the next one."""

    id: int
    done: int
    count: int
    share: float = 0.0


@dataclass(frozen=True)
class ChecksEnded:
    """A run has ended; nothing of that id follows.

    Attributes
    ----------
    verdicts
        (row, claim, verdict) of what was checked, in order.
    complete
        Whether that is all; False after a cancel or a crash.
    """

    id: int
    verdicts: tuple[tuple[str, Claim, Verdict], ...]
    complete: bool


def serve(answers: Connection, claims: NamedClaims) -> None:
    """Check claims one after the other and send (place, share) and (place, verdict); the child's side."""
    from tinemark.verify.check import check
    from tinemark.verify.watching import Watch

    # Ctrl-C in a terminal reaches every process of the group; only the parent decides here.
    signal.signal(signal.SIGINT, signal.SIG_IGN)
    with contextlib.suppress(BrokenPipeError, ConnectionResetError):
        for place, (_, claim) in enumerate(claims):
            watch = Watch(partial(_tell, answers, place))
            answers.send((place, check(claim, watch)))


def _tell(answers: Connection, place: int, share: float) -> None:
    answers.send((place, share))


class ProofDesk:
    """Runs checks; events come on a thread of its own.

    Parameters
    ----------
    on_event
        Takes `Checked` and `ChecksEnded`.
    """

    def __init__(self, on_event: Callable[[Checked | ChecksEnded], None]) -> None:
        self._on_event = on_event
        self._lock = threading.Lock()
        self._process: BaseProcess | None = None
        self._stopped = False
        self._thread: threading.Thread | None = None

    def check(self, claims: NamedClaims) -> int:
        """Begin to check claims; what ran before is stopped. Any thread, at once but for an end before it."""
        self.cancel()
        self._join()
        id_ = new_id()
        self._stopped = False
        self._thread = threading.Thread(
            target=self._run, args=(id_, tuple(claims)), name="proof checks", daemon=True
        )
        self._thread.start()
        return id_

    def cancel(self) -> None:
        """Stop what runs; its end is told as an event. Any thread."""
        with self._lock:
            self._stopped = True
            if self._process is not None:
                self._process.terminate()

    def close(self) -> None:
        """Stop what runs and end the thread."""
        self.cancel()
        self._join()

    def _join(self) -> None:
        if self._thread is not None:
            self._thread.join()
            self._thread = None

    def _run(self, id_: int, claims: NamedClaims) -> None:
        reader, writer = _CONTEXT.Pipe(duplex=False)
        process = _CONTEXT.Process(target=serve, args=(writer, claims), name="proof checks", daemon=True)
        with self._lock:
            if not self._stopped:
                # Where no process can be started, the run ends with nothing checked.
                with contextlib.suppress(OSError):
                    process.start()
                    self._process = process
        # Only the child holds this end from now on, so that its death shows.
        writer.close()
        found: list[tuple[str, Claim, Verdict]] = []
        with contextlib.suppress(EOFError, OSError):
            while len(found) < len(claims):
                place, verdict = reader.recv()
                if isinstance(verdict, float):
                    self._on_event(Checked(id_, len(found), len(claims), verdict))
                    continue
                row, claim = claims[place]
                found.append((row, claim, verdict))
                self._on_event(Checked(id_, len(found), len(claims)))
        reader.close()
        with self._lock:
            self._process = None
        if process.pid is not None:
            process.terminate()
            process.join()
            process.close()
        self._on_event(ChecksEnded(id_, tuple(found), len(found) == len(claims)))
