"""What is said on standard error while something runs, and how a generator of steps is run."""

from __future__ import annotations

import sys
from collections.abc import Callable, Generator
from typing import TypeVar

Item = TypeVar("Item")
Result = TypeVar("Result")


def run_steps(steps: Generator[Item, None, Result], hear: Callable[[Item], None]) -> Result:
    """Run a generator to its end, have every item heard, and return its value."""
    while True:
        try:
            item = next(steps)
        except StopIteration as end:
            result: Result = end.value
            return result
        hear(item)


class Progress:
    """Progress on standard error: one line that changes on a terminal, only what is found elsewhere."""

    def __init__(self) -> None:
        self.changing = sys.stderr.isatty()

    def step(self, text: str) -> None:
        """Say what is being done."""
        if self.changing and text:
            sys.stderr.write(f"\r\x1b[K{text[:100]}")
            sys.stderr.flush()

    def line(self, text: str) -> None:
        """Say what has been found."""
        self.clear()
        print(text, file=sys.stderr, flush=True)

    def clear(self) -> None:
        """Take the changing line away."""
        if self.changing:
            sys.stderr.write("\r\x1b[K")
            sys.stderr.flush()


def say(text: str) -> None:
    """Say a sentence on standard error, under the program's name."""
    print(f"tinemark: {text}", file=sys.stderr, flush=True)
