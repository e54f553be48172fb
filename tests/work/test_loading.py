"""Engines that two threads want at once are loaded by one of them, whole."""

from __future__ import annotations

import subprocess
import sys

SCRIPT = """
import threading
from tinemark.systems.library import builtin_system
from tinemark.work.loading import load_engines

system = builtin_system("two_well_oscillator")
failed = []
together = threading.Barrier(2)

def load(drawing):
    together.wait()
    try:
        load_engines(system, drawing)
        import numba
        import scipy.integrate
        numba.types.boolean, scipy.integrate.DOP853
    except Exception as error:
        failed.append(repr(error))

threads = [threading.Thread(target=load, args=(drawing,)) for drawing in (True, False)]
for thread in threads:
    thread.start()
for thread in threads:
    thread.join()
print(failed)
"""


def test_two_threads_that_load_at_once_get_whole_engines() -> None:
    """Without the lock one of them may be handed half of numba, and the picture is never drawn."""
    ended = subprocess.run([sys.executable, "-c", SCRIPT], capture_output=True, text=True, check=True)
    assert ended.stdout.strip() == "[]"
