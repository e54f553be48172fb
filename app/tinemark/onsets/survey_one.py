"""Every onset of a one-state map in a range, and what the answer's completeness rests on.

Each flip and each fold of a one-state map ends a stable stretch of some branch, on which the multiplier lies
between -1 and 1. A stretch that runs from one to the other passes a superstable cycle. So all superstable
cycles are found in ball arithmetic, and each is followed both ways to the ends of its stretch. A stretch cut
by an end of the range is found by settling orbits there; one that turns back before its multiplier reaches
zero can be found only by settling orbits in between.
"""

from __future__ import annotations

from collections import Counter
from collections.abc import Generator
from dataclasses import dataclass, field
from fractions import Fraction
from typing import Any

from tinemark.onsets.border_search import border_crossings
from tinemark.onsets.branch_places import Passed, Place, Screen
from tinemark.onsets.branch_seeds import settled_one
from tinemark.onsets.branch_survey import Branch, kind_of, lies_on, stretch
from tinemark.onsets.branches import Cycle
from tinemark.onsets.cycle_families import OneFamily, stretch_family
from tinemark.onsets.float_map import FloatMap, float_map
from tinemark.onsets.jumps import jump_of
from tinemark.onsets.one_map import OneMap, one_map
from tinemark.onsets.polish import Lost, Rough
from tinemark.onsets.results import Kind, Onset, Status, Step, SurveyFind, SurveyRequest, SurveyResult
from tinemark.onsets.settling import ONE_STATE_KINDS, settle_any
from tinemark.onsets.superstable_search import Superstable, SuperstableSearch, superstable_cycles
from tinemark.onsets.survey import check_kinds, counted, left_out, same, wanted
from tinemark.onsets.survey_crises import crises_of_windows
from tinemark.systems.exact import fraction_text

COLUMNS = 480
"""Places of the range at which orbits are settled."""
ENDED_WELL = {"left", "joined", "stopped"}
"""How a stable stretch ends where nothing is amiss: out of the range, at a flip, or past an onset."""
TAKEN_FOR_OTHERS = (Kind.TRANSCRITICAL, Kind.PITCHFORK, Kind.BORDER_COLLISION)
"""Kinds whose other branches may look like folds or flips there."""
BORDER_REACH = 1e-6
"""Share of the range within which a border collision lies of where the search has put it."""
PATIENCE = 12
"""Branches of one period followed in vain, after which no more of it are."""
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
    words: set[Any] = field(default_factory=set)


def survey_one(
    request: SurveyRequest, low: Fraction, high: Fraction
) -> Generator[Step | SurveyFind, None, SurveyResult]:
    """Find the onsets of a one-state map between two parameter values; see `engine.survey`."""
    check_kinds(request, ONE_STATE_KINDS, "maps of one state")
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
    if wanted(request, Kind.CRISIS):
        landings = yield from crises_of_windows(
            cycles, found.stretches, float(low), float(high), request.max_period
        )
        found.candidates += [
            _Candidate(Kind.CRISIS, landing.bands, landing.x, landing.r, 0.1 * landing.extent)
            for landing in landings
        ]
    onsets: list[Onset] = []
    # A crisis counts by its unstable cycle, which where bands merge has half as many points.
    most = {Kind.CRISIS: 2 * request.max_period}
    candidates = [c for c in found.candidates if wanted(request, c.kind)]
    candidates = [c for c in candidates if c.period <= most.get(c.kind, request.max_period)]
    candidates = [c for c in candidates if screen.holds(c.r)]
    candidates.sort(key=lambda candidate: candidate.r)
    for number, candidate in enumerate(candidates):
        yield Step(
            f"proving the {candidate.kind.value} of period {candidate.period} "
            f"({number + 1} of {len(candidates)})",
            SCAN_SHARE + (1 - SCAN_SHARE) * number / len(candidates),
        )
        for onset in (yield from _settled(one, candidate, request, found)):
            if max(onset.period_before, onset.period_after // 2) > request.max_period:
                continue
            inside = Fraction(onset.lower) <= high and low <= Fraction(onset.upper)
            if onset.status is Status.PROVED:
                inside = low <= onset.value_fraction <= high
            if inside and not any(same(onset, other) for other in onsets):
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
    if not set(branch.ends) <= ENDED_WELL:
        where = f"the branch of period {superstable.period} around {superstable.r:.9g}"
        found.lost.append((superstable.r, f"{where} could not be followed to both its ends"))


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
    in_vain: Counter[int] = Counter()
    for r, place in seeds:
        if place.period <= most:
            _add_borders(cycles, screen, place, found)
        # Cycles in a corner of the map, say, lie on branches that cannot be followed: a few tries are enough.
        if in_vain[place.period] >= PATIENCE:
            continue
        if place.period > most or any(lies_on(family, branch, place) for branch in found.stretches):
            continue
        near = stretch_family(cycles, screen.width, float(place.points[0, 0]), r, place.period)
        start = near.corrected(place.points, r)
        if start is None:
            continue
        branch = yield from stretch(near, screen, start)
        _take(cycles, near, branch, found)
        in_vain[place.period] += not set(branch.ends) <= ENDED_WELL
        fresh += 1
    return fresh


def _take(cycles: FloatMap, family: OneFamily, branch: Branch, found: _Found) -> None:
    """Keep a stretch and the onsets at its ends."""
    found.stretches.append(branch)
    width = abs(branch.places[-1].r - branch.places[0].r)
    for event in branch.events:
        place = branch.places[event.at]
        kind = kind_of(family, place, event.passed)
        # Where a cycle meets a surface its touching point counts, which is looked for by itself.
        if kind is not Kind.BORDER_COLLISION:
            _add(cycles, found, kind, place, width)
    for parent in branch.parents:
        _add(cycles, found, kind_of(family, parent, Passed.FLIP), parent, width)


def _add_borders(cycles: FloatMap, screen: Screen, place: Place, found: _Found) -> None:
    """Keep the border collisions of a piecewise map's cycle, which end its stretch without an event."""
    cycle = Cycle(place.period, float(place.points[0, 0]), place.r, place.multipliers[0].real)
    for crossing in border_crossings(cycles, cycle, screen.width, found.words):
        reach = BORDER_REACH * screen.width
        found.candidates.append(
            _Candidate(crossing.kind, crossing.period, float(crossing.x), float(crossing.r), reach)
        )


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
    one: OneMap, candidate: _Candidate, request: SurveyRequest, found: _Found
) -> Generator[Step, None, list[Onset]]:
    """The onset of a candidate, if it is one, and the fold that bounds its jump, if it is of the survey."""
    rough = Rough(candidate.kind, candidate.period, Fraction(candidate.x), Fraction(candidate.r))
    try:
        settled = yield from settle_any(one, rough, request.digits, reach=Fraction(candidate.reach))
    except Lost as error:
        where = f"the {candidate.kind.value} of period {candidate.period} near {candidate.r:.9g}"
        found.lost.append((candidate.r, f"{where} could not be solved for ({error})"))
        return []
    jump = yield from jump_of(one, settled, request.digits, abs(request.stop - request.start))
    onsets = [jump.onset]
    fold = jump.fold
    if fold is not None and wanted(request, Kind.FOLD) and fold.period_after <= request.max_period:
        onsets.append(fold)
    return onsets


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
    text += left_out(request, ONE_STATE_KINDS)
    settled = f"orbits settled at {COLUMNS + 2} places of the range"
    if not search.found and search.unknown:
        text += f"; found from {settled}: others may be missing, narrow ones before all"
    elif search.complete:
        text += f"; {_searched_words(len(search.found), _within(request))}"
        if not search.sure_of_turning:
            text += ", if the map has no turning points but those seen"
        text += f"; others were looked for from {settled}"
        if fresh:
            text += f", which gave {fresh} more stretch{'es' if fresh > 1 else ''} of stable cycles"
    else:
        missing = _missing(search)
        text += f"; superstable cycles were found in ball arithmetic but for {missing}, and {settled}"
    if wanted(request, Kind.CRISIS):
        text += (
            "; crises were looked for in doubles where windows end and bands merge: they are estimated, and "
            "others may be there"
        )
    lost = _lost(found, onsets, float(low), float(high))
    if lost:
        text += "; " + "; ".join(lost[:3])
        if len(lost) > 3:
            text += f"; and {len(lost) - 3} more"
    return text


def _within(request: SurveyRequest) -> str:
    """The states among which turning points were looked for, in words."""
    one = one_map(request.system, request.parameter)
    low, high = one.extent or _wandered(float_map(one))
    return f"turning points with {one.state} from {fraction_text(low, 6)} to {fraction_text(high, 6)}"


def _searched_words(number: int, within: str) -> str:
    if number == 0:
        return f"no cycle of these periods through {within} is superstable in the range, by ball arithmetic"
    how = "found in ball arithmetic and followed to the onsets of"
    so = "so none is missing of a cycle that becomes superstable there"
    if number == 1:
        return f"the one superstable cycle of these periods through {within} was {how} its branch, {so}"
    return (
        f"all {number} superstable cycles of these periods through {within} were {how} their branches, {so}"
    )


def _lost(found: _Found, onsets: tuple[Onset, ...], low: float, high: float) -> list[str]:
    """What was seen in the range and could not be solved for, and is no second sight of what was."""
    places = [float(onset.value_fraction) for onset in onsets if onset.kind in TAKEN_FOR_OTHERS]
    near = 1e-5 * (high - low)
    texts = [
        text for r, text in found.lost if low <= r <= high and all(abs(r - other) > near for other in places)
    ]
    return list(dict.fromkeys(texts))


def _missing(search: SuperstableSearch) -> str:
    parts = [(low, high) for _, low, high in search.undecided] + search.unknown
    total = sum((high - low for low, high in parts), Fraction(0))
    number = "1 interval" if len(parts) == 1 else f"{len(parts)} intervals"
    return f"{number} of {float(total):.2g} in all, where it is not decided"
