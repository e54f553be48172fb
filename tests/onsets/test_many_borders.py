"""Border collisions of maps of several states, against normal forms whose outcomes can be written down.

Straight pieces x' = t x + y + r, y' = -d x with (t, d) different on the two sides of x = 0 have their fixed
point on the border at r = 0 exactly (Nusse & Yorke 1992; di Bernardo, Feigin, Hogan & Homer 1999, both from
memory).
"""

from __future__ import annotations

from dataclasses import replace
from fractions import Fraction

import pytest
from running import finish
from test_many_exact import click, own_system

from tinemark.onsets.decimals import fixed_text
from tinemark.onsets.engine import survey
from tinemark.onsets.many_verification import verify_onset_many
from tinemark.onsets.proofs import NotProved
from tinemark.onsets.results import Kind, Onset, Status, SurveyRequest
from tinemark.systems.errors import SwitchingTouched
from tinemark.systems.system import System


def pieces(left: tuple[str, str], right: tuple[str, str]) -> System:
    (a, b), (c, d) = left, right
    return own_system(
        {"x": f"y + r + (({a})*x if x < 0 else ({c})*x)", "y": f"-({b})*x if x < 0 else -({d})*x"}, "-2", "2"
    )


LEFT = ("0.2", "0.3")  # stable: multipliers 0.1 ± 0.54 i
CASES = {
    # 1 - t + d = 1.1 on the left. Right of the border:
    "persistence": (("0.4", "0.2"), 1, 1, "persistence"),
    # t = -1.4 < -(1 + d): unstable through -1; trace t t' - d - d' = -0.88, so the 2-cycle is stable.
    "doubling": (("-1.4", "0.3"), 1, 2, "doubling"),
    # 1 - t + d = -0.4: of the other sign, a pair vanishes.
    "fold": (("1.7", "0.3"), 0, 1, "vanish together"),
    # t = -1.9 < -(1 + d), and the 2-cycle has trace -1.18 beyond 1 + d d' = 1.15.
    "chaos": (("-1.9", "0.5"), 1, 0, "straight to chaos"),
    # d > 1: a pair of multipliers outside, no real one.
    "torus": (("-0.5", "1.1"), 1, 0, "wandering without a period"),
    "three": (("-2.0", "0.9"), 1, 3, "period 3 follows at once"),
}


@pytest.mark.parametrize(("case", "side"), [*zip(CASES, ("-0.01", "0.01") * 3, strict=True)])
def test_what_follows(case: str, side: str) -> None:
    right, before, after, words = CASES[case]
    (onset,) = click(pieces(LEFT, right), side, "0.4", observed="0", height="1")
    assert (onset.kind, onset.status) == (Kind.BORDER_COLLISION, Status.PROVED)
    assert (onset.period_before, onset.period_after) == (before, after)
    assert Fraction(onset.lower) <= 0 <= Fraction(onset.upper)
    assert "touches the surface x = 0; coming from below" in onset.consequence
    assert words in onset.consequence


@pytest.mark.parametrize("case", [case for case, (_, before, _, _) in CASES.items() if before])
def test_an_orbit_by_hand_does_what_is_said(case: str) -> None:
    """Plain iteration at r = 0.01: a return within 1e-12 after the period said, or none within 60 steps."""
    (t, d), _, after, _ = CASES[case]
    numbers = {True: tuple(map(float, LEFT)), False: (float(t), float(d))}
    x, y, orbit = 0.001, 0.0, []
    for _ in range(20_060):
        a, b = numbers[x < 0]
        x, y = a * x + y + 0.01, -b * x
        orbit.append(x)
    returns = [steps for steps in range(1, 60) if abs(orbit[-1 - steps] - orbit[-1]) < 1e-12]
    assert returns[:1] == ([after] if after else [])
    assert abs(x) < 1


def test_the_doubled_cycle_is_really_there_and_stable() -> None:
    """The 2-cycle at r = 0.1 from x_L (1 + d) = s x_R + r and x_R (1 + e) = t x_L + r: on either side of the
    border, its multipliers inside the unit circle."""
    t, d, s, e, r = (Fraction(text) for text in ("0.2", "0.3", "-1.4", "0.3", "0.1"))
    x_left = r * (1 + e + s) / ((1 + d) * (1 + e) - s * t)
    x_right = (t * x_left + r) / (1 + e)
    assert x_left < 0 < x_right
    trace, determinant = s * t - d - e, d * e
    assert abs(trace) < 1 + determinant < 2


def test_a_cycle_of_two_meets_an_abs() -> None:
    """x' = 1 - r x^2 + 0.3 abs(x before): a 2-cycle of 0 and u has u = 1 + 0.3 u and 0 = 1 - r u^2, so that
    u = 10/7 and r = 0.49 exactly."""
    system = own_system({"x": "1 - r*x**2 + y", "y": "0.3*abs(x)"}, "-2", "2")
    (onset,) = click(system, "0.5", "0.6")
    assert (onset.kind, onset.status) == (Kind.BORDER_COLLISION, Status.PROVED)
    assert onset.period_before == 2
    assert Fraction(onset.lower) <= Fraction("0.49") <= Fraction(onset.upper)
    assert onset.half_width < Fraction(1, 10**18)
    assert "one of the 2 points of the cycle, x = 0" in onset.consequence


def test_a_jump_ends_the_cycle() -> None:
    """Logistic growth's steady state 1 - 1/r reaches 7/12 at r = 2.4 (exact), where the floor steps up."""
    system = own_system({"x": "r*x*(1 - x)", "y": "y/2 + floor(12*x/7)/9"}, "0", "1")
    onset = click(system, "2.39", "0.2")[0]
    assert (onset.kind, onset.status) == (Kind.BORDER_COLLISION, Status.PROVED)
    assert (onset.period_before, onset.period_after) == (1, 0)
    assert Fraction(onset.lower) <= Fraction("2.4") <= Fraction(onset.upper)
    assert "the formula jumps there" in onset.consequence
    assert "12*x/7 = 1" in onset.consequence


def test_a_surface_without_a_kink_is_no_border() -> None:
    """x abs(x) has slope 0 on both sides of x = 0."""
    system = own_system({"x": "r/2 + x/3 + x*abs(x)/9 + y", "y": "x/9"})
    found: tuple[Onset, ...] = ()
    try:
        found = click(system, "0.01", "0.2")
    except Exception as error:
        assert "lies within reach" in str(error)
    assert all(onset.kind is not Kind.BORDER_COLLISION for onset in found)


@pytest.mark.parametrize("case", ["doubling", "fold"])
def test_damaged_claims_are_refused(case: str) -> None:
    right, *_ = CASES[case]
    # Moved off zero, so that a relative shift means something.
    system = own_system(
        {
            "x": f"y + r - 1 + ({LEFT[0]}*x if x < 0 else ({right[0]})*x)",
            "y": f"-{LEFT[1]}*x if x < 0 else -{right[1]}*x",
        },
        "-2",
        "2",
    )
    (onset,) = click(system, "0.99", "0.4", observed="0", height="1")
    finish(verify_onset_many(system, onset))
    moved = {
        name: fixed_text(int((Fraction(getattr(onset, name)) + Fraction(1, 10**15)) * 10**70), 70)
        for name in ("value", "lower", "upper")
    }
    for damaged in (
        replace(onset, **moved),
        replace(onset, period_before=2 * onset.period_before, period_after=2 * onset.period_after),
        replace(onset, period_before=onset.period_after, period_after=onset.period_before),
        replace(onset, kind=Kind.FLIP, period_before=1, period_after=2),
        replace(onset, kind=Kind.FOLD, period_before=0, period_after=1),
        replace(onset, kind=Kind.TRANSCRITICAL, period_before=1, period_after=1),
    ):
        with pytest.raises((NotProved, SwitchingTouched)):
            finish(verify_onset_many(system, damaged))


def test_a_survey_lists_them() -> None:
    request = SurveyRequest(pieces(LEFT, CASES["doubling"][0]), "r", Fraction("-0.3"), Fraction("0.3"), 4)
    onsets = finish(survey(request)).onsets
    assert [(onset.kind, onset.period_before, onset.period_after) for onset in onsets] == [
        (Kind.BORDER_COLLISION, 1, 2)
    ]
