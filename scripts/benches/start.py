"""Starting: what run.py adds, what the program loads before it can show anything."""

from __future__ import annotations

import subprocess
import sys
from collections.abc import Callable, Iterator
from pathlib import Path

import environment
from benches.measuring import Figure, alternately, at_most, reading

RUN = Path(environment.__file__).with_name("run.py")


def figures() -> Iterator[Figure]:
    """Seconds added by run.py on an unchanged start, and of the starts themselves."""
    environment.prepare(environment.RUN_REQUIREMENTS)
    # The interpreter itself, not a version switcher's shim, whose cost is not ours.
    interpreter = str(Path(sys.base_prefix) / ("python.exe" if sys.platform == "win32" else "bin/python3"))
    ours = [interpreter, str(RUN), "--version"]
    direct = [str(environment.python()), "-m", "tinemark", "--version"]
    bare = [str(environment.python()), "-c", "pass"]
    window = [str(environment.python()), "-c", "import tinemark.window.app"]
    timings = alternately(
        {"run": _call(ours), "direct": _call(direct), "bare": _call(bare), "window": _call(window)}, rounds=9
    )
    yield at_most(
        "run.py, added to an unchanged start (s)", timings["run"].median - timings["direct"].median, 0.2
    )
    yield reading("tinemark --version, whole process (s)", timings["direct"].median)
    loading = timings["window"].median - timings["bare"].median
    yield reading("loading the window's modules (s)", loading)


def _call(command: list[str]) -> Callable[[], object]:
    return lambda: subprocess.run(command, check=True, capture_output=True)
