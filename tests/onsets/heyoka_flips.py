"""Flips by heyoka's Taylor integrator and its own variational equations: an independent solver.

Of a driven system the cycle closes after the strobe periods; of a free-running one after an unknown time,
from a point of the section. In both a flip has det(M + 1) = 0, M the monodromy matrix of all states.
"""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import heyoka
import numpy as np
from numpy.typing import NDArray

from tinemark.systems.expression import Call, Expr, Name, Num, Pi
from tinemark.systems.plain import plain_function
from tinemark.systems.system import TIME, System

Floats = NDArray[np.float64]

STEP = 1e-6
MOST_STEPS = 12

_CALLS: dict[str, Callable[..., Any]] = {
    "add": lambda a, b: a + b,
    "sub": lambda a, b: a - b,
    "mul": lambda a, b: a * b,
    "div": lambda a, b: a / b,
    "pow": lambda a, b: a**b,
    "neg": lambda a: -a,
    "sin": heyoka.sin,
    "cos": heyoka.cos,
}


def _built(expr: Expr, names: dict[str, Any]) -> Any:
    if isinstance(expr, Num):
        return heyoka.expression(float(expr.value))
    if isinstance(expr, Pi):
        return heyoka.expression(float(np.pi))
    if isinstance(expr, Name):
        return names[expr.name]
    assert isinstance(expr, Call)
    return _CALLS[expr.fn](*(_built(argument, names) for argument in expr.args))


class _Course:
    """A system's states and their derivatives carried on for a time."""

    def __init__(self, system: System) -> None:
        self.system, self.n = system, len(system.states)
        variables = heyoka.make_vars(*system.state_names)
        names = dict(zip(system.state_names, variables, strict=True)) | {TIME: heyoka.time}
        names |= {name: heyoka.par[place] for place, name in enumerate(system.parameter_names)}
        rates = [
            (variable, _built(rate, names))
            for variable, rate in zip(variables, system.expressions, strict=True)
        ]
        variational = heyoka.var_ode_sys(rates, heyoka.var_args.vars, order=1)
        self.integrator = heyoka.taylor_adaptive(variational, [0.0] * self.n, compact_mode=True)

    def values(self, value: float) -> list[float]:
        """All parameters, the swept one at a value."""
        swept = self.system.diagram_parameter
        return [value if p.name == swept else float(p.value) for p in self.system.parameters]

    def carried(self, state: Floats, value: float, time: float) -> tuple[Floats, Floats]:
        """The state a time later, and its derivatives in the states at the start."""
        integrator, n = self.integrator, self.n
        integrator.time = 0.0
        # Parameters that no rate holds are unknown to it.
        integrator.pars[:] = self.values(value)[: len(integrator.pars)]
        integrator.state[:n] = state
        integrator.state[n:] = np.eye(n).ravel()
        integrator.propagate_until(time)
        return integrator.state[:n].copy(), integrator.state[n:].reshape(n, n).copy()


def flip_of(system: System, state: Floats, value: float, period: int) -> float:
    """The parameter value of the flip near a cycle point, by Newton's method with differences."""
    course, n = _Course(system), len(state)
    driven = system.kind == "driven"
    if driven:
        (strobe,) = plain_function((system.every_expression,), system.parameter_names)(course.values(value))
        time = period * float(strobe)
    else:
        time = _time_of_return(course, state, value, period)
        section = plain_function((system.crosses_expression,), system.names)

    def equations(unknown: Floats) -> Floats:
        x, r = unknown[:n], float(unknown[n])
        image, matrix = course.carried(x, r, time if driven else float(unknown[n + 1]))
        rest = [float(np.linalg.det(matrix + np.eye(n)))]
        if not driven:
            rest.append(float(section([*x, *course.values(r)])[0]))
        return np.concatenate((image - x, rest))

    unknown = np.array([*state, value, *([] if driven else [time])])
    for _ in range(MOST_STEPS):
        columns = []
        for place in range(len(unknown)):
            move = np.zeros(len(unknown))
            move[place] = STEP
            columns.append((equations(unknown + move) - equations(unknown - move)) / (2 * STEP))
        shift = np.linalg.solve(np.array(columns).T, -equations(unknown))
        unknown = unknown + shift
        if np.max(np.abs(shift)) < 1e-13:
            break
    return float(unknown[n])


def _time_of_return(course: _Course, state: Floats, value: float, period: int) -> float:
    """When the orbit first comes close to its start again, on a grid."""
    times = np.arange(2.0, 12.0 * period, 0.02)
    last = np.inf
    for time in times:
        gap = float(np.linalg.norm(course.carried(state, value, float(time))[0] - state))
        if last < 0.3 and gap > last:
            return float(time) - 0.02
        last = gap
    raise AssertionError("the orbit does not come back")
