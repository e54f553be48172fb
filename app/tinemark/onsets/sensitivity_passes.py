"""A cycle carried through once with its derivatives in every parameter: generated loops over `arb`.

Directions are the states, the swept parameter, then every other parameter. With X the derivatives of
the point in all directions and c a direction carried along (c' = f_x c, and + f_r where it is the swept
parameter's own), the derivatives T of c obey

    X' = f_x X + f_d,    T' = f_x T + (c' differentiated once more, along X).

Each is printed entry by entry with what is known to be zero left out, so that a map with few couplings
costs little.
"""

from __future__ import annotations

import re
from collections.abc import Generator
from dataclasses import dataclass
from fractions import Fraction
from functools import lru_cache
from typing import Any

from flint import arb, fmpq

from tinemark.onsets.ball_orbits import in_chunks, precision
from tinemark.onsets.one_map import put_in
from tinemark.onsets.results import Step
from tinemark.systems.balls import ball_tools
from tinemark.systems.derivatives import derivative
from tinemark.systems.emit import emit
from tinemark.systems.expression import ONE, ZERO, Expr
from tinemark.systems.system import System

_RATIONAL = re.compile(r"fmpq\((-?\d+), (\d+)\)")

CRITICAL, SWEPT = "critical", "swept"
"""What a direction carried along starts as: a vector among the states, or the swept parameter's own."""


@dataclass(frozen=True)
class Course:
    """A map seen along one parameter, with the parameters that the onset's motion is asked for.

    Attributes
    ----------
    states, swept, others
        Names; together, in this order, the directions.
    formulas
        Next state of each, in all names.
    """

    system: System
    swept: str
    others: tuple[str, ...]
    formulas: tuple[Expr, ...]

    @property
    def fixed(self) -> dict[str, Fraction]:
        """Exact value of every parameter but the swept one."""
        return {p.name: p.value.fraction for p in self.system.parameters if p.name != self.swept}

    @property
    def states(self) -> tuple[str, ...]:
        """Names of the states."""
        return self.system.state_names

    @property
    def directions(self) -> tuple[str, ...]:
        """States, swept parameter, other parameters."""
        return (*self.states, self.swept, *self.others)


def course_of(system: System, parameter: str) -> Course:
    """The course of a system along a parameter, all others asked for."""
    swept = system.parameter(parameter).name
    others = tuple(name for name in system.parameter_names if name != swept)
    return Course(system, swept, others, system.expressions)


@dataclass(frozen=True)
class Passed:
    """What one pass ends with; midpoints only.

    Attributes
    ----------
    end
        The point p steps on.
    first
        Per state, its derivative in each direction.
    second
        Per direction carried along and per state, the derivatives of that direction's end.
    """

    end: list[Any]
    first: list[list[Any]]
    second: list[list[list[Any]]]


def run_pass(
    course: Course,
    carried: tuple[str, ...],
    vectors: list[list[Any]],
    x: list[Any],
    r: Any,
    n: int,
    bits: int,
    first: Course | None = None,
) -> Generator[Step, None, Passed]:
    """Carry a point and all derivatives n steps on.

    Parameters
    ----------
    carried
        `CRITICAL` or `SWEPT` for each direction to carry along.
    vectors
        Where each of them starts, per state.
    first
        What holds for the first step instead, where the point lies on a switching surface.
    """
    states, size = len(course.states), len(course.directions)
    loop = _loop(course, carried)
    with precision(bits):
        zero, one = arb(0), arb(1)
        state = list(x)
        state += [one if i == j else zero for i in range(states) for j in range(size)]
        for vector in vectors:
            state += [*vector, *([zero] * (states * size))]
    text = f"working out how the onset of period {n} moves with the other parameters"
    ended = tuple(state)
    if first is not None:
        with precision(bits):
            ended = _loop(first, carried)(r, 1, *ended)
        n -= 1
    ended = yield from in_chunks(lambda now, count: loop(r, count, *now), ended, n, bits, text)
    with precision(bits):
        values = [value.mid() for value in ended]
    end, values = values[:states], values[states:]
    slopes, values = _rows(values, states, size)
    second = []
    for _ in vectors:
        rows, values = _rows(values[states:], states, size)
        second.append(rows)
    return Passed(end, slopes, second)


def _rows(values: list[Any], count: int, size: int) -> tuple[list[list[Any]], list[Any]]:
    return [values[i * size : (i + 1) * size] for i in range(count)], values[count * size :]


@lru_cache(maxsize=64)
def _derivatives(course: Course, order: int) -> dict[tuple[int, ...], Expr]:
    """(state, direction, …) -> derivative of that state's formula, the other parameters put in.

    Differentiated before they are put in: an exponent that is a parameter has a derivative too.
    """
    values = course.fixed
    found: dict[tuple[int, ...], Expr] = {}
    size, swept = len(course.directions), len(course.states)
    for i, formula in enumerate(course.formulas):
        found[(i,)] = put_in(formula, values)
        for j, name in enumerate(course.directions):
            slope = derivative(formula, name)
            found[i, j] = put_in(slope, values)
            if order == 1 or j > swept:
                continue
            for k in range(size):
                found[i, j, k] = put_in(derivative(slope, course.directions[k]), values)
    return found


@lru_cache(maxsize=64)
def _loop(course: Course, carried: tuple[str, ...]) -> Any:
    """Compile the loop: loop(r, n, *state) -> state, n steps further."""
    exprs = _derivatives(course, 2 if carried else 1)
    states, size = len(course.states), len(course.directions)
    bind = {name: f"x{i}" for i, name in enumerate(course.states)} | {course.swept: "r"}
    entries = {key: _name(key) for key, expr in exprs.items() if expr not in (ZERO, ONE)}
    wanted = [(entries[key], exprs[key]) for key in entries]
    body = emit(wanted, bind, "ball", "t") if wanted else []
    printer = _Printer(exprs, entries, states, size)
    body += printer.lines(carried)
    arguments = printer.arguments(carried)
    lines = [
        f"def loop(r, n, {', '.join(arguments)}):",
        "    for _ in range(n):",
        *(f"        {line}" for line in body),
        f"    return ({', '.join(arguments)},)",
    ]
    space: dict[str, Any] = ball_tools() | {"arb": arb}

    def hoist(match: re.Match[str]) -> str:
        label = f"q{match[1].replace('-', 'm')}_{match[2]}"
        space[label] = fmpq(int(match[1]), int(match[2]))
        return label

    # The source is our own print of checked nodes: no text of the user passes through.
    exec(compile(_RATIONAL.sub(hoist, "\n".join(lines)), "<sensitivity loop>", "exec"), space)  # noqa: S102
    return space["loop"]


def _name(key: tuple[int, ...]) -> str:
    return "f" + "_".join(map(str, key))


class _Printer:
    """Prints one step of the recurrences, entry by entry."""

    def __init__(
        self, exprs: dict[tuple[int, ...], Expr], entries: dict[tuple[int, ...], str], states: int, size: int
    ) -> None:
        self.exprs, self.entries, self.states, self.size = exprs, entries, states, size

    def arguments(self, carried: tuple[str, ...]) -> list[str]:
        """Names of everything that is carried, in the order of `run_pass`."""
        states, size = range(self.states), range(self.size)
        names = [f"x{i}" for i in states] + [f"d{i}_{j}" for i in states for j in size]
        for c in range(len(carried)):
            names += [f"c{c}_{i}" for i in states] + [f"s{c}_{i}_{j}" for i in states for j in size]
        return names

    def lines(self, carried: tuple[str, ...]) -> list[str]:
        """Everything is worked out from the step before, so new values wait in names of their own."""
        states, size = range(self.states), range(self.size)
        new: dict[str, str] = {}
        for i in states:
            new[f"x{i}"] = self.value((i,))
            for j in size:
                new[f"d{i}_{j}"] = self.sum([self.along((i,), j)])
            for c, what in enumerate(carried):
                swept = [self.value((i, self.states))] if what == SWEPT else []
                new[f"c{c}_{i}"] = self.sum([self.product((i, k), f"c{c}_{k}") for k in states] + swept)
                for j in size:
                    terms = [self.product((i, k), f"s{c}_{k}_{j}") for k in states]
                    for k in states:
                        bend = self.along((i, k), j)
                        terms.append(f"({bend})*c{c}_{k}" if bend else "")
                    if what == SWEPT:
                        terms.append(self.along((i, self.states), j))
                    new[f"s{c}_{i}_{j}"] = self.sum(terms)
        # Midpoints keep the balls small; what is lost shows in the next pass, which must agree.
        waiting = [f"n_{name} = {text}" for name, text in new.items()]
        return waiting + [f"{name} = arb(n_{name}).mid()" for name in new]

    def along(self, key: tuple[int, ...], j: int) -> str:
        """A formula differentiated once more in direction j, through the states and directly."""
        terms = [self.product((*key, k), f"d{k}_{j}") for k in range(self.states)]
        if j >= self.states:
            terms.append(self.value((*key, j)))
        return " + ".join(term for term in terms if term)

    def value(self, key: tuple[int, ...]) -> str:
        """A derivative, or nothing where it is known to be zero."""
        if self.exprs[key] == ZERO:
            return "" if len(key) > 1 else "0"
        return self.entries.get(key, "1")

    def product(self, key: tuple[int, ...], name: str) -> str:
        """A derivative times a name, or nothing where it is known to be zero."""
        factor = self.value(key)
        return "" if not factor else name if factor == "1" else f"{factor}*{name}"

    @staticmethod
    def sum(terms: list[str]) -> str:
        """The terms that are there, zero where none is."""
        return " + ".join(term for term in terms if term) or "0"
