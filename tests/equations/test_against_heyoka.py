"""First derivatives against the variational equations of an independent solver, heyoka."""

from __future__ import annotations

import numpy as np
import pytest
from tests.equations.equation_texts import DUFFING, LINEAR, LORENZ, made

from tinemark.equations.return_map import FloatReturnMap

hy = pytest.importorskip("heyoka")


def duffing(x, v, p):
    return [(x, v), (v, -0.3 * v + x - x**3 + 0.27 * hy.cos(p * hy.time))]


def linear(x, v, p):
    return [(x, v), (v, -p * x - 0.2 * v + hy.cos(hy.time))]


def lorenz(x, y, z, p):
    return [(x, 10.0 * (y - x)), (y, x * (p - z) - y), (z, x * y - 8.0 * z / 3.0)]


def peers_variations(right, start, value, time):
    """State, derivatives in states and in the parameter, after a time."""
    n = len(start)
    variables = hy.make_vars(*("x", "y", "z")[:n])
    rates = right(*variables, hy.par[0])
    system = hy.var_ode_sys(rates, hy.var_args.vars | hy.var_args.params, order=1)
    integrator = hy.taylor_adaptive(system, list(start), pars=[value], tol=1e-16)
    integrator.propagate_until(time)
    first = np.zeros((n, n + 1))
    for place in range(n, len(integrator.state)):
        component, *exponents = integrator.get_mindex(place)
        first[component, exponents.index(1)] = integrator.state[place]
    return integrator.state[:n].copy(), first[:, :n], first[:, n]


@pytest.mark.parametrize(
    ("system", "right", "start"),
    [
        (made(LINEAR), linear, [1.0, 0.5]),
        (made(DUFFING), duffing, [0.4465, 0.3903]),
        (made(LORENZ), lorenz, [-2.39827252, 1.68995624, None]),
    ],
    ids=["linear", "driven", "flow"],
)
def test_derivatives_agree_to_ten_digits(system, right, start):
    r = float(system.parameter(system.diagram_parameter).value)
    if start[-1] is None:
        start = [*start[:2], r - 1 - 0.01 * start[0] ** 2]
    map_ = FloatReturnMap(system, system.diagram_parameter, 1e-14)
    found = map_.linearised(np.array([start]), r)
    image, jacobian, slope = peers_variations(right, start, r, float(found.times[0]))
    if not map_.is_driven:
        # From a fixed time to the section, where z - r + 1 + 0.01 x**2 stays zero (Parker and Chua 1989).
        x, y, z = image
        rate = np.array([10 * (y - x), x * (r - z) - y, x * y - 8 * z / 3])
        normal = np.array([0.02 * x, 0.0, 1.0])
        across = normal @ rate
        slope = slope - rate * (normal @ slope - 1.0) / across
        jacobian = jacobian - np.outer(rate, normal @ jacobian) / across
    elif right is duffing:
        x, v = image
        end = 2 * np.pi / r
        rate = np.array([v, -0.3 * v + x - x**3 + 0.27 * np.cos(r * end)])
        slope = slope - rate * 2 * np.pi / r**2
    size = np.abs(jacobian).max()
    assert found.image[0] == pytest.approx(image, abs=1e-10 * np.abs(image).max())
    assert found.jacobian[0] == pytest.approx(jacobian, abs=1e-10 * size)
    assert found.slope[0] == pytest.approx(slope, abs=1e-10 * np.abs(slope).max())
