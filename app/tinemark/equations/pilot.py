"""A short, coarse look at an orbit of equations before anything is known of it: cheap, nothing compiled."""

from __future__ import annotations

import numpy as np

from tinemark.equations.scales import ESCAPE_FACTOR, Floats
from tinemark.systems.plain import plain_function
from tinemark.systems.system import TIME, System

PILOT_STEPS = 400
_RELATIVE = 1e-3
"""Error of a step, as a share of the largest value that a state has had."""
_MOST_TRIES = 1000
_SAFETY, _LEAST, _MOST = 0.9, 0.2, 5.0


def pilot_orbit(system: System, parameter: str, value: float) -> Floats:
    """The orbit from the start over a few hundred coarse steps, as it moves between samples.

    The pair of order 3(2) of Bogacki and Shampine (1989, Appl. Math. Lett. 2:321): few evaluations of the
    rates, since the window waits for the view that follows from them.

    Returns
    -------
    float64, shape (steps, states); a single row where the rates are not defined at the start. It ends where
    the orbit escapes.
    """
    constants = [value if p.name == parameter else float(p.value) for p in system.parameters]
    rates = plain_function(system.expressions, (*system.state_names, *system.parameter_names, TIME))

    def rate(time: float, states: Floats) -> Floats:
        return np.array([float(entry) for entry in rates([*states.tolist(), *constants, time])])

    now, time = np.array([float(state.start) for state in system.states]), 0.0
    orbit = [now]
    with np.errstate(all="ignore"):
        first = rate(time, now)
        if not np.isfinite(first).all():
            return np.array(orbit)
        sizes = np.abs(now)
        step = _first_step(now, first)
        for _ in range(_MOST_TRIES):
            if len(orbit) > PILOT_STEPS or not (np.abs(now) < ESCAPE_FACTOR).all() or time + step == time:
                break
            second = rate(time + step / 2, now + step / 2 * first)
            third = rate(time + 3 * step / 4, now + 3 * step / 4 * second)
            after = now + step / 9 * (2 * first + 3 * second + 4 * third)
            fourth = rate(time + step, after)
            apart = step / 72 * np.abs(-5 * first + 6 * second + 8 * third - 9 * fourth)
            # Without a floor the size of each state is found however small its unit makes it.
            allowed = _RELATIVE * np.maximum(sizes, np.abs(after)) + 1e-30
            error = float((apart / allowed).max())
            if error <= 1.0:
                now, time, first = after, time + step, fourth
                sizes = np.maximum(sizes, np.abs(now))
                orbit.append(now)
            # A step that has no end counts as far too long.
            wanted = _SAFETY * max(error, 1e-9) ** (-1 / 3) if np.isfinite(error) else _LEAST
            step *= min(max(wanted, _LEAST), _MOST)
    return np.array(orbit)


def _first_step(start: Floats, rates: Floats) -> float:
    """A time in which no state moves far, whatever its unit."""
    speed = float(np.abs(rates).max())
    size = float(np.abs(start).max()) or 1.0
    return 0.01 * size / speed if speed > 0 else 1e-3
