"""Attacks on the label "proved": onsets at zero, cycle points at zero, formulas that doubles round badly."""

from __future__ import annotations

from fractions import Fraction
from typing import Any

import pytest
from flint import arb
from running import click, climb, finish, own_map, system_of

from tinemark.onsets.ball_orbits import LONGEST_EXPONENT, fraction_of
from tinemark.onsets.one_map import one_map
from tinemark.onsets.polish import Rough, settle_onset
from tinemark.onsets.results import Kind, Onset, Status
from tinemark.onsets.verification import verify_onset
from tinemark.systems.errors import NoOnsetFound, SystemFileError, Unbounded
from tinemark.systems.system import System


def _settle(system: System, kind: Kind, period: int, x: Any, r: Any, **how: Any) -> Onset:
    one = one_map(system, system.diagram_parameter)
    rough = Rough(kind, period, Fraction(x), Fraction(r))
    return finish(settle_onset(one, rough, how.pop("digits", 20), **how)).onset


def _significant(text: str) -> int:
    return len(text.lstrip("-").replace(".", "").lstrip("0"))


@pytest.mark.parametrize("size", ["1e-3", "-1e-12", "1e-25"])
def test_small_onset_has_the_digits_it_claims(size: str) -> None:
    """Where Newton's method ends at a smaller value than it set out from, decimals follow."""
    system = own_map(f"(r + 3 - {size})*x*(1 - x)", low="0")
    onset = _settle(system, Kind.FLIP, 1, "0.66", "0.1")
    assert onset.status is Status.PROVED
    assert Fraction(onset.lower) <= Fraction(size) <= Fraction(onset.upper)
    assert _significant(onset.value) >= onset.digits == 20
    assert abs(onset.value_fraction / Fraction(size) - 1) < Fraction(1, 10**20)


def test_onset_at_zero_is_enclosed() -> None:
    """The logistic map shifted so that it flips at r = 0 exactly."""
    for onset in (
        click(own_map("(r + 3)*x*(1 - x)", low="0"), "0.01", "0.5").onsets[0],
        climb(own_map("(r + 3)*x*(1 - x)", low="0"), "-1", "1", levels=1).levels[0].onset,
    ):
        assert onset.status is Status.PROVED
        assert onset.value_fraction == 0
        assert Fraction(onset.lower) < 0 < Fraction(onset.upper)
        # As many decimals as a number of the parameter's size with these digits has, and no row of zeros.
        assert onset.digits == 20
        assert len(onset.value) <= len("0.") + 22
        finish(verify_onset(own_map("(r + 3)*x*(1 - x)", low="0"), onset))


def test_what_lies_at_the_end_of_a_printed_interval_is_proved_again() -> None:
    """The cubic hump's flip of period 32 at 5.88760592022775227456291...: the digits after are 0 or 9."""
    onset = click(system_of("cubic_hump"), "5.8876059", "0.0003").onsets[0]
    assert (onset.kind, onset.period_before) == (Kind.FLIP, 32)
    proof = finish(verify_onset(system_of("cubic_hump"), onset))
    unit = Fraction(1, 10 ** len(onset.lower.partition(".")[2]))
    assert Fraction(onset.lower) + unit / 4 < proof.parameter[0]
    assert proof.parameter[1] < Fraction(onset.upper) - unit / 4


@pytest.mark.parametrize("low", ["-1", None])
def test_cycle_point_at_zero_shows_no_rounding(low: str | None) -> None:
    """A fixed point that lies at zero at its flip, and away from zero elsewhere."""
    system = own_map("r*(x + 2/3)*(1/3 - x) - 2/3", low=low)
    onset = climb(system, "2.8", "3.4", levels=1).levels[0].onset
    assert onset.status is Status.PROVED
    (text,) = (text for _, text in onset.states)
    assert Fraction(text) == 0
    assert len(text) <= 22


def test_state_near_zero_shows_only_digits_that_hold() -> None:
    """A cycle point much smaller than its own error keeps fewer digits than were asked for."""
    system = own_map("r*(x + 2/3 - 1e-20)*(1/3 + 1e-20 - x) - 2/3 + 1e-20")
    onset = _settle(system, Kind.FLIP, 1, "0.01", "3.01", digits=6)
    (text,) = (text for _, text in onset.states)
    unit = Fraction(1, 10 ** len(text.partition(".")[2]))
    assert abs(Fraction(text) - Fraction("1e-20")) <= unit * Fraction(6, 10)


def test_proof_is_of_the_state_shown() -> None:
    """The point that a click chose is proved itself: its coefficient is the one in the evidence."""
    system = own_map("r*x*(1 - x)", low="0")
    here = _settle(system, Kind.FLIP, 2, "0.44", "3.449")
    there = _settle(system, Kind.FLIP, 2, "0.85", "3.449")
    shifted = _settle(system, Kind.FLIP, 2, "0.44", "3.449", show_after=1)
    assert shifted.states == there.states != here.states
    assert dict(shifted.evidence)["flip coefficient"] == dict(there.evidence)["flip coefficient"]


def test_newton_towards_zero_comes_to_rest() -> None:
    """Every step squares a state that tends to zero; nothing may grow with it."""
    for formula, kind, r in (("-r*x + x**2", Kind.FLIP, "0.9"), ("exp(x) - r", Kind.FOLD, "0.9")):
        onset = _settle(own_map(formula), kind, 1, "0.3", r, digits=250)
        assert onset.status is Status.PROVED
        assert Fraction(onset.states[0][1]) == 0
        assert Fraction(onset.lower) <= 1 <= Fraction(onset.upper)


def test_numbers_too_long_to_write_are_refused() -> None:
    """A ball may have any exponent; a rational of that length would fill the memory."""
    assert fraction_of(arb(2) ** -200) == Fraction(1, 2**200)
    for power in (LONGEST_EXPONENT + 1, -LONGEST_EXPONENT - 1, -(10**15)):
        with pytest.raises(Unbounded):
            fraction_of(arb(2) ** power)


def test_estimate_covers_the_rounding_of_doubles() -> None:
    """A formula that loses nine digits in doubles, flipping on its own switching surface at r = 3."""
    hump = "r*((x + 1e9) - 1e9)*(1 - x)"
    onset = click(own_map(f"max({hump}, {hump} - (x - 2/3)**3)", low="0"), "3.001", "0.1").onsets[0]
    assert onset.status is Status.ESTIMATED
    assert Fraction(onset.lower) <= 3 <= Fraction(onset.upper)


def test_click_on_a_corner_is_answered_in_words() -> None:
    """At r = 1 the branches of r*x - x*|x| meet on the formula's switching surface."""
    with pytest.raises(NoOnsetFound):
        click(own_map("r*x - abs(x)*x"), "1.003", "0.1")


def test_distances_in_the_evidence_are_lower_bounds() -> None:
    """The period-4 cycle's points two steps apart: the printed distance is not above the true one."""
    onset = _settle(own_map("r*x*(1 - x)", low="0"), Kind.FLIP, 4, "0.5236", "3.5441")
    finding = dict(onset.evidence)["least period exactly 4"]
    r, x = onset.value_fraction, Fraction(onset.states[0][1])
    y = r * x * (1 - x)
    said = Fraction(finding.split("at least ")[1].split()[0])
    assert "after 2 steps" in finding
    assert said <= abs(r * y * (1 - y) - x) < said * Fraction(11, 10)


def test_numbers_beyond_doubles_are_refused_in_words() -> None:
    """Two hundred digits with a power of ten: each is allowed, together they overflow."""
    with pytest.raises(SystemFileError, match="too large"):
        own_map("r*x*(1 - x)", value="1" + "0" * 150 + "e300")
