"""What a subcritical flip of several states does: a jump, where orbits go, and the fold that bounds it.

The unstable doubled branch that leaves a subcritical flip goes back over the stable cycle. It is taken up by
its amplitude along the critical vector and followed by pseudo-arclength continuation (Keller 1977), as far as
its fold.
"""

from __future__ import annotations

from collections.abc import Generator
from dataclasses import replace

import numpy as np

from tinemark.onsets.cycle_map import CycleMap, Floats
from tinemark.onsets.many_branch import Crossing, Window, branch_point, follow
from tinemark.onsets.many_cycles import Cycle, newton, orbit_ends, returns
from tinemark.onsets.many_onset import Settled, settle_onset
from tinemark.onsets.many_polish import NotFound
from tinemark.onsets.many_search import TOLERANCES
from tinemark.onsets.onset_words import short_number
from tinemark.onsets.results import Criticality, Kind, Onset, Status, Step
from tinemark.systems.errors import SwitchingTouched

AMPLITUDES = (2e-2, 5e-3, 5e-2, 1e-3)
"""Shares of the states' scale at which the leaving branch is taken up, tried one after the other."""
FARTHEST = 4.0
"""Parameter reaches within which the branch is followed."""
MOST_POINTS = 400
PAST = 1e-3
"""Share of the reach past the split at which an orbit is let go to see where it ends."""
PUSH = 1e-3
"""Share of the states' scale by which it is pushed off the cycle."""
SLICES, SLICE = 20, 500
LONGEST_SEEN = 64


def with_jump(
    float_map: CycleMap, settled: Settled, digits: int, scales: Floats, reach: float
) -> Generator[Step, None, Onset]:
    """An onset with what follows in words where it is a subcritical flip; any other as it is.

    Parameters
    ----------
    reach
        A length of the parameter that counts as near, such as a view's width.
    """
    onset = settled.onset
    if onset.kind is not Kind.FLIP or onset.criticality is not Criticality.SUBCRITICAL:
        return onset
    if any(abs(value) > 1 for value in settled.found.others):
        return onset  # the cycle is unstable on both sides: nothing that can be seen jumps
    yield Step("following the unstable branch of the jump")
    far = max(reach, 0.05 * abs(settled.cycle.r))
    fold = yield from _bounding_fold(float_map, settled, digits, scales, far)
    landing = yield from _landing(float_map, settled, scales, far)
    return replace(onset, consequence=_words(onset, _past(settled), landing, fold))


def _past(settled: Settled) -> int:
    """The parameter's direction in which the multiplier goes beyond -1."""
    return 1 if settled.found.crossing < 0 else -1


def _bounding_fold(
    float_map: CycleMap, settled: Settled, digits: int, scales: Floats, far: float
) -> Generator[Step, None, Onset | None]:
    """The fold at which the unstable doubled branch turns round, or None where it was not found."""
    origin = settled.cycle
    window = Window(origin.r - FARTHEST * far, origin.r + FARTHEST * far, far, scales)
    vectors = settled.vector / np.max(np.abs(settled.vector) / scales)
    twice, shape = np.concatenate([origin.points, origin.points]), np.concatenate([vectors, -vectors])
    along = shape / np.sum(shape**2)
    for amplitude in AMPLITUDES:
        guess = Cycle(twice + amplitude * shape, origin.r)
        target = float(np.sum(along * guess.points))
        cycle = newton(float_map, guess, scales * amplitude, along=along, target=target)
        start = None if cycle is None else branch_point(float_map, cycle, window)
        if start is None or (start.cycle.r - origin.r) * _past(settled) > 0:
            continue
        _, events = yield from follow(float_map, start, window, -_past(settled), most=MOST_POINTS)
        turn = next((event for event in events if event.kind is Crossing.FOLD), None)
        if turn is None:
            continue
        bracket = abs(turn.before.cycle.r - turn.after.cycle.r)
        try:
            found = yield from settle_onset(
                float_map, Kind.FOLD, turn.rough, digits, scales, 3 * bracket + 0.02 * far
            )
        except (NotFound, SwitchingTouched):
            continue
        return found.onset
    return None


def _landing(float_map: CycleMap, settled: Settled, scales: Floats, far: float) -> Generator[Step, None, str]:
    """Where an orbit let go beside the cycle ends, past the onset."""
    vector = settled.vector[0] / np.max(np.abs(settled.vector[0]) / scales)
    states = (settled.cycle.points[0] + PUSH * vector)[:, None]
    lanes = np.array([settled.cycle.r + _past(settled) * PAST * far])
    with np.errstate(over="ignore", invalid="ignore"):
        for _ in range(SLICES):
            history, lanes = orbit_ends(float_map, states, lanes, SLICE, 1)
            states = history[-1]
            yield Step("seeing where orbits go past the jump")
        history, lanes = orbit_ends(float_map, states, lanes, 0, LONGEST_SEEN + 1)
    if not len(lanes):
        return "orbits let go there escape"
    (periods,) = returns(history, scales, TOLERANCES[:1])
    if periods:
        return f"orbits let go there are seen to settle on period {periods[0]}"
    return "orbits let go there wander without a period"


def _words(onset: Onset, past: int, landing: str, fold: Onset | None) -> str:
    name, period = onset.parameter, onset.period_before
    words = (
        f"the change is a jump: {'above' if past > 0 else 'below'} {name} = "
        f"{short_number(onset.value_fraction)} the cycle of period {period} is unstable and nothing near "
        f"it is stable; {landing}"
    )
    unstable = f"the unstable cycle of period {onset.period_after} that meets it there"
    if fold is None:
        return f"{words}; where {unstable} ends was not found"
    proved = "proved" if fold.status is Status.PROVED else "estimated"
    value = short_number(fold.value_fraction)
    return (
        f"{words}; {unstable} turns back at the fold {name} = {value} ({proved}), so between there and the "
        "split two behaviours exist side by side: hysteresis"
    )
