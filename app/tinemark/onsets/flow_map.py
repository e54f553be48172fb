"""The return map of a driven or free-running system, in doubles, as the search for cycles asks for it.

It is integrated at a chosen level: a method and the error allowed a step. The search runs on a rough level,
what is printed is solved on the finest one, and how far the others disagree is the error.
"""

from __future__ import annotations

from dataclasses import dataclass
from fractions import Fraction
from functools import cached_property
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from tinemark.onsets.cycle_map import CycleMap, Floats, Linear
from tinemark.systems.exact import exact
from tinemark.systems.system import System

if TYPE_CHECKING:
    from tinemark.equations.return_map import FloatReturnMap
    from tinemark.equations.switched_map import SwitchedReturnMap

Values = NDArray[Any]
"""Real numbers, or complex ones at a Neimark-Sacker point."""

DIFFERENCE = 1e-4
"""Steps of differences, as shares of a state's or the parameter's scale."""
STENCIL = ((-2.0, 1 / 12), (-1.0, -2 / 3), (1.0, 2 / 3), (2.0, -1 / 12))
"""Places and weights of a first derivative of fourth order."""


@dataclass(frozen=True)
class Level:
    """How samples are integrated: the method's order, and the error allowed a step."""

    order: int
    tolerance: float

    @property
    def words(self) -> str:
        """For a table of evidence."""
        return f"order {self.order} at {self.tolerance:.0e} a step"


SEARCH = Level(8, 1e-9)
FINEST = Level(8, 1e-14)
OTHERS = (Level(8, 1e-13), Level(5, 1e-13))
"""Another tolerance, and another order of the method: how far they come out from the finest is the error."""
SPARE = Level(8, 1e-12)
"""Stands in where the other order does not get there."""


@dataclass(frozen=True)
class FlowAlong:
    """A system of equations seen along one parameter; see `cycle_map.Along`."""

    system: System
    parameter: str

    @property
    def states(self) -> tuple[str, ...]:
        """Names of the states."""
        return self.system.state_names

    @property
    def starts(self) -> tuple[Fraction, ...]:
        """Where an orbit starts."""
        return tuple(state.start.fraction for state in self.system.states)

    @property
    def extents(self) -> tuple[tuple[Fraction, Fraction] | None, ...]:
        """Range each state is shown in, or None."""
        return tuple(
            (state.range[0].fraction, state.range[1].fraction) if state.range else None
            for state in self.system.states
        )


def cycle_map_of(system: System, parameter: str) -> CycleMap:
    """What cycles of a system of any kind are searched with, its own formulas or its equations'."""
    if not system.is_map:
        return FlowMap(system, parameter)
    from tinemark.onsets.many_map import float_many_map, many_map

    return float_many_map(many_map(system, parameter))


class FlowMap:
    """The return map at one level; `at` gives it at another, `with_value` of a neighbouring system."""

    def __init__(self, system: System, parameter: str, level: Level = SEARCH) -> None:
        self.many = FlowAlong(system, parameter)
        self.size = len(system.states)
        self.level = level

    @cached_property
    def integrated(self) -> FloatReturnMap | SwitchedReturnMap:
        """The integrator, or the exact travel of a switched linear system; compiled when it is first used."""
        from tinemark.equations.returns import return_map
        from tinemark.equations.tableau import Method

        method = Method.EIGHT if self.level.order == 8 else Method.FIVE
        return return_map(self.many.system, self.many.parameter, self.level.tolerance, method)

    def at(self, level: Level) -> FlowMap:
        """The same map at another level."""
        return FlowMap(self.many.system, self.many.parameter, level)

    def with_value(self, name: str, value: Fraction) -> FlowMap:
        """The map with another value of a parameter."""
        system = self.many.system.with_value(name, exact(value))
        return FlowMap(system, self.many.parameter, self.level)

    def step(self, states: Floats, r: Floats | float) -> Floats:
        """Next samples, shape (n, lanes); nan where there is none."""
        return self.integrated.step(states, r)

    def linearised(self, points: Floats, r: Floats | float) -> Linear:
        """Next samples of points (p, n) and their first derivatives."""
        return self.integrated.linearised(points, r)

    def curvature(self, points: Floats, r: float, vectors: Values) -> tuple[Values, Values]:
        """Derivatives of (Jacobian times vector) at points (p, n): in the states and in the parameter.

        Differences of fourth order of the variational equations: their second order would have to be
        compiled for each system, and Newton's method needs no more than its direction from these.
        """
        count, n = points.shape
        scales, reach = self.scales(r), self.reach(r)
        lengths = DIFFERENCE * np.array([*scales, reach])
        moved = np.zeros((n + 1, len(STENCIL), count, n + 1))
        moved[..., :n], moved[..., n] = points, r
        for at in range(n + 1):
            for place, (share, _) in enumerate(STENCIL):
                moved[at, place, :, at] += share * lengths[at]
        flat = moved.reshape(-1, n + 1)
        jacobians = self.linearised(
            np.ascontiguousarray(flat[:, :n]), np.ascontiguousarray(flat[:, n])
        ).jacobian
        products = np.einsum("aspij,pj->aspi", jacobians.reshape(n + 1, len(STENCIL), count, n, n), vectors)
        weights = np.array([weight for _, weight in STENCIL])
        slopes = np.einsum("s,aspi->pia", weights, products) / lengths
        return slopes[:, :, :n], slopes[:, :, n]

    def observed(self, points: Floats, r: float) -> Floats:
        """Observed quantity at points of shape (p, n)."""
        return self.integrated.observed(points, r)

    def why(self) -> str:
        """Why the last samples could not be taken, in words; empty where they could."""
        return next((reason for reason in self.integrated.reasons() if reason), "")

    def scales(self, r: float) -> Floats:
        """A length typical of each state: its shown range, or how far an orbit wanders."""
        return self.integrated.scales(r)

    def reach(self, r: float) -> float:
        """A length typical of the swept parameter."""
        shown = self.many.system.parameter(self.many.parameter).range
        return float(shown[1].fraction - shown[0].fraction) if shown else abs(r) or 1.0
