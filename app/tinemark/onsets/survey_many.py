"""Onsets of a map of several states in a range: on the branches of cycles that orbits settle on.

Here no turning points bound what there is, so nothing is said to be complete.
"""

from __future__ import annotations

from collections.abc import Generator
from dataclasses import dataclass, replace
from fractions import Fraction

import numpy as np

from tinemark.onsets.branch_places import Place, Screen
from tinemark.onsets.branch_seeds import settled_many, short_many
from tinemark.onsets.branch_survey import Branch, Survey, follow_all, kind_of
from tinemark.onsets.continuation import Pace
from tinemark.onsets.cycle_families import ManyFamily
from tinemark.onsets.cycle_map import CycleMap, Floats
from tinemark.onsets.flow_crossing import leaps
from tinemark.onsets.flow_map import cycle_map_of
from tinemark.onsets.many_border_search import borders_along
from tinemark.onsets.many_cycles import Cycle
from tinemark.onsets.many_map import FloatManyMap, many_map
from tinemark.onsets.many_onset import Settled, settle_onset
from tinemark.onsets.many_polish import NotFound
from tinemark.onsets.many_preparation import worked_out
from tinemark.onsets.results import Kind, Onset, Step, SurveyFind, SurveyRequest, SurveyResult
from tinemark.onsets.survey import check_kinds, counted, left_out, same, wanted
from tinemark.systems.errors import SwitchingTouched
from tinemark.systems.exact import fraction_text

COLUMNS = 120
SHORT = 2
SHORT_SHARES = (0.03, 0.5, 0.97)
SURVEYED = Pace(0.01, 0.06, smooth=False, farthest=12.0)
BORDER_REACH = 0.1
"""Share of the range by which a surface may lie ahead of a branch's last place."""
FAR_FROM_STABLE = 30.0
"""Past multipliers of this size a branch is left alone: where it is stable again orbits settle on it."""
FOLLOWED_SHARE = 0.5
"""Share of the progress at which all branches are followed."""
SMOOTH = frozenset({Kind.FLIP, Kind.FOLD, Kind.NEIMARK_SACKER, Kind.TRANSCRITICAL, Kind.PITCHFORK})
KINDS = SMOOTH | {Kind.BORDER_COLLISION}
"""Kinds that a survey of a map of several states looks for."""


@dataclass(frozen=True)
class _Candidate:
    kind: Kind
    place: Place
    reach: float


def survey_many(
    request: SurveyRequest, low: Fraction, high: Fraction
) -> Generator[Step | SurveyFind, None, SurveyResult]:
    """Find onsets of a map of several states between two parameter values; see `engine.survey`."""
    is_map = request.system.is_map
    check_kinds(request, KINDS if is_map else SMOOTH, "maps of several states" if is_map else "equations")
    yield Step("reading the system", 0.0)
    if is_map:
        for step in worked_out(many_map(request.system, request.parameter), 1):
            yield Step(step.text, 0.0)
    float_map = cycle_map_of(request.system, request.parameter)
    scales = float_map.scales(float(low + high) / 2)
    family = ManyFamily(float_map, scales, float(high - low))
    screen = Screen(float(low), float(high - low), 0.0, 1.0, margin=1e-3)
    most = request.max_period
    rs = [screen.left + screen.width * (k + 0.4871) / COLUMNS for k in range(COLUMNS)]
    seeds = [place for _, place in (yield from settled_many(family, rs, most)) if place.period <= most]
    seeds.sort(key=lambda place: place.period)
    shorts = [screen.left + screen.width * share for share in SHORT_SHARES]
    seeds += [place for _, place in (yield from short_many(family, shorts, min(most, SHORT)))]
    survey = Survey(family, screen, most)
    for step in follow_all(
        survey, seeds, pace=SURVEYED, stop=lambda place: abs(place.multipliers[0]) > FAR_FROM_STABLE
    ):
        share = None if step.share is None else FOLLOWED_SHARE * max(step.share, 0.0)
        yield Step(step.text, share)
    onsets: list[Onset] = []
    lost: list[str] = []
    candidates = [c for c in _candidates(survey) if wanted(request, c.kind)]
    for number, candidate in enumerate(candidates):
        doing = "proving" if is_map else "solving for"
        text = f"{doing} the {candidate.kind.value} of period {candidate.place.period}"
        share = FOLLOWED_SHARE + (1 - FOLLOWED_SHARE) * number / len(candidates)
        yield Step(f"{text} ({number + 1} of {len(candidates)})", share)
        rough = Cycle(candidate.place.points, candidate.place.r)
        try:
            settled = yield from _settled(float_map, candidate, rough, request.digits, scales)
        except (NotFound, SwitchingTouched) as error:
            lost.append(f"a {candidate.kind.value} near {rough.r:.9g} could not be solved for ({error})")
            continue
        onset = settled.onset
        if not low <= onset.value_fraction <= high or any(same(onset, other) for other in onsets):
            continue
        onsets.append(onset)
        yield SurveyFind(onset)
    onsets.sort(key=lambda onset: onset.value_fraction)
    return SurveyResult(tuple(onsets), _message(request, survey, tuple(onsets), lost))


def _settled(
    float_map: CycleMap, candidate: _Candidate, rough: Cycle, digits: int, scales: Floats
) -> Generator[Step, None, Settled]:
    try:
        return (yield from settle_onset(float_map, candidate.kind, rough, digits, scales, candidate.reach))
    except NotFound:
        if candidate.kind is not Kind.FOLD:
            raise
        # A pair of mirror images that turns round at the cycle it branches off from.
        return (yield from settle_onset(float_map, Kind.PITCHFORK, rough, digits, scales, candidate.reach))


def _candidates(survey: Survey) -> list[_Candidate]:
    """Onsets of the branches, by parameter, each once."""
    found: list[_Candidate] = []
    for branch in survey.branches:
        reach = abs(max(p.r for p in branch.places) - min(p.r for p in branch.places))
        reach = 0.05 * min(reach, survey.screen.width) + 1e-9 * abs(branch.places[0].r)
        for event in branch.events:
            place = branch.places[event.at]
            kind = kind_of(survey.family, place, event.passed)
            if kind in SMOOTH:
                found.append(_Candidate(kind, place, reach))
        found += [_Candidate(Kind.FLIP, parent, reach) for parent in branch.parents]
        found += _borders(survey, branch)
        if isinstance(survey.family, ManyFamily) and not survey.family.float_map.many.system.is_map:
            found += [_Candidate(Kind.PITCHFORK, place, reach) for _, place in leaps(branch.places)]
    found.sort(key=lambda candidate: candidate.place.r)
    kept: list[_Candidate] = []
    for candidate in found:
        if not any(_alike(candidate, other, survey) for other in kept[-8:]):
            kept.append(candidate)
    return kept


def _borders(survey: Survey, branch: Branch) -> list[_Candidate]:
    """Switching surfaces that the stable cycles of a branch meet."""
    family, width = survey.family, survey.screen.width
    if not isinstance(family, ManyFamily) or not isinstance(family.float_map, FloatManyMap):
        return []
    cycles = [Cycle(place.points, place.r) for place in branch.places]
    found = []
    for at, cycle in borders_along(family.float_map, cycles, family.scales, BORDER_REACH * width):
        beside = branch.places[max(0, at - 1) : at + 2]
        if any(place.stable for place in beside):
            place = replace(branch.places[at], points=cycle.points, r=cycle.r)
            found.append(_Candidate(Kind.BORDER_COLLISION, place, BORDER_REACH * width))
    return found


def _alike(a: _Candidate, b: _Candidate, survey: Survey) -> bool:
    if a.kind is not b.kind or a.place.period != b.place.period:
        return False
    if abs(a.place.r - b.place.r) > 1e-6 * survey.screen.width:
        return False
    gaps = np.max(np.abs(b.place.points - a.place.points[0]) / survey.family.scales, axis=1)
    return bool(np.min(gaps) < 1e-3)


def _message(request: SurveyRequest, survey: Survey, onsets: tuple[Onset, ...], lost: list[str]) -> str:
    low, high = sorted((request.start, request.stop))
    text = (
        f"{counted(onsets)} of periods up to {request.max_period} between {request.parameter} = "
        f"{fraction_text(low, 10)} and {fraction_text(high, 10)}; orbits were settled at {COLUMNS} places "
        f"and {len(survey.branches)} branches of their cycles followed: others may be missing, since nothing "
        f"bounds the cycles of {'a map of several states' if request.system.is_map else 'equations'}"
    )
    text += left_out(request, KINDS if request.system.is_map else SMOOTH)
    if survey.cut:
        text += "; there are more branches than were followed: narrow the range, or lower the longest period"
    if lost:
        text += "; " + "; ".join(dict.fromkeys(lost[:3]))
    return text
