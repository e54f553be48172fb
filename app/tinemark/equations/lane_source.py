"""Printed pieces of integration kernels: loops over lanes on one flat array of working memory.

Orbits are moved side by side, one a lane. Whatever a kernel keeps of a lane lies in rows of `LANES`
numbers of one array `W`, at places known when the code is printed, so that the compiler can tell that
no store of a loop meets a load of it, and makes vector code without looking at addresses. Only what
depends on the formulas is printed; the rest is in `lane_control` and `lane_memory`.
"""

from __future__ import annotations

import re
import textwrap
from collections.abc import Mapping, Sequence

from tinemark.equations import lane_control as place
from tinemark.equations.lane_memory import LANES
from tinemark.equations.motion import TIME, Motion, rate_name, row_name
from tinemark.equations.tableau import Row, Tableau
from tinemark.systems.emit import emit
from tinemark.systems.expression import ARITIES, Expr


def head(operations: Mapping[str, str]) -> str:
    """Imports of a generated module and its operations on whole rows, by name."""
    names = ", ".join(["lane_whole", *(f"lane_{fn}" for fn in [*ARITIES, "pow"])])
    made = "".join(f"{name} = {text}\n" for name, text in operations.items())
    return (
        "import numpy as np\n\n"
        "from tinemark.equations.lane_memory import get, put\n"
        "from tinemark.equations.lane_memory import chosen_rows, copied_rows, error_sums\n"
        "from tinemark.equations.lane_memory import scaled_rows, stage_points\n"
        "from tinemark.equations import lane_control as control\n"
        f"from tinemark.systems.lane_math import {names}\n"
        f"from tinemark.systems.native import jit\n\n{made}"
    )


def function(name: str, arguments: str, lines: Sequence[str]) -> str:
    """A compiled function."""
    body = "\n".join(lowered(line) for line in lines)
    return f"@jit\ndef {name}({arguments}):\n" + textwrap.indent(body, "    ") + "\n"


_STORE = re.compile(r"^( *)W\[([^]]+)\] = (.*)$")
_LOAD = re.compile(r"W\[([^]]+)\]")


def lowered(line: str) -> str:
    """A line with the working memory's brackets turned into loads and stores."""
    store = _STORE.match(line)
    if store is None:
        return _LOAD.sub(r"get(W, \1)", line)
    margin, index, value = store.groups()
    value = _LOAD.sub(r"get(W, \1)", value)
    return f"{margin}put(W, {index}, {value})"


def indented(depth: int, lines: Sequence[str]) -> list[str]:
    """Lines moved in by so many levels."""
    return ["    " * depth + line for line in lines]


def at(row: int | str, further: int = 0) -> str:
    """The number of lane `l` in a row, or so many rows further; `row` may name a variable."""
    if isinstance(row, str):
        return f"W[{row} + {further * LANES} + l]" if further else f"W[{row} + l]"
    return f"W[{row + further * LANES} + l]"


class Stepper:
    """Prints one step of a method for all lanes.

    Rows of a lane: the states, then the motion's rows, the last `unchecked` of which do not steer the
    steps, then where asked for a clock. Blocks: `X` where the step starts, `F` the rates there, `Y` the
    stage or the new point, `K` the stages, the rates at the new point last.
    """

    def __init__(self, motion: Motion, table: Tableau, clock: bool = False, unchecked: int = 0) -> None:
        self.motion, self.table = motion, table
        self.moved = motion.size + len(motion.rows)
        self.checked = self.moved - unchecked
        self.rows = self.moved + (1 if clock else 0)
        self.clock = clock
        block = self.rows * LANES
        self.X, self.F, self.Y, self.K = (place.BLOCKS + block * k for k in range(4))
        self.size = self.K + block * (table.count + 1)
        # Where errors ask for the rates at the new point, a landing lane needs them in the section's terms.
        self.rescaled = motion.section_slope is not None and any(
            number == table.count for row in table.errors for number, _ in row
        )
        self.E = self.size
        self.size += block if self.rescaled else 0

    def operations(self) -> dict[str, str]:
        """Operations of a step, for the head of the module."""
        stages = tuple(self.terms(row) for row in (*self.table.stages[1:], self.table.weights))
        places = (place.FIRST_SUM, place.SECOND_SUM)
        sums = tuple(zip(places, (self.error_terms(row) for row in self.table.errors), strict=False))
        pairs = ((self.X, self.Y), (self.F, self.stage(self.table.count)))
        return {
            "nodes": f"{(*self.table.nodes, 1.0)!r}",
            "points": f"stage_points({self.rows}, {self.X}, {self.Y}, {place.STEP}, {stages!r})",
            "errors": f"error_sums({self.checked}, {self.X}, {self.Y}, {place.MOVED}, {sums!r})",
            "first_stage": f"scaled_rows({self.rows}, {self.K}, {self.F}, {place.SCALE})",
            "end_rates": f"scaled_rows({self.rows}, {self.E}, {self.stage(self.table.count)}, {place.SCALE})",
            "accepted": f"chosen_rows({self.rows}, {pairs!r}, {place.ACCEPTED})",
        }

    def terms(self, row: Row) -> Row:
        """A sum of stages as one of places."""
        return tuple((self.stage(stage), weight) for stage, weight in row)

    def error_terms(self, row: Row) -> Row:
        """The same for a sum of errors."""
        end = self.stage(self.table.count)
        return tuple(
            (self.E if self.rescaled and at == end else at, weight) for at, weight in self.terms(row)
        )

    def stage(self, number: int) -> int:
        """Place of a stage's rates."""
        return self.K + number * self.rows * LANES

    def bind(self, letter: str = "x") -> dict[str, str]:
        """What the names of the formulas are called in the code."""
        motion = self.motion
        names = {name: f"{letter}{i}" for i, name in enumerate(motion.states)}
        names |= {row_name(i): f"{letter}{motion.size + i}" for i in range(len(motion.rows))}
        names |= {rate_name(i): f"f{i}" for i in range(motion.size)}
        names |= {motion.swept: "p", TIME: "t"}
        return names | {name: f"c{i}" for i, name in enumerate(motion.fixed)}

    def hoisted(self) -> list[str]:
        """The fixed parameters as variables."""
        return [f"c{i} = fixed[{i}]" for i in range(len(self.motion.fixed))]

    def rates(
        self,
        source: int,
        target: int | str,
        node: str,
        scaled: str = "",
        more: Mapping[str, str] | None = None,
    ) -> list[str]:
        """A loop that computes the rates at a point.

        Parameters
        ----------
        node
            How many steps beyond the lane's time.
        scaled
            Names a flag that allows a landing's scale.
        more
            What further names of the formulas are called in the code.
        """
        motion = self.motion
        rates: list[tuple[str, Expr]] = [
            (f"f{i}", rate) for i, rate in enumerate((*motion.rates, *motion.rows))
        ]
        loads = [f"x{i} = {at(source, i)}" for i in range(self.moved)]
        loads.append(f"p = {at(place.SWEPT)}")
        if motion.is_driven:
            loads.append(f"t = {at(place.TIME)} + {node} * {at(place.STEP)}")
        body = [*loads, *emit(rates, self.bind() | dict(more or {}), "native", "u")]
        if motion.section_slope is not None:
            body += emit([("slope", motion.section_slope)], self.bind(), "native", "g")
            body.append(f"{at(place.SLOPE)} = slope")
        scale = ""
        if scaled:
            # In landing the section's formula is the independent variable (Hénon 1982, Physica D 5:412).
            body += [f"landing = {at(place.LANDING)} * {scaled}", "steepness = 1.0 / slope"]
            body.append("scale = steepness if landing > 0.5 else 1.0")
            scale = " * scale"
        body += [f"{at(target, i)} = f{i}{scale}" for i in range(self.moved)]
        if self.clock:
            body.append(f"{at(target, self.moved)} = {'scale' if scaled else '1.0'}")
        return ["for l in range(lanes):", *indented(1, body)]

    def level(self, source: int) -> list[str]:
        """A loop that computes the section's formula at a point."""
        assert self.motion.section is not None
        loads = [f"x{i} = {at(source, i)}" for i in range(self.motion.size)]
        code = emit([("level", self.motion.section)], self.bind(), "native", "g")
        return [
            "for l in range(lanes):",
            *indented(1, [*loads, f"p = {at(place.SWEPT)}", *code, f"{at(place.LEVEL)} = level"]),
        ]

    def stages(self) -> list[str]:
        """All stages but the first, and the new point: one loop of rates serves them all."""
        count = self.table.count
        lines = [f"for s in range(1, {count + 1}):", "    points(W, lanes, s)"]
        lines.append(f"    k = {self.K} + s * {self.rows * LANES}")
        scaled = ""
        if not self.motion.is_driven:
            scaled = "scaling"
            lines.append(f"    scaling = 1.0 if s < {count} else 0.0")
        after = ["control.end_scale(W, lanes)", "end_rates(W, lanes)"] if self.rescaled else []
        return [*lines, *indented(1, self.rates(self.Y, "k", "node_of[s]", scaled)), *after]
