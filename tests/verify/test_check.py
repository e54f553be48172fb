"""Real proofs are confirmed; whatever is damaged in one is refused by its name."""

from __future__ import annotations

import dataclasses
import pickle
from fractions import Fraction
from functools import lru_cache
from typing import Any

import pytest
from claim_samples import box_by, claim_of, damaged, moved, seal, shifted, with_formula
from running import click, climb, own_map, system_of

from tinemark.onsets.results import Onset
from tinemark.verify.check import check
from tinemark.verify.claims import Claim, Outcome, Part

# One-state built-ins with a cascade: where the ladder is followed from and to.
LADDERS = {
    "logistic": ("2.8", "4", 10),
    "sine": ("0.5", "1", 6),
    "ricker": ("1.5", "3", 6),
    "quartic": ("0.1", "1.7", 5),
    "cubic": ("1", "3", 4),
    "hassell": ("5", "60", 4),
    "gaussian": ("-1", "-0.6", 4),
}


@lru_cache(maxsize=16)
def ladder(name: str) -> tuple[Onset, ...]:
    start, stop, levels = LADDERS[name]
    return tuple(level.onset for level in climb(system_of(name), start, stop, levels=levels).levels)


@lru_cache(maxsize=1)
def window_fold() -> Onset:
    """The fold that opens the logistic map's window of period 3, at 1 + sqrt(8)."""
    found = click(system_of("logistic"), "3.83", "0.02")
    return next(onset for onset in found.onsets if onset.kind.value == "fold")


def verdict_of(claim: Claim) -> tuple[Outcome, Part]:
    verdict = check(claim)
    return verdict.outcome, verdict.part


@pytest.mark.parametrize("name", LADDERS)
def test_real_ladders_are_confirmed(name: str) -> None:
    onsets = ladder(name)
    assert len(onsets) == LADDERS[name][2]
    for onset in onsets:
        assert check(claim_of(onset)).words == "confirmed"


def test_a_fold_is_confirmed() -> None:
    fold = window_fold()
    assert abs(fold.value_fraction - 1) ** 2 - 8 < Fraction(1, 10**18)
    assert check(claim_of(fold)).words == "confirmed"


def test_a_subcritical_flip_is_confirmed_and_its_side_is_looked_at() -> None:
    # f_xx = 0 and f_xxx = -6 at the flip of the origin: its coefficient is -1.
    (onset,) = click(own_map("-r*x - x**3"), "1.01", "0.2").onsets
    claim = claim_of(onset)
    assert claim.criticality == "subcritical"
    assert check(claim).words == "confirmed"
    other = damaged(
        dataclasses.replace(claim, criticality="supercritical"), criticality="supercritical", sealed=True
    )
    assert verdict_of(other) == (Outcome.REFUSED, Part.CRITICALITY)


def test_elementary_functions_and_other_parameters() -> None:
    system = system_of("logistic")
    for formula, near in (("r*tanh(x) - 2*r*atan(x/2)*x", "2"), ("r*sin(x)*cos(x/3)", "2.5")):
        result = climb(own_map(formula, start="0.5", low="-3", high="3"), "0.5", "6", levels=2)
        for level in result.levels:
            assert check(claim_of(level.onset)).words == "confirmed", (formula, near)
    assert system.parameter_names == ("r",)


# Damage


DAMAGE: dict[str, tuple[Any, Part]] = {
    "value": (lambda c: shifted(c, "1e-15"), Part.VALUE),
    "value, the least": (lambda c: shifted(c, "1e-20"), Part.VALUE),
    "value, grossly": (lambda c: shifted(c, "0.25"), Part.VALUE),
    "value alone": (lambda c: dataclasses.replace(c, value=moved(c.value, "5e-21")), Part.VALUE),
    "value no number": (lambda c: dataclasses.replace(c, value="3.x"), Part.VALUE),
    "value of a million digits": (lambda c: dataclasses.replace(c, value="3." + "1" * 10**6), Part.VALUE),
    "ends turned": (lambda c: dataclasses.replace(c, lower=c.upper, upper=c.lower), Part.VALUE),
    "box": (lambda c: box_by(c, "1e-15"), Part.BOX),
    "box, grossly": (lambda c: box_by(c, "0.5"), Part.BOX),
    "box too wide": (
        lambda c: damaged(c, parameter_box=(c.paper.parameter_box[0], "0.5")),
        Part.BOX,
    ),
    "box without width": (lambda c: damaged(c, parameter_box=(c.paper.parameter_box[0], "0")), Part.BOX),
    "box of negative width": (
        lambda c: damaged(c, state_boxes=(("x", c.paper.state_boxes[0][1], "-1e-20"),)),
        Part.BOX,
    ),
    "box of a million digits": (
        lambda c: damaged(c, parameter_box=("3." + "4" * 10**6, "1e-20")),
        Part.BOX,
    ),
    "box of another state": (
        lambda c: damaged(c, state_boxes=(("y", *c.paper.state_boxes[0][1:]),)),
        Part.BOX,
    ),
    "box without states": (lambda c: damaged(c, state_boxes=()), Part.BOX),
    "formula": (lambda c: with_formula(c, "1 - x)", "1.0001 - x)"), Part.FORMULA),
    "formula, slightly": (lambda c: with_formula(c, "1 - x)", "1.000000000001 - x)"), Part.FORMULA),
    "formula, no formula": (lambda c: with_formula(c, "r*x*(1 - x)", "r*x*(1 - x"), Part.FORMULA),
    "formula, another name": (lambda c: with_formula(c, "r*x*(1 - x)", "r*y*(1 - x)"), Part.FORMULA),
    "system no TOML": (lambda c: damaged(c, system_text="x = = 3"), Part.SYSTEM),
    "system empty": (lambda c: damaged(c, system_text='kind = "map"'), Part.SYSTEM),
    "status": (lambda c: dataclasses.replace(c, status="estimated"), Part.STATUS),
    "status measured": (lambda c: dataclasses.replace(c, status="measured"), Part.STATUS),
    "proved without a certificate": (lambda c: dataclasses.replace(c, paper=None), Part.STATUS),
    "kind in the row": (
        lambda c: dataclasses.replace(c, kind="fold", period_before=0, period_after=4),
        Part.KIND,
    ),
    "kind in both": (
        lambda c: damaged(
            dataclasses.replace(c, kind="fold", period_before=0, period_after=4, criticality=""),
            kind="fold",
            criticality="",
        ),
        Part.KIND,
    ),
    "period in the row": (lambda c: dataclasses.replace(c, period_before=8, period_after=16), Part.PERIOD),
    "period doubled in both": (
        lambda c: damaged(dataclasses.replace(c, period_before=8, period_after=16), period=8),
        Part.PERIOD,
    ),
    "period tripled in both": (
        lambda c: damaged(dataclasses.replace(c, period_before=12, period_after=24), period=12),
        Part.PERIOD,
    ),
    "period halved in both": (
        lambda c: damaged(dataclasses.replace(c, period_before=2, period_after=4), period=2),
        Part.PERIOD,
    ),
    "period zero": (
        lambda c: damaged(dataclasses.replace(c, period_before=0, period_after=0), period=0),
        Part.PERIOD,
    ),
    "criticality in the row": (lambda c: dataclasses.replace(c, criticality="subcritical"), Part.CRITICALITY),
    "criticality in both": (
        lambda c: damaged(dataclasses.replace(c, criticality="subcritical"), criticality="subcritical"),
        Part.CRITICALITY,
    ),
    "parameter": (lambda c: dataclasses.replace(c, parameter="q"), Part.PARAMETER),
    "parameter in both": (
        lambda c: damaged(dataclasses.replace(c, parameter="q"), parameter="q"),
        Part.PARAMETER,
    ),
    "state": (lambda c: dataclasses.replace(c, states=(("x", "0.5235947861619824699"),)), Part.STATE),
    "ends widened": (lambda c: dataclasses.replace(c, lower="3.5"), Part.DIGEST),
    "precision": (lambda c: damaged(c, precision=10_000), Part.DIGEST),
    "digest": (lambda c: damaged(c, digest="0" * 64), Part.DIGEST),
}


@pytest.mark.parametrize("name", DAMAGE)
def test_damage_is_refused_by_name(name: str) -> None:
    change, part = DAMAGE[name]
    assert verdict_of(change(claim_of(ladder("logistic")[2]))) == (Outcome.REFUSED, part)


SEALABLE = [name for name, (_, part) in DAMAGE.items() if part not in (Part.DIGEST, Part.STATUS)]


@pytest.mark.parametrize("name", SEALABLE)
def test_a_forged_digest_helps_nobody(name: str) -> None:
    change, part = DAMAGE[name]
    assert verdict_of(seal(change(claim_of(ladder("logistic")[2])))) == (Outcome.REFUSED, part)


def test_deep_levels_are_not_refused_for_the_wrong_reason() -> None:
    """Near a deep flip the orbits of half the period are close as well."""
    claim = claim_of(ladder("logistic")[8])
    for by in ("1e-15", "1e-19"):
        assert verdict_of(shifted(claim, by)) == (Outcome.REFUSED, Part.VALUE)
        assert verdict_of(box_by(claim, by)) == (Outcome.REFUSED, Part.BOX)
    assert verdict_of(with_formula(claim, "1 - x)", "1.000000000001 - x)")) == (Outcome.REFUSED, Part.FORMULA)


def test_damage_to_a_fold() -> None:
    claim = claim_of(window_fold())
    assert verdict_of(shifted(claim, "1e-15")) == (Outcome.REFUSED, Part.VALUE)
    assert verdict_of(box_by(claim, "1e-15")) == (Outcome.REFUSED, Part.BOX)
    for period in (1, 6):
        other = damaged(dataclasses.replace(claim, period_after=period), period=period, sealed=True)
        assert verdict_of(other) == (Outcome.REFUSED, Part.PERIOD)
    flip = dataclasses.replace(
        claim, kind="flip", period_before=3, period_after=6, criticality="supercritical"
    )
    flip = damaged(flip, kind="flip", criticality="supercritical", sealed=True)
    assert verdict_of(flip) == (Outcome.REFUSED, Part.KIND)


def test_a_row_of_another_system_is_refused() -> None:
    claim = claim_of(ladder("logistic")[1], formulas=(("x", "r*x*(1 - x)"),), values=())
    assert check(claim).words == "confirmed"
    assert verdict_of(dataclasses.replace(claim, formulas=(("x", "r*x*(1 - x**2)"),))) == (
        Outcome.REFUSED,
        Part.FORMULA,
    )
    assert verdict_of(dataclasses.replace(claim, values=(("c", "1"),))) == (Outcome.REFUSED, Part.SYSTEM)


@pytest.mark.parametrize("period", [10**8, 10**12, 2**53])
def test_long_cycles_are_not_worked_on_for_ever(period: int) -> None:
    claim = dataclasses.replace(
        claim_of(ladder("logistic")[2]), period_before=period, period_after=2 * period
    )
    verdict = check(damaged(claim, period=period, sealed=True))
    assert verdict.outcome is Outcome.NOT_CHECKABLE
    assert "longer than 10 minutes" in verdict.reason


def test_what_claims_no_proof_is_said_to_be_none() -> None:
    claim = claim_of(ladder("logistic")[2], status="estimated", paper=None)
    assert check(claim).outcome is Outcome.NOT_CHECKABLE
    waiting = claim_of(ladder("logistic")[2], status="estimated", waits=True)
    assert check(waiting).words == "confirmed"


def test_claims_and_verdicts_cross_processes() -> None:
    claim = claim_of(ladder("logistic")[0])
    assert pickle.loads(pickle.dumps(claim)) == claim
    assert pickle.loads(pickle.dumps(check(claim))) == check(claim)
