"""Proofs of border collisions of several states: a cycle that reaches a switching surface, crossing it with
speed.

The cycle's pieces are fixed by hand, so (f^p(x) - x, g(x)) is smooth with the touching point x and the
parameter as unknowns, and the Krawczyk test applies. Where the formula is continuous across the surface,
exactly, the same point solves the equations of the other side, whose derivative is bounded there as well.
"""

from __future__ import annotations

from dataclasses import dataclass
from fractions import Fraction
from typing import Any

from flint import arb, arb_mat

from tinemark.onsets.exact_identities import replaced, vanishes
from tinemark.onsets.many_border_search import Touch, other_side
from tinemark.onsets.many_map import Floats, ManyMap
from tinemark.onsets.many_pieces import PieceWalk, on_side, piece_of, switches, walk_pieces
from tinemark.onsets.many_proof import least_period_words
from tinemark.onsets.many_shooting import column, entries
from tinemark.onsets.proofs import NotProved
from tinemark.systems.derivatives import derivative
from tinemark.systems.expression import ZERO, Call, Cond, Expr, Num, names_in, walk

ROUNDING = 12
"""Residuals are taken as no smaller than 2**(this - precision), so that no box is empty."""


@dataclass(frozen=True)
class SideProof:
    """What was shown of one side of a border collision, as balls at the precision of the proof.

    Attributes
    ----------
    x, r
        Enclosures of the touching point and of the parameter.
    box
        Middle and half-width of each side of the box, exact balls: the parameter, then the states.
    monodromy, drift
        Derivatives of f^p there, with this side's piece at the touching point.
    speed
        How fast the surface's formula moves with the parameter on this side's branch.
    evidence
        (claim, finding) pairs in words.
    """

    x: list[Any]
    r: Any
    box: tuple[tuple[Any, Any], ...]
    monodromy: Any
    drift: Any
    speed: Any
    evidence: tuple[tuple[str, str], ...]


def prove_side(many: ManyMap, touch: Touch, x: list[Any], r: Any, scales: Floats, bits: int) -> SideProof:
    """Prove that one side's cycle reaches the surface once in a box around exact balls, with speed.

    To be called at the precision of the proof.

    Raises
    ------
    NotProved
        A test failed or stayed undecided.
    """
    n = many.size
    at = walk_pieces(many, touch.word, x, r)
    inverse = _jacobian(n, touch, at).mid()
    try:
        inverse = inverse.inv().mid()
    except ZeroDivisionError as error:
        raise NotProved("the equations of the border collision are singular there") from error
    residual = [a - b for a, b in zip(entries(at.end), x, strict=True)]
    residual.append(at.first[touch.place][0] - touch.level)
    floor = arb(0, arb(2) ** (ROUNDING - bits))
    shift = inverse * column(
        [
            value + floor * max(1.0, float(scale))
            for value, scale in zip(residual, [*scales, 1.0], strict=True)
        ]
    )
    least = arb(2) ** -bits
    halves = [(2 * value.abs_upper() + least).abs_upper() for value in entries(shift)]
    wide = column([arb(0, half) for half in halves])
    box = [value + side for value, side in zip([*x, r], entries(wide), strict=True)]
    whole = walk_pieces(many, touch.word, box[:n], box[n])
    unit = arb_mat(n + 1, n + 1, [int(i == j) for i in range(n + 1) for j in range(n + 1)])
    image = -(inverse * column(residual)) + (unit - inverse * _jacobian(n, touch, whole)) * wide
    for part, half in zip(entries(image), halves, strict=True):
        if not part.abs_upper() < half:
            raise NotProved("the interval Newton test did not map the box into itself")
    found = [value + part for value, part in zip([*x, r], entries(image), strict=True)]
    claims = side_claims(many, touch, whole)
    half = float(halves[n])
    evidence = (
        ("one onset in the box", f"interval Newton test, half-width {half:.2g} in the parameter"),
        *least_period_words(whole.points, scales),
        ("all other points off every surface", "by balls around them"),
    )
    sides = tuple(zip([r, *x], [halves[n], *halves[:n]], strict=True))
    return SideProof(found[:n], found[n], sides, whole.monodromy, whole.drift, claims, evidence)


def _jacobian(n: int, touch: Touch, walk_: PieceWalk) -> Any:
    _, gx, gr = walk_.first[touch.place]
    rows: list[Any] = []
    for i in range(n):
        rows += [walk_.monodromy[i, j] - int(i == j) for j in range(n)]
        rows.append(walk_.drift[i, 0])
    rows += [*gx, gr]
    return arb_mat(n + 1, n + 1, rows)


def side_claims(many: ManyMap, touch: Touch, whole: PieceWalk) -> Any:
    """The speed across the surface on this side's branch, everything else kept off all surfaces.

    Raises
    ------
    NotProved
        Says what could not be shown.
    """
    n = many.size
    first = tuple(surface[0] for surface in whole.first)
    for step, (sides, values) in enumerate(zip(touch.word, (first, *whole.surfaces), strict=True)):
        for place, value in enumerate(values):
            if (step, place) != (0, touch.place) and not on_side(many, place, value, sides[place]):
                raise NotProved("the cycle may touch a second switching surface at the same time")
    unit = arb_mat(n, n, [int(i == j) for i in range(n) for j in range(n)])
    try:
        moved = (unit - whole.monodromy).solve(whole.drift)
    except ZeroDivisionError as error:
        raise NotProved("a one-sided multiplier may be +1") from error
    _, gx, gr = whole.first[touch.place]
    speed = sum((a * b for a, b in zip(gx, entries(moved), strict=True)), arb(0)) + gr
    if not speed.abs_lower() > 0:
        raise NotProved("the cycle may touch the surface without crossing it")
    return speed


def is_continuous(many: ManyMap, touch: Touch) -> bool:
    """Whether the two pieces agree on the surface, exactly, for every state and parameter value."""
    surface = switches(many)[touch.place]
    if not any(_chooses(node, surface.expr) for formula in many.formulas for node in walk(formula)):
        # min, max and abs are continuous wherever their arguments are.
        return True
    sides, others = touch.word[0], other_side(many, touch).word[0]
    border = Call("sub", (piece_of(many, surface.expr, sides), Num(Fraction(touch.level))))
    for state in many.states:
        slope = derivative(border, state)
        if slope == ZERO or state in names_in(slope):
            continue
        # The border's formula is straight in this state, so where it is zero can be written down.
        place = replaced(Call("sub", (ZERO, Call("div", (border, slope)))), {state: ZERO})
        return all(
            vanishes(
                replaced(
                    Call("sub", (piece_of(many, formula, sides), piece_of(many, formula, others))),
                    {state: place},
                )
            )
            for formula in many.formulas
        )
    return False


def _chooses(node: Expr, expr: Expr) -> bool:
    if isinstance(node, Cond):
        return Call("sub", (node.left, node.right)) == expr
    return isinstance(node, Call) and node.fn == "floor" and node.args[0] == expr


def differ(many: ManyMap, touch: Touch, x: list[Any], r: Any) -> tuple[bool, bool]:
    """Whether the two pieces certainly differ at a point, and whether their derivatives do."""
    n = many.size
    a, b = (walk_pieces(many, (side.word[0],), x, r) for side in (touch, other_side(many, touch)))
    value = any(not (p - q).contains(0) for p, q in zip(entries(a.end), entries(b.end), strict=True))
    slope = any(not (a.monodromy[i, j] - b.monodromy[i, j]).contains(0) for i in range(n) for j in range(n))
    return value, slope
