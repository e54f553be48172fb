"""Border collisions: exact values and outcomes, words, and claims that must be refused."""

from __future__ import annotations

from dataclasses import replace
from fractions import Fraction

import pytest
from running import click, finish, own_map, system_of

from tinemark.onsets.border_outcomes import outcome
from tinemark.onsets.proofs import NotProved
from tinemark.onsets.results import Criticality, Kind, Onset, Status
from tinemark.onsets.verification import verify_onset
from tinemark.systems.errors import SwitchingTouched

TWO_PIECES = "{a}*x + r if x < 0 else {b}*x + r"


def _holds(onset: Onset, value: Fraction) -> bool:
    return Fraction(onset.lower) < value < Fraction(onset.upper)


@pytest.mark.parametrize(
    ("a", "b", "before", "after", "words"),
    [
        ("0.5", "0.3", 1, 1, "persistence"),
        # Stable 2-cycle where a > -1, b < -1 and -1 < a b < 1; its multiplier is a b (Nusse & Yorke 1992).
        ("0.5", "-1.5", 1, 2, "multiplier -0.75"),
        # Two points on the left, one on the right: there for b < -(1 + a)/a = -3, stable for a^2 b > -1.
        ("0.5", "-3.5", 1, 3, "period 3"),
        ("0.5", "-5", 1, 0, "straight to chaos"),
        ("0.5", "2", 0, 1, "vanish"),
    ],
)
def test_border_collision_of_two_straight_pieces(a: str, b: str, before: int, after: int, words: str) -> None:
    """The fixed point touches x = 0 at r = 0 exactly; what follows is decided by the two slopes."""
    system = own_map(TWO_PIECES.format(a=a, b=b))
    onset = click(system, "0.02", "0.5").onsets[0]
    assert (onset.kind, onset.status) == (Kind.BORDER_COLLISION, Status.PROVED)
    assert (onset.period_before, onset.period_after) == (before, after)
    assert _holds(onset, Fraction(0))
    assert Fraction(onset.upper) - Fraction(onset.lower) < Fraction(1, 10**20)
    assert words in onset.consequence
    # x = r/(1 - a) is on the left for r below 0; only the pair of the last case meets there from below too.
    assert "coming from below" in onset.consequence
    assert "x = 0, touches the surface x = 0" in onset.consequence
    finish(verify_onset(system, onset))


def test_edge_between_two_outcomes_is_not_called() -> None:
    """At b = -(1 + a)/a the cycle of three begins: neither outcome is claimed."""
    assert not outcome(0.5, -3.0, 1).certain


@pytest.mark.parametrize(
    ("a", "b", "rounds", "opens"),
    [
        (0.5, 0.9, 1, False),
        (0.5, -1.9, 2, False),
        (-0.5, -1.9, 2, False),
        (0.5, -2.5, 0, False),
        (0.5, -3.5, 3, False),
        (0.9, -3.0, 0, False),
        (-0.9, -3.0, 0, False),
        (0.5, 1.5, 0, True),
        (2.0, 0.5, 0, True),
        (-1.9, 0.5, 2, False),
        (2.0, -2.0, 0, True),
        (-2.0, -3.0, 1, False),
    ],
)
def test_outcomes_by_one_sided_multipliers(a: float, b: float, rounds: int, opens: bool) -> None:
    """Known regions of the border-collision normal form of one state (check values, section 5)."""
    found = outcome(a, b, 1)
    assert (found.rounds, found.opens) == (rounds, opens)


def test_point_of_a_longer_cycle_touches_a_limit() -> None:
    """The logistic map limited at 7/10: its 2-cycle reaches the limit where 0.84 r^2 - 1.2 r - 4 = 0.

    The upper point (r + 1 + sqrt((r + 1)(r - 3)))/(2 r) is 7/10 there; the multiplier goes from
    4 + 2 r - r^2 to 0.
    """
    system = own_map("min(r*x*(1 - x), 0.7)", low="0")
    result = click(system, "3.0104", "0.01")
    onset = result.onsets[0]
    assert (onset.kind, onset.status) == (Kind.BORDER_COLLISION, Status.PROVED)
    assert (onset.period_before, onset.period_after) == (2, 2)

    def residue(r: Fraction) -> Fraction:
        return Fraction("0.84") * r**2 - Fraction("1.2") * r - 4

    assert residue(Fraction(onset.lower)) < 0 < residue(Fraction(onset.upper))
    assert "one of the 2 points of the cycle" in onset.consequence.lower()
    assert "r*x*(1 - x) = 0.7" in onset.consequence
    assert "border collision of period 2" in result.message
    multiplier = 4 + 2 * float(onset.value) - float(onset.value) ** 2
    assert onset.consequence.count(f"{multiplier:.6g}") == 1
    finish(verify_onset(system, onset))


def test_jump_ends_a_cycle() -> None:
    """Where the formula jumps the cycle ends: x/2 + r reaches the step at x = 1 when r = 1/2 exactly."""
    system = own_map("x/2 + r + floor(x)/3", low="0", high="3")
    onset = click(system, "0.49", "0.2").onsets[0]
    assert (onset.kind, onset.status, onset.period_after) == (Kind.BORDER_COLLISION, Status.PROVED, 0)
    assert _holds(onset, Fraction(1, 2))
    assert "x = 1" in onset.consequence
    assert "the formula jumps there, so the cycle ends" in onset.consequence
    finish(verify_onset(system, onset))


def test_two_surfaces_at_once_are_not_proved() -> None:
    """A corner written twice, by x and by 2 x, is two surfaces touched at once: estimated."""
    onset = click(own_map("0.5*x + r + min(0, x)/9 + min(0, 2*x)/9"), "0.02", "0.5").onsets[0]
    assert (onset.kind, onset.status) == (Kind.BORDER_COLLISION, Status.ESTIMATED)
    assert "second switching surface" in onset.reason
    assert Fraction(onset.lower) <= 0 <= Fraction(onset.upper)


def _damaged(onset: Onset) -> list[Onset]:
    moved = {
        end: f"{int((Fraction(getattr(onset, end)) + Fraction(1, 10**15)) * 10**40)}e-40"
        for end in ("lower", "upper")
    }
    before, after = onset.period_before, onset.period_after
    return [
        replace(onset, **moved),
        replace(onset, period_after=2 * before if after != 2 * before else before),
        replace(onset, period_before=3 * before, period_after=3 * after),
        replace(onset, states=(("x", "0.31234567890123456789"),)),
        *(
            replace(onset, kind=kind, period_before=before, period_after=later)
            for kind, later in (
                (Kind.FLIP, 2 * before),
                (Kind.PITCHFORK, before),
                (Kind.TRANSCRITICAL, before),
                (Kind.CRISIS, before),
            )
        ),
        replace(onset, kind=Kind.FOLD, period_before=0, criticality=Criticality.NOT_APPLICABLE),
    ]


def test_damaged_claims_are_refused() -> None:
    """A moved value, another kind, other periods and another point are not proved."""
    system = own_map(TWO_PIECES.format(a="0.5", b="-1.5"))
    onset = click(system, "0.02", "0.5").onsets[0]
    for claim in _damaged(onset):
        # A smooth kind's proof does not even begin on a surface.
        with pytest.raises((NotProved, SwitchingTouched)):
            finish(verify_onset(system, claim))


def test_smooth_onset_is_not_taken_for_a_border_collision() -> None:
    """A proved flip with its kind swapped is refused, on a smooth map and on a limited one."""
    for system in (system_of("logistic"), own_map("min(r*x*(1 - x), 0.9)", low="0")):
        onset = click(system, "3.01", "0.1").onsets[0]
        assert (onset.kind, onset.status) == (Kind.FLIP, Status.PROVED)
        with pytest.raises(NotProved):
            finish(verify_onset(system, replace(onset, kind=Kind.BORDER_COLLISION)))
