"""Normal-form coefficients of onsets of maps of several states, put together along the cycle.

With A the derivative of f^p, A q = m q, p the left vector (Kuznetsov, 2004, section 5.4), B and C the
second and third derivatives of f^p and q* the conjugate of q::

    flip            <p, C(q, q, q) + 3 B(q, (1 - A)^-1 B(q, q))>
    Neimark-Sacker  Re conj(m) <p, C(q, q, q*) + 2 B(q, (1 - A)^-1 B(q, q*)) + B(q*, (m^2 - A)^-1 B(q, q))>

up to positive factors. Neither B nor C is formed: shifts of second order start from what B(q, q) is
solved to, and the shift of third order that they drive along the cycle is the bracket.
"""

from __future__ import annotations

from collections.abc import Sequence

from tinemark.verify import intervals as iv
from tinemark.verify import many_cycles as mc
from tinemark.verify.calculus import Calculus, Complex, ComplexInterval, Number, Real
from tinemark.verify.frames import Rows
from tinemark.verify.intervals import Interval
from tinemark.verify.many_cycles import ManyStates, Stretch
from tinemark.verify.matrices import null_vector, solved, transposed
from tinemark.verify.mirrors import Mirror


def flip_coefficient(
    many: ManyStates,
    box: Sequence[Interval],
    rows: Rows,
    period: int,
    bits: int,
    mirror: Mirror | None = None,
) -> Interval:
    """Six times the flip coefficient, but for a positive factor, of f^p or of f^p seen in a mirror.

    Raises
    ------
    Undecided
        The multiplier may not be simple, or 1 may be another one.
    """
    real = Real(bits)
    q, p = null_vectors(real, shifted(real, rows, iv.of_whole(-1)))
    return real.mul(cubic(many, box, rows, period, q, p, bits, mirror), dot(real, p, q))


def cubic(
    many: ManyStates,
    box: Sequence[Interval],
    rows: Rows,
    period: int,
    q: Sequence[Interval],
    p: Sequence[Interval],
    bits: int,
    mirror: Mirror | None = None,
) -> Interval:
    """The bracket of a flip on its own: <p, C(q, q, q) + 3 B(q, (1 - A)^-1 B(q, q))>."""
    real = Real(bits)
    square = _carried(real, many, box, period, q, [[real.zero] * many.size], bits, 2)[0]
    if mirror is not None:
        square = mirror.turned(square)
    w = solved(real, _less(real, rows, real.one), square)
    cube = _carried(real, many, box, period, q, [w], bits, 3)[-1]
    return dot(real, p, cube if mirror is None else mirror.turned(cube))


def quadratic(
    many: ManyStates,
    box: Sequence[Interval],
    period: int,
    q: Sequence[Interval],
    p: Sequence[Interval],
    bits: int,
) -> Interval:
    """<p, B(q, q)>."""
    real = Real(bits)
    square = _carried(real, many, box, period, q, [[real.zero] * many.size], bits, 2)[0]
    return dot(real, p, square)


def lyapunov_coefficient(
    many: ManyStates, box: Sequence[Interval], rows: Rows, m: ComplexInterval, period: int, bits: int
) -> Interval:
    """Twice the first Lyapunov coefficient at a pair m and m* on the circle, but for a positive factor.

    Raises
    ------
    Undecided
        The pair may not be simple, or 1 or m^2 may be another multiplier.
    """
    numbers = Complex(bits)
    whole = [[numbers.of(entry) for entry in row] for row in rows]
    q, p = null_vectors(numbers, shifted(numbers, whole, m))
    # Left vector of A as a row: p A = m p. Its conjugate is the p of the formula, which the row stands for.
    zero = [numbers.zero] * many.size
    steady, turning, _ = _carried(numbers, many, box, period, q, [zero, zero], bits, 2)
    one, square = numbers.one, numbers.mul(m, m)
    w = solved(numbers, _less(numbers, whole, one), steady)
    z = solved(numbers, _less(numbers, whole, square), turning)
    cube = _carried(numbers, many, box, period, q, [w, z], bits, 3)[-1]
    # Dividing by <p, q> is multiplying by its conjugate, but for its size.
    total = numbers.mul(dot(numbers, p, cube), numbers.conjugate(dot(numbers, p, q)))
    return numbers.mul(numbers.conjugate(m), total)[0]


def null_vectors(
    numbers: Calculus[Number], rows: Sequence[Sequence[Number]]
) -> tuple[list[Number], list[Number]]:
    """Right and left direction that a singular matrix takes to zero."""
    return null_vector(numbers, rows), null_vector(numbers, transposed(rows))


def shifted(numbers: Calculus[Number], rows: Sequence[Sequence[Number]], value: Number) -> list[list[Number]]:
    """A - value."""
    return [
        [numbers.add(entry, numbers.neg(value)) if i == j else entry for j, entry in enumerate(row)]
        for i, row in enumerate(rows)
    ]


def _less(numbers: Calculus[Number], rows: Sequence[Sequence[Number]], value: Number) -> list[list[Number]]:
    """What is left of a value less A."""
    return [[numbers.neg(entry) for entry in row] for row in shifted(numbers, rows, value)]


def dot(numbers: Calculus[Number], a: Sequence[Number], b: Sequence[Number]) -> Number:
    """Sum of products."""
    total = numbers.zero
    for x, y in zip(a, b, strict=True):
        total = numbers.add(total, numbers.mul(x, y))
    return total


def _carried(
    numbers: Calculus[Number],
    many: ManyStates,
    box: Sequence[Interval],
    period: int,
    q: Sequence[Number],
    start: Sequence[Sequence[Number]],
    bits: int,
    order: int,
) -> list[list[Number]]:
    """Shifts of second order driven by q, and the one of third order that they drive, once round.

    Real numbers: one shift, driven by B(q, q); the third by C(q, q, q) + 3 B(q, shift). Complex ones: two,
    driven by B(q, q*) and B(q, q); the third by C(q, q, q*) + 2 B(q, first) + B(q*, second). At order 2 the
    third stands for nothing.
    """
    *point, r = box
    q = list(q)
    seconds = [list(column) for column in start]
    third = [numbers.zero] * many.size

    def on(stretch: Stretch, column: Sequence[Number], force: Sequence[Number]) -> list[Number]:
        moved = mc.matrix_times(numbers, stretch.map, column)
        return [numbers.add(x, y) for x, y in zip(moved, stretch.framed(numbers, force), strict=True)]

    for stretch in mc.walk(many, point, r, period, bits, order):
        shown = [*stretch.shown(numbers, q), numbers.zero]
        turned = [numbers.conjugate(entry) for entry in shown]
        wide = [[*stretch.shown(numbers, column), numbers.zero] for column in seconds]
        force = mc.trilinear(numbers, stretch.twists, shown, shown, turned)
        partners = [shown] * 3 if len(wide) == 1 else [shown, shown, turned]
        for partner, column in zip(partners, wide * 3 if len(wide) == 1 else [wide[0], *wide], strict=True):
            bent = mc.bilinear(numbers, stretch.bends, partner, column)
            force = [numbers.add(x, y) for x, y in zip(force, bent, strict=True)]
        third = on(stretch, third, force)
        drives = [turned, shown] if len(wide) == 2 else [shown]
        seconds = [
            on(stretch, column, mc.bilinear(numbers, stretch.bends, shown, drive))
            for column, drive in zip(seconds, drives, strict=True)
        ]
        q = mc.matrix_times(numbers, stretch.map, q)
    return [*seconds, third]
