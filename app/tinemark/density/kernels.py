"""Drawing kernels: a template wrapped around a system's own formulas, compiled once and kept.

A kernel moves a block of `LANES` columns side by side, one column a lane, so that the step of the map
becomes vector code. The cells it hits are noted in a small buffer and counted afterwards, four
columns at a time: counting on the spot would wait for one column's memory again and again.

The inner loop comes in two forms: on processors with wide registers `lane_block` writes it, with the
counting of one buffer between the steps of the next; elsewhere, and where the compiler is off, it is
plain code whose loops over lanes the compiler turns into vector code.
"""

from __future__ import annotations

import textwrap
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from functools import cache, lru_cache
from pathlib import Path
from types import ModuleType
from typing import Any

from tinemark.density.lane_block import BUFFER, GROUP, LANES
from tinemark.density.tangent import tangent
from tinemark.systems.emit import emit
from tinemark.systems.expression import ARITIES, ONE, Expr, Name
from tinemark.systems.formula import read_formula
from tinemark.systems.lane_turns import HALF_TURNS, in_half_turns
from tinemark.systems.lane_wide import wide_registers
from tinemark.systems.native import native_module
from tinemark.systems.system import System

__all__ = ["BUFFER", "LANES", "MAX_ROWS", "Kernels", "kernels_for"]

MAX_ROWS = 65533
"""Bins are noted in 16 bits; two of them lie outside the view."""

_BLOCK, _PASSES = (Path(__file__).with_name(name) for name in ("lane_block.py", "lane_passes.py"))

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
    wide = wide_registers()
    _interleave_lanes()
    template = (_WideTemplate if wide else _Template)(states, expressions, swept, fixed, observed)
    module: Any = native_module(template.source(), "density", [_BLOCK] if wide else [])
    return Kernels(module.advance, module.advance_counting, module.trace, module.carry, fixed)


@cache
def _interleave_lanes() -> None:
    """Have the compiler lay several vectors' instructions side by side, once a process.

    A polynomial is one long chain; processors look too few instructions ahead to find the next vector's
    chain by themselves. There is no way to ask for it loop by loop. Measured: a sixth faster.
    """
    import llvmlite.binding

    llvmlite.binding.set_option("tinemark", "-force-vector-interleave=8")


def _shared_passes() -> ModuleType:
    """`lane_passes` as a module of the cache folder, where no change of what it calls meets old code."""
    return native_module(_PASSES.read_text(encoding="utf-8"), "passes", [_BLOCK])


class _Template:
    """Prints the module of one system. Names: x state, y next state, v tangent, w next tangent, c fixed."""

    ARGUMENTS = (
        "states, tangents, growth, swept, fixed, counts, "
        "first, columns, steps, counted, measured, scale, offset, stop"
    )

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
        turns = ", ".join(f"lane_{fn}" for fn in HALF_TURNS.values())
        head = (
            f"import numpy as np\n\nfrom tinemark.systems.lane_math import {names}\n"
            f"from tinemark.systems.lane_turns import {turns}\n"
            "from tinemark.systems.native import jit\n"
        )
        return "\n\n".join(
            [
                head,
                *self.blocks(),
                self.advance("advance", True),
                self.advance("advance_counting", False),
                self.trace(),
                self.carry(),
            ]
        )

    def bind(self, letter: str) -> dict[str, str]:
        return {**{name: f"{letter}{i}" for i, name in enumerate(self.states)}, **self.parameters}

    def blocks(self) -> list[str]:
        """What the functions need beside what they import."""
        return []

    @staticmethod
    def printed(targets: Sequence[tuple[str, Expr]], bind: dict[str, str], prefix: str) -> list[str]:
        return emit([(name, in_half_turns(expr)) for name, expr in targets], bind, "native", prefix)

    def step(self) -> list[str]:
        targets = [(f"y{i}", e) for i, e in enumerate(self.expressions)]
        return self.printed(targets, self.bind("x"), "u")

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
        return self.printed(targets, bind, "u")

    def seen(self) -> list[str]:
        return self.printed([("seen", self.observed)], self.bind("y"), "g")

    def advance(self, name: str, growth: bool) -> str:
        many = self.n > 1
        lines = [*self.hoisted(), *self.lane_arrays(growth)]
        lines += ["for l in range(LANES):", "    c = first + min(l, columns - 1)"]
        lines += self.indented(1, [*self.each("X#[l] = states[#, c]"), "P[l] = swept[c]"])
        if growth:
            # Added to where it stands, so that a sum does not depend on how passes were divided.
            lines.append("    G[l] = growth[c]")
        if growth and many:
            lines += self.indented(1, self.each("V#[l] = tangents[#, c]"))
        lines += self.passes(growth)
        lines += ["for l in range(columns):"]
        lines += self.indented(1, self.each("states[#, first + l] = X#[l]"))
        if growth:
            lines.append("    growth[first + l] = G[l]")
        if growth and many:
            lines += self.indented(1, self.each("tangents[#, first + l] = V#[l]"))
        lines.append("return done")
        return self.function(name, self.ARGUMENTS, lines)

    def passes(self, growth: bool) -> list[str]:
        """The loop over buffers: steps are noted, then counted."""
        loads = [*self.each("x# = X#[l]"), "p = P[l]"]
        stores = self.each("X#[l] = y#")
        if growth and self.n > 1:
            loads += self.each("v# = V#[l]")
            stores += self.each("V#[l] = w#")
        elif growth:
            stores.append("D[l] *= d")
        step = self.step_and_tangent() if growth else self.step()
        note = [
            "cell = lane_whole(seen * scale + offset)",
            "K[s, l] = np.uint16(cell if cell < outside else outside)",
        ]
        lines = ["done = 0", "while done < steps and stop[0] == 0:"]
        lines.append(f"    m = min({BUFFER}, steps - done)")
        lines += [
            f"    for h in range(0, m, {_LOG_EVERY}):",
            f"        for s in range(h, min(h + {_LOG_EVERY}, m)):",
        ]
        lines.append("            for l in range(lanes):")
        lines += self.indented(4, [*loads, *step, *stores, *self.seen(), *note])
        if growth:
            lines += self.indented(2, self.renormalised())
        lines += self.indented(1, ["if counted:", *self.indented(1, self.counting())])
        return [*lines, "    done += m"]

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
            f"grouped = columns - columns % {GROUP}",
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
        one = "counts[first + {0}, np.uint32(K[s, {0}])] += np.uint32(1)"
        return [
            f"for l in range(0, grouped, {GROUP}):",
            "    for s in range(m):",
            *(f"        {one.format(f'(l + {j})')}" for j in range(GROUP)),
            "for l in range(grouped, columns):",
            "    for s in range(m):",
            f"        {one.format('l')}",
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


class _WideTemplate(_Template):
    """The same module with the inner loop written by `lane_block`, and the rest shared by all systems."""

    def blocks(self) -> list[str]:
        kind = "factor" if self.n == 1 else "tangent"
        plain, growing = [*self.step(), *self.seen()], [*self.step_and_tangent(), *self.seen()]
        shared = "buffers, closed, factors_taken, opened, sums_closed, sums_opened, tally"
        shared += ", tangents_closed, tangents_opened, tangents_taken" if self.n > 1 else ""
        lines = [
            "from tinemark.density.lane_block import lane_block",
            f"from {_shared_passes().__name__} import {shared}\n",
        ]
        for name, statements, growth, counting in (
            ("move", plain, "", False),
            ("move_and_count", plain, "", True),
            ("grow", growing, kind, False),
        ):
            settings = f"{self.n}, {self.fixed}, {growth!r}, {counting}"
            lines.append(f"{name} = lane_block({statements!r}, {settings})")
        return ["\n".join(lines)]

    def advance(self, name: str, growth: bool) -> str:
        many = self.n > 1
        lines = ["lanes = opened(states, swept, first, columns)"]
        if growth and many:
            lines.append("tangents_opened(lanes, tangents, first, columns)")
        if growth:
            lines.append("sums = sums_opened(growth, first, columns)")
        lines += self.passes(growth)
        lines.append("closed(states, lanes, first, columns)")
        if growth:
            lines.append("sums_closed(growth, sums, first, columns)")
        if growth and many:
            lines.append("tangents_closed(tangents, lanes, first, columns)")
        return self.function(name, self.ARGUMENTS, [*lines, "return done"])

    def passes(self, growth: bool) -> list[str]:
        call = "{}(lanes, fixed, noted, which, counts, first, {}, {}, scale, offset)"
        taken = "factors_taken(lanes, " if self.n == 1 else "tangents_taken(lanes, "
        tally = "tally(counts, first, columns, noted, {}, {})"
        # Typed zeros: a literal one would have what takes it compiled a second time.
        lines = ["noted = buffers()", "done = which = waiting = np.int64(0)"]
        lines += ["while done < steps and stop[0] == 0:", f"    m = min({BUFFER}, steps - done)"]
        if growth:
            # Steps with a tangent are few; a second form of them would only take longer to compile.
            return [
                *lines,
                f"    for h in range(0, m, {_LOG_EVERY}):",
                "        " + call.format("grow", "h", f"min(h + {_LOG_EVERY}, m)"),
                f"        {taken}sums, measured)",
                "    waiting = m if counted else 0",
                f"    {tally.format('which', 'waiting')}",
                "    which = 1 - which",
                "    done += m",
            ]
        return [
            *lines,
            f"    if m == {BUFFER} and waiting == {BUFFER} and columns == LANES:",
            "        " + call.format("move_and_count", "0", "m"),
            "    else:",
            f"        {tally.format('1 - which', 'waiting')}",
            "        " + call.format("move", "0", "m"),
            "    waiting = m if counted else 0",
            "    which = 1 - which",
            "    done += m",
            tally.format("1 - which", "waiting"),
        ]
