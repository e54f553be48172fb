"""Flips and folds of maps of two states that preserve areas: both multipliers meet at -1, or at 1.

With the Jacobian determinant of f^p exactly 1 the two multipliers are each other's inverses. At a flip both
are -1, M + 1 is nilpotent, and the generic case is M + 1 = c v l with l v = 0: a Jordan block. Put
s v + s^2 w + … and its alternate -s v + s^2 w + … into f^p, and the doubled cycle is there where

    K s^2 + (l M' v) dr = 0,   K = l (C(v, v, v) + 3 B(v, (1 - M)^-1 B(v, v))) / 6,

with M' the derivative of M along the branch (the method of Lyapunov and Schmidt; Golubitsky & Schaeffer,
Singularities and Groups in Bifurcation Theory, 1985, chapter VII). The trace moves by -c (l M' v) dr, so
the doubled cycle appears where the other is unstable, softly, when c K < 0, and beside the stable one
when c K > 0. A fold needs l f^p_r and l B(v, v) different from zero, as elsewhere (Meyer, Trans. Amer.
Math. Soc. 149:95, 1970).
"""

from __future__ import annotations

from collections.abc import Generator
from fractions import Fraction
from functools import lru_cache
from typing import Any

from flint import acb, acb_mat

from tinemark.onsets.ball_orbits import precision
from tinemark.onsets.exact_identities import vanishes
from tinemark.onsets.many_claims import Claims, number_words, return_of
from tinemark.onsets.many_coefficient import coefficient_of, solved, unit_matrix
from tinemark.onsets.many_map import Floats, ManyMap
from tinemark.onsets.many_shooting import Condensed, Frames, Local, Place, column
from tinemark.onsets.proofs import NotProved
from tinemark.onsets.results import Criticality, Kind, Step
from tinemark.systems.derivatives import derivative
from tinemark.systems.expression import Call, Num


@lru_cache(maxsize=256)
def area_factor(many: ManyMap) -> int:
    """1 or -1 where the Jacobian determinant of a map of two states is that everywhere, exactly; else 0."""
    if many.size != 2 or not many.formulas:
        return 0
    (a, b), (c, d) = ([derivative(formula, state) for state in many.states] for formula in many.formulas)
    determinant = Call("sub", (Call("mul", (a, d)), Call("mul", (b, c))))
    for factor in (1, -1):
        if vanishes(Call("sub", (determinant, Num(Fraction(factor))))):
            return factor
    return 0


def preserves_areas(many: ManyMap, period: int) -> bool:
    """Whether f^p keeps areas and orientation, exactly and everywhere."""
    if many.size != 2:
        return False
    product, known = 1, {id(each): area_factor(each) for each in (many.steps or (many,))}
    for each in many.along(period):
        product *= known[id(each)]
    return product == 1


def conservative_claims(
    many: ManyMap, kind: Kind, box: Place, frames: Frames, local: Local, scales: Floats, bits: int
) -> Generator[Step, None, Claims]:
    """Show that an enclosed solution is a regular flip or fold of a map that preserves areas.

    Raises
    ------
    NotProved
        Says what could not be shown.
    """
    text = f"checking the {kind.value} of period {box.period}"
    carried = Condensed(kind, box, frames, local)
    target = -1 if kind is Kind.FLIP else 1
    yield from carried.carry(bits, text)
    with precision(bits):
        back = return_of(carried, frames)
        v = box.vectors[0][0]
        # Orthogonal to v, and so to the image of M - target: exact, as every step from here to the signs.
        left = acb_mat(1, 2, [acb(v[1]), acb(-v[0])])
        across = column([v[1], -v[0]])
        moved = back.monodromy * across - target * across
        length = v[0] * v[0] + v[1] * v[1]
        c = (v[0] * moved[0, 0] + v[1] * moved[1, 0]) / (length * length)
        if c.contains(0):
            raise NotProved("the multipliers may meet without a Jordan block")
        size = sum((value.mid() / float(scale)) ** 2 for value, scale in zip(v, scales, strict=True)).mid()
        if kind is Kind.FOLD:
            speed = (left * acb_mat(back.slope))[0, 0].real
            if not speed.abs_lower() > 0:
                raise NotProved("the parameter may not move the cycle at first order: no true fold")
    if kind is Kind.FOLD:
        parts = box, frames, local, back, left, acb(1), bits, text
        bend = yield from coefficient_of(many, kind, *parts)
        with precision(bits):
            return _fold(many, speed, bend)
    with precision(bits):
        drift = solved(unit_matrix(2) - acb_mat(back.monodromy), acb_mat(back.slope))
        turned = acb_mat(back.turns[0]) * drift + acb_mat(back.turns_r[0])
        speed = -c * (left * turned)[0, 0].real
        if not speed.abs_lower() > 0:
            raise NotProved("the trace may touch -2 without crossing it")
    raw = yield from coefficient_of(many, Kind.FLIP, box, frames, local, back, left, acb(-1), bits, text)
    with precision(bits):
        return _judged(many, speed, -c * raw / size)


PRESERVED = ("the map preserves areas", "its Jacobian determinant is 1 in magnitude everywhere, by algebra")


def _fold(many: ManyMap, speed: Any, bend: Any) -> Claims:
    if not bend.abs_lower() > 0:
        raise NotProved("the tangency may be of higher order: no true fold")
    evidence = (
        PRESERVED,
        ("both multipliers exactly +1", "one by the equations solved, the other as its inverse"),
        ("in a Jordan block", "f^p is not the identity to first order"),
        ("speed of the parameter", f"{number_words(speed)} per unit of {many.parameter}, not zero"),
        ("curvature at the tangency", f"{number_words(bend)}, not zero"),
    )
    nothing = Criticality.NOT_APPLICABLE
    return Claims(complex(1), (complex(1),), speed, bend, nothing, "", "", evidence)


def _judged(many: ManyMap, speed: Any, coefficient: Any) -> Claims:
    if not coefficient.is_finite():
        raise NotProved("the normal form's coefficient could not be bounded")
    evidence = [
        PRESERVED,
        ("both multipliers exactly -1", "one by the equations solved, the other as its inverse"),
        ("in a Jordan block", "f^p is not minus the identity to first order"),
        ("the trace crosses -2 with speed", f"{number_words(speed)} per unit of {many.parameter}"),
    ]
    criticality, degenerate, consequence = Criticality.UNDECIDED, "", ""
    if coefficient.contains(0):
        degenerate = "the coefficient of the conservative flip may be zero, so the onset may be degenerate"
    else:
        soft = bool(coefficient > 0)
        criticality = Criticality.SUPERCRITICAL if soft else Criticality.SUBCRITICAL
        words = f"{number_words(coefficient)} in scaled states: {criticality.value}"
        evidence.append(("conservative flip coefficient", words))
        consequence = (
            "conservative doubling, for the map preserves areas: the doubled cycle is "
            + (
                "stable, and the other one is not from there on"
                if soft
                else "unstable, beside the stable one"
            )
            + "; orbits circle round stable cycles here and settle on none"
        )
    return Claims(
        complex(-1), (complex(-1),), speed, coefficient, criticality, degenerate, consequence, tuple(evidence)
    )
