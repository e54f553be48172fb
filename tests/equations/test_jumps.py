"""Rates that jump or kink: samples and derivatives against pieces integrated one after another."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.integrate import solve_ivp
from tests.equations.equation_texts import LINEAR, made

from tinemark.equations.differences import slopes
from tinemark.equations.return_map import FloatReturnMap

# A smooth cubic keeps it from being linear between its switchings.
JUMPING = made(LINEAR, **{"-k*x": "-0.3*x**3 - (k if x > 0 else -k)", "cos(t)": "2.5*cos(t)"})


def piece_by_piece(start, k):
    """Integrate up to each switching, and go on from there with the other piece."""
    t, y = 0.0, np.array(start, dtype=float)
    side = 1.0 if y[0] > 0 else -1.0
    end = 2 * np.pi

    def switching(_t, state):
        return state[0]

    switching.terminal = True
    while t < end:

        def rate(at, state, s=side):
            return [state[1], -0.3 * state[0] ** 3 - s * k - 0.2 * state[1] + 2.5 * np.cos(at)]

        # Off the switching first, or it would be met again where it has just been left.
        first = min(1e-3, end - t)
        off = solve_ivp(rate, (t, t + first), y, "DOP853", rtol=1e-13, atol=1e-13)
        t, y = off.t[-1], off.y[:, -1]
        found = solve_ivp(rate, (t, end), y, "DOP853", rtol=1e-13, atol=1e-13, events=switching)
        t, y = found.t[-1], found.y[:, -1]
        side = -side
    return y


POINTS = np.array([[1.0, 0.5], [-0.7, 1.2]])


def test_samples_are_as_accurate_across_jumps():
    map_ = FloatReturnMap(JUMPING, "k", 1e-11)
    found = map_.step(POINTS.T, 2.0).T
    assert map_.last is not None
    assert map_.last.refused.max() > 10  # the steps shrank down to the switchings
    for point, image in zip(POINTS, found, strict=True):
        assert image == pytest.approx(piece_by_piece(point, 2.0), abs=1e-8)


def test_derivatives_cross_jumps():
    map_ = FloatReturnMap(JUMPING, "k", 1e-12)
    assert map_.has_jumps
    found = map_.linearised(POINTS, 2.0)

    def slow(points, at):
        return np.array([piece_by_piece(point, k) for point, k in zip(points, at, strict=True)])

    jacobian, slope = slopes(slow, POINTS[:1], np.array([2.0]), np.array([3.0, 3.0]), 3.0)
    assert found.jacobian[0] == pytest.approx(jacobian[0], abs=1e-5)
    assert found.slope[0] == pytest.approx(slope[0], abs=1e-5)
    bent, bent_slope = map_.curvature(POINTS, 2.0, np.array([[1.0, 0.3], [0.2, 1.0]]))
    assert bent.shape == (2, 2, 2)
    assert np.isfinite(bent).all()
    assert np.isfinite(bent_slope).all()


def test_differences_are_of_fourth_order():
    def quartic(points, at):
        return np.stack([points[:, 0] ** 4 * at, points[:, 1] * at**3], axis=1)

    point = np.array([[1.5, -2.0]])
    in_states, in_parameter = slopes(quartic, point, np.array([0.7]), np.array([100.0, 100.0]), 100.0)
    assert in_states[0] == pytest.approx(np.array([[4 * 1.5**3 * 0.7, 0], [0, 0.7**3]]), abs=1e-9)
    assert in_parameter[0] == pytest.approx(np.array([1.5**4, -2 * 3 * 0.49]), abs=1e-9)
