"""One piece of a formula in sympy: there, differentiated, and back, node by node."""

from __future__ import annotations

from collections.abc import Callable
from fractions import Fraction
from typing import Any

from tinemark.systems.errors import FormulaError
from tinemark.systems.expression import ZERO, Call, Expr, Name, Num
from tinemark.systems.forest import Forest, is_ours

MAX_BITS = 64
"""Longest constant that sympy sees as a number."""

_SMOOTH = ("sin", "cos", "tan", "asin", "acos", "atan", "sinh", "cosh", "tanh", "log")


class Piece:
    """One piece of a formula in sympy, and the way back.

    Symbol `v` is the name to differentiate by. Symbols `h0, h1, …` hold nodes that sympy does not
    see into. The symbols' names decide the order of sympy's terms, so a derivative is the same
    text in every process and kernels generated from it are found again.
    """

    def __init__(self, forest: Forest, name: str, slope: Callable[[Expr, str], Expr]) -> None:
        import sympy

        self.sympy = sympy
        self.forest = forest
        self.slope = slope
        self.name = name
        self.variable = sympy.Symbol("v")
        self.symbols: dict[int, Any] = {}
        self.held: list[Expr] = []

    def derivative(self, node: Expr) -> Expr:
        """Derivative of a node that sympy has the rule for."""
        expression = self._apply(node)
        total = expression.diff(self.variable)
        for place in range(len(self.held)):
            inner = self.slope(self.held[place], self.name)
            if inner != ZERO:
                total += expression.diff(self._symbol(place)) * self._leaf(inner)
        return self._back(total)

    # Into sympy.

    def _enter(self, node: Expr) -> Any:
        """The node for sympy, with what lies beyond its piece held."""
        if not self.forest.varies(node, self.name):
            return self._leaf(node)
        if isinstance(node, Name):
            return self.variable
        if is_ours(node):
            return self._hold(node)
        return self._apply(node)

    def _leaf(self, node: Expr) -> Any:
        """A short rational as itself, any other node held."""
        if isinstance(node, Num):
            top, bottom = node.value.as_integer_ratio()
            if max(top.bit_length(), bottom.bit_length()) <= MAX_BITS:
                return self.sympy.Rational(top, bottom)
        return self._hold(node)

    def _hold(self, node: Expr) -> Any:
        if id(node) not in self.symbols:
            self.held.append(node)
            self.symbols[id(node)] = self._symbol(len(self.held) - 1)
        return self.symbols[id(node)]

    def _symbol(self, place: int) -> Any:
        return self.sympy.Symbol(f"h{place}")

    def _apply(self, node: Expr) -> Any:
        assert isinstance(node, Call)
        beyond = self.forest.plans[id(node)].beyond
        operands = [
            self._hold(arg) if place in beyond else self._enter(arg) for place, arg in enumerate(node.args)
        ]
        match node.fn, operands:
            case "add", (a, b):
                return a + b
            case "sub", (a, b):
                return a - b
            case "mul", (a, b):
                return a * b
            case "div", (a, b):
                return a / b
            case "pow", (a, b):
                return a**b
            case "neg", (a,):
                return -a
            case "sqrt", (a,):
                return self.sympy.sqrt(a)
            case fn, (a,) if fn in _SMOOTH:
                return getattr(self.sympy, fn)(a)
        raise AssertionError(node.fn)

    # Back from sympy.

    def _back(self, expression: Any) -> Expr:
        if expression.is_Symbol:
            if expression == self.variable:
                return self.forest.unique(Name(self.name))
            return self.held[int(expression.name[1:])]
        if expression.is_Rational:
            return self.forest.number(Fraction(int(expression.p), int(expression.q)))
        if expression.is_Add:
            return self._back_sum(expression)
        if expression.is_Mul:
            negative, result = self._back_product(expression)
            return self.forest.call("neg", result) if negative else result
        if expression.is_Pow:
            _, result = self._back_product(expression)
            return result
        fn = type(expression).__name__
        if fn in _SMOOTH and len(expression.args) == 1:
            return self.forest.call(fn, self._back(expression.args[0]))
        raise FormulaError(
            f'the formula has no real derivative by "{self.name}"',
            what_to_do="check it for divisions by zero and for roots and logarithms outside their domain",
        )

    def _back_sum(self, expression: Any) -> Expr:
        plus: list[Expr] = []
        minus: list[Expr] = []
        for term in expression.args:
            negative, result = self._back_product(term)
            (minus if negative else plus).append(result)
        if not minus:
            return self._join("add", plus)
        if not plus:
            return self.forest.call("neg", self._join("add", minus))
        return self.forest.call("sub", self._join("add", plus), self._join("add", minus))

    def _back_product(self, expression: Any) -> tuple[bool, Expr]:
        """Whether a term is negative, and its absolute value as far as its sign is known."""
        coefficient, factors = expression.as_coeff_mul()
        if not coefficient.is_Rational:
            return False, self._back(coefficient)  # infinite or imaginary: refused there
        above: list[Expr] = []
        below: list[Expr] = []
        for factor in factors:
            base, exponent = factor.as_base_exp() if factor.is_Pow else (factor, self.sympy.S.One)
            inverse = bool(exponent.is_Rational and exponent < 0)
            power = self._back_power(base, -exponent if inverse else exponent)
            (below if inverse else above).append(power)
        size = Fraction(abs(int(coefficient.p)), int(coefficient.q))
        if size != 1 or not above:
            above.insert(0, self.forest.number(size))
        top = self._join("mul", above)
        return bool(coefficient < 0), (
            self.forest.call("div", top, self._join("mul", below)) if below else top
        )

    def _back_power(self, base: Any, exponent: Any) -> Expr:
        root = self._back(base)
        if exponent.is_Rational and exponent.q == 2 and exponent > 0:
            half = self.forest.call("sqrt", root)
            whole = (int(exponent.p) - 1) // 2
            power = self.forest.call("pow", root, self.forest.number(whole))
            return self.forest.call("mul", power, half) if whole else half
        return self.forest.call("pow", root, self._back(exponent))

    def _join(self, fn: str, parts: list[Expr]) -> Expr:
        """Sum or product, halved again and again: a long one must not nest deeply."""
        if len(parts) == 1:
            return parts[0]
        middle = (len(parts) + 1) // 2
        return self.forest.call(fn, self._join(fn, parts[:middle]), self._join(fn, parts[middle:]))
