"""Where a cycle of a piecewise map meets a switching surface: candidates along its branch."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction
from typing import Any

from tinemark.onsets.ball_orbits import ball_of, fraction_of, precision
from tinemark.onsets.branches import Crossing, Cycle, least_period
from tinemark.onsets.float_map import FloatMap
from tinemark.onsets.one_map import OneMap
from tinemark.onsets.proofs import Inverse, NotProved, inverse_of
from tinemark.onsets.results import Kind
from tinemark.onsets.smooth_pieces import Sides, sides_at, smooth_piece, switches, walk_pieces

LONGEST = 128
"""Longest cycle whose borders are looked for."""
SEARCH_BITS = 90
TRIED = 3
"""Borders tried on each side of the cycle's parameter value, nearest first."""


@dataclass(frozen=True)
class Touch:
    """A cycle with its first point on a surface.

    Attributes
    ----------
    place, level
        Which surface of `switches`, and where its formula stands on the border: 0, or a floor's whole number.
    word
        Sides of the surfaces at each point; the first point counted to one side of the border.
    """

    place: int
    level: int
    word: tuple[Sides, ...]


def word_of(one: OneMap, points: Sequence[float], r: float) -> tuple[Sides, ...]:
    """Sides of the surfaces at each point of an orbit."""
    return tuple(sides_at(one, float(x), r) for x in points)


def turned(word: tuple[Sides, ...], steps: int) -> tuple[Sides, ...]:
    """The same cycle's word from another point on."""
    return word[steps:] + word[:steps]


def border_crossings(cycles: FloatMap, cycle: Cycle, reach: float, seen: set[Any]) -> list[Crossing]:
    """Border collisions of the cycle's branch near its parameter value.

    Parameters
    ----------
    reach
        How far in the parameter they may lie.
    seen
        Words whose branch was looked at already; this one's is added.
    """
    one = cycles.one
    if not switches(one) or cycle.period > LONGEST or not abs(cycle.multiplier) < 1:
        return []
    points = [float(x) for x in cycles.points(cycle.x, cycle.r, cycle.period)]
    word = word_of(one, points, float(cycle.r))
    key = min(turned(word, step) for step in range(len(word)))
    if key in seen:
        return []
    seen.add(key)
    found = []
    ahead = sorted(_predicted(one, cycle, points, word), key=lambda guess: abs(guess.shift))
    for sign in (1, -1):
        tried = [guess for guess in ahead if guess.shift * sign > 0 and abs(guess.shift) <= 1.5 * reach]
        for guess in tried[:TRIED]:
            touch = Touch(guess.place, guess.level, turned(word, guess.step))
            r = float(cycle.r) + guess.shift
            solved = solve_touch(one, touch, Fraction(guess.x), Fraction(r), SEARCH_BITS)
            if solved is None or not abs(float(solved[1]) - float(cycle.r)) <= 2 * reach:
                continue
            if admissible(one, touch, *solved):
                x, r = float(solved[0]), float(solved[1])
                # A cycle born on the border shrinks to the one that collides there.
                period = least_period(cycles, x, r, cycle.period)
                found.append(Crossing(Kind.BORDER_COLLISION, period, x, r, 2 * reach))
                break
    return found


@dataclass(frozen=True)
class _Guess:
    step: int
    place: int
    level: int
    x: float
    shift: float


def _predicted(one: OneMap, cycle: Cycle, points: Sequence[float], word: tuple[Sides, ...]) -> list[_Guess]:
    """First-order guesses of where each point meets each surface."""
    r = float(cycle.r)
    guesses = []
    with precision(SEARCH_BITS):
        values = [
            [
                float(value)
                for value in smooth_piece(one, sides).evaluate(ball_of(Fraction(x)), ball_of(Fraction(r)))
            ]
            for x, sides in zip(points, word, strict=True)
        ]
    multiplier, drift = 1.0, 0.0
    for value in values:
        multiplier, drift = value[1] * multiplier, value[1] * drift + value[2]
    if multiplier == 1:
        return []
    speed = drift / (1 - multiplier)
    for step, (x, value, sides) in enumerate(zip(points, values, word, strict=True)):
        for place, surface in enumerate(switches(one)):
            g, gx, gr = value[3 + 3 * place : 6 + 3 * place]
            slope = gx * speed + gr
            levels = (0,) if surface.kind == "zero" else (sides[place], sides[place] + 1)
            if slope == 0 or not math.isfinite(slope) or not math.isfinite(g):
                continue
            for level in levels:
                shift = (level - g) / slope
                guesses.append(_Guess(step, place, level, x + speed * shift, shift))
        speed = value[1] * speed + value[2]
    return [guess for guess in guesses if math.isfinite(guess.x)]


def solve_touch(
    one: OneMap, touch: Touch, x: Fraction, r: Fraction, bits: int
) -> tuple[Fraction, Fraction, Inverse, float] | None:
    """Newton's method for a cycle of fixed pieces with its first point on the surface.

    Returns
    -------
    tuple or None
        State, parameter, approximate inverse of the Jacobian, last step in the parameter; None where it
        does not converge.
    """
    last = math.inf
    with precision(bits):
        here_x, here_r = ball_of(x).mid(), ball_of(r).mid()
        for _ in range(40):
            walk = walk_pieces(one, touch.word, here_x, here_r)
            g, gx, gr = walk.first[touch.place]
            try:
                inverse = inverse_of(walk.multiplier, walk.drift, gx, gr)
            except NotProved:
                return None
            shift_x, shift_r = inverse.times(walk.end.mid() - here_x, g.mid() - touch.level)
            size = abs(float(shift_r)) + abs(float(shift_x))
            if not math.isfinite(size):
                return None
            here_x, here_r = (here_x - shift_x).mid(), (here_r - shift_r).mid()
            if size <= 2.0 ** (-0.85 * bits) * (abs(float(here_r)) + abs(float(here_x))) or (
                last < 2.0 ** (-0.5 * bits) and size >= last / 2
            ):
                return fraction_of(here_x), fraction_of(here_r), inverse, abs(float(shift_r))
            last = size
    return None


def admissible(one: OneMap, touch: Touch, x: Fraction, r: Fraction, *_: Any) -> bool:
    """Whether no other point, and at the first no other surface, is for certain on another side than said."""
    with precision(SEARCH_BITS):
        walk = walk_pieces(one, touch.word, ball_of(x), ball_of(r))
        first = tuple(surface[0] for surface in walk.first)
        return all(
            not _is_beyond(one, place, value, sides[place])
            for step, (sides, values) in enumerate(zip(touch.word, (first, *walk.surfaces), strict=True))
            for place, value in enumerate(values)
            if (step, place) != (0, touch.place)
        )


def _is_beyond(one: OneMap, place: int, value: Any, side: int) -> bool:
    if switches(one)[place].kind == "integer":
        return bool(value < side or value > side + 1)
    return bool(value < 0) if side > 0 else bool(value > 0)


def on_side(one: OneMap, place: int, value: Any, side: int) -> bool:
    """Whether a surface's formula, as a ball, is on one side for certain."""
    if switches(one)[place].kind == "integer":
        return bool(value > side and value < side + 1)
    return bool(value > 0) if side > 0 else bool(value < 0)
