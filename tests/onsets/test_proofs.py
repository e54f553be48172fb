"""What the prover claims, and what it must refuse."""

from __future__ import annotations

from dataclasses import replace
from fractions import Fraction
from typing import Any

import flint
import pytest
from known_onsets import ladder
from running import click, climb, finish, own_map, system_of

from tinemark.onsets.one_map import one_map
from tinemark.onsets.polish import Lost, Rough, settle_onset
from tinemark.onsets.proofs import NotProved
from tinemark.onsets.results import Criticality, Kind, Onset, Status
from tinemark.onsets.verification import verify_onset
from tinemark.systems.errors import NoOnsetFound, SwitchingTouched
from tinemark.systems.system import System


def _settle(system: System, kind: Kind, period: int, x: Any, r: Any, digits: int = 20) -> Onset:
    one = one_map(system, system.diagram_parameter)
    return finish(settle_onset(one, Rough(kind, period, Fraction(x), Fraction(r)), digits)).onset


def _finding(onset: Onset, claim: str) -> float:
    return float(dict(onset.evidence)[claim])


@pytest.fixture(scope="module")
def onsets() -> dict[str, Onset]:
    """A fixed point's flip, a flip of period 8, and a fold, all proved."""
    system = system_of("logistic")
    levels = climb(system, "2.8", "4", levels=4).levels
    fold = click(system, "3.8285", "0.01").onsets[0]
    return {"first": levels[0].onset, "period 8": levels[3].onset, "fold": fold}


@pytest.mark.parametrize("name", ["first", "period 8", "fold"])
def test_printed_onset_is_verified(onsets: dict[str, Onset], name: str) -> None:
    """The printed decimals alone are enough to prove the onset again."""
    onset = onsets[name]
    proof = finish(verify_onset(system_of("logistic"), onset))
    low, high = proof.parameter
    assert Fraction(onset.lower) < low < high < Fraction(onset.upper)


def _moved(onset: Onset, by: Fraction) -> Onset:
    texts = {end: _decimal(Fraction(getattr(onset, end)) + by) for end in ("value", "lower", "upper")}
    return replace(onset, **texts)


def _decimal(value: Fraction) -> str:
    return f"{value.numerator * 10**40 // value.denominator}e-40"


@pytest.mark.parametrize("name", ["first", "period 8", "fold"])
@pytest.mark.parametrize("by", [Fraction(1, 10**15), Fraction(-1, 10**15), Fraction(1, 10**20)], ids=float)
def test_moved_value_is_refused(onsets: dict[str, Onset], name: str, by: Fraction) -> None:
    """A value moved by 1e-15, or even 1e-20, is not proved."""
    moved = _moved(onsets[name], by)
    with pytest.raises(NotProved):
        finish(verify_onset(system_of("logistic"), moved))


@pytest.mark.parametrize("name", ["first", "period 8", "fold"])
def test_other_claims_are_refused(onsets: dict[str, Onset], name: str) -> None:
    """A wrong period, the other kind, the other criticality, another cycle point, another system."""
    system, onset = system_of("logistic"), onsets[name]
    before, after = onset.period_before, onset.period_after
    damaged = [
        replace(onset, period_before=2 * before, period_after=2 * after),
        replace(onset, period_before=3 * before, period_after=3 * after),
        replace(onset, states=(("x", "0.61234567890123456789"),)),
        replace(onset, states=()),
        replace(onset, lower=onset.upper, upper=onset.lower),
    ]
    if onset.kind is Kind.FLIP:
        damaged.append(replace(onset, criticality=Criticality.SUBCRITICAL))
        damaged.append(replace(onset, kind=Kind.FOLD, period_before=0, period_after=before))
    else:
        damaged.append(replace(onset, kind=Kind.FLIP, period_before=after, period_after=2 * after))
    for claim in damaged:
        with pytest.raises(NotProved):
            finish(verify_onset(system, claim))
    with pytest.raises(NotProved):
        finish(verify_onset(system_of("cubic_hump"), onset))


@pytest.mark.parametrize("odd", [3, 5, 15])
def test_odd_multiple_of_a_period_is_refused(odd: int) -> None:
    """A fixed point with multiplier -1 solves the equations of every odd period; least period catches it."""
    with pytest.raises(Lost, match="least period"):
        _settle(system_of("logistic"), Kind.FLIP, odd, Fraction(2, 3), Fraction(3))


def test_flip_coefficient_of_the_logistic_map() -> None:
    """At r = 3 the coefficient f_xx^2/4 + f_xxx/6 is 9 and the multiplier 2 - r has speed -1 (exact)."""
    onset = click(system_of("logistic"), "3.01", "0.1").onsets[0]
    assert onset.criticality is Criticality.SUPERCRITICAL
    assert _finding(onset, "flip coefficient") == pytest.approx(9, abs=1e-4)
    assert _finding(onset, "crosses -1 with speed") == pytest.approx(-1, abs=1e-4)


@pytest.mark.parametrize(
    ("formula", "criticality", "coefficient"),
    [
        # f = -r x + a x^2 + c x^3 at x = 0, r = 1: coefficient a^2 + c.
        ("-r*x + x**2/2 - x**3", Criticality.SUBCRITICAL, -0.75),
        ("-r*x + x**2/2 + x**3", Criticality.SUPERCRITICAL, 1.25),
        ("-r*x + x**2 - x**3/2", Criticality.SUPERCRITICAL, 0.5),
        ("-r*sinh(x)", Criticality.SUBCRITICAL, -1 / 6),
        ("-r*sin(x)", Criticality.SUPERCRITICAL, 1 / 6),
    ],
)
def test_criticality_of_own_maps(formula: str, criticality: Criticality, coefficient: float) -> None:
    """The sign of the flip coefficient, worked out by hand, decides how the flip is called."""
    onset = _settle(own_map(formula), Kind.FLIP, 1, Fraction(0), Fraction(1))
    assert onset.status is Status.PROVED
    assert Fraction(onset.lower) < 1 < Fraction(onset.upper)
    assert onset.criticality is criticality
    assert _finding(onset, "flip coefficient") == pytest.approx(coefficient, rel=1e-4)


@pytest.mark.parametrize(
    ("formula", "x", "r"),
    [
        ("r*x - x**3", "0.01", "1.001"),  # pitchfork of a symmetric map at r = 1
        ("r*x - x**3", "0", "1"),
        ("r*x*(1 - x**2)", "0.02", "1.0004"),
        ("r*x*(1 - x)", "0.001", "1.001"),  # transcritical at r = 1
        ("r*x*(1 - x)", "0", "1"),
        ("x + r - x**3", "0.01", "0.001"),  # hysteresis point: tangency of third order
    ],
)
def test_pitchfork_and_transcritical_points_are_no_folds(formula: str, x: str, r: str) -> None:
    """Multiplier +1 alone does not make a fold: the equations are singular and nothing is reported."""
    with pytest.raises(Lost):
        _settle(own_map(formula), Kind.FOLD, 1, x, r)


def test_true_fold_of_an_own_map() -> None:
    """x + r - x^2 has its fold at r = 0, x = 0 exactly: an onset at zero has an enclosure around it."""
    onset = _settle(own_map("x + r - x**2"), Kind.FOLD, 1, "0.001", "0.001")
    assert onset.status is Status.PROVED
    assert Fraction(onset.lower) < 0 < Fraction(onset.upper)
    assert Fraction(onset.upper) - Fraction(onset.lower) < Fraction(1, 10**20)


def test_degenerate_flip_is_not_proved() -> None:
    """A straight line flips without a cascade: no coefficient, so no proof, and the reason is given."""
    onset = _settle(own_map("-r*x"), Kind.FLIP, 1, "0.01", "1.01")
    assert onset.status is Status.ESTIMATED
    assert onset.criticality is Criticality.UNDECIDED
    assert "degenerate" in onset.reason


def test_tent_map_is_not_proved() -> None:
    """The tent's flip at mu = 1 sits on its corner: estimated at best."""
    system = system_of("tent")
    onset = _settle(system, Kind.FLIP, 1, "0.51", "1.01")
    assert onset.status is Status.ESTIMATED
    assert "switching surface" in onset.reason
    assert Fraction(onset.lower) <= 1 <= Fraction(onset.upper)
    try:
        found = click(system, "1.02", "0.2").onsets
    except NoOnsetFound:
        found = ()
    assert all(each.status is Status.ESTIMATED for each in found)


@pytest.mark.parametrize(
    "formula",
    [
        "r*x*(1 - x) if x <= 2/3 else r*x*(1 - x)",  # the surface is the cycle at r = 3 itself
        "r*x*(1 - x) + 0*abs(x - 2/3)",
        "r*x*(1 - x) + 0*floor(3*x)",
        "max(r*x*(1 - x), r*x*(1 - x) + (x - 2/3)**3)",
    ],
)
def test_orbit_on_a_switching_surface_is_not_proved(formula: str) -> None:
    """Where the cycle at the onset touches a switching surface the value is estimated, with the reason."""
    onset = _settle(own_map(formula, low="0"), Kind.FLIP, 1, "0.667", "2.99")
    assert onset.status is Status.ESTIMATED
    assert "switching surface" in onset.reason
    assert Fraction(onset.lower) <= 3 <= Fraction(onset.upper)


@pytest.mark.parametrize(
    ("formula", "low", "x", "r"),
    [
        ("r*x*(1 - x) - (floor(3*x) - 2)/1000", "0", "0.667", "2.999"),
        # atan2 jumps from pi to -pi across its cut, and its derivatives do not show it.
        ("-r*x + x**2 + (atan2(x, -1) - pi)/10", "-1", "0.001", "0.901"),
        ("-r*x + x**2 + (atan2(-x, -1) + pi)/10", "-1", "0.001", "1.101"),
    ],
)
def test_jump_is_never_proved(formula: str, low: str, x: str, r: str) -> None:
    """A jump at the cycle shows in no derivative, only in the surface: found or not, it is not proved."""
    try:
        onset = _settle(own_map(formula, low=low), Kind.FLIP, 1, x, r)
    except Lost:
        return
    assert onset.status is Status.ESTIMATED


def test_angle_away_from_its_cut_is_proved() -> None:
    """atan2 is as smooth as any function off its cut: x/r at small angles flips where -r x would."""
    onset = _settle(own_map("-r*atan2(x, 1) + x**2"), Kind.FLIP, 1, "0.01", "1.01")
    assert onset.status is Status.PROVED
    assert Fraction(onset.lower) < 1 < Fraction(onset.upper)


def test_piecewise_map_away_from_its_surface_is_proved() -> None:
    """A formula that switches elsewhere is smooth along the cycle, and proved there."""
    onset = _settle(own_map("r*x*(1 - x) if x > 0.1 else 0.3*r*x", low="0"), Kind.FLIP, 1, "0.66", "2.99")
    assert onset.status is Status.PROVED
    assert Fraction(onset.lower) < 3 < Fraction(onset.upper)


def test_verification_on_a_surface_raises() -> None:
    """A claim of a cycle on a switching surface cannot be verified."""
    onset = click(system_of("logistic"), "3.01", "0.1").onsets[0]
    with pytest.raises(SwitchingTouched):
        finish(verify_onset(own_map("r*x*(1 - x) if x <= 2/3 else r*x*(1 - x)", low="0"), onset))


def test_small_and_large_scales() -> None:
    """Units do not matter: the logistic map with a state of 1e-9 and a parameter of 1e-6, and far larger."""
    small = own_map("1e6*r*x*(1 - x/1e-9)", start="3e-10", low="0", high="1e-9")
    onset = _settle(small, Kind.FLIP, 1, Fraction("6.6e-10"), Fraction("2.99e-6"))
    assert onset.status is Status.PROVED
    assert Fraction(onset.lower) < Fraction("3e-6") < Fraction(onset.upper)
    assert Fraction(onset.upper) - Fraction(onset.lower) < Fraction("3e-26")
    large = own_map("1e-8*r*x*(1 - x/1e12)", start="3e11", low="0", high="1e12")
    onset = _settle(large, Kind.FLIP, 1, Fraction("6.6e11"), Fraction("2.99e8"))
    assert onset.status is Status.PROVED
    assert Fraction(onset.lower) < Fraction("3e8") < Fraction(onset.upper)


def test_precision_is_left_as_it_was() -> None:
    """Finished, refused or dropped half-way, a proof leaves the process's precision alone."""
    before = flint.ctx.prec
    one = one_map(system_of("logistic"), "r")
    known = ladder("logistic").onsets[11]
    job = settle_onset(one, Rough(Kind.FLIP, 2048, Fraction("0.49999390740"), Fraction(known)), 30)
    for _ in range(3):
        next(job)
        assert flint.ctx.prec == before
    job.close()
    assert flint.ctx.prec == before
    with pytest.raises(Lost):
        _settle(system_of("logistic"), Kind.FLIP, 3, Fraction(2, 3), Fraction(3))
    assert flint.ctx.prec == before
