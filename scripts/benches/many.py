"""Maps of several states: what a proved ladder takes, and how the cost of a proof grows with the period."""

from __future__ import annotations

import time
from collections.abc import Generator, Iterator
from dataclasses import dataclass
from fractions import Fraction
from functools import partial
from typing import TypeVar

import numpy as np

from benches.measuring import Figure, alternately, at_least, at_most, reading
from tinemark.onsets.many_cycles import Cycle, newton
from tinemark.onsets.many_ladder import ladder_many
from tinemark.onsets.many_map import ManyMap, float_many_map, many_map
from tinemark.onsets.many_onset import rough_start
from tinemark.onsets.many_polish import Polished, polish, working_bits
from tinemark.onsets.many_proof import prove_many
from tinemark.onsets.results import Kind, LadderLevel, LadderRequest, LadderResult, Status
from tinemark.systems.library import builtin_system

LADDER_S = 3.0
"""Seconds of process time for six levels of Hénon's ladder with 20 proved digits, imports apart."""
ROOM = 1.5
"""Times that the cost of a proof may exceed growth in proportion to the period."""
LEVELS = 10
SHORT, LONG = 64, 512
ROUNDS = 5
BITS = working_bits(22, LONG)
Result = TypeVar("Result")


@dataclass(frozen=True)
class _Solved:
    """A flip of Hénon's ladder, polished."""

    many: ManyMap
    solution: Polished


def figures() -> Iterator[Figure]:
    """Seconds of a ladder, and ratios of proofs of two periods taken alternately."""
    before = time.process_time()
    first = _ladder(6)
    yield at_most(
        "six levels of Hénon's ladder, 20 proved digits, first run (process s)",
        time.process_time() - before,
        LADDER_S,
    )
    yield at_least("of these levels proved", sum(_is_proved(level) for level in first.levels), 6)
    levels = _ladder(LEVELS).levels
    short, long = (_solved(level) for level in levels if level.onset.period_before in (SHORT, LONG))
    taken = alternately(
        {"short": partial(_prove, short), "long": partial(_prove, long)}, ROUNDS, clock=time.process_time
    )
    ratios = sorted(b / a for a, b in zip(taken["short"].seconds, taken["long"].seconds, strict=True))
    growth = LONG // SHORT
    yield at_most(
        f"time of a proof at period {LONG} over one at period {SHORT} ({growth} times as long)",
        ratios[len(ratios) // 2],
        growth * ROOM,
    )
    yield reading(f"proof of a flip of period {LONG} at {BITS} bits (process s)", taken["long"].median)


def _ladder(levels: int) -> LadderResult:
    system = builtin_system("henon")
    return _finish(ladder_many(LadderRequest(system, "a", Fraction(1, 5), Fraction(13, 10), levels=levels)))


def _is_proved(level: LadderLevel) -> bool:
    return level.onset.status is Status.PROVED


def _solved(level: LadderLevel) -> _Solved:
    many = many_map(builtin_system("henon"), "a")
    float_map = float_many_map(many)
    states = {name: float(text) for name, text in level.onset.states}
    points, r = [], float(level.onset.value)
    now = np.array([[states[name]] for name in many.states])
    for _ in range(level.onset.period_before):
        points.append(now[:, 0])
        now = float_map.step(now, r)
    scales = float_map.scales(r)
    cycle = newton(float_map, Cycle(np.array(points), r), scales) or Cycle(np.array(points), r)
    start = rough_start(float_map, Kind.FLIP, cycle)
    return _Solved(many, _finish(polish(many, Kind.FLIP, start, BITS, scales, 1e-6)))


def _prove(solved: _Solved) -> None:
    scales = float_many_map(solved.many).scales(float(solved.solution.r))
    _finish(prove_many(solved.many, Kind.FLIP, solved.solution.place, scales, BITS))


def _finish(job: Generator[object, None, Result]) -> Result:
    while True:
        try:
            next(job)
        except StopIteration as done:
            result: Result = done.value
            return result
