"""Where branches of cycles cross: one branch is followed through, and its critical multiplier solved for 1.

At a transcritical point or a pitchfork two branches meet, so cycles cannot be solved for at the very place.
On one branch the critical multiplier is a smooth function of the parameter. It is taken at Chebyshev places
on both sides, none at the crossing, and the polynomial through them is solved.
"""

from __future__ import annotations

import math
from collections.abc import Generator, Iterator
from typing import Any

import numpy as np
from numpy.polynomial import chebyshev

from tinemark.onsets.branch_places import Place, fold_test
from tinemark.onsets.cycle_map import Floats
from tinemark.onsets.flow_map import FlowMap
from tinemark.onsets.flow_polish import Solution
from tinemark.onsets.many_cycles import Cycle, condense, condensed, newton
from tinemark.onsets.many_polish import NotFound
from tinemark.onsets.results import Kind, Step

NODES = 8
FIRST_SHARE = 1e-3
"""Of the reach: where the branch is looked at first."""
MULTIPLIER_SPAN = 0.05
"""How far from 1 the critical multiplier is at the outermost places."""
FARTHEST = 30.0
"""Spans by which the middle is moved at once."""
ROUNDS = 8


def solve_crossing(
    flow: FlowMap, kind: Kind, start: Cycle, scales: Floats, reach: float, span: float = 0.0
) -> Generator[Step, None, Solution]:
    """The crossing near a rough cycle; see `flow_polish.solve_onset`.

    Parameters
    ----------
    span
        How far on both sides of the rough place to look first, where that is known.
    """
    centre, span = start, span or FIRST_SHARE * reach
    text = f"solving for a {kind.value} of period {start.period}"
    last_step = math.inf
    for _ in range(ROUNDS):
        rs, cycles, tests = yield from _nodes(flow, centre, span, scales, text)
        series: Any = chebyshev.chebfit((rs - centre.r) / span, tests, NODES - 1)
        shorter: Any = chebyshev.chebfit((rs - centre.r) / span, tests, NODES - 3)
        slope = float(chebyshev.chebval(0.0, chebyshev.chebder(series)))
        place, other = _root(series), _root(shorter)
        if slope == 0:
            raise NotFound("no multiplier passes 1 on the branch")
        if place is None or other is None:
            # Far off as yet: as far as the slope says, within bounds.
            place = other = float(np.clip(-chebyshev.chebval(0.0, series) / slope, -FARTHEST, FARTHEST))
        r = centre.r + span * place
        if abs(r - start.r) > reach:
            raise NotFound("the crossing lies out of reach")
        step = abs(r - centre.r)
        centre = Cycle(_interpolated(rs, cycles, r, centre, span), r)
        wanted = min(MULTIPLIER_SPAN * span / max(abs(slope), 1e-12), reach)
        settled = 0.3 < wanted / span < 3.0
        last_step = abs(place - other) * span if settled else math.inf
        if settled and step < 0.2 * span:
            break
        span = min(max(wanted, span / 30), 30 * span)
    else:
        raise NotFound("the crossing could not be closed in on")
    return _crossing(flow, centre, scales, slope / span, last_step)


def leaps(places: list[Place]) -> Iterator[tuple[int, Place]]:
    """Crossings at which a followed branch was left for another: the place before each, and a rough place.

    A multiplier then nears 1 and turns back. Seen from either side it reaches 1 at the same parameter.
    """
    for at in range(1, len(places) - 2):
        a, b, c, d = places[at - 1 : at + 3]
        tests = [fold_test(place.multipliers) for place in (a, b, c, d)]
        if not (tests[0] * tests[3] > 0 and abs(tests[1]) < abs(tests[0]) and abs(tests[2]) < abs(tests[3])):
            continue
        if tests[1] * tests[2] < 0 or (b.r - a.r) * (c.r - b.r) <= 0 or (d.r - c.r) * (c.r - b.r) <= 0:
            continue
        onward = b.r + tests[1] * (b.r - a.r) / (tests[0] - tests[1])
        back = c.r - tests[2] * (d.r - c.r) / (tests[3] - tests[2])
        low, high = sorted((b.r, c.r))
        slack = 0.5 * (high - low)
        if abs(onward - back) > slack or not low - slack <= (onward + back) / 2 <= high + slack:
            continue
        # The branch that goes through leans less than those that split off, as the root of a distance.
        first = np.max(np.abs(b.points - a.points)) / abs(b.r - a.r)
        second = np.max(np.abs(d.points - c.points)) / abs(d.r - c.r)
        r, (p, q) = (onward, (a, b)) if first < second else (back, (d, c))
        points = q.points + (r - q.r) / (q.r - p.r) * (q.points - p.points)
        yield at, Place(points, r, b.multipliers, q.moves, q.move_r)


def _nodes(
    flow: FlowMap, centre: Cycle, span: float, scales: Floats, text: str
) -> Generator[Step, None, tuple[Floats, list[Floats], Floats]]:
    places = np.cos(np.pi * (np.arange(NODES) + 0.5) / NODES)
    # The outermost first, where the equations are regular; the others are predicted from those two.
    order = [0, NODES - 1, *range(1, NODES - 1)]
    cycles: dict[int, Floats] = {}
    tests = np.empty(NODES)
    middle, lean = centre.points, np.zeros_like(centre.points)
    for at in order:
        yield Step(text)
        r = centre.r + span * places[at]
        found = newton(flow, Cycle(middle + places[at] * lean, r), scales)
        if found is None:
            raise NotFound(flow.why() or "the branch could not be followed through the crossing")
        cycles[at] = found.points
        if len(cycles) == 1:
            lean = (found.points - middle) / places[at]
        elif len(cycles) == 2:
            lean = (cycles[0] - found.points) / (places[0] - places[at])
            middle = found.points - places[at] * lean
        matrix = condensed(flow, found.points, r).monodromy
        if not np.isfinite(matrix).all():
            # A resting point on the section is passed at no speed.
            raise NotFound("the branch comes to rest on the section")
        tests[at] = float(min(np.linalg.eigvals(matrix) - 1, key=abs).real)
    return centre.r + span * places, [cycles[at] for at in range(NODES)], tests


def _root(series: Any) -> float | None:
    """The root nearest the middle, within twice the span."""
    roots = chebyshev.chebroots(series)
    real = [float(root.real) for root in roots if abs(root.imag) < 1e-6 and abs(root.real) < 2]
    return min(real, key=abs, default=None)


def _interpolated(rs: Floats, cycles: list[Floats], r: float, centre: Cycle, span: float) -> Floats:
    shape = centre.points.shape
    values = np.array([points.ravel() for points in cycles])
    series = chebyshev.chebfit((rs - centre.r) / span, values, NODES - 1)
    return np.asarray(chebyshev.chebval((r - centre.r) / span, series)).reshape(shape)


def _crossing(flow: FlowMap, cycle: Cycle, scales: Floats, speed: float, last_step: float) -> Solution:
    linear = flow.linearised(cycle.points, cycle.r)
    parts, n = condense(linear, cycle.points), len(scales)
    matrix = parts.monodromy
    if not np.isfinite(matrix).all():
        raise NotFound("the branch comes to rest on the section")
    scaled = matrix * scales / scales[:, None]
    vector = np.linalg.svd(scaled - np.eye(n))[2][-1] * scales
    vectors = [vector]
    for jacobian in linear.jacobian[:-1]:
        vectors.append(jacobian @ vectors[-1])
    slope = parts.closing[:, n]
    return Solution(cycle, np.array(vectors), 0.0, matrix, slope, speed, last_step, None, None)
