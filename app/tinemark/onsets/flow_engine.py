"""A click on the diagram of equations: the onset nearest to it, with an error estimate."""

from __future__ import annotations

from collections.abc import Generator
from dataclasses import dataclass
from fractions import Fraction

import numpy as np

from tinemark.onsets.branch_places import Place as BranchPlace
from tinemark.onsets.branch_places import Screen
from tinemark.onsets.branch_survey import Branch, followed, kind_of, lies_on
from tinemark.onsets.continuation import Pace
from tinemark.onsets.cycle_families import ManyFamily
from tinemark.onsets.cycle_map import Floats
from tinemark.onsets.flow_crossing import leaps
from tinemark.onsets.flow_limits import check_rates, first_samples, shorter_repeat, why_no_cycle
from tinemark.onsets.flow_map import FlowMap
from tinemark.onsets.flow_onset import SOLVED, settle_flow
from tinemark.onsets.flow_search import cycles_near
from tinemark.onsets.many_cycles import Cycle
from tinemark.onsets.many_jumps import with_jump
from tinemark.onsets.many_onset import Settled
from tinemark.onsets.many_polish import NotFound
from tinemark.onsets.many_search import Place
from tinemark.onsets.onset_words import consequence_sentence, describe
from tinemark.onsets.results import Kind, Onset, RefineRequest, RefineResult, Step
from tinemark.systems.errors import NoOnsetFound

PACE = Pace(0.03, 0.2, smooth=False, farthest=12.0)
MOST_BRANCHES, ENOUGH_BRANCHES = 6, 2
"""Branches followed at most, and when one of them has passed an onset close to the click."""
MOST_PLACES = 160
MOST_SETTLED = 5
"""Candidates that are solved for at most."""
FAR_FROM_STABLE = 60.0
"""Past multipliers of this size a branch is left alone."""
NARROWEST = 1e-8
"""Views narrower than this share of the parameter are searched as if they were this wide."""
IN_REACH = 0.75
"""Farther on the screen than this an onset does not count as what was meant."""
ALIKE = 1e-6
"""Difference of multipliers below which two cycles at one value are taken for images of each other."""
CLOSE, CLOSE_FLOOR = 1.5, 0.02
"""A second onset is shown up to so many times the nearest one's distance, or this much of the screen."""
LEAST_VISIBLE = 0.0015
"""Stable stretches shorter than this share of the view, about two pixels, cannot have been aimed at."""
GOOD_ENOUGH = 0.03
"""Branches that start farther from the click than this, and than the nearest onset, are left out."""


@dataclass(frozen=True)
class _Candidate:
    """Something a branch passes near the click; see `many_engine` for what is told apart by it."""

    kind: Kind
    rough: Cycle
    distance: float
    stable_share: float
    reach: float

    @property
    def rank(self) -> tuple[bool, float]:
        """What can be seen comes first, then what is near."""
        return self.stable_share < LEAST_VISIBLE, self.distance


def refine_flow(request: RefineRequest) -> Generator[Step, None, RefineResult]:
    """The onset nearest to a click on the diagram of a driven or free-running system.

    Orbits are settled around the click at a rough accuracy, the branches of their cycles followed through the
    view, and what they pass nearest to the click is solved for at several accuracies.

    Raises
    ------
    NoOnsetFound
        No onset in reach, or the equations stand in the way; says what was seen and what to try.
    """
    if request.kinds is not None and not request.kinds & SOLVED:
        asked = ", ".join(sorted(kind.value for kind in request.kinds)) or "none"
        raise NoOnsetFound(
            f"of the kinds asked for ({asked}) none is looked for in equations",
            what_to_do=f"ask for {', '.join(sorted(kind.value for kind in SOLVED))}",
        )
    if request.width <= 0:
        raise NoOnsetFound("the view has no width", what_to_do="choose a view in which the parameter varies")
    yield Step("reading the equations")
    place = Place(
        float(request.near),
        None if request.observed is None else float(request.observed),
        float(request.width),
        None if request.height is None else float(request.height),
    )
    check_rates(request.system, request.parameter, place.r)
    narrowest = NARROWEST * max(abs(place.r), 1e-3)
    if place.width < narrowest:
        place = Place(place.r, None, narrowest, None)
    flow = FlowMap(request.system, request.parameter)
    yield from first_samples(flow, place.r, place.width)
    scales = flow.scales(place.r)
    cycles, history = yield from cycles_near(flow, place, scales)
    if not cycles:
        seen = yield from why_no_cycle(flow, history, place.r, scales)
        raise NoOnsetFound(seen, what_to_do="click nearer to a split, or check the states' start values")
    wanted = SOLVED if request.kinds is None else request.kinds
    candidates = yield from _candidates(flow, cycles, place, scales, request, wanted)
    result = yield from _settle(flow, candidates, place, scales, request, wanted)
    return _within_view(result, request)


def _lengths(place: Place, scales: Floats, request: RefineRequest) -> Floats:
    """What counts as one length of each state: it shrinks with a view that is zoomed in on one."""
    names = request.system.state_names
    if not place.height or request.system.observe not in names:
        return scales
    at = names.index(request.system.observe)
    lengths: Floats = np.minimum(scales, np.maximum(place.height / scales[at], 1e-6) * scales)
    return lengths


def _candidates(
    flow: FlowMap,
    cycles: list[Cycle],
    place: Place,
    scales: Floats,
    request: RefineRequest,
    wanted: frozenset[Kind],
) -> Generator[Step, None, list[_Candidate]]:
    """What the branches through the cycles pass, nearest to the click first."""
    family = ManyFamily(flow, _lengths(place, scales, request), place.width)
    screen = Screen(place.r - IN_REACH * place.width, 2 * IN_REACH * place.width, 0.0, 1.0, margin=0.01)
    branches: list[Branch] = []
    begun: list[BranchPlace] = []
    found: list[_Candidate] = []
    for cycle in cycles:
        seen = min((item.distance for item in found if item.stable_share >= LEAST_VISIBLE), default=np.inf)
        most = ENOUGH_BRANCHES if seen < GOOD_ENOUGH else MOST_BRANCHES
        if len(branches) >= most or place.distance(flow, cycle) > max(seen, GOOD_ENOUGH):
            break
        start = family.corrected(cycle.points, cycle.r)
        if start is None or any(_alike(start, other) for other in begun):
            continue
        if any(lies_on(family, branch, start) for branch in branches):
            continue
        begun.append(start)
        branch = yield from followed(family, screen, start, MOST_PLACES, pace=PACE, stop=_far_from_stable)
        branches.append(branch)
        passed = _passed(family, flow, branch, place)
        found += [item for item in passed if item.kind in wanted and item.distance <= IN_REACH]
        yield Step("looking at the onsets passed")
    return sorted(found, key=lambda candidate: candidate.rank)


def _alike(a: BranchPlace, b: BranchPlace) -> bool:
    """Whether two cycles are mirror images, or whole turns of an angle apart: they do the same things."""
    if a.r != b.r or a.period != b.period:
        return False
    return bool(np.allclose(a.multipliers, b.multipliers, rtol=ALIKE, atol=ALIKE))


def _far_from_stable(place: BranchPlace) -> bool:
    return abs(place.multipliers[0]) > FAR_FROM_STABLE


def _passed(family: ManyFamily, flow: FlowMap, branch: Branch, place: Place) -> list[_Candidate]:
    found = []
    for event in branch.events:
        at = branch.places[event.at]
        kind = kind_of(family, at, event.passed)
        found.append(_candidate(flow, kind, at, place, _stable_stretch(branch, event.at), branch, event.at))
    for index, rough in leaps(branch.places):
        share = _stable_stretch(branch, index)
        found.append(_candidate(flow, Kind.PITCHFORK, rough, place, share, branch, index))
    for parent in branch.parents:
        # A branch of doubled cycles ends at the flip it split from.
        ends = [k for k in (0, len(branch.places) - 1) if _near(branch.places[k], parent, place)]
        shares = [_stable_stretch(branch, k) for k in ends]
        at_end = ends[0] if ends else 0
        found.append(_candidate(flow, Kind.FLIP, parent, place, max(shares, default=0.0), branch, at_end))
    return found


def _near(a: BranchPlace, b: BranchPlace, place: Place) -> bool:
    return abs(a.r - b.r) < 1e-3 * place.width


def _candidate(
    flow: FlowMap, kind: Kind, at: BranchPlace, place: Place, share: float, branch: Branch, index: int
) -> _Candidate:
    beside = branch.places[max(0, index - 1) : index + 2]
    spacing = max(abs(other.r - at.r) for other in beside)
    cycle = Cycle(at.points, at.r)
    reach = 3 * spacing + 0.02 * place.width
    return _Candidate(kind, cycle, place.distance(flow, cycle), share / place.width, reach)


def _stable_stretch(branch: Branch, at: int) -> float:
    """Length in the parameter of the stable part of a branch that ends at a place, on either side."""
    lengths = [0.0]
    for step in (-1, 1):
        here = at + step
        end = branch.places[at].r
        while 0 <= here < len(branch.places) and branch.places[here].stable:
            end = branch.places[here].r
            here += step
        lengths.append(abs(end - branch.places[at].r))
    return max(lengths)


def _settle(
    flow: FlowMap,
    candidates: list[_Candidate],
    place: Place,
    scales: Floats,
    request: RefineRequest,
    wanted: frozenset[Kind],
) -> Generator[Step, None, RefineResult]:
    """Solve for the nearest candidates and put the result into words."""
    settled: list[tuple[float, Settled]] = []
    lost = ""
    for candidate in candidates[:MOST_SETTLED]:
        if _far_beyond(settled, candidate.distance) or (settled and candidate.stable_share < LEAST_VISIBLE):
            continue
        rough = _turned(flow, candidate.rough, place)
        try:
            item = yield from settle_flow(
                flow, candidate.kind, rough, request.digits, scales, candidate.reach
            )
        except NotFound as error:
            lost = (
                lost
                or f"a {candidate.kind.value} near {flow.many.parameter} = {rough.r:.8g} was lost: {error}"
            )
            continue
        if any(_same(item, other) for _, other in settled):
            continue
        distance = place.distance(flow, item.cycle)
        if distance <= IN_REACH:
            settled.append((distance, item))
    settled.sort(key=lambda pair: pair[0])
    shown = [pair for pair in settled[:2] if not _far_beyond(settled[:1], pair[0])]
    if not shown:
        kinds = ", ".join(sorted(kind.value for kind in wanted))
        raise NoOnsetFound(
            lost or f"the cycles around the click pass no onset within reach ({kinds})",
            where=f"near {flow.many.parameter} = {place.r:.10g}",
            what_to_do="click nearer to a split, or widen the view",
        )
    onsets: list[Onset] = []
    for _, item in shown:
        onsets += [(yield from with_jump(flow, item, request.digits, scales, place.width))]
    return RefineResult(tuple(onsets), _message(flow, onsets, shown, place))


def _message(flow: FlowMap, onsets: list[Onset], shown: list[tuple[float, Settled]], place: Place) -> str:
    text = f"{describe(onsets[0])}; {100 * shown[0][0]:.2g} % of the view from the click"
    if len(onsets) > 1:
        text += f"; a second is as close: {describe(onsets[1])}"
    sentences = [sentence for onset in onsets if (sentence := consequence_sentence(onset))]
    repeat = shorter_repeat(flow.many.system, flow.many.parameter, place.r)
    if repeat:
        sentences.append(repeat[0].upper() + repeat[1:])
    return ". ".join([text, *sentences]).removesuffix(".")


def _far_beyond(settled: list[tuple[float, Settled]], distance: float) -> bool:
    return bool(settled) and distance > max(CLOSE * settled[0][0], CLOSE_FLOOR)


def _same(a: Settled, b: Settled) -> bool:
    if a.onset.kind is not b.onset.kind or a.onset.period_after != b.onset.period_after:
        return False
    # Of mirrored cycles, which do the same at the same value, the one that was clicked is enough.
    return abs(a.cycle.r - b.cycle.r) <= 2 * float(a.onset.half_width + b.onset.half_width)


def _turned(flow: FlowMap, cycle: Cycle, place: Place) -> Cycle:
    """The cycle begun at the point nearest to the click, so that the states given are the clicked ones."""
    if place.observed is None:
        return cycle
    apart = np.abs(flow.observed(cycle.points, cycle.r) - place.observed)
    return Cycle(np.roll(cycle.points, -int(np.argmin(apart)), axis=0), cycle.r)


def _within_view(result: RefineResult, request: RefineRequest) -> RefineResult:
    """The onsets that lie in the view as far as their errors tell."""
    reach = Fraction(IN_REACH) * request.width
    inside = tuple(
        onset
        for onset in result.onsets
        if abs(onset.value_fraction - request.near) <= reach + onset.half_width
    )
    if inside:
        return RefineResult(inside, result.message)
    nearest = min(abs(onset.value_fraction - request.near) for onset in result.onsets)
    raise NoOnsetFound(
        f"the nearest onset lies {float(nearest / request.width):.3g} widths of this view away",
        what_to_do="zoom out and click nearer to a split",
    )
