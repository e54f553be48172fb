"""Lengths typical of a system's states, by which errors and nearness are measured."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from tinemark.systems.system import System

Floats = NDArray[np.float64]

ESCAPE_FACTOR = 1e15


def state_scales(system: System, parameter: str, value: float) -> Floats:
    """A length typical of each state: the width of its range, or how far an orbit wanders.

    A state without a range is followed from the start over a few hundred coarse steps.

    Returns
    -------
    float64, shape (states,), all above zero.
    """
    start = np.array([float(state.start) for state in system.states])
    widths = np.array(
        [float(s.range[1].fraction - s.range[0].fraction) if s.range else 0.0 for s in system.states]
    )
    if (widths > 0).all():
        return widths
    wandered = _wandered(system, parameter, value, start)
    return np.where(widths > 0, widths, wandered)


def _wandered(system: System, parameter: str, value: float, start: Floats) -> Floats:
    from tinemark.equations.pilot import pilot_orbit

    orbit = pilot_orbit(system, parameter, value)
    spread: Floats = orbit.max(axis=0) - orbit.min(axis=0)
    return np.where(spread > 0, spread, np.where(start != 0, np.abs(start), 1.0))


def escape_bounds(system: System, scales: Floats) -> Floats:
    """Size beyond which a state counts as escaped, shape (states,)."""
    ends = [
        max((abs(float(end)) for end in (state.start, *(state.range or ()))), default=0.0)
        for state in system.states
    ]
    bounds: Floats = ESCAPE_FACTOR * np.maximum(np.array(ends), scales)
    return bounds
