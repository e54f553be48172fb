"""Second and third derivatives of a map along directions, and its switching surfaces, over balls."""

from __future__ import annotations

from collections import Counter
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from fractions import Fraction
from functools import lru_cache
from itertools import permutations
from typing import Any

from tinemark.onsets.many_map import ManyMap
from tinemark.systems.balls import ball_floor, ball_function, ball_less
from tinemark.systems.expression import ZERO, Call, Expr, Name, Num
from tinemark.systems.surfaces import domain_edges, switching_surfaces

Evaluator = Callable[..., tuple[Any, ...]]
Partials = dict[tuple[int, tuple[int, ...]], Expr]
"""Derivatives by (which formula, by which states)."""


@dataclass(frozen=True)
class JetEvaluators:
    """What proofs need of a map beyond `BallEvaluators`.

    Attributes
    ----------
    second
        f(*x, r, *v, *w) -> the n values of B(v, w), the second derivative in the states along v and w.
    third
        f(*x, r, *u, *v, *w) -> the n values of C(u, v, w).
    sides
        f(*x, r) -> one value a switching surface or edge of the domain.
    whole
        For each of those, whether the formula switches at whole numbers instead of at zero.
    """

    second: Evaluator
    third: Evaluator
    sides: Evaluator
    whole: tuple[bool, ...]

    def check_sides(self, x: Sequence[Any], r: Any) -> None:
        """Raise `SwitchingTouched` unless the whole ball lies off every surface and edge.

        The derivatives may have lost a surface (floor has derivative zero on both sides of its jumps), so
        the surfaces are looked at by themselves.
        """
        if not self.whole:
            return
        for side, whole in zip(self.sides(*x, r), self.whole, strict=True):
            if whole:
                ball_floor(side)
            else:
                ball_less(side, 0)


def jets_along(many: ManyMap, count: int) -> list[JetEvaluators]:
    """The evaluators at each of so many points of a cycle."""
    known: dict[int, JetEvaluators] = {}
    maps = many.along(count)
    for each in maps:
        if id(each) not in known:
            known[id(each)] = jet_evaluators(each)
    return [known[id(each)] for each in maps]


def jet_evaluators(many: ManyMap) -> JetEvaluators:
    """The evaluators of a map: its own, or compiled from its formulas."""
    own: JetEvaluators | None = many.own_jets()
    return own or _compiled(many)


@lru_cache(maxsize=64)
def _compiled(many: ManyMap) -> JetEvaluators:
    n = many.size
    # A space cannot stand in a name, so these never meet a name of the system.
    u, v, w = (tuple(f"{letter} {place}" for place in range(n)) for letter in "uvw")
    seconds = _further(many, _further(many, {(at, ()): expr for at, expr in enumerate(many.formulas)}))
    thirds = _further(many, seconds)

    def along(known: Partials, directions: Sequence[Sequence[str]]) -> tuple[Expr, ...]:
        totals: list[Expr] = [ZERO] * n
        for (formula, places), value in known.items():
            totals[formula] = _plus(totals[formula], _times(value, _spread(places, directions)))
        return tuple(totals)

    surfaces = switching_surfaces(many.formulas) + domain_edges(many.formulas)
    return JetEvaluators(
        ball_function(along(seconds, (v, w)), (*many.names, *v, *w)),
        ball_function(along(thirds, (u, v, w)), (*many.names, *u, *v, *w)),
        ball_function(tuple(surface.expr for surface in surfaces), many.names) if surfaces else _no_sides,
        tuple(surface.kind == "integer" for surface in surfaces),
    )


def _further(many: ManyMap, known: Partials) -> Partials:
    """Partial derivatives of the next order: those of what is not zero, in rising order of the states."""
    from tinemark.systems.derivatives import derivative

    found: Partials = {}
    for (formula, places), expr in known.items():
        for place in range(places[-1] if places else 0, many.size):
            value = derivative(expr, many.states[place])
            if value != ZERO:
                found[formula, (*places, place)] = value
    return found


def _no_sides(*_: Any) -> tuple[Any, ...]:
    return ()


def _spread(places: Sequence[int], directions: Sequence[Sequence[str]]) -> Expr:
    """Sum over all distinct orders of a mixed derivative of the product of its directions' components."""
    total: Expr = ZERO
    for order in Counter(permutations(places)):
        product: Expr = Name(directions[0][order[0]])
        for direction, place in zip(directions[1:], order[1:], strict=True):
            product = Call("mul", (product, Name(direction[place])))
        total = _plus(total, product)
    return total


def _plus(a: Expr, b: Expr) -> Expr:
    return b if a == ZERO else Call("add", (a, b))


def _times(a: Expr, b: Expr) -> Expr:
    return b if a == Num(Fraction(1)) else Call("mul", (a, b))
