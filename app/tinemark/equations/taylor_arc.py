"""Taylor polynomials of one solution and of its variations, from an exact start, with balls as coefficients.

The order is doubled by Newton's method for power series: with x known to t^m, Y the fundamental matrix
of the variational equations and V its inverse, both known as far, x - Y Int V (x' - f(x)) is right to t^2m
(Brent and Kung 1978, J. ACM 25:581). Every formula is an identity of formal power series, and what is known
to be zero is left out, so the balls enclose the true coefficients.

Higher variations are quadratures with the same two matrices. They need far fewer bits than the solution,
and are worked out with few.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import flint
from flint import arb, arb_series

from tinemark.equations.series import working
from tinemark.equations.taylor_rates import RateFunctions

LOW_BITS = 64
"""Precision of second and third variations."""

Rows = list[list[list[Any]]]
"""A matrix of coefficient lists, by rows."""


@dataclass(frozen=True)
class Arc:
    """Coefficients of a solution from an exact start at an exact value of the parameter.

    Attributes
    ----------
    x
        For each state its coefficients, the start's value first.
    turn
        Those of the derivative in the start, by rows.
    back
        Those of its inverse, at least half as many.
    r, clock
        Parameter and starting time, exact balls.
    """

    functions: RateFunctions
    x: list[list[Any]]
    turn: Rows
    back: Rows
    r: Any
    clock: Any

    @property
    def size(self) -> int:
        """Number of states."""
        return len(self.x)


def arc_from(
    functions: RateFunctions,
    start: Sequence[Any],
    r: Any,
    clock: Any,
    order: int,
    bits: int,
    *,
    with_turn: bool = True,
    low: int = 0,
) -> Arc:
    """Solve for the coefficients below t^order.

    Parameters
    ----------
    with_turn
        Whether the derivative in the start is wanted in full; without, about half of it is there.
    low
        Coefficients wanted of the inverse matrix, if more than half of the others.

    Raises
    ------
    ArithmeticError
        A coefficient is not finite: the start lies outside the domain of a formula.
    """
    n = len(start)
    with working(bits, order):
        x = [[value] for value in start]
        turn: Rows = [[[arb(int(i == j))] for j in range(n)] for i in range(n)]
        back: Rows = [[[arb(int(i == j))] for j in range(n)] for i in range(n)]
        known, linear = 1, 1
        while known < order:
            if linear < known:
                _extend_matrices(functions, x, turn, back, r, clock, linear, known, known)
                linear = known
            following = min(2 * known, order)
            _extend_states(functions, x, turn, back, r, clock, known, following)
            known = following
        if with_turn or low > linear:
            _extend_matrices(functions, x, turn, back, r, clock, linear, order, min(low, order))
        if not all(value.is_finite() for row in x for value in row):
            raise ArithmeticError("the solution left the domain of a formula")
    return Arc(functions, x, turn, back, r, clock)


def _arguments(x: Sequence[Sequence[Any]], r: Any, clock: Any, length: int) -> list[Any]:
    return [*(arb_series(row[:length], length) for row in x), r, arb_series([clock, 1], length)]


def _extend_states(
    functions: RateFunctions, x: list[list[Any]], turn: Rows, back: Rows, r: Any, clock: Any, m: int, end: int
) -> None:
    """Coefficients m … end - 1 of the states."""
    flint.ctx.cap = end - 1
    rates = functions.rate(*_arguments(x, r, clock, end - 1))
    length = end - m
    flint.ctx.cap = length
    residual = [_tail(rate, m - 1, length) for rate in rates]
    moved = _integrated(_applied(_series(back, length), residual), m, length)
    for row, more in zip(x, _applied(_series(turn, length), moved), strict=True):
        row += _padded(more, length)


def _extend_matrices(
    functions: RateFunctions,
    x: list[list[Any]],
    turn: Rows,
    back: Rows,
    r: Any,
    clock: Any,
    h: int,
    end: int,
    end_back: int,
) -> None:
    """Coefficients h … end - 1 of the fundamental matrix, and h … end_back - 1 of its inverse."""
    n = len(x)
    flint.ctx.cap = end - 1
    flat = functions.turn(*_arguments(x, r, clock, end - 1))
    jacobian = [list(flat[i * n : i * n + n]) for i in range(n)]
    length = end - h
    driven = _product(jacobian, _series(turn, end - 1))
    pulled = _product(_series(back, end - 1), jacobian) if end_back > h else None
    flint.ctx.cap = length
    left, right = _series(turn, length), _series(back, length)
    residual = [[_tail(entry, h - 1, length) for entry in row] for row in driven]
    inner = _product(right, residual)
    more = _product(left, [_integrated(row, h, length) for row in inner])
    if pulled is not None:
        length_back = end_back - h
        flint.ctx.cap = length_back
        lost = [[_tail(entry, h - 1, length_back) for entry in row] for row in pulled]
        inner = [_integrated(row, h, length_back) for row in _product(lost, left)]
        less = _product(inner, right)
        for row, given in zip(back, less, strict=True):
            for entry, part in zip(row, given, strict=True):
                entry += [-value for value in _padded(part, length_back)]
    for row, given in zip(turn, more, strict=True):
        for entry, part in zip(row, given, strict=True):
            entry += _padded(part, length)


def _series(rows: Rows, length: int) -> list[list[Any]]:
    return [[arb_series(entry[:length], length) for entry in row] for row in rows]


def _padded(series: Any | None, length: int) -> list[Any]:
    coefficients = [] if series is None else series.coeffs()[:length]
    return coefficients + [arb(0)] * (length - len(coefficients))


def _tail(series: Any | None, start: int, length: int) -> Any | None:
    """Coefficients from `start` on, moved to the front."""
    if series is None:
        return None
    return arb_series(series.coeffs()[start : start + length], length)


def _integrated(row: Sequence[Any | None], start: int, length: int) -> list[Any | None]:
    """Integrals of t^(start - 1) times each series, over t^start."""
    found: list[Any | None] = []
    for series in row:
        if series is None:
            found.append(None)
            continue
        parts = [value / (start + k) for k, value in enumerate(series.coeffs()[:length])]
        found.append(arb_series(parts, length))
    return found


def _sum(terms: Sequence[tuple[Any | None, Any | None]]) -> Any | None:
    total: Any | None = None
    for a, b in terms:
        if a is not None and b is not None:
            total = a * b if total is None else total + a * b
    return total


def _applied(matrix: Sequence[Sequence[Any | None]], column: Sequence[Any | None]) -> list[Any | None]:
    return [_sum(list(zip(row, column, strict=True))) for row in matrix]


def _product(a: Sequence[Sequence[Any | None]], b: Sequence[Sequence[Any | None]]) -> list[list[Any | None]]:
    columns = list(zip(*b, strict=True))
    return [[_sum(list(zip(row, column, strict=True))) for column in columns] for row in a]


class LowArc:
    """The variations of an arc to few bits: first in the parameter, second and third along directions.

    Call its methods, and use their series, at `LOW_BITS` and the length given.
    """

    def __init__(self, arc: Arc, length: int) -> None:
        self.arc, self.length = arc, length
        self.functions = arc.functions
        self.turn = _series(arc.turn, length)
        self.back = _series(arc.back, length)
        self.arguments = _arguments(arc.x, arc.r, arc.clock, length)

    def driven(self, forces: Sequence[Any | None]) -> list[Any | None]:
        """The solution of the variational equations with these forces, from zero."""
        pulled = _applied(self.back, forces)
        whole = [None if part is None else part.integral() for part in pulled]
        return _applied(self.turn, whole)

    def slope(self) -> list[Any | None]:
        """Derivative of the states in the parameter."""
        return self.driven(self.functions.push(*self.arguments))

    def carried(self, vector: Sequence[Any]) -> list[Any]:
        """Derivative of the states along a direction at the start."""
        return [_filled(part) for part in _applied(self.turn, [_constant(value) for value in vector])]

    def bent(self, vector: Sequence[Any], slope: Sequence[Any | None]) -> list[list[Any | None]]:
        """Derivative of `carried(vector)` in each state of the start and in the parameter, by columns."""
        n = self.arc.size
        flat = self.functions.bend(*self.arguments, *self.carried(vector))
        rows = [list(flat[i * (n + 1) : (i + 1) * (n + 1)]) for i in range(n)]
        columns = []
        for k in range(n):
            turn = [self.turn[j][k] for j in range(n)]
            columns.append(self.driven(_applied([row[:n] for row in rows], turn)))
        steady = _applied([row[:n] for row in rows], slope)
        forces = [_plus(part, row[n]) for part, row in zip(steady, rows, strict=True)]
        columns.append(self.driven(forces))
        return columns

    def curved(self, first: Sequence[Any], second: Sequence[Any]) -> tuple[list[Any], list[Any]]:
        """What a curve of starts adds to its coefficients of e^2 and e^3 by bending.

        Parameters
        ----------
        first, second
            The starts' coefficients of e and e^2.

        Returns
        -------
        tuple
            Coefficients of e^2 for a start without e^2, and of e^3 for a start without e^3.
        """
        along = self.carried(first)
        squares = self.functions.second(*self.arguments, *along, *along)
        bent = [_filled(part) for part in self.driven([_scaled(part, 2) for part in squares])]
        whole = [a + b for a, b in zip(self.carried(second), bent, strict=True)]
        mixed = self.functions.second(*self.arguments, *along, *whole)
        cubes = self.functions.third(*self.arguments, *along)
        forces = [_plus(a, _scaled(b, 6)) for a, b in zip(mixed, cubes, strict=True)]
        return bent, [_filled(part) for part in self.driven(forces)]


def _constant(value: Any) -> Any:
    return arb_series([value])


def _filled(series: Any | None) -> Any:
    return arb_series([]) if series is None else series


def _plus(a: Any | None, b: Any | None) -> Any | None:
    if a is None or b is None:
        return a if b is None else b
    return a + b


def _scaled(series: Any | None, divisor: int) -> Any | None:
    return None if series is None else series / divisor
