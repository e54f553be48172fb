"""What an accuracy promises is what is measured, and tightening it moves nothing further than stated."""

from __future__ import annotations

import math

import numpy as np
import pytest
from tests.equations.equation_texts import DUFFING, LORENZ, made

from tinemark.equations.accuracy import Accuracy, measured_accuracy, tuned_tolerance
from tinemark.equations.return_map import FloatReturnMap
from tinemark.equations.tableau import Method

SYSTEMS = {"driven": made(DUFFING), "flow": made(LORENZ)}


def settled(system, tolerance=1e-12):
    """Orbits across the sweep, other ones than those the accuracy was measured on."""
    parameter = system.parameter(system.diagram_parameter)
    low, high = (float(end.fraction) for end in parameter.range)
    swept = low + (high - low) * (np.arange(17) + 0.37) / 17.5
    map_ = FloatReturnMap(system, parameter.name, tolerance)
    states = np.repeat(np.array([[float(state.start)] for state in system.states]), 17, axis=1)
    for _ in range(25):
        states = map_.step(states, swept)
    return map_, states, swept


@pytest.mark.parametrize("kind", SYSTEMS)
@pytest.mark.parametrize("accuracy", list(Accuracy))
def test_a_level_keeps_its_promise_on_other_orbits(kind, accuracy):
    system = SYSTEMS[kind]
    level = measured_accuracy(system, system.diagram_parameter, accuracy)
    assert level.holds
    assert level.samples > 50
    assert accuracy.value in level.words
    assert "tight run" in level.words
    map_, states, swept = settled(system)
    scales = map_.scales(float(swept[0]))[:, None]
    tight = FloatReturnMap(system, map_.parameter, 2e-14).step(states, swept)
    errors = []
    for share in (1.0, 0.5):
        own = FloatReturnMap(system, map_.parameter, level.tolerance * share).step(states, swept)
        errors.append(np.abs(own - tight) / scales)
    # Half the tolerance moves nothing beyond what is stated, and comes nearer on the whole.
    assert errors[0].max() <= 3 * accuracy.error
    assert errors[1].max() <= 3 * accuracy.error
    if accuracy is not Accuracy.REFERENCE:
        assert np.median(errors[1]) < np.median(errors[0])


def test_two_methods_agree_within_their_errors():
    """The second pair of formulas shares no coefficient with the first."""
    map_, states, swept = settled(SYSTEMS["driven"])
    five = FloatReturnMap(SYSTEMS["driven"], map_.parameter, 1e-13, Method.FIVE).step(states, swept)
    assert five == pytest.approx(map_.step(states, swept), abs=1e-10)


def test_a_cycle_converges_with_the_tolerance():
    """A cycle found at three tolerances moves less and less."""
    system = SYSTEMS["driven"]
    found = []
    for tolerance in (1e-8, 1e-10, 1e-12):
        map_ = FloatReturnMap(system, "w", tolerance)
        point = np.array([[0.9, 0.3]])
        for _ in range(60):
            point = map_.step(point.T, 1.28).T
        for _ in range(6):
            here = map_.linearised(point, 1.28)
            point = point - np.linalg.solve(here.jacobian[0] - np.eye(2), (here.image - point)[0])
        found.append(point[0])
    assert np.abs(found[0] - found[2]).max() < 1e-7
    assert np.abs(found[1] - found[2]).max() < 1e-9
    assert np.abs(found[1] - found[2]).max() < np.abs(found[0] - found[2]).max()


def test_tuning_stays_below_the_goal_and_not_far_below():
    tolerance, error = tuned_tolerance(lambda t: 40.0 * t, 1e-6, 1e-12, 1e-14)
    assert 2e-7 <= error <= 1e-6
    assert error == pytest.approx(40.0 * tolerance)
    # Out of reach: the smallest tolerance, and its error as it is.
    assert tuned_tolerance(lambda t: 1e-3 + t, 1e-6, 1e-8, 1e-14) == (1e-14, pytest.approx(1e-3))
    assert math.isnan(tuned_tolerance(lambda _t: math.nan, 1e-6, 1e-8, 1e-14)[1])


def test_a_system_without_samples_says_so():
    # Below r = 1 all orbits come to rest at zero, which the section does not meet.
    system = made(LORENZ, **{'"28"': '"0.4"', '["25", "30"]': '["0.2", "0.5"]'})
    level = measured_accuracy(system, "r", Accuracy.PICTURE)
    assert not level.holds
    assert "no orbit has a sample" in level.words
