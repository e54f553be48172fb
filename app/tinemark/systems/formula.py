"""Reading a formula typed by the user: a whitelist over Python's expression grammar.

The text is parsed by `ast` into a tree, every node of it is checked against a whitelist and
rebuilt as our own `Expr`. Nothing of the text is ever run. Limits on length, depth, size and
exponents are set so that no formula can hang the program.
"""

from __future__ import annotations

import ast
import difflib
import keyword
import re
import warnings
from collections.abc import Collection
from fractions import Fraction
from typing import NoReturn

from tinemark.systems.errors import FormulaError, NumberError
from tinemark.systems.exact import exact
from tinemark.systems.expression import ARITIES, Call, Cond, Expr, Name, Num, Pi

MAX_LENGTH = 2000
MAX_DEPTH = 48
MAX_NODES = 500
MAX_INTEGER_EXPONENT = 64
MAX_CONSTANT_BITS = 900
MAX_NAME_LENGTH = 40

RESERVED = frozenset({*ARITIES, "pi", "t"})
NAME = re.compile(r"[A-Za-z][A-Za-z0-9_]*")
_FORBIDDEN = re.compile(r"[^A-Za-z0-9_ .+\-*/(),<>=]")
_NUMBER = re.compile(r"(?:\d+\.?\d*|\.\d+)(?:[eE][+-]?\d+)?")
_LISTED = "+ - * / ** ( ) a if x < c else b, " + " ".join(ARITIES) + ", pi, t"
_BINARY: dict[type[ast.operator], str] = {
    ast.Add: "add",
    ast.Sub: "sub",
    ast.Mult: "mul",
    ast.Div: "div",
    ast.Pow: "pow",
}
_COMPARISON: dict[type[ast.cmpop], str] = {ast.Lt: "<", ast.LtE: "<=", ast.Gt: ">", ast.GtE: ">="}


def read_formula(
    text: str,
    names: Collection[str],
    *,
    key: str = "",
    timeless: str = "time t has no meaning in a map",
) -> Expr:
    """Read a formula.

    Parameters
    ----------
    text
        Formula in Python's expression syntax.
    names
        Names it may use: states, parameters, and "t" where time is meant.
    key
        Field the formula stands in, for the errors.
    timeless
        Why t cannot be used, where it is not among the names.

    Raises
    ------
    FormulaError
        The text is no formula of the whitelist, or goes beyond a limit; says the column.
    """
    return _Reader(text, frozenset(names), key, timeless).read()


class _Reader:
    def __init__(self, text: str, names: frozenset[str], key: str, timeless: str) -> None:
        self.text = text
        self.timeless = timeless
        self.names = names
        self.key = key
        self.nodes = 0
        self.shift = 1  # column of the first character that ast sees

    def fail(self, message: str, column: int, what_to_do: str = "") -> NoReturn:
        column = min(max(column, 1), max(len(self.text), 1))
        raise FormulaError(message, column=column, key=self.key, what_to_do=what_to_do)

    def read(self) -> Expr:
        if not isinstance(self.text, str):
            raise FormulaError("a formula is a text", key=self.key, what_to_do="put it in quotes")
        if not self.text.strip():
            self.fail("the formula is empty", 1, "write a formula such as r*x*(1 - x)")
        if len(self.text) > MAX_LENGTH:
            self.fail(f"the formula has {len(self.text)} characters", MAX_LENGTH, f"use at most {MAX_LENGTH}")
        flat = re.sub(r"[\t\r\n]", " ", self.text)
        self.check_characters(flat)
        source = flat.strip()
        self.shift = 1 + len(flat) - len(flat.lstrip())
        self.source = source
        try:
            with warnings.catch_warnings():
                warnings.simplefilter("ignore")
                tree = ast.parse(source, mode="eval")
        except SyntaxError as error:
            self.explain_syntax(error)
        except (MemoryError, RecursionError, ValueError):
            self.fail("the formula is nested too deeply", 1, f"use at most {MAX_DEPTH} levels")
        return self.build(tree.body, 1)

    def check_characters(self, flat: str) -> None:
        found = _FORBIDDEN.search(flat)
        if found:
            mark = found.group()
            hints = {
                "^": "use ** for powers",
                "[": "formulas have no brackets; use parentheses",
                "·": "use * for products",
                "×": "use * for products",
                "−": "use the plain minus sign -",
                "'": "formulas have no texts",
                '"': "formulas have no texts",
            }
            shown = mark if mark.isprintable() else f"character number {ord(mark)}"
            self.fail(
                f"{shown} has no meaning here", found.start() + 1, hints.get(mark, f"allowed: {_LISTED}")
            )
        depth = 0
        opened: list[int] = []
        for column, mark in enumerate(flat, 1):
            if mark == "(":
                depth += 1
                opened.append(column)
                if depth > MAX_DEPTH:
                    self.fail("parentheses are nested too deeply", column, f"use at most {MAX_DEPTH} levels")
            elif mark == ")":
                depth -= 1
                if depth < 0:
                    self.fail("this parenthesis closes nothing", column, "remove it or open one before")
                opened.pop()
        if depth:
            self.fail("this parenthesis is never closed", opened[-1], "close it")

    def explain_syntax(self, error: SyntaxError) -> NoReturn:
        column = self.shift - 1 + (error.offset or 1)
        for match in NAME.finditer(self.source):
            word = match.group()
            if keyword.iskeyword(word) and word not in ("if", "else"):
                self.fail(
                    f'"{word}" cannot be used in a formula',
                    self.shift + match.start(),
                    "choose another name"
                    if word in self.names or word == "lambda"
                    else f"allowed: {_LISTED}",
                )
        self.fail(
            "the formula cannot be read from here on", column, "check for a missing operator or operand"
        )

    def column(self, node: ast.expr) -> int:
        return self.shift + node.col_offset

    def count(self, column: int) -> None:
        self.nodes += 1
        if self.nodes > MAX_NODES:
            self.fail("the formula is too long", column, f"use at most {MAX_NODES} operations and operands")

    def build(self, node: ast.expr, depth: int) -> Expr:
        column = self.column(node)
        if depth > MAX_DEPTH:
            self.fail("the formula is nested too deeply", column, f"use at most {MAX_DEPTH} levels")
        self.count(column)
        match node:
            case ast.Constant():
                return self.number(node)
            case ast.Name(id=name):
                return self.name(name, column)
            case ast.UnaryOp(op=ast.USub(), operand=operand):
                inner = self.build(operand, depth + 1)
                return Num(-inner.value) if isinstance(inner, Num) else Call("neg", (inner,))
            case ast.UnaryOp(op=ast.UAdd(), operand=operand):
                return self.build(operand, depth + 1)
            case ast.BinOp(op=op) if type(op) in _BINARY:
                return self.row(node, depth)
            case ast.Call():
                return self.call(node, depth)
            case ast.IfExp():
                return self.conditional(node, depth)
            case ast.Compare():
                self.fail("a comparison gives no number", column, "use it as in: a if x < c else b")
            case ast.BinOp(op=ast.FloorDiv()):
                self.fail("// is not known", column, "use floor(a/b)")
            case ast.Tuple():
                self.fail("a comma has no meaning here", column, "write decimals with a point")
            case ast.Attribute():
                self.fail("a dot after a name has no meaning here", column, f"allowed: {_LISTED}")
            case _:
                self.fail("this is not known in a formula", column, f"allowed: {_LISTED}")

    def number(self, node: ast.Constant) -> Expr:
        column = self.column(node)
        text = self.source[node.col_offset : node.end_col_offset]
        if not _NUMBER.fullmatch(text):
            shown = text if len(text) <= 40 else text[:37] + "..."
            self.fail(f"{shown} is not a number", column, "write a decimal such as 0.25 or 3e-4")
        try:
            return Num(exact(text).fraction)
        except NumberError as error:
            self.fail(error.message, column, error.what_to_do)

    def name(self, name: str, column: int) -> Expr:
        if name in self.names:
            return Name(name)
        if name == "pi":
            return Pi()
        if name in ARITIES:
            self.fail(f'"{name}" is a function', column, f"give it its argument: {name}(...)")
        if name == "t":
            self.fail(self.timeless, column, "use a state or a parameter")
        shown = name if len(name) <= MAX_NAME_LENGTH else name[: MAX_NAME_LENGTH - 3] + "..."
        close = difflib.get_close_matches(name[:MAX_NAME_LENGTH], sorted(self.names), 1)
        known = ", ".join(sorted(self.names)) or "none"
        hint = f'did you mean "{close[0]}"?' if close else f"known names: {known}"
        self.fail(f'"{shown}" is neither a state nor a parameter', column, hint)

    def row(self, node: ast.BinOp, depth: int) -> Expr:
        """A sum or product: its terms stand side by side, so a long one is not a deep one."""
        links = [node]
        while isinstance(links[-1].left, ast.BinOp) and _alike(links[-1].left.op, node.op):
            links.append(links[-1].left)
            self.count(self.column(links[-1].right))
        result = self.build(links[-1].left, depth + 1)
        for link in reversed(links):
            result = self.binary(link, _BINARY[type(link.op)], result, depth)
        return result

    def binary(self, node: ast.BinOp, fn: str, left: Expr, depth: int) -> Expr:
        right = self.build(node.right, depth + 1)
        column = self.column(node.right)
        if fn == "div" and isinstance(right, Num) and right.value == 0:
            self.fail("division by zero", column, "check the divisor")
        if fn == "pow" and isinstance(right, Num) and right.value.denominator == 1:
            power = int(right.value)
            if abs(power) > MAX_INTEGER_EXPONENT:
                self.fail(
                    "the exponent is too large", column, f"use whole exponents up to {MAX_INTEGER_EXPONENT}"
                )
            if isinstance(left, Num) and left.value == 0 and power < 0:
                self.fail("division by zero", column, "check the base of this power")
        if isinstance(left, Num) and isinstance(right, Num):
            value = _fold(fn, left.value, right.value)
            if value is not None:
                return self.bounded(value, self.column(node))
        return Call(fn, (left, right))

    def bounded(self, value: Fraction, column: int) -> Num:
        if max(value.numerator.bit_length(), value.denominator.bit_length()) > MAX_CONSTANT_BITS:
            self.fail("this constant is too large", column, "use numbers between 1e-270 and 1e270")
        return Num(value)

    def call(self, node: ast.Call, depth: int) -> Expr:
        column = self.column(node)
        if not isinstance(node.func, ast.Name):
            self.fail("only the listed functions can be called", column, f"allowed: {_LISTED}")
        name = node.func.id
        if name not in ARITIES:
            shown = name if len(name) <= MAX_NAME_LENGTH else name[: MAX_NAME_LENGTH - 3] + "..."
            if name in self.names:
                self.fail(f'"{shown}" is not a function', column, "write * between factors")
            close = difflib.get_close_matches(name[:MAX_NAME_LENGTH], sorted(ARITIES), 1)
            hint = f'did you mean "{close[0]}"?' if close else "allowed: " + " ".join(ARITIES)
            self.fail(f'"{shown}" is not a function that formulas know', column, hint)
        if node.keywords:
            self.fail(f'"{name}" takes no named arguments', column, f"write {name}(...)")
        wanted = ARITIES[name]
        several = name in ("min", "max")
        if len(node.args) != wanted and not (several and len(node.args) > wanted):
            count = f"{wanted} or more arguments" if several else f"{wanted} argument" + "s" * (wanted > 1)
            self.fail(f'"{name}" takes {count}, not {len(node.args)}', column)
        args = [self.build(arg, depth + 1) for arg in node.args]
        expr = Call(name, tuple(args[:wanted]))
        for arg in args[wanted:]:
            expr = Call(name, (expr, arg))
        return expr

    def conditional(self, node: ast.IfExp, depth: int) -> Expr:
        test = node.test
        if not isinstance(test, ast.Compare):
            self.fail("after if stands a comparison", self.column(test), "write as in: a if x < c else b")
        operands = [self.build(part, depth + 1) for part in (test.left, *test.comparators)]
        then = self.build(node.body, depth + 1)
        other = self.build(node.orelse, depth + 1)
        expr = then
        # a < x < b is nested: both must hold for `then`.
        for place in reversed(range(len(test.ops))):
            op = _COMPARISON.get(type(test.ops[place]))
            if op is None:
                self.fail(
                    "only < <= > >= compare numbers", self.column(test), "write as in: a if x < c else b"
                )
            expr = Cond(operands[place], op, operands[place + 1], expr, other)
        return expr


def _alike(first: ast.operator, second: ast.operator) -> bool:
    return any(
        isinstance(first, pair) and isinstance(second, pair)
        for pair in ((ast.Add, ast.Sub), (ast.Mult, ast.Div))
    )


def _fold(fn: str, left: Fraction, right: Fraction) -> Fraction | None:
    if fn == "add":
        return left + right
    if fn == "sub":
        return left - right
    if fn == "mul":
        return left * right
    if fn == "div":
        return left / right
    if right.denominator != 1:
        return None
    return Fraction(left ** int(right))
