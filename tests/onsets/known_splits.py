"""Known splits of every kind, each with the cycle at it, for tests and benches that click near them.

The values come from `known_onsets` or can be written down; the cycle points are worked out here from formulas
written by hand. Nothing of the engine takes part. To add one, give it to `SOURCES`.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Iterator
from dataclasses import dataclass, replace
from fractions import Fraction
from functools import cache
from typing import Any

from known_onsets import LADDERS, WINDOWS, KnownWindow
from running import own_map

from tinemark.systems.library import builtin_system
from tinemark.systems.system import System

Formula = Callable[..., tuple[Any, ...]]
"""f(state, parameter, m) -> state, with m the module that has exp, sin and pi."""
MULTIPLIERS = {"flip": -1, "fold": 1, "transcritical": 1, "pitchfork": 1}


@dataclass(frozen=True)
class Split:
    """A true split.

    Attributes
    ----------
    group
        What it belongs to: "one state", "other kinds" or "many states".
    kind, period
        Kind in the engine's words, and least period of the cycle that splits, or that a fold opens.
    value
        The parameter value, exact or to 20 digits and more.
    points
        The observed quantity at each cycle point; none where the split has no place there.
    size
        How far the parameter goes before the next split of the same cascade.
    formula
        The map written by hand.
    low, high
        Range of the observed quantity.
    surface
        What is zero on the touched surface at a border collision, from (state, parameter).
    """

    group: str
    system: System
    parameter: str
    kind: str
    period: int
    value: Fraction
    points: tuple[float, ...]
    size: float
    formula: Formula
    low: float
    high: float
    surface: Callable[..., Any] | None = None


@cache
def all_splits() -> tuple[Split, ...]:
    """Every known split; the same order each time."""
    return tuple(split for source in SOURCES for split in source())


def one_state_ladders() -> Iterator[Split]:
    """Flips of the known ladders up to period 256, folds and flips of the logistic map's windows."""
    for ladder in LADDERS:
        system = builtin_system(ladder.system)
        for name, text in ladder.values:
            system = system.with_value(name, text)
        values = [Fraction(onset) for onset in ladder.onsets]
        ends = [Fraction(ladder.start), *values]
        formula = _of_one_state(ladder.formula)
        for level, value in enumerate(values[:9]):
            gap = float(value - ends[level]) if level else float(values[1] - values[0])
            points = flip_points(ladder.formula, ladder.attracted, float(value), -0.05 * gap, 2**level)
            size = float(values[level + 1] - value) if level + 1 < len(values) else abs(gap) / 5
            yield _one(system, "flip", 2**level, value, points, abs(size), formula)
        if ladder.name == "logistic":
            for window in WINDOWS:
                yield from _of_window(system, ladder.formula, window)


def _of_window(system: System, scalar: Callable[..., Any], window: KnownWindow) -> Iterator[Split]:
    fold, middle, flip = (Fraction(text) for text in (window.fold, window.superstable, window.flip))
    gap = float(flip - fold)
    at_flip = flip_points(scalar, 0.5, float(flip), float(middle - flip) / 10, window.period)
    # At the fold the cycle turns back as a square root, so points a little inside are near enough.
    at_fold = _settled(scalar, 0.5, float(fold) + 1e-4 * gap, window.period)
    formula = _of_one_state(scalar)
    yield _one(system, "flip", window.period, flip, at_flip, gap / 5, formula)
    yield _one(system, "fold", window.period, fold, at_fold, gap, formula)


def branch_points() -> Iterator[Split]:
    """Transcritical points and pitchforks that can be written down: x = 0 loses stability at r = 1."""
    for name in ("logistic", "hassell"):
        system = builtin_system(name)
        yield _one(system, "transcritical", 1, Fraction(1), (0.0,), 1.0, _BRANCH_FORMULAS[name])
    plain = own_map("r*x - x**2")
    yield _one(
        plain, "transcritical", 1, Fraction(1), (0.0,), 1.0, _of_one_state(lambda x, r, m: r * x - x**2)
    )
    cubic = builtin_system("cubic")
    yield _one(cubic, "pitchfork", 1, Fraction(1), (0.0,), 1.0, _BRANCH_FORMULAS["cubic"])
    # The mirror image of the odd cubic: its symmetric 2-cycle (1, -1) breaks where that of the cubic flips.
    mirrored = own_map("x**3 - r*x", low="-1.5", high="1.5")
    formula = _of_one_state(lambda x, r, m: x**3 - r * x)
    yield _one(mirrored, "pitchfork", 2, Fraction(2), (1.0, -1.0), 0.2, formula)
    yield _one(mirrored, "flip", 1, Fraction(1), (0.0,), 1.0, formula)


def border_collisions() -> Iterator[Split]:
    """Two straight pieces: the fixed point touches x = 0 at r = 0 (Nusse & Yorke 1992)."""
    for a, b in (("0.5", "0.3"), ("0.5", "-1.5"), ("0.5", "-3.5"), ("0.5", "-5"), ("-0.5", "0.7")):
        system = own_map(f"{a}*x + r if x < 0 else {b}*x + r")
        formula = _of_one_state(_pieces(Fraction(a), Fraction(b)))
        yield _one(
            system,
            "border collision",
            1,
            Fraction(0),
            (0.0,),
            0.5,
            formula,
            surface=lambda state, r: state[0],
        )


def _pieces(a: Fraction, b: Fraction) -> Callable[..., Any]:
    def pieces(x: Any, r: Any, m: Any) -> Any:
        slope = a if x < 0 else b
        return x * slope.numerator / slope.denominator + r

    return pieces


def jumps() -> Iterator[Split]:
    """Subcritical splits at r = 1, and the fold at r = 3/4 where the pair beside x = 0 appears.

    Fixed points of r x + x^3 - x^5 have r + x^2 - x^4 = 1; with the other sign they are a 2-cycle.
    """
    beside = math.sqrt(0.5)
    flipping = _of_one_state(lambda x, r, m: -r * x - x**3 + x**5)
    system = own_map("-r*x - x**3 + x**5")
    yield replace(_one(system, "flip", 1, Fraction(1), (0.0,), 0.2, flipping), group="other kinds")
    forking = _of_one_state(lambda x, r, m: r * x + x**3 - x**5)
    system = own_map("r*x + x**3 - x**5")
    yield _one(system, "pitchfork", 1, Fraction(1), (0.0,), 0.2, forking)
    for side in (beside, -beside):
        fold = _one(system, "fold", 1, Fraction(3, 4), (side,), 0.2, forking)
        yield replace(fold, group="other kinds")


def crises() -> Iterator[Split]:
    """Ends of windows and of the whole cascade of the logistic map, the odd cubic's two images merging.

    A crisis has no place of its own in the observed quantity, so that it is aimed at along the parameter
    alone. r = 4 is exact; the others are recomputed (Grebogi, Ott and Yorke 1982, from memory).
    """
    known = (
        ("logistic", "4", 1, 0.002),
        ("logistic", "3.85680065247776482189058051", 3, 0.0002),
        ("logistic", "3.96159552339497476672310273", 4, 0.00001),
        ("logistic", "3.74471033348969346311562748", 5, 0.00006),
        ("logistic", "3.6785735104283222651037051293065732", 1, 0.001),
        ("logistic", "3.5925721841069786491021528020446585", 2, 0.0001),
        ("cubic", "2.59807621135331594029116951225880", 1, 0.002),
    )
    for name, value, period, size in known:
        system = builtin_system(name)
        yield _one(system, "crisis", period, Fraction(value), (), size, _BRANCH_FORMULAS[name])


def maps_of_several_states() -> Iterator[Split]:
    """Hénon's fold and first two flips in closed form for several b, his ladder, and others.

    The fold is at -(1 - b)^2/4, the flips at 3 (1 - b)^2/4 and (1 - b)^2 + (1 + b)^2/4 (Hénon 1976); the
    ladder for b = 0.3 is as recomputed in the check values. Delayed logistic: a Neimark-Sacker point at
    r = 2 (Maynard Smith 1968). Two patches in step split as the logistic map does.
    """
    for text in ("0.1", "0.2", "0.3", "0.4"):
        b = Fraction(text)
        system = builtin_system("henon").with_value("b", text)
        fold, first = -((1 - b) ** 2) / 4, 3 * (1 - b) ** 2 / 4
        second = (1 - b) ** 2 + (1 + b) ** 2 / 4
        formula = _henon(b)
        at_fold = (float(-(1 - b) / (2 * fold)),)
        at_first = (float((1 - b) / (2 * first)),)
        # The 2-cycle: sum of its points (1 - b)/a, product ((1 - b)^2 - a)/a^2.
        total, product = (1 - b) / second, ((1 - b) ** 2 - second) / second**2
        root = math.sqrt(float(total**2 - 4 * product))
        at_second = ((float(total) + root) / 2, (float(total) - root) / 2)
        yield _many(system, "a", "fold", 1, fold, at_fold, float(first - fold), formula, (-3.0, 6.0))
        yield _many(system, "a", "flip", 1, first, at_first, float(second - first), formula, (-1.5, 1.5))
        yield _many(
            system, "a", "flip", 2, second, at_second, float(second - first) / 5, formula, (-1.5, 1.5)
        )
    system, formula = builtin_system("henon"), _henon(Fraction("0.3"))
    values = [Fraction(text) for text in HENON_LADDER]
    for level, value in enumerate(values[2:6], 2):
        gap = float(value - values[level - 1])
        points = _many_points(formula, (0.1, 0.1), float(value), -0.05 * gap, 2**level)
        size = float(values[level + 1] - value)
        yield _many(system, "a", "flip", 2**level, value, points, size, formula, (-1.5, 1.5))
    delayed = builtin_system("delayed_logistic")
    yield _many(delayed, "r", "Neimark-Sacker", 1, Fraction(2), (0.5,), 0.2, _delayed, (0.0, 1.0))
    patches = builtin_system("two_patch")
    logistic = [Fraction(text) for text in LADDERS[0].onsets]
    for level, value in enumerate(logistic[:3]):
        gap = float(value - logistic[level - 1]) if level else 0.4
        points = flip_points(LADDERS[0].formula, 0.5, float(value), -0.05 * gap, 2**level)
        size = float(logistic[level + 1] - value)
        yield _many(patches, "r", "flip", 2**level, value, points, size, _patches, (0.0, 1.0))


def kinds_of_several_states() -> Iterator[Split]:
    """See `known_many_splits`."""
    from known_many_splits import several_states

    yield from several_states()


HENON_LADDER = (
    "0.3675",
    "0.9125",
    "1.025855405073781052882979050884",
    "1.051125662035171236066087578003",
    "1.056563758158788020296114936728",
    "1.057730839594022683470994195646",
    "1.057980893180660019422952702606",
)


def _henon(b: Fraction) -> Formula:
    def formula(state: tuple[Any, ...], a: Any, m: Any) -> tuple[Any, ...]:
        x, y = state
        return 1 - a * x**2 + y, x * b.numerator / b.denominator

    return formula


def _delayed(state: tuple[Any, ...], r: Any, m: Any) -> tuple[Any, ...]:
    x, y = state
    return r * x * (1 - y), x


def _patches(state: tuple[Any, ...], r: Any, m: Any) -> tuple[Any, ...]:
    x, y = (r * part * (1 - part) for part in state)
    return (9 * x + y) / 10, (9 * y + x) / 10


def _of_one_state(scalar: Callable[..., Any]) -> Formula:
    return lambda state, r, m: (scalar(state[0], r, m),)


_BRANCH_FORMULAS = {
    "logistic": _of_one_state(lambda x, r, m: r * x * (1 - x)),
    "hassell": _of_one_state(lambda x, r, m: r * x / (1 + x) ** 6),
    "cubic": _of_one_state(lambda x, r, m: r * x * (1 - x**2)),
}

SOURCES: tuple[Callable[[], Iterator[Split]], ...] = (
    one_state_ladders,
    branch_points,
    border_collisions,
    jumps,
    crises,
    maps_of_several_states,
    kinds_of_several_states,
)
"""Where splits come from."""


def _one(
    system: System,
    kind: str,
    period: int,
    value: Fraction,
    points: tuple[float, ...],
    size: float,
    formula: Formula,
    *,
    surface: Callable[..., Any] | None = None,
) -> Split:
    limits = system.states[0].range
    low, high = (float(end) for end in limits) if limits else (-1.0, 1.0)
    group = "one state" if kind in ("flip", "fold") else "other kinds"
    parameter = system.diagram_parameter
    return Split(group, system, parameter, kind, period, value, points, size, formula, low, high, surface)


def _many(
    system: System,
    parameter: str,
    kind: str,
    period: int,
    value: Fraction,
    points: tuple[float, ...],
    size: float,
    formula: Formula,
    extent: tuple[float, float],
) -> Split:
    return Split("many states", system, parameter, kind, period, value, points, size, formula, *extent)


def _settled(formula: Callable[..., Any], x: float, r: float, period: int) -> tuple[float, ...]:
    for _ in range(200 * period + 20000):
        x = formula(x, r)
    return _orbit(formula, x, r, period)


def flip_points(
    formula: Callable[..., Any], x: float, r: float, shift: float, period: int
) -> tuple[float, ...]:
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


def _many_points(
    formula: Formula, state: tuple[float, ...], r: float, shift: float, period: int
) -> tuple[float, ...]:
    """First state along the cycle, settled beside the flip: near enough to aim a click at."""
    for _ in range(400 * period + 20000):
        state = formula(state, r + shift, math)
    points = []
    for _ in range(period):
        points.append(float(state[0]))
        state = formula(state, r + shift, math)
    return tuple(points)
