"""A short, coarse look at an orbit of equations before anything is known of it: cheap, nothing compiled."""

from __future__ import annotations

import numpy as np

from tinemark.equations.scales import ESCAPE_FACTOR, Floats
from tinemark.systems.plain import plain_function
from tinemark.systems.system import TIME, System

PILOT_STEPS = 400


def pilot_orbit(system: System, parameter: str, value: float) -> Floats:
    """The orbit from the start over a few hundred coarse steps, as it moves between samples.

    Returns
    -------
    float64, shape (steps, states); a single row where the rates are not defined at the start. It ends where
    the orbit escapes.
    """
    from scipy.integrate import RK45

    start = np.array([float(state.start) for state in system.states])
    constants = [value if p.name == parameter else float(p.value) for p in system.parameters]
    rates = plain_function(system.expressions, (*system.state_names, *system.parameter_names, TIME))

    def rate(time: float, states: Floats) -> list[float]:
        return [float(entry) for entry in rates([*states, *constants, time])]

    orbit = [start]
    with np.errstate(all="ignore"):
        if np.isfinite(rate(0.0, start)).all():
            # Without a floor the size of each state is found however small its unit makes it.
            solver = RK45(rate, 0.0, start, np.inf, rtol=1e-3, atol=1e-30)
            for _ in range(PILOT_STEPS):
                if solver.status != "running" or not (np.abs(solver.y) < ESCAPE_FACTOR).all():
                    break
                solver.step()
                orbit.append(solver.y)
    return np.array(orbit)
