"""A map of several states seen along one parameter: its evaluators in doubles and in balls."""

from __future__ import annotations

from collections.abc import Callable, Generator, Sequence
from copy import copy
from dataclasses import dataclass, field
from fractions import Fraction
from functools import lru_cache
from typing import Any

import numpy as np
from numpy.typing import NDArray

from tinemark.onsets.one_map import put_in
from tinemark.onsets.results import Step
from tinemark.systems.expression import ZERO, Call, Expr, Name
from tinemark.systems.plain import plain_function
from tinemark.systems.system import System

Floats = NDArray[np.float64]
Preparation = Callable[[Sequence[Any], Any, Sequence[Sequence[Any]], int, str], Generator[Step, None, None]]
"""(point, parameter, vectors, bits, what is done): the evaluations at a point along each of the vectors."""
ESCAPED = 1e100


@dataclass(frozen=True)
class ManyMap:
    """A map x -> f(x, r) of n states along the parameter r.

    Attributes
    ----------
    states, parameter
        Names of the states and of the swept parameter.
    formulas
        Next state of each, the other parameters put in as exact rationals.
    observe
        Observed quantity, in the same names.
    starts
        Where an orbit starts when nothing better is known.
    extents
        Range in which each state is shown, or None.
    system
        The system it was made of, for what is written down of a proof; two maps are the same without it.
    steps
        The maps applied at the points of a cycle one after the other, where they differ: pieces of a
        piecewise map, or a symmetry put after the last one. Empty: this map at every point.
    """

    states: tuple[str, ...]
    parameter: str
    formulas: tuple[Expr, ...]
    observe: Expr
    starts: tuple[Fraction, ...]
    extents: tuple[tuple[Fraction, Fraction] | None, ...]
    system: System = field(compare=False, repr=False)
    steps: tuple[ManyMap, ...] = ()

    def along(self, count: int) -> list[ManyMap]:
        """The maps applied at each of so many points."""
        return [self.steps[place] if self.steps else self for place in range(count)]

    def own_evaluators(self) -> BallEvaluators | None:
        """What evaluates the map over balls where its formulas do not."""
        return None

    def own_jets(self) -> Any | None:
        """What evaluates its higher derivatives then: `many_jets.JetEvaluators`."""
        return None

    def own_preparation(self) -> Preparation | None:
        """What works out beforehand, in small steps, what these will be asked; None where they are quick."""
        return None

    @property
    def size(self) -> int:
        """Number of states."""
        return len(self.states)

    @property
    def names(self) -> tuple[str, ...]:
        """Names of the states, then of the swept parameter."""
        return (*self.states, self.parameter)


def many_map(system: System, parameter: str) -> ManyMap:
    """The map of a system along a parameter, the others at their values."""
    swept = system.parameter(parameter).name
    fixed = {p.name: p.value.fraction for p in system.parameters if p.name != swept}
    return ManyMap(
        states=system.state_names,
        parameter=swept,
        formulas=tuple(put_in(expr, fixed) for expr in system.expressions),
        observe=put_in(system.observe_expression, fixed),
        starts=tuple(state.start.fraction for state in system.states),
        extents=tuple(
            (state.range[0].fraction, state.range[1].fraction) if state.range else None
            for state in system.states
        ),
        system=system,
    )


@dataclass(frozen=True)
class Linearised:
    """The map at the points of a cycle.

    Attributes
    ----------
    image
        (p, n): f at each point.
    jacobian
        (p, n, n): derivatives in the states.
    slope
        (p, n): derivative in the swept parameter.
    """

    image: Floats
    jacobian: Floats
    slope: Floats


class FloatManyMap:
    """The map in doubles, evaluated at all points of a cycle or at many orbits at once."""

    def __init__(self, many: ManyMap) -> None:
        from tinemark.systems.derivatives import derivative

        self.many = many
        self.size = many.size
        entries = [*many.formulas]
        entries += [derivative(formula, state) for formula in many.formulas for state in many.states]
        entries += [derivative(formula, many.parameter) for formula in many.formulas]
        self._step = plain_function(many.formulas, many.names)
        self._all = plain_function(entries, many.names)
        self._observe = plain_function((many.observe,), many.names)

    def step(self, states: Floats, r: Floats | float) -> Floats:
        """States one step later; shape (n, lanes)."""
        following = np.empty_like(states)
        for place, value in enumerate(self._step([*states, r])):
            following[place] = value
        return following

    def linearised(self, points: Floats, r: float) -> Linearised:
        """The map and its first derivatives at points of shape (p, n)."""
        count, n = points.shape
        values = self._all([*points.T, np.float64(r)])
        table = np.empty((len(values), count))
        for place, value in enumerate(values):
            table[place] = value
        return Linearised(
            np.ascontiguousarray(table[:n].T),
            np.ascontiguousarray(table[n : n + n * n].T).reshape(count, n, n),
            np.ascontiguousarray(table[n + n * n :].T),
        )

    def observed(self, points: Floats, r: float) -> Floats:
        """Observed quantity at points of shape (p, n)."""
        result = np.empty(len(points))
        result[:] = self._observe([*points.T, np.float64(r)])[0]
        return result

    def scales(self, r: float) -> Floats:
        """A length typical of each state: its shown range, or how far an orbit wanders."""
        start = np.array([float(value) for value in self.many.starts])
        scales = np.array([float(e[1] - e[0]) if e else 0.0 for e in self.many.extents])
        if (scales > 0).all():
            return scales
        states, low, high = start[:, None], start.copy(), start.copy()
        for _ in range(300):
            states = self.step(states, r)
            if not (np.abs(states) < ESCAPED).all():
                break
            low, high = np.minimum(low, states[:, 0]), np.maximum(high, states[:, 0])
        wandered = np.where(high > low, high - low, np.maximum(np.abs(start), 1.0))
        return np.where(scales > 0, scales, wandered)


def float_many_map(many: ManyMap) -> FloatManyMap:
    """The map in doubles, its derivatives worked out once."""
    # An equal map may have been made of another system, by whose name the certificates must not go.
    found = copy(_float_many_map(many))
    found.many = many
    return found


@lru_cache(maxsize=64)
def _float_many_map(many: ManyMap) -> FloatManyMap:
    return FloatManyMap(many)


@dataclass(frozen=True)
class BallEvaluators:
    """The map over python-flint balls.

    Attributes
    ----------
    step
        f(*x, r) -> n values.
    critical
        f(*x, r, *v) -> n values of f, n*n of its Jacobian A (by rows), n of its derivative in r, then
        n*n of the derivative of A v in the states and n of the derivative of A v in r.
    """

    step: Callable[..., tuple[Any, ...]]
    critical: Callable[..., tuple[Any, ...]]


def evaluators_along(many: ManyMap, count: int) -> list[BallEvaluators]:
    """The evaluators at each of so many points of a cycle."""
    # By identity: to compare two maps means to walk through their formulas.
    known: dict[int, BallEvaluators] = {}
    maps = many.along(count)
    for each in maps:
        if id(each) not in known:
            known[id(each)] = ball_evaluators(each)
    return [known[id(each)] for each in maps]


def ball_evaluators(many: ManyMap) -> BallEvaluators:
    """The evaluators of a map: its own, or compiled from its formulas."""
    return many.own_evaluators() or _compiled(many)


@lru_cache(maxsize=64)
def _compiled(many: ManyMap) -> BallEvaluators:
    from tinemark.systems.balls import ball_function
    from tinemark.systems.derivatives import derivative

    # A space cannot stand in a name, so these never meet a name of the system.
    vector = tuple(f"critical {place}" for place in range(many.size))
    jacobian = [[derivative(formula, state) for state in many.states] for formula in many.formulas]
    places = range(many.size)
    entries: list[Expr] = [*many.formulas]
    entries += [entry for row in jacobian for entry in row]
    entries += [derivative(formula, many.parameter) for formula in many.formulas]
    for row in jacobian:
        for k in places:
            # Mixed derivatives in the order of the states, whichever comes first: each is worked out once.
            second = [derivative(row[min(j, k)], many.states[max(j, k)]) for j in places]
            entries.append(_combination(second, vector))
    for row in jacobian:
        entries.append(_combination([derivative(entry, many.parameter) for entry in row], vector))
    return BallEvaluators(
        ball_function(many.formulas, many.names), ball_function(tuple(entries), (*many.names, *vector))
    )


def _combination(row: Sequence[Expr], vector: Sequence[str]) -> Expr:
    total: Expr = ZERO
    for entry, name in zip(row, vector, strict=True):
        if entry != ZERO:
            term = Call("mul", (entry, Name(name)))
            total = term if total == ZERO else Call("add", (total, term))
    return total
