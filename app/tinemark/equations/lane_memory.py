"""What printed kernels do to their working memory beyond formulas: loads, stores, and whole rows at a time.

A kernel's memory is one flat array of rows, each of `LANES` numbers, one a lane. Everything that is the
same for all systems (the sums of stages of a Runge-Kutta step above all) is written here as vector
instructions at once. As loops in the printed code it would have to be read, typed and recognised as
vector code again for every system, which takes seconds.

Each operation has a slow, obvious form that serves where the compiler is off.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from typing import Any, TypeAlias

import numba
import numpy as np
from llvmlite import ir
from numba.core import cgutils, types
from numba.extending import intrinsic

LANES = 64
"""Orbits that are moved side by side."""

Terms: TypeAlias = Sequence[tuple[int, float]]
"""A weighted sum of rows: (place of the first row, weight)."""

_WIDTH = 8
"""Numbers of a vector instruction; compilers split it where a processor has shorter ones."""
_VECTOR = ir.VectorType(ir.DoubleType(), _WIDTH)
_PLACE = ir.IntType(64)


def _slow_get(memory: Any, place: int) -> Any:
    return memory[place]


def _slow_put(memory: Any, place: int, value: float) -> None:
    memory[place] = value


def _data(context: Any, builder: Any, kind: Any, memory: Any) -> Any:
    return cgutils.create_struct_proxy(kind)(context, builder, memory).data


@intrinsic
def _fast_get(_typing, _memory, _place):  # type: ignore[no-untyped-def]
    signature = types.float64(_memory, types.intp)

    def generate(context, builder, signature, arguments):  # type: ignore[no-untyped-def]
        memory, place = arguments
        data = _data(context, builder, signature.args[0], memory)
        return builder.load(builder.gep(data, [place], inbounds=True))

    return signature, generate


@intrinsic
def _fast_put(_typing, _memory, _place, _value):  # type: ignore[no-untyped-def]
    signature = types.void(_memory, types.intp, types.float64)

    def generate(context, builder, signature, arguments):  # type: ignore[no-untyped-def]
        memory, place, value = arguments
        data = _data(context, builder, signature.args[0], memory)
        builder.store(value, builder.gep(data, [place], inbounds=True))
        return context.get_dummy_value()

    return signature, generate


# An index that may count from the end is a sum and a choice before every load, and keeps loops from
# becoming vector code. The printed kernels use only places inside their own memory.
get: Any = _slow_get if numba.config.DISABLE_JIT else _fast_get
put: Any = _slow_put if numba.config.DISABLE_JIT else _fast_put


class _Vectors:
    """Writes vector instructions on a kernel's memory."""

    def __init__(self, builder: Any, data: Any) -> None:
        self.builder, self.data = builder, data

    def constant(self, value: float) -> Any:
        return ir.Constant(_VECTOR, [value] * _WIDTH)

    def all(self, value: Any) -> Any:
        """A vector of one and the same number."""
        empty = ir.Constant(_VECTOR, ir.Undefined)
        one = self.builder.insert_element(empty, value, ir.Constant(ir.IntType(32), 0))
        mask = ir.Constant(ir.VectorType(ir.IntType(32), _WIDTH), [0] * _WIDTH)
        return self.builder.shuffle_vector(one, empty, mask)

    def address(self, base: int, offset: Any) -> Any:
        place = self.builder.add(offset, ir.Constant(_PLACE, base))
        pointer = self.builder.gep(self.data, [place], inbounds=True)
        return self.builder.bitcast(pointer, _VECTOR.as_pointer())

    def load(self, base: int, offset: Any) -> Any:
        found = self.builder.load(self.address(base, offset))
        found.align = 8
        return found

    def store(self, value: Any, base: int, offset: Any) -> None:
        self.builder.store(value, self.address(base, offset), align=8)

    def add(self, a: Any, b: Any) -> Any:
        return self.builder.fadd(a, b, flags=["contract"])

    def sub(self, a: Any, b: Any) -> Any:
        return self.builder.fsub(a, b, flags=["contract"])

    def mul(self, a: Any, b: Any) -> Any:
        return self.builder.fmul(a, b, flags=["contract"])

    def larger_size(self, a: Any, b: Any) -> Any:
        sizes = []
        for value in (a, b):
            negative = self.builder.fcmp_ordered("<", value, self.constant(0.0))
            sizes.append(self.builder.select(negative, self.builder.fneg(value), value))
        # Where either is not a number, so is the result or the other's use.
        first = self.builder.fcmp_ordered(">", sizes[0], sizes[1])
        return self.builder.select(first, sizes[0], sizes[1])

    def sum(self, terms: Terms, offset: Any) -> Any:
        total = None
        for base, weight in terms:
            term = self.mul(self.constant(weight), self.load(base, offset))
            total = term if total is None else self.add(total, term)
        return total

    def lanes(self, count: Any, body: Callable[[Any], None]) -> None:
        """A loop over the first `count` lanes of a row, a vector at a time; the last may reach beyond."""
        up = self.builder.add(count, ir.Constant(_PLACE, _WIDTH - 1))
        with cgutils.for_range(self.builder, self.builder.lshr(up, ir.Constant(_PLACE, 3))) as loop:
            body(self.builder.mul(loop.index, ir.Constant(_PLACE, _WIDTH)))

    def rows(self, rows: int, count: Any, body: Callable[[Any, Any, Any], None]) -> None:
        """A loop over rows and lanes: number of the row, place of the lane, place in the block."""
        with cgutils.for_range(self.builder, ir.Constant(_PLACE, rows)) as loop:
            row = self.builder.mul(loop.index, ir.Constant(_PLACE, LANES))
            self.lanes(count, lambda lane: body(loop.index, lane, self.builder.add(row, lane)))


def stage_points(rows: int, start: int, target: int, step: int, stages: Sequence[Terms]) -> Any:
    """``f(W, lanes, s)``: point s of a Runge-Kutta step into `target`: `start` + `step` times sum number s.

    Parameters
    ----------
    rows
        Rows of a block: numbers a lane.
    start, target
        Places of the blocks.
    step
        Place of the row of step sizes.
    stages
        The sums; number 0 belongs to s = 1.
    """
    size = rows * LANES

    def slow(memory: Any, _lanes: int, s: int) -> None:
        total = np.zeros(size)
        for base, weight in stages[s - 1]:
            total += weight * memory[base : base + size]
        steps = np.tile(memory[step : step + LANES], rows)
        memory[target : target + size] = memory[start : start + size] + steps * total

    if numba.config.DISABLE_JIT:
        return slow

    @intrinsic
    def fast(_typing, _memory, _lanes, _s):  # type: ignore[no-untyped-def]
        signature = types.void(_memory, types.intp, types.intp)

        def generate(context, builder, signature, arguments):  # type: ignore[no-untyped-def]
            memory, lanes, s = arguments
            vectors = _Vectors(builder, _data(context, builder, signature.args[0], memory))
            after = builder.append_basic_block("points.after")
            choice = builder.switch(s, after)
            for number, terms in enumerate(stages, 1):
                block = builder.append_basic_block(f"points.{number}")
                choice.add_case(ir.Constant(_PLACE, number), block)
                builder.position_at_end(block)

                def one(_row: Any, lane: Any, offset: Any, terms: Terms = terms) -> None:
                    steps = vectors.load(step, lane)
                    moved = vectors.mul(steps, vectors.sum(terms, offset))
                    vectors.store(vectors.add(vectors.load(start, offset), moved), target, offset)

                vectors.rows(rows, lanes, one)
                builder.branch(after)
            builder.position_at_end(after)
            return context.get_dummy_value()

        return signature, generate

    return fast


def error_sums(rows: int, start: int, end: int, moved: int, sums: Sequence[tuple[int, Terms]]) -> Any:
    """``f(W, lanes, allowed, relative)``: squares of errors, in units of what is allowed, summed over rows.

    Parameters
    ----------
    start, end
        Places of the blocks before and after the step; an error of ``allowed[i] + relative * size`` counts 1.
    moved
        Place of the row that gets the square of the movement.
    sums
        Place of each estimate's row, and the estimate as a sum of stages.
    """

    def slow(memory: Any, _lanes: int, allowed: Any, relative: float) -> None:
        results = {place: np.zeros(LANES) for place in (moved, *(place for place, _ in sums))}
        for i in range(rows):
            row = slice(i * LANES, (i + 1) * LANES)
            before, after = memory[start:][row], memory[end:][row]
            unit = 1.0 / (allowed[i] + relative * np.maximum(abs(before), abs(after)))
            results[moved] += ((after - before) * unit) ** 2
            for place, terms in sums:
                error = np.zeros(LANES)
                for base, weight in terms:
                    error += weight * memory[base:][row]
                results[place] += (error * unit) ** 2
        for place, values in results.items():
            memory[place : place + LANES] = values

    if numba.config.DISABLE_JIT:
        return slow

    @intrinsic
    def fast(_typing, _memory, _lanes, _allowed, _relative):  # type: ignore[no-untyped-def]
        signature = types.void(_memory, types.intp, _allowed, types.float64)

        def generate(context, builder, signature, arguments):  # type: ignore[no-untyped-def]
            memory, lanes, allowed, relative = arguments
            vectors = _Vectors(builder, _data(context, builder, signature.args[0], memory))
            floors = _data(context, builder, signature.args[2], allowed)
            places = (moved, *(place for place, _ in sums))

            def clear(lane: Any) -> None:
                for place in places:
                    vectors.store(vectors.constant(0.0), place, lane)

            vectors.lanes(lanes, clear)
            share = vectors.all(relative)

            def one(row: Any, lane: Any, offset: Any) -> None:
                floor = vectors.all(builder.load(builder.gep(floors, [row], inbounds=True)))
                before, after = vectors.load(start, offset), vectors.load(end, offset)
                room = vectors.add(floor, vectors.mul(share, vectors.larger_size(before, after)))
                unit = builder.fdiv(vectors.constant(1.0), room)
                distances = [(moved, vectors.sub(after, before))]
                distances += [(place, vectors.sum(terms, offset)) for place, terms in sums]
                for place, distance in distances:
                    scaled = vectors.mul(distance, unit)
                    total = vectors.add(vectors.load(place, lane), vectors.mul(scaled, scaled))
                    vectors.store(total, place, lane)

            vectors.rows(rows, lanes, one)
            return context.get_dummy_value()

        return signature, generate

    return fast


def chosen_rows(rows: int, pairs: Sequence[tuple[int, int]], flag: int) -> Any:
    """``f(W, lanes)``: blocks copied, (target, source) each, where the lane's number in row `flag` is 1."""
    size = rows * LANES

    def slow(memory: Any, _lanes: int) -> None:
        chosen = np.tile(memory[flag : flag + LANES] > 0.5, rows)
        for target, source in pairs:
            block = memory[target : target + size]
            block[chosen] = memory[source : source + size][chosen]

    def vector(vectors: _Vectors, lane: Any, offset: Any) -> None:
        builder = vectors.builder
        chosen = builder.fcmp_ordered(">", vectors.load(flag, lane), vectors.constant(0.5))
        for target, source in pairs:
            new, old = vectors.load(source, offset), vectors.load(target, offset)
            vectors.store(builder.select(chosen, new, old), target, offset)

    return slow if numba.config.DISABLE_JIT else _over_rows(rows, vector)


def scaled_rows(rows: int, target: int, source: int, scale: int) -> Any:
    """``f(W, lanes)``: a block multiplied by the row `scale`, lane by lane."""
    size = rows * LANES

    def slow(memory: Any, _lanes: int) -> None:
        scales = np.tile(memory[scale : scale + LANES], rows)
        memory[target : target + size] = memory[source : source + size] * scales

    def vector(vectors: _Vectors, lane: Any, offset: Any) -> None:
        product = vectors.mul(vectors.load(source, offset), vectors.load(scale, lane))
        vectors.store(product, target, offset)

    return slow if numba.config.DISABLE_JIT else _over_rows(rows, vector)


def copied_rows(rows: int, target: int, source: int) -> Any:
    """``f(W, lanes)``: a block copied to another place."""
    size = rows * LANES

    def slow(memory: Any, _lanes: int) -> None:
        memory[target : target + size] = memory[source : source + size]

    def vector(vectors: _Vectors, _lane: Any, offset: Any) -> None:
        vectors.store(vectors.load(source, offset), target, offset)

    return slow if numba.config.DISABLE_JIT else _over_rows(rows, vector)


def _over_rows(rows: int, vector: Callable[[_Vectors, Any, Any], None]) -> Any:
    @intrinsic
    def fast(_typing, _memory, _lanes):  # type: ignore[no-untyped-def]
        signature = types.void(_memory, types.intp)

        def generate(context, builder, signature, arguments):  # type: ignore[no-untyped-def]
            memory, lanes = arguments
            vectors = _Vectors(builder, _data(context, builder, signature.args[0], memory))
            vectors.rows(rows, lanes, lambda _row, lane, offset: vector(vectors, lane, offset))
            return context.get_dummy_value()

        return signature, generate

    return fast
