"""Small interval matrices: determinants, linear systems, and roots of a polynomial off the unit circle."""

from __future__ import annotations

from collections.abc import Sequence
from itertools import combinations

from tinemark.verify import intervals as iv
from tinemark.verify.calculus import Calculus, Number, Real
from tinemark.verify.claims import Undecided
from tinemark.verify.intervals import ONE, ZERO, Interval

Rows = Sequence[Sequence[Interval]]
MOST_PIECES = 20_000
"""Arcs of the unit circle looked at before giving up."""


def determinant(rows: Rows, bits: int) -> Interval:
    """Determinant of a real matrix."""
    return determinant_in(Real(bits), rows)


def determinant_in(numbers: Calculus[Number], rows: Sequence[Sequence[Number]]) -> Number:
    """Determinant by expansion over sets of columns, each set once."""
    size = len(rows)
    sums: dict[int, Number] = {0: numbers.one}
    for row in rows:
        longer: dict[int, Number] = {}
        for used, value in sums.items():
            for column in range(size):
                if used >> column & 1 or row[column] == numbers.zero:
                    continue
                term = numbers.mul(row[column], value)
                # Columns already used to the right of this one count the exchanges.
                if (used >> column).bit_count() & 1:
                    term = numbers.neg(term)
                place = used | 1 << column
                longer[place] = numbers.add(longer[place], term) if place in longer else term
        sums = longer
    return sums.get((1 << size) - 1, numbers.zero)


def slope_of_determinant(rows: Rows, slopes: Rows, bits: int) -> Interval:
    """Derivative of a determinant where the entries move with these slopes."""
    total = ZERO
    for place, slope in enumerate(slopes):
        if any(entry != ZERO for entry in slope):
            changed = [slope if i == place else row for i, row in enumerate(rows)]
            total = iv.add(total, determinant(changed, bits), bits)
    return total


def solved(
    numbers: Calculus[Number], rows: Sequence[Sequence[Number]], right: Sequence[Number]
) -> list[Number]:
    """Solution of a linear system by Cramer's rule; raises `Undecided` where it may be singular."""
    whole = determinant_in(numbers, rows)
    found = []
    for column in range(len(rows)):
        replaced = [
            [right[i] if j == column else entry for j, entry in enumerate(row)] for i, row in enumerate(rows)
        ]
        found.append(numbers.div(determinant_in(numbers, replaced), whole))
    return found


def null_vector(numbers: Calculus[Number], rows: Sequence[Sequence[Number]]) -> list[Number]:
    """Direction that a singular matrix of one less than full rank takes to zero: a column of cofactors.

    Raises
    ------
    Undecided
        No cofactor is known to differ from zero.
    """
    size = len(rows)
    best: list[Number] | None = None
    for left_out in range(size):
        kept = [row for i, row in enumerate(rows) if i != left_out]
        vector = []
        for column in range(size):
            minor = [[entry for j, entry in enumerate(row) if j != column] for row in kept]
            value = determinant_in(numbers, minor) if minor else numbers.one
            vector.append(numbers.neg(value) if (left_out + column) & 1 else value)
        if any(numbers.differs(entry) for entry in vector) and (
            best is None or _size(numbers, vector) > _size(numbers, best)
        ):
            best = vector
    if best is None:
        raise Undecided("the critical multiplier may not be simple")
    return best


def _size(numbers: Calculus[Number], vector: Sequence[Number]) -> float:
    return max(numbers.size(entry) for entry in vector)


def transposed(rows: Sequence[Sequence[Number]]) -> list[list[Number]]:
    """Rows and columns exchanged."""
    return [list(column) for column in zip(*rows, strict=True)]


def _principal(rows: Rows, places: Sequence[int]) -> list[list[Interval]]:
    return [[rows[i][j] for j in places] for i in places]


def characteristic(rows: Rows, bits: int) -> list[Interval]:
    """Coefficients of det(z - A), lowest power first, by sums of principal minors."""
    size = len(rows)
    found = []
    for count in range(size, 0, -1):
        total = ZERO
        for places in combinations(range(size), count):
            total = iv.add(total, determinant(_principal(rows, places), bits), bits)
        found.append(iv.neg(total) if count & 1 else total)
    return [*found, ONE]


def slope_of_characteristic(rows: Rows, slopes: Rows, bits: int) -> list[Interval]:
    """Derivatives of the coefficients of det(z - A) where the entries of A move with these slopes."""
    size = len(rows)
    found = []
    for count in range(size, 0, -1):
        total = ZERO
        for places in combinations(range(size), count):
            moved = slope_of_determinant(_principal(rows, places), _principal(slopes, places), bits)
            total = iv.add(total, moved, bits)
        found.append(iv.neg(total) if count & 1 else total)
    return [*found, ZERO]


def without_root(polynomial: Sequence[Interval], root: int, bits: int) -> list[Interval]:
    """The polynomial divided by z - root, for a root of 1 or -1."""
    quotient: list[Interval] = []
    carry = ZERO
    for coefficient in reversed(polynomial[1:]):
        carry = iv.add(coefficient, carry if root == 1 else iv.neg(carry), bits)
        quotient.append(carry)
    return quotient[::-1]


def without_pair(polynomial: Sequence[Interval], sum_of_pair: Interval, bits: int) -> list[Interval]:
    """The polynomial divided by z^2 - t z + 1, where a pair on the unit circle has the sum t."""
    quotient: list[Interval] = []
    before, last = ZERO, ZERO
    for coefficient in reversed(polynomial[2:]):
        carry = iv.add(coefficient, iv.sub(iv.mul(sum_of_pair, last, bits), before, bits), bits)
        before, last = last, carry
        quotient.append(carry)
    return quotient[::-1]


def check_off_circle(polynomial: Sequence[Interval], bits: int, beside: Interval | None = None) -> None:
    """Make sure that a real polynomial has no root on the unit circle, arc by arc of its upper half.

    Parameters
    ----------
    beside
        Arcs on which twice the cosine certainly lies inside this interval are passed over.

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
        if beside is not None and _within(arc, beside, bits):
            continue
        real, imaginary = ZERO, ZERO
        for power, coefficient in enumerate(polynomial):
            cosine, sine = iv.cos_sin(iv.mul(iv.of_whole(power), arc, bits), bits)
            real = iv.add(real, iv.mul(coefficient, cosine, bits), bits)
            imaginary = iv.add(imaginary, iv.mul(coefficient, sine, bits), bits)
        if iv.sign(real) == 0 and iv.sign(imaginary) == 0:
            middle = iv.middle(arc, bits)
            if middle in (start, stop):
                raise Undecided("another multiplier may lie on the unit circle")
            waiting += [(start, middle), (middle, stop)]


def _within(arc: Interval, t: Interval, bits: int) -> bool:
    cosine, _ = iv.cos_sin(arc, bits)
    twice = iv.add(cosine, cosine, bits)
    return iv.sign(iv.sub(twice, (t[0], t[0]), bits)) > 0 and iv.sign(iv.sub((t[1], t[1]), twice, bits)) > 0
