"""The way of an orbit of equations between its samples, to be drawn."""

from __future__ import annotations

import threading
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from tinemark.systems.plain import Value, plain_function
from tinemark.systems.system import TIME, System

Floats = NDArray[np.float64]

LEAST_STEPS, MOST_STEPS = 64, 2048
"""Steps from a sample to the next one: doubled until the way ends where the next sample is."""

VISIBLE = 2e-3
"""A way that misses the next sample by this share of its extent would look no different."""


@dataclass(frozen=True)
class Waveform:
    """What the observed quantity does between the last samples of an orbit.

    Attributes
    ----------
    times, observed
        float64, shape (points,): time since the orbit's start, in the unit that the rates use, and the
        observed quantity then.
    first
        Number of the sample at which it begins.
    sample_times
        float64, shape (samples,): times of the samples from `first` on.
    """

    times: Floats
    observed: Floats
    first: int
    sample_times: Floats


def waveform(
    system: System,
    parameters: list[float],
    states: Floats,
    times: Floats,
    first: int,
    stop: threading.Event | None = None,
) -> Waveform | None:
    """Follow an orbit from each sample to the next, all of them at once, by the classical Runge-Kutta method.

    Each piece begins at its own sample, so that errors do not add up, and is held against the next one.

    Parameters
    ----------
    parameters
        Values of the system's parameters, in their order.
    states, times
        Shapes (samples, states) and (samples,): where the orbit is at its samples, and when.
    first
        Number of the first of them.

    Returns
    -------
    Waveform, or None: with fewer than two samples, once `stop` is set, and where the orbit moves too fast
    for `MOST_STEPS`.
    """
    if len(states) < 2:
        return None
    spans = np.diff(times)
    # The drive repeats with the samples: their times are left out of the phase, which would lose digits.
    begun = np.zeros_like(spans)
    rates = plain_function(system.expressions, (*system.state_names, *system.parameter_names, TIME))
    observe = plain_function([system.observe_expression], system.names)

    def slope(at: Floats, time: Floats) -> Floats:
        values: list[Value] = [*at, *parameters, time]
        return np.stack([np.broadcast_to(rate, time.shape) for rate in rates(values)])

    steps = LEAST_STEPS
    with np.errstate(all="ignore"):
        while steps <= MOST_STEPS:
            way = np.empty((steps + 1, states.shape[1], len(spans)))
            way[0] = now = states[:-1].T
            step = spans / steps
            for number in range(steps):
                if stop is not None and stop.is_set():
                    return None
                time = begun + number * step
                one = slope(now, time)
                two = slope(now + step / 2 * one, time + step / 2)
                three = slope(now + step / 2 * two, time + step / 2)
                four = slope(now + step * three, time + step)
                now = now + step / 6 * (one + 2 * two + 2 * three + four)
                way[number + 1] = now
            extent = way.max(axis=(0, 2)) - way.min(axis=(0, 2))
            missed = np.abs(now - states[1:].T).max(axis=1)
            # A state at rest has no extent; its rounding is no way.
            floor = 1e-9 * np.abs(way).max(axis=(0, 2))
            if (missed <= VISIBLE * extent + floor).all():
                return _drawn(observe, way, parameters, times, first)
            steps *= 2
    return None


def _drawn(observe, way: Floats, parameters: list[float], times: Floats, first: int) -> Waveform:  # type: ignore[no-untyped-def]
    steps, _, pieces = way.shape
    seen = np.empty((steps, pieces))
    seen[:] = observe([*way.transpose(1, 0, 2), *parameters])[0]
    at = times[:-1] + np.linspace(0.0, 1.0, steps)[:, None] * np.diff(times)
    return Waveform(at.T.reshape(-1), seen.T.reshape(-1), first, times)
