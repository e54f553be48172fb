"""Many refinements at once, through the `concurrent.futures.Executor` interface.

A pool of this machine and a cluster's executor fit the same socket: what is submitted is one
importable function and one frozen request.
"""

from __future__ import annotations

import multiprocessing
from collections.abc import Iterable, Iterator
from concurrent.futures import Executor, Future, ProcessPoolExecutor, as_completed

from tinemark.work.jobs import OnsetRequest, OnsetResult
from tinemark.work.worker import engine_steps


def local_executor(processes: int | None = None) -> ProcessPoolExecutor:
    """Pool on this machine, one process a core unless said otherwise. Close it, or use it in a `with`."""
    # Precision is one value per process, so threads would not do; nothing is inherited by a spawned one.
    return ProcessPoolExecutor(processes, mp_context=multiprocessing.get_context("spawn"))


def solve(request: OnsetRequest) -> OnsetResult:
    """Run a request to its end, in the calling process.

    Raises
    ------
    TinemarkError
        As the engine says.
    """
    steps = engine_steps(request)
    while True:
        try:
            next(steps)
        except StopIteration as end:
            result: OnsetResult = end.value
            return result


def solve_all(
    requests: Iterable[OnsetRequest], executor: Executor
) -> Iterator[tuple[int, OnsetResult | BaseException]]:
    """Solve requests side by side.

    Yields
    ------
    (place, answer)
        Place of the request among `requests`, and its result or the error it ended in, as they
        come. When the iterator is closed, requests that have not begun are cancelled.
    """
    places: dict[Future[OnsetResult], int] = {
        executor.submit(solve, request): place for place, request in enumerate(requests)
    }
    try:
        for future in as_completed(places):
            error = future.exception()
            yield places[future], error if error is not None else future.result()
    finally:
        for future in places:
            future.cancel()
