"""Straight-line code as a list of vector operations: what `lane_code` turns into machine code.

The statements that `emit` prints, and the functions of `lane_math` that they call, are one kind of code:
assignments without branches. Here they are read from their own source into one flat list, calls
resolved, equal operations kept once. A list of single operations can be put in any order among other
work, which a call cannot.
"""

from __future__ import annotations

import ast
import inspect
import textwrap
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass
from functools import cache
from typing import Any, Literal, TypeAlias

import numpy as np

Kind = Literal["real", "bits", "mask"]
"""What an operation gives in each lane: a double, 64 bits, or true or false."""

_Value: TypeAlias = "int | tuple[int, ...]"

_BINARY: dict[type[ast.operator], tuple[str, str]] = {
    # On doubles, on bits; "" where there is no such operation.
    ast.Add: ("add", "bits add"),
    ast.Sub: ("sub", "bits sub"),
    ast.Mult: ("mul", ""),
    ast.Div: ("div", ""),
    ast.LShift: ("", "shift left"),
    ast.RShift: ("", "shift right"),
    ast.BitAnd: ("", "bits and"),
    ast.BitOr: ("", "bits or"),
    ast.BitXor: ("", "bits xor"),
}
_COMPARED: dict[type[ast.cmpop], str] = {
    ast.Lt: "<",
    ast.LtE: "<=",
    ast.Gt: ">",
    ast.GtE: ">=",
    ast.Eq: "==",
    ast.NotEq: "!=",
}
_OF_NUMPY = {"sqrt": "sqrt", "floor": "floor", "copysign": "copysign"}
PRIMITIVES = {"lane_fma": "fma", "lane_scaled": "scaled", "lane_eighths": "eighths", "abs": "abs"}
"""Calls that are operations themselves, not functions to be read."""


@dataclass(frozen=True)
class Op:
    """One operation on every lane.

    Attributes
    ----------
    name
        What is done; "input" and "constant" are done by nobody.
    kind
        What it gives.
    operands
        Places of its operands in the program, all before its own.
    value
        Name of an input, a constant's value, or a comparison's sign.
    fusible
        Whether the kernel's fast-math set holds: true for a formula's own arithmetic, false inside
        the elementary functions, which must neither be re-associated nor fused.
    """

    name: str
    kind: Kind
    operands: tuple[int, ...] = ()
    value: str | float | int | None = None
    fusible: bool = False


@dataclass(frozen=True)
class LaneProgram:
    """Operations in order, and where the results are."""

    ops: tuple[Op, ...]
    results: Mapping[str, int]

    @property
    def length(self) -> int:
        """Operations that something is done for."""
        return sum(op.name not in ("input", "constant") for op in self.ops)

    @property
    def depth(self) -> int:
        """Operations of the longest chain in which each waits for the one before."""
        depths: list[int] = []
        for op in self.ops:
            before = max((depths[i] for i in op.operands), default=0)
            depths.append(before + (op.name not in ("input", "constant")))
        return max(depths, default=0)


def lane_program(
    statements: Sequence[str],
    inputs: Sequence[str],
    results: Sequence[str],
    functions: Mapping[str, Callable[..., Any]],
) -> LaneProgram:
    """Read straight-line statements, and whatever they call, into one list of operations.

    Parameters
    ----------
    statements
        As `emit` prints them.
    inputs, results
        Names that have a value before, and names whose values are wanted.
    functions
        What the statements may call; these may call what their own modules hold, and a function named
        here goes before one of the same name there.

    Raises
    ------
    SyntaxError
        Something in the code is no straight line.
    """
    reader = _Reader(functions)
    scope: dict[str, _Value] = {name: reader.op("input", "real", value=name) for name in inputs}
    reader.run(ast.parse("\n".join(statements)).body, _Scope(scope, functions, True))
    return _needed(reader.ops, {name: reader.one(scope[name]) for name in results})


def _needed(ops: Sequence[Op], results: Mapping[str, int]) -> LaneProgram:
    """The program without what no result depends on."""
    wanted = set(results.values())
    for place in reversed(range(len(ops))):
        if place in wanted:
            wanted.update(ops[place].operands)
    moved = {place: new for new, place in enumerate(sorted(wanted))}
    kept = tuple(
        Op(op.name, op.kind, tuple(moved[i] for i in op.operands), op.value, op.fusible)
        for op in (ops[place] for place in sorted(wanted))
    )
    return LaneProgram(kept, {name: moved[place] for name, place in results.items()})


@dataclass(frozen=True)
class _Scope:
    """Where names are looked up: a body's own values, then its module's constants and functions."""

    values: dict[str, _Value]
    module: Mapping[str, Any]
    fusible: bool


@cache
def _body_of(function: Callable[..., Any]) -> tuple[tuple[str, ...], list[ast.stmt], Mapping[str, Any]]:
    plain = getattr(function, "py_func", function)
    tree = ast.parse(textwrap.dedent(inspect.getsource(plain))).body[0]
    assert isinstance(tree, ast.FunctionDef)
    return tuple(argument.arg for argument in tree.args.args), tree.body, plain.__globals__


class _Reader:
    def __init__(self, functions: Mapping[str, Callable[..., Any]]) -> None:
        self.functions = functions
        self.ops: list[Op] = []
        self.places: dict[tuple[object, ...], int] = {}

    def op(
        self,
        name: str,
        kind: Kind,
        *operands: int,
        value: str | float | int | None = None,
        fusible: bool = False,
    ) -> int:
        # repr tells 0.0 from -0.0 and finds nan again.
        key = (name, kind, operands, repr(value), fusible)
        if key not in self.places:
            self.places[key] = len(self.ops)
            self.ops.append(Op(name, kind, operands, value, fusible))
        return self.places[key]

    def constant(self, value: Any) -> int:
        if isinstance(value, np.uint64):
            return self.op("constant", "bits", value=int(value))
        if isinstance(value, (int, float)) and not isinstance(value, bool):
            return self.op("constant", "real", value=float(value))
        raise SyntaxError(f"no constant of a lane: {value!r}")

    def one(self, value: _Value) -> int:
        if isinstance(value, tuple):
            raise SyntaxError("one value was expected, not several")
        return value

    def run(self, body: Sequence[ast.stmt], scope: _Scope) -> _Value | None:
        """Read statements in order; gives what is returned."""
        for statement in body:
            match statement:
                case ast.Expr(ast.Constant(str())):
                    pass  # the description
                case ast.Return(value) if value is not None:
                    return self.read(value, scope)
                case ast.Assign([ast.Tuple(names)], value):
                    values = self.read(value, scope)
                    assert isinstance(values, tuple)
                    for target, one in zip(names, values, strict=True):
                        scope.values[ast.unparse(target)] = one
                case ast.Assign([ast.Name(name)], value):
                    scope.values[name] = self.read(value, scope)
                case ast.AnnAssign(ast.Name(name), _, value) if value is not None:
                    scope.values[name] = self.read(value, scope)
                case _:
                    raise SyntaxError(f"not a straight line: {ast.unparse(statement)}")
        return None

    def real(self, node: ast.expr, scope: _Scope) -> int:
        return self.one(self.read(node, scope))

    def read(self, node: ast.expr, scope: _Scope) -> _Value:
        match node:
            case ast.Constant(value):
                return self.constant(value)
            case ast.Name(name):
                known = scope.values.get(name)
                return self.constant(scope.module[name]) if known is None else known
            case ast.Attribute(ast.Name("np"), name):
                return self.constant(getattr(np, name))
            case ast.Tuple(parts):
                return tuple(self.real(part, scope) for part in parts)
            case ast.UnaryOp(ast.USub(), ast.Constant(float(value))):
                return self.constant(-value)
            case ast.UnaryOp(ast.USub(), part):
                return self.op("neg", "real", self.real(part, scope), fusible=scope.fusible)
            case ast.BinOp(left, operator, right):
                return self.binary(operator, self.real(left, scope), self.real(right, scope), scope)
            case ast.Compare(left, signs, parts):
                return self.compared([self.real(part, scope) for part in (left, *parts)], signs)
            case ast.BoolOp(operator, parts):
                name = "mask and" if isinstance(operator, ast.And) else "mask or"
                return self.folded(name, [self.real(part, scope) for part in parts])
            case ast.IfExp(test, then, other):
                return self.chosen(self.real(test, scope), self.read(then, scope), self.read(other, scope))
            case ast.Call(function, arguments):
                return self.called(function, arguments, scope)
        raise SyntaxError(f"not a straight line: {ast.unparse(node)}")

    def binary(self, operator: ast.operator, left: int, right: int, scope: _Scope) -> int:
        kind = self.ops[left].kind
        name = _BINARY[type(operator)][0 if kind == "real" else 1]
        if not name or self.ops[right].kind != kind:
            raise SyntaxError(f"no operation on such lanes: {type(operator).__name__}")
        return self.op(name, kind, left, right, fusible=scope.fusible and kind == "real")

    def compared(self, parts: Sequence[int], signs: Sequence[ast.cmpop]) -> int:
        pairs = zip(parts, signs, parts[1:], strict=False)
        return self.folded(
            "mask and",
            [self.op("compare", "mask", a, b, value=_COMPARED[type(sign)]) for a, sign, b in pairs],
        )

    def folded(self, name: str, parts: Sequence[int]) -> int:
        whole = parts[0]
        for part in parts[1:]:
            whole = self.op(name, "mask", whole, part)
        return whole

    def chosen(self, test: int, then: _Value, other: _Value) -> _Value:
        if isinstance(then, tuple) and isinstance(other, tuple):
            pairs = zip(then, other, strict=True)
            return tuple(self.op("select", self.ops[a].kind, test, a, b) for a, b in pairs)
        a, b = self.one(then), self.one(other)
        return self.op("select", self.ops[a].kind, test, a, b)

    def called(self, function: ast.expr, arguments: Sequence[ast.expr], scope: _Scope) -> _Value:
        match function:
            case ast.Attribute(ast.Name("np"), "float64" | "uint64"):
                return self.read(arguments[0], scope)  # says what it already is
            case ast.Attribute(ast.Name("np"), name):
                return self.op(_OF_NUMPY[name], "real", *(self.real(part, scope) for part in arguments))
            case ast.Attribute(part, "view"):
                seen = ast.unparse(arguments[0])
                kind: Kind = "bits" if seen == "np.uint64" else "real"
                return self.op("view", kind, self.real(part, scope))
            case ast.Name(name):
                values = [self.read(part, scope) for part in arguments]
                if name in PRIMITIVES:
                    return self.op(PRIMITIVES[name], "real", *(self.one(value) for value in values))
                names, body, module = _body_of(self.functions.get(name) or scope.module[name])
                result = self.run(body, _Scope(dict(zip(names, values, strict=True)), module, False))
                assert result is not None
                return result
        raise SyntaxError(f"no function of lanes: {ast.unparse(function)}")
