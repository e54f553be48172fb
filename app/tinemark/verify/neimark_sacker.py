"""Neimark-Sacker onsets: the pair of multipliers on the unit circle as equations, and what is claimed of it.

Besides the cycle point x and the parameter r the unknown is t, the sum of the pair: z^2 - t z + 1 divides
det(z - A) without rest, A the derivative of f^p. Where the Krawczyk test succeeds these equations are
regular at their zero, so the pair is simple and crosses the circle with speed.
"""

from __future__ import annotations

from collections.abc import Sequence
from fractions import Fraction

from mpmath import MPContext

from tinemark.verify import intervals as iv
from tinemark.verify.calculus import ComplexInterval, half
from tinemark.verify.claims import Paper, Part, Refused, Undecided
from tinemark.verify.intervals import ONE, ZERO, Interval
from tinemark.verify.many_cycles import ManyStates
from tinemark.verify.matrices import Rows, characteristic, check_off_circle, without_pair
from tinemark.verify.normal_form import lyapunov_coefficient

STRONG = {2: "1:1", -2: "1:2", -1: "1:3", 0: "1:4"}
"""Sums of a pair at strong resonances, where no single coefficient tells what follows."""


def rest(polynomial: Sequence[Interval], t: Interval, bits: int) -> list[Interval]:
    """What is left of a polynomial divided by z^2 - t z + 1: its terms of power 0 and 1."""
    constant, linear = ZERO, ZERO
    for coefficient, (a, b) in zip(polynomial, _powers(t, len(polynomial), bits), strict=True):
        linear = iv.add(linear, iv.mul(coefficient, a, bits), bits)
        constant = iv.add(constant, iv.mul(coefficient, b, bits), bits)
    return [constant, linear]


def slope_of_rest(polynomial: Sequence[Interval], t: Interval, bits: int) -> list[Interval]:
    """Derivative of `rest` in t."""
    constant, linear = ZERO, ZERO
    a, b, da, db = ZERO, ONE, ZERO, ZERO
    for coefficient in polynomial:
        linear = iv.add(linear, iv.mul(coefficient, da, bits), bits)
        constant = iv.add(constant, iv.mul(coefficient, db, bits), bits)
        a, b, da, db = (
            iv.add(iv.mul(t, a, bits), b, bits),
            iv.neg(a),
            iv.add(iv.add(a, iv.mul(t, da, bits), bits), db, bits),
            iv.neg(da),
        )
    return [constant, linear]


def _powers(t: Interval, count: int, bits: int) -> list[tuple[Interval, Interval]]:
    """(a, b) with z^k = a z + b where z^2 = t z - 1."""
    found = []
    a, b = ZERO, ONE
    for _ in range(count):
        found.append((a, b))
        a, b = iv.add(iv.mul(t, a, bits), b, bits), iv.neg(a)
    return found


def sum_near(rows: Rows, bits: int) -> Fraction:
    """The sum of the complex pair of multipliers nearest to the unit circle: a good number, no proof.

    Raises
    ------
    Undecided
        All multipliers are real.
    """
    # A context of its own: that of mpmath itself is one for the whole process.
    context = MPContext()
    context.prec = min(bits, 400)
    centre = [context.make_mpf(iv.middle(entry, bits)[0]) for entry in characteristic(rows, bits)]
    try:
        roots = context.polyroots(centre[::-1], maxsteps=200, extraprec=200)
    except (context.NoConvergence, ZeroDivisionError) as error:
        raise Undecided("the multipliers could not be told apart") from error
    pairs = [root for root in roots if abs(context.im(root)) > context.mpf(2) ** -20]
    if not pairs:
        raise Undecided("the cycle has no complex pair of multipliers there")
    nearest = min(pairs, key=lambda root: abs(abs(root) - 1))
    return iv.to_fraction((2 * context.re(nearest) / abs(nearest))._mpf_)


def check_pair(t: Interval, rows: Rows, bits: int) -> ComplexInterval:
    """The multiplier of the upper half-plane, if the pair is complex and every other one off the circle.

    Raises
    ------
    Refused
        The pair is real.
    Undecided
        A strong resonance, or another multiplier on the circle, cannot be excluded.
    """
    two = iv.of_whole(2)
    if iv.sign(iv.sub(two, t, bits)) < 0 or iv.sign(iv.add(two, t, bits)) < 0:
        raise Refused(Part.KIND, "the multipliers with the product 1 are real: no Neimark-Sacker onset")
    for value, name in STRONG.items():
        if iv.sign(iv.sub(t, iv.of_whole(value), bits)) == 0:
            raise Undecided(f"the pair may be at the strong resonance {name}")
    check_off_circle(without_pair(characteristic(rows, bits), t, bits), bits)
    cosine = iv.mul(t, half(bits), bits)
    return cosine, iv.sqrt(iv.sub(ONE, iv.whole_power(cosine, 2, bits), bits), bits)


def check_alone(rows: Rows, t: Interval, bits: int) -> None:
    """See that on a whole box no pair with another sum than t can be on the circle, nor 1 or -1."""
    check_off_circle(characteristic(rows, bits), bits, beside=t)


def check_side(
    many: ManyStates,
    paper: Paper,
    box: Sequence[Interval],
    rows: Rows,
    m: ComplexInterval,
    bits: int,
) -> None:
    """See that the sign of the first Lyapunov coefficient is the claimed one.

    Raises
    ------
    Refused
        It is the other one.
    Undecided
        It cannot be told.
    """
    side = iv.sign(lyapunov_coefficient(many, box, [list(row) for row in rows], m, paper.period, bits))
    if side == 0:
        raise Undecided("the sign of the first Lyapunov coefficient cannot be told on this box")
    there = "supercritical" if side < 0 else "subcritical"
    if paper.criticality != there:
        raise Refused(Part.CRITICALITY, f"it is {there}, not {paper.criticality or 'without a side'}")
