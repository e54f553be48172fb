"""The Krawczyk test in any number of unknowns (Krawczyk, 1969; Moore, 1977)."""

from __future__ import annotations

from collections.abc import Sequence
from fractions import Fraction

from mpmath import libmp

from tinemark.verify import intervals as iv
from tinemark.verify.claims import Undecided
from tinemark.verify.intervals import ONE, ZERO, Interval

Matrix = list[list[Interval]]


def inverse(matrix: Sequence[Sequence[Interval]], bits: int) -> Matrix:
    """Approximate inverse at the middles, by elimination with the largest pivot of each column.

    Raises
    ------
    Undecided
        The matrix is singular as far as can be seen.
    """
    size = len(matrix)
    rows = [
        [iv.middle(entry, bits) for entry in row] + [ONE if i == j else ZERO for j in range(size)]
        for i, row in enumerate(matrix)
    ]
    for column in range(size):
        pivot = column
        for candidate in range(column + 1, size):
            if libmp.mpf_gt(_size(rows[candidate][column]), _size(rows[pivot][column])):
                pivot = candidate
        rows[column], rows[pivot] = rows[pivot], rows[column]
        lead = rows[column][column]
        if iv.sign(lead) == 0:
            raise Undecided("the equations of the onset are singular there")
        rows[column] = [iv.middle(iv.div(entry, lead, bits), bits) for entry in rows[column]]
        for other in range(size):
            factor = rows[other][column]
            if other != column and factor != ZERO:
                rows[other] = [
                    iv.middle(iv.sub(entry, iv.mul(factor, below, bits), bits), bits)
                    for entry, below in zip(rows[other], rows[column], strict=True)
                ]
    return [row[size:] for row in rows]


def _size(x: Interval) -> object:
    return libmp.mpf_abs(x[0])


def times(matrix: Sequence[Sequence[Interval]], column: Sequence[Interval], bits: int) -> list[Interval]:
    """Product of a matrix with a column."""
    result = []
    for row in matrix:
        total = ZERO
        for entry, value in zip(row, column, strict=True):
            if entry != ZERO and value != ZERO:
                total = iv.add(total, iv.mul(entry, value, bits), bits)
        result.append(total)
    return result


def image(
    residual: Sequence[Interval],
    slopes: Sequence[Sequence[Interval]],
    centre: Sequence[Interval],
    box: Sequence[Interval],
    bits: int,
) -> list[Interval]:
    """The Krawczyk image c - C F(c) + (I - C F'(B)) (B - c).

    Where it lies strictly inside the box B, there is exactly one zero of F in B, and it lies in the image.

    Parameters
    ----------
    residual
        F at the exact point c.
    slopes
        F' on the box.
    """
    size = len(box)
    near = inverse(slopes, bits)
    shift = times(near, residual, bits)
    spreads = [iv.sub(side, middle, bits) for side, middle in zip(box, centre, strict=True)]
    columns = [times(near, [row[k] for row in slopes], bits) for k in range(size)]
    result = []
    for i in range(size):
        total = iv.sub(centre[i], shift[i], bits)
        for k in range(size):
            rest = iv.sub(ONE if i == k else ZERO, columns[k][i], bits)
            total = iv.add(total, iv.mul(rest, spreads[k], bits), bits)
        result.append(total)
    return result


Side = tuple[Fraction, Fraction]
"""Lower and upper end."""


def inside(found: Sequence[Interval], box: Sequence[Side]) -> bool:
    """Whether every side lies strictly inside the box."""
    for side, (low, high) in zip(found, box, strict=True):
        if not iv.is_finite(side):
            return False
        bottom, top = iv.ends(side)
        if not low < bottom <= top < high:
            return False
    return True
