"""Known splits of maps of several states besides flips and folds of maps that shrink areas.

Nothing of the engine takes part: the values can be written down, and the maps are written by hand once more.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Iterator
from fractions import Fraction
from typing import Any

from known_splits import Formula, Split
from test_many_exact import own_system

from tinemark.systems.library import builtin_system
from tinemark.systems.system import System

GROUP = "many states"


def several_states() -> Iterator[Split]:
    """Crossings of branches, border collisions, and flips and a fold where areas are preserved."""
    yield from _crossings()
    yield from _borders()
    yield from _conservative()


def _crossings() -> Iterator[Split]:
    patches, unit = builtin_system("two_patch"), (0.0, 1.0)
    yield _split(patches, "r", "transcritical", 1, Fraction(1), (0.0,), 0.3, _patches, unit)
    # The alternating cycle: s = x + y = 1 + 1/(k r), d^2 = 2 s (1 - 1/r) - s^2, k = 0.8, and it takes up its
    # stability where (r + 1/k)(r - 2 - 1/k) = 2 (1 - k)/k^2: r = 1 + sqrt(5.6875).
    value = 1 + _root(Fraction("5.6875"))
    r = float(value)
    total = 1 + 1 / (0.8 * r)
    apart = math.sqrt(2 * total * (1 - 1 / r) - total**2)
    points = ((total + apart) / 2, (total - apart) / 2)
    yield _split(patches, "r", "pitchfork", 2, value, points, 0.06, _patches, unit)
    delayed = builtin_system("delayed_logistic")
    yield _split(delayed, "r", "transcritical", 1, Fraction(1), (0.0,), 0.3, _delayed, unit)
    predator = own_system({"x": "r*x*(1 - x) - x*y", "y": "2*x*y"}, "0", "1", "0.3")
    yield _split(predator, "r", "transcritical", 1, Fraction(2), (0.5,), 0.2, _predator, unit)
    for sign, fifth in ((-1, 0), (1, -1)):
        odd = own_system({"x": f"r*x + ({sign})*x**3 + ({fifth})*x**5", "y": "y/2 + x/10"}, "-1", "1", "0.05")
        yield _split(odd, "r", "pitchfork", 1, Fraction(1), (0.0,), 0.1, _odd(sign, fifth), (-1.0, 1.0))


def _borders() -> Iterator[Split]:
    left = (Fraction("0.2"), Fraction("0.3"))
    for t, d in (("0.4", "0.2"), ("-1.4", "0.3"), ("1.7", "0.3"), ("-1.9", "0.5"), ("-0.5", "1.1")):
        system = own_system(
            {
                "x": f"y + r + (0.2*x if x < 0 else ({t})*x)",
                "y": f"-0.3*x if x < 0 else -({d})*x",
            },
            "-2",
            "2",
        )
        formula = _pieces(left, (Fraction(t), Fraction(d)))
        yield _split(
            system, "r", "border collision", 1, Fraction(0), (0.0,), 0.5, formula, (-2.0, 2.0), _at_zero
        )
    folded = own_system({"x": "1 - r*x**2 + y", "y": "0.3*abs(x)"}, "-2", "2")
    points = (0.0, 10 / 7)
    yield _split(
        folded, "r", "border collision", 2, Fraction("0.49"), points, 0.1, _folded, (-2.0, 2.0), _at_zero
    )


def _conservative() -> Iterator[Split]:
    system = builtin_system("henon").with_value("b", "-1")
    yield _split(system, "a", "fold", 1, Fraction(-1), (1.0,), 2.0, _henon, (-1.5, 3.0))
    yield _split(system, "a", "flip", 1, Fraction(3), (1 / 3,), 0.5, _henon, (-1.5, 1.5))
    yield _split(system, "a", "flip", 2, Fraction(4), (0.0, 0.5), 0.1, _henon, (-1.5, 1.5))


def _root(square: Fraction) -> Fraction:
    """A square root to 40 digits."""
    scale = 10**80
    return Fraction(math.isqrt(square.numerator * scale // square.denominator), 10**40)


def _at_zero(state: tuple[Any, ...], r: Any) -> Any:
    return state[0]


def _patches(state: tuple[Any, ...], r: Any, m: Any) -> tuple[Any, ...]:
    x, y = (r * part * (1 - part) for part in state)
    return (9 * x + y) / 10, (9 * y + x) / 10


def _delayed(state: tuple[Any, ...], r: Any, m: Any) -> tuple[Any, ...]:
    x, y = state
    return r * x * (1 - y), x


def _predator(state: tuple[Any, ...], r: Any, m: Any) -> tuple[Any, ...]:
    x, y = state
    return r * x * (1 - x) - x * y, 2 * x * y


def _odd(sign: int, fifth: int) -> Formula:
    return lambda state, r, m: (
        r * state[0] + sign * state[0] ** 3 + fifth * state[0] ** 5,
        state[1] / 2 + state[0] / 10,
    )


def _pieces(left: tuple[Fraction, Fraction], right: tuple[Fraction, Fraction]) -> Formula:
    def pieces(state: tuple[Any, ...], r: Any, m: Any) -> tuple[Any, ...]:
        x, y = state
        t, d = left if x < 0 else right
        return y + r + x * t.numerator / t.denominator, -x * d.numerator / d.denominator

    return pieces


def _folded(state: tuple[Any, ...], r: Any, m: Any) -> tuple[Any, ...]:
    x, y = state
    return 1 - r * x**2 + y, abs(x) * 3 / 10


def _henon(state: tuple[Any, ...], a: Any, m: Any) -> tuple[Any, ...]:
    x, y = state
    return 1 - a * x**2 + y, -x


def _split(
    system: System,
    parameter: str,
    kind: str,
    period: int,
    value: Fraction,
    points: tuple[float, ...],
    size: float,
    formula: Formula,
    extent: tuple[float, float],
    surface: Callable[..., Any] | None = None,
) -> Split:
    return Split(GROUP, system, parameter, kind, period, value, points, size, formula, *extent, surface)
