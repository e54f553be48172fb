"""Driven and free-running systems with onsets that are known, and a slow integrator of other make.

The published tables are quoted from memory, as noted; the twelve-digit values were recomputed with SciPy's
DOP853 at 3e-14 and Newton's method on the variational equations.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from tinemark.systems.plain import plain_function
from tinemark.systems.system import TIME, System
from tinemark.systems.system_file import read_system_text


def equations(
    kind: str,
    rates: dict[str, str],
    parameters: dict[str, str],
    sample: str,
    starts: Sequence[str],
    reach: str,
) -> System:
    """A system whose first parameter is swept and whose first state is observed."""
    states = "\n".join(
        f'[states.{name}]\nstart = "{start}"\nrange = ["-{reach}", "{reach}"]'
        for name, start in zip(rates, starts, strict=True)
    )
    values = "\n".join(f'[parameters.{name}]\nvalue = "{value}"' for name, value in parameters.items())
    lines = "\n".join(f'{name} = "{rate}"' for name, rate in rates.items())
    return read_system_text(
        f'title = "own"\nkind = "{kind}"\n{states}\n{values}\n[rate]\n{lines}\n[sample]\n{sample}\n'
        f'[diagram]\nparameter = "{next(iter(parameters))}"\nobserve = "{next(iter(rates))}"\n'
    )


@dataclass(frozen=True)
class Cascade:
    """A cascade of flips: where a ladder starts and stops, and its levels."""

    system: System
    start: str
    stop: str
    levels: tuple[float, ...]


def pendulum() -> Cascade:
    """Driven damped pendulum, strobed once a period (Taylor 2005, Classical Mechanics, table 12.1)."""
    rates = {
        "phi": "omega",
        "omega": "-2*b*omega - w0**2*sin(phi) + g*w0**2*cos(2*pi*t) + torque",
    }
    values = {
        "g": "1.06",
        "w0": "9.42477796076937971538793",
        "b": "2.35619449019234492884698",
        "torque": "0",
    }
    system = equations("driven", rates, values, 'every = "1"', ("-1.5707963267948966", "0"), "20")
    levels = (
        1.066372862455,
        1.079313905904,
        1.082084384294,
        1.082678352704,
        1.082805591155,
        1.082832843256,
    )
    return Cascade(system, "1.06", "1.084", levels)


TAYLOR_TABLE = ("1.0663", "1.0793", "1.0821", "1.0827")
"""As printed in the handbook (from memory)."""


def duffing() -> Cascade:
    """Two-well oscillator, a response within one well (Jordan and Smith 2007, examples; from memory)."""
    rates = {"x": "v", "v": "-d*v + x - x**3 + F*cos(w*t)"}
    values = {"F": "0.25", "d": "0.3", "w": "1.2"}
    system = equations("driven", rates, values, 'every = "2*pi/w"', ("1", "0"), "2")
    levels = (0.265581786056, 0.286693157824, 0.291089908772, 0.292031000230, 0.292232974572)
    return Cascade(system, "0.25", "0.3", levels)


def roessler() -> Cascade:
    """Rössler's equations, a = b = 0.2 (Olsen and Degn 1985, Q. Rev. Biophys. 18:165, for the cascade)."""
    rates = {"x": "-y - z", "y": "x + a*y", "z": "b + z*(x - c)"}
    values = {"c": "2.5", "a": "0.2", "b": "0.2", "level": "0"}
    sample = 'crosses = "y - level"\ndirection = "rising"'
    system = equations("flow", rates, values, sample, ("1", "0", "0"), "8")
    levels = (2.832445027862, 3.837358168410, 4.124214732075, 4.186996999394, 4.200537292984)
    return Cascade(system, "2.5", "4.3", levels)


@dataclass(frozen=True)
class Onward:
    """One period on: the state, and its derivatives in the states at the start."""

    image: NDArray[np.float64]
    jacobian: NDArray[np.float64]


def carried(system: System, value: float, state: NDArray[np.float64], periods: int) -> Onward:
    """A driven system `periods` strobe periods on, by SciPy's DOP853 at 3e-14."""
    from scipy.integrate import solve_ivp

    from tinemark.systems.derivatives import derivative

    n, swept = len(state), system.diagram_parameter
    names = (*system.state_names, *system.parameter_names, TIME)
    entries = [derivative(rate, name) for rate in system.expressions for name in system.state_names]
    function = plain_function((*system.expressions, *entries), names)
    constants = [value if p.name == swept else float(p.value) for p in system.parameters]
    (period,) = plain_function((system.every_expression,), system.parameter_names)(constants)

    def rate(time: float, y: NDArray[np.float64]) -> NDArray[np.float64]:
        values = np.array([float(entry) for entry in function([*y[:n], *constants, time])])
        return np.concatenate((values[:n], (values[n:].reshape(n, n) @ y[n:].reshape(n, n)).ravel()))

    begun = np.concatenate((state, np.eye(n).ravel()))
    found = solve_ivp(rate, (0.0, periods * float(period)), begun, "DOP853", rtol=3e-14, atol=1e-15)
    return Onward(found.y[:n, -1], found.y[n:, -1].reshape(n, n))
