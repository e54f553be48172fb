"""Stepping back behind the window: what computes in the background must never keep a gesture waiting."""

from __future__ import annotations

import contextlib
import os
import sys
import threading

STEPS_BACK = 5


def step_back() -> None:
    """Let the calling thread, and the threads that it starts from now on, yield to others of the machine.

    Only Linux counts niceness by thread; elsewhere nothing is changed. The thread to step back calls it once.
    """
    if sys.platform == "linux":
        with contextlib.suppress(OSError):
            os.setpriority(os.PRIO_PROCESS, threading.get_native_id(), STEPS_BACK)
