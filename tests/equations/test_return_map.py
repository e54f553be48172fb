"""The return map in doubles against exact solutions, against SciPy and against differences of itself."""

from __future__ import annotations

import ast
import os
import subprocess
import sys

import numpy as np
import pytest
from scipy.integrate import solve_ivp
from scipy.linalg import expm
from tests.equations.equation_texts import DUFFING, LINEAR, LORENZ, made

from tinemark.equations.return_map import FloatReturnMap
from tinemark.equations.tableau import Method, tableau


def value(system):
    return float(system.parameter(system.diagram_parameter).value)


def settled(map_, system, steps=5):
    states = np.array([[float(state.start)] for state in system.states])
    for _ in range(steps):
        states = map_.step(states, value(system))
    return states


@pytest.mark.parametrize("method", list(Method))
def test_a_pair_of_formulas_is_of_its_order(method):
    """Order conditions for the tall trees: weights times powers of the nodes."""
    table = tableau(method)
    nodes = np.array(table.nodes)
    for power in range(table.order):
        total = sum(weight * nodes[stage] ** power for stage, weight in table.weights)
        assert total == pytest.approx(1 / (power + 1), abs=1e-14)
    for row, node in zip(table.stages, table.nodes, strict=True):
        assert sum(weight for _, weight in row) == pytest.approx(node, abs=1e-13)


def test_linear_oscillator_is_exact():
    # Two states and the drive's two as one linear system: one matrix exponential over the period.
    system = made(LINEAR)
    matrix = np.array([[0, 1, 0, 0], [-2, -0.2, 1, 0], [0, 0, 0, -1], [0, 0, 1, 0.0]])
    over = expm(2 * np.pi * matrix)
    map_ = FloatReturnMap(system, "k", 1e-12)
    found = map_.linearised(np.array([[1.0, 0.5], [-0.3, 2.0]]), 2.0)
    for point, image, jacobian in zip([[1.0, 0.5], [-0.3, 2.0]], found.image, found.jacobian, strict=True):
        assert image == pytest.approx((over @ [*point, 1.0, 0.0])[:2], abs=2e-11)
        assert jacobian == pytest.approx(over[:2, :2], abs=2e-11)
    assert found.times == pytest.approx(2 * np.pi, abs=0)


def test_driven_map_agrees_with_a_slow_integration():
    system = made(DUFFING)
    map_ = FloatReturnMap(system, "w", 1e-12)
    lanes = np.linspace(1.1, 1.3, 70)  # more than one block of lanes
    states = np.vstack([np.linspace(-1, 1, 70), np.linspace(-0.9, 0.9, 70)])
    found = map_.step(states, lanes)
    assert map_.reasons() == ("",) * 70
    for place in (0, 33, 69):

        def rate(t, y, w=lanes[place]):
            return [y[1], -0.3 * y[1] + y[0] - y[0] ** 3 + 0.27 * np.cos(w * t)]

        end = 2 * np.pi / lanes[place]
        slow = solve_ivp(rate, (0, end), states[:, place], "DOP853", rtol=1e-13, atol=1e-13).y[:, -1]
        assert found[:, place] == pytest.approx(slow, abs=1e-10)


def test_section_map_agrees_with_a_slow_integration():
    system = made(LORENZ)
    map_ = FloatReturnMap(system, "r", 1e-12)
    start = settled(map_, system)

    def rate(_t, y):
        return [10 * (y[1] - y[0]), y[0] * (28 - y[2]) - y[1], y[0] * y[1] - 8 * y[2] / 3]

    def section(_t, y):
        return y[2] - 27 + 0.01 * y[0] ** 2

    section.direction = -1.0
    after = solve_ivp(rate, (0, 0.2), start[:, 0], "DOP853", rtol=1e-13, atol=1e-13).y[:, -1]
    slow = solve_ivp(rate, (0, 9), after, "DOP853", rtol=1e-13, atol=1e-13, events=section)
    found = map_.linearised(start.T, 28.0)
    assert abs(section(0, start[:, 0])) < 1e-12  # it stood on the section, and that was no passage
    assert found.image[0] == pytest.approx(slow.y_events[0][0], abs=1e-9)
    assert found.times[0] == pytest.approx(0.2 + slow.t_events[0][0], abs=1e-10)
    assert abs(section(0, found.image[0])) < 1e-12


@pytest.mark.parametrize("text", [DUFFING, LORENZ], ids=["driven, period swept", "section moves and bends"])
def test_derivatives_agree_with_differences(text):
    system = made(text)
    r = value(system)
    map_ = FloatReturnMap(system, system.diagram_parameter, 1e-13)
    n = map_.size
    point = settled(map_, system).T
    vector = np.array([[0.3, -0.7, 0.2]])[:, :n]

    def slope(function, h=1e-4):
        wide = function(2 * h) - function(-2 * h)
        return (8 * (function(h) - function(-h)) - wide) / (12 * h)

    found = map_.linearised(point, r)
    units = np.eye(n)
    by_state = np.stack([slope(lambda h, u=u: map_.step((point + h * u).T, r)[:, 0]) for u in units], axis=1)
    by_parameter = slope(lambda h: map_.step(point.T, r + h)[:, 0])
    size = np.abs(found.jacobian).max()
    assert found.jacobian[0] == pytest.approx(by_state, abs=3e-9 * size)
    assert found.slope[0] == pytest.approx(by_parameter, abs=3e-9 * size)

    bent, bent_slope = map_.curvature(point, r, vector)

    def moved(states, at):
        return map_.linearised(states, at).jacobian[0] @ vector[0]

    by_state = np.stack([slope(lambda h, u=u: moved(point + h * u, r)) for u in units], axis=1)
    size = np.abs(bent).max()
    assert bent[0] == pytest.approx(by_state, abs=1e-8 * size)
    assert bent_slope[0] == pytest.approx(slope(lambda h: moved(point, r + h)), abs=1e-8 * size)


def test_flow_direction_has_multiplier_zero():
    system = made(LORENZ)
    map_ = FloatReturnMap(system, "r", 1e-13)
    start = settled(map_, system)
    found = map_.linearised(start.T, 28.0)
    x, y, z = start[:, 0]
    along = np.array([10 * (y - x), x * (28 - z) - y, x * y - 8 * z / 3])
    assert (
        np.abs(found.jacobian[0] @ along).max() < 1e-9 * np.abs(found.jacobian[0]).max() * np.abs(along).max()
    )
    normal = np.array([0.02 * found.image[0][0], 0, 1])
    assert np.abs(normal @ found.jacobian[0]).max() < 1e-12  # nothing leaves the section


def test_every_failure_has_its_reason():
    system = made(LORENZ)
    map_ = FloatReturnMap(system, "r", 1e-13)
    start = settled(map_, system)[:, 0]
    found = map_.step(np.array([start, [1e18, 1e18, 1e18]]).T, 28.0)
    assert np.isfinite(found[:, 0]).all()
    assert np.isnan(found[:, 1]).all()
    assert map_.reasons()[0] == ""
    assert "leaves every bound" in map_.reasons()[1]
    # On the way to the resting point, which this section does not meet: it comes to rest.
    map_.step(np.array([[0.1], [0.1], [3.0]]), 0.5)
    assert "comes to rest" in map_.reasons()[0]
    short = FloatReturnMap(system, "r", 1e-13, limit=5)
    short.step(start[:, None], 28.0)
    assert "not crossed within 5 integration steps" in short.reasons()[0]


SLOWLY = """
import numpy as np, sys
sys.path.insert(0, sys.argv[1])
from tests.equations.equation_texts import LORENZ, made
from tinemark.equations.return_map import FloatReturnMap
flow = FloatReturnMap(made(LORENZ), "r", 1e-6)
print(repr(flow.step(np.array([[-2.4], [1.7], [27.0]]), 28.0).tolist()))
"""


def test_compiled_and_plain_kernels_agree(root, tmp_path):
    surroundings = {**os.environ, "NUMBA_DISABLE_JIT": "1", "TINEMARK_CACHE_DIR": str(tmp_path)}
    slow = subprocess.run(
        [sys.executable, "-c", SLOWLY, str(root)],
        env=surroundings,
        capture_output=True,
        text=True,
        check=True,
    )
    expected = np.array(ast.literal_eval(slow.stdout))
    found = FloatReturnMap(made(LORENZ), "r", 1e-6).step(np.array([[-2.4], [1.7], [27.0]]), 28.0)
    # Steps differ by rounding, the truncation of 1e-6 a step with them.
    assert found == pytest.approx(expected, abs=1e-9)
