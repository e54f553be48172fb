"""The refinement process: everything here runs in the spawned child, in its main thread.

`flint.ctx.prec` is one value per process, so the engines live in a process of their own; there
one job runs at a time. Messages are small tuples, both ways:

=====================  ==========================================
to the worker          ("run", id, request), ("cancel", id), ("warm", system), ("stop",)
from the worker        ("ready",) at first and after a warming, ("step", id, item),
                       ("done", id, result), ("error", id, error), ("cancelled", id)
=====================  ==========================================
"""

from __future__ import annotations

import contextlib
import signal
import time
from collections import deque
from collections.abc import Callable, Iterator
from multiprocessing.connection import Connection
from typing import Any

from tinemark.onsets.results import LadderRequest, LadderResult, RefineRequest, RefineResult, Step
from tinemark.systems.errors import TinemarkError
from tinemark.work.jobs import OnsetRequest

STEP_INTERVAL = 0.04
"""Seconds between two steps that are passed on; an engine may yield many more than anyone can read."""

Engine = Callable[[OnsetRequest], Iterator[Any]]


def engine_steps(request: OnsetRequest) -> Iterator[Any]:
    """Steps of the engine that a request asks for; the last item is its result."""
    from tinemark.onsets import engine

    if isinstance(request, RefineRequest):
        return iter(engine.refine(request))
    if isinstance(request, LadderRequest):
        return iter(engine.ladder(request))
    raise TypeError(f"no engine for {type(request).__name__}")


def serve(requests: Connection, events: Connection, engine: Engine = engine_steps) -> None:
    """Answer requests until told to stop or the other side is gone."""
    # Ctrl-C in a terminal reaches every process of the group; only the parent decides here.
    signal.signal(signal.SIGINT, signal.SIG_IGN)
    # The parent may die without a word; then its end of the pipe is closed.
    with contextlib.suppress(EOFError, BrokenPipeError, ConnectionResetError):
        _serve(requests, events, engine)


def _serve(requests: Connection, events: Connection, engine: Engine) -> None:
    waiting: deque[tuple[Any, ...]] = deque()
    events.send(("ready",))
    while True:
        message = waiting.popleft() if waiting else requests.recv()
        match message:
            case ("run", id_, request):
                _run(id_, request, requests, events, waiting, engine)
            case ("warm", system):
                _warm(system)
                events.send(("ready",))
            case ("stop",):
                return
            case ("cancel", _):
                # It crossed the answer of a job that had just ended.
                pass


def _run(
    id_: int,
    request: OnsetRequest,
    requests: Connection,
    events: Connection,
    waiting: deque[tuple[Any, ...]],
    engine: Engine,
) -> None:
    try:
        steps = engine(request)
        result = None
        told = float("-inf")
        for item in steps:
            while requests.poll():
                message = requests.recv()
                if message == ("cancel", id_):
                    close = getattr(steps, "close", None)
                    if close is not None:
                        close()
                    events.send(("cancelled", id_))
                    return
                waiting.append(message)
            if isinstance(item, (RefineResult, LadderResult)):
                result = item
            elif not isinstance(item, Step):
                events.send(("step", id_, item))
            elif time.monotonic() - told >= STEP_INTERVAL:
                told = time.monotonic()
                events.send(("step", id_, item))
        if result is None:
            raise RuntimeError("the engine ended without a result")
    except TinemarkError as error:
        events.send(("error", id_, error))
    except (EOFError, BrokenPipeError, ConnectionResetError):
        raise
    except Exception as error:  # noqa: BLE001 - a defect of ours must not take the process with it
        text = f"the refinement failed on a defect of Tinemark ({type(error).__name__}: {error})"
        defect = TinemarkError(text, what_to_do="please report it together with the system file")
        events.send(("error", id_, defect))
    else:
        events.send(("done", id_, result))


def _warm(system: Any) -> None:
    """Load the engines and build the evaluators of a system, so that the first click finds them ready."""
    # A system that cannot be built says so when it is asked for.
    with contextlib.suppress(Exception):
        from tinemark.onsets import engine

        prepare = getattr(engine, "prepare", None)
        if system is not None and prepare is not None:
            prepare(system)
