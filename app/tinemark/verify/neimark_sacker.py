"""The claims of a Neimark-Sacker onset of a map of two states: the pair of multipliers and its normal form.

With two states a pair on the unit circle means det A = 1 and |tr A| < 2, A the derivative of f^p. Where the
Krawczyk test with det A = 1 succeeds the equations are regular, so the pair crosses the circle with speed.
"""

from __future__ import annotations

from collections.abc import Sequence
from fractions import Fraction
from itertools import permutations
from typing import TypeAlias

from tinemark.verify import intervals as iv
from tinemark.verify import many_cycles as mc
from tinemark.verify.claims import NotCheckable, Paper, Part, Refused, Undecided
from tinemark.verify.intervals import ONE, ZERO, Interval
from tinemark.verify.many_cycles import ManyStates, Vector

Complex: TypeAlias = tuple[Interval, Interval]
Tensor: TypeAlias = list[tuple[tuple[int, ...], Vector]]
STRONG = {0: "1:4", -1: "1:3"}
"""Traces at which a pair is a strong resonance, besides 2 and -2."""


def check_claims(
    many: ManyStates, paper: Paper, box: Sequence[Interval], rows: Sequence[Sequence[Interval]], bits: int
) -> None:
    """Check the pair of multipliers and the sign of the first Lyapunov coefficient.

    Raises
    ------
    Refused
        The pair is real, or the claimed sign is the other one.
    NotCheckable
        A strong resonance, or a sign that cannot be told.
    """
    trace = iv.add(rows[0][0], rows[1][1], bits)
    two = iv.of_whole(2)
    if iv.sign(iv.sub(two, trace, bits)) <= 0 or iv.sign(iv.add(two, trace, bits)) <= 0:
        raise Refused(Part.KIND, "the multipliers with the product 1 are real: no Neimark-Sacker onset")
    for value, name in STRONG.items():
        if iv.sign(iv.sub(trace, iv.of_whole(value), bits)) == 0:
            raise NotCheckable(f"the pair may be at the strong resonance {name}")
    try:
        side = iv.sign(_coefficient(many, paper, box, rows, trace, bits))
    except Undecided:
        side = 0
    if side == 0:
        raise NotCheckable("the sign of the first Lyapunov coefficient cannot be told on this box")
    there = "supercritical" if side < 0 else "subcritical"
    if paper.criticality != there:
        raise Refused(Part.CRITICALITY, f"it is {there}, not {paper.criticality or 'without a side'}")


def _coefficient(
    many: ManyStates,
    paper: Paper,
    box: Sequence[Interval],
    rows: Sequence[Sequence[Interval]],
    trace: Interval,
    bits: int,
) -> Interval:
    """Twice the first Lyapunov coefficient, but for a positive factor (Kuznetsov, 2004, section 5.4)::

    Re conj(m) (<p, C(q, q, q*)> + 2 <p, B(q, (1 - A)^-1 B(q, q*))> + <p, B(q*, (m^2 - A)^-1 B(q, q))>)

    with A q = m q, A^T p = m* p, <p, q> = 1, and B, C the second and third derivatives of f^p.
    """
    calculus = _Complex(bits)
    add, mul = calculus.add, calculus.mul
    half = iv.mul(trace, iv.of_fraction(Fraction(1, 2), bits), bits)
    m = (half, iv.sqrt(iv.sub(ONE, iv.whole_power(half, 2, bits), bits), bits))
    (a, b), (c, d) = [[(entry, ZERO) for entry in row] for row in rows]
    # One of b and c is not zero where the pair is complex.
    if iv.sign(b[0]):
        q = [b, calculus.sub(m, a)]
        p = [calculus.sub(_conjugate(m), d), b]
    else:
        q = [calculus.sub(m, d), c]
        p = [c, calculus.sub(_conjugate(m), a)]
    q_bar = [_conjugate(entry) for entry in q]
    first, second, third = tensors(many, box, paper.period, bits)

    def times(tensor: Tensor, *columns: list[Complex]) -> list[Complex]:
        return calculus.applied(tensor, columns)

    def dot(left: list[Complex], right: list[Complex]) -> Complex:
        return add(mul(_conjugate(left[0]), right[0]), mul(_conjugate(left[1]), right[1]))

    one: Complex = (ONE, ZERO)
    real = calculus.solved(_minus(calculus, one, first), times(second, q, q_bar))
    double = calculus.solved(_minus(calculus, mul(m, m), first), times(second, q, q))
    two: Complex = (iv.of_whole(2), ZERO)
    total = add(
        dot(p, times(third, q, q, q_bar)),
        add(mul(two, dot(p, times(second, q, real))), dot(p, times(second, q_bar, double))),
    )
    # p is not of the right length: dividing by <p, q> is multiplying by its conjugate, but for its size.
    return mul(mul(_conjugate(m), total), _conjugate(dot(p, q)))[0]


def _minus(calculus: _Complex, value: Complex, first: Sequence[Vector]) -> list[list[Complex]]:
    """Rows of value - A."""
    return [
        [calculus.sub(value if i == j else (ZERO, ZERO), (first[j][i], ZERO)) for j in range(2)]
        for i in range(2)
    ]


def _conjugate(z: Complex) -> Complex:
    return z[0], iv.neg(z[1])


class _Complex:
    """Pairs of intervals as complex numbers, at one precision."""

    def __init__(self, bits: int) -> None:
        self.bits = bits

    def add(self, x: Complex, y: Complex) -> Complex:
        return iv.add(x[0], y[0], self.bits), iv.add(x[1], y[1], self.bits)

    def sub(self, x: Complex, y: Complex) -> Complex:
        return iv.sub(x[0], y[0], self.bits), iv.sub(x[1], y[1], self.bits)

    def mul(self, x: Complex, y: Complex) -> Complex:
        bits = self.bits
        real = iv.sub(iv.mul(x[0], y[0], bits), iv.mul(x[1], y[1], bits), bits)
        return real, iv.add(iv.mul(x[0], y[1], bits), iv.mul(x[1], y[0], bits), bits)

    def div(self, x: Complex, y: Complex) -> Complex:
        bits = self.bits
        size = iv.add(iv.whole_power(y[0], 2, bits), iv.whole_power(y[1], 2, bits), bits)
        top = self.mul(x, _conjugate(y))
        return iv.div(top[0], size, bits), iv.div(top[1], size, bits)

    def solved(self, rows: list[list[Complex]], right: list[Complex]) -> list[Complex]:
        (a, b), (c, d) = rows
        whole = self.sub(self.mul(a, d), self.mul(b, c))
        return [
            self.div(self.sub(self.mul(right[0], d), self.mul(b, right[1])), whole),
            self.div(self.sub(self.mul(a, right[1]), self.mul(right[0], c)), whole),
        ]

    def applied(self, tensor: Tensor, columns: Sequence[list[Complex]]) -> list[Complex]:
        total: list[Complex] = [(ZERO, ZERO), (ZERO, ZERO)]
        for where, values in tensor:
            for order in sorted(set(permutations(where))):
                factor: Complex = (ONE, ZERO)
                for coordinate, column in zip(order, columns, strict=True):
                    factor = self.mul(factor, column[coordinate])
                total = [
                    self.add(old, self.mul(factor, (value, ZERO)))
                    for old, value in zip(total, values, strict=True)
                ]
        return total


def tensors(
    many: ManyStates, box: Sequence[Interval], period: int, bits: int
) -> tuple[list[Vector], Tensor, Tensor]:
    """First, second and third derivatives of f^p in the states on a box, by the chain rule."""
    size = many.size
    *point, r = box
    local = mc.Local(many, 3, r, bits)
    centre_r = iv.middle(r, bits)
    values, spread = mc.Local(many, 0, centre_r, bits), iv.sub(r, centre_r, bits)
    places = range(size)
    here = list(point)
    first = [[ONE if i == a else ZERO for i in places] for a in places]
    second = {(a, b): [ZERO] * size for a in places for b in places if a <= b}
    third = {(a, b, c): [ZERO] * size for (a, b) in second for c in places if b <= c}
    for _ in range(period):
        series = local.at(here)
        one, two, three = (local.tensor(series, order) for order in (1, 2, 3))
        full = [[*column, ZERO] for column in first]
        wide = {pair: [*column, ZERO] for pair, column in second.items()}
        for a, b, c in third:
            new = mc.added(
                mc.linear(one, third[a, b, c], None, bits), _three(three, full, (a, b, c), bits), bits
            )
            for pair, single in (((a, b), c), ((a, c), b), ((b, c), a)):
                new = mc.added(new, mc.bilinear(two, wide[pair], full[single], bits), bits)
            third[a, b, c] = new
        for a, b in second:
            bent = mc.bilinear(two, full[a], full[b], bits)
            second[a, b] = mc.added(mc.linear(one, second[a, b], None, bits), bent, bits)
        first = [mc.linear(one, column, None, bits) for column in first]
        middle = [iv.middle(side, bits) for side in here]
        images = [found[0] for found in values.at(middle)]
        offsets = [iv.sub(side, at, bits) for side, at in zip(here, middle, strict=True)]
        here = mc.added(images, mc.linear(one, offsets, spread, bits), bits)
        mc.check_bounded(here)
    return first, list(second.items()), list(third.items())


def _three(tensor: Tensor, full: Sequence[Vector], columns: tuple[int, int, int], bits: int) -> Vector:
    total = [ZERO] * (len(full[0]) - 1)
    for where, values in tensor:
        for order in sorted(set(permutations(where))):
            factor = ONE
            for coordinate, column in zip(order, columns, strict=True):
                factor = iv.mul(factor, full[column][coordinate], bits)
            total = mc.added(total, [iv.mul(value, factor, bits) for value in values], bits)
    return total
