"""The refinement process: everything here runs in the spawned child, in its main thread.

`flint.ctx.prec` is one value per process, so the engines live in a process of their own; there
one job runs at a time. Messages are small tuples, both ways:

=====================  ==========================================
to the worker          ("run", id, request), ("cancel", id), ("warm", system), ("hurry",)
from the worker        ("ready",) at first and after a warming, ("step", id, item),
                       ("done", id, result), ("error", id, error), ("cancelled", id)
=====================  ==========================================
"""

from __future__ import annotations

import contextlib
import importlib
import signal
import time
from collections import deque
from collections.abc import Callable, Generator
from fractions import Fraction
from multiprocessing.connection import Connection
from typing import Any, TypeAlias

from tinemark.onsets.results import (
    BranchRequest,
    LadderLevel,
    LadderRequest,
    RefineRequest,
    SharpenRequest,
    Step,
    SurveyFind,
    SurveyRequest,
)
from tinemark.systems.errors import TinemarkError
from tinemark.systems.system import System
from tinemark.work.jobs import OnsetRequest, OnsetResult
from tinemark.work.priority import step_back

STEP_INTERVAL = 0.04
"""Seconds between two steps that are passed on; an engine may yield many more than anyone can read."""

WARM_TIME = 3.0
"""Seconds after which a warming ends at its next step: by then everything is built."""

Steps: TypeAlias = Generator[Step | LadderLevel | SurveyFind, None, OnsetResult]
Engine: TypeAlias = Callable[[OnsetRequest], Steps]


def engine_steps(request: OnsetRequest) -> Steps:
    """Run of the engine that a request asks for: steps, and the result as the generator's value.

    Raises
    ------
    TinemarkError
        As the engine says, at some step.
    """
    from tinemark.onsets import engine

    match request:
        case RefineRequest():
            return (yield from engine.refine(request))
        case SharpenRequest():
            return (yield from engine.sharpen(request))
        case LadderRequest():
            return (yield from engine.ladder(request))
        case SurveyRequest():
            return (yield from engine.survey(request))
        case BranchRequest():
            return (yield from engine.branches(request))


def serve(requests: Connection, events: Connection, engine: Engine = engine_steps) -> None:
    """Answer requests until the other side is gone."""
    # Ctrl-C in a terminal reaches every process of the group; only the parent decides here.
    signal.signal(signal.SIGINT, signal.SIG_IGN)
    step_back()
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
                _warm(system, requests)
                events.send(("ready",))
            case ("cancel", _) | ("hurry",):
                # It crossed the end of what it was meant for.
                pass


def _run(
    id_: int,
    request: OnsetRequest,
    requests: Connection,
    events: Connection,
    waiting: deque[tuple[Any, ...]],
    engine: Engine,
) -> None:
    told = float("-inf")
    try:
        steps = engine(request)
        while True:
            try:
                item = next(steps)
            except StopIteration as end:
                events.send(("done", id_, end.value))
                return
            while requests.poll():
                message = requests.recv()
                if message == ("cancel", id_):
                    steps.close()
                    events.send(("cancelled", id_))
                    return
                waiting.append(message)
            if not isinstance(item, Step):
                events.send(("step", id_, item))
            elif time.monotonic() - told >= STEP_INTERVAL:
                told = time.monotonic()
                events.send(("step", id_, item))
    except TinemarkError as error:
        events.send(("error", id_, error))
    except (EOFError, BrokenPipeError, ConnectionResetError):
        raise
    except Exception as error:  # noqa: BLE001 - a defect of ours must not take the process with it
        text = f"the refinement failed on a defect of Tinemark ({type(error).__name__}: {error})"
        defect = TinemarkError(text, what_to_do="please report it together with the system file")
        events.send(("error", id_, defect))


def _warm(system: System | None, requests: Connection) -> None:
    """Load the engines, and run a click of our own on a system, so that the first real one finds all built.

    Gives way as soon as anything is asked.
    """
    # What cannot be built or found says so when it is asked for.
    with contextlib.suppress(Exception):
        from tinemark.onsets import engine

        if system is None:
            importlib.import_module("tinemark.onsets.clicks")
            return
        parameter = system.parameter(system.diagram_parameter)
        near, width = parameter.value.fraction, abs(parameter.value.fraction) / 10 or Fraction(1)
        if parameter.range is not None:
            low, high = parameter.range
            near, width = (low.fraction + high.fraction) / 2, high.fraction - low.fraction
        enough = time.monotonic() + WARM_TIME
        for _ in engine.refine(RefineRequest(system, parameter.name, near, width)):
            if requests.poll() or time.monotonic() > enough:
                return
