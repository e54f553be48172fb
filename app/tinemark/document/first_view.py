"""Where a diagram is first looked at, from a system's own ranges or from a short look at its orbits."""

from __future__ import annotations

from fractions import Fraction

import numpy as np
from numpy.typing import NDArray

from tinemark.density.request import View
from tinemark.document.views import tidy
from tinemark.systems.plain import Value, plain_function
from tinemark.systems.system import System

MARGIN = Fraction(1, 20)
_COLUMNS, _TRANSIENT, _STEPS = 41, 150, 40
_TOO_FAR = 1e6


def first_view(system: System) -> View:
    """View of the whole diagram as its system means it.

    The swept parameter's range, or its value half as far again each way; for the observed quantity the
    range of that state, or what orbits across the sweep reach, with a margin.
    """
    left, right = parameter_range(system)
    ranges = {state.name: state.range for state in system.states}
    given = ranges.get(system.observe.strip())
    if given is not None:
        return View(left, right, given[0].fraction, given[1].fraction)
    bottom, top = _reached(system, left, right)
    return tidy(View(left, right, bottom, top))


def parameter_range(system: System) -> tuple[Fraction, Fraction]:
    """Range of the swept parameter."""
    swept = system.parameter(system.diagram_parameter)
    if swept.range is not None:
        return swept.range[0].fraction, swept.range[1].fraction
    middle = swept.value.fraction
    reach = abs(middle) / 2 or Fraction(1)
    return middle - reach, middle + reach


def _reached(system: System, left: Fraction, right: Fraction) -> tuple[Fraction, Fraction]:
    """Extent of the observed quantity on settled orbits across the sweep, escaped ones left out.

    Of equations it is the extent of one orbit in the middle of the sweep, between samples as well: many
    settled ones would keep the window waiting.
    """
    if not system.is_map:
        return _extent(_pilot_values(system, float((left + right) / 2)))
    step = plain_function(system.expressions, system.names)
    observe = plain_function((system.observe_expression,), system.names)
    parameters: list[Value] = [
        np.linspace(float(left), float(right), _COLUMNS)
        if parameter.name == system.diagram_parameter
        else float(parameter.value)
        for parameter in system.parameters
    ]
    states: list[Value] = [np.full(_COLUMNS, float(state.start)) for state in system.states]
    escaped = np.zeros(_COLUMNS, dtype=np.bool_)
    seen = []
    for number in range(_TRANSIENT + _STEPS):
        new = step([*states, *parameters])
        with np.errstate(all="ignore"):
            for before, after in zip(states, new, strict=True):
                # Not a number compares false, so what is undefined counts as escaped too.
                escaped |= ~(np.abs(after) < _TOO_FAR * (1 + np.abs(before)))
        states = [np.broadcast_to(value, _COLUMNS) for value in new]
        if number >= _TRANSIENT:
            seen.append(np.broadcast_to(observe([*states, *parameters])[0], _COLUMNS))
    return _extent(np.stack(seen)[:, ~escaped])


def _pilot_values(system: System, value: float) -> NDArray[np.float64]:
    from tinemark.equations.pilot import pilot_orbit

    orbit = pilot_orbit(system, system.diagram_parameter, value)
    constants = [value if p.name == system.diagram_parameter else float(p.value) for p in system.parameters]
    observe = plain_function((system.observe_expression,), system.names)
    values = np.empty(len(orbit))
    values[:] = observe([*orbit.T, *constants])[0]
    # The way from the start to where the orbit settles belongs to no diagram.
    return values[len(values) // 2 :]


def _extent(values: NDArray[np.float64]) -> tuple[Fraction, Fraction]:
    values = values[np.isfinite(values)]
    if not values.size:
        return Fraction(-1), Fraction(1)
    low, high = Fraction(float(values.min())), Fraction(float(values.max()))
    room = (high - low) * MARGIN or max(abs(high), Fraction(1)) * MARGIN
    return low - room, high + room
