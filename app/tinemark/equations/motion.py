"""What an integrator moves: the rates of a system and of its variations, and when a sample is taken."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass, replace

from tinemark.systems.expression import ZERO, Call, Expr, Name
from tinemark.systems.system import System

TIME = "t"


@dataclass(frozen=True)
class Motion:
    """Rates of change and the rule of sampling, read from a system along one parameter.

    Attributes
    ----------
    states, swept, fixed
        Names of the states, of the swept parameter and of the others.
    rates
        Rate of each state, in these names; of a driven system in `t` as well.
    period
        Strobe period, a formula in the parameters; None for a free-running system.
    section
        Passes zero from below where a sample is taken; None for a driven system.
    section_slope
        Its rate of change, in these names and in `rate_name`.
    rows
        Rates of what is integrated beside the states, in `row_name`; its errors steer the steps too.
    """

    states: tuple[str, ...]
    swept: str
    fixed: tuple[str, ...]
    rates: tuple[Expr, ...]
    period: Expr | None = None
    section: Expr | None = None
    section_slope: Expr | None = None
    rows: tuple[Expr, ...] = ()

    @property
    def size(self) -> int:
        """Number of states."""
        return len(self.states)

    @property
    def is_driven(self) -> bool:
        """Whether samples are taken once a period."""
        return self.period is not None


def motion(
    system: System, parameter: str, along: Callable[[Expr, Mapping[str, Expr]], Expr] | None = None
) -> Motion:
    """The motion of a driven or free-running system, without variations.

    Parameters
    ----------
    along
        Derivative of a formula along a direction, for the section's slope; by default one that takes
        sympy along.

    Raises
    ------
    SystemFileError
        The parameter is not known, or the system has no period or section.
    """
    swept = system.parameter(parameter).name
    fixed = tuple(name for name in system.parameter_names if name != swept)
    plain = Motion(system.state_names, swept, fixed, system.expressions)
    if system.kind == "driven":
        return replace(plain, period=system.every_expression)
    section = rising_section(system)
    if along is None:
        return replace(plain, section=section, section_slope=_slope(section, system.state_names))
    direction = {name: Name(rate_name(i)) for i, name in enumerate(system.state_names)}
    return replace(plain, section=section, section_slope=along(section, direction))


def rising_section(system: System) -> Expr:
    """The section's formula, its sign chosen so that a sample is taken where it rises."""
    assert system.sample is not None
    section = system.crosses_expression
    return section if system.sample.direction == "rising" else Call("neg", (section,))


def row_name(place: int) -> str:
    """Name of a row in formulas; no formula of a user's can hold it."""
    return f"row {place}"


def rate_name(place: int) -> str:
    """Name of a state's rate in the section's slope."""
    return f"rate {place}"


def with_variations(plain: Motion, order: int) -> Motion:
    """The motion with its variational equations as rows.

    Order 1: the columns of the derivatives in each state and in the swept parameter, `n` rows a column.
    Order 2: after these the derivative along a vector (one column q), and the derivatives of q in each
    state and in the swept parameter. The vector is given by where q starts. All other columns start
    as in `tinemark.equations.return_map` (Hairer, Norsett and Wanner 1993, section I.14).
    """
    n = plain.size
    if order == 0:
        return replace(plain, rows=())
    first = _Partials(plain)
    columns = [first.along(_column(n * c, n)) for c in range(n)]
    columns.append(_sum(first.along(_column(n * n, n)), first.parameter()))
    if order == 2:
        vector = _column(n * (n + 1), n)
        columns.append(first.along(vector))
        for c in range(n + 1):
            place = n * (n + 2 + c)
            own = _sum(first.along(_column(place, n)), first.second(_column(n * c, n), vector))
            columns.append(_sum(own, first.second_parameter(vector)) if c == n else own)
    return replace(plain, rows=tuple(rate for column in columns for rate in column))


class _Partials:
    """Partial derivatives of the rates, contracted with columns of names."""

    def __init__(self, plain: Motion) -> None:
        from tinemark.systems.derivatives import derivative

        self.plain, self.derivative = plain, derivative

    def along(self, column: list[Expr]) -> list[Expr]:
        """Jacobian of the rates times a column."""
        return [
            _total(
                _product(self.derivative(rate, state), entry)
                for state, entry in zip(self.plain.states, column, strict=True)
            )
            for rate in self.plain.rates
        ]

    def parameter(self) -> list[Expr]:
        """Derivative of the rates in the swept parameter."""
        return [self.derivative(rate, self.plain.swept) for rate in self.plain.rates]

    def second(self, one: list[Expr], other: list[Expr]) -> list[Expr]:
        """Second derivative of the rates along two columns."""
        states = self.plain.states
        return [
            _total(
                _product(self.derivative(rate, *sorted((a, b), key=states.index)), _product(u, v))
                for a, u in zip(states, one, strict=True)
                for b, v in zip(states, other, strict=True)
            )
            for rate in self.plain.rates
        ]

    def second_parameter(self, column: list[Expr]) -> list[Expr]:
        """Mixed derivative of the rates in the swept parameter and along a column."""
        return [
            _total(
                _product(self.derivative(rate, state, self.plain.swept), entry)
                for state, entry in zip(self.plain.states, column, strict=True)
            )
            for rate in self.plain.rates
        ]


def _slope(section: Expr, states: tuple[str, ...]) -> Expr:
    from tinemark.systems.derivatives import derivative

    return _total(
        _product(derivative(section, state), Name(rate_name(place))) for place, state in enumerate(states)
    )


def _column(first: int, size: int) -> list[Expr]:
    return [Name(row_name(first + place)) for place in range(size)]


def _product(one: Expr, other: Expr) -> Expr:
    return ZERO if ZERO in (one, other) else Call("mul", (one, other))


def _total(terms: object) -> Expr:
    total: Expr = ZERO
    for term in terms:  # type: ignore[attr-defined]
        if term != ZERO:
            total = term if total == ZERO else Call("add", (total, term))
    return total


def _sum(one: list[Expr], other: list[Expr]) -> list[Expr]:
    return [_total(pair) for pair in zip(one, other, strict=True)]
