"""Onsets: the 16-level ladder, and 200 random clicks against onsets known from elsewhere.

The clicks are judged by tests/onsets/known_onsets.py and by cycle points worked out here from formulas
written by hand: nothing of the engine takes part in the judging.
"""

from __future__ import annotations

import contextlib
import math
import random
import statistics
import sys
import time
from collections.abc import Callable, Iterator
from dataclasses import dataclass, replace
from fractions import Fraction
from pathlib import Path
from typing import Any

from benches.measuring import Figure, at_least, at_most, reading

LEVELS = 16
LADDER_DIGITS = 25
CLICKS = 200
SEED = 20240607
COLUMNS, ROWS = 1280, 800
CLICK_PIXELS = 12.0


def figures() -> Iterator[Figure]:
    """The onset bench's figures."""
    yield from _ladder_figures()
    yield from _click_figures()


def _known() -> Any:
    sys.path.insert(0, str(Path(__file__).resolve().parents[2] / "tests" / "onsets"))
    import known_onsets

    return known_onsets


def _finish(job: Any) -> Any:
    while True:
        try:
            next(job)
        except StopIteration as done:
            return done.value


def _ladder_figures() -> Iterator[Figure]:
    import flint  # noqa: F401  imports are not part of the figure
    import numba  # noqa: F401
    import sympy  # noqa: F401

    from tinemark.onsets.engine import ladder
    from tinemark.onsets.results import LadderRequest, Status
    from tinemark.systems.library import builtin_system

    known = _known().ladder("logistic")
    system = builtin_system("logistic")
    request = LadderRequest(system, "r", Fraction("2.8"), Fraction(4), 1, LEVELS, LADDER_DIGITS)
    # The first run of a system compiles its float loops or reads them from the cache; both count.
    before = time.process_time()
    result = _finish(ladder(request))
    first = time.process_time() - before
    before = time.process_time()
    result = _finish(ladder(request))
    again = time.process_time() - before
    right = 0
    for level, text in zip(result.levels, known.onsets, strict=False):
        onset = level.onset
        truth = Fraction(text)
        unit = Fraction(1, 10 ** len(text.partition(".")[2]))
        encloses = Fraction(onset.lower) <= truth + unit and truth <= Fraction(onset.upper)
        narrow = Fraction(onset.upper) - Fraction(onset.lower) < truth / 10**LADDER_DIGITS
        right += onset.status is Status.PROVED and encloses and narrow
    name = f"{LEVELS}-level logistic ladder, {LADDER_DIGITS} digits"
    yield at_least(f"{name}: levels proved and right", right, LEVELS)
    yield at_most(f"{name}: process seconds, first run", first, 3.0)
    yield at_most(f"{name}: process seconds, warm", again, 3.0)


@dataclass(frozen=True)
class _Truth:
    """A true split: system, kind, period of the cycle at it, value, cycle points, size."""

    system: Any
    parameter: str
    kind: str
    period: int
    value: Fraction
    points: tuple[float, ...]
    size: float
    formula: Callable[..., Any]


@dataclass(frozen=True)
class _Tally:
    right: int
    first: int
    missed: int
    wrong_proved: int
    seconds: tuple[float, ...]


def _click_figures() -> Iterator[Figure]:
    from tinemark.onsets.engine import refine
    from tinemark.onsets.results import RefineRequest, Status
    from tinemark.systems.errors import NoOnsetFound

    truths = _truths()
    chance = random.Random(SEED)
    for system in {id(truth.system): truth.system for truth in truths}.values():
        # The refinement process stays warm: what it compiles once is not part of a click.
        _warm(system)
    tally = _Tally(0, 0, 0, 0, ())
    for _ in range(CLICKS):
        truth, request = _random_click(chance, truths, RefineRequest)
        before = time.perf_counter()
        try:
            onsets = _finish(refine(request)).onsets
        except NoOnsetFound:
            onsets = ()
        tally = replace(tally, seconds=(*tally.seconds, time.perf_counter() - before))
        same = [other for other in truths if other.system is truth.system]
        right = bool(onsets) and _is_right(onsets, truth, same, request)
        wrong = sum(onset.status is Status.PROVED and _is_wrong(onset, same) for onset in onsets)
        tally = replace(
            tally,
            right=tally.right + right,
            first=tally.first + (bool(onsets) and _matches(onsets[0], truth)),
            missed=tally.missed + (not onsets),
            wrong_proved=tally.wrong_proved + wrong,
        )
    yield at_least(f"{CLICKS} random clicks: share right", tally.right / CLICKS, 0.97)
    yield reading(f"{CLICKS} random clicks: share with the split aimed at first", tally.first / CLICKS)
    yield at_most(f"{CLICKS} random clicks: median seconds", statistics.median(tally.seconds), 0.3)
    yield reading(f"{CLICKS} random clicks: slowest seconds", max(tally.seconds))
    yield at_most(f"{CLICKS} random clicks: wrong values marked proved", tally.wrong_proved, 0)
    yield reading(f"{CLICKS} random clicks: without an answer", tally.missed)


def _warm(system: Any) -> None:
    from tinemark.onsets.engine import refine
    from tinemark.onsets.results import RefineRequest
    from tinemark.systems.errors import NoOnsetFound

    value = system.parameter(system.diagram_parameter).value.fraction
    with contextlib.suppress(NoOnsetFound):
        _finish(refine(RefineRequest(system, system.diagram_parameter, value, value / 10)))


def _truths() -> list[_Truth]:
    from tinemark.systems.library import builtin_system

    known = _known()
    found: list[_Truth] = []
    for ladder in known.LADDERS:
        system = builtin_system(ladder.system)
        for name, value in ladder.values:
            system = system.with_value(name, value)
        values = [Fraction(text) for text in ladder.onsets]
        ends = [Fraction(ladder.start), *values]
        for level, value in enumerate(values[:9]):
            gap = float(value - ends[level]) if level else float(values[1] - values[0])
            period = 2**level
            points = _cycle(ladder.formula, ladder.attracted, float(value), -0.05 * gap, period)
            size = float(values[level + 1] - value) if level + 1 < len(values) else abs(gap) / 5
            found.append(
                _Truth(system, ladder.parameter, "flip", period, value, points, size, ladder.formula)
            )
        if ladder.name == "logistic":
            for window in known.WINDOWS:
                found += _window_truths(system, ladder.formula, window)
    return found


def _window_truths(system: Any, formula: Callable[..., Any], window: Any) -> list[_Truth]:
    fold, middle, flip = (Fraction(text) for text in (window.fold, window.superstable, window.flip))
    gap = float(flip - fold)
    at_flip = _cycle(formula, 0.5, float(flip), float(middle - flip) / 10, window.period)
    # At the fold the cycle turns back as a square root, so points a little inside are near enough.
    at_fold = _settled(formula, 0.5, float(fold) + 1e-4 * gap, window.period)
    return [
        _Truth(system, "r", "flip", window.period, flip, at_flip, gap / 5, formula),
        _Truth(system, "r", "fold", window.period, fold, at_fold, gap, formula),
    ]


def _settled(formula: Callable[..., Any], x: float, r: float, period: int) -> tuple[float, ...]:
    for _ in range(200 * period + 20000):
        x = formula(x, r)
    points = []
    for _ in range(period):
        points.append(x)
        x = formula(x, r)
    return tuple(points)


def _cycle(formula: Callable[..., Any], x: float, r: float, shift: float, period: int) -> tuple[float, ...]:
    """The cycle at a flip: settled beside it, then solved for at it, where f^p - x has slope -2."""
    x = _settled(formula, x, r + shift, period)[0]

    def beyond(start: float) -> float:
        end = start
        for _ in range(period):
            end = formula(end, r)
        return end - start

    for _ in range(60):
        x += beyond(x) / 2
    return _orbit(formula, x, r, period)


def _orbit(formula: Callable[..., Any], x: float, r: float, count: int) -> tuple[float, ...]:
    points = []
    for _ in range(count):
        points.append(x)
        x = formula(x, r)
    return tuple(points)


def _random_click(chance: random.Random, truths: list[_Truth], make: Any) -> tuple[_Truth, Any]:
    """A view in which the split can be told from its neighbours, and a click within 12 pixels of it."""
    truth = chance.choice(truths)
    low, high = (float(end) for end in truth.system.states[0].range)
    # The next split of the same cascade is at least 24 pixels away; one view in five is much deeper.
    width = abs(truth.size) * 10 ** chance.uniform(0.0, math.log10(COLUMNS / 24))
    if chance.random() < 0.2:
        width *= 10 ** -chance.uniform(1, 6)
    height = (high - low) * 10 ** chance.uniform(-1.5, 0)
    split = chance.choice(truth.points)
    radius, angle = CLICK_PIXELS * math.sqrt(chance.random()), chance.uniform(0, 2 * math.pi)
    near = truth.value + Fraction(width * radius * math.cos(angle) / COLUMNS)
    observed = Fraction(split + height * radius * math.sin(angle) / ROWS)
    return truth, make(truth.system, truth.parameter, near, Fraction(width), observed, Fraction(height))


def _distance(truth: _Truth, request: Any) -> float:
    across = float((truth.value - request.near) / request.width) * COLUMNS
    up = min(abs(point - float(request.observed)) for point in truth.points) / float(request.height) * ROWS
    return math.hypot(across, up)


def _matches(onset: Any, truth: _Truth) -> bool:
    period = onset.period_before if onset.kind.value == "flip" else onset.period_after
    if onset.kind.value != truth.kind or period != truth.period:
        return False
    slack = Fraction(1, 10**15) * max(Fraction(1), abs(truth.value))
    return bool(abs(onset.value_fraction - truth.value) < slack)


def _is_right(onsets: Any, truth: _Truth, truths: list[_Truth], request: Any) -> bool:
    """The split aimed at comes first, or is the second of two close ones, or another known one is nearer."""
    if any(_matches(onset, truth) for onset in onsets):
        return True
    aimed = _distance(truth, request)
    return any(_matches(onsets[0], other) and _distance(other, request) < aimed for other in truths)


def _is_wrong(onset: Any, truths: list[_Truth]) -> bool:
    """Whether a proved onset is contradicted by the known value of its kind, or by a calculation apart."""
    if any(_matches(onset, truth) for truth in truths):
        truth = next(truth for truth in truths if _matches(onset, truth))
        slack = Fraction(1, 10**17) * max(Fraction(1), abs(truth.value))
        return not Fraction(onset.lower) - slack <= truth.value <= Fraction(onset.upper) + slack
    return not _solves(onset, truths[0].formula)


def _solves(onset: Any, formula: Callable[..., Any]) -> bool:
    """Whether mpmath finds the cycle closed and its multiplier right at the printed decimals."""
    import mpmath

    period = onset.period_before if onset.kind.value == "flip" else onset.period_after
    with mpmath.workdps(60):
        r, x = mpmath.mpf(onset.value), mpmath.mpf(onset.states[0][1])

        def after(start: Any) -> Any:
            for _ in range(period):
                start = formula(start, r, mpmath)
            return start

        step = mpmath.mpf(10) ** -22
        slope = (after(x + step) - after(x - step)) / (2 * step)
        wanted = -1 if onset.kind.value == "flip" else 1
        return bool(abs(after(x) - x) < 1e-14 and abs(slope - wanted) < 1e-6)
