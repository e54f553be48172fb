"""Proofs of border collisions: a cycle that reaches a switching surface, crossing it with speed.

The cycle's pieces are fixed by hand, so (f^p(x) - x, g(x)) is smooth with the touching point x and the
parameter as unknowns, and the Krawczyk test applies as for a smooth onset. Where the formula is continuous
across the surface, exactly, the same point solves the equations of the other side, and both one-sided
multipliers are bounded there (Nusse & Yorke, 1992; di Bernardo, Feigin, Hogan & Homer, 1999).
"""

from __future__ import annotations

from dataclasses import dataclass
from fractions import Fraction
from typing import Any

from flint import arb

from tinemark.onsets.ball_orbits import ball_of, fraction_of
from tinemark.onsets.border_search import Touch, on_side
from tinemark.onsets.exact_identities import replaced, vanishes
from tinemark.onsets.one_map import OneMap, depends_on
from tinemark.onsets.proofs import (
    Box,
    Correction,
    Interval,
    Inverse,
    NotProved,
    box_around,
    interval_of,
    krawczyk_image,
)
from tinemark.onsets.smooth_pieces import PieceWalk, Sides, frozen, smooth_piece, switches, walk_pieces
from tinemark.systems.derivatives import derivative
from tinemark.systems.expression import ZERO, Call, Cond, Num, walk
from tinemark.systems.surfaces import Surface


@dataclass(frozen=True)
class SideProof:
    """What was shown of one side of a border collision, as balls.

    Attributes
    ----------
    multiplier
        One-sided multiplier of the cycle.
    speed
        How fast the touching point's surface formula moves with the parameter on this side's branch.
    """

    parameter: Interval
    state: Interval
    multiplier: Any
    speed: Any
    gap: float
    box: Box


def other_side(one: OneMap, touch: Touch) -> Touch:
    """The same cycle with its first point counted to the other side of the border."""
    below, above = sides_of(one, touch)
    first = touch.word[0]
    swapped = above if first[touch.place] == below else below
    turned = (*first[: touch.place], swapped, *first[touch.place + 1 :])
    return Touch(touch.place, touch.level, (turned, *touch.word[1:]))


def sides_of(one: OneMap, touch: Touch) -> tuple[int, int]:
    """The two sides of the border: where its formula is less, and where it is more."""
    if switches(one)[touch.place].kind == "integer":
        return touch.level - 1, touch.level
    return -1, 1


def is_continuous(one: OneMap, touch: Touch) -> bool:
    """Whether the formula's two pieces agree on the surface, exactly, for every value of the parameter."""
    surface = switches(one)[touch.place]
    choosing = []
    for node in walk(one.exact_derivatives["f"]):
        if isinstance(node, Cond) and Call("sub", (node.left, node.right)) == surface.expr:
            choosing.append("condition")
        elif isinstance(node, Call) and node.fn == "floor" and node.args[0] == surface.expr:
            choosing.append("floor")
    if not choosing:
        # min, max and abs are continuous wherever their arguments are.
        return True
    chosen: list[dict[Surface, int]] = [
        dict(zip(switches(one), sides, strict=True)) for sides in _both(one, touch)
    ]
    level = Num(Fraction(touch.level))
    border = Call("sub", (frozen(surface.expr, chosen[0]), level))
    slope = derivative(border, one.state)
    if slope == ZERO or depends_on(slope, one.state):
        return False
    # The border's formula is straight in the state, so where it is zero can be written down.
    place = replaced(Call("sub", (ZERO, Call("div", (border, slope)))), {one.state: ZERO})
    pieces = [frozen(one.exact_derivatives["f"], choice) for choice in chosen]
    return vanishes(replaced(Call("sub", (pieces[0], pieces[1])), {one.state: place}))


def _both(one: OneMap, touch: Touch) -> tuple[Sides, Sides]:
    first, other = touch.word[0], other_side(one, touch).word[0]
    return (first, other) if first[touch.place] < other[touch.place] else (other, first)


def jumps(one: OneMap, touch: Touch, x: Any, r: Any) -> bool:
    """Whether the two pieces certainly differ at a point, so that the map jumps there."""
    values = [smooth_piece(one, sides).evaluate(x, r)[0] for sides in _both(one, touch)]
    return not (values[0] - values[1]).contains(0)


def bends_sharply(one: OneMap, touch: Touch, x: Any, r: Any) -> bool:
    """Whether the two pieces certainly have different slopes at a point, so that the map has a kink there."""
    slopes = [smooth_piece(one, sides).evaluate(x, r)[1] for sides in _both(one, touch)]
    return not (slopes[0] - slopes[1]).contains(0)


def prove_side(one: OneMap, touch: Touch, box: Box, inverse: Inverse) -> SideProof:
    """Prove that one side's cycle reaches the surface once in a box, and crosses it with speed.

    To be called at the precision of the proof.

    Raises
    ------
    NotProved
        A test failed or stayed undecided.
    """
    correction = correction_of(one, touch, box.x, box.r, inverse)
    whole = walk_pieces(one, touch.word, arb(box.x, box.half_x), arb(box.r, box.half_r))
    _, gx, gr = whole.first[touch.place]
    state = (None, whole.multiplier, whole.drift, gx, gr, None)
    image_x, image_r = krawczyk_image(box, inverse, correction, state)
    gap, speed = side_claims(one, touch, whole)
    # A little wider than the image, which is a point where everything came out exact: a printed interval has
    # to have an inside.
    room_x, room_r = (arb(0, (half / 256).abs_upper()) for half in (box.half_x, box.half_r))
    return SideProof(
        interval_of(box.r + image_r + room_r),
        interval_of(box.x + image_x + room_x),
        whole.multiplier,
        speed,
        gap,
        box,
    )


def correction_of(one: OneMap, touch: Touch, x: Any, r: Any, inverse: Inverse) -> Correction:
    """Rigorous -C F(m) of the border's equations at an exact point."""
    at = walk_pieces(one, touch.word, x, r)
    shift_x, shift_r = inverse.times(at.end - x, at.first[touch.place][0] - touch.level)
    return Correction(-shift_x, -shift_r)


def fitted_box(one: OneMap, touch: Touch, x: Any, r: Any, inverse: Inverse, bits: int) -> Box:
    """A box around a polished point, as `proofs.box_around` makes it."""
    return box_around(x, r, correction_of(one, touch, x, r, inverse), inverse, bits)


def side_claims(one: OneMap, touch: Touch, whole: PieceWalk) -> tuple[float, Any]:
    """Least distance of another point from the first one, and the speed across the surface."""
    first = tuple(surface[0] for surface in whole.first)
    for step, (sides, values) in enumerate(zip(touch.word, (first, *whole.surfaces), strict=True)):
        for place, value in enumerate(values):
            if (step, place) == (0, touch.place):
                continue
            if not on_side(one, place, value, sides[place]):
                raise NotProved("the cycle may touch a second switching surface at the same time")
    gaps = [(point - whole.points[0]).abs_lower() for point in whole.points[1:]]
    if not all(gap > 0 for gap in gaps):
        raise NotProved("the cycle's least period may be smaller", refuted=True)
    if (whole.multiplier - 1).contains(0):
        raise NotProved("a one-sided multiplier may be +1")
    _, gx, gr = whole.first[touch.place]
    speed = gx * whole.drift / (1 - whole.multiplier) + gr
    if not speed.abs_lower() > 0:
        raise NotProved("the cycle may touch the surface without crossing it")
    return min(map(float, gaps), default=0.0), speed


def proved_ball(interval: Interval) -> Any:
    """A ball around a proved interval, at the precision in force."""
    low, high = (ball_of(end) for end in interval)
    return low.union(high)


def exact_sides(box: Box) -> tuple[tuple[Fraction, Fraction], tuple[Fraction, Fraction]]:
    """Middle and half-width of a box: the parameter, then the state."""
    r, half_r, x, half_x = (fraction_of(side) for side in (box.r, box.half_r, box.x, box.half_x))
    return (r, half_r), (x, half_x)
