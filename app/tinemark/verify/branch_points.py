"""Transcritical points and pitchforks of a cycle whose points the parameter does not move.

Two branches meet only where something holds exactly. Here it is that the cycle's points stay where they are
for every value of the parameter in the box. Interval arithmetic shows that where the points are numbers it
holds without rounding: the orbit of the point over the whole box then comes back as that point alone, an
interval without width. The one unknown left is the parameter, the one equation f^p_x = 1.
"""

from __future__ import annotations

from collections.abc import Iterator
from fractions import Fraction

from tinemark.verify import intervals as iv
from tinemark.verify.claims import NotCheckable, Numbers, Paper, Part, Refused, Undecided
from tinemark.verify.cycles import OneState, on_box
from tinemark.verify.intervals import ONE, ZERO, Interval
from tinemark.verify.newton import image, inside
from tinemark.verify.one_state import STATE_UNITS, VALUE_UNITS, prime_factors

FINEST = 10
"""Points are tried as multiples of powers of one half down to this one."""
LONGEST_PERIOD = 64
UNTOLD = "only cycles are checked whose points stay exactly where they are as the parameter moves"


def prove(
    one: OneState, paper: Paper, numbers: Numbers, bits: int, printed: Fraction | None, unit: Fraction
) -> None:
    """Prove what the certificate claims.

    Parameters
    ----------
    printed, unit
        The printed cycle point and a unit of its last digit; None where there is none.

    Raises
    ------
    Refused
        The claim is another one than what is there.
    NotCheckable
        The cycle's points are not exact numbers of the kind that is looked for.
    """
    if paper.period > LONGEST_PERIOD:
        raise NotCheckable(UNTOLD)
    middle, half = numbers.parameter
    side = (middle - half, middle + half)
    r = (iv.of_fraction(side[0], bits)[0], iv.of_fraction(side[1], bits)[1])
    steps = sorted({paper.period // prime for prime in prime_factors(paper.period)})
    for point in _candidates(numbers):
        x = iv.of_fraction(point, bits)
        end = on_box(one, x, r, paper.period, bits, visits=steps)
        if end.x == x and end.v == ZERO:
            break
    else:
        raise NotCheckable(UNTOLD)
    for place in end.visits.values():
        if iv.sign(iv.sub(place, x, bits)) == 0:
            raise Refused(Part.PERIOD, f"the cycle closes before {paper.period} steps")
    if printed is not None and not _on_cycle(one, x, r, paper.period, bits, printed, STATE_UNITS * unit):
        raise Refused(Part.STATE, "the printed cycle point does not belong to the cycle")
    centre = iv.middle(r, bits)
    at_centre = on_box(one, x, centre, paper.period, bits)
    residual = [iv.sub(at_centre.u, ONE, bits)]
    try:
        (found,) = image(residual, [[end.z]], [centre], [r], bits)
    except Undecided as error:
        raise Refused(Part.BOX, "the multiplier may touch +1 in the box without crossing it") from error
    if not inside([found], [side]):
        raise Refused(Part.BOX, "the interval Newton test does not map the box into itself")
    low, high = iv.ends(found)
    far = VALUE_UNITS * numbers.unit
    if low < numbers.lower or high > numbers.upper or low > numbers.value + far or high < numbers.value - far:
        raise Refused(Part.VALUE, "the onset in the box does not lie between the printed ends")
    if iv.sign(end.z) == 0:
        raise Refused(Part.KIND, "the multiplier may touch +1 without crossing it")
    _which(paper, end.w, end.t)


def _which(paper: Paper, bend: Interval, twist: Interval) -> None:
    """Second and third derivative of f^p tell what crosses: a branch at an angle, or a pair."""
    if iv.sign(bend):
        if paper.kind != "transcritical":
            raise Refused(Part.KIND, f"a branch crosses at an angle there: transcritical, no {paper.kind}")
        if paper.criticality:
            raise Refused(Part.CRITICALITY, "a transcritical point has none")
        return
    if bend != ZERO or iv.sign(twist) == 0:
        raise NotCheckable("how the branches meet cannot be told on this box")
    if paper.kind != "pitchfork":
        raise Refused(Part.KIND, f"a pair branches off there: a pitchfork, no {paper.kind}")
    there = "supercritical" if iv.sign(twist) < 0 else "subcritical"
    if paper.criticality != there:
        raise Refused(
            Part.CRITICALITY, f"the pitchfork is {there}, not {paper.criticality or 'without a side'}"
        )


def _candidates(numbers: Numbers) -> Iterator[Fraction]:
    """Simple numbers in the state's side of the box, the simplest first."""
    middle, half = numbers.states[0]
    seen: set[Fraction] = set()
    for power in range(FINEST + 1):
        point = Fraction(round(middle * 2**power), 2**power)
        if abs(point - middle) <= half and point not in seen:
            seen.add(point)
            yield point


def _on_cycle(
    one: OneState, x: Interval, r: Interval, period: int, bits: int, printed: Fraction, room: Fraction
) -> bool:
    here = x
    for _ in range(period):
        low, high = iv.ends(here)
        if low - room <= printed <= high + room:
            return True
        here = on_box(one, here, r, 1, bits).x
    return False
