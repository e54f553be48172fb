"""How an onset of equations moves with the other parameters.

At a few neighbouring values of a parameter the onset is solved for once more, along the direction that
implicit differentiation of F(x, r; q) = 0 gives: with the Jacobian that is known, Newton's method needs two
or three steps. The derivative is the difference of fourth order of the values, which no error of the Jacobian
enters.
A second step length, and the value's own error, tell how many digits hold. A pitchfork is followed where its
symmetry stays.
"""

from __future__ import annotations

from collections.abc import Generator
from dataclasses import replace
from fractions import Fraction

import numpy as np

from tinemark.onsets.cycle_map import Floats
from tinemark.onsets.decimals import decimal_places, fixed_text, leading_power, rounded
from tinemark.onsets.flow_crossing import MULTIPLIER_SPAN, solve_crossing
from tinemark.onsets.flow_map import FINEST, STENCIL, FlowMap
from tinemark.onsets.flow_polish import Solution, solve_again, solve_onset
from tinemark.onsets.flow_symmetry import symmetries
from tinemark.onsets.many_cycles import Cycle
from tinemark.onsets.many_polish import NotFound
from tinemark.onsets.results import Kind, Onset, Sensitivity, Status, Step
from tinemark.systems.system import System

STEPS = (Fraction(1, 3000), Fraction(1, 6000))
"""Lengths of the differences for a cycle of period 1, as shares of a parameter's value."""
MOST_DIGITS, LEAST_DIGITS = 12, 2
REGULAR = frozenset({Kind.FLIP, Kind.FOLD, Kind.NEIMARK_SACKER})
NOTHING = 1e-9
"""Derivatives that move the onset by less than this share of it, for the parameter's own size, are none."""
REACH = 1e-3


def with_flow_sensitivities(
    system: System, onset: Onset, *, longest: int | None = None
) -> Generator[Step, None, Onset]:
    """The onset with its derivatives filled in; as it was where it has them, or where none are known.

    Parameters
    ----------
    longest
        Longest period for which they are made; None for any.
    """
    period = onset.period_before or onset.period_after
    others = [name for name in system.parameter_names if name != onset.parameter]
    known = dict(onset.states).keys() == set(system.state_names) and period >= 1
    refined = onset.status in (Status.ESTIMATED, Status.PROVED)
    too_long = longest is not None and period > longest
    if onset.sensitivities or not others or not known or not refined or too_long:
        return onset
    if onset.kind not in REGULAR and onset.kind is not Kind.PITCHFORK:
        return onset
    flow = FlowMap(system, onset.parameter, FINEST)
    scales = flow.scales(float(onset.value_fraction))
    try:
        found = yield from _solved(flow, onset, period, scales)
    except NotFound:
        return onset
    moves: list[Sensitivity] = []
    for name in others:
        yield Step(f"working out how the onset of period {period} moves with {name}")
        text = yield from _derivative(flow, onset, found, name, scales)
        if text:
            moves.append(Sensitivity(name, text))
    return replace(onset, sensitivities=tuple(moves)) if moves else onset


def _solved(flow: FlowMap, onset: Onset, period: int, scales: Floats) -> Generator[Step, None, Solution]:
    r = float(onset.value_fraction)
    points = [np.array([float(Fraction(text)) for _, text in onset.states])]
    while len(points) < period:
        points.append(flow.step(points[-1][:, None], r)[:, 0])
        if len(points) % 16 == 0:
            yield Step("taking up the onset's cycle")
    cycle = Cycle(np.array(points), r)
    if not np.isfinite(cycle.points).all():
        raise NotFound("the cycle's points lead nowhere")
    reach = REACH * max(abs(r), 1e-3)
    if onset.kind is Kind.PITCHFORK:
        return (yield from solve_crossing(flow, onset.kind, cycle, scales, reach))
    return (yield from solve_onset(flow, onset.kind, cycle, scales, reach))


def _derivative(
    flow: FlowMap, onset: Onset, found: Solution, name: str, scales: Floats
) -> Generator[Step, None, str]:
    """Decimal text of one derivative, to the digits that hold; empty where there is none."""
    value = flow.many.system.parameter(name).value.fraction
    size = abs(value) or Fraction(1)
    results: list[float] = []
    # Long cycles are fine structures: they change more for the same change of a parameter.
    steps = [share / found.cycle.period for share in STEPS]
    for share in steps:
        total = 0.0
        for place, weight in STENCIL:
            moved = value + Fraction(place) * share * size
            try:
                term = yield from _moved(flow.with_value(name, moved), onset, found, scales)
            except (NotFound, np.linalg.LinAlgError):
                return ""
            total += weight * term
        results.append(total / float(share * size))
    best, other = results[-1], results[0]
    # Beside the steps' own error, what the value's error makes of a difference.
    apart = abs(best - other) + float(onset.half_width) / float(steps[-1] * size)
    if abs(best) <= apart:
        return "0" if apart * float(size) < NOTHING * abs(found.cycle.r) else ""
    digits = min(MOST_DIGITS, leading_power(Fraction(best)) - leading_power(Fraction(apart)) - 1)
    if digits < LEAST_DIGITS:
        return ""
    places = decimal_places(Fraction(best), digits)
    return fixed_text(rounded(Fraction(best), places), places)


def _moved(flow: FlowMap, onset: Onset, found: Solution, scales: Floats) -> Generator[Step, None, float]:
    """Where the onset is for a neighbouring system."""
    if found.matrix is None:
        if not any(True for _ in symmetries(flow.many.system, onset.parameter, found.cycle.r)):
            raise NotFound("the symmetry does not stay")
        reach, span = (
            10 * REACH * max(abs(found.cycle.r), 1e-3),
            MULTIPLIER_SPAN / max(abs(found.speed), 1e-9),
        )
        crossing = yield from solve_crossing(flow, onset.kind, found.cycle, scales, reach, min(span, reach))
        return crossing.cycle.r
    again = yield from solve_again(flow, onset.kind, found, REACH * max(abs(found.cycle.r), 1e-3))
    return again.cycle.r
