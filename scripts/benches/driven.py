"""Equations: our strobe and section kernels against heyoka's Taylor integrator and against SciPy.

All integrate the same orbits with the same error per sample. Each is tuned first: the coarsest tolerance is
sought at which its largest error stays below `ERROR`, over orbits spread across the sweep and against our
run with the smallest steps. heyoka runs in its batch mode, at the width it recommends and at twice that,
whichever is faster. On the flow it finds the passages as its events; beside that it is timed on the easier
task of integrating as long without looking for any. Processor time is what counts: each works on one thread.
"""

from __future__ import annotations

import os
import subprocess
import sys
import tempfile
import time
from collections.abc import Callable, Iterator
from dataclasses import dataclass
from functools import partial
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from benches.measuring import Figure, Timing, alternately, at_least, at_most, reading, times_faster

ERROR = 1e-8
"""Largest error of one sample, in the states' own units; all of them are of order one."""

ROUNDS = 7
ORBITS, SAMPLES = 256, 128
PEER_SAMPLES = 600
SCIPY_SAMPLES = 12

Floats = NDArray[np.float64]
Rates = Callable[[float, Any], list[Any]]

OSCILLATOR = """
title = "Two-well oscillator"
kind = "driven"
[states.x]
start = "1"
range = ["0", "1"]
[states.v]
start = "0"
range = ["0", "1"]
[parameters.F]
value = "0.27"
range = ["0.26", "0.3"]
[rate]
x = "v"
v = "-0.3*v + x - x**3 + F*cos(1.2*t)"
[sample]
every = "2*pi/1.2"
[diagram]
parameter = "F"
observe = "x"
"""

ROESSLER = """
title = "Roessler's equations"
kind = "flow"
[states.x]
start = "-3"
range = ["0", "1"]
[states.y]
start = "0"
range = ["0", "1"]
[states.z]
start = "0.1"
range = ["0", "1"]
[parameters.c]
value = "3"
range = ["2.5", "4.1"]
[rate]
x = "-y - z"
y = "x + 0.2*y"
z = "0.2 + z*(x - c)"
[sample]
crosses = "y"
direction = "falling"
[diagram]
parameter = "c"
observe = "x"
"""


@dataclass(frozen=True)
class Case:
    """One system, its rates for SciPy and for heyoka, and what is asked of it."""

    name: str
    text: str
    rates: Callable[[float], Rates]
    target: float


def _oscillator(force: float) -> Rates:
    def rates(t: float, y: Any) -> list[Any]:
        return [y[1], -0.3 * y[1] + y[0] - y[0] ** 3 + force * np.cos(1.2 * t)]

    return rates


def _roessler(c: float) -> Rates:
    def rates(_t: float, y: Any) -> list[Any]:
        return [-y[1] - y[2], y[0] + 0.2 * y[1], 0.2 + y[2] * (y[0] - c)]

    return rates


CASES = (
    Case("two-state driven oscillator", OSCILLATOR, _oscillator, 3.0),
    Case("three-state flow", ROESSLER, _roessler, 1.5),
)


def figures() -> Iterator[Figure]:
    """Ratios to the peers at the same error, and times of compiling."""
    for case in CASES:
        yield from _case(case)
    yield from _compiling()


@dataclass(frozen=True)
class Orbits:
    """Where all start: settled states (states, orbits), parameters, and one sample's time and end."""

    states: Floats
    swept: Floats
    times: Floats
    ends: Floats


def _case(case: Case) -> Iterator[Figure]:
    from tinemark.density.strobe_runner import Runner, tuned
    from tinemark.equations.return_map import FloatReturnMap
    from tinemark.systems.system_file import read_system_text

    system = read_system_text(case.text)
    parameter = system.diagram_parameter
    low, high = (float(end.fraction) for end in system.parameter(parameter).range or ())
    swept = np.linspace(low, high, ORBITS)
    tight = FloatReturnMap(system, parameter, 2e-14)
    states = np.repeat(np.array([[float(state.start)] for state in system.states]), ORBITS, axis=1)
    for _ in range(40):
        states = tight.step(states, swept)
    ends = tight.step(states, swept)
    assert tight.last is not None
    orbits = Orbits(states, swept, tight.last.times, ends)

    runner = Runner(system, parameter)
    setting = tuned(runner, np.linspace(low, high, 32), ERROR, np.zeros(1, np.uint8))
    ours_error = _error(_one_of_ours(runner, setting, orbits), orbits)
    work: dict[str, Callable[[], object]] = {"ours": _ours(runner, setting, orbits)}
    samples = {"ours": ORBITS * SAMPLES, "scipy": SCIPY_SAMPLES}
    errors = {"ours": ours_error}
    scipy_tolerance, errors["scipy"] = _coarsest(partial(_scipy_error, case, orbits))
    work["scipy"] = partial(_scipy, case, orbits, scipy_tolerance)
    for width in _widths():
        name = f"heyoka, {width} wide"
        tolerance, errors[name] = _coarsest(partial(_heyoka_error, orbits, width))
        work[name] = _heyoka(orbits, width, tolerance)
        samples[name] = width * PEER_SAMPLES
        if case.text is ROESSLER:
            work[f"{name}, passages"] = _passages(orbits, width, tolerance)
            samples[f"{name}, passages"] = width * (PEER_SAMPLES // 6)
    timings = {
        name: Timing(tuple(seconds / samples[name] for seconds in timing.seconds))
        for name, timing in alternately(work, ROUNDS, clock=time.process_time).items()
    }
    ours = timings["ours"]
    yield reading(f"{case.name}: million samples per second of one thread", 1e-6 / ours.median)
    for name, error in errors.items():
        yield at_most(f"{case.name}: largest error of a sample, {name}", error, ERROR)
    plain = _best(timings, "heyoka", "wide")
    same = _best(timings, "heyoka", "passages") if case.text is ROESSLER else plain
    if plain is not None and same is not None:
        yield at_least(f"{case.name}: times heyoka in batch mode", times_faster(ours, same), case.target)
        if same is not plain:
            yield reading(f"{case.name}: times heyoka that looks for no passages", times_faster(ours, plain))
    yield at_least(
        f"{case.name}: times a solve_ivp(DOP853) loop", times_faster(ours, timings["scipy"]), 300.0
    )


def _best(timings: dict[str, Timing], start: str, end: str) -> Timing | None:
    found = [timing for name, timing in timings.items() if name.startswith(start) and name.endswith(end)]
    return min(found, key=lambda timing: timing.median) if found else None


def _error(ends: Floats, orbits: Orbits) -> float:
    return float(np.abs(ends - orbits.ends[:, : ends.shape[1]]).max())


def _coarsest(error: Callable[[float], float]) -> tuple[float, float]:
    """The coarsest of a fine ladder of tolerances whose error stays below `ERROR`, and that error."""
    tolerance = 1e-5
    while True:
        found = error(tolerance)
        if found <= ERROR:
            return tolerance, found
        tolerance /= 10.0**0.25


def _one_of_ours(runner: Any, setting: Any, orbits: Orbits) -> Floats:
    found = runner.samples(orbits.states, orbits.swept, 1, setting.steps, np.zeros(1, np.uint8))
    ends: Floats = found[0][:, :, 0].T
    return ends


def _ours(runner: Any, setting: Any, orbits: Orbits) -> Callable[[], object]:
    """What a picture does: columns moved on, their samples noted; a block of lanes at a time."""
    from tinemark.equations.lane_memory import LANES

    n = len(orbits.states)
    stop = np.zeros(1, np.uint8)
    none, told, noted = np.zeros((n, ORBITS)), np.zeros((4, LANES)), np.empty((LANES, n, SAMPLES))

    def move() -> object:
        states = orbits.states.copy()
        for first in range(0, ORBITS, LANES):
            block = (first, LANES)
            runner.run(
                False, states, none, none[0], orbits.swept, block, noted, False, setting.steps, told, stop
            )
        return states

    return move


def _scipy_error(case: Case, orbits: Orbits, tolerance: float) -> float:
    picked = range(0, ORBITS, ORBITS // 16)
    return max(
        float(np.abs(_solved(case, orbits, place, tolerance) - orbits.ends[:, place]).max())
        for place in picked
    )


def _solved(case: Case, orbits: Orbits, place: int, tolerance: float) -> Floats:
    from scipy.integrate import solve_ivp

    rates = case.rates(float(orbits.swept[place]))
    span = (0.0, float(orbits.times[place]))
    found = solve_ivp(rates, span, orbits.states[:, place], "DOP853", rtol=tolerance, atol=tolerance)
    ends: Floats = found.y[:, -1]
    return ends


def _scipy(case: Case, orbits: Orbits, tolerance: float) -> object:
    step = ORBITS // SCIPY_SAMPLES
    return [_solved(case, orbits, place, tolerance) for place in range(0, step * SCIPY_SAMPLES, step)]


def _widths() -> tuple[int, ...]:
    """Batch widths to try; none where there is no heyoka."""
    try:
        import heyoka  # type: ignore[import-untyped]
    except ImportError:
        return ()
    widest = int(heyoka.recommended_simd_size())
    return (widest, 2 * widest)


def _integrator(orbits: Orbits, width: int, tolerance: float, first: int, passed: Any = None) -> Any:
    import heyoka as hy

    names = ("x", "y", "z")[: len(orbits.states)]
    variables = hy.make_vars(*names)
    if len(names) == 2:
        x, v = variables
        system = [(x, v), (v, -0.3 * v + x - x**3 + hy.par[0] * hy.cos(1.2 * hy.time))]
    else:
        x, y, z = variables
        system = [(x, -y - z), (y, x + 0.2 * y), (z, 0.2 + z * (x - hy.par[0]))]
    lanes = slice(first, first + width)
    states = np.ascontiguousarray(orbits.states[:, lanes])
    events = []
    if passed is not None:
        falling = hy.event_direction.negative
        events = [hy.nt_event_batch(variables[1], callback=passed, direction=falling)]
    return hy.taylor_adaptive_batch(
        system, states, pars=orbits.swept[None, lanes].copy(), tol=tolerance, nt_events=events
    )


def _heyoka_error(orbits: Orbits, width: int, tolerance: float) -> float:
    largest = 0.0
    for first in range(0, ORBITS - width + 1, ORBITS // 8):
        integrator = _integrator(orbits, width, tolerance, first)
        integrator.propagate_until(orbits.times[first : first + width].copy())
        there = orbits.ends[:, first : first + width]
        largest = max(largest, float(np.abs(integrator.state - there).max()))
    return largest


def _heyoka(orbits: Orbits, width: int, tolerance: float) -> Callable[[], object]:
    """Sample after sample of as many orbits as the batch is wide."""
    middle = (ORBITS - width) // 2
    integrator = _integrator(orbits, width, tolerance, middle)
    times = orbits.times[middle : middle + width].copy()
    start = np.ascontiguousarray(orbits.states[:, middle : middle + width])

    def move() -> object:
        integrator.set_time(0.0)
        integrator.state[:] = start
        for sample in range(1, PEER_SAMPLES + 1):
            integrator.propagate_until(sample * times)
        return integrator.state

    return move


def _passages(orbits: Orbits, width: int, tolerance: float) -> Callable[[], object]:
    """As `_heyoka`, with every passage of the section noted by its time and the state there."""
    middle = (ORBITS - width) // 2
    noted: list[Any] = []

    def passed(integrator: Any, time_of_it: float, _direction: int, lane: int) -> None:
        noted.append(integrator.update_d_output(np.full(width, time_of_it))[:, lane])

    integrator = _integrator(orbits, width, tolerance, middle, passed)
    times = orbits.times[middle : middle + width].copy()
    start = np.ascontiguousarray(orbits.states[:, middle : middle + width])

    def move() -> object:
        noted.clear()
        integrator.set_time(0.0)
        integrator.state[:] = start
        integrator.propagate_until((PEER_SAMPLES // 6) * times)
        # Returns of one orbit differ in length, so a few passages more or less fall into the time.
        assert abs(len(noted) / (width * (PEER_SAMPLES // 6)) - 1.0) < 0.1
        return noted

    return move


_FIRST = """
import sys, time
import numpy as np
import numba
from tinemark.density.strobe_runner import Runner, Steps
from tinemark.equations.lane_control import pending
from tinemark.systems.system_file import read_system_text
system = read_system_text(sys.stdin.read())
before = time.process_time()
runner = Runner(system, system.diagram_parameter)
states, swept = np.array([[-3.0], [0.0], [0.1]]), np.array([3.0])
runner.samples(states, swept, 1, Steps(1e-8, 0.1, 0, runner.drive(1)), np.zeros(1, np.uint8))
print(time.process_time() - before)
"""


def _compiling() -> Iterator[Figure]:
    """Seconds of processor time from a three-state system to its first sample: first and second process."""
    app = str(Path(__file__).resolve().parents[2] / "app")
    with tempfile.TemporaryDirectory() as folder:
        surroundings = os.environ | {
            "PYTHONPATH": os.pathsep.join([app, os.environ.get("PYTHONPATH", "")]),
            "TINEMARK_CACHE_DIR": folder,
        }
        # The compiled code that all systems share has been made by what ran before.
        seconds = [
            float(
                subprocess.run(
                    [sys.executable, "-c", _FIRST],
                    input=ROESSLER,
                    env=surroundings,
                    capture_output=True,
                    text=True,
                    check=True,
                ).stdout
            )
            for _ in range(2)
        ]
    yield at_most("first compile of a three-state system (s)", seconds[0], 4.0)
    yield at_most("the same in the next run, from the cache (s)", seconds[1], 1.0)


if __name__ == "__main__":
    started = time.perf_counter()
    for figure in figures():
        print(figure)
    print(f"{time.perf_counter() - started:.0f} s")
