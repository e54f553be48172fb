"""Printed pieces of integration kernels: loops over lanes on one flat array of working memory.

Orbits are moved side by side, one a lane. Whatever a kernel keeps of a lane lies in slots of `LANES`
numbers of one array `W`, at places known when the code is printed, so that the compiler can tell that
no store of a loop meets a load of it, and makes vector code without looking at addresses.
"""

from __future__ import annotations

import re
import textwrap
from collections.abc import Mapping, Sequence

from tinemark.equations.lane_memory import LANES
from tinemark.equations.motion import TIME, Motion, rate_name, row_name
from tinemark.equations.tableau import Row, Tableau
from tinemark.systems.emit import emit
from tinemark.systems.expression import ARITIES, Expr


class Slots:
    """Places of a kernel's working memory, given out one after another."""

    def __init__(self) -> None:
        self.size = 0

    def take(self, count: int = 1) -> int:
        """The first place of `count` slots in a row."""
        place = self.size
        self.size += count * LANES
        return place


def head(operations: Mapping[str, str]) -> str:
    """Imports of a generated module and its operations on whole rows, by name."""
    names = ", ".join(["lane_whole", *(f"lane_{fn}" for fn in [*ARITIES, "pow"])])
    made = "".join(f"{name} = {text}\n" for name, text in operations.items())
    return (
        "import numpy as np\n\n"
        "from tinemark.equations.lane_memory import get, put\n"
        "from tinemark.equations.lane_memory import chosen_rows, error_sums, scaled_rows, stage_points\n"
        f"from tinemark.systems.lane_math import {names}\n"
        f"from tinemark.systems.native import jit\n\n{made}"
    )


def function(name: str, arguments: str, lines: Sequence[str]) -> str:
    """A compiled function."""
    body = "\n".join(lowered(line) for line in lines)
    return f"@jit\ndef {name}({arguments}):\n" + textwrap.indent(body, "    ") + "\n"


_STORE = re.compile(r"^( *)W\[([^]]+)\] (\+?)= (.*)$")
_LOAD = re.compile(r"W\[([^]]+)\]")


def lowered(line: str) -> str:
    """A line with the working memory's brackets turned into loads and stores."""
    store = _STORE.match(line)
    if store is None:
        return _LOAD.sub(r"get(W, \1)", line)
    margin, place, more, value = store.groups()
    value = _LOAD.sub(r"get(W, \1)", value)
    return f"{margin}put(W, {place}, {f'get(W, {place}) + ({value})' if more else value})"


def indented(depth: int, lines: Sequence[str]) -> list[str]:
    """Lines moved in by so many levels."""
    return ["    " * depth + line for line in lines]


def at(slot: int | str, offset: int = 0) -> str:
    """The number of lane `l` in a slot; `slot` may be a variable that holds its place."""
    if isinstance(slot, str):
        return f"W[{slot} + {offset * LANES} + l]" if offset else f"W[{slot} + l]"
    return f"W[{slot + offset * LANES} + l]"


class Stepper:
    """Prints one step of a method for all lanes: stages, new point, error sums.

    Rows of a lane: the states, then the motion's rows, then where asked for a clock, whose errors do
    not count. Places: `X` where the step starts, `F` the rates there, `Y` the stage or the new point,
    `K` the stages, the rates at the new point last, `HH` the step, `T` the time, `P` the swept parameter.
    """

    def __init__(self, motion: Motion, table: Tableau, slots: Slots, clock: bool = False) -> None:
        self.motion, self.table = motion, table
        self.checked = motion.size + len(motion.rows)
        self.rows = self.checked + (1 if clock else 0)
        self.clock = clock
        self.X, self.F, self.Y = (slots.take(self.rows) for _ in range(3))
        self.K = slots.take(self.rows * (table.count + 1))
        self.HH, self.T, self.P = slots.take(), slots.take(), slots.take()
        self.sums = tuple(slots.take() for _ in table.errors)
        self.moved = slots.take()
        if not motion.is_driven:
            self.landing, self.G, self.D = slots.take(), slots.take(), slots.take()

    def operations(self) -> dict[str, str]:
        """Operations of a step, for the head of the module."""
        stages = tuple(self.terms(row) for row in (*self.table.stages[1:], self.table.weights))
        sums = tuple(zip(self.sums, (self.terms(row) for row in self.table.errors), strict=True))
        return {
            "points": f"stage_points({self.rows}, {self.X}, {self.Y}, {self.HH}, {stages!r})",
            "errors": f"error_sums({self.checked}, {self.X}, {self.Y}, {self.moved}, {sums!r})",
        }

    def terms(self, row: Row) -> Row:
        """A sum of stages as one of places."""
        return tuple((self.stage(stage), weight) for stage, weight in row)

    def stage(self, number: int) -> int:
        """Place of a stage's rates."""
        return self.K + number * self.rows * LANES

    def bind(self, letter: str = "x") -> dict[str, str]:
        """What the names of the formulas are called in the code."""
        motion = self.motion
        names = {name: f"{letter}{place}" for place, name in enumerate(motion.states)}
        names |= {row_name(place): f"{letter}{motion.size + place}" for place in range(len(motion.rows))}
        names |= {rate_name(place): f"f{place}" for place in range(motion.size)}
        names |= {motion.swept: "p", TIME: "t"}
        return names | {name: f"c{place}" for place, name in enumerate(motion.fixed)}

    def hoisted(self) -> list[str]:
        """The fixed parameters as variables."""
        return [f"c{place} = fixed[{place}]" for place in range(len(self.motion.fixed))]

    def rates(self, source: int, target: int | str, node: str, scaled: str = "") -> list[str]:
        """A loop that computes the rates at a point; `scaled` names a flag that allows landing's scale."""
        motion = self.motion
        rates: list[tuple[str, Expr]] = [
            (f"f{i}", rate) for i, rate in enumerate((*motion.rates, *motion.rows))
        ]
        loads = [f"x{i} = {at(source, i)}" for i in range(self.checked)]
        loads.append(f"p = {at(self.P)}")
        if motion.is_driven:
            loads.append(f"t = {at(self.T)} + {node} * {at(self.HH)}")
        body = [*loads, *emit(rates, self.bind(), "native", "u")]
        if motion.section_slope is not None:
            body += emit([("slope", motion.section_slope)], self.bind(), "native", "g")
            body.append(f"{at(self.D)} = slope")
        scale = ""
        if scaled:
            # In landing the section's formula is the independent variable (Hénon 1982, Physica D 5:412).
            body += [f"landing = {at(self.landing)} * {scaled}", "steepness = 1.0 / slope"]
            body.append("scale = steepness if landing > 0.5 else 1.0")
            scale = " * scale"
        body += [f"{at(target, i)} = f{i}{scale}" for i in range(self.checked)]
        if self.clock:
            body.append(f"{at(target, self.checked)} = {'scale' if scaled else '1.0'}")
        return ["for l in range(lanes):", *indented(1, body)]

    def level(self, source: int) -> list[str]:
        """A loop that computes the section's formula at a point."""
        assert self.motion.section is not None
        loads = [f"x{i} = {at(source, i)}" for i in range(self.motion.size)]
        code = emit([("level", self.motion.section)], self.bind(), "native", "g")
        return [
            "for l in range(lanes):",
            *indented(1, [*loads, f"p = {at(self.P)}", *code, f"{at(self.G)} = level"]),
        ]

    def stages(self) -> list[str]:
        """All stages but the first, and the new point: one loop of rates serves them all."""
        count = self.table.count
        lines = [f"for s in range(1, {count + 1}):", "    points(W, s)"]
        lines.append(f"    k = {self.K} + s * {self.rows * LANES}")
        scaled = ""
        if not self.motion.is_driven:
            scaled = "scaling"
            lines.append(f"    scaling = 1.0 if s < {count} else 0.0")
        return [*lines, *indented(1, self.rates(self.Y, "k", "nodes[s]", scaled))]

    def judged(self) -> list[str]:
        """Lines for one lane: `error` of the step `h` in units of what is allowed, `factor` for the next."""
        if len(self.sums) == 2:
            fifth, third = (at(slot) for slot in self.sums)
            lines = [
                f"fifth = {fifth}",
                # What is added keeps 0 by 0 from being undefined; not-a-number stays one.
                f"both = (fifth + 0.01 * {third}) * {float(self.checked)} + 1e-300",
                "error = abs(h) * fifth / np.sqrt(both)",
                "root = np.sqrt(np.sqrt(np.sqrt(error)))",
            ]
        else:
            lines = [
                f"error = abs(h) * np.sqrt({at(self.sums[0])} / {float(self.checked)})",
                "root = lane_pow(error, 0.2)",
            ]
        return [
            *lines,
            "factor = 0.9 / root",
            # An undefined error counts as far too large.
            "factor = factor if factor > 0.2 else 0.2",
            "factor = factor if factor < 5.0 else 5.0",
        ]
