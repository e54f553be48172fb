"""One-state map seen along one parameter: its formula, the derivatives the solvers need, its extent."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from fractions import Fraction
from functools import cached_property, lru_cache

from tinemark.systems.expression import Call, Cond, Expr, Name, Num, children, names_in
from tinemark.systems.surfaces import Surface, domain_edges
from tinemark.systems.system import System

DERIVATIVES = {"f": "", "fx": "x", "fr": "r", "fxx": "xx", "fxr": "xr", "fxxx": "xxx"}
"""The derivatives carried along a cycle; x is the state, r the swept parameter."""


@dataclass(frozen=True)
class OneMap:
    """A map x -> f(x, r) of one state along the parameter r.

    Attributes
    ----------
    state, parameter
        Names of the state and of the swept parameter.
    fixed
        (name, exact value) of every other parameter, in the system's order.
    derivatives
        Expression of each entry of `DERIVATIVES`, in all names.
    observe
        Observed quantity, in all names.
    surfaces
        Where the formula switches between smooth pieces.
    start, value
        Where an orbit starts when nothing better is known, and at what parameter.
    extent
        The range the state lives in, where the system gives one.
    system
        The system it was made of, for what is written down of a proof; two maps are the same without it.
    """

    state: str
    parameter: str
    fixed: tuple[tuple[str, Fraction], ...]
    derivatives: tuple[tuple[str, Expr], ...]
    observe: Expr
    surfaces: tuple[Surface, ...]
    start: Fraction
    value: Fraction
    extent: tuple[Fraction, Fraction] | None
    system: System = field(compare=False, repr=False)

    @cached_property
    def exact_derivatives(self) -> dict[str, Expr]:
        """The derivatives with the fixed parameters put in as exact rationals."""
        values = dict(self.fixed)
        return {name: put_in(expr, values) for name, expr in self.derivatives}

    @cached_property
    def exact_observe(self) -> Expr:
        """The observed quantity with the fixed parameters put in."""
        return put_in(self.observe, dict(self.fixed))

    @cached_property
    def exact_surfaces(self) -> tuple[Surface, ...]:
        """The switching surfaces and edges of the domain, with the fixed parameters put in."""
        values = dict(self.fixed)
        return tuple(Surface(put_in(surface.expr, values), surface.kind) for surface in self.surfaces)

    @property
    def parameter_size(self) -> Fraction:
        """A size that is typical of the swept parameter: its range, else its value, else 1."""
        swept = self.system.parameter(self.parameter)
        if swept.range is not None:
            return swept.range[1].fraction - swept.range[0].fraction or Fraction(1)
        return abs(swept.value.fraction) or Fraction(1)

    @property
    def observes_state(self) -> bool:
        """Whether the observed quantity is the state itself."""
        return self.observe == Name(self.state)


@lru_cache(maxsize=64)
def one_map(system: System, parameter: str) -> OneMap:
    """The one-state map of a system along a parameter.

    Raises
    ------
    ValueError
        The system has more than one state.
    """
    if len(system.states) != 1:
        raise ValueError("the system has more than one state")
    (state,) = system.states
    swept = system.parameter(parameter).name
    fixed = tuple((p.name, p.value.fraction) for p in system.parameters if p.name != swept)
    extent = (state.range[0].fraction, state.range[1].fraction) if state.range is not None else None
    return OneMap(
        state=state.name,
        parameter=swept,
        fixed=fixed,
        derivatives=_derivatives(system.expressions[0], state.name, swept),
        observe=system.observe_expression,
        surfaces=system.surfaces + domain_edges(system.expressions),
        start=state.start.fraction,
        # Only what is used: a map with a known range is the same one wherever the parameter stands.
        value=Fraction(0) if extent is not None else system.parameter(parameter).value.fraction,
        extent=extent,
        system=system,
    )


@lru_cache(maxsize=64)
def _derivatives(formula: Expr, state: str, parameter: str) -> tuple[tuple[str, Expr], ...]:
    from tinemark.systems.derivatives import derivative

    by_order: dict[str, Expr] = {"": formula}
    names = {"x": state, "r": parameter}
    for order in ("x", "r", "xx", "xr", "xxx"):
        by_order[order] = derivative(by_order[order[:-1]], names[order[-1]])
    return tuple((label, by_order[order]) for label, order in DERIVATIVES.items())


def put_in(expr: Expr, values: Mapping[str, Fraction]) -> Expr:
    """Replace names by exact rationals and fold what becomes constant.

    Folding matters beyond speed: an exponent that becomes a whole number turns a logarithm into
    multiplications, which hold for negative bases too.
    """
    if isinstance(expr, Name):
        return Num(values[expr.name]) if expr.name in values else expr
    if isinstance(expr, Cond):
        return Cond(
            put_in(expr.left, values),
            expr.op,
            put_in(expr.right, values),
            put_in(expr.then, values),
            put_in(expr.other, values),
        )
    if not isinstance(expr, Call):
        return expr
    args = tuple(put_in(arg, values) for arg in children(expr))
    numbers = [arg.value for arg in args if isinstance(arg, Num)]
    if len(numbers) == len(args):
        folded = _folded(expr.fn, numbers)
        if folded is not None:
            return Num(folded)
    return Call(expr.fn, args)


def _folded(fn: str, numbers: list[Fraction]) -> Fraction | None:
    first, last = numbers[0], numbers[-1]
    if fn == "add":
        return first + last
    if fn == "sub":
        return first - last
    if fn == "mul":
        return first * last
    if fn == "neg":
        return -first
    if fn == "div" and last != 0:
        return first / last
    # Small whole powers only: a tower of powers must not be worked out.
    small = max(abs(first.numerator), first.denominator) < 10**30
    if fn == "pow" and last.denominator == 1 and abs(last) <= 64 and small and first != 0:
        return Fraction(first ** int(last))
    return None


def depends_on(expr: Expr, name: str) -> bool:
    """Whether a formula uses a name."""
    return name in names_in(expr)
