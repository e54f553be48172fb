"""Drawing kernels: a template wrapped around a system's own formulas, compiled once and kept.

A kernel moves a block of `LANES` columns side by side, one column a lane, so that the step of the map
becomes vector code. The cells it hits are noted in a small buffer and counted afterwards, four
columns at a time: counting on the spot would wait for one column's memory again and again.
"""

from __future__ import annotations

import textwrap
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from functools import cache, lru_cache
from typing import Any

from tinemark.density.tangent import tangent
from tinemark.systems.emit import emit
from tinemark.systems.expression import ARITIES, ONE, Expr, Name
from tinemark.systems.formula import read_formula
from tinemark.systems.native import native_module
from tinemark.systems.system import System

LANES = 64
"""Columns of a block; loops of this fixed length become vector code."""

BUFFER = 128
"""Steps noted before they are counted. Passes are whole buffers, so that a picture does not depend on how
its steps were divided into passes."""

MAX_ROWS = 65533
"""Bins are noted in 16 bits; two of them lie outside the view."""

_GROUP = 4
_LOG_EVERY = 16
"""Factors multiplied before a logarithm is taken: the product of so many stays inside a double."""


@dataclass(frozen=True)
class Kernels:
    """Compiled functions of one system, swept parameter and observed quantity.

    Attributes
    ----------
    advance, advance_counting
        Move columns on and count; the first also adds up the growth of a tangent vector.
        ``(states, tangents, growth, swept, fixed, counts, first, columns, steps, counted, measured,
        scale, offset, stop) -> steps done``; growth is added up where `measured`.
    trace
        Note the states of the next steps without moving: ``(states, swept, fixed, first, columns,
        noted)``, noted of shape (columns, states, steps).
    carry
        Settle one column after another, each from where the last one ended:
        ``(states, swept, fixed, start, bounds, nudge, first, direction, steps, stop) -> columns done``.
    fixed
        Names of the parameters that do not vary, in the order in which kernels take their values.
    """

    advance: Callable[..., int]
    advance_counting: Callable[..., int]
    trace: Callable[..., None]
    carry: Callable[..., int]
    fixed: tuple[str, ...]


def kernels_for(system: System, parameter: str, observe: str) -> Kernels:
    """The kernels of a system, compiled on first use unless an earlier run has left them on disk.

    Raises
    ------
    SystemFileError, FormulaError
        The parameter is not known, or the observed quantity cannot be read.
    """
    system.must_be_map()
    system.parameter(parameter)
    observed = read_formula(observe, system.names, key="diagram.observe")
    return _kernels(system.state_names, system.parameter_names, system.expressions, parameter, observed)


@lru_cache(maxsize=64)
def _kernels(
    states: tuple[str, ...],
    parameters: tuple[str, ...],
    expressions: tuple[Expr, ...],
    swept: str,
    observed: Expr,
) -> Kernels:
    fixed = tuple(name for name in parameters if name != swept)
    _interleave_lanes()
    module: Any = native_module(_Template(states, expressions, swept, fixed, observed).source(), "density")
    return Kernels(module.advance, module.advance_counting, module.trace, module.carry, fixed)


@cache
def _interleave_lanes() -> None:
    """Have the compiler lay several vectors' instructions side by side, once a process.

    A polynomial is one long chain; processors look too few instructions ahead to find the next vector's
    chain by themselves. There is no way to ask for it loop by loop. Measured: a sixth faster.
    """
    import llvmlite.binding

    llvmlite.binding.set_option("tinemark", "-force-vector-interleave=8")


class _Template:
    """Prints the module of one system. Names: x state, y next state, v tangent, w next tangent, c fixed."""

    def __init__(
        self,
        states: Sequence[str],
        expressions: Sequence[Expr],
        swept: str,
        fixed: Sequence[str],
        observed: Expr,
    ) -> None:
        self.n = len(states)
        self.states, self.expressions, self.observed = states, expressions, observed
        self.parameters = {swept: "p", **{name: f"c{i}" for i, name in enumerate(fixed)}}
        self.fixed = len(fixed)

    def each(self, pattern: str, start: int = 0) -> list[str]:
        """One line a state, # standing for its number."""
        return [pattern.replace("#", str(i)) for i in range(start, self.n)]

    def source(self) -> str:
        names = ", ".join(["lane_whole", *(f"lane_{fn}" for fn in [*ARITIES, "pow"])])
        head = (
            f"import numpy as np\n\nfrom tinemark.systems.lane_math import {names}\n"
            "from tinemark.systems.native import jit\n"
        )
        return "\n\n".join(
            [
                head,
                self.advance("advance", True),
                self.advance("advance_counting", False),
                self.trace(),
                self.carry(),
            ]
        )

    def bind(self, letter: str) -> dict[str, str]:
        return {**{name: f"{letter}{i}" for i, name in enumerate(self.states)}, **self.parameters}

    def step(self) -> list[str]:
        return emit([(f"y{i}", e) for i, e in enumerate(self.expressions)], self.bind("x"), "native", "u")

    def step_and_tangent(self) -> list[str]:
        targets = [(f"y{i}", e) for i, e in enumerate(self.expressions)]
        bind = self.bind("x")
        if self.n == 1:
            targets.append(("d", tangent(self.expressions[0], {self.states[0]: ONE})))
        else:
            # Names no formula can hold, so that they never meet the system's own.
            bind |= {f"tangent {i}": f"v{i}" for i in range(self.n)}
            direction = {name: Name(f"tangent {i}") for i, name in enumerate(self.states)}
            targets += [(f"w{i}", tangent(e, direction)) for i, e in enumerate(self.expressions)]
        return emit(targets, bind, "native", "u")

    def advance(self, name: str, growth: bool) -> str:
        many = self.n > 1
        loads = [*self.each("x# = X#[l]"), "p = P[l]"]
        stores = self.each("X#[l] = y#")
        if growth and many:
            loads += self.each("v# = V#[l]")
            stores += self.each("V#[l] = w#")
        elif growth:
            stores.append("D[l] *= d")
        step = self.step_and_tangent() if growth else self.step()
        observe = emit([("seen", self.observed)], self.bind("y"), "native", "g")
        note = [
            "cell = lane_whole(seen * scale + offset)",
            "K[s, l] = np.uint16(cell if cell < outside else outside)",
        ]
        lines = [*self.hoisted(), *self.lane_arrays(growth)]
        lines += ["for l in range(LANES):", "    c = first + min(l, columns - 1)"]
        lines += self.indented(1, [*self.each("X#[l] = states[#, c]"), "P[l] = swept[c]"])
        if growth:
            # Added to where it stands, so that a sum does not depend on how passes were divided.
            lines.append("    G[l] = growth[c]")
        if growth and many:
            lines += self.indented(1, self.each("V#[l] = tangents[#, c]"))
        lines += ["done = 0", "while done < steps and stop[0] == 0:"]
        lines.append(f"    m = min({BUFFER}, steps - done)")
        lines += [
            f"    for h in range(0, m, {_LOG_EVERY}):",
            f"        for s in range(h, min(h + {_LOG_EVERY}, m)):",
        ]
        lines.append("            for l in range(lanes):")
        lines += self.indented(4, [*loads, *step, *stores, *observe, *note])
        if growth:
            lines += self.indented(2, self.renormalised())
        lines += self.indented(1, ["if counted:", *self.indented(1, self.counting())])
        lines += ["    done += m", "for l in range(columns):"]
        lines += self.indented(1, self.each("states[#, first + l] = X#[l]"))
        if growth:
            lines.append("    growth[first + l] = G[l]")
        if growth and many:
            lines += self.indented(1, self.each("tangents[#, first + l] = V#[l]"))
        lines.append("return done")
        arguments = (
            "states, tangents, growth, swept, fixed, counts, "
            "first, columns, steps, counted, measured, scale, offset, stop"
        )
        return self.function(name, arguments, lines)

    def hoisted(self) -> list[str]:
        return [f"c{i} = fixed[{i}]" for i in range(self.fixed)]

    def lane_arrays(self, growth: bool) -> list[str]:
        lines = [*self.each("X# = np.empty(LANES)"), "P = np.empty(LANES)"]
        if growth:
            lines += ["G = np.empty(LANES)"]
            lines += self.each("V# = np.empty(LANES)") if self.n > 1 else ["D = np.ones(LANES)"]
        lines += [
            f"K = np.empty(({BUFFER}, LANES), np.uint16)",
            "outside = np.uint32(counts.shape[1] - 1)",
            f"grouped = columns - columns % {_GROUP}",
            # Always LANES, unknown to the compiler: a loop of known length it would unroll altogether, and
            # then keep the constants of an exponential in memory instead of in registers.
            "lanes = min(LANES, LANES * stop.shape[0])",
        ]
        return lines

    def renormalised(self) -> list[str]:
        """Growth since the last logarithm, added up; the tangent goes on with length one."""
        lines = ["for l in range(lanes):"]
        if self.n == 1:
            lines += ["    length = abs(D[l])", "    D[l] = 1.0"]
        else:
            square = " + ".join(self.each("V#[l] * V#[l]"))
            # A tangent that has vanished starts anew: its growth is -inf and stays so.
            lines += [
                f"    length = lane_sqrt({square})",
                "    back = 1.0 / (length if length > 0.0 else 1.0)",
            ]
            lines += ["    V0[l] = V0[l] * back if length > 0.0 else 1.0"]
            lines += self.indented(1, self.each("V#[l] *= back", 1))
        return [*lines, "    G[l] += lane_log(length) if measured else 0.0"]

    @staticmethod
    def counting() -> list[str]:
        one = "counts[first + {}, np.uint32(K[s, {}])] += np.uint32(1)"
        group = [one.format(f"l + {j}", f"l + {j}") for j in range(_GROUP)]
        return [
            f"for l in range(0, grouped, {_GROUP}):",
            "    for s in range(m):",
            *(f"        {line}" for line in group),
            "for l in range(grouped, columns):",
            "    for s in range(m):",
            f"        {one.format('l', 'l')}",
        ]

    def trace(self) -> str:
        lines = [*self.hoisted(), *self.each("X# = np.empty(LANES)"), "P = np.empty(LANES)"]
        lines += ["for l in range(LANES):", "    c = first + min(l, columns - 1)"]
        lines += self.indented(1, [*self.each("X#[l] = states[#, c]"), "P[l] = swept[c]"])
        lines += ["for s in range(noted.shape[2]):", "    for l in range(LANES):"]
        lines += self.indented(
            2, [*self.each("x# = X#[l]"), "p = P[l]", *self.step(), *self.each("X#[l] = y#")]
        )
        lines += ["    for l in range(columns):", *self.indented(2, self.each("noted[l, #, s] = X#[l]"))]
        return self.function("trace", "states, swept, fixed, first, columns, noted", lines)

    def carry(self) -> str:
        lines = [*self.hoisted(), "total = swept.shape[0]", "c = first"]
        # Where nothing is carried yet, and after an escape, the orbit starts from the system's start.
        lines += ["fresh = True", *self.each("x# = start[#]")]
        lines += ["if 0 <= c - direction < total:"]
        lines += self.indented(1, [*self.each("x# = states[#, c - direction]"), "fresh = False"])
        lines += ["done = 0", "while 0 <= c < total and stop[0] == 0:"]
        inside = " and ".join(self.each("abs(x#) < bounds[#]"))
        lines += self.indented(1, ["if not fresh:", f"    if {inside}:"])
        lines += self.indented(3, self.each("x# += nudge[#]"))
        lines += self.indented(1, ["    else:", *self.indented(2, self.each("x# = start[#]"))])
        lines += ["    fresh = False", "    p = swept[c]", "    for s in range(steps):"]
        lines += self.indented(2, ["if stop[0] != 0:", "    return done"])
        targets = ", ".join(self.each("x#"))
        lines += self.indented(2, [*self.step(), f"{targets} = {', '.join(self.each('y#'))}"])
        lines += self.indented(1, [*self.each("states[#, c] = x#"), "c += direction", "done += 1"])
        lines.append("return done")
        arguments = "states, swept, fixed, start, bounds, nudge, first, direction, steps, stop"
        return self.function("carry", arguments, lines)

    @staticmethod
    def indented(depth: int, lines: Sequence[str]) -> list[str]:
        return ["    " * depth + line for line in lines]

    @staticmethod
    def function(name: str, arguments: str, lines: Sequence[str]) -> str:
        text = f"@jit\ndef {name}({arguments}):\n" + textwrap.indent("\n".join(lines), "    ") + "\n"
        return text.replace("LANES", str(LANES))
