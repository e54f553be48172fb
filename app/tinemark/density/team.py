"""A few threads that work off a list together with the thread that asks."""

from __future__ import annotations

from collections.abc import Callable, Iterable
from concurrent.futures import ThreadPoolExecutor
from types import TracebackType
from typing import Self, TypeVar

Item = TypeVar("Item")


class Team:
    """The calling thread and `threads - 1` helpers, kept until the team is left.

    The caller works too: a short list is done before a helper has woken up, and nobody waits idly.
    """

    def __init__(self, threads: int) -> None:
        self._helpers = threads - 1
        self._pool = (
            ThreadPoolExecutor(self._helpers, thread_name_prefix="tinemark-density")
            if self._helpers > 0
            else None
        )

    def work_off(self, items: Iterable[Item], work: Callable[[Item], None]) -> None:
        """Call `work` once with each item, in any order and on any thread; raises what it raises."""
        waiting = iter(list(items))

        def take() -> None:
            # A list's iterator hands each item to one thread alone.
            for item in waiting:
                work(item)

        helping = [self._pool.submit(take) for _ in range(self._helpers)] if self._pool is not None else []
        try:
            take()
        finally:
            for helper in helping:
                helper.result()

    def __enter__(self) -> Self:
        return self

    def __exit__(
        self, kind: type[BaseException] | None, error: BaseException | None, trace: TracebackType | None
    ) -> None:
        if self._pool is not None:
            self._pool.shutdown(wait=True)
