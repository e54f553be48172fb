"""Where a cycle of a piecewise map of several states meets a switching surface: rough places along its
branch.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from itertools import pairwise

import numpy as np

from tinemark.onsets.many_cycles import Cycle, condensed, newton
from tinemark.onsets.many_map import FloatManyMap, Floats, ManyMap
from tinemark.onsets.many_pieces import (
    Word,
    WordMap,
    is_beyond,
    on_side,
    surface_values,
    switches,
    word_at,
)

LONGEST = 64
"""Longest cycle whose borders are looked for."""
TRIED = 3
"""Borders tried on each side of a cycle's parameter value, nearest first."""
ROUNDS = 12
ON_SURFACE = 1e-10
"""A surface's formula, over its steepness in scaled states, below which it counts as zero."""
SLACK = 1e-9


@dataclass(frozen=True)
class Touch:
    """A cycle with its first point on a surface.

    Attributes
    ----------
    place, level
        Which surface of `switches`, and where its formula stands on the border: 0, or a floor's whole number.
    word
        Sides at each point; the first point counted to one side of the border.
    """

    place: int
    level: int
    word: Word


@dataclass(frozen=True)
class _Guess:
    step: int
    place: int
    level: int
    shift: float


def borders_along(
    float_map: FloatManyMap, trace: Sequence[Cycle], scales: Floats, reach: float
) -> Iterator[tuple[int, Cycle]]:
    """Cycles that touch a surface on a branch: between its places, and ahead of both its ends.

    Parameters
    ----------
    trace
        Places of the branch in order.
    reach
        How far ahead of an end in the parameter one may lie.

    Yields
    ------
    tuple
        Index of the place it was seen from, and the cycle, its first point on the surface.
    """
    many = float_map.many
    if not trace or not switches(many) or trace[0].period > LONGEST:
        return
    words = [word_at(many, cycle.points, cycle.r) for cycle in trace]
    for at, (a, b) in enumerate(pairwise(words)):
        if a == b:
            continue
        span = abs(trace[at + 1].r - trace[at].r) + 1e-9 * reach
        for here, word in ((at, a), (at + 1, b)):
            found = next(_collisions(float_map, trace[here], word, scales, 2 * span), None)
            if found is not None:
                yield here, found
                break
    for at in dict.fromkeys((0, len(trace) - 1)):
        for found in _collisions(float_map, trace[at], words[at], scales, reach):
            yield at, found


def _collisions(
    float_map: FloatManyMap, cycle: Cycle, word: Word, scales: Floats, reach: float
) -> Iterator[Cycle]:
    """Border collisions of a cycle with its pieces fixed, the nearest on either side in the parameter."""
    pieces = WordMap(float_map, word)
    ahead = sorted(_predicted(float_map.many, pieces, cycle, word), key=lambda guess: abs(guess.shift))
    for sign in (1, -1):
        tried = [guess for guess in ahead if guess.shift * sign >= 0 and abs(guess.shift) <= 1.5 * reach]
        for guess in tried[:TRIED]:
            touch = Touch(guess.place, guess.level, (*word[guess.step :], *word[: guess.step]))
            start = Cycle(np.roll(cycle.points, -guess.step, axis=0), cycle.r)
            found = solve_touch(float_map, touch, start, scales)
            if found is None or abs(found.r - cycle.r) > 2 * reach:
                continue
            if admissible(float_map.many, touch, found, scales):
                yield found
                break


def _predicted(many: ManyMap, pieces: WordMap, cycle: Cycle, word: Word) -> list[_Guess]:
    """First-order guesses of where each point meets each surface."""
    n = many.size
    parts = condensed(pieces, cycle.points, cycle.r)
    try:
        first = np.linalg.solve(np.eye(n) - parts.monodromy, parts.closing[:, n])
    except np.linalg.LinAlgError:
        return []
    speeds = parts.blocks[:, :, :n] @ first + parts.blocks[:, :, n]
    values = surface_values(many, cycle.points, cycle.r)
    guesses = []
    for step in range(cycle.period):
        for place, surface in enumerate(switches(many)):
            g, gx, gr = values[step, place, 0], values[step, place, 1:-1], values[step, place, -1]
            slope = float(gx @ speeds[step] + gr)
            if slope == 0 or not np.isfinite(slope) or not np.isfinite(g):
                continue
            side = word[step][place]
            levels = (0,) if surface.kind == "zero" else (side, side + 1)
            guesses += [_Guess(step, place, level, float((level - g) / slope)) for level in levels]
    return guesses


def solve_touch(float_map: FloatManyMap, touch: Touch, start: Cycle, scales: Floats) -> Cycle | None:
    """Newton's method for a cycle of fixed pieces with its first point on the surface."""
    many, cycle = float_map.many, start
    pieces = WordMap(float_map, touch.word)
    for _ in range(ROUNDS):
        value = surface_values(many, cycle.points[:1], cycle.r)[0, touch.place]
        gap, gx, gr = float(value[0]) - touch.level, value[1:-1], float(value[-1])
        steepness = float(np.sum(np.abs(gx) * scales))
        if not np.isfinite(gap) or steepness == 0:
            return None
        if abs(gap) < ON_SURFACE * steepness:
            return cycle
        along = np.zeros_like(cycle.points)
        along[0] = gx
        target = float(gx @ cycle.points[0]) + gr * cycle.r - gap
        following = newton(pieces, cycle, scales, along=along, along_r=gr, target=target)
        if following is None:
            return None
        cycle = following
    return None


def admissible(many: ManyMap, touch: Touch, cycle: Cycle, scales: Floats) -> bool:
    """Whether no other point, and at the first no other surface, is on another side than said."""
    values = surface_values(many, cycle.points, cycle.r)
    for step, sides in enumerate(touch.word):
        for place, side in enumerate(sides):
            if (step, place) == (0, touch.place):
                continue
            value = float(values[step, place, 0])
            slack = SLACK * float(np.sum(np.abs(values[step, place, 1:-1]) * scales))
            if is_beyond(many, place, value + (slack if side > 0 else -slack), side) and not on_side(
                many, place, value, side
            ):
                return False
    return True


def touches_near(many: ManyMap, cycle: Cycle, scales: Floats, near: float) -> list[Touch]:
    """The surface nearest to the first point of a cycle, from either side; none where none is near.

    Parameters
    ----------
    near
        How near, in scaled states.
    """
    best: tuple[float, int, int] | None = None
    values = surface_values(many, cycle.points[:1], cycle.r)[0] if switches(many) else []
    for place, surface in enumerate(switches(many)):
        g, gx = float(values[place][0]), values[place][1:-1]
        level = round(g) if surface.kind == "integer" else 0
        steepness = float(np.sum(np.abs(gx) * scales))
        size = abs(g - level) / steepness if steepness else np.inf
        if best is None or size < best[0]:
            best = (size, place, level)
    if best is None or not best[0] <= near:
        return []
    _, place, level = best
    word = word_at(many, cycle.points, cycle.r)
    below, above = (level - 1, level) if switches(many)[place].kind == "integer" else (-1, 1)
    first = word[0]
    return [
        Touch(place, level, ((*first[:place], side, *first[place + 1 :]), *word[1:]))
        for side in (below, above)
    ]


def other_side(many: ManyMap, touch: Touch) -> Touch:
    """The same cycle with its first point counted to the other side of the border."""
    whole = switches(many)[touch.place].kind == "integer"
    below, above = (touch.level - 1, touch.level) if whole else (-1, 1)
    first = touch.word[0]
    side = above if first[touch.place] == below else below
    return Touch(
        touch.place, touch.level, ((*first[: touch.place], side, *first[touch.place + 1 :]), *touch.word[1:])
    )


def is_below(many: ManyMap, touch: Touch) -> bool:
    """Whether the first point is counted to the side where the surface's formula is less."""
    side = touch.word[0][touch.place]
    return side == (touch.level - 1 if switches(many)[touch.place].kind == "integer" else -1)
