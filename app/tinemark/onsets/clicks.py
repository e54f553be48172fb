"""What a click does on a one-state map: settle, follow branches, choose the onset nearest on screen, prove.

Where a cycle is about to split, an orbit settles ever more slowly, so nothing here waits for it: an
orbit only has to come close to a cycle, Newton's method does the rest, and the onset is reached along
the branch. Orbits start from the turning points of the map, which every stable cycle of a map with
negative Schwarzian derivative attracts (Singer, 1978), and from a few other places for all other maps.
"""

from __future__ import annotations

import math
from collections.abc import Generator
from fractions import Fraction

from tinemark.onsets.crises import crises_in_view, crossing_of
from tinemark.onsets.decimals import leading_power
from tinemark.onsets.float_map import float_map
from tinemark.onsets.jumps import jump_of
from tinemark.onsets.mirrored_cycles import pitchforks_in_view
from tinemark.onsets.one_map import OneMap, one_map
from tinemark.onsets.onset_words import consequence_sentence, describe, short_number
from tinemark.onsets.polish import Lost, Rough
from tinemark.onsets.results import Kind, Onset, RefineRequest, RefineResult, Step
from tinemark.onsets.searches import (
    DEEP_NEAR,
    DEEP_WIDE,
    LONG,
    NEAR,
    PIXEL,
    WIDE,
    Candidate,
    Search,
    run_sweep,
)
from tinemark.onsets.settling import ONE_STATE_KINDS, settle_any
from tinemark.systems.errors import NoOnsetFound

CLOSE = 6 * PIXEL
"""Two onsets whose distances from the click differ by less than this are both shown."""
DEEP = 1e-11
"""Views narrower than this, relative to the parameter, are searched in high precision."""


def refine_one(request: RefineRequest) -> Generator[Step, None, RefineResult]:
    """Find, polish and prove the onset nearest to a click on a one-state map.

    Raises
    ------
    NoOnsetFound
        No onset in the view; says what was looked at.
    """
    one = one_map(request.system, request.parameter)
    if request.width <= 0:
        raise NoOnsetFound("the view has no width", what_to_do="choose a view in which the parameter varies")
    if request.kinds is not None and not request.kinds & ONE_STATE_KINDS:
        names = ", ".join(sorted(kind.value for kind in request.kinds))
        raise NoOnsetFound(
            f"a map of one state has no onset of kind {names}",
            what_to_do="ask for " + ", ".join(kind.value for kind in Kind if kind in ONE_STATE_KINDS),
        )
    yield Step("settling orbits around the click")
    deep = request.width < DEEP * abs(request.near)
    search = yield from (_deep_search(one, request) if deep else _search(one, request))
    result = yield from _prove_nearest(one, search)
    if result is None:
        raise NoOnsetFound(
            _looked_at(search),
            where=f"near {request.parameter} = {short_number(request.near)}",
            what_to_do="click nearer to a split, or widen the view",
        )
    return result


def _search(one: OneMap, request: RefineRequest) -> Generator[Step, None, Search]:
    cycles = float_map(one)
    search = Search(request, cycles)
    yield from run_sweep(search, NEAR)
    for landing in crises_in_view(cycles, float(request.near), search.width):
        search.add(crossing_of(landing))
    observed = request.observed if one.observes_state else None
    where = None if observed is None else float(observed)
    for crossing in pitchforks_in_view(cycles, request.near, where, search.width):
        search.add(crossing)
    yield Step("comparing the critical orbit with unstable cycles")
    if not search.done(0.03):
        yield from run_sweep(search, WIDE)
    if not search.done(0.03):
        yield from run_sweep(search, LONG)
    return search


def _deep_search(one: OneMap, request: RefineRequest) -> Generator[Step, None, Search]:
    from tinemark.onsets.deep_views import deep_crossings, deep_map

    deep = deep_map(one, request)
    search = Search(request, deep)
    crossings, search.climbed = yield from deep_crossings(one, request, deep)
    for crossing in crossings:
        search.add(crossing)
    if not search.done(0.03):
        yield from run_sweep(search, DEEP_NEAR)
    if not search.done(0.1):
        yield from run_sweep(search, DEEP_WIDE)
    return search


def _prove_nearest(one: OneMap, search: Search) -> Generator[Step, None, RefineResult | None]:
    """Prove candidates from the nearest on, until the view has no closer one left."""
    request = search.request
    reach = request.width / 100
    found: list[tuple[Candidate, Onset]] = []
    bounds: list[Onset] = []
    limit = math.inf
    wanted = [c for c in search.ranked() if request.kinds is None or c.crossing.kind in request.kinds]
    for candidate in wanted[:8]:
        if candidate.rank > limit or len(found) == 2:
            break
        crossing = candidate.crossing
        cycles = search.cycles
        rough = Rough(crossing.kind, crossing.period, cycles.exact(crossing.x), cycles.exact(crossing.r))
        yield Step(f"proving the {crossing.kind.value} of period {crossing.period}")
        try:
            settled = yield from settle_any(
                one,
                rough,
                _digits(request),
                reach=max(reach, abs(rough.r) / 10**9),
                show_after=candidate.steps_to_click,
            )
        except Lost:
            continue
        onset = settled.onset
        if request.kinds is not None and onset.kind not in request.kinds:
            continue
        if abs(onset.value_fraction - request.near) > request.width / 2:
            continue
        if any(onset.kind is other.kind and _overlap(onset, other) for _, other in found):
            continue
        jump = yield from jump_of(one, settled, _digits(request), request.width)
        onset = jump.onset
        if jump.fold is not None and (request.kinds is None or Kind.FOLD in request.kinds):
            bounds.append(jump.fold)
        found.append((candidate, onset))
        limit = found[0][0].rank + CLOSE
    if not found:
        return None
    onsets = [onset for _, onset in found]
    # The fold that bounds a hysteresis is part of the answer, wherever it lies.
    onsets += [
        bound
        for bound in bounds[:1]
        if not any(onset.kind is bound.kind and _overlap(onset, bound) for onset in onsets)
    ]
    return RefineResult(tuple(onsets), _message(found, request))


def _digits(request: RefineRequest) -> int:
    """Digits asked for, or as many as it takes to place the onset in the view."""
    size = max(abs(request.near), request.width)
    return max(request.digits, leading_power(size) - leading_power(request.width) + 4)


def _overlap(one: Onset, other: Onset) -> bool:
    return Fraction(one.lower) <= Fraction(other.upper) and Fraction(other.lower) <= Fraction(one.upper)


def _message(found: list[tuple[Candidate, Onset]], request: RefineRequest) -> str:
    onset = found[0][1]
    share = abs(onset.value_fraction - request.near) / request.width
    text = f"{describe(onset)}, {float(100 * share):.2g} % of the view's width from the click"
    if len(found) > 1:
        text += f"; a second is as close: {describe(found[1][1])}"
    if found[0][0].crossing.extent < PIXEL * float(request.width):
        text += "; it is smaller than a pixel of this view"
    sentences = [sentence for _, each in found if (sentence := consequence_sentence(each))]
    return ". ".join([text, *sentences]).removesuffix(".") if sentences else text


def _sought(request: RefineRequest) -> str:
    if request.kinds is None:
        return "no flip and no fold, and no onset of another kind,"
    kinds = [kind.value for kind in Kind if kind in request.kinds & ONE_STATE_KINDS]
    return " and ".join(f"no {kind}" for kind in kinds)


def _looked_at(search: Search) -> str:
    request = search.request
    text = (
        f"{_sought(request)} was found within half a view's width "
        f"({short_number(request.width / 2)}) of the click: {search.orbits} orbits were settled"
    )
    if search.climbed > 1:
        text += f", cascades around it were climbed to period {search.climbed}"
    if search.escaped == search.orbits:
        return f"{text}, and all orbits escaped"
    if not search.periods:
        return f"{text}, and none of the orbits is periodic"
    shown = ", ".join(str(period) for period in sorted(search.periods)[:8])
    return f"{text} and the branches of their cycles (periods {shown}) were followed{_touchings(search)}"


def _touchings(search: Search) -> str:
    text = ""
    places = max(0, 6 - leading_power(search.request.width))
    for period, value in sorted(search.touchings.items()):
        text += (
            f". The multiplier of the cycle of period {period} touches -1 near {search.request.parameter} = "
            f"{round(value, places) + 0.0:.10g} without crossing it, so nothing splits there"
        )
    return text
