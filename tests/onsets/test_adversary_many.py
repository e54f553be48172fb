"""Attacks on proofs of further kinds and on their check: numbers beside the value, formulas in pieces.

Each case once came out wrong, or is one that a proof must not be taken in by.
"""

from __future__ import annotations

import dataclasses
from fractions import Fraction

import numpy as np
import pytest
from running import finish, own_map

from tinemark.onsets.border_onsets import settle_border
from tinemark.onsets.branch_point_onsets import settle_branch_point
from tinemark.onsets.many_cycles import Cycle
from tinemark.onsets.many_map import float_many_map, many_map
from tinemark.onsets.many_onset import settle_onset as settle_many
from tinemark.onsets.one_map import one_map
from tinemark.onsets.polish import Lost, Rough
from tinemark.onsets.results import Criticality, Kind, Onset, Status
from tinemark.systems.system_file import read_system_text
from tinemark.verify.check import check
from tinemark.verify.claims import Claim, Outcome, Paper, Part


def branch_point(formula: str, period: int, x: str, r: str) -> Onset:
    """What is made of a rough branch point."""
    system = own_map(formula, low=None)
    rough = Rough(Kind.PITCHFORK, period, Fraction(x), Fraction(r))
    return finish(settle_branch_point(one_map(system, "r"), rough, 20)).onset


@pytest.mark.parametrize(
    ("formula", "speed"),
    [
        # x^2 = r - 1 on the branch, so -f has the multiplier r - 3 (r - 1) = 3 - 2 r.
        ("-r*x + x**3", -2.0),
        # x^2 = (r - 1)/2 on the branch: r - 6 x^2 = 3 - 2 r as well.
        ("-r*x + 2*x**3", -2.0),
    ],
)
def test_speed_of_the_half_way_multiplier(formula: str, speed: float) -> None:
    onset = branch_point(formula, 2, "1" if "2*" not in formula else "0.7071067811865", "2")
    assert onset.status is Status.PROVED
    assert onset.kind is Kind.PITCHFORK
    assert float(dict(onset.evidence)["the half-way multiplier passes with speed"]) == pytest.approx(speed)


def test_identity_of_a_piece_that_does_not_hold_at_the_point_itself() -> None:
    """1/3 lies above the surface, its double below it: the piece where 1/3 stays put does not hold there."""
    apart = "(x - 0.3333333333333333334333333333333333)"
    formula = f"x + (x - 1/3)*(r - 1) if x < 0.3333333333333333332 else x + {apart}*(r - 1 + {apart})"
    onset = branch_point(formula, 1, "1/3", "1")
    assert onset.status is not Status.PROVED
    assert dict(onset.states)["x"].startswith("0.3333333333333333334")


@pytest.mark.parametrize("state", ["0.1", "1", "-0.0000001"])
def test_printed_cycle_point_a_unit_off_is_refused(state: str) -> None:
    """The transcritical point of r x (1 - x) lies at x = 0."""
    onset = branch_point("r*x*(1 - x)", 1, "0", "1")
    assert onset.status is Status.PROVED
    held = onset.certificate
    assert held is not None
    paper = Paper(**{field.name: getattr(held, field.name) for field in dataclasses.fields(held)})
    claim = Claim(
        name="a row",
        status="proved",
        waits=False,
        kind=onset.kind.value,
        period_before=onset.period_before,
        period_after=onset.period_after,
        criticality=onset.criticality.value,
        parameter=onset.parameter,
        value=onset.value,
        lower=onset.lower,
        upper=onset.upper,
        states=onset.states,
        paper=paper,
    )
    assert check(claim).outcome is Outcome.CONFIRMED
    moved = check(dataclasses.replace(claim, states=(("x", state),)))
    assert (moved.outcome, moved.part) == (Outcome.REFUSED, Part.STATE)


@pytest.mark.parametrize(
    "formula",
    [
        "0.5*x + r if x < 0 else 0.5*x + r",
        "0.5*x + r - x**2 if x < 0 else 0.5*x + r + x**2",
        "0.5*x + r + x*max(x, 0)",
    ],
)
def test_surface_without_a_kink_is_no_border_collision(formula: str) -> None:
    rough = Rough(Kind.BORDER_COLLISION, 1, Fraction(0), Fraction(0))
    with pytest.raises(Lost, match="no kink"):
        finish(settle_border(one_map(own_map(formula, low=None), "r"), rough, 20))


def test_flip_with_another_multiplier_at_plus_one() -> None:
    """At r = 0 both meet: the coefficient's equations are singular, and no more than an estimate is left."""
    system = read_system_text(
        """
title = "two competitors"
kind = "map"
[states.x]
start = "0.1"
[states.y]
start = "0.1"
[parameters.r]
value = "1"
[next]
x = "x*exp(r - x - 2*y)"
y = "y*exp(r - 0.5*x - y)"
[diagram]
parameter = "r"
observe = "x"
"""
    )
    rough = Cycle(np.array([[4.0, -2.0]]), 1.6e-16)
    float_map = float_many_map(many_map(system, "r"))
    onset = finish(settle_many(float_map, Kind.FLIP, rough, 20, np.array([1.0, 1.0]), 1e-3)).onset
    assert onset.status is Status.ESTIMATED
    assert onset.criticality is Criticality.UNDECIDED
