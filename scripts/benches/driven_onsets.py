"""Onsets of equations: random clicks near known flips of two-state driven systems, and ladders.

The flips are the check values of tests/onsets/flow_problems.py. What is compiled once per system is measured
by itself; the refinement process stays warm, so that it is no part of a click.
"""

from __future__ import annotations

import random
import statistics
import sys
import time
from collections.abc import Generator, Iterator
from fractions import Fraction
from pathlib import Path
from typing import Any

from benches.measuring import Figure, at_least, at_most, reading

sys.path.insert(0, str(Path(__file__).resolve().parents[2] / "tests" / "onsets"))

CLICKS = 60
SEED = 20261202
LEVELS = 4
"""Flips aimed at: deeper ones are aimed at in ever narrower views, and nothing else changes."""
CLICK_SHARE = 0.01
"""How far from the flip a click falls, in widths of the view: some twelve pixels."""
LONGEST_CLICK, WORST_ERROR = 1.5, 1e-10


def figures() -> Iterator[Figure]:
    """Seconds a click, share of right answers and largest errors of clicks and ladders."""
    import flow_problems

    yield from _clicks([flow_problems.pendulum(), flow_problems.duffing()])
    for name in ("pendulum", "duffing", "roessler"):
        yield from _ladder(name, getattr(flow_problems, name)())


def _clicks(cascades: list[Any]) -> Iterator[Figure]:
    chance = random.Random(SEED)
    for cascade in cascades:
        began = time.perf_counter()
        _click(cascade, 0, chance)
        name = cascade.system.state_names[0]
        yield reading(f"first click in {name}, kernels compiled or loaded, s", time.perf_counter() - began)
    seconds, errors, right = [], [], 0
    for _ in range(CLICKS):
        cascade = chance.choice(cascades)
        level = chance.randrange(LEVELS)
        began = time.perf_counter()
        error = _click(cascade, level, chance)
        seconds.append(time.perf_counter() - began)
        if error is not None and error < WORST_ERROR:
            right += 1
            errors.append(error)
    yield at_most("clicks in two-state driven systems, median s", statistics.median(seconds), LONGEST_CLICK)
    yield reading("clicks, slowest s", max(seconds))
    yield at_least("clicks that gave the flip aimed at", right / CLICKS, 0.95)
    yield at_most("largest error of these against the check values", max(errors, default=1.0), WORST_ERROR)


def _click(cascade: Any, level: int, chance: random.Random) -> float | None:
    """Distance of the nearest onset found from the flip aimed at; None where another kind was found."""
    from tinemark.onsets.engine import refine
    from tinemark.onsets.results import Kind, RefineRequest
    from tinemark.systems.errors import NoOnsetFound

    value = cascade.levels[level]
    gap = cascade.levels[level + 1] - value
    width: float = gap * chance.uniform(0.5, 3.0)
    near = value + width * CLICK_SHARE * chance.uniform(-1.0, 1.0)
    system = cascade.system
    request = RefineRequest(
        system, system.diagram_parameter, Fraction(near), Fraction(width), digits=14, observed=None
    )
    try:
        onset = _finish(refine(request)).onsets[0]
    except NoOnsetFound:
        return None
    if onset.kind is not Kind.FLIP or onset.period_before != 2**level:
        return None
    error: float = abs(float(onset.value_fraction) - value)
    return error


def _ladder(name: str, cascade: Any) -> Iterator[Figure]:
    from tinemark.onsets.engine import ladder
    from tinemark.onsets.results import LadderRequest

    system, levels = cascade.system, cascade.levels
    request = LadderRequest(
        system,
        system.diagram_parameter,
        Fraction(cascade.start),
        Fraction(cascade.stop),
        1,
        len(levels),
    )
    began = time.perf_counter()
    found = _finish(ladder(request)).levels
    yield reading(f"ladder of {name}, {len(found)} levels, s", time.perf_counter() - began)
    yield at_least(f"ladder of {name}, levels found", float(len(found)), float(len(levels)))
    errors = [
        abs(float(item.onset.value_fraction) - value) for item, value in zip(found, levels, strict=False)
    ]
    yield at_most(f"ladder of {name}, largest error against the check values", max(errors), WORST_ERROR)


def _finish(job: Generator[Any, None, Any]) -> Any:
    while True:
        try:
            next(job)
        except StopIteration as done:
            return done.value
