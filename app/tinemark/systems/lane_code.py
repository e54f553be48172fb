"""Vector code from a `LaneProgram`: one LLVM instruction an operation, on vectors of any width.

Vectors wider than a register become several, side by side, in the order of the operations. That order is
kept by the compiler well enough that other work can be put between them, see `density/lane_block.py`.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from typing import Any, TypeAlias

from llvmlite import ir

from tinemark.systems.lane_program import LaneProgram, Op
from tinemark.systems.lane_wide import EIGHTHS
from tinemark.systems.native import FASTMATH

Builder: TypeAlias = Any
Code: TypeAlias = Any
"""A value of the code that is being written."""

REGISTER = 8
"""Doubles in a register that `lane_wide` counts on."""

_DOUBLE, _BITS, _BIT = ir.DoubleType(), ir.IntType(64), ir.IntType(1)
_PERMUTE = "llvm.x86.avx512.permvar.df.512"
_SCALE = "llvm.x86.avx512.mask.scalef.pd.512"
_CURRENT_ROUNDING = 4

_REALS = {"add": "fadd", "sub": "fsub", "mul": "fmul", "div": "fdiv", "neg": "fneg"}
_INTEGERS = {
    "bits add": "add",
    "bits sub": "sub",
    "bits and": "and_",
    "bits or": "or_",
    "bits xor": "xor",
    "shift left": "shl",
    "shift right": "lshr",
    "mask and": "and_",
    "mask or": "or_",
}
_OF_LLVM = {"fma": "fma", "sqrt": "sqrt", "floor": "floor", "abs": "fabs", "copysign": "copysign"}

# Numba gives its fast-math set to every instruction that has no flags of its own. A sign of zero is
# all that this one gives away, and the formulas' own arithmetic gives it away as well.
_EXACT = ("nsz",)


def vector(element: ir.Type, width: int) -> ir.VectorType:
    """The type of `width` lanes."""
    return ir.VectorType(element, width)


def splat(builder: Builder, scalar: Code, width: int) -> Code:
    """A scalar in every lane."""
    kind = vector(scalar.type, width)
    first = builder.insert_element(ir.Constant(kind, ir.Undefined), scalar, ir.Constant(ir.IntType(32), 0))
    places = ir.Constant(vector(ir.IntType(32), width), [0] * width)
    return builder.shuffle_vector(first, ir.Constant(kind, ir.Undefined), places)


def intrinsic(builder: Builder, name: str, result: ir.Type, arguments: list[Code]) -> Code:
    """Call of a function that the compiler itself provides."""
    module = builder.module
    function = module.globals.get(name) or ir.Function(
        module, ir.FunctionType(result, [argument.type for argument in arguments]), name
    )
    return builder.call(function, arguments)


def write_program(
    builder: Builder,
    program: LaneProgram,
    inputs: Mapping[str, Code],
    width: int,
    between: Callable[[], None],
) -> dict[str, Code]:
    """Write the operations one after another.

    Parameters
    ----------
    inputs
        A vector of `width` doubles for each input of the program.
    between
        Called after each operation: a place for other work.

    Returns
    -------
    dict
        The results' vectors.
    """
    done: list[Code] = []
    for op in program.ops:
        if op.name == "input":
            done.append(inputs[str(op.value)])
        elif op.name == "constant":
            element = _DOUBLE if op.kind == "real" else _BITS
            done.append(ir.Constant(vector(element, width), [op.value] * width))
        else:
            done.append(_written(builder, op, [done[i] for i in op.operands], width))
            between()
    return {name: done[place] for name, place in program.results.items()}


def _written(builder: Builder, op: Op, parts: list[Code], width: int) -> Code:
    flags = tuple(sorted(FASTMATH)) if op.fusible else _EXACT
    reals = vector(_DOUBLE, width)
    if op.name in _REALS:
        return getattr(builder, _REALS[op.name])(*parts, flags=flags)
    if op.name in _INTEGERS:
        return getattr(builder, _INTEGERS[op.name])(*parts)
    match op.name:
        case "compare":
            # Only "not equal" holds for a lane that is nan.
            compare = builder.fcmp_unordered if op.value == "!=" else builder.fcmp_ordered
            return compare(op.value, *parts, flags=_EXACT)
        case "select":
            return builder.select(*parts)
        case "view":
            return builder.bitcast(parts[0], reals if op.kind == "real" else vector(_BITS, width))
        case "eighths":
            return _by_registers(builder, _eighths, parts, width)
        case "scaled":
            return _by_registers(builder, _scaled, parts, width)
    name = _OF_LLVM[op.name]
    return intrinsic(builder, f"llvm.{name}.v{width}f64", reals, parts)


def _eighths(builder: Builder, t: Code) -> Code:
    # The permutation looks at the last three bits of each lane.
    table = ir.Constant(vector(_DOUBLE, REGISTER), list(EIGHTHS))
    places = builder.bitcast(t, vector(_BITS, REGISTER))
    return intrinsic(builder, _PERMUTE, table.type, [table, places])


def _scaled(builder: Builder, x: Code, exponent: Code) -> Code:
    everywhere, rounding = ir.Constant(ir.IntType(8), -1), ir.Constant(ir.IntType(32), _CURRENT_ROUNDING)
    return intrinsic(builder, _SCALE, x.type, [x, exponent, x, everywhere, rounding])


def _by_registers(builder: Builder, write: Callable[..., Code], parts: list[Code], width: int) -> Code:
    """An operation that exists for whole registers only: vectors taken apart, and put together again."""
    pieces = [
        write(builder, *(sliced(builder, part, range(first, first + REGISTER)) for part in parts))
        for first in range(0, width, REGISTER)
    ]
    while len(pieces) > 1:
        pieces = [joined(builder, a, b) for a, b in zip(pieces[::2], pieces[1::2], strict=True)]
    return pieces[0]


def sliced(builder: Builder, whole: Code, places: range) -> Code:
    """Some lanes of a vector."""
    mask = ir.Constant(vector(ir.IntType(32), len(places)), list(places))
    return builder.shuffle_vector(whole, ir.Constant(whole.type, ir.Undefined), mask)


def joined(builder: Builder, first: Code, second: Code) -> Code:
    """Two vectors of one width as one of twice the width."""
    count = 2 * first.type.count
    mask = ir.Constant(vector(ir.IntType(32), count), list(range(count)))
    return builder.shuffle_vector(first, second, mask)
