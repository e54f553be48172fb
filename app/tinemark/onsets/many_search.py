"""Cycles of maps of several states around a click: settled orbits, close returns, what they split from."""

from __future__ import annotations

from collections.abc import Generator, Iterator, Sequence
from dataclasses import dataclass

import numpy as np

from tinemark.onsets.cycle_map import CycleMap, Floats
from tinemark.onsets.many_cycles import (
    Cycle,
    condensed,
    least_period,
    multipliers,
    newton,
    orbit_ends,
    returns,
    same_cycle,
)
from tinemark.onsets.results import Step

OFFSETS = (0.0, 0.004, -0.004, 0.012, -0.012, 0.03, -0.03, 0.07, -0.07, 0.15, -0.15, 0.3, -0.3, 0.5, -0.5)
"""Where orbits are settled, in widths of the view from the click."""
SCATTERED_STARTS = 3
AMPLITUDES = (0.02, 0.05, 0.1, 0.005)
"""Shares of the states' scale at which a doubled cycle is looked for beside the one it split from."""
FAR_PAST = 30.0
"""Multipliers below minus this belong to cycles whose doubled ones have long split again."""
SHORT_PARENT, LONGEST_CHILD, MOST_CHILDREN = 4, 64, 40
STARTS_THERE = 10
THERE = 0.03
"""Farther on the screen than this a cycle is not the one that was clicked."""
MANY_STARTS = 60
SCATTERED_FOR_NEWTON, SCATTERED_BESIDE = 24, 8
BESIDE = (0.006, -0.006, 0.03, -0.03, 0.1, -0.1)
FAR_FROM_STABLE = 4.0
"""Cycles with a multiplier larger than this are looked at last."""
PASSES = 1e-8
"""An orbit that ends closer than this to a cycle has settled on it."""
CONTRACTING = 1e-3
"""Volumes that shrink by less than this along a cycle do not show that orbits settle."""
LONGEST_BY_CHANCE = 6
TRANSIENT, SLICES = 1500, 30
LONGEST_PERIOD = 128
TOLERANCES = (1e-9, 1e-6, 1e-4, 3e-3)
PARENTS_OF = 6
"""Of this many cycles, nearest in the parameter, the ones they may have split from are looked for."""
CLOSE_RETURN = 0.05
LONGEST_CLOSE_RETURN = 8
SEED = 20240229


@dataclass(frozen=True)
class Place:
    """A click: parameter, observed quantity or None, and the lengths that count as 1 on the screen."""

    r: float
    observed: float | None
    width: float
    height: float | None

    def distance(self, float_map: CycleMap, cycle: Cycle) -> float:
        """Distance on the screen from the click to the nearest point of a cycle."""
        across = (cycle.r - self.r) / self.width
        if self.observed is None or not self.height:
            return abs(across)
        up = (float_map.observed(cycle.points, cycle.r) - self.observed) / self.height
        return float(np.hypot(across, np.min(np.abs(up))))


def cycles_around(float_map: CycleMap, place: Place, scales: Floats) -> Generator[Step, None, list[Cycle]]:
    """Distinct cycles at parameters around a click, nearest on the screen first."""
    rs = place.r + place.width * np.array(OFFSETS)
    starts = np.concatenate((_starts(float_map), _starts_there(float_map, place)), axis=1)
    history, lanes = yield from _settled(float_map, starts, rs)
    if not len(lanes):
        # The basin is small: the usual starts escape, so many are tried at fewer places.
        history, lanes = yield from _settled(float_map, _starts(float_map, MANY_STARTS), rs[:7])
    found: list[Cycle] = []
    for place_, periods in enumerate(returns(history, scales, TOLERANCES)):
        r = float(lanes[place_])
        if any(other.r == r and _passes(other, history[-1, :, place_], scales) for other in found):
            continue
        for period in periods:
            _keep(found, _polished(float_map, history[-period:, :, place_], r, scales), scales)
    yield Step("settling orbits around the click")
    # Of several behaviours side by side orbits may settle on another one than was clicked.
    for cycle in _newton_from(float_map, _starts_there(float_map, place), place.r, scales, (1, 2)):
        if place.distance(float_map, cycle) < THERE:
            _keep(found, cycle, scales)
    if not found:
        for guess, r in _close_returns(history, lanes, scales):
            _keep(found, _polished(float_map, guess, r, scales), scales)
        yield Step("looking for cycles that orbits come close to")
    if not any(_contracts(float_map, cycle) for cycle in found):
        # Nothing settles, as where the map preserves areas: Newton's method from scattered places. What
        # orbits came close to is chance, and long cycles among it are not what was aimed at.
        found = [cycle for cycle in found if cycle.period <= LONGEST_BY_CHANCE]
        for cycle in scattered_cycles(float_map, place.r, scales):
            _keep(found, cycle, scales)
            yield Step("looking for cycles from scattered starts")
        # A click just off a fold has none of its cycles at its own parameter value.
        for offset in BESIDE:
            starts, r = _starts(float_map, SCATTERED_BESIDE), place.r + offset * place.width
            for cycle in _newton_from(float_map, starts, r, scales, (1, 2)):
                _keep(found, cycle, scales)
            yield Step("looking for cycles from scattered starts")
        yield from _with_children(float_map, found, scales)
    nearest = sorted(found, key=lambda cycle: abs(cycle.r - place.r))[:PARENTS_OF]
    for cycle in nearest:
        for parent in parents(float_map, cycle, scales):
            _keep(found, parent, scales)
    yield Step("ordering the cycles found")
    return sorted(found, key=lambda cycle: _order(float_map, place, cycle))


def _passes(cycle: Cycle, state: Floats, scales: Floats) -> bool:
    return bool(np.min(np.max(np.abs(cycle.points - state) / scales, axis=1)) < PASSES)


def _contracts(float_map: CycleMap, cycle: Cycle) -> bool:
    """Whether volumes shrink along a cycle."""
    return abs(float(np.prod(np.abs(multipliers(float_map, cycle))))) < 1 - CONTRACTING


def _order(float_map: CycleMap, place: Place, cycle: Cycle) -> tuple[bool, float, int]:
    # Nothing is seen of cycles that are far from stable, and little splits from them.
    largest = max(map(abs, multipliers(float_map, cycle)), default=np.inf)
    return largest > FAR_FROM_STABLE, place.distance(float_map, cycle), cycle.period


def _settled(float_map: CycleMap, starts: Floats, rs: Floats) -> Generator[Step, None, tuple[Floats, Floats]]:
    """Last states of orbits from every start at every parameter, those that escape left out."""
    states, lanes = np.repeat(starts, len(rs), axis=1), np.tile(rs, starts.shape[1])
    for _ in range(SLICES):
        yield Step("settling orbits around the click")
        history, lanes = orbit_ends(float_map, states, lanes, TRANSIENT // SLICES, 1)
        states = history[-1]
    return orbit_ends(float_map, states, lanes, 0, LONGEST_PERIOD + 1)


def parents(float_map: CycleMap, cycle: Cycle, scales: Floats) -> Iterator[Cycle]:
    """Cycles of half the period that a cycle may have split from: the means of opposite points."""
    while cycle.period % 2 == 0:
        half = cycle.period // 2
        mean = (cycle.points[:half] + cycle.points[half:]) / 2
        parent = _polished(float_map, mean, cycle.r, scales)
        if parent is None or parent.period != half:
            return
        yield parent
        cycle = parent


def _with_children(float_map: CycleMap, found: list[Cycle], scales: Floats) -> Generator[Step, None, None]:
    """Add the doubled cycles beside those past a flip, and so on: where nothing settles none else does it."""
    waiting = [cycle for cycle in found if cycle.period <= SHORT_PARENT]
    for _ in range(MOST_CHILDREN):
        if not waiting:
            return
        child = _child(float_map, waiting.pop(0), scales)
        yield Step("looking for cycles that split off")
        if child is not None and child.period <= LONGEST_CHILD:
            before = len(found)
            _keep(found, child, scales)
            waiting += found[before:]


def _child(float_map: CycleMap, cycle: Cycle, scales: Floats) -> Cycle | None:
    """The doubled cycle that has split off a cycle with a multiplier a little below -1."""
    parts = condensed(float_map, cycle.points, cycle.r)
    if not np.isfinite(parts.monodromy).all():
        return None
    values, vectors = np.linalg.eig(parts.monodromy)
    past = [at for at, value in enumerate(values) if abs(value.imag) < 1e-9 and -FAR_PAST < value.real < -1]
    if not past:
        return None
    n = float_map.size
    along = parts.blocks[:, :, :n] @ vectors[:, past[0]].real
    along = along / np.max(np.abs(along) / scales)
    for amplitude in AMPLITUDES:
        guess = np.concatenate((cycle.points + amplitude * along, cycle.points - amplitude * along))
        child = _polished(float_map, guess, cycle.r, scales)
        if child is not None and child.period == 2 * cycle.period:
            return child
    return None


def scattered_cycles(
    float_map: CycleMap, r: float, scales: Floats, periods: Sequence[int] = (1, 2, 3, 4)
) -> Iterator[Cycle]:
    """Cycles that Newton's method finds from scattered starts, whether orbits settle on them or not."""
    yield from _newton_from(float_map, _starts(float_map, SCATTERED_FOR_NEWTON), r, scales, periods)


def _newton_from(
    float_map: CycleMap, starts: Floats, r: float, scales: Floats, periods: Sequence[int]
) -> Iterator[Cycle]:
    for start in starts.T:
        for period in periods:
            points = np.empty((period, float_map.size))
            state = start[:, None]
            for place in range(period):
                points[place] = state[:, 0]
                state = float_map.step(state, r)
            cycle = _polished(float_map, points, r, scales)
            if cycle is not None:
                yield cycle


def _starts(float_map: CycleMap, scattered_starts: int = SCATTERED_STARTS) -> Floats:
    """Own start of the system and a few scattered in the states' ranges; shape (n, starts)."""
    many = float_map.many
    own = np.array([float(value) for value in many.starts])
    random = np.random.default_rng(SEED)
    columns = [own]
    for _ in range(scattered_starts):
        scattered = [
            random.uniform(float(extent[0]), float(extent[1]))
            if extent
            else value * (1 + 0.3 * random.uniform(-1, 1))
            for extent, value in zip(many.extents, own, strict=True)
        ]
        columns.append(np.array(scattered))
    return np.array(columns).T


def _starts_there(float_map: CycleMap, place: Place) -> Floats:
    """Starts whose observed state is where the click fell: of several behaviours, that one was meant."""
    many = float_map.many
    if place.observed is None or many.system.observe not in many.states or not many.system.is_map:
        return np.empty((float_map.size, 0))
    starts = _starts(float_map, STARTS_THERE)[:, 1:]
    starts[many.states.index(many.system.observe)] = place.observed
    return starts


def _polished(float_map: CycleMap, points: Floats, r: float, scales: Floats) -> Cycle | None:
    cycle = newton(float_map, Cycle(np.ascontiguousarray(points), r), scales)
    if cycle is None:
        return None
    return Cycle(cycle.points[: least_period(cycle.points, scales)], r)


def _keep(found: list[Cycle], cycle: Cycle | None, scales: Floats) -> None:
    if cycle is None:
        return
    if not any(cycle.r == other.r and same_cycle(cycle, other, scales) for other in found):
        found.append(cycle)


def _close_returns(history: Floats, lanes: Floats, scales: Floats) -> Iterator[tuple[Floats, float]]:
    """Stretches of orbits that nearly close, the closest of each length and parameter."""
    for period in range(1, LONGEST_CLOSE_RETURN + 1):
        gaps = np.max(np.abs(history[period:] - history[:-period]) / scales[:, None], axis=1)
        best = np.argmin(gaps, axis=0)
        order = np.argsort(gaps[best, np.arange(len(lanes))])
        for lane in order[:6]:
            start = int(best[lane])
            if gaps[start, lane] < CLOSE_RETURN:
                yield history[start : start + period, :, lane], float(lanes[lane])
