"""Expression trees with equal parts kept as one object, cut into pieces that sympy can be given."""

from __future__ import annotations

from dataclasses import dataclass
from fractions import Fraction

from tinemark.systems.expression import Call, Cond, Expr, Name, Num, children, walk

MAX_PIECE = 24
"""Nodes of a formula that sympy sees at once. A product of n factors has n*(n - 1) nodes in its
derivative, so this also bounds how much a derivative swells."""

MAX_DEGREE = 64
"""Highest degree of a piece: sympy raises the constants of a product to its power."""


@dataclass(frozen=True)
class Plan:
    """The piece that ends at a node: nodes, degree, and which operands lie beyond it."""

    size: int
    degree: int
    beyond: frozenset[int] = frozenset()


class Forest:
    """Expressions of one computation, equal ones kept as one object.

    Every node of a forest comes from `unique`, so identity is equality, and what is known of a node
    can be kept by its identity.
    """

    def __init__(self) -> None:
        self.nodes: dict[tuple[object, ...], Expr] = {}
        self.names: dict[int, frozenset[str]] = {}
        self.plans: dict[int, Plan] = {}

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
            self.plans[id(node)] = plan(node, [self.plans[id(child)] for child in children(node)])
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
        """A rational."""
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
        """A condition, or what both of its branches are."""
        return then if then is other else self.unique(Cond(left, op, right, then, other))

    def varies(self, node: Expr, name: str) -> bool:
        """Whether a node of the forest depends on a name."""
        return name in self.names[id(node)]


def is_ours(node: Expr) -> bool:
    """Whether sympy does not see into the node: its derivative follows a rule of ours."""
    match node:
        case Call("pow", (_, exponent)):
            return not isinstance(exponent, Num)
        case Call(fn, _):
            return fn in ("exp", "abs", "min", "max", "floor", "atan2")
    return True


def plan(node: Expr, parts: list[Plan]) -> Plan:
    """How much of a node sympy sees: its largest operands stay outside until the piece is small."""
    if is_ours(node):
        return Plan(1, 0 if isinstance(node, Num) else 1)
    assert isinstance(node, Call)
    sizes = [part.size for part in parts]
    degrees = [part.degree for part in parts]
    beyond = set()
    for place in sorted(range(len(parts)), key=lambda place: -sizes[place]):
        if 1 + sum(sizes) <= MAX_PIECE and _degree(node, degrees) <= MAX_DEGREE:
            break
        beyond.add(place)
        sizes[place] = degrees[place] = 1
    return Plan(1 + sum(sizes), _degree(node, degrees), frozenset(beyond))


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
