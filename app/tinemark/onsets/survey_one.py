"""Every onset of a one-state map in a range, and what the answer's completeness rests on.

Each flip and each fold of a one-state map ends a stable stretch of some branch, on which the multiplier lies
between -1 and 1. A stretch that runs from one to the other passes a superstable cycle. So all superstable
cycles are found in ball arithmetic, and each is followed both ways to the ends of its stretch. A stretch cut
by an end of the range is found by settling orbits there; one that turns back before its multiplier reaches
zero can be found only by settling orbits in between.
"""

from __future__ import annotations

from collections.abc import Generator
from dataclasses import dataclass, field
from fractions import Fraction

from tinemark.onsets.branch_seeds import settled_one
from tinemark.onsets.branch_survey import Branch, kind_of, lies_on, stretch
from tinemark.onsets.continuation import Passed, Place, Screen
from tinemark.onsets.cycle_families import OneFamily, stretch_family
from tinemark.onsets.float_map import FloatMap, float_map
from tinemark.onsets.one_map import OneMap, one_map
from tinemark.onsets.polish import Lost, Rough
from tinemark.onsets.results import Kind, Onset, Step, SurveyFind, SurveyRequest, SurveyResult
from tinemark.onsets.settling import settle_any
from tinemark.onsets.superstable_search import Superstable, SuperstableSearch, superstable_cycles
from tinemark.onsets.survey import counted, same, wanted
from tinemark.systems.exact import fraction_text

COLUMNS = 480
"""Places of the range at which orbits are settled."""
SEARCH_SHARE, SCAN_SHARE = 0.4, 0.5
"""Shares of the progress at which the search for superstable cycles and the scan end."""


@dataclass(frozen=True)
class _Candidate:
    """An onset before it is polished."""

    kind: Kind
    period: int
    x: float
    r: float
    reach: float


@dataclass
class _Found:
    stretches: list[Branch] = field(default_factory=list)
    candidates: list[_Candidate] = field(default_factory=list)
    lost: list[tuple[float, str]] = field(default_factory=list)


def survey_one(
    request: SurveyRequest, low: Fraction, high: Fraction
) -> Generator[Step | SurveyFind, None, SurveyResult]:
    """Find the onsets of a one-state map between two parameter values; see `engine.survey`."""
    one = one_map(request.system, request.parameter)
    cycles = float_map(one)
    screen = Screen(float(low), float(high - low), 0.0, cycles.scale, margin=1e-3)
    search = yield from _searched(one, request, low, high)
    found = _Found()
    for number, superstable in enumerate(search.found):
        yield from _from_superstable(cycles, screen, superstable, found)
        yield Step(
            "following superstable cycles to their onsets", SEARCH_SHARE + 0.05 * number / len(search.found)
        )
    fresh = yield from _scan(cycles, screen, request.max_period, found)
    onsets: list[Onset] = []
    candidates = [c for c in found.candidates if c.period <= request.max_period and wanted(request, c.kind)]
    candidates.sort(key=lambda candidate: candidate.r)
    for number, candidate in enumerate(candidates):
        yield Step(
            f"proving the {candidate.kind.value} of period {candidate.period} "
            f"({number + 1} of {len(candidates)})",
            SCAN_SHARE + (1 - SCAN_SHARE) * number / len(candidates),
        )
        onset = yield from _settled(one, candidate, request.digits, found)
        if onset is None or not low <= onset.value_fraction <= high:
            continue
        if any(same(onset, other) for other in onsets):
            continue
        onsets.append(onset)
        yield SurveyFind(onset)
    onsets.sort(key=lambda onset: onset.value_fraction)
    return SurveyResult(tuple(onsets), _message(request, search, fresh, found, tuple(onsets)))


def _searched(
    one: OneMap, request: SurveyRequest, low: Fraction, high: Fraction
) -> Generator[Step, None, SuperstableSearch]:
    extent = one.extent
    if extent is None:
        extent = _wandered(float_map(one))
    job = superstable_cycles(one, low, high, extent, request.max_period)
    while True:
        try:
            step = next(job)
        except StopIteration as end:
            result: SuperstableSearch = end.value
            return result
        yield Step(step.text, None if step.share is None else SEARCH_SHARE * step.share)


def _wandered(cycles: FloatMap) -> tuple[Fraction, Fraction]:
    """Where turning points are looked for when the system gives its state no range."""
    points = cycles.critical_points(float(cycles.one.value))
    reach = Fraction(cycles.scale)
    middle = Fraction(points[0]) if points else cycles.one.start
    return middle - 2 * reach, middle + 2 * reach


def _from_superstable(
    cycles: FloatMap, screen: Screen, superstable: Superstable, found: _Found
) -> Generator[Step, None, None]:
    family = stretch_family(cycles, screen.width, superstable.x, superstable.r, superstable.period)
    points = cycles.points(superstable.x, superstable.r, superstable.period)
    place = family.corrected(points[:, None], superstable.r)
    if place is None:
        where = f"the superstable cycle of period {superstable.period} at {superstable.r:.9g}"
        found.lost.append((superstable.r, f"{where} could not be followed"))
        return
    branch = yield from stretch(family, screen, place)
    _take(cycles, family, branch, found)


def _scan(cycles: FloatMap, screen: Screen, most: int, found: _Found) -> Generator[Step, None, int]:
    """Settle orbits across the range and follow what is not known; gives how many stretches were new."""
    # Uneven, and just inside the ends: onsets of plain formulas like to lie at round numbers.
    shares = [1e-9, *((k + 0.4871) / COLUMNS for k in range(COLUMNS)), 1 - 1e-9]
    rs = [screen.left + screen.width * share for share in shares]
    family = OneFamily(cycles, cycles.scale, screen.width)
    job = settled_one(family, rs, most)
    while True:
        try:
            step = next(job)
        except StopIteration as end:
            seeds: list[tuple[float, Place]] = end.value
            break
        yield Step(step.text, SEARCH_SHARE + 0.05 + 0.05 * (step.share or 0.0))
    fresh = 0
    for r, place in seeds:
        if place.period > most or any(lies_on(family, branch, place) for branch in found.stretches):
            continue
        near = stretch_family(cycles, screen.width, float(place.points[0, 0]), r, place.period)
        start = near.corrected(place.points, r)
        if start is None:
            continue
        branch = yield from stretch(near, screen, start)
        _take(cycles, near, branch, found)
        fresh += 1
    return fresh


def _take(cycles: FloatMap, family: OneFamily, branch: Branch, found: _Found) -> None:
    """Keep a stretch and the onsets at its ends."""
    found.stretches.append(branch)
    width = abs(branch.places[-1].r - branch.places[0].r)
    for event in branch.events:
        place = branch.places[event.at]
        kind = kind_of(family, place, event.passed)
        _add(cycles, found, kind, place, width)
    for parent in branch.parents:
        _add(cycles, found, kind_of(family, parent, Passed.FLIP), parent, width)


def _add(cycles: FloatMap, found: _Found, kind: Kind, place: Place, width: float) -> None:
    x, r = float(place.points[0, 0]), place.r
    for other in found.candidates:
        if (
            other.kind is kind
            and other.period == place.period
            and abs(other.r - r) < 1e-4 * min(width, 100 * other.reach)
        ):
            points = cycles.points(other.x, other.r, other.period)
            if min(abs(points - x)) < 1e-3 * cycles.scale:
                return
    found.candidates.append(_Candidate(kind, place.period, x, r, 0.2 * width + 1e-9 * abs(r)))


def _settled(
    one: OneMap, candidate: _Candidate, digits: int, found: _Found
) -> Generator[Step, None, Onset | None]:
    rough = Rough(candidate.kind, candidate.period, Fraction(candidate.x), Fraction(candidate.r))
    try:
        settled = yield from settle_any(one, rough, digits, reach=Fraction(candidate.reach))
    except Lost as error:
        where = f"the {candidate.kind.value} of period {candidate.period} near {candidate.r:.9g}"
        found.lost.append((candidate.r, f"{where} could not be solved for ({error})"))
        return None
    return settled.onset


def _message(
    request: SurveyRequest,
    search: SuperstableSearch,
    fresh: int,
    found: _Found,
    onsets: tuple[Onset, ...],
) -> str:
    low, high = sorted((request.start, request.stop))
    text = (
        f"{counted(onsets)} of periods up to {request.max_period} between {request.parameter} = "
        f"{fraction_text(low, 10)} and {fraction_text(high, 10)}"
    )
    settled = f"orbits settled at {COLUMNS + 2} places of the range"
    if not search.found and search.unknown:
        text += f"; found from {settled}: others may be missing, narrow ones before all"
    elif search.complete:
        text += f"; {_searched_words(len(search.found))}"
        if not search.sure_of_turning:
            text += ", if the map has no turning points but those seen"
        text += f"; others were looked for from {settled}"
        if fresh:
            text += f", which gave {fresh} more stretch{'es' if fresh > 1 else ''} of stable cycles"
    else:
        missing = _missing(search)
        text += f"; superstable cycles were found in ball arithmetic but for {missing}, and {settled}"
    lost = _lost(found, onsets, float(high - low))
    if lost:
        text += "; " + "; ".join(lost[:3])
        if len(lost) > 3:
            text += f"; and {len(lost) - 3} more"
    return text


def _searched_words(number: int) -> str:
    if number == 0:
        return "no cycle of these periods is superstable in the range, by ball arithmetic"
    how = "found in ball arithmetic and followed to the onsets of"
    so = "so none is missing of a cycle that becomes superstable in the range"
    if number == 1:
        return f"the one superstable cycle of these periods was {how} its branch, {so}"
    return f"all {number} superstable cycles of these periods were {how} their branches, {so}"


def _lost(found: _Found, onsets: tuple[Onset, ...], width: float) -> list[str]:
    """What was seen and could not be solved for, and is no second sight of what was."""
    crossings = [
        float(onset.value_fraction) for onset in onsets if onset.kind in (Kind.TRANSCRITICAL, Kind.PITCHFORK)
    ]
    texts = [text for r, text in found.lost if all(abs(r - other) > 1e-5 * width for other in crossings)]
    return list(dict.fromkeys(texts))


def _missing(search: SuperstableSearch) -> str:
    parts = [(low, high) for _, low, high in search.undecided] + search.unknown
    total = sum((high - low for low, high in parts), Fraction(0))
    return f"{len(parts)} intervals of {float(total):.2g} in all, where it is not decided"
