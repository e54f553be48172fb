"""Small interval matrices: determinants, linear systems, and roots of a polynomial off the unit circle."""

from __future__ import annotations

from collections.abc import Sequence

from mpmath import libmp

from tinemark.verify import intervals as iv
from tinemark.verify.claims import Undecided
from tinemark.verify.intervals import ONE, ZERO, Interval

Rows = Sequence[Sequence[Interval]]
MOST_PIECES = 4_000
"""Arcs of the unit circle looked at before giving up."""


def determinant(rows: Rows, bits: int) -> Interval:
    """Determinant by expansion over sets of columns, each set once."""
    size = len(rows)
    sums: dict[int, Interval] = {0: ONE}
    for row in rows:
        longer: dict[int, Interval] = {}
        for used, value in sums.items():
            for column in range(size):
                if used >> column & 1 or row[column] == ZERO:
                    continue
                term = iv.mul(row[column], value, bits)
                # Columns already used to the right of this one count the exchanges.
                if (used >> column).bit_count() & 1:
                    term = iv.neg(term)
                place = used | 1 << column
                longer[place] = iv.add(longer[place], term, bits) if place in longer else term
        sums = longer
    return sums.get((1 << size) - 1, ZERO)


def slope_of_determinant(rows: Rows, slopes: Rows, bits: int) -> Interval:
    """Derivative of a determinant where the entries move with these slopes."""
    total = ZERO
    for place, slope in enumerate(slopes):
        if any(entry != ZERO for entry in slope):
            changed = [slope if i == place else row for i, row in enumerate(rows)]
            total = iv.add(total, determinant(changed, bits), bits)
    return total


def solved(rows: Rows, right: Sequence[Interval], bits: int) -> list[Interval]:
    """Solution of a linear system by Cramer's rule; raises `Undecided` where it may be singular."""
    whole = determinant(rows, bits)
    found = []
    for column in range(len(rows)):
        replaced = [
            [right[i] if j == column else entry for j, entry in enumerate(row)] for i, row in enumerate(rows)
        ]
        found.append(iv.div(determinant(replaced, bits), whole, bits))
    return found


def null_vector(rows: Rows, bits: int) -> list[Interval]:
    """Direction that a singular matrix of one less than full rank takes to zero: a column of cofactors.

    Raises
    ------
    Undecided
        No cofactor is known to differ from zero.
    """
    size = len(rows)
    best: list[Interval] | None = None
    for left_out in range(size):
        kept = [row for i, row in enumerate(rows) if i != left_out]
        vector = []
        for column in range(size):
            minor = [[entry for j, entry in enumerate(row) if j != column] for row in kept]
            value = determinant(minor, bits) if minor else ONE
            vector.append(iv.neg(value) if (left_out + column) & 1 else value)
        if any(iv.sign(entry) for entry in vector) and (best is None or _size(vector) > _size(best)):
            best = vector
    if best is None:
        raise Undecided("the critical multiplier may not be simple")
    return best


def _size(vector: Sequence[Interval]) -> float:
    return max(abs(float(libmp.to_float(entry[0]))) for entry in vector)


def characteristic(rows: Rows, bits: int) -> list[Interval]:
    """Coefficients of det(z - A), lowest power first, by sums of principal minors."""
    size = len(rows)
    sums = [ZERO] * (size + 1)
    for chosen in range(1 << size):
        places = [place for place in range(size) if chosen >> place & 1]
        minor = determinant([[rows[i][j] for j in places] for i in places], bits) if places else ONE
        power = size - len(places)
        sums[power] = iv.add(sums[power], iv.neg(minor) if len(places) & 1 else minor, bits)
    return sums


def without_root(polynomial: Sequence[Interval], root: int, bits: int) -> list[Interval]:
    """The polynomial divided by z - root, for a root of 1 or -1."""
    quotient: list[Interval] = []
    carry = ZERO
    for coefficient in reversed(polynomial[1:]):
        carry = iv.add(coefficient, carry if root == 1 else iv.neg(carry), bits)
        quotient.append(carry)
    return quotient[::-1]


def check_off_circle(polynomial: Sequence[Interval], bits: int) -> None:
    """Make sure that a real polynomial has no root on the unit circle, arc by arc of its upper half.

    Raises
    ------
    Undecided
        It may have one.
    """
    if len(polynomial) == 1:
        return
    waiting = [(ZERO, iv.pi(bits))]
    pieces = 0
    while waiting:
        start, stop = waiting.pop()
        pieces += 1
        if pieces > MOST_PIECES:
            raise Undecided("another multiplier may lie on the unit circle")
        arc = (start[0], stop[1])
        real, imaginary = ZERO, ZERO
        for power, coefficient in enumerate(polynomial):
            times = iv.mul(iv.of_whole(power), arc, bits)
            cosine, sine = iv.cos_sin(times, bits)
            real = iv.add(real, iv.mul(coefficient, cosine, bits), bits)
            imaginary = iv.add(imaginary, iv.mul(coefficient, sine, bits), bits)
        if iv.sign(real) == 0 and iv.sign(imaginary) == 0:
            middle = iv.middle(arc, bits)
            waiting += [(start, middle), (middle, stop)]
