"""Certificates of maps of several states: flips, folds, Neimark-Sacker onsets, and damage to them."""

from __future__ import annotations

import dataclasses
from fractions import Fraction
from functools import lru_cache
from typing import Any

import pytest
from claim_samples import box_by, claim_of, damaged, moved, seal, shifted, with_formula
from running import click, climb, system_of

from tinemark.onsets.results import Kind, Onset
from tinemark.systems.library import builtin_system
from tinemark.systems.system_file import read_system_text
from tinemark.verify import intervals as iv
from tinemark.verify.calculus import Real
from tinemark.verify.check import check
from tinemark.verify.claims import Claim, Outcome, Part, Undecided
from tinemark.verify.matrices import (
    characteristic,
    check_off_circle,
    determinant,
    null_vector,
    solved,
    without_root,
)

BITS = 100


@lru_cache(maxsize=1)
def ladder() -> tuple[Onset, ...]:
    return tuple(level.onset for level in climb(builtin_system("henon"), "0.2", "1.4", levels=4).levels)


@lru_cache(maxsize=1)
def fold() -> Onset:
    found = click(system_of("henon"), "-0.12", "0.1")
    return next(onset for onset in found.onsets if onset.kind is Kind.FOLD)


def verdict_of(claim: Claim) -> tuple[Outcome, Part]:
    verdict = check(claim)
    return verdict.outcome, verdict.part


def test_henons_cascade_and_fold_are_confirmed() -> None:
    # At b = 0.3: 3(1 - b)^2/4, then (1 - b)^2 + (1 + b)^2/4, and the fold at -(1 - b)^2/4.
    exact = (Fraction("0.3675"), Fraction("0.9125"))
    for onset, value in zip(ladder(), exact, strict=False):
        assert Fraction(onset.lower) <= value <= Fraction(onset.upper)
    for onset in (*ladder(), fold()):
        assert check(claim_of(onset)).words == "confirmed"


DAMAGE: dict[str, tuple[Any, Part]] = {
    "value": (lambda c: shifted(c, "1e-15"), Part.VALUE),
    "value alone": (lambda c: dataclasses.replace(c, value=moved(c.value, "1e-21")), Part.VALUE),
    "box": (lambda c: box_by(c, "1e-15"), Part.BOX),
    "state's box": (
        lambda c: damaged(
            c,
            state_boxes=(
                ("x", moved(c.paper.state_boxes[0][1][:40], "1e-9"), "1e-40"),
                c.paper.state_boxes[1],
            ),
        ),
        Part.BOX,
    ),
    "formula": (lambda c: with_formula(c, "1 - a*x**2", "1.0001 - a*x**2"), Part.FORMULA),
    "criticality": (
        lambda c: damaged(dataclasses.replace(c, criticality="subcritical"), criticality="subcritical"),
        Part.CRITICALITY,
    ),
    "period tripled": (
        lambda c: damaged(dataclasses.replace(c, period_before=6, period_after=12), period=6),
        Part.PERIOD,
    ),
    "state": (lambda c: dataclasses.replace(c, states=(("x", "0.31"), ("y", "0.11"))), Part.STATE),
    "states exchanged": (lambda c: damaged(c, state_boxes=c.paper.state_boxes[::-1]), Part.BOX),
}


@pytest.mark.parametrize("name", DAMAGE)
@pytest.mark.parametrize("sealed", [False, True])
def test_damage_is_refused_by_name(name: str, sealed: bool) -> None:
    change, part = DAMAGE[name]
    claim = change(claim_of(ladder()[1]))
    assert verdict_of(seal(claim, sealed)) == (Outcome.REFUSED, part)


def test_wrong_periods_and_kinds_are_never_confirmed() -> None:
    claim = claim_of(ladder()[1])
    for period in (1, 4):
        other = dataclasses.replace(claim, period_before=period, period_after=2 * period)
        assert check(damaged(other, period=period, sealed=True)).outcome is Outcome.REFUSED
    other = dataclasses.replace(claim, kind="fold", period_before=0, period_after=2, criticality="")
    other = damaged(other, kind="fold", criticality="", sealed=True)
    assert check(other).outcome is Outcome.REFUSED
    assert verdict_of(damaged(claim, digest="0" * 64)) == (Outcome.REFUSED, Part.DIGEST)


def test_a_box_too_wide_is_not_called_confirmed() -> None:
    claim = claim_of(ladder()[1])
    assert claim.paper is not None
    wide = damaged(claim, parameter_box=(claim.paper.parameter_box[0], "0.3"), sealed=True)
    assert check(wide).outcome is Outcome.NOT_CHECKABLE


# The small matrices behind it


def whole(*rows: tuple[int, ...]) -> list[list[iv.Interval]]:
    return [[iv.of_whole(entry) for entry in row] for row in rows]


def numbers(vector: list[iv.Interval]) -> list[Fraction]:
    found = []
    for entry in vector:
        low, high = iv.ends(entry)
        assert high - low < Fraction(1, 10**20)
        found.append(round((low + high) / 2, 15))
    return found


def test_determinants_and_systems() -> None:
    rows = whole((2, -1, 0, 3), (1, 0, 5, -2), (0, 4, 1, 1), (3, 2, -2, 0))
    assert numbers([determinant(rows, BITS)]) == [293]
    assert numbers(solved(Real(BITS), whole((2, 1), (1, -3)), [iv.of_whole(5), iv.of_whole(-1)])) == [2, 1]
    assert numbers(characteristic(whole((2, 1), (7, -3)), BITS)) == [-13, 1, 1]
    # (z - 2)(z + 1)(z - 5) without its root at -1.
    assert numbers(without_root([iv.of_whole(n) for n in (10, 3, -6, 1)], -1, BITS)) == [10, -7, 1]
    x, y, z = numbers(null_vector(Real(BITS), whole((1, 2, 3), (0, 1, 1), (1, 3, 4))))
    assert (x + 2 * y + 3 * z, y + z) == (0, 0)
    assert (x, y, z) != (0, 0, 0)


@pytest.mark.parametrize(
    ("polynomial", "off"),
    [
        ((10, -7, 1), True),
        ((1, 0, 4), True),
        ((-1, 1), False),
        ((1, 1), False),
        ((1, 1, 1), False),
        ((5, -6, 5), False),
        ((101, 20, 100), True),
        ((100, 20, 101), True),
        ((7,), True),
    ],
)
def test_roots_on_the_unit_circle(polynomial: tuple[int, ...], off: bool) -> None:
    coefficients = [iv.of_whole(n) for n in polynomial]
    if off:
        check_off_circle(coefficients, 64)
    else:
        with pytest.raises(Undecided):
            check_off_circle(coefficients, 64)


# Neimark-Sacker onsets

TURNING = """
title = "turning"
kind = "map"
[states.x]
start = "0.01"
range = ["-2", "2"]
[states.y]
start = "0.01"
range = ["-2", "2"]
[parameters.r]
value = "0.95"
[next]
x = "0.1 + r*(0.6*x - 0.8*y) + x**2*y - 0.3*x**3"
y = "r*(0.8*x + 0.6*y) - y*x**2"
[diagram]
parameter = "r"
observe = "x"
"""


@lru_cache(maxsize=2)
def neimark_sacker(own: bool) -> Onset:
    system = read_system_text(TURNING) if own else builtin_system("delayed_logistic")
    (onset,) = click(system, "1" if own else "2", "0.1").onsets
    assert onset.kind is Kind.NEIMARK_SACKER
    return onset


@pytest.mark.parametrize("own", [False, True])
def test_neimark_sacker_onsets_are_confirmed_and_their_side_is_looked_at(own: bool) -> None:
    claim = claim_of(neimark_sacker(own))
    assert claim.criticality == "supercritical"
    assert check(claim).words == "confirmed"
    other = dataclasses.replace(claim, criticality="subcritical")
    other = damaged(other, criticality="subcritical", sealed=True)
    assert verdict_of(other) == (Outcome.REFUSED, Part.CRITICALITY)
    assert verdict_of(seal(shifted(claim, "1e-15"))) == (Outcome.REFUSED, Part.VALUE)
    assert verdict_of(seal(box_by(claim, "1e-15"))) == (Outcome.REFUSED, Part.BOX)


def test_a_neimark_sacker_onset_is_no_flip() -> None:
    claim = claim_of(neimark_sacker(False))
    flip = dataclasses.replace(claim, kind="flip", period_after=2)
    assert check(damaged(flip, kind="flip", sealed=True)).outcome is Outcome.REFUSED
    # And a flip is no Neimark-Sacker onset: its multipliers have another product than 1.
    flip = claim_of(ladder()[0])
    turned = dataclasses.replace(flip, kind="Neimark-Sacker", period_after=1)
    assert check(damaged(turned, kind="Neimark-Sacker", sealed=True)).outcome is Outcome.REFUSED
