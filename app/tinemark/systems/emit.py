"""Straight-line statements from formulas, with shared sub-expressions computed once.

Two dialects print the same tree: "native" for numba (scalar or lane code), whose function calls are
the names of `systems/lane_math.py`, and "ball" for python-flint, whose comparisons must be decided.
"""

from __future__ import annotations

import operator
from collections.abc import Callable, Mapping, Sequence
from fractions import Fraction
from typing import Literal

from tinemark.systems.errors import FormulaError
from tinemark.systems.expression import ZERO, Call, Cond, Expr, Name, Num, Pi, walk

Dialect = Literal["native", "ball"]

_INFIX = {"add": "+", "sub": "-", "mul": "*", "div": "/"}
_FOLD: dict[str, Callable[[Fraction, Fraction], Fraction]] = {
    "add": operator.add,
    "sub": operator.sub,
    "mul": operator.mul,
    "div": operator.truediv,
}
_LONGEST_CONSTANT = 1000
"""Bits of a constant's numerator and denominator; doubles end at 1024."""
_LONGEST_INLINE = 160
"""Characters of a nested operand; beyond, it gets a variable (compilers limit nesting)."""
_Key = tuple[object, ...]


def emit(
    targets: Sequence[tuple[str, Expr]], bind: Mapping[str, str], dialect: Dialect, prefix: str = "u"
) -> list[str]:
    """Print statements that assign every target.

    Parameters
    ----------
    targets
        (variable, expression) pairs. All right-hand sides are computed before the first target
        is assigned, so a target may be a variable that the formulas read.
    bind
        What each name of the formulas is called in the code.
    dialect
        "native" or "ball".
    prefix
        Start of the temporaries' names; must be free in the surrounding code.

    Returns
    -------
    list of str
        Statements, one a line, not indented.
    """
    printer = _Printer(bind, dialect, prefix)
    numbers = [printer.number_of(expr) for _, expr in targets]
    return printer.statements([name for name, _ in targets], numbers)


class _Printer:
    """Value numbering: equal sub-expressions get one number (Cocke and Schwartz, 1970)."""

    def __init__(self, bind: Mapping[str, str], dialect: Dialect, prefix: str) -> None:
        self.bind = bind
        self.ball = dialect == "ball"
        self.prefix = prefix
        self.numbers: dict[_Key, int] = {}
        self.keys: list[_Key] = []
        self.memo: dict[int, int] = {}
        self.exact: list[bool] = []
        self.kept: list[Expr] = []  # keeps ids alive while they serve as keys

    def intern(self, *key: object) -> int:
        if key not in self.numbers:
            self.numbers[key] = len(self.keys)
            self.keys.append(key)
        return self.numbers[key]

    def number_of(self, expr: Expr) -> int:
        # Operands first: a formula with hundreds of terms must not nest as many calls.
        for node in () if id(expr) in self.memo else walk(expr):
            if id(node) not in self.memo:
                self.memo[id(node)] = self.visit(node)
                self.kept.append(node)
        return self.memo[id(expr)]

    def visit(self, expr: Expr) -> int:
        match expr:
            case Num(value):
                return self.intern("num", value)
            case Name(name):
                return self.intern("name", self.bind[name])
            case Pi():
                return self.intern("pi")
            case Cond(left, op, right, then, other):
                parts = [self.number_of(part) for part in (left, right, then, other)]
                return self.intern("cond", op, *parts)
            case Call("pow", (base, Num(power))) if power.denominator == 1:
                return self.power(self.number_of(base), int(power))
            case Call("pow", (base, Num(power))) if power == Fraction(1, 2):
                return self.intern("sqrt", self.number_of(base))
            case Call(fn, args):
                numbers = [self.number_of(arg) for arg in args]
                folded = self.folded(fn, numbers)
                if folded is not None:
                    return self.intern("num", folded)
                if fn in ("add", "mul"):
                    numbers.sort()  # commutative: a*b and b*a are one value
                return self.intern(fn, *numbers)
        raise TypeError(f"no expression: {expr!r}")

    def folded(self, fn: str, operands: list[int]) -> Fraction | None:
        """Exact value of an operation on two constants: whole numbers must not meet as Python's own."""
        keys = [self.keys[operand] for operand in operands]
        if fn not in (*_INFIX, "neg") or any(key[0] != "num" for key in keys):
            return None
        first, *others = (Fraction(str(key[1])) for key in keys)
        if fn == "neg":
            return -first
        if fn == "div" and others[0] == 0:
            raise FormulaError("division by zero")
        value = _FOLD[fn](first, others[0])
        # What no double holds is left to run, and overflows there as doubles do.
        small = max(value.numerator.bit_length(), value.denominator.bit_length()) < _LONGEST_CONSTANT
        return value if small else None

    def power(self, base: int, power: int) -> int:
        if power == 0:
            return self.intern("num", Fraction(1))
        if power < 0:
            return self.intern("div", self.intern("num", Fraction(1)), self.power(base, -power))
        if power == 1:
            return base
        half = self.power(base, power // 2)
        square = self.intern("mul", half, half)
        return self.intern("mul", *sorted((square, base))) if power % 2 else square

    def statements(self, names: list[str], wanted: list[int]) -> list[str]:
        uses = [0] * len(self.keys)
        needed = [False] * len(self.keys)
        for number in wanted:
            needed[number] = True
            uses[number] += 1
        for number in reversed(range(len(self.keys))):
            if needed[number]:
                for operand in self.operands(number):
                    needed[operand] = True
                    uses[operand] += 1
        text: dict[int, str] = {}
        lines: list[str] = []
        for number in range(len(self.keys)):
            if not needed[number]:
                continue
            printed = self.printed(number, text)
            leaf = self.keys[number][0] in ("num", "name", "pi")
            if leaf or (uses[number] == 1 and len(printed) <= _LONGEST_INLINE):
                text[number] = printed
            else:
                variable = f"{self.prefix}{len(lines)}"
                lines.append(f"{variable} = {printed}")
                text[number] = variable
        for number in wanted:
            if self.ball and self.may_be_exact(number) and not text[number].startswith("ball_value("):
                text[number] = f"ball_value({text[number]})"
        if len(names) > 1 and not set(names).isdisjoint(self.bind.values()):
            # Results first, then targets: a target may be read by another formula.
            for number in wanted:
                variable = f"{self.prefix}{len(lines)}"
                lines.append(f"{variable} = {text[number]}")
                text[number] = variable
        # One statement a target: numba takes no tuple of more than thirty.
        return [*lines, *(f"{name} = {text[number]}" for name, number in zip(names, wanted, strict=True))]

    def operands(self, number: int) -> list[int]:
        kind, *rest = self.keys[number]
        if kind in ("num", "name", "pi"):
            return []
        if kind == "cond":
            rest = rest[1:]
        return [operand for operand in rest if isinstance(operand, int)]

    def printed(self, number: int, text: Mapping[int, str]) -> str:
        kind, *rest = self.keys[number]
        if kind == "num":
            return self.constant(rest[0])
        if kind == "name":
            return str(rest[0])
        if kind == "pi":
            return "ball_pi()" if self.ball else "3.141592653589793"
        operands = [text[operand] for operand in self.operands(number)]
        if kind == "div" and self.ball and all(self.may_be_exact(part) for part in self.operands(number)):
            # Two whole numbers would divide as Python's own, to a rounded double.
            return f"ball_div({operands[0]}, {operands[1]})"
        if kind in _INFIX:
            return f"({operands[0]} {_INFIX[str(kind)]} {operands[1]})"
        if kind == "neg":
            return f"(-{operands[0]})"
        if kind == "cond":
            left, right, then, other = operands
            op = str(rest[0])
            if not self.ball:
                return f"({then} if {left} {op} {right} else {other})"
            # On a surface itself no piece holds, so < and <= are decided alike.
            low, high = (left, right) if op in ("<", "<=") else (right, left)
            return f"({then} if ball_less({low}, {high}) else {other})"
        stem = "ball" if self.ball else "lane"
        return f"{stem}_{kind}({', '.join(operands)})"

    def may_be_exact(self, number: int) -> bool:
        """Whether a ball evaluator may hold a whole number or rational here, and no ball."""
        while len(self.exact) <= number:  # operands are numbered before what they stand in
            self.exact.append(self.exact_one(len(self.exact)))
        return self.exact[number]

    def exact_one(self, number: int) -> bool:
        kind = self.keys[number][0]
        parts = [self.exact[part] for part in self.operands(number)]
        if kind == "cond":
            return any(parts[2:])
        if kind in ("min", "max"):
            return any(parts)
        return kind == "num" or (kind in (*_INFIX, "neg", "abs") and all(parts))

    def constant(self, value: object) -> str:
        assert isinstance(value, Fraction)
        if not self.ball:
            number = float(value)
            return repr(number) if number >= 0 else f"({number!r})"
        if value.denominator == 1:
            return str(value) if value >= 0 else f"({value})"
        return f"fmpq({value.numerator}, {value.denominator})"


def is_zero(expr: Expr) -> bool:
    """Whether an expression is the constant zero."""
    return expr == ZERO
