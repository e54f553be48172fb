"""First onsets of the library at its defaults, from its own formulas, against exact values.

Values: check_values section 5 and 6 (closed forms derived there; the sources of the maps are from
memory). The solver here is mpmath's, on the condition itself: steady state and multiplier -1.
"""

from __future__ import annotations

from collections.abc import Callable
from fractions import Fraction
from typing import Any

import mpmath
import pytest
from random_formulas import precise

from tinemark.systems.derivatives import derivative, jacobian
from tinemark.systems.library import DEMO, builtin_names, builtin_system
from tinemark.systems.system import System

# System -> (state at the onset, parameter at the onset), exact.
FIRST_FLIPS: dict[str, Callable[[], tuple[Any, Any]]] = {
    "logistic": lambda: (mpmath.mpf(2) / 3, 3),
    "cubic": lambda: (mpmath.sqrt(mpmath.mpf(1) / 2), 2),
    "cubic_hump": lambda: (mpmath.mpf(3) / 4, mpmath.mpf(16) / 3),
    "ricker": lambda: (1, 2),
    "quadratic": lambda: (mpmath.mpf(2) / 3, mpmath.mpf(3) / 4),
    "quartic": lambda: (mpmath.mpf(4) / 5, mpmath.mpf(125) / 256),
    "hassell": lambda: (mpmath.mpf(1) / 2, mpmath.mpf("11.390625")),
    "sine": lambda: _sine(),
    "gaussian": lambda: _gaussian(),
    "restitution": lambda: (260, 260 + 40 * mpmath.log(10)),
    "peak_current": lambda: (mpmath.mpf("3.5"), 10),
    DEMO: lambda: _hatchery(mpmath.mpf(2)),
}


def _sine() -> tuple[Any, Any]:
    u = mpmath.findroot(lambda u: u + mpmath.tan(u), mpmath.mpf("2.0287"))
    return u / mpmath.pi, u / (mpmath.pi * mpmath.sin(u))


def _gaussian() -> tuple[Any, Any]:
    alpha = mpmath.mpf("6.2")
    x = mpmath.sqrt(-mpmath.lambertw(-1 / (2 * alpha)).real / (2 * alpha))
    return x, x - mpmath.exp(-alpha * x**2)


def _hatchery(ricker: Any) -> tuple[Any, Any]:
    """The demo in Ricker's terms: r = 0.02*feed + ln 0.9, stock = 40*(r/(0.02*feed))*x."""
    feed = (ricker - mpmath.log(mpmath.mpf("0.9"))) / mpmath.mpf("0.02")
    return 40 * ricker / (mpmath.mpf("0.02") * feed), feed


def values_at(system: System, states: list[Any], parameter: Any) -> dict[str, Any]:
    values = {
        p.name: mpmath.mpf(p.value.fraction.numerator) / p.value.fraction.denominator
        for p in system.parameters
    }
    values[system.diagram_parameter] = mpmath.mpf(parameter)
    values.update(zip(system.state_names, states, strict=True))
    return values


@pytest.mark.parametrize("name", FIRST_FLIPS)
def test_the_multiplier_is_minus_one_at_the_exact_first_onset(name: str) -> None:
    with mpmath.workdps(50):
        system = builtin_system(name)
        x, r = FIRST_FLIPS[name]()
        values = values_at(system, [mpmath.mpf(x)], r)
        formula = system.expressions[0]
        state = system.state_names[0]
        assert abs(precise(formula, values) - x) < mpmath.mpf(10) ** -44
        assert abs(precise(derivative(formula, state), values) + 1) < mpmath.mpf(10) ** -44
        low, high = system.parameter(system.diagram_parameter).range or (Fraction(0), Fraction(0))
        assert float(low) < r < float(high)


@pytest.mark.parametrize("name", FIRST_FLIPS)
def test_the_multiplier_crosses_minus_one_there(name: str) -> None:
    """d(multiplier)/d(parameter) along the steady state, by the implicit function theorem."""
    with mpmath.workdps(30):
        system = builtin_system(name)
        x, r = FIRST_FLIPS[name]()
        values = values_at(system, [mpmath.mpf(x)], r)
        formula, state, swept = system.expressions[0], system.state_names[0], system.diagram_parameter
        drift = precise(derivative(formula, swept), values) / 2  # 1 - f_x = 2 at a flip
        speed = precise(derivative(formula, state, state), values) * drift + precise(
            derivative(formula, state, swept), values
        )
        assert abs(speed * r) > mpmath.mpf("0.01")


def test_henon_flips_where_the_trace_says() -> None:
    # a = 3*(1 - b)**2/4 = 0.3675, steady state x = 2/(3*(1 - b)) * ... from multiplier -1: 2*a*x = 1 - b.
    system = builtin_system("henon")
    a, b = Fraction(147, 400), Fraction(3, 10)
    x = (1 - b) / (2 * a)
    with mpmath.workdps(40):
        states = [
            mpmath.mpf(x.numerator) / x.denominator,
            mpmath.mpf((b * x).numerator) / (b * x).denominator,
        ]
        values = values_at(system, states, mpmath.mpf(a.numerator) / a.denominator)
        for formula, state in zip(system.expressions, states, strict=True):
            assert abs(precise(formula, values) - state) < mpmath.mpf(10) ** -38
        matrix = mpmath.matrix([[precise(entry, values) for entry in row] for row in jacobian(system)])
        assert abs(mpmath.det(matrix + mpmath.eye(2))) < mpmath.mpf(10) ** -38
        assert abs(mpmath.det(matrix) + mpmath.mpf("0.3")) < mpmath.mpf(10) ** -38


def test_delayed_logistic_turns_at_two() -> None:
    system = builtin_system("delayed_logistic")
    with mpmath.workdps(40):
        values = values_at(system, [mpmath.mpf("0.5"), mpmath.mpf("0.5")], 2)
        matrix = mpmath.matrix([[precise(entry, values) for entry in row] for row in jacobian(system)])
        # Multipliers exp(+-i*pi/3): trace 1, determinant 1.
        assert matrix[0, 0] + matrix[1, 1] == 1
        assert mpmath.det(matrix) == 1


def test_two_patches_in_step_flip_at_three_and_out_of_step_later() -> None:
    system = builtin_system("two_patch")
    with mpmath.workdps(40):
        for r in (mpmath.mpf(3), 2 + 1 / (1 - 2 * mpmath.mpf("0.1"))):
            x = 1 - 1 / r
            values = values_at(system, [x, x], r)
            matrix = mpmath.matrix([[precise(entry, values) for entry in row] for row in jacobian(system)])
            assert abs(mpmath.det(matrix + mpmath.eye(2))) < mpmath.mpf(10) ** -38


def test_the_demo_follows_ricker_to_its_second_onset() -> None:
    # Ricker's second onset: check_values section 5, 2.526467725853819217688809805 (recomputed there).
    system = builtin_system(DEMO)
    with mpmath.workdps(40):
        _, feed = _hatchery(mpmath.mpf("2.526467725853819217688809805"))
        formula, state = system.expressions[0], "stock"
        slope = derivative(formula, state)

        def conditions(x: Any, y: Any, p: Any) -> list[Any]:
            first, second = values_at(system, [x], p), values_at(system, [y], p)
            return [
                precise(formula, first) - y,
                precise(formula, second) - x,
                precise(slope, first) * precise(slope, second) + 1,
            ]

        root = mpmath.findroot(conditions, (15, 75, 131.6), tol=1e-30)
        assert abs(root[2] - feed) < mpmath.mpf(10) ** -23


def test_tent_has_slope_mu_on_both_sides() -> None:
    system = builtin_system("tent")
    slope = derivative(system.expressions[0], "x")
    for x, sign in (("0.3", 1), ("0.7", -1)):
        values = values_at(system, [mpmath.mpf(x)], mpmath.mpf("1.6"))
        assert precise(slope, values) == sign * mpmath.mpf("1.6")


def test_peak_current_slopes_are_those_of_the_circuit() -> None:
    """Multiplier -(m2 - mc)/(m1 + mc) while it regulates, 1 where the clock comes first or i is too high."""
    system = builtin_system("peak_current")
    slope = derivative(system.expressions[0], "i")
    for mc in ("0", "1.5", "4"):
        ramped = system.with_value("mc", mc)
        for current, expected in (
            ("3.6", -(12 - mpmath.mpf(mc)) / (10 + mpmath.mpf(mc))),
            ("2.4", 1),
            ("4.5", 1),
        ):
            values = values_at(ramped, [mpmath.mpf(current)], 12)
            assert abs(precise(slope, values) - expected) < mpmath.mpf(10) ** -14


def test_peak_current_stays_at_zero_once_the_diode_blocks() -> None:
    # From 0.5 A to the reference 1 A in 0.05 ms, then down 25 A/ms for 0.05 ms: past zero.
    system = builtin_system("peak_current").with_value("I_ref", "1")
    values = values_at(system, [mpmath.mpf("0.5")], 25)
    assert precise(system.expressions[0], values) == 0
    assert precise(derivative(system.expressions[0], "i"), values) == 0


def test_restitution_skips_a_beat_when_the_rest_is_too_short() -> None:
    """DI = T - x while it exceeds d, else 2*T - x."""
    system = builtin_system("restitution")
    for x, rest in (("200", 150), ("324", 26), ("326", 374)):
        values = values_at(system, [mpmath.mpf(x)], 350)
        expected = 300 - 400 * mpmath.exp(-mpmath.mpf(rest) / 40)
        assert abs(precise(system.expressions[0], values) - expected) < mpmath.mpf(10) ** -10


def test_every_smooth_built_in_of_one_state_has_its_exact_onset_here() -> None:
    for name in builtin_names():
        if len(builtin_system(name).states) == 1 and name != "tent":
            assert name in FIRST_FLIPS
