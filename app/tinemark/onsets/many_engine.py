"""A click on the diagram of a map of several states: the onset nearest to it, to many digits."""

from __future__ import annotations

from collections.abc import Generator
from fractions import Fraction

import numpy as np

from tinemark.onsets.decimals import decimal_places
from tinemark.onsets.many_branch import Crossing, Window, circle_test, narrowed
from tinemark.onsets.many_candidates import LEAST_VISIBLE, Candidate, candidates_of
from tinemark.onsets.many_cycles import Cycle, multipliers, newton, same_cycle
from tinemark.onsets.many_jumps import with_jump
from tinemark.onsets.many_ladder import ladder_many
from tinemark.onsets.many_map import FloatManyMap, Floats, float_many_map, many_map
from tinemark.onsets.many_onset import Settled, settle_onset
from tinemark.onsets.many_polish import NotFound
from tinemark.onsets.many_preparation import worked_out
from tinemark.onsets.many_search import Place, cycles_around
from tinemark.onsets.results import Kind, Onset, RefineRequest, RefineResult, Step
from tinemark.systems.errors import NoOnsetFound, SwitchingTouched

__all__ = ["ladder_many", "refine_many"]

CROSSED = frozenset({Kind.TRANSCRITICAL, Kind.PITCHFORK})
"""Kinds of crossings of branches."""
FOUND = frozenset({Kind.FLIP, Kind.FOLD, Kind.NEIMARK_SACKER, Kind.BORDER_COLLISION}) | CROSSED
"""Kinds that are looked for."""
NARROWEST = 1e-8
"""Views narrower than this share of the parameter are searched as if they were this wide."""
NARROW = 2e-4
"""Share of the view to which the bracket of a flip is narrowed before it is polished."""
CLOSE = 1.5
"""A second onset is shown when it lies no farther than this many times the nearest one's distance …"""
CLOSE_FLOOR = 0.02
"""… or within this much of the screen."""
IN_REACH = 0.75
"""Farther on the screen than this an onset does not count as what was meant."""


def refine_many(request: RefineRequest) -> Generator[Step, None, RefineResult]:
    """The onsets nearest to a click.

    Orbits are settled around the click, the cycles they lead to are followed through the view by
    continuation, their unstable parts and folds included, and the crossings nearest to the click on the
    screen are polished and proved, or estimated with the reason.

    Yields
    ------
    Step
        Progress, at least every few ten milliseconds.

    Returns
    -------
    RefineResult
        As the generator's value.

    Raises
    ------
    NoOnsetFound
        No such onset in reach; says what was looked at, and what else lies there.
    """
    if request.kinds is not None and not request.kinds & FOUND:
        asked = ", ".join(sorted(kind.value for kind in request.kinds)) or "none"
        raise NoOnsetFound(
            f"of the kinds asked for ({asked}) none is looked for in maps of several states",
            what_to_do=f"ask for {', '.join(sorted(kind.value for kind in FOUND))}",
        )
    yield Step("reading the map")
    many = many_map(request.system, request.parameter)
    yield from worked_out(many, 1)
    float_map = float_many_map(many)
    place = Place(
        float(request.near),
        None if request.observed is None else float(request.observed),
        float(request.width),
        None if request.height is None else float(request.height),
    )
    deep = place.width < NARROWEST * max(abs(place.r), 1e-3)
    if deep:
        # Doubles find the onset in a wider view; its digits decide whether it lies in this one.
        place = Place(place.r, None, NARROWEST * max(abs(place.r), 1e-3), None)
    full_scales = float_map.scales(place.r)
    cycles = yield from cycles_around(float_map, place, full_scales)
    if not cycles:
        raise NoOnsetFound(
            "no orbit around the click settles on a cycle or comes close to one",
            what_to_do="click nearer to a split, or check the start values of the states",
        )
    window = _window(place, full_scales, request)
    found = yield from candidates_of(float_map, cycles, place, window, full_scales)
    wanted = FOUND if request.kinds is None else request.kinds
    candidates = [candidate for candidate in found if _may_be(candidate.kind, wanted)]
    digits = request.digits + (_digits_to_tell_apart(request) if deep else 0)
    result = yield from _settle(float_map, candidates, place, window, full_scales, digits, wanted)
    return _within_view(result, request) if deep else result


def _may_be(crossing: Crossing, wanted: frozenset[Kind]) -> bool:
    """Whether a crossing can turn out to be of a kind that is wanted."""
    if crossing is Crossing.FOLD:
        # A branch of doubled cycles turns round at its flip, a pair of mirror images at its pitchfork.
        return bool(wanted & {Kind.FOLD, Kind.FLIP, *CROSSED})
    if crossing is Crossing.BRANCHES:
        return bool(wanted & CROSSED)
    return Kind(crossing.value) in wanted


def _digits_to_tell_apart(request: RefineRequest) -> int:
    """Digits that the parameter needs before its place in the view shows."""
    return max(0, decimal_places(request.width, 3) - decimal_places(request.near or request.width, 3))


def _within_view(result: RefineResult, request: RefineRequest) -> RefineResult:
    """The onsets that lie in a view too narrow for doubles."""
    reach = Fraction(IN_REACH) * request.width
    inside = tuple(o for o in result.onsets if abs(o.value_fraction - request.near) <= reach)
    if not inside:
        nearest = min(abs(onset.value_fraction - request.near) for onset in result.onsets)
        share = float(nearest / request.width)
        raise NoOnsetFound(
            f"the nearest onset lies {share:.3g} widths of this view away",
            what_to_do="zoom out and click nearer to a split",
        )
    text = "; ".join(_words(onset) for onset in inside)
    return RefineResult(inside, text[0].upper() + text[1:])


def _window(place: Place, scales: Floats, request: RefineRequest) -> Window:
    lengths = scales
    if place.height and request.system.observe in request.system.state_names:
        # A view zoomed in on a state: what counts as one length shrinks with it.
        at = request.system.state_names.index(request.system.observe)
        lengths = np.minimum(scales, np.maximum(place.height / scales[at], 1e-6) * scales)
    return Window(place.r - IN_REACH * place.width, place.r + IN_REACH * place.width, place.width, lengths)


def _settle(
    float_map: FloatManyMap,
    candidates: list[Candidate],
    place: Place,
    window: Window,
    scales: Floats,
    digits: int,
    wanted: frozenset[Kind],
) -> Generator[Step, None, RefineResult]:
    """Polish the nearest candidates and put the result into words."""
    settled: list[tuple[float, Settled]] = []
    lost: Candidate | None = None
    for candidate in candidates:
        if candidate.distance > IN_REACH or _far_beyond(settled, candidate.distance):
            continue
        if settled and candidate.stable_share < LEAST_VISIBLE:
            break
        onset = yield from _onset_at(float_map, candidate, place, window, scales, digits)
        if onset is None and candidate.kind is Crossing.NEIMARK_SACKER:
            lost = lost or candidate
        if onset is None or onset.onset.kind not in wanted:
            continue
        if any(_same(onset, other) for _, other in settled):
            continue
        distance = place.distance(float_map, onset.cycle)
        if distance <= IN_REACH:
            settled.append((distance, onset))
    settled.sort(key=lambda item: item[0])
    shown = [item for item in settled[:2] if not _far_beyond(settled[:1], item[0])]
    message = _message(float_map.many.parameter, shown, lost, wanted)
    if not shown:
        raise NoOnsetFound(message, what_to_do="" if lost else "click nearer to a split")
    onsets = []
    for _, item in shown:
        onsets.append((yield from with_jump(float_map, item, digits, scales, place.width)))
    return RefineResult(tuple(onsets), message)


def _closed_in(float_map: FloatManyMap, candidate: Candidate) -> Cycle:
    """A cycle near a Neimark-Sacker crossing, by the secant method."""
    cycle = candidate.rough
    low, high = candidate.event.before, candidate.event.after
    ends = [(low.cycle.r, low.circle_test), (high.cycle.r, high.circle_test)]
    for _ in range(6):
        (r0, t0), (r1, t1) = ends
        if t0 == t1:
            break
        r = r1 - t1 * (r1 - r0) / (t1 - t0)
        there = newton(float_map, Cycle(cycle.points, r), np.maximum(np.abs(cycle.points).max(axis=0), 1e-9))
        if there is None:
            break
        cycle = there
        ends = [ends[1], (r, circle_test(multipliers(float_map, there)))]
    return cycle


def _far_beyond(settled: list[tuple[float, Settled]], distance: float) -> bool:
    return bool(settled) and distance > max(CLOSE * settled[0][0], CLOSE_FLOOR)


def _onset_at(
    float_map: FloatManyMap,
    candidate: Candidate,
    place: Place,
    window: Window,
    scales: Floats,
    digits: int,
) -> Generator[Step, None, Settled | None]:
    rough = _turned(float_map, candidate.rough, place)
    bracket = abs(candidate.event.before.cycle.r - candidate.event.after.cycle.r)
    reach = 3 * bracket + 0.02 * window.width
    try:
        if candidate.kind is Crossing.FLIP:
            close = narrowed(float_map, candidate.event, window, NARROW * window.width)
            rough = _turned(float_map, close.rough, place)
            reach = 2 * abs(close.before.cycle.r - close.after.cycle.r) + 1e-9 * window.width
            return (yield from settle_onset(float_map, Kind.FLIP, rough, digits, scales, reach))
        if candidate.kind is Crossing.NEIMARK_SACKER:
            rough = _turned(float_map, _closed_in(float_map, candidate), place)
            return (yield from settle_onset(float_map, Kind.NEIMARK_SACKER, rough, digits, scales, reach))
        if candidate.kind is Crossing.BORDER:
            # Its first point is the one that touches, wherever the click fell.
            kind = Kind.BORDER_COLLISION
            return (yield from settle_onset(float_map, kind, candidate.rough, digits, scales, reach))
        if candidate.kind is Crossing.BRANCHES:
            return (yield from settle_onset(float_map, Kind.PITCHFORK, rough, digits, scales, reach))
        half = rough.period // 2
        if rough.period % 2 == 0:
            # A branch of doubled cycles turns round where it joins the branch it split from: a flip.
            mean = Cycle((rough.points[:half] + rough.points[half:]) / 2, rough.r)
            spread = float(np.max(np.abs(rough.points[:half] - rough.points[half:]) / window.scales))
            apart = float(
                np.max(
                    np.abs(candidate.event.before.cycle.points - candidate.event.after.cycle.points)
                    / window.scales
                )
            )
            if spread <= 2 * apart:
                return (yield from settle_onset(float_map, Kind.FLIP, mean, digits, scales, reach))
        try:
            return (yield from settle_onset(float_map, Kind.FOLD, rough, digits, scales, reach))
        except NotFound:
            # Where it turns round on another branch, no fold does it: it crosses that branch.
            return (yield from settle_onset(float_map, Kind.PITCHFORK, rough, digits, scales, reach))
    except (NotFound, SwitchingTouched):
        return None


def _same(a: Settled, b: Settled) -> bool:
    same_kind = a.onset.kind is b.onset.kind and a.onset.period_after == b.onset.period_after
    apart = abs(a.onset.value_fraction - b.onset.value_fraction)
    if not same_kind or apart > 2 * (a.onset.half_width + b.onset.half_width):
        return False
    return same_cycle(a.cycle, b.cycle, np.maximum(np.abs(a.cycle.points).max(axis=0), 1e-3))


def _turned(float_map: FloatManyMap, cycle: Cycle, place: Place) -> Cycle:
    """The cycle begun at the point nearest to the click, so that the states given are the clicked ones."""
    if place.observed is None:
        return cycle
    apart = np.abs(float_map.observed(cycle.points, cycle.r) - place.observed)
    return Cycle(np.roll(cycle.points, -int(np.argmin(apart)), axis=0), cycle.r)


def _words(onset: Onset) -> str:
    if onset.kind is Kind.FLIP:
        return f"flip from period {onset.period_before} to {onset.period_after}"
    if onset.kind is Kind.NEIMARK_SACKER:
        return f"Neimark-Sacker onset of period {onset.period_before}"
    if onset.kind is Kind.BORDER_COLLISION:
        return f"border collision of period {onset.period_before or onset.period_after}"
    if onset.kind in CROSSED:
        return f"{onset.kind.value} of period {onset.period_before}"
    return f"fold that opens period {onset.period_after}"


def _message(
    parameter: str,
    shown: list[tuple[float, Settled]],
    lost: Candidate | None,
    wanted: frozenset[Kind],
) -> str:
    sentences = []
    for share, item in shown:
        sentences.append(f"{_words(item.onset)}, {share:.2g} of the view from the click")
    if lost is not None and (not shown or lost.distance < shown[0][0]):
        where = f"{parameter} = {lost.rough.r:.6g} (period {lost.rough.period})"
        sentences.append(
            f"near the click a pair of multipliers reaches the unit circle near {where}, "
            "but no regular Neimark-Sacker onset could be solved for there"
        )
    if not sentences:
        names = {Kind.NEIMARK_SACKER: "Neimark-Sacker onset", Kind.TRANSCRITICAL: "transcritical point"}
        kinds = [names.get(kind, kind.value) for kind in Kind if kind in wanted & FOUND]
        what = " or ".join(filter(None, [", ".join(kinds[:-1]), kinds[-1]]))
        return f"no {what} of the cycles around the click lies within reach"
    text = "; ".join(sentences)
    return text[0].upper() + text[1:]
