"""What a Taylor integrator needs of a system's rates: derivatives along directions, over series and discs.

A driven system's time is counted in periods, so that a strobe is the state at time 1 whatever the swept
parameter does to the period: rates are multiplied by the period T, and t stands for T times the new time.
"""

from __future__ import annotations

from collections import Counter
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction
from functools import lru_cache
from itertools import permutations

from tinemark.equations.enclosure_discs import DiscFunction, disc_function
from tinemark.equations.series import SeriesFunction, series_function
from tinemark.systems.balls import BallFunction, ball_function
from tinemark.systems.expression import ONE, ZERO, Call, Cond, Expr, Name, Num, children
from tinemark.systems.system import TIME, System

Partials = dict[tuple[int, tuple[int, ...]], Expr]
"""Derivatives by (which formula, by which of the states)."""


@dataclass(frozen=True)
class Rates:
    """Rates of a driven or free-running system along one parameter, the others at their values.

    Attributes
    ----------
    states, parameter
        Names.
    rates
        Rate of each state; in a driven system the time unit is one period, and time is `t`.
    section
        Free-running: passes zero from below where a sample is taken. None: driven.
    period
        Driven: the strobe period, a formula in the parameter. None: free-running.
    """

    states: tuple[str, ...]
    parameter: str
    rates: tuple[Expr, ...]
    section: Expr | None
    period: Expr | None = None

    @property
    def size(self) -> int:
        """Number of states."""
        return len(self.states)

    @property
    def names(self) -> tuple[str, ...]:
        """States, swept parameter, time."""
        return (*self.states, self.parameter, TIME)


def rates_of(system: System, parameter: str) -> Rates:
    """The rates of a system along a parameter.

    Raises
    ------
    SystemFileError
        The parameter is not known, or the system lacks its strobe period or section.
    """
    swept = system.parameter(parameter).name
    fixed: dict[str, Expr] = {p.name: Num(p.value.fraction) for p in system.parameters if p.name != swept}
    if system.kind == "flow":
        section = put_in_all(system.crosses_expression, fixed)
        if system.sample is not None and system.sample.direction == "falling":
            section = Call("neg", (section,))
        rates = tuple(put_in_all(expr, fixed) for expr in system.expressions)
        return Rates(system.state_names, swept, rates, section)
    period = put_in_all(system.every_expression, fixed)
    scaled = {**fixed, TIME: Call("mul", (period, Name(TIME)))}
    rates = tuple(Call("mul", (period, put_in_all(expr, scaled))) for expr in system.expressions)
    return Rates(system.state_names, swept, rates, None, period)


def put_in_all(expr: Expr, values: Mapping[str, Expr]) -> Expr:
    """Replace names by expressions; what becomes constant arithmetic is worked out.

    Folding keeps an exponent that becomes a whole number from turning into a logarithm.
    """
    if isinstance(expr, Name):
        return values.get(expr.name, expr)
    if isinstance(expr, Cond):
        left, right, then, other = (put_in_all(part, values) for part in children(expr))
        return Cond(left, expr.op, right, then, other)
    if not isinstance(expr, Call):
        return expr
    args = tuple(put_in_all(arg, values) for arg in children(expr))
    numbers = [arg.value for arg in args if isinstance(arg, Num)]
    folded = _folded(expr.fn, numbers) if len(numbers) == len(args) else None
    return Call(expr.fn, args) if folded is None else Num(folded)


def _folded(fn: str, numbers: Sequence[Fraction]) -> Fraction | None:
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
    return None


@dataclass(frozen=True)
class RateFunctions:
    """Compiled rates of n states. Directions are sequences of n series.

    Attributes
    ----------
    rate
        f(*x, r, t) -> n rates, over series.
    turn
        f(*x, r, t) -> n*n derivatives in the states, by rows.
    push
        f(*x, r, t) -> n derivatives in the parameter.
    bend
        f(*x, r, t, *v) -> n*(n + 1): the derivative of (turn v) in each state and in the parameter, by rows.
    second, third
        f(*x, r, t, *v, *w) -> n: second derivative in the states along v and w; third along v three times,
        f(*x, r, t, *v).
    disc
        The rates over complex boxes.
    real
        The rates over balls.
    """

    rate: SeriesFunction
    turn: SeriesFunction
    push: SeriesFunction
    bend: SeriesFunction
    second: SeriesFunction
    third: SeriesFunction
    disc: DiscFunction
    real: BallFunction


@dataclass(frozen=True)
class SectionFunctions:
    """The section g and what derivatives of its return map need, over balls.

    Attributes
    ----------
    along
        g over series: f(*x, r, t) -> 1.
    first
        f(*x, r) -> g, its n derivatives in the states and the one in the parameter; then the n rates, their
        n*n derivatives in the states by rows, and their n in the parameter.
    pair
        f(*x, r, *v, *w) -> second derivative of g along v and w; then the n of the rates.
    slant
        f(*x, r, *v) -> second derivative of g along v and the parameter.
    third
        f(*x, r, *v) -> third derivative of g along v three times.
    """

    along: SeriesFunction
    first: BallFunction
    pair: BallFunction
    slant: BallFunction
    third: BallFunction


def _directions(n: int) -> tuple[tuple[str, ...], tuple[str, ...]]:
    # A space cannot stand in a name, so these never meet a name of the system.
    return tuple(f"v {place}" for place in range(n)), tuple(f"w {place}" for place in range(n))


@lru_cache(maxsize=32)
def rate_functions(rates: Rates) -> RateFunctions:
    """Compile the rates and their derivatives."""
    from tinemark.systems.derivatives import derivative

    n, names = rates.size, rates.names
    v, w = _directions(n)
    first = _further(rates.states, {(at, ()): expr for at, expr in enumerate(rates.rates)})
    second = _further(rates.states, first)
    third = _further(rates.states, second)
    turn = [first.get((i, (j,)), ZERO) for i in range(n) for j in range(n)]
    bend = []
    for i in range(n):
        for j in range(n):
            row = [second.get((i, (min(j, k), max(j, k))), ZERO) for k in range(n)]
            bend.append(_combined(row, v))
        bend.append(_combined([derivative(entry, rates.parameter) for entry in turn[i * n : i * n + n]], v))
    push = tuple(derivative(expr, rates.parameter) for expr in rates.rates)
    return RateFunctions(
        rate=series_function(rates.rates, names),
        turn=series_function(tuple(turn), names),
        push=series_function(push, names),
        bend=series_function(tuple(bend), (*names, *v)),
        second=series_function(_along(n, second, (v, w)), (*names, *v, *w)),
        third=series_function(_along(n, third, (v, v, v)), (*names, *v)),
        disc=disc_function(rates.rates, names),
        real=ball_function(rates.rates, names),
    )


@lru_cache(maxsize=32)
def section_functions(rates: Rates) -> SectionFunctions:
    """Compile the section of a free-running system."""
    from tinemark.systems.derivatives import derivative

    assert rates.section is not None
    n, names = rates.size, (*rates.states, rates.parameter)
    v, w = _directions(n)
    firsts = _further(rates.states, {(at, ()): expr for at, expr in enumerate((rates.section, *rates.rates))})
    seconds = _further(rates.states, firsts)
    slope = [firsts.get((0, (j,)), ZERO) for j in range(n)]
    g_r = derivative(rates.section, rates.parameter)
    jacobian = [firsts.get((1 + i, (j,)), ZERO) for i in range(n) for j in range(n)]
    push = [derivative(expr, rates.parameter) for expr in rates.rates]
    slant = _combined([derivative(entry, rates.parameter) for entry in slope], v)
    thirds = _further(rates.states, {key: value for key, value in seconds.items() if key[0] == 0})
    first = (rates.section, *slope, g_r, *rates.rates, *jacobian, *push)
    return SectionFunctions(
        along=series_function((rates.section,), rates.names),
        first=ball_function(first, names),
        pair=ball_function(_along(1 + n, seconds, (v, w)), (*names, *v, *w)),
        slant=ball_function((slant,), (*names, *v)),
        third=ball_function(_along(1, thirds, (v, v, v)), (*names, *v)),
    )


def _further(states: Sequence[str], known: Partials) -> Partials:
    """Partial derivatives of the next order: those of what is not zero, in rising order of the states."""
    from tinemark.systems.derivatives import derivative

    found: Partials = {}
    for (formula, places), expr in known.items():
        for place in range(places[-1] if places else 0, len(states)):
            value = derivative(expr, states[place])
            if value != ZERO:
                found[formula, (*places, place)] = value
    return found


def _along(count: int, known: Partials, directions: Sequence[Sequence[str]]) -> tuple[Expr, ...]:
    totals: list[Expr] = [ZERO] * count
    for (formula, places), value in known.items():
        totals[formula] = _plus(totals[formula], _times(value, _spread(places, directions)))
    return tuple(totals)


def _spread(places: Sequence[int], directions: Sequence[Sequence[str]]) -> Expr:
    """Sum over all distinct orders of a mixed derivative of the product of its directions' components."""
    total: Expr = ZERO
    for order in Counter(permutations(places)):
        product: Expr = Name(directions[0][order[0]])
        for direction, place in zip(directions[1:], order[1:], strict=True):
            product = Call("mul", (product, Name(direction[place])))
        total = _plus(total, product)
    return total


def _combined(row: Sequence[Expr], vector: Sequence[str]) -> Expr:
    total: Expr = ZERO
    for entry, name in zip(row, vector, strict=True):
        if entry != ZERO:
            total = _plus(total, _times(entry, Name(name)))
    return total


def _plus(a: Expr, b: Expr) -> Expr:
    return b if a == ZERO else Call("add", (a, b))


def _times(a: Expr, b: Expr) -> Expr:
    return b if a == ONE else Call("mul", (a, b))
