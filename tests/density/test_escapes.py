"""Orbits that escape: shown as such, and never written outside the histogram."""

from __future__ import annotations

import math

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from naive_density import drawn, map_of, picture, view

from tinemark.density.kernels import BUFFER, LANES, kernels_for
from tinemark.density.renderer import StopFlag, append, create, snapshot
from tinemark.density.request import SweepRule
from tinemark.systems.system_file import read_system_text

# One wild system with every kind of trouble in reach of its parameters: poles, overflow, roots of
# negative numbers, huge angles, jumps. Compiled once; the parameters and the view do the rest.
WILD = read_system_text(
    """
title = "Wild"
kind = "map"
[states.x]
start = "0.3"
[states.y]
start = "-0.2"
[parameters]
r = { value = "1" }
a = { value = "1" }
b = { value = "1" }
c = { value = "1" }
[next]
x = "a*exp(r*x) + b/(x - y) + c*x**3 + (floor(x) if x < y else tan(r*y))"
y = "log(x*a) + sqrt(y*b) + sin(c*x*x) + x**r + min(x, y)*max(a, y) - abs(x)*cosh(y*c)"
[diagram]
parameter = "r"
observe = "x + atan2(y, x)*1e3"
"""
)
NUMBERS = st.one_of(
    st.floats(-10, 10),
    st.sampled_from([0.0, -0.0, 1e300, -1e300, 1e-320, math.inf, -math.inf, math.nan]),
    st.floats(allow_nan=True, allow_infinity=True),
)


@settings(max_examples=150)
@given(
    fixed=st.tuples(NUMBERS, NUMBERS, NUMBERS),
    swept=st.tuples(NUMBERS, NUMBERS),
    start=st.tuples(NUMBERS, NUMBERS),
    scale=NUMBERS,
    offset=NUMBERS,
    columns=st.integers(1, LANES),
    growing=st.booleans(),
)
def test_no_input_whatever_writes_outside(
    fixed: tuple[float, ...],
    swept: tuple[float, float],
    start: tuple[float, float],
    scale: float,
    offset: float,
    columns: int,
    growing: bool,
) -> None:
    kernels = kernels_for(WILD, "r", WILD.observe)
    guard, bins, total = 7, 12, LANES + 9
    whole = np.full((total + 2 * guard, bins), 77, np.uint32)
    counts = whole[guard:-guard]
    counts[:] = 0
    first = total - columns
    parameters = np.linspace(0.0, 1.0, total)
    with np.errstate(all="ignore"):
        parameters = np.where(np.arange(total) % 2, swept[0], swept[1]) + 0 * parameters
    states = np.repeat(np.array(start)[:, None], total, axis=1)
    done = (kernels.advance if growing else kernels.advance_counting)(
        states,
        np.ones((2, total)),
        np.zeros(total),
        parameters,
        np.array(fixed),
        counts,
        first,
        columns,
        2 * BUFFER,
        True,
        True,
        scale,
        offset,
        StopFlag().cell,
    )
    assert done == 2 * BUFFER
    assert (whole[:guard] == 77).all()
    assert (whole[-guard:] == 77).all()
    assert not counts[:first].any()
    # Each step of each column is in one of its own bins: none went missing, none went elsewhere.
    assert (counts[first:].sum(axis=1) == 2 * BUFFER).all()


def test_escaped_columns_are_flagged_and_the_others_are_not() -> None:
    # 1 - a*x**2 is bounded for -1/4 <= a <= 2 from its start, and escapes outside (standard).
    request = picture("quadratic", view("-0.5", "2.5", "-2", "2"), columns=300)
    field = drawn(request, 4096)
    a = np.array([-0.5 + 3 * (2 * j + 1) / 600 for j in range(300)])
    assert not field.escaped[(a > -0.24) & (a < 2)].any()
    assert field.escaped[(a < -0.26) | (a > 2.01)].all()
    assert np.isnan(field.lyapunov[field.escaped]).all()
    assert not field.period[field.escaped].any()
    assert not np.isnan(field.lyapunov[~field.escaped]).any()


def test_undefined_orbits_count_as_escaped() -> None:
    field = drawn(picture(map_of("log(x - r) - 5"), view("0.1", "0.9")), 256)
    assert field.escaped.all()
    assert not field.counts.any()


def test_states_of_large_size_are_not_taken_for_escaped() -> None:
    # A carrier density of the order of 1e24 is an ordinary number in its own unit.
    system = map_of("r*x*(1 - x/1e24)", start="4e23", extra='range = ["0", "1e24"]')
    field = drawn(picture(system, view("2.8", "3.9", "0", "1e24")), 512)
    assert not field.escaped.any()
    assert field.counts.sum() == 96 * 512


def test_steps_before_an_escape_stay_drawn() -> None:
    system = map_of("x + r")
    field = drawn(picture(system, view("1e13", "1e14", "0", "2e15"), transient=0), 256)
    assert field.escaped.all()
    assert field.counts.any()


@pytest.mark.parametrize("rule", [SweepRule.FORWARD, SweepRule.BACKWARD])
def test_a_carried_sweep_starts_anew_after_an_escape(rule: SweepRule) -> None:
    request = picture("quadratic", view("-0.5", "2.5", "-2", "2"), columns=300, rule=rule)
    field = drawn(request, 1024)
    a = np.array([-0.5 + 3 * (2 * j + 1) / 600 for j in range(300)])
    assert not field.escaped[(a > -0.2) & (a < 1.95)].any()
    assert field.escaped[(a < -0.3) | (a > 2.05)].all()


def test_carried_sweeps_show_hysteresis() -> None:
    # x' = r + 3x - x**3 … in the form below has two stable fixed points for small |r|: a sweep stays on the
    # branch it came on until that branch ends in a fold.
    system = map_of("x + 0.2*(r + x - x**3)", start="-1")
    where = view("-1", "1", "-2", "2")
    up = drawn(picture(system, where, rule=SweepRule.FORWARD), 256)
    down = drawn(picture(system, where, rule=SweepRule.BACKWARD), 256)
    # Folds at r = -2/(3 sqrt 3) and 2/(3 sqrt 3) (exact).
    middle = slice(35, 61)
    assert not up.counts[50:, middle].any()
    assert not down.counts[:50, middle].any()
    assert up.counts[50:, 80:].any()
    assert down.counts[:50, :16].any()


def test_a_carried_sweep_leaves_a_cycle_that_has_lost_its_stability() -> None:
    # Pitchfork of the odd cubic at r = 1: without a disturbance 0 would be kept exactly for ever.
    request = picture("cubic", view("0.5", "1.5", "-1", "1"), columns=100, rule=SweepRule.FORWARD)
    drawing = create(request)
    append(drawing, 512)
    field = snapshot(drawing)
    assert field.counts[50, :40].any() or field.counts[49, :40].any()
    assert not field.counts[48:52, 80:].any()


def test_piecewise_maps_draw() -> None:
    field = drawn(picture("peak_current", view("0.5", "2", "0", "2")), 512)
    assert field.steps == 96 * 512
    field = drawn(
        picture(map_of("r*x if x < 0.5 else floor(3*x) - abs(x - r)"), view("0", "1", "-5", "5")), 512
    )
    assert field.counts.any()
