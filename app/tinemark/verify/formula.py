"""Formula texts as straight-line programs: a recursive descent of its own over the formula's grammar.

Grammar, from what binds least to what binds most::

    formula     = sum [ "if" sum compare sum { compare sum } "else" formula ]
    sum         = product { ("+" | "-") product }
    product     = signed { ("*" | "/") signed }
    signed      = ("+" | "-") signed | power
    power       = atom [ "**" signed ]
    atom        = number | name | name "(" formula { "," formula } ")" | "(" formula ")"

A program is a list of steps; each refers to earlier ones by their place, and equal steps are one.
Arithmetic on numbers alone is done at once, exactly.
"""

from __future__ import annotations

import hashlib
import re
from collections.abc import Collection, Mapping
from dataclasses import dataclass
from fractions import Fraction
from functools import cached_property

from tinemark.verify.claims import NotCheckable, Part, Refused
from tinemark.verify.decimals import rational

MOST_CHARACTERS = 2000
MOST_STEPS = 1500
MOST_DEPTH = 60
MOST_BITS = 2000
MOST_EXPONENT = 64
FUNCTIONS: Mapping[str, int] = {
    "sin": 1,
    "cos": 1,
    "tan": 1,
    "asin": 1,
    "acos": 1,
    "atan": 1,
    "atan2": 2,
    "sinh": 1,
    "cosh": 1,
    "tanh": 1,
    "exp": 1,
    "log": 1,
    "sqrt": 1,
    "abs": 1,
    "floor": 1,
    "min": 2,
    "max": 2,
}
COMPARISONS = ("<=", ">=", "<", ">")
_TOKEN = re.compile(
    r"\s*(?:(?P<number>(?:\d+\.?\d*|\.\d+)(?:[eE][+-]?\d+)?)|(?P<name>[A-Za-z_]\w*)|(?P<mark>\*\*|<=|>=|[-+*/(),<>]))",
    re.ASCII,
)


@dataclass(frozen=True)
class Instruction:
    """One step: `op` with the places of its operands; a number carries its value, a name its text.

    Ops are "number", "name", "pi", "add", "sub", "mul", "div", "neg", "power" (whole exponent in
    `value`), "general power", the functions, and "<", "<=", ">", ">=", each of which takes the places
    (left, right, then, other).
    """

    op: str
    args: tuple[int, ...] = ()
    value: Fraction = Fraction(0)
    name: str = ""


@dataclass(frozen=True)
class Program:
    """A formula as steps; the last one is its value."""

    steps: tuple[Instruction, ...]

    def upto(self, place: int) -> Program:
        """The program of one of its steps."""
        return Program(self.steps[: place + 1])

    @cached_property
    def marks(self) -> tuple[str, ...]:
        """For each step a text that is the same where the same is worked out, also in another program."""
        found: list[str] = []
        for step in self.steps:
            parts = [step.op, step.name, str(step.value), *(found[arg] for arg in step.args)]
            found.append(hashlib.sha256("\n".join(parts).encode()).hexdigest())
        return tuple(found)


def parse(text: str, names: Collection[str], constants: Mapping[str, Fraction]) -> Program:
    """Read a formula in `names`, with the exact values of `constants` put in.

    Raises
    ------
    Refused
        It cannot be read (`Part.FORMULA`).
    NotCheckable
        It goes beyond what is read here.
    """
    if len(text) > MOST_CHARACTERS:
        raise NotCheckable(f"a formula of more than {MOST_CHARACTERS} characters")
    reader = _Reader(text, frozenset(names), constants)
    last = reader.formula(0)
    if reader.token[0]:
        raise reader.fault()
    return Program(reader.with_last(last))


class _Reader:
    def __init__(self, text: str, names: frozenset[str], constants: Mapping[str, Fraction]) -> None:
        self.text, self.names, self.constants = text, names, constants
        self.at = 0
        self.token = ("", "")
        self.steps: list[Instruction] = []
        self.places: dict[Instruction, int] = {}
        self.next()

    def fault(self) -> Refused:
        return Refused(Part.FORMULA, f"the formula cannot be read at character {max(self.at, 1)}")

    def next(self) -> None:
        match = _TOKEN.match(self.text, self.at)
        if match is None:
            if self.text[self.at :].strip():
                raise self.fault()
            self.token = ("", "")
            return
        self.at = match.end()
        self.token = (match.lastgroup or "", match[match.lastgroup or 0])

    def take(self, *marks: str) -> str:
        """The present mark or word if it is one of these, stepping over it; else an empty text."""
        if self.token[0] in ("mark", "name") and self.token[1] in marks:
            found = self.token[1]
            self.next()
            return found
        return ""

    def need(self, mark: str) -> None:
        if not self.take(mark):
            raise self.fault()

    def emit(self, op: str, *args: int, value: Fraction = Fraction(0), name: str = "") -> int:
        step = Instruction(op, args, value, name)
        if step not in self.places:
            if len(self.steps) >= MOST_STEPS:
                raise NotCheckable(f"a formula of more than {MOST_STEPS} operations")
            self.places[step] = len(self.steps)
            self.steps.append(step)
        return self.places[step]

    def with_last(self, last: int) -> tuple[Instruction, ...]:
        """The steps, ending in the one that is the value."""
        return tuple(self.steps[: last + 1])

    def formula(self, depth: int) -> int:
        if depth > MOST_DEPTH:
            raise NotCheckable(f"a formula nested more than {MOST_DEPTH} deep")
        then = self.sum(depth)
        if not self.take("if"):
            return then
        sides = [self.sum(depth)]
        marks: list[str] = []
        while mark := self.take(*COMPARISONS):
            marks.append(mark)
            sides.append(self.sum(depth))
        if not marks:
            raise self.fault()
        self.need("else")
        other = self.formula(depth + 1)
        # a < x < b holds where both do.
        for place in reversed(range(len(marks))):
            then = self.emit(marks[place], sides[place], sides[place + 1], then, other)
        return then

    def sum(self, depth: int) -> int:
        left = self.product(depth)
        while mark := self.take("+", "-"):
            left = self.two("add" if mark == "+" else "sub", left, self.product(depth))
        return left

    def product(self, depth: int) -> int:
        left = self.signed(depth)
        while mark := self.take("*", "/"):
            left = self.two("mul" if mark == "*" else "div", left, self.signed(depth))
        return left

    def signed(self, depth: int) -> int:
        if depth > MOST_DEPTH:
            raise NotCheckable(f"a formula nested more than {MOST_DEPTH} deep")
        if self.take("+"):
            return self.signed(depth + 1)
        if self.take("-"):
            inner = self.signed(depth + 1)
            known = self.number(inner)
            return self.emit("neg", inner) if known is None else self.emit("number", value=-known)
        base = self.atom(depth)
        return self.power(base, self.signed(depth + 1)) if self.take("**") else base

    def atom(self, depth: int) -> int:
        kind, text = self.token
        if kind == "number":
            value = rational(text)
            if value is None:
                raise NotCheckable("a number in the formula is too long")
            self.next()
            return self.emit("number", value=value)
        if kind == "name" and text not in ("if", "else"):
            self.next()
            return self.call(text, depth) if self.take("(") else self.named(text)
        if self.take("("):
            inner = self.formula(depth + 1)
            self.need(")")
            return inner
        raise self.fault()

    def named(self, text: str) -> int:
        if text in self.constants:
            return self.emit("number", value=self.constants[text])
        if text in self.names:
            return self.emit("name", name=text)
        if text == "pi":
            return self.emit("pi")
        raise Refused(Part.FORMULA, f'the formula uses "{text[:40]}", which the system does not have')

    def call(self, text: str, depth: int) -> int:
        args = [self.formula(depth + 1)]
        while self.take(","):
            args.append(self.formula(depth + 1))
        self.need(")")
        wanted = FUNCTIONS.get(text, 0)
        if wanted == 0:
            raise Refused(Part.FORMULA, f'the formula calls "{text[:40]}", which is no function')
        if len(args) < wanted or (len(args) > wanted and text not in ("min", "max")):
            raise Refused(Part.FORMULA, f'"{text}" is given {len(args)} arguments')
        place = self.emit(text, *args[:wanted])
        for arg in args[wanted:]:
            place = self.emit(text, place, arg)
        return place

    def number(self, place: int) -> Fraction | None:
        step = self.steps[place]
        return step.value if step.op == "number" else None

    def two(self, op: str, left: int, right: int) -> int:
        a, b = self.number(left), self.number(right)
        if a is not None and b is not None and not (op == "div" and b == 0):
            value = a + b if op == "add" else a - b if op == "sub" else a * b if op == "mul" else a / b
            if max(value.numerator.bit_length(), value.denominator.bit_length()) <= MOST_BITS:
                return self.emit("number", value=value)
        return self.emit(op, left, right)

    def power(self, base: int, exponent: int) -> int:
        n = self.number(exponent)
        if n is None or n.denominator != 1:
            return self.emit("general power", base, exponent)
        if abs(n) > MOST_EXPONENT:
            raise NotCheckable(f"a whole exponent beyond {MOST_EXPONENT}")
        known = self.number(base)
        bits = 0 if known is None else max(known.numerator.bit_length(), known.denominator.bit_length())
        if known is not None and bits * abs(n) <= MOST_BITS and not (known == 0 and n < 0):
            return self.emit("number", value=Fraction(known ** int(n)))
        return self.emit("power", base, value=n)
