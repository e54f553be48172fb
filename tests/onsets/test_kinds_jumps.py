"""Subcritical splits: the words say that the change is a jump, and the fold that bounds it is found."""

from __future__ import annotations

from fractions import Fraction

import pytest
from running import click, finish, own_map, system_of

from tinemark.onsets.engine import refine
from tinemark.onsets.results import Criticality, Kind, RefineRequest, Status


@pytest.mark.parametrize(
    ("formula", "kind"),
    [
        # 2-cycle with f(x) = -x: r + x^2 - x^4 = 1, whose two branches meet at x^2 = 1/2, r = 3/4.
        ("-r*x - x**3 + x**5", Kind.FLIP),
        # Fixed points: r + x^2 - x^4 = 1, the same fold of the pair of mirror images.
        ("r*x + x**3 - x**5", Kind.PITCHFORK),
    ],
)
def test_subcritical_split_names_its_jump_and_the_fold(formula: str, kind: Kind) -> None:
    """Both split at r = 1 with a jump, and their hysteresis ends at the fold r = 3/4 exactly."""
    result = click(own_map(formula), "0.97", "0.1", "0", "0.5")
    onset, fold = result.onsets[0], result.onsets[-1]
    assert (onset.kind, onset.status, onset.criticality) == (kind, Status.PROVED, Criticality.SUBCRITICAL)
    assert Fraction(onset.lower) < 1 < Fraction(onset.upper)
    assert (fold.kind, fold.status) == (Kind.FOLD, Status.PROVED)
    assert fold.period_after == onset.period_after
    assert Fraction(fold.lower) < Fraction(3, 4) < Fraction(fold.upper)
    assert "the change is a jump: above r = 1" in onset.consequence
    assert "fold r = 0.75" in onset.consequence
    assert "hysteresis" in onset.consequence
    assert "jump" in result.message


def test_fold_is_left_out_when_only_flips_are_asked_for() -> None:
    """A filter by kind holds for the fold of a hysteresis as well; the words still name it."""
    system = own_map("-r*x - x**3 + x**5")
    request = RefineRequest(system, "r", Fraction(1), Fraction("0.1"), kinds=frozenset({Kind.FLIP}))
    onsets = finish(refine(request)).onsets
    assert {onset.kind for onset in onsets} == {Kind.FLIP}
    assert "fold r = 0.75" in onsets[0].consequence


def test_jump_without_a_bounding_fold() -> None:
    """Without a term that turns the branch back, no fold is found, and orbits escape."""
    (onset,) = click(own_map("-r*x + x**2/2 - x**3"), "1.004", "0.1").onsets
    assert onset.criticality is Criticality.SUBCRITICAL
    assert "was not found" in onset.consequence
    assert "escape" in onset.consequence


def test_supercritical_flip_says_nothing_of_a_jump() -> None:
    """The soft flip of the logistic map has no more to say than its periods."""
    onset = click(system_of("logistic"), "3.01", "0.1").onsets[0]
    assert onset.consequence == ""


@pytest.mark.parametrize("near", ["0.7499", "0.7503"])
@pytest.mark.parametrize("width", ["0.06", "0.3"])
def test_fold_of_a_second_stable_cycle_is_not_missed(near: str, width: str) -> None:
    """At r = 3/4 a second stable cycle of period 1 opens beside x = 0: each has its branch."""
    onset = click(own_map("r*x + x**3 - x**5"), near, width, "0.71", "0.5").onsets[0]
    assert (onset.kind, onset.period_after) == (Kind.FOLD, 1)
    assert Fraction(onset.lower) < Fraction(3, 4) < Fraction(onset.upper)
