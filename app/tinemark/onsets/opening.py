"""Where the cycle that splits first in a ladder comes from: the onset at the other end of its stretch."""

from __future__ import annotations

from collections.abc import Generator
from fractions import Fraction

import numpy as np

from tinemark.onsets.branch_places import Family, Floats, Place, Screen
from tinemark.onsets.branch_survey import Branch, kind_of, stretch
from tinemark.onsets.results import Kind, LadderRequest, Onset, Step


def opening_of(
    request: LadderRequest, first: Onset, kinds: frozenset[Kind]
) -> Generator[Step, None, Onset | None]:
    """The onset at which the base cycle of a ladder appears.

    Parameters
    ----------
    first
        The ladder's first level.
    kinds
        Kinds that count.

    Returns
    -------
    Onset or None
        None where the stable stretch of the base cycle has no onset of these kinds at its other end, within
        one more length of the ladder's range.
    """
    yield Step("following the cycle back to where it appears")
    r = float(first.value_fraction)
    width = abs(float(request.stop - request.start))
    screen = Screen(r - width, 2 * width, 0.0, 1.0, margin=0.0)
    states = np.array([float(Fraction(text)) for _, text in first.states])
    if request.system.is_map and len(request.system.states) == 1:
        return (yield from _opening_one(request, first, kinds, screen, float(states[0]), r))
    return (yield from _opening_many(request, first, kinds, screen, states, r))


def _opening_one(
    request: LadderRequest, first: Onset, kinds: frozenset[Kind], screen: Screen, x: float, r: float
) -> Generator[Step, None, Onset | None]:
    from tinemark.onsets.cycle_families import stretch_family
    from tinemark.onsets.float_map import float_map
    from tinemark.onsets.one_map import one_map
    from tinemark.onsets.polish import Lost, Rough
    from tinemark.onsets.settling import settle_any

    one = one_map(request.system, request.parameter)
    cycles = float_map(one)
    period = first.period_before
    family = stretch_family(cycles, screen.width, x, r, period)
    start = family.corrected(cycles.points(x, r, period)[:, None], r)
    if start is None:
        return None
    branch = yield from stretch(family, screen, start)
    for kind, place in _ends(family, branch, kinds):
        rough = Rough(kind, period, Fraction(float(place.points[0, 0])), Fraction(place.r))
        reach = Fraction(abs(place.r - r) / 4 + 1e-9 * abs(r))
        try:
            settled = yield from settle_any(one, rough, request.digits, reach=reach)
        except Lost:
            continue
        return settled.onset
    return None


def _opening_many(
    request: LadderRequest, first: Onset, kinds: frozenset[Kind], screen: Screen, x: Floats, r: float
) -> Generator[Step, None, Onset | None]:
    from tinemark.onsets.cycle_families import ManyFamily
    from tinemark.onsets.flow_map import cycle_map_of
    from tinemark.onsets.many_cycles import Cycle
    from tinemark.onsets.many_onset import settle_onset
    from tinemark.onsets.many_polish import NotFound
    from tinemark.systems.errors import SwitchingTouched

    float_map = cycle_map_of(request.system, request.parameter)
    scales = float_map.scales(r)
    family = ManyFamily(float_map, scales, screen.width)
    points = [x[:, None]]
    while len(points) < first.period_before:
        points.append(float_map.step(points[-1], r))
    start = family.corrected(np.array(points)[:, :, 0], r)
    if start is None:
        return None
    branch = yield from stretch(family, screen, start)
    for kind, place in _ends(family, branch, kinds):
        reach = abs(place.r - r) / 4 + 1e-9 * abs(r)
        try:
            settled = yield from settle_onset(
                float_map, kind, Cycle(place.points, place.r), request.digits, scales, reach
            )
        except (NotFound, SwitchingTouched):
            continue
        return settled.onset
    return None


def _ends(family: Family, branch: Branch, kinds: frozenset[Kind]) -> list[tuple[Kind, Place]]:
    """What ends the stretch, of the kinds that count."""
    ends = [(kind_of(family, branch.places[e.at], e.passed), branch.places[e.at]) for e in branch.events]
    return [(kind, place) for kind, place in ends if kind in kinds and kind is not Kind.FLIP]
