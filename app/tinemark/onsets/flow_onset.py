"""From a rough cycle of equations to an `Onset`: solved in doubles at levels that tell its error."""

from __future__ import annotations

from collections.abc import Generator
from typing import TYPE_CHECKING

import numpy as np

from tinemark.onsets.cycle_map import CycleMap, Floats
from tinemark.onsets.flow_crossing import solve_crossing
from tinemark.onsets.flow_map import FINEST, OTHERS, SPARE, FlowMap, Level
from tinemark.onsets.flow_normal_form import findings
from tinemark.onsets.flow_polish import Solution, solve_again, solve_onset
from tinemark.onsets.flow_texts import Judged, estimated
from tinemark.onsets.many_cycles import Cycle, least_period
from tinemark.onsets.many_polish import NotFound
from tinemark.onsets.results import Kind, Step

if TYPE_CHECKING:
    from tinemark.onsets.many_onset import Settled

SAFETY = 3
"""Factor on the largest disagreement and the last Newton step, for 95 % coverage or better."""
ROUNDING = 2.0**-51
POINTS_ONE = 1e-6
"""Points of an onset's cycle closer than this share of the state's scale are one point."""
BENT = 1e-3
"""Quadratic coefficients above this, in scaled states, tell a transcritical point from a pitchfork."""
CROSSINGS = frozenset({Kind.TRANSCRITICAL, Kind.PITCHFORK})
SOLVED = frozenset({Kind.FLIP, Kind.FOLD, Kind.NEIMARK_SACKER, *CROSSINGS})
"""Kinds of onsets of equations that are solved for."""


def settle_flow(
    float_map: CycleMap, kind: Kind, rough: Cycle, digits: int, scales: Floats, reach: float
) -> Generator[Step, None, Settled]:
    """Solve for an onset from a rough cycle; see `many_onset.settle_onset`.

    The value is that of the finest level. Its error is estimated from the values of a coarser tolerance and
    of a method of another order, the last Newton steps and rounding.

    Raises
    ------
    NotFound
        No onset of this kind and least period in reach.
    """
    from tinemark.onsets.many_onset import Settled

    assert isinstance(float_map, FlowMap)
    if kind not in SOLVED:
        raise NotFound(f"no equations are set up for a {kind.value} of equations")
    finest = float_map.at(FINEST)
    found = yield from _solved(finest, kind, rough, scales, reach)
    if least_period(found.cycle.points, scales, POINTS_ONE) != found.cycle.period:
        raise NotFound("the cycle found has a lower period")
    others: tuple[Solution, ...] = ()
    levels: tuple[Level, ...] = ()
    for level in (*OTHERS, SPARE):
        if len(others) == len(OTHERS):
            break
        try:
            others += ((yield from _again(float_map.at(level), kind, found, scales, reach)),)
            levels += (level,)
        except NotFound:
            if level is SPARE:
                raise
    wide = max(reach, abs(found.cycle.r))
    if kind in CROSSINGS:
        # Which of the two it is, its bend tells: a symmetry leaves none.
        seen = yield from findings(finest, Kind.TRANSCRITICAL, found, scales, wide)
        bent = seen.coefficient is not None and abs(seen.coefficient) > BENT
        kind = Kind.TRANSCRITICAL if bent else Kind.PITCHFORK
    seen = yield from findings(finest, kind, found, scales, wide)
    if seen.is_degenerate:
        raise NotFound("branches cross or touch here instead of turning round in a fold")
    onset = estimated(finest, kind, found, seen, _judged(found, others, levels), digits, scales)
    vectors = np.real(found.vectors)
    return Settled(onset, found.cycle, vectors, seen)


def _solved(
    flow: FlowMap, kind: Kind, rough: Cycle, scales: Floats, reach: float
) -> Generator[Step, None, Solution]:
    if kind in CROSSINGS:
        return (yield from solve_crossing(flow, kind, rough, scales, reach))
    return (yield from solve_onset(flow, kind, rough, scales, reach))


def _again(
    flow: FlowMap, kind: Kind, found: Solution, scales: Floats, reach: float
) -> Generator[Step, None, Solution]:
    if kind in CROSSINGS:
        return (yield from solve_crossing(flow, kind, found.cycle, scales, reach))
    return (yield from solve_again(flow, kind, found, reach))


def _judged(found: Solution, others: tuple[Solution, ...], levels: tuple[Level, ...]) -> Judged:
    """Error estimates: the largest disagreement with a safety factor, and no less than rounding."""
    value, point = found.cycle.r, found.cycle.points[0]
    apart = max(abs(other.cycle.r - value) for other in others)
    steps = max(solution.last_step for solution in (found, *others))
    half = SAFETY * (apart + steps) + ROUNDING * abs(value)
    spread = np.max([np.abs(other.cycle.points[0] - point) for other in others], axis=0)
    return Judged(value, half, point, SAFETY * spread + ROUNDING * np.abs(point), levels)
