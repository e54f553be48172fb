"""Every kind of onset printed as proved is confirmed; whatever is damaged in one is refused by name."""

from __future__ import annotations

import dataclasses
from fractions import Fraction

import pytest
from claim_samples import box_by, claim_of, damaged, every_damage, seal
from running import click, climb, own_map
from sample_onsets import SAMPLES, own_states, sample

from tinemark.onsets.results import Kind
from tinemark.verify.check import check
from tinemark.verify.claims import Outcome, Part


@pytest.mark.parametrize("name", SAMPLES)
def test_it_is_confirmed(name: str) -> None:
    assert check(claim_of(sample(name))).words == "confirmed"


@pytest.mark.parametrize("name", [name for name in SAMPLES if name != "many: turning"])
def test_damage_is_refused_by_name(name: str) -> None:
    for what, bad, parts in every_damage(claim_of(sample(name))):
        verdict = check(bad)
        assert verdict.outcome is Outcome.REFUSED, (what, verdict.words)
        assert verdict.part in (*parts, Part.DIGEST), (what, verdict.words)
        if bad.paper is not None:
            verdict = check(seal(bad))
            assert verdict.outcome is Outcome.REFUSED, (what, verdict.words)
            assert verdict.part in parts, (what, verdict.words)


def test_a_turning_of_three_states_is_not_another() -> None:
    claim = claim_of(sample("many: turning"))
    assert claim.paper is not None
    assert len(claim.paper.state_boxes) == 3
    other = dataclasses.replace(claim, criticality="subcritical")
    assert check(damaged(other, criticality="subcritical", sealed=True)).part is Part.CRITICALITY
    assert check(seal(box_by(claim, "1e-15"))).part is Part.BOX


def test_another_rows_certificate_raises_nothing() -> None:
    """An estimated row is not proved by the certificate of another one."""
    flip = claim_of(sample("flip"))
    for name in ("fold", "crossing at zero", "border of a cycle", "many: flip"):
        borrowed = dataclasses.replace(flip, paper=claim_of(sample(name)).paper)
        assert check(borrowed).outcome is Outcome.REFUSED
    assert flip.paper is not None
    row = dataclasses.replace(flip, value="3.4", lower="3.39", upper="3.41")
    assert check(row).part is Part.VALUE


def test_states_of_more_digits_than_were_asked_for() -> None:
    """x of about 6e24 to 20 digits ends in zeros that only fill it up, and so does r of 3e30."""
    large = own_map("r*x*(1 - x/1e25)", start="1e24", low="0", high="1e25")
    steep = own_map("x*r*1e-30*(1 - x)", start="0.3", low="0", high="1")
    for system, start, stop in ((large, "2.8", "3.9"), (steep, "2.8e30", "3.9e30")):
        for level in climb(system, start, stop, levels=2).levels:
            claim = claim_of(level.onset)
            assert check(claim).words == "confirmed"
            name, text = claim.states[0]
            if "." not in text:
                off = str(int(text) + 10 ** (len(text) - 19))
                assert check(dataclasses.replace(claim, states=((name, off),))).part is Part.STATE


def test_a_map_that_nearly_keeps_areas() -> None:
    """x' = r - x^2 - b y, y' = x: at the flip the other multiplier is -b, 1e-29 off the circle.

    The fixed point x^2 + (1 + b) x = r has the trace -2 x = -(1 + b), so that r = 3 (1 + b)^2/4 (exact).
    """
    b = "0.99999999999999999999999999999"
    (onset,) = click(own_states({"x": f"r - x**2 - {b}*y", "y": "x"}, "-2", "2"), "3", "0.5").onsets
    exact = Fraction(3, 4) * (1 + Fraction(b)) ** 2
    assert onset.kind is Kind.FLIP
    assert Fraction(onset.lower) <= exact <= Fraction(onset.upper)
    claim = claim_of(onset)
    assert check(claim).words == "confirmed"
    other = dataclasses.replace(claim, criticality="subcritical")
    assert check(damaged(other, criticality="subcritical", sealed=True)).part is Part.CRITICALITY
