"""What the search for cycles needs of a map of several states, whatever it is made of.

`many_map.FloatManyMap` evaluates formulas; `flow_map.FlowMap` integrates equations to the next sample.
"""

from __future__ import annotations

from fractions import Fraction
from typing import Protocol

import numpy as np
from numpy.typing import NDArray

from tinemark.systems.system import System

Floats = NDArray[np.float64]


class Along(Protocol):
    """A system seen along one parameter."""

    @property
    def system(self) -> System:
        """The system."""

    @property
    def states(self) -> tuple[str, ...]:
        """Names of the states."""

    @property
    def parameter(self) -> str:
        """Name of the swept parameter."""

    @property
    def starts(self) -> tuple[Fraction, ...]:
        """Where an orbit starts when nothing better is known."""

    @property
    def extents(self) -> tuple[tuple[Fraction, Fraction] | None, ...]:
        """The range each state is shown in, or None."""


class Linear(Protocol):
    """A map at p points."""

    @property
    def image(self) -> Floats:
        """The map at each point, (p, n)."""

    @property
    def jacobian(self) -> Floats:
        """Derivatives in the states, (p, n, n)."""

    @property
    def slope(self) -> Floats:
        """Derivative in the parameter, (p, n)."""


class CycleMap(Protocol):
    """A map x -> f(x, r) of n states in doubles."""

    @property
    def size(self) -> int:
        """Number of states."""

    @property
    def many(self) -> Along:
        """What it is the map of."""

    def step(self, states: Floats, r: Floats | float) -> Floats:
        """States one step later, shape (n, lanes); not finite where there is none."""

    def linearised(self, points: Floats, r: float) -> Linear:
        """The map and its first derivatives at points of shape (p, n)."""

    def observed(self, points: Floats, r: float) -> Floats:
        """Observed quantity at points of shape (p, n)."""

    def scales(self, r: float) -> Floats:
        """A length typical of each state."""
