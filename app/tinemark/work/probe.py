"""The probe: the orbit at one parameter value."""

from __future__ import annotations

import math
import threading
from collections.abc import Callable
from dataclasses import dataclass
from fractions import Fraction
from typing import TypeAlias

import numpy as np
from numpy.typing import NDArray

from tinemark.systems.errors import TinemarkError
from tinemark.systems.plain import plain_function
from tinemark.systems.system import System
from tinemark.work.loading import load_engines
from tinemark.work.newest import NewestWins
from tinemark.work.waveform import Waveform, waveform

CURVE_POINTS = 801
MAX_STEPS = 100_000
SAMPLE_TOLERANCE = 1e-9
"""Error of an integration step of a probed orbit, as a share of a state's size: far below what is drawn."""
WAVE_SAMPLES = 12
"""Samples between which the waveform of an orbit of equations is drawn, the last ones."""
_STOP_EVERY = 64


@dataclass(frozen=True)
class ProbeRequest:
    """An orbit of `steps` steps, or samples, from the states' starts, at one value of one parameter."""

    system: System
    parameter: str
    value: Fraction
    steps: int = 2000


@dataclass(frozen=True)
class ProbeOrbit:
    """One orbit.

    Attributes
    ----------
    parameter_value
        The parameter's value, exact.
    states
        float64, shape (steps, number of states): states after each step. From where the orbit
        escapes on, every entry is nan.
    observed
        float64, shape (steps,): the observed quantity after each step.
    map_curve
        (xs, ys), float64, for one state: the state and the state one step later, over the state's range and
        the orbit. None for several states.
    times
        float64, shape (steps,): for equations, the time of each sample since the start. None for maps.
    wave
        For equations, the observed quantity between the last samples; None for maps, and where it could not
        be followed.
    """

    parameter_value: Fraction
    states: NDArray[np.float64]
    observed: NDArray[np.float64]
    map_curve: tuple[NDArray[np.float64], NDArray[np.float64]] | None
    times: NDArray[np.float64] | None = None
    wave: Waveform | None = None

    @property
    def escaped(self) -> bool:
        """Whether the orbit left every bound or became undefined."""
        return bool(np.isnan(self.states).any())


@dataclass(frozen=True)
class ProbeReady:
    """The orbit that was asked for."""

    id: int
    request: ProbeRequest
    orbit: ProbeOrbit


@dataclass(frozen=True)
class ProbeFailed:
    """There is no orbit to show, and why."""

    id: int
    request: ProbeRequest
    error: TinemarkError


ProbeEvent: TypeAlias = ProbeReady | ProbeFailed


def request_probe(
    system: System, parameter: str, value: Fraction, steps: int = 2000, stop: threading.Event | None = None
) -> ProbeOrbit:
    """Compute an orbit. Runs in the calling thread.

    Raises
    ------
    TinemarkError
        The parameter is not known, or `steps` is not between 1 and `MAX_STEPS`.
    """
    system.parameter(parameter)
    if not 1 <= steps <= MAX_STEPS:
        raise TinemarkError(
            f"a probe of {steps} steps cannot be drawn", what_to_do=f"ask for 1 to {MAX_STEPS} steps"
        )
    fixed = [
        float(value) if name == parameter else float(system.parameter(name).value)
        for name in system.parameter_names
    ]
    step = _stepper(system, parameter, float(value), fixed)
    states, spans = np.full((steps, len(system.states)), np.nan), np.full(steps, np.nan)
    point = [float(state.start) for state in system.states]
    for row in range(steps):
        point, spans[row] = step(point)
        if not np.isfinite(point).all() or (stop is not None and row % _STOP_EVERY == 0 and stop.is_set()):
            break
        states[row] = point
    observe = plain_function([system.observe_expression], system.names)
    observed = np.empty(steps)
    observed[:] = observe([*states.T, *fixed])[0]
    # A constant formula is defined everywhere, an escaped orbit is not.
    observed[np.isnan(states).any(axis=1)] = np.nan
    curve = _curve(system, states[:, 0], fixed) if system.is_map and len(system.states) == 1 else None
    if system.is_map:
        return ProbeOrbit(value, states, observed, curve)
    times = np.cumsum(spans)
    sound = int(np.isfinite(states).all(axis=1).sum())
    last = slice(max(sound - WAVE_SAMPLES - 1, 0), sound)
    wave = waveform(system, fixed, states[last], times[last], last.start, stop)
    return ProbeOrbit(value, states, observed, curve, times, wave)


def _stepper(
    system: System, parameter: str, value: float, fixed: list[float]
) -> Callable[[list[float]], tuple[list[float], float]]:
    """The map itself, or the way from one sample of equations to the next and the time it takes."""
    if system.is_map:
        step = plain_function(system.expressions, system.names)
        return lambda point: ([float(x) for x in step([*point, *fixed])], 1.0)
    load_engines(system)
    from tinemark.equations.return_map import FloatReturnMap
    from tinemark.equations.returns import return_map

    sampled = return_map(system, parameter, SAMPLE_TOLERANCE)
    period = math.nan
    if sampled.is_driven:
        period = float(plain_function([system.every_expression], system.parameter_names)(fixed)[0])

    def on(point: list[float]) -> tuple[list[float], float]:
        image = [float(x) for x in sampled.step(np.array(point)[:, None], value)[:, 0]]
        # A section leaves the time to the orbit.
        passed = sampled.last if isinstance(sampled, FloatReturnMap) and not sampled.is_driven else None
        return image, period if passed is None else float(passed.times[0])

    return on


def _curve(
    system: System, orbit: NDArray[np.float64], fixed: list[float]
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    state = system.states[0]
    ends = [float(state.start)] if state.range is None else [float(end) for end in state.range]
    ends += [float(x) for x in orbit[np.isfinite(orbit)]]
    low, high = min(ends), max(ends)
    if low == high:
        low, high = low - 1, high + 1
    xs = np.linspace(low, high, CURVE_POINTS)
    ys = np.empty(CURVE_POINTS)
    ys[:] = plain_function(system.expressions, system.names)([xs, *fixed])[0]
    return xs, ys


class ProbeDesk:
    """Computes probes on a thread of its own; the newest request wins.

    Parameters
    ----------
    on_event
        Called with the answer to the newest request, on the desk's thread.
    """

    def __init__(self, on_event: Callable[[ProbeEvent], None]) -> None:
        self._on_event = on_event
        self._desk: NewestWins[ProbeRequest, threading.Event] = NewestWins(
            "probe", self._run, threading.Event
        )

    def request(self, request: ProbeRequest) -> int:
        """Ask for an orbit; returns the id that its event carries. Any thread, at once."""
        return self._desk.submit(request)

    def cancel(self) -> None:
        """Drop the request that runs or waits."""
        self._desk.cancel()

    def close(self) -> None:
        """End the thread."""
        self._desk.close()

    def _run(self, id_: int, request: ProbeRequest, stop: threading.Event) -> None:
        event: ProbeEvent
        try:
            orbit = request_probe(request.system, request.parameter, request.value, request.steps, stop)
            event = ProbeReady(id_, request, orbit)
        except TinemarkError as error:
            event = ProbeFailed(id_, request, error)
        if not stop.is_set():
            self._on_event(event)
