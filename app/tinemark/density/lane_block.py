"""The inner loop of drawing for wide registers: steps of a block of columns, with counting in between.

A step is bound by the units that multiply and add, counting by the one that stores. A processor looks a
few hundred instructions ahead, less than one step of a block; so while a buffer of steps is made, the
cells of the buffer before are counted, a few after each operation of the step.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from typing import Any

from llvmlite import ir
from numba.core import types
from numba.extending import intrinsic

from tinemark.systems import lane_math, lane_turns
from tinemark.systems.lane_code import Builder, Code, sliced, splat, vector, write_program
from tinemark.systems.lane_code import intrinsic as of_llvm
from tinemark.systems.lane_program import LaneProgram, lane_program
from tinemark.systems.lane_wide import WIDE

LANES = 64
"""Columns of a block; loops of this fixed length become vector code."""

BUFFER = 128
"""Steps noted before they are counted. Passes are whole buffers, so that a picture does not depend on how
its steps were divided into passes."""

TILE = 16
"""Columns whose cells lie side by side in the buffer."""

_NARROW, _WIDE, _DEEP = 16, LANES, 28
"""Lanes that are moved together. Two registers give a chain of operations company enough, since the next
ones follow soon, and their values need no memory; a chain so long needs all there are."""

_RESIDENT_STATES = 2
"""States of a block that fit the registers beside what is being calculated."""

GROUP = 4
"""Columns counted together: what they count into fits the nearest memory."""

_TILES = LANES // TILE
_COUNTED = LANES  # cells counted in each step: as many as are noted
_STEPS_COUNTED = _COUNTED // GROUP
_WHOLE, _SHORT, _LONG = ir.IntType(32), ir.IntType(16), ir.IntType(64)
_DOUBLE = ir.DoubleType()


def functions() -> Mapping[str, Callable[..., Any]]:
    """What generated code may call, by name, as it is for wide registers."""
    found = {**vars(lane_math), **vars(lane_turns)}
    return {name: value for name, value in found.items() if name.startswith("lane_")} | WIDE


def lane_block(statements: Sequence[str], states: int, fixed: int, growth: str, counting: bool) -> Any:
    """A function for compiled code that moves a block of columns on.

    ``(lanes, fixed, noted, which, counts, first, begin, end, scale, offset) -> None``: makes the steps
    ``begin <= s < end`` of buffer `which`, at least one. `lanes` has a row of `LANES` doubles for each
    state, one for the swept parameter, and those of the growth; `noted` has shape (2, LANES/TILE, BUFFER,
    TILE), type uint16.

    Parameters
    ----------
    statements
        Straight-line code: from x0, x1, … (states), p (swept), c0, c1, … (fixed) to y0, y1, … (next
        states) and `seen` (what is counted).
    growth
        "" for none; "factor" where the statements also give d, by which one row is multiplied;
        "tangent" where they lead from v0, v1, … to w0, w1, …
    counting
        Whether the cells of the other buffer, which must be full, are counted meanwhile.
    """
    names = _Names(states, fixed, growth)

    @intrinsic
    def block(_typing, lanes, fixed, noted, which, counts, first, begin, end, scale, offset):  # type: ignore[no-untyped-def]
        arguments = (lanes, fixed, noted, which, counts, first, begin, end, scale, offset)
        if any(array.layout != "C" for array in (lanes, fixed, noted, counts)):
            return None

        def generate(context, builder, signature, values):  # type: ignore[no-untyped-def]
            program = lane_program(statements, names.inputs, names.results, functions())
            arrays = {
                name: context.make_array(signature.args[i])(context, builder, value=values[i])
                for i, name in ((0, "lanes"), (1, "fixed"), (2, "noted"), (4, "counts"))
            }
            which, first, begin, end = (
                context.cast(builder, values[i], signature.args[i], types.intp) for i in (3, 5, 6, 7)
            )
            scale, offset = values[8:]
            writer = _Writer(builder, program, names, arrays, counting, which, first, scale, offset)
            writer.write(begin, end)
            return context.get_dummy_value()

        return types.void(*arguments), generate

    return block


class _Names:
    """The rows of `lanes` in order, and what the program is given and gives."""

    def __init__(self, states: int, fixed: int, growth: str) -> None:
        each = range(states)
        self.states, self.fixed = states, fixed
        self.rows = [f"x{i}" for i in each] + ["p"]
        self.results = [f"y{i}" for i in each] + ["seen"]
        # Row and the result that goes there at the end of a step.
        self.stored = [(i, f"y{i}") for i in each]
        self.factor = growth == "factor"
        if growth == "tangent":
            self.stored += [(len(self.rows) + i, f"w{i}") for i in each]
            self.rows += [f"v{i}" for i in each]
            self.results += [f"w{i}" for i in each]
        elif growth == "factor":
            self.results.append("d")
        self.inputs = self.rows + [f"c{i}" for i in range(fixed)]


class _Writer:
    """Writes the loop. All pointers count in elements of what they point to."""

    def __init__(
        self,
        builder: Builder,
        program: LaneProgram,
        names: _Names,
        arrays: Mapping[str, Any],
        counting: bool,
        which: Code,
        first: Code,
        scale: Code,
        offset: Code,
    ) -> None:
        self.builder, self.program, self.names = builder, program, names
        self.lanes, self.fixed = arrays["lanes"].data, arrays["fixed"].data
        self.counting = counting
        self.width = _NARROW if program.depth < _DEEP else _WIDE
        self.parts = LANES // self.width
        half = self.whole(_TILES * BUFFER * TILE)
        noted = arrays["noted"].data
        self.buffer = self.at(noted, builder.mul(which, half))
        self.other = self.at(noted, builder.mul(builder.xor(which, self.whole(1)), half))
        self.row = builder.extract_value(arrays["counts"].shape, 1)
        self.counts = self.at(arrays["counts"].data, builder.mul(first, self.row))
        self.outside = splat(builder, builder.trunc(builder.sub(self.row, self.whole(1)), _WHOLE), self.width)
        self.scale, self.offset = splat(builder, scale, self.width), splat(builder, offset, self.width)
        self.cells: list[Code] = []

    @staticmethod
    def whole(number: int) -> Code:
        return ir.Constant(_LONG, number)

    def at(self, pointer: Code, place: Code) -> Code:
        return self.builder.gep(pointer, [place])

    def vector_at(self, row: int, part: int) -> Code:
        place = self.at(self.lanes, self.whole(row * LANES + part * self.width))
        return self.builder.bitcast(place, vector(_DOUBLE, self.width).as_pointer())

    def load(self, row: int, part: int) -> Code:
        return self.builder.load(self.vector_at(row, part), align=64)

    def store(self, value: Code, row: int, part: int) -> None:
        self.builder.store(value, self.vector_at(row, part), align=64)

    def write(self, begin: Code, end: Code) -> None:
        builder = self.builder
        # The compiler cannot know that counting leaves the lanes alone, and would store and load them in
        # each step.
        resident = range(self.names.states if self.names.states <= _RESIDENT_STATES else 0)
        before = builder.block
        places = [(row, part) for row in resident for part in range(self.parts)]
        held = [self.load(*place) for place in places]
        loop = builder.append_basic_block("steps")
        after = builder.append_basic_block("after")
        builder.branch(loop)
        builder.position_at_end(loop)
        step = builder.phi(_LONG)
        step.add_incoming(begin, before)
        moving = {place: builder.phi(value.type) for place, value in zip(places, held, strict=True)}
        for place, start in zip(places, held, strict=True):
            moving[place].add_incoming(start, before)
        if self.counting:
            self.aim(step)
        moved: dict[tuple[int, int], Code] = {}
        for part in range(self.parts):
            results = self.part(part, step, {f"x{row}": moving[row, part] for row in resident})
            moved |= {(row, part): results[f"y{row}"] for row in resident}
        following = builder.add(step, self.whole(1))
        step.add_incoming(following, builder.block)
        for place in places:
            moving[place].add_incoming(moved[place], builder.block)
        builder.cbranch(builder.icmp_signed("<", following, end), loop, after)
        builder.position_at_end(after)
        for place in places:
            self.store(moved[place], *place)

    def part(self, part: int, step: Code, held: Mapping[str, Code]) -> dict[str, Code]:
        """One step of some lanes; `held` are the states that are not in memory."""
        builder, names = self.builder, self.names
        inputs = {name: self.load(row, part) for row, name in enumerate(names.rows) if name not in held}
        inputs |= held
        for i in range(names.fixed):
            inputs[f"c{i}"] = splat(builder, builder.load(self.at(self.fixed, self.whole(i))), self.width)
        done = 0

        def between() -> None:
            nonlocal done
            done += 1
            while self.counting and len(self.cells) > self.remaining(part, done):
                self.count(self.cells.pop())

        results = write_program(builder, self.program, inputs, self.width, between)
        for row, name in names.stored:
            if names.rows[row] not in held:
                self.store(results[name], row, part)
        if names.factor:
            row = len(names.rows)
            self.store(builder.fmul(self.load(row, part), results["d"], flags=("nsz",)), row, part)
        self.note(results["seen"], part, step)
        return results

    def remaining(self, part: int, done: int) -> int:
        """Cells that are still to be counted in this step once so much of a part is written."""
        length = max(self.program.length, 1)
        return _COUNTED - (_COUNTED * (part * length + done)) // (self.parts * length)

    def note(self, seen: Code, part: int, step: Code) -> None:
        builder = self.builder
        fused = ("contract", "nsz")
        cell = builder.fadd(builder.fmul(seen, self.scale, flags=fused), self.offset, flags=fused)
        whole = builder.fptosi(cell, vector(_WHOLE, self.width))
        # Out of range the conversion gives no value at all in the compiler's eyes; frozen, it is some
        # number, and the clamp brings it inside.
        frozen = ir.instructions.Instruction(builder.block, whole.type, "freeze", [whole])
        builder._insert(frozen)  # noqa: SLF001 - llvmlite has no builder method for it
        clamped = of_llvm(builder, f"llvm.umin.v{self.width}i32", whole.type, [frozen, self.outside])
        short = builder.trunc(clamped, vector(_SHORT, self.width))
        for first in range(0, self.width, TILE):
            tile = (part * self.width + first) // TILE
            row = builder.add(self.whole(tile * BUFFER), step)
            place = self.at(self.buffer, builder.mul(row, self.whole(TILE)))
            place = builder.bitcast(place, vector(_SHORT, TILE).as_pointer())
            builder.store(sliced(builder, short, range(first, first + TILE)), place, align=2 * TILE)

    def aim(self, step: Code) -> None:
        """Find what is counted in a step: some steps of one group of columns."""
        builder = self.builder
        parts = BUFFER // _STEPS_COUNTED
        group = builder.udiv(step, self.whole(parts))
        begin = builder.mul(builder.urem(step, self.whole(parts)), self.whole(_STEPS_COUNTED))
        column = builder.mul(group, self.whole(GROUP))
        tile = builder.udiv(column, self.whole(TILE))
        row = builder.add(builder.mul(tile, self.whole(BUFFER)), begin)
        within = builder.urem(column, self.whole(TILE))
        self.noted = self.at(self.other, builder.add(builder.mul(row, self.whole(TILE)), within))
        self.columns = [self.at(self.counts, builder.mul(column, self.row))]
        for _ in range(1, GROUP):
            self.columns.append(self.at(self.columns[-1], self.row))
        # Column by column within a step, so that a cell seldom waits for the count before; from the end.
        self.cells = list(reversed(range(_COUNTED)))

    def count(self, number: int) -> None:
        builder = self.builder
        step, column = divmod(number, GROUP)
        noted = builder.load(self.at(self.noted, self.whole(step * TILE + column)))
        cell = self.at(self.columns[column], builder.zext(noted, _LONG))
        builder.store(builder.add(builder.load(cell), ir.Constant(_WHOLE, 1)), cell)
