"""Switched linear systems: recognised, carried exactly, and differentiated across switchings."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.optimize import brentq

from tinemark.equations.returns import return_map
from tinemark.equations.switched import switched_motion
from tinemark.equations.switched_map import SwitchedReturnMap
from tinemark.systems.system import System
from tinemark.systems.system_file import read_system_text

BUCK = """\
title = "Buck converter under voltage control"
kind = "driven"
[states.v]
start = "12"
range = ["11.5", "12.5"]
[states.i]
start = "0.5"
range = ["0.3", "0.8"]
[parameters.E]
value = "24"
range = ["22", "33"]
[parameters.T]
value = "0.4"
[rate]
v = "(i - v/22)/0.047"
i = "((E if 8.4*(v - 11.3) < 3.8 + 4.4*(t/T - floor(t/T)) else 0) - v)/20"
[sample]
every = "T"
[diagram]
parameter = "E"
"""


def driven(rate: str, extra: str = "") -> System:
    parameters = f'[parameters.a]\nvalue = "1"\nrange = ["0.5", "2"]\n{extra}'
    states = '[states.x]\nstart = "0"\nrange = ["-2", "2"]\n'
    rest = f'[rate]\nx = "{rate}"\n[sample]\nevery = "2"\n'
    return read_system_text(f'title = "o"\nkind = "driven"\n{states}{parameters}{rest}')


B = '[parameters.b]\nvalue = "0.5"\n'


def exact_map(system: System, steps: int = 16) -> SwitchedReturnMap:
    parameter = system.diagram_parameter
    motion = switched_motion(system, parameter)
    assert motion is not None
    return SwitchedReturnMap(system, parameter, motion, steps)


@pytest.mark.parametrize(
    ("rate", "is_switched"),
    [
        ("-x + (a if t - 2*floor(t/2) < 1 else -a)", True),
        ("-abs(x) + a", True),
        ("min(a, 1) - max(x, -1)", True),
        ("-x + a", False),  # nothing switches
        ("-x + a*cos(pi*t) + abs(x)", False),  # time enters by itself
        ("-x*x + (a if x > 0 else -a)", False),  # not linear in a piece
        ("a*x*abs(x)", False),
    ],
)
def test_only_switched_linear_systems_are_recognised(rate: str, is_switched: bool) -> None:
    assert (switched_motion(driven(rate), "a") is not None) == is_switched
    assert isinstance(return_map(driven(rate), "a"), SwitchedReturnMap) == is_switched


def test_a_switch_by_the_state_in_closed_form() -> None:
    """x' = a below x = 1 and b above: passage after (1 - x)/a, so x(2) = 1 + b (2 - (1 - x)/a)."""
    strobed = exact_map(driven("a if x < 1 else b", B))
    found = strobed.linearised(np.array([[0.25]]), 1.5)
    assert found.image[0, 0] == pytest.approx(1 + 0.5 * (2 - 0.75 / 1.5), abs=1e-15)
    assert found.jacobian[0, 0, 0] == pytest.approx(0.5 / 1.5, abs=1e-14)
    assert found.slope[0, 0] == pytest.approx(0.5 * 0.75 / 1.5**2, abs=1e-14)


def test_derivatives_across_switchings_are_those_of_differences() -> None:
    strobed = exact_map(read_system_text(BUCK))
    point, value, step = np.array([[12.05, 0.52]]), 26.0, 1e-6
    found = strobed.linearised(point, value)
    for j in range(2):
        shift = np.zeros(2)
        shift[j] = step
        ends = [strobed.step((point + sign * shift).T, value)[:, 0] for sign in (1, -1)]
        assert found.jacobian[0, :, j] == pytest.approx((ends[0] - ends[1]) / (2 * step), abs=1e-8)
    ends = [strobed.step(point.T, value + sign * step)[:, 0] for sign in (1, -1)]
    assert found.slope[0] == pytest.approx((ends[0] - ends[1]) / (2 * step), abs=1e-8)


def test_the_swept_period_moves_the_strobe() -> None:
    system = read_system_text(BUCK.replace('parameter = "E"', 'parameter = "T"'))
    strobed = exact_map(system)
    point, step = np.array([[12.05, 0.52]]), 1e-7
    ends = [strobed.step(point.T, 0.4 + sign * step)[:, 0] for sign in (1, -1)]
    assert strobed.linearised(point, 0.4).slope[0] == pytest.approx(
        (ends[0] - ends[1]) / (2 * step), rel=1e-6
    )


def multiplier_test(strobed: SwitchedReturnMap, points: np.ndarray, value: float) -> float:
    """1 + trace + determinant of the cycle's derivative, zero at a flip; `points` is put on the cycle."""
    count = len(points)
    for _ in range(30):
        found = strobed.linearised(points, value)
        matrix = np.zeros((2 * count, 2 * count))
        for k in range(count):
            matrix[2 * k : 2 * k + 2, 2 * k : 2 * k + 2] = found.jacobian[k]
            after = (k + 1) % count
            matrix[2 * k : 2 * k + 2, 2 * after : 2 * after + 2] -= np.eye(2)
        away = found.image - np.roll(points, -1, axis=0)
        change = np.linalg.solve(matrix, -away.ravel()).reshape(count, 2)
        points += change
        if np.abs(change).max() < 1e-14:
            break
    whole = np.eye(2)
    for jacobian in strobed.linearised(points, value).jacobian:
        whole = jacobian @ whole
    return float(1 + np.trace(whole) + np.linalg.det(whole))


@pytest.mark.parametrize(
    ("period", "low", "high", "flip"),
    [(1, 24.3, 24.7, 24.516572828562), (2, 31.0, 31.2, 31.117902006771), (4, 32.07, 32.1, 32.087626697122)],
)
def test_the_flips_of_the_buck_converter(period: int, low: float, high: float, flip: float) -> None:
    """Recomputed by exact flow and saltation to 11 digits (check values); near Fossas & Olivar 1996."""
    strobed = exact_map(read_system_text(BUCK))
    states = np.array([[12.0], [0.5]])
    for _ in range(4000):
        states = strobed.step(states, low)
    points = np.empty((period, 2))
    for k in range(period):
        points[k] = states[:, 0]
        states = strobed.step(states, low)
    found = brentq(lambda value: multiplier_test(strobed, points, value), low, high, xtol=1e-13)
    assert found == pytest.approx(flip, abs=2e-11)


def test_another_number_of_steps_changes_only_rounding() -> None:
    system = read_system_text(BUCK)
    point = np.array([[12.05], [0.52]])
    some, other = (exact_map(system, steps).step(point, 30.0) for steps in (16, 29))
    assert some == pytest.approx(other, abs=1e-13)


def test_sliding_is_said_and_does_not_hang() -> None:
    """Both sides push towards x = 1: the orbit would slide along the surface."""
    strobed = exact_map(driven("a if x < 1 else b", B.replace("0.5", "-1")))
    assert np.isnan(strobed.step(np.array([[0.5]]), 1.0)).all()
    assert "slides" in strobed.reasons()[0]
