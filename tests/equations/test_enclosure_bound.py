"""A-priori bounds against solutions themselves: no coefficient and no derivative exceeds its estimate."""

from __future__ import annotations

import random
from typing import Any

import pytest
from flint import arb

from tinemark.equations.enclosure_bound import ROOM, Bound, NotEnclosed, bound_of
from tinemark.equations.series import working
from tinemark.equations.taylor_arc import LowArc, arc_from
from tinemark.equations.taylor_rates import Rates, rate_functions
from tinemark.systems.formula import read_formula

BITS = 80
ORDER = 20
SYSTEMS = (
    ("x*x + 0*r",),
    ("r*x - x**3 + cos(3*t)",),
    ("1/(1 + x*x)**2 - r*t",),
    ("y", "-sin(x) - 0.2*y + r*cos(t)"),
    ("sqrt(3 + x)*y - log(3 + y*r)", "atan2(y, 3 + x) - tanh(x*y) + asin(x/4)"),
    ("-y - z", "x + 0.2*y", "0.2 + z*(x - 3*r)"),
)


def bound_at(texts: tuple[str, ...], middle: list[float], spread: float, clock: float) -> tuple[Rates, Bound]:
    """Rates, and their bound from a box."""
    states = ("x", "y", "z")[: len(texts)]
    formulas = tuple(read_formula(text, (*states, "r", "t"), key="rate") for text in texts)
    rates = Rates(states, "r", formulas, None)
    floors = [0.01] * len(texts)
    starts, halves = [arb(value) for value in middle], [arb(spread)] * len(texts)
    with working(BITS):
        return rates, bound_of(
            rate_functions(rates), starts, halves, arb(0.75, 1e-6), arb(clock), floors, 2.0
        )


@pytest.mark.parametrize("case", range(len(SYSTEMS)))
def test_coefficients_of_all_starts_keep_to_the_bound(case: int) -> None:
    dice = random.Random(case)
    texts = SYSTEMS[case]
    n = len(texts)
    middle, clock = [dice.uniform(-1, 1) for _ in range(n)], 0.25
    rates, bound = bound_at(texts, middle, 1e-4, clock)
    radius = bound.radius
    assert all(room <= reach * ROOM for room, reach in zip(bound.room, bound.reach, strict=True))

    def within(value: Any, limit: Any, k: int) -> bool:
        return bool(abs(value) * radius**k <= limit)

    for _ in range(4):
        # Starts and parameters from all of what the bound speaks of, its room included.
        start = [
            arb(m + dice.choice([-1, 1]) * (1e-4 + float(room) * dice.random()))
            for m, room in zip(middle, bound.room, strict=True)
        ]
        r = arb(0.75 + dice.choice([-1, 1]) * (1e-6 + float(bound.room_r) * dice.random()))
        arc = arc_from(rate_functions(rates), start, r, arb(clock), ORDER, BITS, low=ORDER)
        for i in range(n):
            for k in range(1, ORDER):
                assert within(arc.x[i][k], bound.reach[i] + 2e-4, k), (i, k)
    # Derivatives at points of the box itself.
    arc = arc_from(
        rate_functions(rates), [arb(m) for m in middle], arb(0.75), arb(clock), ORDER, BITS, low=ORDER
    )
    with working(BITS, ORDER):
        low = LowArc(arc, ORDER)
        slope = low.slope()
        unit = [[arb(int(i == k)) for i in range(n)] for k in range(n)]
        bends = [low.bent(vector, slope) for vector in unit]
        for i in range(n):
            for order in range(1, ORDER):
                for k in range(n):
                    assert within(arc.turn[i][k][order], bound.first(i, k), order)
                    for m in range(n + 1):
                        entry = bends[k][m][i]
                        if entry is not None:
                            limit = 2 * bound.first(i, k) / bound.rooms[m]
                            assert within(entry[order], limit, order)
                if slope[i] is not None:
                    assert within(slope[i][order], bound.first(i, n), order)


def test_a_pole_limits_the_disc() -> None:
    # x' = x**2 from 2 has its pole at 1/2: no disc may reach it.
    _, bound = bound_at(("x*x + 0*r",), [2.0], 0.0, 0.0)
    assert 0.1 < float(bound.radius) < 0.5
    # And the rest of the geometric series 2 (2 t)^k from k = 10 on is inside its estimate at half that time.
    half = bound.radius / 2
    rest = 2 * (2 * half) ** 10 / (1 - 2 * half)
    assert rest <= bound.rest(half, 10) * bound.reach[0]
    with pytest.raises(NotEnclosed):
        bound.rest(bound.radius * 2, 10)


def test_a_branch_point_limits_the_disc() -> None:
    # x' = -1/(2 x) from 1: x = sqrt(1 - t), with a branch point at 1.
    _, bound = bound_at(("-1/(2*x) + 0*r",), [1.0], 0.0, 0.0)
    assert 0.1 < float(bound.radius) < 1.0
