"""The strobe or return map of a set of equations in doubles, with its derivatives.

Driven: the state one drive period on, begun at time zero. Free-running: the state at the next passage of
the section. Either is a map of all n states, so whatever works on maps of several states works on it: a
section's map has one multiplier 0, along the flow (Parker and Chua 1989; Hénon 1982, Physica D 5:412).
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from tinemark.equations.differences import may_jump, slopes
from tinemark.equations.motion import TIME, Motion, motion, rising_section, with_variations
from tinemark.equations.reasons import Reason, words
from tinemark.equations.sampler import STEP_LIMIT, Allowance, Frame, Sampled, sampled
from tinemark.equations.scales import escape_bounds, state_scales
from tinemark.equations.tableau import Method
from tinemark.systems.expression import Expr
from tinemark.systems.plain import plain_function
from tinemark.systems.system import System

Floats = NDArray[np.float64]

MOST_BENT = 4
"""States up to which second derivatives are integrated; beyond, their kernel would take a minute to compile,
and they are differences of first ones, right to about eight digits."""

NEAR_SHARE = 0.02
"""Share of the section formula's size within which a start below it counts as on it."""


@dataclass(frozen=True)
class Linearised:
    """The return map at the points of a cycle.

    Attributes
    ----------
    image
        (p, n): the next sample after each point.
    jacobian
        (p, n, n): derivatives in the states.
    slope
        (p, n): derivative in the swept parameter.
    times
        (p,): time to the next sample.
    """

    image: Floats
    jacobian: Floats
    slope: Floats
    times: Floats


class FloatReturnMap:
    """The return map of a system along one parameter, the others at their values.

    Parameters
    ----------
    tolerance
        Error allowed in one integration step, as a share of a state's size.
    method
        The pair of formulas; a second one gives an independent opinion.
    limit
        Integration steps that one sample may take.

    Attributes
    ----------
    size
        Number of states.
    last
        What the latest call found out beside its result.
    """

    def __init__(
        self,
        system: System,
        parameter: str,
        tolerance: float = 1e-12,
        method: Method = Method.EIGHT,
        limit: int = STEP_LIMIT,
    ) -> None:
        self.system, self.tolerance, self.method, self.limit = system, tolerance, method, limit
        self.parameter = system.parameter(parameter).name
        self.size = len(system.states)
        self.last: Sampled | None = None
        self._motion = motion(system, parameter)
        self._fixed = np.array([float(system.parameter(name).value) for name in self._motion.fixed])
        self._scales: Floats | None = None
        names = (*system.state_names, self.parameter, *self._motion.fixed, TIME)
        self._names = names
        self._observe = plain_function((system.observe_expression,), names)

    @property
    def is_driven(self) -> bool:
        """Whether samples are taken once a drive period."""
        return self._motion.is_driven

    @cached_property
    def has_jumps(self) -> bool:
        """Whether rates may jump, so that derivatives are taken by differences and have fewer digits."""
        return may_jump(self._motion.rates)

    def step(self, states: Floats, r: Floats | float) -> Floats:
        """States at the next sample; shape (n, lanes), nan where there is none."""
        return self._sampled(self._motion, states, r).rows

    def linearised(self, points: Floats, r: Floats | float) -> Linearised:
        """The map and its first derivatives at points of shape (p, n)."""
        count, n = points.shape
        if self.has_jumps:
            jacobian, slope = self._by_differences(lambda moved, at: self.step(moved.T, at).T, points, r)
            image = self.step(points.T, r).T
            assert self.last is not None
            return Linearised(image, jacobian, slope, self.last.times)
        rows = np.zeros((n + n * (n + 1), count))
        rows[:n] = points.T
        for column in range(n):
            rows[n + n * column + column] = 1.0
        found = self._sampled(self._first, rows, r)
        image = found.rows[:n].T.copy()
        columns = found.rows[n:].T.reshape(count, n + 1, n)
        if self.is_driven:
            jacobian, slope = columns[:, :n].transpose(0, 2, 1).copy(), columns[:, n].copy()
            slope += self._end(image, r).rate * self._end(image, r).period_slope[:, None]
            return Linearised(image, jacobian, slope, found.times)
        moved = _Passage(self._end(image, r), columns).first
        return Linearised(image, moved[:, :n].transpose(0, 2, 1).copy(), moved[:, n].copy(), found.times)

    def curvature(self, points: Floats, r: Floats | float, vectors: Floats) -> tuple[Floats, Floats]:
        """Derivatives of A v, A the map's Jacobian at each point and v a fixed vector there.

        Parameters
        ----------
        points, vectors
            Shape (p, n).

        Returns
        -------
        (p, n, n) and (p, n): the derivative of (A v)_i in state j, and in the swept parameter.
        """
        count, n = points.shape
        if self.has_jumps or n > MOST_BENT:

            def moved_vectors(moved: Floats, at: Floats) -> Floats:
                along = np.repeat(vectors, len(moved) // count, axis=0)
                product: Floats = np.einsum("pij,pj->pi", self.linearised(moved, at).jacobian, along)
                return product

            return self._by_differences(moved_vectors, points, r)
        rows = np.zeros((n + n * (n + 1) + n + n * (n + 1), count))
        rows[:n] = points.T
        for column in range(n):
            rows[n + n * column + column] = 1.0
        rows[n * (n + 2) : n * (n + 3)] = vectors.T
        found = self._sampled(self._second, rows, r, vectors)
        image = found.rows[:n].T.copy()
        columns = found.rows[n : n * (n + 2)].T.reshape(count, n + 1, n)
        along = found.rows[n * (n + 2) : n * (n + 3)].T
        bent = found.rows[n * (n + 3) :].T.reshape(count, n + 1, n)
        end = self._end(image, r)
        if self.is_driven:
            bent = bent.copy()
            bent[:, n] += np.einsum("pij,pj->pi", end.jacobian, along) * end.period_slope[:, None]
        else:
            bent = _Passage(end, columns).second(along, bent)
        return bent[:, :n].transpose(0, 2, 1).copy(), bent[:, n].copy()

    def observed(self, points: Floats, r: Floats | float) -> Floats:
        """Observed quantity at points of shape (p, n)."""
        result = np.empty(len(points))
        result[:] = self._observe(self._values(points, r))[0]
        return result

    def scales(self, r: float) -> Floats:
        """A length typical of each state, shape (n,)."""
        return state_scales(self.system, self.parameter, r)

    def reasons(self) -> tuple[str, ...]:
        """Why the orbits of the latest call have no sample, in words; empty where they have one."""
        if self.last is None:
            return ()
        return tuple(words(Reason(int(code)), self.limit, self.is_driven) for code in self.last.codes)

    def _by_differences(
        self, function: Callable[[Floats, Floats], Floats], points: Floats, r: Floats | float
    ) -> tuple[Floats, Floats]:
        swept = np.ascontiguousarray(np.broadcast_to(np.asarray(r, dtype=np.float64), (len(points),)))
        scales = self.scales(float(swept[0]))
        return slopes(function, points, swept, scales, self._parameter_scale())

    # What an integration needs beside the states.

    @cached_property
    def _first(self) -> Motion:
        return with_variations(self._motion, 1)

    @cached_property
    def _second(self) -> Motion:
        return with_variations(self._motion, 2)

    def _sampled(
        self, what: Motion, rows: Floats, r: Floats | float, vectors: Floats | None = None
    ) -> Sampled:
        if self._scales is None:
            self._scales = self.scales(float(np.ravel(r)[0]))
        scales = self._scales
        floors = self.tolerance * _row_scales(scales, self._parameter_scale(), len(what.rows), vectors)
        near = 0.0 if self.is_driven else NEAR_SHARE * self._section_size(scales)
        frame = Frame(escape_bounds(self.system, scales), near, self.limit)
        allowance = Allowance(self.tolerance, floors)
        swept = np.asarray(r, dtype=np.float64)
        self.last = sampled(what, self.method, rows, swept, self._fixed, allowance, frame)
        return self.last

    def _parameter_scale(self) -> float:
        parameter = self.system.parameter(self.parameter)
        if parameter.range is not None:
            return float(parameter.range[1].fraction - parameter.range[0].fraction)
        return abs(float(parameter.value)) or 1.0

    def _section_size(self, scales: Floats) -> float:
        """How much the section's formula varies over the states' sizes."""
        start = np.array([float(state.start) for state in self.system.states])
        gradient = self._end(start[None, :], float(self.system.parameter(self.parameter).value)).normal[0]
        size = float(np.abs(np.where(np.isfinite(gradient), gradient, 0.0)) @ scales)
        return size if size > 0.0 else 1.0

    def _values(self, points: Floats, r: Floats | float) -> list[float | np.float64 | Floats]:
        states = [np.ascontiguousarray(column) for column in points.T]
        swept = np.broadcast_to(np.asarray(r, dtype=np.float64), (len(points),))
        return [*states, swept, *(np.float64(value) for value in self._fixed), self._time(swept)]

    def _time(self, swept: Floats) -> Floats:
        """Time at the sample: a period after the start."""
        if not self.is_driven:
            return np.zeros_like(swept)
        (period,) = self._period([swept, *(np.float64(value) for value in self._fixed)])
        return np.broadcast_to(np.asarray(period, dtype=np.float64), swept.shape)

    @cached_property
    def _period(self):  # type: ignore[no-untyped-def]
        assert self._motion.period is not None
        return plain_function((self._motion.period,), (self.parameter, *self._motion.fixed))

    @cached_property
    def _entries(self) -> tuple[Expr, ...]:
        from tinemark.systems.derivatives import derivative

        states = self._motion.states
        rates = self._motion.rates
        entries: list[Expr] = [*rates, *(derivative(rate, s) for rate in rates for s in states)]
        entries += [derivative(rate, self.parameter) for rate in rates]
        if self._motion.period is not None:
            return (*entries, derivative(self._motion.period, self.parameter))
        section = rising_section(self.system)
        entries += [derivative(section, s) for s in states]
        entries.append(derivative(section, self.parameter))
        entries += [derivative(section, *sorted((a, b), key=states.index)) for a in states for b in states]
        entries += [derivative(section, s, self.parameter) for s in states]
        return tuple(entries)

    @cached_property
    def _at_end(self):  # type: ignore[no-untyped-def]
        return plain_function(self._entries, self._names)

    def _end(self, image: Floats, r: Floats | float) -> _End:
        values = self._at_end(self._values(image, r))
        table = np.empty((len(values), len(image)))
        for place, value in enumerate(values):
            table[place] = value
        return _End.read(table.T, self.size, self.is_driven)


@dataclass(frozen=True)
class _End:
    """Rates and section where samples are taken: (p, …)."""

    rate: Floats
    jacobian: Floats
    rate_slope: Floats
    period_slope: Floats
    normal: Floats
    level_slope: Floats
    bend: Floats
    normal_slope: Floats

    @staticmethod
    def read(table: Floats, n: int, is_driven: bool) -> _End:
        count = len(table)
        sizes: Sequence[int] = (n, n * n, n, 1) if is_driven else (n, n * n, n, n, 1, n * n, n)
        parts = np.split(table, np.cumsum(sizes)[:-1], axis=1)
        jacobian = parts[1].reshape(count, n, n)
        if is_driven:
            none = np.zeros((count, n))
            return _End(
                parts[0], jacobian, parts[2], parts[3][:, 0], none, none[:, 0], np.zeros((count, n, n)), none
            )
        bend = parts[5].reshape(count, n, n)
        return _End(parts[0], jacobian, parts[2], np.zeros(count), parts[3], parts[4][:, 0], bend, parts[6])


class _Passage:
    """Derivatives at the section from derivatives at a fixed time.

    The time of passage follows from the section's formula staying zero; each derivative of the sample is
    one at a fixed time and the rates times the derivative of the time of passage.
    """

    def __init__(self, end: _End, columns: Floats) -> None:
        self.end, self.columns = end, columns
        n = columns.shape[2]
        self.n = n
        self.across = np.einsum("pi,pi->p", end.normal, end.rate)
        risen = np.einsum("pi,pci->pc", end.normal, columns)
        risen[:, n] += end.level_slope
        self.times = -risen / self.across[:, None]
        self.first = columns + self.times[:, :, None] * end.rate[:, None, :]

    def second(self, along: Floats, bent: Floats) -> Floats:
        """Derivatives, in each state and in the parameter, of the sample's derivative along a vector."""
        end, n = self.end, self.n
        time = -np.einsum("pi,pi->p", end.normal, along) / self.across
        direction = along + time[:, None] * end.rate
        turned = np.einsum("pij,pcj->pci", end.jacobian, self.columns)
        turned_along = np.einsum("pij,pj->pi", end.jacobian, along)
        turned_rate = np.einsum("pij,pj->pi", end.jacobian, end.rate)
        whole = bent + turned * time[:, None, None] + turned_along[:, None, :] * self.times[:, :, None]
        whole += turned_rate[:, None, :] * (self.times * time[:, None])[:, :, None]
        whole[:, n] += end.rate_slope * time[:, None]
        risen = np.einsum("pi,pci->pc", end.normal, whole)
        risen += np.einsum("pij,pci,pj->pc", end.bend, self.first, direction)
        risen[:, n] += np.einsum("pi,pi->p", end.normal_slope, direction)
        result: Floats = whole - (risen / self.across[:, None])[:, :, None] * end.rate[:, None, :]
        return result


def _row_scales(scales: Floats, swept: float, rows: int, vectors: Floats | None) -> Floats:
    """Sizes of all rows: those of a derivative are those of what is differentiated, by each other."""
    n = len(scales)
    columns = [scales]
    if rows:
        across = np.array([*scales, swept])
        columns += [scales / size for size in across]
        if vectors is not None:
            length = float(np.max(np.abs(vectors) / scales, initial=0.0)) or 1.0
            columns.append(scales * length)
            columns += [scales * length / size for size in across]
    flat = np.concatenate(columns)
    assert len(flat) == n + rows
    return flat
