"""Turning frames along an orbit of several states, so that its box does not grow by being drawn upright.

Each step's box is a parallelepiped whose axes follow the directions that the orbit stretches (Lohner, 1987):
the orthogonal factor of the derivative times the frame before, in doubles. Any frame is right; a bad
one only makes boxes wider. Its inverse is enclosed.
"""

from __future__ import annotations

import math
from collections.abc import Sequence

from mpmath import libmp

from tinemark.verify import intervals as iv
from tinemark.verify.claims import Undecided
from tinemark.verify.intervals import ONE, ZERO, Interval

Rows = list[list[Interval]]


def unit(size: int) -> Rows:
    """The unit matrix."""
    return [[ONE if i == j else ZERO for j in range(size)] for i in range(size)]


def product(a: Sequence[Sequence[Interval]], b: Sequence[Sequence[Interval]], bits: int) -> Rows:
    """Product of two square matrices."""
    size = len(a)
    return [
        [_dot([(a[i][k], b[k][j]) for k in range(size)], bits) for j in range(len(b[0]))] for i in range(size)
    ]


def applied(rows: Sequence[Sequence[Interval]], column: Sequence[Interval], bits: int) -> list[Interval]:
    """Product of a matrix and a column."""
    return [_dot(list(zip(row, column, strict=True)), bits) for row in rows]


def _dot(pairs: Sequence[tuple[Interval, Interval]], bits: int) -> Interval:
    total = ZERO
    for x, y in pairs:
        if x != ZERO and y != ZERO:
            term = iv.mul(x, y, bits)
            total = term if total is ZERO else iv.add(total, term, bits)
    return total


def turned(rows: Sequence[Sequence[Interval]]) -> Rows | None:
    """Orthogonal directions of a matrix's columns, first to last, as exact numbers; None for none."""
    size = len(rows)
    columns = [[_double(rows[i][j]) for i in range(size)] for j in range(size)]
    found: list[list[float]] = []
    for column in columns:
        largest = max(map(abs, column))
        if not 0 < largest < math.inf:
            return None
        left = [value / largest for value in column]
        # Twice, for what rounding leaves of the directions before (Giraud, Langou & Rozloznik, 2005).
        for _ in range(2):
            for before in found:
                share = sum(x * y for x, y in zip(left, before, strict=True))
                left = [x - share * y for x, y in zip(left, before, strict=True)]
        length = math.sqrt(sum(x * x for x in left))
        if length < 1e-12:
            left = _missing(found, size)
            length = math.sqrt(sum(x * x for x in left))
        found.append([x / length for x in left])
    return [[_exact(found[j][i]) for j in range(size)] for i in range(size)]


def _missing(found: Sequence[Sequence[float]], size: int) -> list[float]:
    """A direction square to those found."""
    best = [0.0] * size
    for place in range(size):
        left = [float(i == place) for i in range(size)]
        for before in found:
            share = sum(x * y for x, y in zip(left, before, strict=True))
            left = [x - share * y for x, y in zip(left, before, strict=True)]
        if sum(x * x for x in left) > sum(x * x for x in best):
            best = left
    return best


def inverse(rows: Sequence[Sequence[Interval]], bits: int) -> Rows:
    """Enclosure of the inverse of a matrix that is nearly orthogonal, by elimination.

    Raises
    ------
    Undecided
        A pivot may be zero.
    """
    size = len(rows)
    work = [list(row) + unit_row for row, unit_row in zip(rows, unit(size), strict=True)]
    for column in range(size):
        pivot = max(range(column, size), key=lambda i: abs(_double(work[i][column])))
        work[column], work[pivot] = work[pivot], work[column]
        lead = work[column][column]
        work[column] = [entry if entry == ZERO else iv.div(entry, lead, bits) for entry in work[column]]
        for other in range(size):
            factor = work[other][column]
            if other != column and factor != ZERO:
                work[other] = [
                    entry if below == ZERO else iv.sub(entry, iv.mul(factor, below, bits), bits)
                    for entry, below in zip(work[other], work[column], strict=True)
                ]
    return [row[size:] for row in work]


def _double(x: Interval) -> float:
    if not iv.is_finite(x):
        raise Undecided("the orbit escapes")
    try:
        return float(libmp.to_float(x[0]))
    except OverflowError as error:
        raise Undecided("the orbit escapes") from error


def _exact(value: float) -> Interval:
    point = libmp.from_float(value)
    return point, point
