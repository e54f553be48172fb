"""Exact derivatives of formulas, by sympy, kept small and safe for any formula that can be read.

A formula is handed to sympy in pieces of bounded size, rebuilt node by node (no text is ever parsed
again), and the pieces are joined by the chain rule. So the cost and the size of a derivative grow
in proportion to the formula (Wengert 1964, Commun. ACM 7:463), where differentiating it whole can
swell without bound. Whatever has no smooth rule in sympy, namely abs, min, max, floor, conditions,
atan2 and powers with a varying exponent, stays a node of ours and has its rule here. A derivative
of a piecewise formula holds inside each of its pieces; on a switching surface it means nothing.

sympy is imported on first use: it takes half a second that a picture already in the cache can spare.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction
from functools import lru_cache
from itertools import combinations_with_replacement
from typing import Any

from tinemark.systems.errors import FormulaError
from tinemark.systems.expression import ZERO, Call, Cond, Expr, Name, Num, children, walk
from tinemark.systems.system import System

MAX_PIECE = 24
"""Nodes of a formula that sympy sees at once. A product of n factors has n*(n - 1) nodes in its
derivative, so this also bounds how much a derivative swells."""

MAX_DEGREE = 64
"""Highest degree of a piece: sympy raises the constants of a product to its power."""

MAX_BITS = 64
"""Longest constant that sympy sees as a number."""

_SMOOTH = ("sin", "cos", "tan", "asin", "acos", "atan", "sinh", "cosh", "tanh", "log")


@lru_cache(maxsize=4096)
def derivative(expr: Expr, *names: str) -> Expr:
    """Partial derivative of a formula.

    Parameters
    ----------
    expr
        Formula.
    names
        Names to differentiate by, one after the other: ``derivative(e, "x", "r")`` is the mixed
        second derivative. With no name it is the formula itself.

    Returns
    -------
    Expr
        The derivative, exact. Equal sub-formulas are one object. The derivative of floor is 0;
        on a switching surface the value is that of one of the two sides.

    Raises
    ------
    FormulaError
        The formula has no derivative in the real numbers anywhere, such as sqrt(0*x).
    """
    forest = _Forest()
    result = forest.whole(expr)
    for name in names:
        result = forest.derivative(result, name)
    return result


def jacobian(system: System) -> tuple[tuple[Expr, ...], ...]:
    """Matrix of d(next state i)/d(state j), row by row."""
    return tuple(tuple(derivative(expr, name) for name in system.state_names) for expr in system.expressions)


def partials(
    expressions: Sequence[Expr], names: Sequence[str], order: int
) -> dict[tuple[int, tuple[str, ...]], Expr]:
    """All partial derivatives up to an order, each once.

    Returns
    -------
    dict
        (which expression, names) -> derivative. The names of a key stand in the order of `names`;
        derivatives that are zero are left out. The key with no names is the expression itself.
    """
    found: dict[tuple[int, tuple[str, ...]], Expr] = {}
    for place, expr in enumerate(expressions):
        found[place, ()] = expr
        for degree in range(1, order + 1):
            for combination in combinations_with_replacement(names, degree):
                result = derivative(expr, *combination)
                if result != ZERO:
                    found[place, combination] = result
    return found


@dataclass(frozen=True)
class _Plan:
    """The piece that ends at a node: nodes, degree, and which operands lie beyond it."""

    size: int
    degree: int
    beyond: frozenset[int] = frozenset()


class _Forest:
    """Expressions of one computation, equal ones kept as one object, with their derivatives."""

    def __init__(self) -> None:
        self.nodes: dict[tuple[object, ...], Expr] = {}
        self.names: dict[int, frozenset[str]] = {}
        self.plans: dict[int, _Plan] = {}
        self.known: dict[tuple[int, str], Expr] = {}

    # Building. Every node of the forest comes from `unique`, so identity is equality.

    def unique(self, node: Expr) -> Expr:
        """The one object for a node whose operands are of the forest."""
        label: object = None
        match node:
            case Num(value):
                label = value
            case Name(name):
                label = name
            case Call(fn, _):
                label = fn
            case Cond(op=op):
                label = op
        key = (type(node), label, *(id(child) for child in children(node)))
        if key not in self.nodes:
            self.nodes[key] = node
            own = frozenset({node.name}) if isinstance(node, Name) else frozenset()
            self.names[id(node)] = own.union(*(self.names[id(child)] for child in children(node)))
            self.plans[id(node)] = _plan(node, [self.plans[id(child)] for child in children(node)])
        return self.nodes[key]

    def whole(self, expr: Expr) -> Expr:
        """Bring a foreign expression into the forest."""
        done: dict[int, Expr] = {}
        for node in walk(expr):
            operands = tuple(done[id(child)] for child in children(node))
            copy: Expr = node
            if isinstance(node, Call):
                copy = Call(node.fn, operands)
            elif isinstance(node, Cond):
                left, right, then, other = operands
                copy = Cond(left, node.op, right, then, other)
            done[id(node)] = self.unique(copy)
        return done[id(expr)]

    def number(self, value: Fraction | int) -> Expr:
        return self.unique(Num(Fraction(value)))

    def call(self, fn: str, *args: Expr) -> Expr:
        """A node; what is plainly neutral is left away."""
        match fn, args:
            case ("add", (Num(value), other)) | ("add", (other, Num(value))) if value == 0:
                return other
            case ("sub", (other, Num(value))) if value == 0:
                return other
            case ("sub", (Num(value), other)) if value == 0:
                return self.call("neg", other)
            case ("mul", (Num(value), other)) | ("mul", (other, Num(value))) if value in (0, 1):
                return other if value else self.number(0)
            case ("div", (other, Num(value))) if value == 1:
                return other
            case ("div", (Num(value), _)) if value == 0:
                return self.number(0)
            case ("neg", (Num(value),)):
                return self.number(-value)
            case ("pow", (other, Num(value))) if value == 1:
                return other
        return self.unique(Call(fn, args))

    def choose(self, left: Expr, op: str, right: Expr, then: Expr, other: Expr) -> Expr:
        return then if then is other else self.unique(Cond(left, op, right, then, other))

    # Differentiating.

    def varies(self, node: Expr, name: str) -> bool:
        return name in self.names[id(node)]

    def derivative(self, node: Expr, name: str) -> Expr:
        """Derivative of a node of the forest."""
        if not self.varies(node, name):
            return self.number(0)
        key = (id(node), name)
        if key not in self.known:
            by_rule = self.by_rule(node, name)
            self.known[key] = _Piece(self, name).derivative(node) if by_rule is None else by_rule
        return self.known[key]

    def by_rule(self, node: Expr, name: str) -> Expr | None:
        """Derivative of a node that sympy does not see into; None for all others."""
        match node:
            case Name():
                return self.number(1)
            case Cond(left, op, right, then, other):
                return self.choose(left, op, right, self.derivative(then, name), self.derivative(other, name))
            case Call("floor", _):
                return self.number(0)
            case Call("abs", (u,)):
                slope = self.derivative(u, name)
                return self.choose(u, "<", self.number(0), self.call("neg", slope), slope)
            case Call("min" | "max" as fn, (a, b)):
                return self.choose(
                    a, "<" if fn == "min" else ">", b, self.derivative(a, name), self.derivative(b, name)
                )
            case Call("exp", (u,)):
                # By sympy exp(u)**2 would turn into exp(2*u), a second exponential to compute.
                return self.call("mul", node, self.derivative(u, name))
            case Call("atan2", (y, x)):
                across = self.call(
                    "sub",
                    self.call("mul", x, self.derivative(y, name)),
                    self.call("mul", y, self.derivative(x, name)),
                )
                two = self.number(2)
                return self.call(
                    "div", across, self.call("add", self.call("pow", x, two), self.call("pow", y, two))
                )
            case Call("pow", (base, exponent)) if not isinstance(exponent, Num):
                slope = self.derivative(base, name)
                if not self.varies(exponent, name):
                    # Not base**exponent/base, which has no value at base 0.
                    lower = self.call("pow", base, self.call("sub", exponent, self.number(1)))
                    return self.call("mul", self.call("mul", exponent, lower), slope)
                # base**exponent = exp(exponent*log(base)), for a positive base.
                turn = self.call("mul", self.derivative(exponent, name), self.call("log", base))
                grow = self.call("div", self.call("mul", exponent, slope), base)
                return self.call("mul", node, self.call("add", turn, grow))
        return None


class _Piece:
    """One piece of a formula in sympy, and the way back.

    Symbol `v` is the name to differentiate by. Symbols `h0, h1, …` hold nodes that sympy does not
    see into. The symbols' names decide the order of sympy's terms, so a derivative is the same
    text in every process and kernels generated from it are found again.
    """

    def __init__(self, forest: _Forest, name: str) -> None:
        import sympy

        self.sympy = sympy
        self.forest = forest
        self.name = name
        self.variable = sympy.Symbol("v")
        self.symbols: dict[int, Any] = {}
        self.held: list[Expr] = []

    def derivative(self, node: Expr) -> Expr:
        """Derivative of a node that sympy has the rule for."""
        expression = self.apply(node)
        total = expression.diff(self.variable)
        for place in range(len(self.held)):
            inner = self.forest.derivative(self.held[place], self.name)
            if inner != ZERO:
                total += expression.diff(self.symbol(place)) * self.leaf(inner)
        return self.back(total)

    # Into sympy.

    def enter(self, node: Expr) -> Any:
        """The node for sympy, with what lies beyond its piece held."""
        if not self.forest.varies(node, self.name):
            return self.leaf(node)
        if isinstance(node, Name):
            return self.variable
        if _is_ours(node):
            return self.hold(node)
        return self.apply(node)

    def leaf(self, node: Expr) -> Any:
        """A short rational as itself, any other node held."""
        if isinstance(node, Num):
            top, bottom = node.value.as_integer_ratio()
            if max(top.bit_length(), bottom.bit_length()) <= MAX_BITS:
                return self.sympy.Rational(top, bottom)
        return self.hold(node)

    def hold(self, node: Expr) -> Any:
        if id(node) not in self.symbols:
            self.held.append(node)
            self.symbols[id(node)] = self.symbol(len(self.held) - 1)
        return self.symbols[id(node)]

    def symbol(self, place: int) -> Any:
        return self.sympy.Symbol(f"h{place}")

    def apply(self, node: Expr) -> Any:
        assert isinstance(node, Call)
        beyond = self.forest.plans[id(node)].beyond
        operands = [
            self.hold(arg) if place in beyond else self.enter(arg) for place, arg in enumerate(node.args)
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

    def back(self, expression: Any) -> Expr:
        if expression.is_Symbol:
            if expression == self.variable:
                return self.forest.unique(Name(self.name))
            return self.held[int(expression.name[1:])]
        if expression.is_Rational:
            return self.forest.number(Fraction(int(expression.p), int(expression.q)))
        if expression.is_Add:
            return self.back_sum(expression)
        if expression.is_Mul:
            negative, result = self.back_product(expression)
            return self.forest.call("neg", result) if negative else result
        if expression.is_Pow:
            _, result = self.back_product(expression)
            return result
        fn = type(expression).__name__
        if fn in _SMOOTH and len(expression.args) == 1:
            return self.forest.call(fn, self.back(expression.args[0]))
        raise FormulaError(
            f'the formula has no real derivative by "{self.name}"',
            what_to_do="check it for divisions by zero and for roots and logarithms outside their domain",
        )

    def back_sum(self, expression: Any) -> Expr:
        plus: list[Expr] = []
        minus: list[Expr] = []
        for term in expression.args:
            negative, result = self.back_product(term)
            (minus if negative else plus).append(result)
        if not minus:
            return self.join("add", plus)
        if not plus:
            return self.forest.call("neg", self.join("add", minus))
        return self.forest.call("sub", self.join("add", plus), self.join("add", minus))

    def back_product(self, expression: Any) -> tuple[bool, Expr]:
        """Whether a term is negative, and its absolute value as far as its sign is known."""
        coefficient, factors = expression.as_coeff_mul()
        if not coefficient.is_Rational:
            return False, self.back(coefficient)  # infinite or imaginary: refused there
        above: list[Expr] = []
        below: list[Expr] = []
        for factor in factors:
            base, exponent = factor.as_base_exp() if factor.is_Pow else (factor, self.sympy.S.One)
            inverse = bool(exponent.is_Rational and exponent < 0)
            power = self.back_power(base, -exponent if inverse else exponent)
            (below if inverse else above).append(power)
        size = Fraction(abs(int(coefficient.p)), int(coefficient.q))
        if size != 1 or not above:
            above.insert(0, self.forest.number(size))
        top = self.join("mul", above)
        return bool(coefficient < 0), (
            self.forest.call("div", top, self.join("mul", below)) if below else top
        )

    def back_power(self, base: Any, exponent: Any) -> Expr:
        root = self.back(base)
        if exponent.is_Rational and exponent.q == 2 and exponent > 0:
            half = self.forest.call("sqrt", root)
            whole = (int(exponent.p) - 1) // 2
            power = self.forest.call("pow", root, self.forest.number(whole))
            return self.forest.call("mul", power, half) if whole else half
        return self.forest.call("pow", root, self.back(exponent))

    def join(self, fn: str, parts: list[Expr]) -> Expr:
        """Sum or product, halved again and again: a long one must not nest deeply."""
        if len(parts) == 1:
            return parts[0]
        middle = (len(parts) + 1) // 2
        return self.forest.call(fn, self.join(fn, parts[:middle]), self.join(fn, parts[middle:]))


def _is_ours(node: Expr) -> bool:
    """Whether sympy does not see into the node: its derivative follows a rule of ours."""
    match node:
        case Call("pow", (_, exponent)):
            return not isinstance(exponent, Num)
        case Call(fn, _):
            return fn in ("exp", "abs", "min", "max", "floor", "atan2")
    return True


def _plan(node: Expr, parts: list[_Plan]) -> _Plan:
    """How much of a node sympy sees: its largest operands stay outside until the piece is small."""
    if _is_ours(node):
        return _Plan(1, 0 if isinstance(node, Num) else 1)
    assert isinstance(node, Call)
    sizes = [part.size for part in parts]
    degrees = [part.degree for part in parts]
    beyond = set()
    for place in sorted(range(len(parts)), key=lambda place: -sizes[place]):
        if 1 + sum(sizes) <= MAX_PIECE and _degree(node, degrees) <= MAX_DEGREE:
            break
        beyond.add(place)
        sizes[place] = degrees[place] = 1
    return _Plan(1 + sum(sizes), _degree(node, degrees), frozenset(beyond))


def _degree(node: Call, degrees: list[int]) -> int:
    match node.fn:
        case "mul" | "div":
            return sum(degrees)
        case "pow":
            exponent = node.args[1]
            assert isinstance(exponent, Num)
            return max(1, abs(int(exponent.value))) * max(1, degrees[0])
        case "add" | "sub" | "neg":
            return max(degrees)
    return 1
