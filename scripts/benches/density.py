"""Drawing: our kernels against NumPy and against gcc, on the same columns, rows and steps."""

from __future__ import annotations

import ctypes
import os
import shutil
import subprocess
import sys
import tempfile
import time
from collections.abc import Callable, Iterator
from dataclasses import dataclass
from fractions import Fraction
from functools import partial
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from benches.measuring import Figure, Timing, alternately, at_least, at_most, reading, times_faster

COLUMNS, ROWS, STEPS = 1600, 1000, 4500
NUMPY_CHUNK = 500
ROUNDS = 7
LANE_WIDTHS = (8, 16, 32)

Floats = NDArray[np.float64]
Step = Callable[[Floats, Floats, Floats], None]


@dataclass(frozen=True)
class Case:
    """One map: its name among the built-ins and in the C file, its view, and the NumPy peer's step."""

    name: str
    left: str
    right: str
    bottom: str
    top: str
    start: float
    step: Step
    numpy_target: float


def _logistic(x: Floats, r: Floats, room: Floats) -> None:
    np.subtract(1.0, x, out=room)
    np.multiply(x, room, out=x)
    np.multiply(x, r, out=x)


def _ricker(x: Floats, r: Floats, room: Floats) -> None:
    np.subtract(1.0, x, out=room)
    np.multiply(room, r, out=room)
    np.exp(room, out=room)
    np.multiply(x, room, out=x)


def _sine(x: Floats, r: Floats, room: Floats) -> None:
    np.multiply(x, np.pi, out=room)
    np.sin(room, out=x)
    np.multiply(x, r, out=x)


CASES = (
    Case("logistic", "2.8", "4", "0", "1", 0.4, _logistic, 12.0),
    Case("ricker", "1.8", "3.5", "0", "4", 0.4, _ricker, 12.0),
    Case("sine", "0.6", "1", "0", "1", 0.4, _sine, 20.0),
)


def figures() -> Iterator[Figure]:
    """Ratios to the peers, gain of a second thread, time of a first picture, memory of a run."""
    library = _peer_library()
    for case in CASES:
        work: dict[str, Callable[[], object]] = {
            "ours": _ours(case),
            "with exponent": _ours(case, exponent=True),
        }
        work["numpy, counted at once"] = partial(_numpy_at_once, case)
        work["numpy, counted in chunks"] = partial(_numpy_in_chunks, case)
        if library is not None:
            for lanes in LANE_WIDTHS:
                work[f"gcc, {lanes} lanes"] = _gcc(library, case, lanes)
        # One thread each: its own time, so that a busy machine takes turns away from neither.
        timings = alternately(work, ROUNDS, clock=time.thread_time)
        ours = timings["ours"]
        yield reading(f"{case.name}: million steps/s, one thread", COLUMNS * STEPS / ours.median / 1e6)
        yield at_least(
            f"{case.name}: times the NumPy script",
            times_faster(ours, _best(timings, "numpy")),
            case.numpy_target,
        )
        if library is not None:
            yield at_least(
                f"{case.name}: times the gcc kernel", times_faster(ours, _best(timings, "gcc")), 1.3
            )
        share = times_faster(ours, timings["with exponent"])
        yield reading(
            f"{case.name}: time with the Lyapunov exponent over all steps, over that without", share
        )
    yield from _threads()
    yield reading("first picture of a new view at 1280 x 800, toned (ms)", _first_picture() * 1e3)
    yield at_most("peak memory of a drawing run (MB)", _peak_memory(), 500.0)


def _best(timings: dict[str, Timing], peer: str) -> Timing:
    """The fastest of a peer's forms."""
    return min((t for name, t in timings.items() if name.startswith(peer)), key=lambda t: t.median)


def _request(case: Case, columns: int = COLUMNS, rows: int = ROWS):  # type: ignore[no-untyped-def]
    from tinemark.density.request import PictureRequest, View
    from tinemark.systems.library import builtin_system

    system = builtin_system(case.name)
    view = View(Fraction(case.left), Fraction(case.right), Fraction(case.bottom), Fraction(case.top))
    return PictureRequest(
        system, system.diagram_parameter, system.observe, view, columns, rows, transient_steps=0
    )


def _ours(case: Case, exponent: bool = False) -> Callable[[], object]:
    """Our kernel on one thread, counting as the peers do; or with the exponent over every step.

    As for the peers, what a run fills (states, counts) is made anew in each, and nothing else is.
    """
    from tinemark.density.kernels import LANES
    from tinemark.density.renderer import StopFlag, create

    drawing = create(_request(case))
    kernel = drawing.kernels.advance if exponent else drawing.kernels.advance_counting
    stop = StopFlag().cell

    def draw() -> object:
        states, tangents, growth = np.full((1, COLUMNS), case.start), np.ones((1, COLUMNS)), np.zeros(COLUMNS)
        counts = np.zeros((COLUMNS, ROWS + 2), np.uint32)
        scaling = (drawing.scale, drawing.offset, stop)
        for first in range(0, COLUMNS, LANES):
            block = (first, min(LANES, COLUMNS - first), STEPS, True, True)
            kernel(states, tangents, growth, drawing.swept, drawing.fixed, counts, *block, *scaling)
        return counts

    return draw


def _numpy_at_once(case: Case) -> object:
    """Columns as one array; each step is counted as it is made, in flat cells: clip, convert, add one."""
    x, swept, room = np.full(COLUMNS, case.start), _swept(case), np.empty(COLUMNS)
    first = np.arange(COLUMNS) * float(ROWS)
    last = first + (ROWS - 1)
    scale, bottom = _scaling(case)
    offset = first - bottom * scale
    cell = np.empty(COLUMNS, np.intp)
    counts = np.zeros(COLUMNS * ROWS, np.uint32)
    for _ in range(STEPS):
        case.step(x, swept, room)
        np.multiply(x, scale, out=room)
        np.add(room, offset, out=room)
        np.clip(room, first, last, out=room)
        np.copyto(cell, room, casting="unsafe")
        counts[cell] += 1
    return counts


def _numpy_in_chunks(case: Case) -> object:
    """Columns as one array; some hundred steps are noted and then counted at once by `bincount`."""
    x, swept, room = np.full(COLUMNS, case.start), _swept(case), np.empty(COLUMNS)
    first = np.arange(COLUMNS) * float(ROWS)
    last = first + (ROWS - 1)
    scale, bottom = _scaling(case)
    offset = first - bottom * scale
    noted = np.empty((NUMPY_CHUNK, COLUMNS))
    counts = np.zeros(COLUMNS * ROWS, np.int64)
    for _ in range(STEPS // NUMPY_CHUNK):
        for row in noted:
            case.step(x, swept, room)
            row[:] = x
        np.multiply(noted, scale, out=noted)
        np.add(noted, offset, out=noted)
        np.clip(noted, first, last, out=noted)
        counts += np.bincount(noted.astype(np.intp).ravel(), minlength=COLUMNS * ROWS)
    return counts


def _swept(case: Case) -> Floats:
    left, right = float(case.left), float(case.right)
    return left + (right - left) * (np.arange(COLUMNS) + 0.5) / COLUMNS


def _scaling(case: Case) -> tuple[float, float]:
    return ROWS / (float(case.top) - float(case.bottom)), float(case.bottom)


def _peer_library() -> ctypes.CDLL | None:
    """The C peer, compiled for this machine; None where there is no gcc."""
    compiler = shutil.which("gcc")
    if compiler is None or sys.platform != "linux":
        return None
    source = Path(__file__).with_name("density_peer.c")
    with tempfile.TemporaryDirectory() as folder:
        target = Path(folder) / "peer.so"
        options = ["-O3", "-march=native", "-ffast-math", "-fopenmp-simd", "-shared", "-fPIC"]
        subprocess.run([compiler, *options, str(source), "-o", str(target), "-lmvec", "-lm"], check=True)
        # Once loaded, the file is no longer needed.
        return ctypes.CDLL(str(target))


def _gcc(library: ctypes.CDLL, case: Case, lanes: int) -> Callable[[], object]:
    function = getattr(library, f"{case.name}_{lanes}")
    function.restype = None
    swept = _swept(case)
    scale, bottom = _scaling(case)

    def draw() -> object:
        state = np.full(COLUMNS, case.start)
        counts = np.zeros((COLUMNS, ROWS), np.uint32)
        function(
            state.ctypes.data_as(ctypes.c_void_p),
            swept.ctypes.data_as(ctypes.c_void_p),
            counts.ctypes.data_as(ctypes.c_void_p),
            ctypes.c_long(COLUMNS),
            ctypes.c_long(ROWS),
            ctypes.c_long(STEPS),
            ctypes.c_double(bottom),
            ctypes.c_double(scale),
        )
        return counts

    return draw


def _threads() -> Iterator[Figure]:
    """The drawing itself, as the program runs it, on one thread and on two."""
    from tinemark.density.renderer import Team, append, create

    request = _request(CASES[1])
    with Team(1) as alone, Team(2) as pair:

        def draw(team: Team) -> object:
            drawing = create(request)
            append(drawing, 4 * STEPS, team=team)
            return drawing

        timings = alternately({"one": partial(draw, alone), "two": partial(draw, pair)}, ROUNDS)
    yield at_least("two threads over one", times_faster(timings["two"], timings["one"]), 1.8)


def _first_picture() -> float:
    """Seconds from a new view to its first toned picture, kernels already compiled."""
    from tinemark.density.renderer import progressive
    from tinemark.density.tone import tone_map

    request = _request(CASES[0], 1280, 800)

    def first() -> object:
        return tone_map(next(progressive(request, 20000)).counts)

    return alternately({"first": first}, 15)["first"].median


_DRAW_FOR_LONG = """
import resource
from fractions import Fraction
from tinemark.density.png import Frame, picture_pixels
from tinemark.density.renderer import create, progressive, shifted
from tinemark.density.request import PictureRequest, View
from tinemark.systems.library import builtin_system
import dataclasses

for name in ("logistic", "ricker", "henon"):
    system = builtin_system(name)
    low, high = (bound.fraction for bound in system.parameter(system.diagram_parameter).range)
    view = View(low, high, Fraction(-1), Fraction(3))
    request = PictureRequest(system, system.diagram_parameter, system.observe, view, 1600, 1000)
    drawing = create(request)
    for pan in range(5):
        for field in progressive(drawing, 20000):
            pass
        move = view.width * pan / 10
        moved = dataclasses.replace(view, left=view.left + move, right=view.right + move)
        moved_request = dataclasses.replace(request, view=moved)
        drawing = shifted(drawing, moved_request) or create(moved_request)
    picture_pixels(field, "log", "ink", frame=Frame(view, "r", "x"))
print(resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1024)
"""


def _peak_memory() -> float:
    """Megabytes that a process needs at its height to draw, pan and write pictures of three systems."""
    app = str(Path(__file__).resolve().parents[2] / "app")
    environment = os.environ | {"PYTHONPATH": os.pathsep.join([app, os.environ.get("PYTHONPATH", "")])}
    run = subprocess.run(
        [sys.executable, "-c", _DRAW_FOR_LONG], env=environment, check=True, capture_output=True, text=True
    )
    return float(run.stdout.split()[-1])


if __name__ == "__main__":
    started = time.perf_counter()
    for figure in figures():
        print(figure)
    print(f"{time.perf_counter() - started:.0f} s")
