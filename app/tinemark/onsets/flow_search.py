"""Cycles of an integrated return map around a click: settled orbits, close returns, what they split from."""

from __future__ import annotations

from collections.abc import Generator, Iterator

import numpy as np

from tinemark.onsets.cycle_map import Floats
from tinemark.onsets.flow_map import FlowMap
from tinemark.onsets.many_cycles import (
    Cycle,
    least_period,
    multipliers,
    newton,
    returns,
    same_cycle,
)
from tinemark.onsets.many_map import ESCAPED
from tinemark.onsets.many_search import Place, parents
from tinemark.onsets.results import Step

OFFSETS = (0.0, 0.004, -0.004, 0.012, -0.012, 0.03, -0.03, 0.07, -0.07, 0.15, -0.15, 0.3, -0.3, 0.5, -0.5)
"""Where orbits are settled, in widths of the view from the click."""
TRANSIENT = 480
SLICE = 16
"""Samples between two chances to cancel."""
LONGEST_PERIOD = 128
TOLERANCES = (1e-7, 1e-5, 3e-4, 5e-3)
ENOUGH = 16
"""Cycles after which no more of the settled orbits are looked at; those nearest to the click come first."""
SCATTERED_STARTS = 3
SCATTERED_FOR_NEWTON = 16
SHORT_PERIODS = (1, 2, 3)
LONGEST_PARENT = 32
PARENTS_OF = 6
"""Of so many cycles up to that period, nearest on the screen, what they may have split from is looked for."""
FAR_FROM_STABLE = 4.0
"""Cycles with a multiplier larger than this are looked at last."""
UNSEEN = 0.02
"""Cycles that are not seen, being unstable, count as so much farther away on the screen."""
NEUTRAL = 1e-6
PASSES = 1e-6
"""An orbit that ends closer than this to a cycle has settled on it."""
SEED = 20240612


def starts(flow: FlowMap, scattered: int) -> Floats:
    """Own start of the system and a few scattered in the states' ranges; shape (n, starts)."""
    many = flow.many
    own = np.array([float(value) for value in many.starts])
    random = np.random.default_rng(SEED)
    columns = np.repeat(own[:, None], 1 + scattered, axis=1)
    for place in range(1, 1 + scattered):
        for state, extent in enumerate(many.extents):
            low, high = map(float, extent) if extent else (0.7 * own[state], 1.3 * own[state])
            columns[state, place] = random.uniform(min(low, high), max(low, high))
    return columns


def settled_orbits(
    flow: FlowMap, begun: Floats, rs: Floats, transient: int, kept: int, text: str
) -> Generator[Step, None, tuple[Floats, Floats]]:
    """Last `kept` samples (kept, n, lanes) of orbits that have as many, and the lanes' parameters."""
    states, lanes = np.repeat(begun, len(rs), axis=1), np.tile(rs, begun.shape[1])
    history: list[Floats] = []
    for place in range(transient + kept):
        if place >= transient:
            history.append(states)
        states = flow.step(states, lanes)
        inside = np.all(np.abs(states) < ESCAPED, axis=0)
        if not inside.all():
            states, lanes = states[:, inside], lanes[inside]
            history = [samples[:, inside] for samples in history]
        if not len(lanes):
            break
        if place % SLICE == 0:
            yield Step(text, place / (transient + kept))
    return np.array(history).reshape(len(history), flow.size, len(lanes)), lanes


def cycles_near(
    flow: FlowMap, place: Place, scales: Floats
) -> Generator[Step, None, tuple[list[Cycle], Floats]]:
    """Distinct cycles at parameters around a click, nearest on the screen first; and how orbits ended."""
    rs = place.r + place.width * np.array(OFFSETS)
    begun = starts(flow, SCATTERED_STARTS)
    text = "settling orbits around the click"
    history, lanes = yield from settled_orbits(flow, begun, rs, TRANSIENT, LONGEST_PERIOD + 1, text)
    found: list[Cycle] = []
    candidates = returns(history, scales, TOLERANCES) if len(lanes) else []
    for lane in np.argsort(np.abs(lanes - place.r), kind="stable"):
        r = float(lanes[lane])
        if any(other.r == r and _passes(other, history[-1, :, lane], scales) for other in found):
            continue
        if len(found) >= ENOUGH:
            break
        for period in candidates[lane]:
            _keep(found, polished(flow, history[-period:, :, lane], r, scales), scales)
            yield Step(text)
    if not found:
        for start in starts(flow, SCATTERED_FOR_NEWTON).T:
            for period in SHORT_PERIODS:
                yield Step("looking for cycles from scattered starts")
                _keep(found, from_start(flow, start, period, place.r, scales), scales)
    found.sort(key=lambda cycle: place.distance(flow, cycle))
    for cycle in [item for item in found if item.period <= LONGEST_PARENT][:PARENTS_OF]:
        for parent in parents(flow, cycle, scales):
            _keep(found, parent, scales)
        yield Step("looking for what cycles split from")
    return sorted(found, key=lambda cycle: _order(flow, place, cycle)), history


def from_start(flow: FlowMap, start: Floats, period: int, r: float, scales: Floats) -> Cycle | None:
    """The cycle that Newton's method finds from an orbit's first samples."""
    points = np.empty((period, flow.size))
    # The first sample lies on the section, which a start need not.
    state = flow.step(start[:, None], r)
    for at in range(period):
        points[at] = state[:, 0]
        state = flow.step(state, r)
    if not np.isfinite(points).all():
        return None
    return polished(flow, points, r, scales)


def polished(flow: FlowMap, points: Floats, r: float, scales: Floats) -> Cycle | None:
    """A cycle with its least period."""
    cycle = newton(flow, Cycle(np.ascontiguousarray(points), r), scales)
    if cycle is None:
        return None
    return Cycle(cycle.points[: least_period(cycle.points, scales)], r)


def drifts(history: Floats, scales: Floats) -> Iterator[tuple[int, float]]:
    """States that grow by the same amount in each sample, as an angle does that turns on and on."""
    if history.shape[0] < 3 or history.shape[2] == 0:
        return
    moves = np.diff(history[-20:], axis=0)
    for state in range(history.shape[1]):
        for lane in range(history.shape[2]):
            steps = moves[:, state, lane]
            mean = float(np.mean(steps))
            if abs(mean) > 0.05 * scales[state] and np.ptp(steps) < 1e-3 * abs(mean):
                yield state, mean
                break


def _order(flow: FlowMap, place: Place, cycle: Cycle) -> tuple[bool, float, int]:
    largest = max(map(abs, multipliers(flow, cycle)), default=np.inf)
    unseen = 0.0 if largest <= 1 + NEUTRAL else UNSEEN
    return largest > FAR_FROM_STABLE, place.distance(flow, cycle) + unseen, cycle.period


def _passes(cycle: Cycle, state: Floats, scales: Floats) -> bool:
    return bool(np.min(np.max(np.abs(cycle.points - state) / scales, axis=1)) < PASSES)


def _keep(found: list[Cycle], cycle: Cycle | None, scales: Floats) -> None:
    if cycle is None:
        return
    if not any(cycle.r == other.r and same_cycle(cycle, other, scales) for other in found):
        found.append(cycle)
