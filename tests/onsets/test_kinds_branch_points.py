"""Transcritical points and pitchforks: exact values, words, and claims that must be refused."""

from __future__ import annotations

from dataclasses import replace
from fractions import Fraction

import pytest
from running import click, finish, own_map, system_of

from tinemark.onsets.engine import refine
from tinemark.onsets.exact_identities import vanishes
from tinemark.onsets.one_map import one_map
from tinemark.onsets.polish import Lost, Rough
from tinemark.onsets.proofs import NotProved
from tinemark.onsets.results import Criticality, Kind, Onset, RefineRequest, Status
from tinemark.onsets.settling import settle_any
from tinemark.onsets.verification import verify_onset
from tinemark.systems.errors import NoOnsetFound
from tinemark.systems.formula import read_formula
from tinemark.systems.system import System


def _holds(onset: Onset, value: Fraction | int) -> bool:
    return Fraction(onset.lower) < value < Fraction(onset.upper)


@pytest.mark.parametrize(
    ("formula", "near", "width", "value"),
    [
        # f(0, r) = 0 for all r, and f_x(0, r) = r: the origin and 1 - 1/r cross at 1.
        ("r*x*(1 - x)", "1.02", "0.5", "1"),
        # The same from the other side, where the origin is stable.
        ("r*x*(1 - x)", "0.98", "0.5", "1"),
        # Fixed points 1 and 1 + r: f_x(1, r) = 1 + r/2 crosses 1 at r = 0.
        ("x - (x - 1)*(x - 1 - r)/2", "0.02", "0.5", "0"),
        # The 2-cycle 0 <-> 1 does not move; its multiplier (-1/2)*(-3/2 - r) is 1 at r = 1/2.
        ("(1 - x)*(1 + x/2) + r*x**2*(1 - x)", "0.48", "0.2", "1/2"),
        # x = r and x = r^2 cross at 1; that the first is a fixed point for every r cancels in the formula.
        ("x + (x - r)*(x - r**2)/2", "0.98", "0.2", "1"),
        # A piecewise formula, off its surface.
        ("r*x*(1 - x) if x < 1/2 else r/4 - x/9", "0.98", "0.2", "1"),
    ],
)
def test_transcritical_point_is_proved(formula: str, near: str, width: str, value: str) -> None:
    """Two branches cross, one of which the parameter does not move."""
    system = own_map(formula, low="0", high="2")
    onset = click(system, near, width).onsets[0]
    assert (onset.kind, onset.status) == (Kind.TRANSCRITICAL, Status.PROVED)
    assert onset.period_before == onset.period_after
    assert _holds(onset, Fraction(value))
    assert Fraction(onset.upper) - Fraction(onset.lower) < Fraction(1, 10**20)
    assert "exchange stability" in onset.consequence
    finish(verify_onset(system, onset))


def test_crossing_of_two_moving_branches_is_estimated() -> None:
    """x^3 + x = 2 r and x^5 + x = 2 r^2 cross at r = 1 exactly, but no enclosure can show that."""
    system = own_map("x + (x**3 + x - 2*r)*(x**5 + x - 2*r**2)/20", low="0", high="2")
    onset = click(system, "0.98", "0.2").onsets[0]
    assert (onset.kind, onset.status) == (Kind.TRANSCRITICAL, Status.ESTIMATED)
    assert "no enclosure can show" in onset.reason
    assert _holds(onset, 1)
    assert Fraction(onset.upper) - Fraction(onset.lower) < Fraction(1, 10**18)


@pytest.mark.parametrize(
    ("formula", "near", "period", "value", "criticality", "coefficient"),
    [
        # f = r x + c x^3: the cubic coefficient is -c.
        ("r*x - x**3", "1.001", 1, 1, Criticality.SUPERCRITICAL, 1.0),
        ("r*x + x**3 - 3*x**5", "0.99", 1, 1, Criticality.SUBCRITICAL, -1.0),
        # x -> 1 - x: the same moved to 1/2.
        ("1/2 + r*(x - 1/2) - (x - 1/2)**3", "1.01", 1, 1, Criticality.SUPERCRITICAL, 1.0),
        # The 2-cycle +-sqrt((r - 2)/r) has half-way multiplier 2 r - 5, which is 1 at r = 3: the symmetry
        # breaking of the odd cubic in this form (Rogers & Whitley 1983, from memory).
        ("r*x**3 + (1 - r)*x", "3.01", 2, 3, Criticality.SUPERCRITICAL, 24.0),
        ("r*x**3 + (1 - r)*x", "2.8", 2, 3, Criticality.SUPERCRITICAL, 24.0),
        # The same with the sign in the formula: half-way multiplier 2 r - 3.
        ("-r*x*(1 - x**2)", "1.97", 2, 2, Criticality.SUPERCRITICAL, None),
    ],
)
def test_pitchfork_of_symmetric_map_is_proved(
    formula: str, near: str, period: int, value: int, criticality: Criticality, coefficient: float | None
) -> None:
    """The symmetry is found in the formula, and the pitchfork proved among maps that have it."""
    system = own_map(formula, low="-1", high="2")
    onset = click(system, near, "0.5").onsets[0]
    assert (onset.kind, onset.status) == (Kind.PITCHFORK, Status.PROVED)
    assert (onset.period_before, onset.period_after) == (period, period)
    assert _holds(onset, value)
    assert Fraction(onset.upper) - Fraction(onset.lower) < Fraction(1, 10**20)
    assert onset.criticality is criticality
    assert "symmetry x -> " in onset.consequence
    if coefficient is not None:
        assert float(dict(onset.evidence)["cubic coefficient"]) == pytest.approx(coefficient, rel=1e-4)
    finish(verify_onset(system, onset))


def test_symmetry_and_words_of_the_sine_map() -> None:
    """r sin(pi x) is odd: at r = 1/pi the origin loses its stability to two mirror images."""
    result = click(own_map("r*sin(pi*x)"), "0.32", "0.1")
    onset = result.onsets[0]
    assert onset.kind is Kind.PITCHFORK
    # 1/pi to 30 digits.
    assert _holds(onset, Fraction("0.318309886183790671537767526745"))
    assert "supercritical pitchfork of period 1" in result.message
    assert "symmetry x -> -x breaks" in result.message


def test_pitchfork_without_symmetry() -> None:
    """r x - x^3 + x^4 is not symmetric; its second derivative at zero is, and that is what is said."""
    onset = click(own_map("r*x - x**3 + x**4"), "1.01", "0.1").onsets[0]
    assert (onset.kind, onset.status) == (Kind.PITCHFORK, Status.PROVED)
    assert "though no symmetry" in onset.consequence


@pytest.mark.parametrize(
    ("text", "zero"),
    [
        ("(x + r)**2 - x**2 - 2*x*r - r**2", True),
        ("sin(pi - x) - sin(x)", True),
        ("x/(1 + x) + 1/(1 + x) - 1", True),
        ("0.1 + 0.2 - 0.3", True),
        ("sqrt(x**2) - x", False),
        ("1e-30*x", False),
        ("atan(tan(x)) - x", False),
        ("abs(x) - x", False),
        # Too long to expand, and told from zero without trying.
        ("(1 + x + r)**12*(1 - x + r*x)**12 - x", False),
    ],
)
def test_identities_hold_by_algebra_or_not_at_all(text: str, zero: bool) -> None:
    """Only what cancels exactly counts, whatever numbers say."""
    assert vanishes(read_formula(text, ("x", "r"), key="next.x")) is zero


def test_straight_line_has_no_pitchfork() -> None:
    """At mu = 1 every point of the tent's left side is a fixed point: nothing branches off."""
    kinds = frozenset({Kind.PITCHFORK, Kind.TRANSCRITICAL})
    request = RefineRequest(system_of("tent"), "mu", Fraction("1.02"), Fraction("0.2"), kinds=kinds)
    with pytest.raises(NoOnsetFound):
        finish(refine(request))


def test_symmetry_on_paper_alone_is_not_enough() -> None:
    """sqrt(x)**2 is x to algebra and undefined below zero: the mirrored half of a cycle does not exist."""
    one = one_map(own_map("-r*sqrt(x)**2*(1 - x**2)"), "r")
    rough = Rough(Kind.PITCHFORK, 2, Fraction("0.7071067811865475"), Fraction(2))
    try:
        onset = finish(settle_any(one, rough, 20)).onset
    except Lost:
        return
    assert onset.status is not Status.PROVED


def _damaged(onset: Onset) -> list[Onset]:
    moved = {end: _text(Fraction(getattr(onset, end)) + Fraction(1, 10**15)) for end in ("lower", "upper")}
    other = Kind.TRANSCRITICAL if onset.kind is Kind.PITCHFORK else Kind.PITCHFORK
    before = onset.period_before
    changed = [
        replace(onset, **moved),
        replace(onset, kind=other),
        replace(onset, kind=Kind.FLIP, period_after=2 * before),
        replace(onset, kind=Kind.FOLD, period_before=0),
        replace(onset, kind=Kind.BORDER_COLLISION),
        replace(onset, kind=Kind.CRISIS),
        replace(onset, period_before=2 * before, period_after=2 * before),
        replace(onset, period_before=3 * before, period_after=3 * before),
        replace(onset, states=(("x", "0.2345678901234567890123"),)),
    ]
    if onset.kind is Kind.PITCHFORK:
        changed.append(replace(onset, criticality=Criticality.SUBCRITICAL))
    return changed


def _text(value: Fraction) -> str:
    return f"{value.numerator * 10**40 // value.denominator}e-40"


@pytest.mark.parametrize(
    ("system", "near"),
    [
        (own_map("r*x*(1 - x)", low="0"), "1.02"),
        (own_map("r*x - x**3"), "1.02"),
        (own_map("r*x**3 + (1 - r)*x"), "3.01"),
    ],
)
def test_damaged_claims_are_refused(system: System, near: str) -> None:
    """A moved value, another kind, period, point or criticality is not proved."""
    onset = click(system, near, "0.2").onsets[0]
    assert onset.status is Status.PROVED
    for claim in _damaged(onset):
        with pytest.raises(NotProved):
            finish(verify_onset(system, claim))


@pytest.mark.parametrize("kind", [Kind.TRANSCRITICAL, Kind.PITCHFORK])
def test_flips_and_folds_are_not_taken_for_branch_points(kind: Kind) -> None:
    """A proved flip or fold with its kind swapped is refused."""
    system = system_of("logistic")
    for near, width in (("3.01", "0.1"), ("3.8285", "0.01")):
        onset = click(system, near, width).onsets[0]
        period = max(onset.period_before, 1)
        with pytest.raises(NotProved):
            finish(verify_onset(system, replace(onset, kind=kind, period_before=period, period_after=period)))


def test_kinds_asked_for_are_the_ones_answered() -> None:
    """A filter by kind is honoured, and an empty answer names what was looked for."""
    system = own_map("r*x - x**3")
    request = RefineRequest(system, "r", Fraction("1.9"), Fraction(2))
    kinds = {onset.kind for onset in finish(refine(request)).onsets}
    assert Kind.FLIP in kinds
    pitchfork = RefineRequest(system, "r", Fraction("1.9"), Fraction(2), kinds=frozenset({Kind.PITCHFORK}))
    assert {onset.kind for onset in finish(refine(pitchfork)).onsets} == {Kind.PITCHFORK}
    with pytest.raises(NoOnsetFound, match="no fold was found"):
        finish(refine(RefineRequest(system, "r", Fraction(1), Fraction("0.2"), kinds=frozenset({Kind.FOLD}))))
    with pytest.raises(NoOnsetFound, match="a map of one state has no"):
        finish(
            refine(
                RefineRequest(system, "r", Fraction(1), Fraction(1), kinds=frozenset({Kind.NEIMARK_SACKER}))
            )
        )


def test_multiplier_that_touches_without_crossing_is_named() -> None:
    """The multiplier -(1 - r^2) comes to -1 at r = 0 and turns back: no onset, and the words say so."""
    with pytest.raises(NoOnsetFound, match=r"touches -1 near r = 0 without crossing"):
        click(own_map("-(1 - r**2)*x + x**2"), "0.02", "0.5")
