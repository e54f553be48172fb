"""The return map of a driven or free-running system as the many-state equations ask for it, in balls.

It stands where a map with formulas stands: `many_shooting`, `many_polish` and `many_proof` work on it
unchanged. An evaluation integrates a whole return, so what will be asked is worked out beforehand in small
steps and kept.
"""

from __future__ import annotations

from collections import OrderedDict
from collections.abc import Callable, Generator, Sequence
from dataclasses import dataclass, field
from typing import Any, TypeVar

from flint import acb, arb, ctx

from tinemark.equations.enclosure_bound import NotEnclosed
from tinemark.equations.enclosure_return import Carried, carry, carry_curve
from tinemark.equations.enclosure_section import Grazes
from tinemark.equations.taylor_rates import Rates, put_in_all, rates_of
from tinemark.onsets.many_jets import JetEvaluators
from tinemark.onsets.many_map import BallEvaluators, ManyMap, Preparation
from tinemark.onsets.proofs import NotProved
from tinemark.onsets.results import Step
from tinemark.systems.errors import Unbounded
from tinemark.systems.expression import Num
from tinemark.systems.system import System

KEPT = 4096
"""Evaluations that are remembered."""
MOST_WORK = 40_000
"""Taylor steps after which an onset is given up: some minutes."""

_Result = TypeVar("_Result")
Work = Generator[float, None, _Result]
Columns = list[list[Any]]


class TooLong(NotProved):
    """The work allowed for one onset is used up."""


class Memory:
    """What was worked out of one return map, and how much work is left."""

    def __init__(self, rates: Rates) -> None:
        self.rates = rates
        self.left = MOST_WORK
        self.known: OrderedDict[tuple[object, ...], Any] = OrderedDict()

    def recall(self, key: tuple[object, ...], work: Work[_Result]) -> Work[_Result]:
        """A result that is known, or the one of this work."""
        if key in self.known:
            work.close()
            found: _Result = self.known[key]
            return found
        while True:
            try:
                elapsed = next(work)
            except StopIteration as done:
                result: _Result = done.value
                break
            except (NotEnclosed, Grazes, ArithmeticError, Unbounded) as error:
                raise NotProved(_why(error)) from error
            self.left -= 1
            if self.left < 0:
                work.close()
                raise TooLong("the integration became too long to go on with")
            yield elapsed
        self.known[key] = result
        if len(self.known) > KEPT:
            self.known.popitem(last=False)
        return result

    def carried(self, x: Sequence[Any], r: Any, vector: Sequence[Any], bits: int) -> Work[Carried]:
        """One return with its derivatives."""
        key = ("carry", bits, *map(_exactly, (*x, r, *vector)))
        return (yield from self.recall(key, carry(self.rates, x, r, bits, vector)))

    def curved(self, x: Sequence[Any], r: Any, direction: Sequence[Any]) -> Work[Columns]:
        """Coefficients after one return of a straight line of starts."""
        key = ("curve", *map(_exactly, (*x, r, *direction)))
        nothing = [arb(0)] * len(x)
        return (yield from self.recall(key, carry_curve(self.rates, x, r, (direction, nothing, nothing))))


def _why(error: Exception) -> str:
    return error.message if isinstance(error, Unbounded) else str(error) or "the flow could not be enclosed"


def _exactly(ball: Any) -> tuple[object, ...]:
    if not ball.is_finite():
        raise NotProved("a state or the parameter is lost in rounding")
    return tuple(tuple(int(part) for part in side.man_exp()) for side in (ball.mid(), ball.rad()))


def _through(work: Work[_Result]) -> _Result:
    while True:
        try:
            next(work)
        except StopIteration as done:
            found: _Result = done.value
            return found


@dataclass(frozen=True)
class IntegratedMap(ManyMap):
    """A return map without formulas of its own; equal ones have equal rates, sampling and values."""

    rates: Rates = field(kw_only=True)
    memory: Memory = field(kw_only=True, compare=False, repr=False)

    def own_evaluators(self) -> BallEvaluators:
        """Evaluators that integrate."""
        return BallEvaluators(self._step, self._critical)

    def own_jets(self) -> JetEvaluators:
        """Second and third derivatives by integrating curves."""
        # Where the rates switch or are not analytic, the integration itself refuses.
        return JetEvaluators(self._second, self._third, _no_sides, ())

    def own_preparation(self) -> Preparation:
        """Integration in steps."""
        return self._ahead

    def _ahead(
        self, x: Sequence[Any], r: Any, vectors: Sequence[Sequence[Any]], bits: int, text: str
    ) -> Generator[Step, None, None]:
        """Integrate from a point along each vector."""
        for vector in vectors:
            for _ in self.memory.carried(x, r, vector, bits):
                yield Step(text)
            if any(value.rad() > 0 for value in x):
                # A box is that of a proof, which goes on to ask for the normal form along these vectors.
                for _ in self.memory.curved(x, r, vector):
                    yield Step(text)

    def _step(self, *values: Any) -> tuple[Any, ...]:
        n = self.size
        balls = [arb(value) for value in values]
        key = ("step", ctx.prec, *map(_exactly, balls))
        work = carry(self.rates, balls[:n], balls[n], ctx.prec)
        return tuple(_through(self.memory.recall(key, work)).image)

    def _critical(self, *values: Any) -> tuple[Any, ...]:
        n = self.size
        balls = [arb(value) for value in values]
        found = _through(self.memory.carried(balls[:n], balls[n], balls[n + 1 :], ctx.prec))
        blocks = (found.jacobian, found.slope, found.bend, found.bend_r)
        return (*found.image, *(entry for block in blocks if block is not None for entry in block.entries()))

    def _second(self, *values: Any) -> tuple[Any, ...]:
        """B(v, w), of real or complex directions."""
        n = self.size
        x, r = values[:n], values[n]
        v, w = values[n + 1 : 2 * n + 1], values[2 * n + 1 :]
        return _multilinear(n, lambda *parts: self._bilinear(x, r, *parts), (v, w))

    def _third(self, *values: Any) -> tuple[Any, ...]:
        """C(u, v, w), of real or complex directions."""
        n = self.size
        x, r = values[:n], values[n]
        directions = [values[n + 1 + k * n : n + 1 + (k + 1) * n] for k in range(3)]
        return _multilinear(n, lambda *parts: self._trilinear(x, r, parts), directions)

    def _curve(self, x: Sequence[Any], r: Any, direction: Sequence[Any]) -> list[list[Any]]:
        return _through(self.memory.curved(x, r, direction))

    def _bilinear(self, x: Sequence[Any], r: Any, v: Sequence[Any], w: Sequence[Any]) -> list[Any]:
        # The e^2 coefficient along a line is half of B.
        if _same(v, w):
            return [2 * value for value in self._curve(x, r, v)[1]]
        plus, minus = self._curve(x, r, _added(v, w, 1))[1], self._curve(x, r, _added(v, w, -1))[1]
        return [(a - b) / 2 for a, b in zip(plus, minus, strict=True)]

    def _trilinear(self, x: Sequence[Any], r: Any, parts: Sequence[Sequence[Any]]) -> list[Any]:
        def cube(direction: Sequence[Any]) -> list[Any]:
            # The e^3 coefficient along a line is a sixth of C.
            return [6 * value for value in self._curve(x, r, direction)[2]]

        a, b, c = parts
        if _same(b, c):
            a, c = c, a
        elif _same(a, c):
            b, c = c, b
        if not _same(a, b):
            terms = [
                [value * s * t for value in cube(_added(_added(a, b, s), c, t))]
                for s in (1, -1)
                for t in (1, -1)
            ]
            return [sum(column[1:], column[0]) / 24 for column in zip(*terms, strict=True)]
        if _same(a, c):
            return cube(a)
        # C(a, a, c) from the cubes of a + c, a - c and c.
        plus, minus, own = cube(_added(a, c, 1)), cube(_added(a, c, -1)), cube(c)
        return [(p - m - 2 * o) / 6 for p, m, o in zip(plus, minus, own, strict=True)]


def _no_sides(*_: Any) -> tuple[Any, ...]:
    return ()


def _same(v: Sequence[Any], w: Sequence[Any]) -> bool:
    return all(_exactly(a) == _exactly(b) for a, b in zip(v, w, strict=True))


def _added(v: Sequence[Any], w: Sequence[Any], sign: int) -> list[Any]:
    return [a + sign * b for a, b in zip(v, w, strict=True)]


def _multilinear(
    n: int, real: Callable[..., list[Any]], directions: Sequence[Sequence[Any]]
) -> tuple[Any, ...]:
    """A multilinear form of complex directions by its values at real ones."""
    if not any(isinstance(value, acb) for direction in directions for value in direction):
        return tuple(real(*([arb(value) for value in direction] for direction in directions)))
    total = [acb(0)] * n
    whole = [[acb(value) for value in direction] for direction in directions]
    for choice in range(2 ** len(directions)):
        factor = acb(1)
        parts = []
        for place, direction in enumerate(whole):
            imaginary = bool(choice >> place & 1)
            factor = factor * acb(0, 1) if imaginary else factor
            parts.append([value.imag if imaginary else value.real for value in direction])
        if any(all(value == 0 for value in part) for part in parts):
            continue
        total = [sum_ + factor * value for sum_, value in zip(total, real(*parts), strict=True)]
    return tuple(total)


def integrated_map(system: System, parameter: str) -> IntegratedMap:
    """The return map of a driven or free-running system along a parameter.

    Raises
    ------
    SystemFileError
        The parameter is not known, or the system lacks its strobe period or section.
    """
    rates = rates_of(system, parameter)
    fixed = {p.name: Num(p.value.fraction) for p in system.parameters if p.name != rates.parameter}
    return IntegratedMap(
        states=system.state_names,
        parameter=rates.parameter,
        formulas=(),
        observe=put_in_all(system.observe_expression, dict(fixed)),
        starts=tuple(state.start.fraction for state in system.states),
        extents=tuple(
            (state.range[0].fraction, state.range[1].fraction) if state.range else None
            for state in system.states
        ),
        system=system,
        rates=rates,
        memory=Memory(rates),
    )
