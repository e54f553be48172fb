"""The branches of a view: cycles taken up where orbits settle, followed around folds and past every flip."""

from __future__ import annotations

from collections import deque
from collections.abc import Callable, Generator
from dataclasses import dataclass, field
from itertools import pairwise

import numpy as np

from tinemark.onsets.branch_places import Event, Family, Floats, Passed, Place, Screen, Trace
from tinemark.onsets.branch_seeds import (
    doubled,
    parents_of,
    settled_many,
    settled_one,
    short_many,
    short_one,
)
from tinemark.onsets.continuation import BRISK, DRAWN, Pace, follow
from tinemark.onsets.cycle_families import ManyFamily, OneFamily
from tinemark.onsets.float_map import float_map
from tinemark.onsets.flow_map import cycle_map_of
from tinemark.onsets.one_map import one_map
from tinemark.onsets.results import BranchPiece, BranchRequest, BranchResult, Kind, Step
from tinemark.systems.errors import NoOnsetFound

COLUMNS_ONE, COLUMNS_MANY = 192, 48
SHORT_ONE, SHORT_MANY = 4, 2
"""Longest periods of the cycles looked for whatever their stability."""
SHORT_COLUMNS = (0.02, 0.5, 0.98)
LONGEST_SETTLED = 256
"""Cycles of up to so many points are settled on, for the shorter ones that they split off from."""
MOST_BRANCHES = 60
MOST_PLACES = 30_000
"""Places of all branches together: the work is bounded, and the message says when the bound was met."""
MOST_OF_A_STRETCH = 400
"""Places of one stable stretch; a few tens are usual."""
NARROWEST = 1e-10
"""Views narrower than this share of the parameter cannot be told apart in doubles."""
ON_IT = 1e-5
"""Share of the view within which a cycle lies on a branch that was followed."""
FIRST_AMPLITUDES = (4e-3, 1e-3, 2e-2)
"""Where a doubled branch is taken up, as shares of the state's scale."""
WEAK_PUSH, WEAK_BEND = 1e-4, 1e-2
"""Scaled sizes below which a cycle with multiplier 1 counts as not pushed, or not bent."""
SAME_SPOT = 3e-4
"""Onsets of one kind and period closer than this share of the view are shown as one."""
LEAPT = 0.05
"""A multiplier that is farther than this from -1 or 1 where it passes did not go there smoothly."""
OUTSIDE = 0.02
"""Share of the view's height by which a curve may lie outside it and still belong to it."""


@dataclass
class Branch:
    """A branch followed both ways.

    Attributes
    ----------
    places, events
        Its places in order, and what happens at them.
    parents
        Cycles of half the period, at the flips that its ends join.
    ends
        Why it stops, at either end; see `branch_places.Trace`.
    """

    places: list[Place]
    events: list[Event]
    closed: bool = False
    parents: list[Place] = field(default_factory=list)
    ends: tuple[str, ...] = ()

    @property
    def period(self) -> int:
        """Points of its cycles."""
        return self.places[0].period


@dataclass
class Survey:
    """Branches as they are gathered; `cut` when the bound of the work was met."""

    family: Family
    screen: Screen
    most_period: int
    branches: list[Branch] = field(default_factory=list)
    places: int = 0
    cut: bool = False

    def is_on(self, place: Place) -> bool:
        """Whether a cycle lies on a branch that was followed already."""
        return any(lies_on(self.family, branch, place) for branch in self.branches)

    def full(self) -> bool:
        """Whether the bound of the work is met."""
        if len(self.branches) >= MOST_BRANCHES or self.places >= MOST_PLACES:
            self.cut = True
        return self.cut


def branches_of(request: BranchRequest) -> Generator[Step, None, BranchResult]:
    """Follow the cycles of a view; see `engine.branches`.

    Raises
    ------
    NoOnsetFound
        The view has no extent, or is too narrow for doubles.
    """
    family, screen = _stage(request)
    seeds = yield from _seeds(family, screen, request.max_period)
    survey = Survey(family, screen, request.max_period)
    yield from follow_all(survey, seeds)
    return _result(survey)


def follow_all(
    survey: Survey,
    seeds: list[Place],
    *,
    pace: Pace = DRAWN,
    stop: Callable[[Place], bool] | None = None,
) -> Generator[Step, None, None]:
    """Follow the branches of cycles, and those that split off at their flips, until nothing new is left."""
    waiting = deque(seeds)
    total = max(1, len(waiting))
    while waiting:
        place = waiting.popleft()
        if survey.is_on(place):
            continue
        if survey.full():
            break
        yield Step(f"following the branch of period {place.period}", 1 - len(waiting) / (total + 1))
        most = MOST_PLACES - survey.places
        branch = yield from followed(survey.family, survey.screen, place, most, pace=pace, stop=stop)
        survey.branches.append(branch)
        survey.places += len(branch.places)
        fresh = _split_off(survey.family, branch, survey.most_period)
        total = max(total, len(waiting) + len(fresh))
        # What splits off is looked at next: it belongs to what was just drawn.
        waiting.extendleft(reversed(fresh))


def _stage(request: BranchRequest) -> tuple[Family, Screen]:
    width, height = request.right - request.left, request.top - request.bottom
    if width <= 0 or height <= 0:
        raise NoOnsetFound("the view has no extent", what_to_do="choose a view in which both axes vary")
    if width < NARROWEST * max(abs(request.left), abs(request.right)):
        raise NoOnsetFound(
            "the view is too narrow for branches to be followed in double precision",
            what_to_do="zoom out; a click still refines here",
        )
    screen = Screen(float(request.left), float(width), float(request.bottom), float(height))
    system = request.system
    if request.observe != system.observe or request.parameter != system.diagram_parameter:
        system = system.with_diagram(request.parameter, request.observe)
    family: Family
    if system.is_map and len(system.states) == 1:
        one = one_map(system, request.parameter)
        cycles = float_map(one)
        scale = min(cycles.scale, float(height)) if one.observes_state else cycles.scale
        family = OneFamily(cycles, scale, float(width))
    else:
        many = cycle_map_of(system, request.parameter)
        scales = many.scales(float(request.left + request.right) / 2)
        if system.observe in system.state_names:
            at = system.state_names.index(system.observe)
            scales = np.minimum(1.0, max(float(height) / scales[at], 1e-6)) * scales
        family = ManyFamily(many, scales, float(width))
    return family, screen


def _seeds(family: Family, screen: Screen, most: int) -> Generator[Step, None, list[Place]]:
    """Cycles to begin with: settled ones across the view, then short ones of any stability."""
    many = isinstance(family, ManyFamily)
    columns = COLUMNS_MANY if many else COLUMNS_ONE
    rs = [screen.left + screen.width * (k + 0.5) / columns for k in range(columns)]
    shorts = [screen.left + screen.width * share for share in SHORT_COLUMNS]
    longest = max(most, LONGEST_SETTLED)
    if isinstance(family, OneFamily):
        found = yield from settled_one(family, rs, longest)
        shorts_found = yield from short_one(family, shorts, min(most, SHORT_ONE))
    else:
        assert isinstance(family, ManyFamily)
        found = yield from settled_many(family, rs, longest)
        shorts_found = yield from short_many(family, shorts, min(most, SHORT_MANY))
    found.sort(key=lambda item: item[1].period)
    # One of each period stands for what it split off from; is_on() sorts out the rest.
    first_of = {place.period: place for _, place in reversed(found)}
    parents = [parent for place in first_of.values() for parent in parents_of(family, place)]
    seeds = [place for _, place in found] + sorted(parents, key=lambda place: place.period)
    seeds += [place for _, place in shorts_found]
    return [place for place in seeds if place.period <= most]


def followed(
    family: Family,
    screen: Screen,
    start: Place,
    most: int,
    *,
    pace: Pace = DRAWN,
    stop: Callable[[Place], bool] | None = None,
) -> Generator[Step, None, Branch]:
    """A branch followed both ways from one of its cycles."""
    onward = yield from follow(family, start, 1, screen, pace=pace, most=max(20, most), stop=stop)
    if onward.ended == "closed":
        return Branch(onward.places, onward.events, closed=True)
    left = max(20, most - len(onward.places))
    backward = yield from follow(family, start, -1, screen, pace=pace, most=left, stop=stop)
    return _joined(backward, onward)


def _joined(backward: Trace, onward: Trace) -> Branch:
    before = [place.turned() for place in backward.places[:0:-1]]
    turned = len(backward.places) - 1
    events = [Event(event.passed, turned - event.at) for event in reversed(backward.events)]
    events += [Event(event.passed, turned + event.at) for event in onward.events]
    parents = [trace.parent for trace in (backward, onward) if trace.parent is not None]
    return Branch([*before, *onward.places], events, parents=parents, ends=(backward.ended, onward.ended))


def _split_off(family: Family, branch: Branch, most_period: int) -> list[Place]:
    """Cycles on the branches that split off at the flips of a branch."""
    found = []
    if 2 * branch.period <= most_period:
        for event in branch.events:
            if event.passed is not Passed.FLIP:
                continue
            for amplitude in FIRST_AMPLITUDES:
                place = doubled(family, branch.places[event.at], amplitude)
                if place is not None:
                    found.append(place)
                    break
    return found


def stretch(family: Family, screen: Screen, start: Place) -> Generator[Step, None, Branch]:
    """The stable stretch of a branch around one of its cycles, both ways to where it loses stability."""
    return (yield from followed(family, screen, start, MOST_OF_A_STRETCH, pace=BRISK, stop=_unstable))


def _unstable(place: Place) -> bool:
    return not place.stable


def lies_on(family: Family, branch: Branch, place: Place) -> bool:
    """Whether a cycle lies on a branch."""
    if branch.period != place.period:
        return False
    for a, b in pairwise(branch.places):
        low, high = (a.r, b.r) if a.r <= b.r else (b.r, a.r)
        if not low <= place.r <= high or low == high:
            continue
        guess = a.points + (place.r - a.r) / (b.r - a.r) * (b.points - a.points)
        shift = _turn(guess, place.points, family.scales)
        apart = float(np.max(np.abs(np.roll(place.points, -shift, 0) - guess) / family.scales))
        if apart > 0.1:
            continue
        there = family.corrected(guess, place.r)
        if there is None:
            if apart < 1e-3:
                return True
            continue
        shift = _turn(there.points, place.points, family.scales)
        if np.all(np.abs(np.roll(place.points, -shift, 0) - there.points) < ON_IT * family.scales):
            return True
    return False


def _turn(a: Floats, b: Floats, scales: Floats) -> int:
    """Steps after which the second cycle's point is the first one's first."""
    return int(np.argmin(np.max(np.abs(b - a[0]) / scales, axis=1)))


# From branches to what is drawn


def _result(survey: Survey) -> BranchResult:
    pieces: list[BranchPiece] = []
    passed: list[tuple[Kind, int, float, float]] = []
    for branch in survey.branches:
        drawn = [piece for piece in _pieces(survey, branch) if _in_view(piece)]
        pieces += drawn
        if drawn:
            for event in branch.events:
                entry = _entry(survey, branch, event)
                if entry is not None and not any(_same(entry, other) for other in passed):
                    passed.append(entry)
    passed.sort(key=lambda entry: entry[2])
    return BranchResult(tuple(pieces), tuple(passed), _message(survey, pieces, passed))


def _pieces(survey: Survey, branch: Branch) -> list[BranchPiece]:
    places, screen = branch.places, survey.screen
    cuts = sorted({0, len(places) - 1, *(event.at for event in branch.events)})
    stretches: list[tuple[int, int, bool]] = []
    for first, last in pairwise(cuts):
        if last - first > 1:
            stable = places[(first + last) // 2].stable
        else:
            # Two places at which something happens: between them the multipliers are those of the middle.
            middle = survey.family.corrected(
                (places[first].points + places[last].points) / 2, (places[first].r + places[last].r) / 2
            )
            stable = middle.stable if middle is not None else places[last].stable
        if stretches and stretches[-1][2] == stable:
            stretches[-1] = (stretches[-1][0], last, stable)
        else:
            stretches.append((first, last, stable))
    pieces = []
    for first, last, stable in stretches:
        part = places[first : last + 1]
        across = [(place.r - screen.left) / screen.width for place in part]
        up = [
            (survey.family.observed(place.points, place.r) - screen.bottom) / screen.height for place in part
        ]
        largest = [place.multipliers[0] for place in part]
        pieces.append(
            BranchPiece(
                branch.period,
                stable,
                tuple(map(float, across)),
                tuple(tuple(map(float, curve)) for curve in np.array(up).T),
                tuple((float(value.real), float(value.imag)) for value in largest),
            )
        )
    return pieces


def _in_view(piece: BranchPiece) -> bool:
    across = np.array(piece.parameter)
    up = np.array(piece.observed)
    inside = (across >= 0) & (across <= 1) & (up >= -OUTSIDE) & (up <= 1 + OUTSIDE)
    return bool(inside.any())


def _entry(survey: Survey, branch: Branch, event: Event) -> tuple[Kind, int, float, float] | None:
    place, screen = branch.places[event.at], survey.screen
    across = (place.r - screen.left) / screen.width
    ups = (survey.family.observed(place.points, place.r) - screen.bottom) / screen.height
    inside = ups[(ups >= 0) & (ups <= 1)]
    if not 0 <= across <= 1 or not len(inside):
        return None
    up = float(inside[np.argmin(np.abs(inside - 0.5))])
    kind = kind_of(survey.family, place, event.passed)
    return (kind, place.period, float(across), up)


def kind_of(family: Family, place: Place, passed: Passed) -> Kind:
    """The kind of an onset that a branch passes.

    A multiplier that leaps over -1 or 1 belongs to a cycle that meets a switching surface.
    Where a multiplier is 1, the cycle's push and its bend along the critical direction tell a fold (both
    are there) from branches that cross: a transcritical point without the push, a pitchfork without both.
    """
    if passed is Passed.NEIMARK_SACKER:
        return Kind.NEIMARK_SACKER
    critical = -1 if passed is Passed.FLIP else 1
    if min(abs(value - critical) for value in place.multipliers) > LEAPT:
        return Kind.BORDER_COLLISION
    if passed is Passed.FLIP:
        return Kind.FLIP
    push, bend = family.unfolding(place)
    if passed is Passed.FOLD and not (abs(push) < WEAK_PUSH and abs(bend) < WEAK_BEND):
        return Kind.FOLD
    return Kind.PITCHFORK if abs(bend) < WEAK_BEND else Kind.TRANSCRITICAL


def _same(a: tuple[Kind, int, float, float], b: tuple[Kind, int, float, float]) -> bool:
    # Branches that cross are both followed, and each has the onset where it is.
    return a[0] is b[0] and a[1] == b[1] and max(abs(a[2] - b[2]), abs(a[3] - b[3])) < SAME_SPOT


def _message(survey: Survey, pieces: list[BranchPiece], passed: list[tuple[Kind, int, float, float]]) -> str:
    if not pieces:
        return "no cycle of up to " + f"{survey.most_period} points was found in this view"
    periods = sorted({piece.period for piece in pieces})
    shown = ", ".join(map(str, periods[:8])) + (" …" if len(periods) > 8 else "")
    word = "period" if len(periods) == 1 else "periods"
    onsets = "no onset" if not passed else "1 onset" if len(passed) == 1 else f"{len(passed)} onsets"
    text = f"branches of {word} {shown} were followed and pass {onsets}"
    if survey.cut:
        text += "; there are more than can be shown: zoom in, or lower the longest period"
    return text
