"""Taylor coefficients in time of formulas along a solution, order after order, operation by operation.

A product is a Cauchy sum, a quotient is solved for; of every function c(u) only its derivative's factor w,
with c' = w u', is needed: k c_k = sum of j u_j w_(k-j) (Moore, 1966).
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction

from tinemark.verify import intervals as iv
from tinemark.verify.claims import NotCheckable
from tinemark.verify.fixed import Jet, Jets
from tinemark.verify.formula import Program

SWITCHES = ("abs", "floor", "min", "max", "<", "<=", ">", ">=")


@dataclass(frozen=True)
class Node:
    """One operation: "number", "pi", "name", "sum", "difference", "negative", "product", "quotient" or
    "function"; a function's second operand is the factor w.
    """

    op: str
    args: tuple[int, ...] = ()
    value: Fraction = Fraction(0)
    name: str = ""


@dataclass(frozen=True)
class Plan:
    """Operations of several formulas, those that are the same once, and where each formula's value is."""

    nodes: tuple[Node, ...]
    outputs: tuple[int, ...]


class _Planner:
    def __init__(self) -> None:
        self.nodes: list[Node] = []
        self.places: dict[Node, int] = {}
        self.known: dict[tuple[str, int], int] = {}

    def emit(self, op: str, *args: int, value: Fraction = Fraction(0), name: str = "") -> int:
        node = Node(op, args, value, name)
        if node not in self.places:
            self.places[node] = len(self.nodes)
            self.nodes.append(node)
        return self.places[node]

    def number(self, value: int | Fraction) -> int:
        return self.emit("number", value=Fraction(value))

    def add(self, program: Program) -> int:
        """Operations of one formula; the place of its value."""
        done: list[int] = []
        for step in program.steps:
            args = [done[place] for place in step.args]
            done.append(self._of(step.op, args, step.value, step.name))
        return done[-1]

    def _of(self, op: str, args: Sequence[int], value: Fraction, name: str) -> int:
        if op in SWITCHES or op == "atan2":
            raise NotCheckable(f'equations with "{op}" are not checked here')
        match op:
            case "number" | "pi" | "name":
                return self.emit(op, value=value, name=name)
            case "add":
                return self.emit("sum", *args)
            case "sub":
                return self.emit("difference", *args)
            case "neg":
                return self.emit("negative", *args)
            case "mul":
                return self.emit("product", *args)
            case "div":
                return self.emit("quotient", *args)
            case "power":
                return self._power(args[0], int(value))
            case "general power":
                return self.function("exp", self.emit("product", args[1], self.function("log", args[0])))
            case "tan":
                return self.emit("quotient", self.function("sin", args[0]), self.function("cos", args[0]))
            case "acos":
                quarter = self.emit("product", self.emit("pi"), self.number(Fraction(1, 2)))
                return self.emit("difference", quarter, self.function("asin", args[0]))
        return self.function(op, args[0])

    def _power(self, base: int, n: int) -> int:
        if n < 0:
            return self.emit("quotient", self.number(1), self._power(base, -n))
        found, square = None, base
        while n:
            if n & 1:
                found = square if found is None else self.emit("product", found, square)
            n >>= 1
            if n:
                square = self.emit("product", square, square)
        return self.number(1) if found is None else found

    def function(self, name: str, u: int) -> int:
        """A function of one argument, with the factor of its derivative."""
        if (name, u) in self.known:
            return self.known[name, u]
        place = len(self.nodes)
        self.nodes.append(Node("function", (u, place), name=name))
        self.known[name, u] = place
        self.nodes[place] = Node("function", (u, self._factor(name, u, place)), name=name)
        return place

    def _factor(self, name: str, u: int, own: int) -> int:
        one = self.number(1)
        match name:
            case "exp":
                return own
            case "sin":
                return self.function("cos", u)
            case "cos":
                return self.emit("negative", self.function("sin", u))
            case "sinh":
                return self.function("cosh", u)
            case "cosh":
                return self.function("sinh", u)
            case "tanh":
                return self.emit("difference", one, self.emit("product", own, own))
            case "log":
                return self.emit("quotient", one, u)
            case "sqrt":
                return self.emit("quotient", self.number(Fraction(1, 2)), own)
            case "atan":
                return self.emit("quotient", one, self.emit("sum", one, self.emit("product", u, u)))
            case "asin":
                rest = self.emit("difference", one, self.emit("product", u, u))
                return self.emit("quotient", one, self.function("sqrt", rest))
        raise NotCheckable(f'equations with "{name}" are not checked here')


def plan_of(programs: Sequence[Program]) -> Plan:
    """Operations of several formulas.

    Raises
    ------
    NotCheckable
        A formula switches, or has a function that is not worked with here.
    """
    planner = _Planner()
    outputs = [planner.add(program) for program in programs]
    return Plan(tuple(planner.nodes), tuple(outputs))


class Course:
    """Coefficients of a plan's formulas in powers of time.

    Parameters
    ----------
    names
        Coefficients of each name, lowest power first; what is beyond the list is zero. Lists may grow
        between calls of `advance`.
    """

    def __init__(self, plan: Plan, jets: Jets, names: Mapping[str, list[Jet]]) -> None:
        self.plan, self.jets, self.names = plan, jets, names
        self.values: list[list[Jet]] = [[] for _ in plan.nodes]
        self.inverses: dict[int, Jet] = {}

    def advance(self) -> list[Jet]:
        """The next coefficient of every formula."""
        order = len(self.values[0])
        for place, node in enumerate(self.plan.nodes):
            self.values[place].append(self._coefficient(place, node, order))
        return [self.values[place][order] for place in self.plan.outputs]

    def _coefficient(self, place: int, node: Node, k: int) -> Jet:
        jets, values = self.jets, self.values
        match node.op:
            case "number":
                return jets.constant(node.value) if k == 0 else {}
            case "pi":
                return {0: jets.side(iv.pi(jets.bits))} if k == 0 else {}
            case "name":
                series = self.names[node.name]
                return series[k] if k < len(series) else {}
            case "negative":
                return jets.negative(values[node.args[0]][k])
            case "sum":
                return jets.sum(values[node.args[0]][k], values[node.args[1]][k])
            case "difference":
                return jets.sum(values[node.args[0]][k], jets.negative(values[node.args[1]][k]))
            case "product":
                return self._product(values[node.args[0]], values[node.args[1]], k)
            case "quotient":
                return self._quotient(place, values[node.args[0]], values[node.args[1]], k)
        u, w = (values[arg] for arg in node.args)
        if k == 0:
            return jets.function(node.name, u[0])
        return jets.products(((j, u[j], w[k - j]) for j in range(1, k + 1) if u[j]), k)

    def _product(self, a: list[Jet], b: list[Jet], k: int) -> Jet:
        if a is not b:
            return self.jets.products((1, a[j], b[k - j]) for j in range(k + 1) if a[j] and b[k - j])
        terms = [(2, a[j], a[k - j]) for j in range((k + 1) // 2)]
        if k % 2 == 0:
            terms.append((1, a[k // 2], a[k // 2]))
        return self.jets.products(terms)

    def _quotient(self, place: int, a: list[Jet], b: list[Jet], k: int) -> Jet:
        jets, own = self.jets, self.values[place]
        if k == 0:
            self.inverses[place] = jets.inverse(b[0])
            return jets.product(a[0], self.inverses[place])
        done = jets.products((1, own[j], b[k - j]) for j in range(k) if b[k - j])
        return jets.product(jets.sum(a[k], jets.negative(done)), self.inverses[place])
