"""Pitchforks and transcritical points of maps of several states, against values that can be written down."""

from __future__ import annotations

from dataclasses import replace
from fractions import Fraction

import pytest
from mpmath import mp, mpf, workdps
from running import finish, system_of
from test_many_exact import click, own_system

from tinemark.onsets.decimals import fixed_text
from tinemark.onsets.engine import survey
from tinemark.onsets.many_map import many_map
from tinemark.onsets.many_symmetry import Involution, commutes
from tinemark.onsets.many_verification import verify_onset_many
from tinemark.onsets.proofs import NotProved
from tinemark.onsets.results import Criticality, Kind, Onset, Status, SurveyRequest
from tinemark.systems.expression import ZERO
from tinemark.systems.system import System


def assert_crossing(onset: Onset, value: str, kind: Kind, period: int) -> None:
    assert (onset.kind, onset.period_before, onset.period_after) == (kind, period, period)
    assert Fraction(onset.lower) <= Fraction(value) <= Fraction(onset.upper)
    assert onset.half_width < Fraction(1, 10**17)
    assert onset.status is Status.PROVED
    assert dict(onset.evidence)["multiplier exactly +1"]


def out_of_step() -> str:
    """Where the patches' alternating cycle (x, y), (y, x) takes up its stability, at e = 0.1.

    With s = x + y, d = x - y and k = 1 - 2 e, the map seen in the mirror is s' = r (s - (s^2 + d^2)/2),
    d' = -k r d (1 - s). Its fixed point has s = 1 + 1/(k r), and multiplier -1 where
    k r^2 d^2 = 2 (1/k - 1): (r + 1/k)(r - 2 - 1/k) = 2 (1 - k)/k^2, so r = 1 + sqrt(5.6875).
    """
    with workdps(40):
        return mp.nstr(1 + mp.sqrt(mpf("5.6875")), 36)


def test_the_patches_leave_and_regain_the_exchange_symmetry() -> None:
    onset = click(system_of("two_patch"), "3.39", "0.1", observed="0.8", height="0.5")[0]
    assert_crossing(onset, out_of_step(), Kind.PITCHFORK, 2)
    assert onset.criticality is Criticality.SUBCRITICAL
    assert "(x, y) -> (y, x)" in onset.consequence
    assert "half" not in dict(onset.evidence)["commutes with the symmetry"]


def test_the_patches_fill_up_at_one() -> None:
    """The empty state has multipliers r and (1 - 2 e) r (exact)."""
    for near in ("0.98", "1.01"):
        onset = click(system_of("two_patch"), near, "0.2")[0]
        assert_crossing(onset, "1", Kind.TRANSCRITICAL, 1)
        assert "the one at x = 0, y = 0 is stable below" in onset.consequence


def test_a_lagged_stock_appears_at_one() -> None:
    """Delayed logistic growth: the empty state has multipliers r and 0 (exact)."""
    onset = click(system_of("delayed_logistic"), "1.01", "0.2")[0]
    assert_crossing(onset, "1", Kind.TRANSCRITICAL, 1)


def test_a_predator_that_comes_in() -> None:
    """Without predators the stock is 1 - 1/r, which moves; they come in where 2 (1 - 1/r) = 1: r = 2."""
    system = own_system({"x": "r*x*(1 - x) - x*y", "y": "2*x*y"}, "0", "1", "0.3")
    onset = click(system, "2.01", "0.2")[0]
    assert_crossing(onset, "2", Kind.TRANSCRITICAL, 1)
    assert "y = 0" in onset.consequence
    # p B(q, q)/2 = d(2 x)/dx q_x with q = (q_x, 1), q_x = M_xy/(1 - M_xx) = -x/(r - 1) = -1/2: 2 q_x = -1;
    # in scaled states, where the ranges of both are 1, nothing changes.
    bend = dict(onset.evidence)["the branches cross at an angle: curvature"]
    assert float(bend.split()[0]) == pytest.approx(-1, rel=1e-5)


def test_a_predator_comes_in_on_a_cycle_of_two() -> None:
    """The points of logistic prey's 2-cycle have the product (r + 1)/r^2, so that predators who multiply by
    1.6 x come in where 2.56 (r + 1) = r^2."""
    system = own_system({"x": "r*x*(1 - x) - x*y/10", "y": "1.6*x*y"}, "0", "1", "0.3")
    with workdps(40):
        value = mp.nstr((mpf("2.56") + mp.sqrt(mpf("2.56") ** 2 + 4 * mpf("2.56"))) / 2, 36)
    onset = click(system, str(Fraction(value) + Fraction(1, 200)), "0.1")[0]
    assert_crossing(onset, value, Kind.TRANSCRITICAL, 2)


def test_a_pitchfork_of_the_whole_sign() -> None:
    """x' = r x - x^3 splits at r = 1 into ±sqrt(r - 1); branches cross there, none turns round in a fold."""
    system = own_system({"x": "r*x - x**3", "y": "0.5*y + 0.1*x"}, "-1", "1")
    (onset,) = click(system, "1.02", "0.3", observed="0.1", height="1")
    assert_crossing(onset, "1", Kind.PITCHFORK, 1)
    assert onset.criticality is Criticality.SUPERCRITICAL
    assert "(x, y) -> (-x, -y)" in onset.consequence


def test_an_unstable_pair_at_a_pitchfork() -> None:
    system = own_system({"x": "r*x + x**3 - x**5", "y": "0.5*y"}, "-1", "1", "0.01")
    (onset,) = click(system, "0.98", "0.1", observed="0", height="0.5")
    assert_crossing(onset, "1", Kind.PITCHFORK, 1)
    assert onset.criticality is Criticality.SUBCRITICAL
    assert "jump" in onset.consequence


def test_six_states_in_three_pairs() -> None:
    """Three coupled pairs of which one splits: x' = r x - x^3 is at its pitchfork at r = 1 (exact)."""
    formulas = {"x": "r*x - x**3", "y": "x/2 + y/3"}
    formulas |= {"u": "v/4 + x**2/9", "v": "u/5", "s": "w/3", "w": "s/2 + y**2"}
    (onset,) = click(own_system(formulas), "1.02", "0.2", observed="0.1", height="1")
    assert_crossing(onset, "1", Kind.PITCHFORK, 1)


def test_area_is_preserved_at_a_pitchfork() -> None:
    """The standard map's 2-cycle loses its symmetry at 2 pi (Chirikov 1979, from memory; exact)."""
    system = own_system({"x": "x + y + r*sin(x)", "y": "y + r*sin(x)"}, "-4", "4")
    onset = click(system, "6.28", "0.5", observed="1.57", height="2")[0]
    with workdps(40):
        value = mp.nstr(2 * mp.pi, 36)
    assert (onset.kind, onset.period_before, onset.status) == (Kind.PITCHFORK, 2, Status.PROVED)
    assert Fraction(onset.lower) <= Fraction(value) <= Fraction(onset.upper)
    assert "both multipliers exactly +1" in dict(onset.evidence)
    assert "2*pi" in onset.consequence


def test_a_crossing_without_an_identity_is_estimated() -> None:
    """Put on a curve that the parameter moves, the crossing at r = 1 stays there, and nothing shows why."""
    z = "(x - r**3/8)"
    system = own_system({"x": f"r**3/8 + r*{z} - {z}**2", "y": "y/2 + x/7"})
    (onset,) = click(system, "1.02", "0.2")
    assert onset.kind is Kind.TRANSCRITICAL
    assert onset.status is Status.ESTIMATED
    assert "no identity" in onset.reason
    assert Fraction(onset.lower) <= 1 <= Fraction(onset.upper)
    assert onset.half_width < Fraction(1, 10**15)


def test_branches_that_miss_each_other_are_no_crossing() -> None:
    """A push of 1e-4 makes a fold of the pitchfork: 4 (r - 1)^3 = 27 h^2 (cusp, exact)."""
    system = own_system({"x": "r*x - x**3 + 0.0001", "y": "y/2 + x/7"})
    found = click(system, "1.003", "0.02", observed="-0.03", height="0.2")
    with workdps(30):
        value = mp.nstr(1 + mp.cbrt(27 * mpf("1e-8") / 4), 28)
    assert [onset.kind for onset in found] == [Kind.FOLD]
    assert abs(found[0].value_fraction - Fraction(value)) < Fraction(1, 10**17)


@pytest.fixture(scope="module")
def fork() -> tuple[System, Onset]:
    system = system_of("two_patch")
    return system, click(system, "3.39", "0.1", observed="0.8", height="0.5")[0]


@pytest.fixture(scope="module")
def crossing() -> tuple[System, Onset]:
    system = own_system({"x": "r*x*(1 - x) - x*y", "y": "2*x*y"}, "0", "1", "0.3")
    return system, click(system, "2.01", "0.2")[0]


@pytest.mark.parametrize("which", ["fork", "crossing"])
def test_damaged_claims_are_refused(which: str, request: pytest.FixtureRequest) -> None:
    system, onset = request.getfixturevalue(which)
    finish(verify_onset_many(system, onset))
    other = Kind.TRANSCRITICAL if onset.kind is Kind.PITCHFORK else Kind.PITCHFORK
    period = onset.period_before
    shift = onset.value_fraction / 10**15
    moved = {
        name: fixed_text(int((Fraction(getattr(onset, name)) + shift) * 10**60), 60)
        for name in ("value", "lower", "upper")
    }
    for damaged in (
        replace(onset, kind=other),
        replace(onset, kind=Kind.FOLD, period_before=0),
        replace(onset, kind=Kind.FLIP, period_after=2 * period),
        replace(onset, period_before=2 * period, period_after=2 * period),
        replace(onset, period_before=3 * period, period_after=3 * period),
        replace(onset, **moved),
    ):
        with pytest.raises(NotProved):
            finish(verify_onset_many(system, damaged))


def test_a_survey_names_them() -> None:
    request = SurveyRequest(system_of("two_patch"), "r", Fraction("0.9"), Fraction("1.4"), 1)
    onsets = finish(survey(request)).onsets
    # The empty state's multipliers are r and (1 - 2 e) r, the latter across x = y (exact).
    assert [(onset.kind, round(float(onset.value), 9)) for onset in onsets] == [
        (Kind.TRANSCRITICAL, 1.0),
        (Kind.PITCHFORK, 1.25),
    ]
    assert all(onset.status is Status.PROVED for onset in onsets)


@pytest.mark.parametrize(
    ("formulas", "order", "signs", "holds"),
    [
        ({"x": "r*x*(1 - x) + y", "y": "r*y*(1 - y) + x"}, (1, 0), (1, 1), True),
        ({"x": "r*x*(1 - x) + y", "y": "r*y*(1 - y) + 1.000001*x"}, (1, 0), (1, 1), False),
        ({"x": "sin(r*x) + y**3", "y": "x/2"}, (0, 1), (-1, -1), True),
        ({"x": "sin(r*x) + y**2", "y": "y/2"}, (0, 1), (1, -1), True),
        ({"x": "sin(r*x) + y**2", "y": "x/2"}, (0, 1), (-1, -1), False),
    ],
)
def test_symmetries_are_exact(
    formulas: dict[str, str], order: tuple[int, ...], signs: tuple[int, ...], holds: bool
) -> None:
    many = many_map(own_system(formulas), "r")
    assert commutes(many, Involution(order, signs, (ZERO, ZERO))) is holds
