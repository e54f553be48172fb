"""Compiles a kernel beside the thread that waits for it, so that the wait can be given up."""

from __future__ import annotations

import threading
from typing import Any

import numpy as np
from numpy.typing import NDArray

from tinemark.equations.motion import Motion
from tinemark.equations.sampler import BUILT_ON
from tinemark.systems.native import native_module

_SECONDS_BETWEEN_LOOKS = 0.02


class Compiling:
    """One kernel, compiled once on a thread of its own when it is first wanted.

    The compiler cannot be stopped; whoever waits for it can. It goes on then, and the next one who wants
    the kernel finds it ready, or nearly.
    """

    def __init__(self, source: str, motion: Motion) -> None:
        self._source, self._motion = source, motion
        self._lock = threading.Lock()
        self._thread: threading.Thread | None = None
        self._module: Any = None
        self._error: BaseException | None = None

    def module(self, stop: NDArray[np.uint8]) -> Any:
        """The compiled module; None where `stop` was set before it was ready."""
        if self._module is not None:
            return self._module
        with self._lock:
            if self._thread is None:
                self._thread = threading.Thread(target=self._compile, name="tinemark-compiling")
                self._thread.start()
            thread = self._thread
        while thread.is_alive() and stop[0] == 0:
            thread.join(_SECONDS_BETWEEN_LOOKS)
        if thread.is_alive():
            return None
        if self._error is not None:
            raise self._error
        return self._module

    def _compile(self) -> None:
        try:
            module: Any = native_module(self._source, "strobe", BUILT_ON)
            # No column is moved: the call is there for its types.
            n, cell = self._motion.size, np.zeros(1, np.uint8)
            none, row = np.zeros((n, 1)), np.zeros(1)
            room, told, drive = np.empty((1, n, 1)), np.zeros((4, 1)), np.zeros((1, 1, 1))
            fixed = np.ones(len(self._motion.fixed))
            module.run(
                none, none, row, row, fixed, 0, 0, room, False, np.ones(2 * n), 1e-6, np.ones(n), 0.0,
                1, 0.1, 0, drive, told, cell,
            )  # fmt: skip
            self._module = module
        except BaseException as error:  # noqa: BLE001 - handed to whoever waits
            self._error = error
