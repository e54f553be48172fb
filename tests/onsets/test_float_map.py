"""Compiled loops against slow, obvious versions, with the compiler on and off."""

from __future__ import annotations

import math
import os
import subprocess
import sys
from fractions import Fraction

import numpy as np
import pytest
from known_onsets import LADDERS, KnownLadder, ladder
from running import own_map, system_of

from tinemark.onsets.branches import (
    Cycle,
    crossings_from,
    cycle_with_multiplier,
    find_cycle,
    follow_to_multiplier,
    least_period,
)
from tinemark.onsets.float_map import float_map
from tinemark.onsets.one_map import one_map
from tinemark.onsets.results import Kind


def _orbit(known: KnownLadder, x: float, r: float, count: int) -> list[float]:
    points = [x]
    while len(points) < count:
        points.append(known.formula(points[-1], r))
    return points


@pytest.mark.parametrize("known", LADDERS, ids=lambda known: known.name)
def test_loops_against_the_formula_by_hand(known: KnownLadder) -> None:
    """Orbit, settling and derivatives of the compiled loops are those of the map written by hand."""
    cycles = float_map(one_map(system_of(known.system, known.values), known.parameter))
    r = float(known.onsets[1]) * 0.999
    slow = _orbit(known, known.attracted, r, 40)
    assert cycles.points(known.attracted, r, 40) == pytest.approx(slow, rel=1e-9, abs=1e-9)
    ends, returns = cycles.settle([known.attracted], [r], 39, 0)
    assert ends[0] == pytest.approx(slow[-1], rel=1e-9, abs=1e-9)
    assert not returns.any()
    nudge = 1e-6
    u, v, w, _ = cycles.slopes(known.attracted + 0.05, r, 3)

    def third(x: float, at: float) -> float:
        return _orbit(known, x, at, 4)[-1]

    x = known.attracted + 0.05
    assert u == pytest.approx((third(x + nudge, r) - third(x - nudge, r)) / (2 * nudge), rel=1e-5, abs=1e-6)
    assert v == pytest.approx((third(x, r + nudge) - third(x, r - nudge)) / (2 * nudge), rel=1e-5, abs=1e-6)
    up, down = (cycles.slopes(x + way * nudge, r, 3)[0] for way in (1, -1))
    assert w == pytest.approx((up - down) / (2 * nudge), rel=1e-5, abs=1e-5)


def test_settling_tells_periods_and_escapes() -> None:
    """Periods of stable cycles, none in chaos, -1 for an orbit that escaped."""
    cycles = float_map(one_map(system_of("logistic"), "r"))
    # Stable periods at these values: published bifurcation points 3, 3.449, 3.544 and the period-3 window.
    rates = [2.9, 3.2, 3.5, 3.83, 4.0 - 1e-9, 4.5]
    _, returns = cycles.settle([0.4] * 6, rates, 20000, 100)
    assert returns[:, 0].tolist() == [1, 2, 4, 3, 0, -1]


def test_turning_points() -> None:
    """Turning points where the formula's derivative vanishes, none of a straight line."""
    ricker = float_map(one_map(system_of("ricker"), "r"))
    assert ricker.critical_points(2.5) == pytest.approx([0.4])
    cubic = float_map(one_map(own_map("r*x - x**3"), "r"))
    assert cubic.critical_points(0.75) == pytest.approx([-0.5, 0.5])
    assert float_map(one_map(own_map("r*x"), "r")).critical_points(0.5) == []


@pytest.mark.parametrize(("r", "period"), [(3.2, 2), (3.5, 4), (3.83, 3)])
def test_cycles_and_their_branch(r: float, period: int) -> None:
    """A cycle is found from an orbit, and its branch is followed to both ends."""
    cycles = float_map(one_map(system_of("logistic"), "r"))
    ends, _ = cycles.settle([0.4], [r], 500, 0)
    cycle = find_cycle(cycles, ends[0], r, period)
    assert cycle is not None
    assert cycle.period == period
    assert abs(cycle.multiplier) < 1
    crossings, (low, high) = crossings_from(cycles, cycle, Fraction(r), 1.0)
    assert low < 0 < high
    values = sorted(float(crossing.r) for crossing in crossings)
    expected = {
        2: [3, 1 + math.sqrt(6)],
        4: [1 + math.sqrt(6), 3.544090359551923],
        3: [1 + math.sqrt(8), 3.841499007543508],
    }
    assert values == pytest.approx(expected[period], abs=1e-12)
    assert {crossing.kind for crossing in crossings} == (
        {Kind.FLIP, Kind.FOLD} if period == 3 else {Kind.FLIP}
    )


def test_unstable_cycles_are_followed_too() -> None:
    """The fixed point at r = 3.9, long unstable (multiplier 2 - r), leads back to its flip at 3."""
    cycles = float_map(one_map(system_of("logistic"), "r"))
    cycle = find_cycle(cycles, 0.75, 3.9, 1)
    assert cycle is not None
    assert cycle.multiplier == pytest.approx(-1.9)
    flip, offset = follow_to_multiplier(cycles, cycle, -1.0, Fraction(39, 10), 2.0)
    assert flip is not None
    assert flip.r == pytest.approx(3, abs=1e-12)
    assert offset == pytest.approx(-0.9)


def test_lower_periods_are_seen() -> None:
    """A fixed point run through four times is a fixed point, and no onset of period 4."""
    cycles = float_map(one_map(system_of("logistic"), "r"))
    assert least_period(cycles, 2 / 3, 3.0, 4) == 1
    assert cycle_with_multiplier(cycles, 0.7, 2.9, 1, -1.0) is not None
    escaped = cycle_with_multiplier(cycles, 1e200, 3.0, 8, -1.0)
    assert escaped is None
    assert find_cycle(cycles, 50.0, 3.9, 64) is None
    assert isinstance(Cycle(1, 0.5, 2.0, 0.0), Cycle)


_SCRIPT = """
import sys
sys.path[:0] = {path!r}
from running import click, system_of
from tinemark.onsets.float_map import float_map
from tinemark.onsets.one_map import one_map
cycles = float_map(one_map(system_of("ricker"), "r"))
assert not hasattr(cycles.module.orbit, "signatures")
print(*cycles.points(0.4, 2.3, 12).tolist(), *cycles.slopes(0.7, 2.3, 5), sep="\\n")
"""


def test_same_numbers_with_the_compiler_off() -> None:
    """The interpreted loops give what the compiled ones give."""
    environment = os.environ | {"NUMBA_DISABLE_JIT": "1"}
    script = _SCRIPT.format(path=[path for path in sys.path if path])
    output = subprocess.run(
        [sys.executable, "-c", script], capture_output=True, text=True, env=environment, check=False
    )
    assert output.returncode == 0, output.stderr
    cycles = float_map(one_map(system_of("ricker"), "r"))
    compiled = [*cycles.points(0.4, 2.3, 12).tolist(), *cycles.slopes(0.7, 2.3, 5)]
    assert np.array(output.stdout.split(), dtype=float) == pytest.approx(compiled, rel=1e-10)


def test_known_ladder_names_are_distinct() -> None:
    """The shared collection can be asked by name."""
    assert len({known.name for known in LADDERS}) == len(LADDERS)
    assert ladder("logistic").parameter == "r"
