"""Onsets in views so deep that doubles cannot tell their columns apart.

What doubles can find around the click, at ever narrower widths, is polished in high precision and kept
where it lies in the view. From the flips among it the cascade is climbed further by its own ratios,
each level solved for in high precision, until it reaches the view or goes past it.
"""

from __future__ import annotations

import math
from collections.abc import Generator
from dataclasses import replace
from fractions import Fraction

from tinemark.onsets.ball_map import BallMap
from tinemark.onsets.branches import (
    Crossing,
    Cycle,
    birth_flip,
    crossing_at,
    cycle_with_multiplier,
)
from tinemark.onsets.crises import crises_in_view, crossing_of
from tinemark.onsets.decimals import leading_power
from tinemark.onsets.float_map import float_map
from tinemark.onsets.one_map import OneMap
from tinemark.onsets.polish import Lost, Rough
from tinemark.onsets.proofs import TARGETS
from tinemark.onsets.results import Kind, RefineRequest, Step
from tinemark.onsets.scaling_steps import extrapolated
from tinemark.onsets.searches import LONG, NEAR, PIXEL, WIDE, Search, run_sweep
from tinemark.onsets.settling import settle_any
from tinemark.systems.errors import NoOnsetFound

MOST_BITS = 1400
LONGEST_PERIOD = 2**15
CRISES_FROM = Fraction(1, 10**5)
"""Narrowest coarse width, as a share of the parameter, at which crises are looked for."""
COARSE_WIDTHS = (1e-1, 1e-3, 1e-5, 1e-7, 1e-9, 1e-11)
"""Widths, as shares of the parameter, at which doubles look around the click."""


def deep_map(one: OneMap, request: RefineRequest) -> BallMap:
    """The map at a precision that tells the columns of a view apart, with room for long cycles.

    Raises
    ------
    NoOnsetFound
        The view is narrower than the precision supported.
    """
    size = abs(request.near)
    depth = _log2(size / request.width)
    if depth > MOST_BITS - 200:
        raise NoOnsetFound(
            "the view is too narrow to search", what_to_do="widen it to 1e-300 of the parameter or more"
        )
    return BallMap(one, math.ceil(2 * depth) + 100)


def _log2(ratio: Fraction) -> float:
    return math.log2(ratio.numerator) - math.log2(ratio.denominator)


def deep_crossings(
    one: OneMap, request: RefineRequest, deep: BallMap
) -> Generator[Step, None, tuple[list[Crossing], int]]:
    """Onsets in a deep view, found from outside it, and the longest period that was climbed to."""
    coarse: list[Crossing] = []
    size = abs(request.near)
    for share in COARSE_WIDTHS:
        width = size * Fraction(share)
        search = Search(replace(request, width=width, observed=None, height=None), float_map(one))
        yield from run_sweep(search, NEAR)
        if not search.done(0.03):
            yield from run_sweep(search, LONG if share < 1e-6 else WIDE)
        if share >= CRISES_FROM:
            for landing in crises_in_view(float_map(one), float(request.near), float(width)):
                search.add(crossing_of(landing))
        coarse += [candidate.crossing for candidate in search.ranked()[:6]]
        yield Step(f"looking around the click, at width {float(width):.1g}")
    found: list[Crossing] = []
    tried: set[tuple[Kind, int, int]] = set()
    for crossing in coarse:
        key = (crossing.kind, crossing.period, round(float(crossing.r) / float(size) * 1e12))
        if key in tried:
            continue
        tried.add(key)
        if crossing.kind in TARGETS:
            polished = polished_crossing(deep, crossing)
        else:
            polished = yield from _settled_crossing(one, request, deep, crossing)
        yield Step("polishing what lies around the click")
        if polished is not None:
            found.append(polished)
    found += yield from _climb(one, request, deep, found)
    inside = [c for c in found if abs(deep.offset(c.r, request.near)) <= float(request.width) / 2]
    return inside, max((crossing.period for crossing in found), default=0)


def polished_crossing(deep: BallMap, crossing: Crossing) -> Crossing | None:
    """A crossing solved for again in high precision."""
    x, r = crossing.x, crossing.r
    if isinstance(r, float):
        x, r = deep.number(x), deep.number(r)
    # Quadratic convergence: as many steps as doublings of the digits, and a few more.
    for _ in range(4 + deep.bits.bit_length()):
        step = deep.newton(x, r, crossing.period, TARGETS[crossing.kind])
        if step is None:
            return None
        x, r = step.x, step.r
        if abs(step.shift_r) <= abs(float(r)) * 2.0 ** (-deep.bits * 0.75):
            break
    return crossing_at(deep, Cycle(crossing.period, x, r, float(TARGETS[crossing.kind])), crossing.kind)


def _settled_crossing(
    one: OneMap, request: RefineRequest, deep: BallMap, crossing: Crossing
) -> Generator[Step, None, Crossing | None]:
    """An onset of a kind with equations of its own, polished to the digits that place it in the view."""
    digits = leading_power(abs(request.near)) - leading_power(request.width) + 4
    rough = Rough(crossing.kind, crossing.period, Fraction(crossing.x), Fraction(crossing.r))
    try:
        settled = yield from settle_any(one, rough, digits)
    except Lost:
        return None
    return replace(crossing, kind=settled.onset.kind, x=deep.number(settled.x), r=deep.number(settled.r))


def _climb(
    one: OneMap, request: RefineRequest, deep: BallMap, found: list[Crossing]
) -> Generator[Step, None, list[Crossing]]:
    """Further levels of the cascade nearest to the click, up to the view."""
    flips = [crossing for crossing in found if crossing.kind is Kind.FLIP]
    if not flips:
        return []
    nearest = min(flips, key=lambda flip: abs(deep.offset(flip.r, request.near)))
    levels = yield from _levels_below(one, deep, nearest)
    fresh: list[Crossing] = []
    half_view = float(request.width) / 2
    while len(levels) >= 4 and 2 * levels[-1].period <= LONGEST_PERIOD:
        last = levels[-1]
        r = extrapolated([deep.exact(level.r) for level in levels])
        x = extrapolated([deep.exact(level.x) for level in levels])
        if r is None or x is None:
            break
        ahead = deep.offset(last.r, request.near)
        gap = float(r - deep.exact(last.r))
        # Past the click, or so far along that all that follows is smaller than a pixel.
        if ahead * gap > 0 and abs(ahead) > half_view:
            break
        if abs(gap) < half_view * PIXEL:
            break
        guess = Crossing(Kind.FLIP, 2 * last.period, deep.number(x), deep.number(r), abs(gap))
        following = polished_crossing(deep, guess)
        yield Step(f"climbing the cascade to period {guess.period}")
        if following is None or abs(deep.offset(following.r, r)) > 0.3 * abs(gap):
            break
        levels.append(following)
        fresh.append(following)
    return fresh


def _levels_below(one: OneMap, deep: BallMap, top: Crossing) -> Generator[Step, None, list[Crossing]]:
    """The last levels of a cascade up to a flip, each at its cycle point nearest the turning point."""
    cycles = float_map(one)
    levels = [_anchored(one, deep, top)]
    x, r, period = float(top.x), float(top.r), top.period
    while period % 2 == 0 and len(levels) < 6:
        near = cycle_with_multiplier(cycles, x, r, period, -0.5)
        if near is None:
            break
        below = birth_flip(cycles, Cycle(period, near[0], near[1], -0.5), Fraction(r), abs(r))
        if below is None:
            break
        polished = polished_crossing(deep, below)
        yield Step("following the cascade")
        if polished is None:
            break
        levels.insert(0, _anchored(one, deep, polished))
        x, r, period = float(below.x), float(below.r), below.period
    return levels


def _anchored(one: OneMap, deep: BallMap, level: Crossing) -> Crossing:
    steps = float_map(one).nearest_turning(float(level.x), float(level.r), level.period)
    return replace(level, x=deep.points(level.x, level.r, steps + 1)[-1])
