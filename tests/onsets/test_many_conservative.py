"""Flips of maps that preserve areas: both multipliers at -1, proved as such, and no others called so."""

from __future__ import annotations

from dataclasses import replace
from fractions import Fraction

import numpy as np
import pytest
from mpmath import mp, mpf, workdps
from running import climb, finish, system_of
from test_many_exact import assert_is, click, own_system

from tinemark.onsets.many_conservative import area_factor, preserves_areas
from tinemark.onsets.many_cycles import Cycle
from tinemark.onsets.many_map import float_many_map, many_map
from tinemark.onsets.many_onset import settle_onset
from tinemark.onsets.many_verification import verify_onset_many
from tinemark.onsets.proofs import NotProved
from tinemark.onsets.results import Criticality, Kind, Onset, Status
from tinemark.systems.system import System


def conservative_henon() -> System:
    return system_of("henon", (("b", "-1"),))


@pytest.fixture(scope="module")
def doubled() -> Onset:
    (onset,) = click(conservative_henon(), "4.01", "0.2")
    return onset


def test_first_two_flips_in_closed_form(doubled: Onset) -> None:
    """3 (1 - b)^2/4 = 3 and (1 - b)^2 + (1 + b)^2/4 = 4 at b = -1 (exact; Hénon 1976)."""
    (first,) = click(conservative_henon(), "3.02", "0.2")
    for onset, value, period in ((first, 3, 1), (doubled, 4, 2)):
        assert_is(onset, Fraction(value), Kind.FLIP, period, 2 * period)
        assert onset.criticality is Criticality.SUPERCRITICAL
        assert "both multipliers exactly -1" in dict(onset.evidence)
        assert "no other multiplier on the unit circle" not in dict(onset.evidence)
        assert onset.consequence.startswith("conservative doubling")


@pytest.mark.parametrize(("bend", "soft"), [(1, True), (-1, False)])
def test_criticality_against_a_cycle_written_down(bend: int, soft: bool) -> None:
    """x' = r x + bend x^3 - y, y' = x. Trace r at the origin, so a flip at r = -2; its alternating cycle has
    r + bend s^2 = -2, so it is there for r < -2, where the origin is unstable, just when bend > 0."""
    system = own_system({"x": f"r*x + ({bend})*x**3 - y", "y": "x"}, "-1", "1", "0.01")
    float_map = float_many_map(many_map(system, "r"))
    rough = Cycle(np.zeros((1, 2)), -1.98)
    onset = finish(settle_onset(float_map, Kind.FLIP, rough, 20, float_map.scales(rough.r), 0.1)).onset
    assert_is(onset, Fraction(-2), Kind.FLIP, 1, 2)
    assert onset.criticality is (Criticality.SUPERCRITICAL if soft else Criticality.SUBCRITICAL)
    # The trace is r itself.
    speed = dict(onset.evidence)["the trace crosses -2 with speed"]
    assert float(speed.split()[0]) == pytest.approx(1, rel=1e-5)


def test_a_flip_of_many_levels_by_an_independent_solver() -> None:
    """Fourth level at b = -1: mpmath's secant method on x = f^8(x), trace = -2 of a product of matrices."""
    level = climb(conservative_henon(), "2.9", "4.3", levels=4).levels[-1].onset
    assert level.status is Status.PROVED
    rough = dict(level.states)

    def residual(x: mpf, y: mpf, a: mpf) -> tuple[mpf, ...]:
        start, matrix = (x, y), mp.eye(2)
        for _ in range(8):
            matrix = mp.matrix([[-2 * a * x, 1], [-1, 0]]) * matrix
            x, y = 1 - a * x**2 + y, -x
        return x - start[0], y - start[1], 2 + matrix[0, 0] + matrix[1, 1]

    with workdps(40):
        guess = (mpf(rough["x"][:10]), mpf(rough["y"][:10]), mpf(level.value[:9]))
        text = mp.nstr(mp.findroot(residual, guess)[2], 36)
    assert Fraction(level.lower) <= Fraction(text) <= Fraction(level.upper)


def test_chirikovs_fixed_point() -> None:
    """p' = p + K sin x, x' = x + p': the fixed point x = pi flips at K = 4 (Chirikov 1979, from memory)."""
    system = own_system({"x": "x + y + r*sin(x)", "y": "y + r*sin(x)"}, "-1", "4", "0.1")
    found = click(system, "4.01", "0.2", observed="3.14", height="2")
    assert_is(found[0], Fraction(4), Kind.FLIP, 1, 2)


def test_an_asymmetric_cycle_of_the_standard_map() -> None:
    """The 2-cycle that has lost its symmetry flips at 2 sqrt(1 + pi^2) (exact; check values, section 5)."""
    system = own_system({"x": "x + y + r*sin(x)", "y": "y + r*sin(x)"}, "-4", "4")
    onset = click(system, "6.595", "0.05", observed="1.9", height="2")[0]
    with workdps(40):
        value = Fraction(mp.nstr(2 * mp.sqrt(1 + mp.pi**2), 36))
    assert_is(onset, value, Kind.FLIP, 2, 4)


@pytest.mark.parametrize(("near", "period"), [("4.1204", 4), ("4.13436", 8)])
def test_clicks_on_later_levels(near: str, period: int) -> None:
    """No orbit settles there: the doubled cycles are reached from the ones they split from."""
    (onset,) = click(conservative_henon(), near, "0.001")
    assert (onset.kind, onset.period_before, onset.status) == (Kind.FLIP, period, Status.PROVED)


def test_damaged_claims_are_refused(doubled: Onset) -> None:
    system = conservative_henon()
    finish(verify_onset_many(system, doubled))
    for damaged in (
        replace(doubled, criticality=Criticality.SUBCRITICAL),
        replace(doubled, period_before=4, period_after=8),
        replace(doubled, period_before=1, period_after=2),
        replace(doubled, kind=Kind.FOLD, period_before=0, period_after=2),
        replace(doubled, kind=Kind.NEIMARK_SACKER, period_after=2),
    ):
        with pytest.raises(NotProved):
            finish(verify_onset_many(system, damaged))


def test_two_systems_side_by_side_do_not_preserve_areas() -> None:
    """Equal logistic maps that do not touch have both multipliers at -1 at r = 3; areas shrink elsewhere."""
    system = own_system({"x": "r*x*(1 - x)", "y": "r*y*(1 - y)"}, "0", "1")
    found = click(system, "3.004", "0.05", observed="0.667", height="0.2")
    assert found[0].status is Status.ESTIMATED
    assert "two multipliers meet at -1" in found[0].reason
    assert "areas" not in found[0].reason


@pytest.mark.parametrize(
    ("formulas", "factor"),
    [
        ({"x": "1 - r*x**2 + y", "y": "-x"}, 1),
        ({"x": "1 - r*x**2 + y", "y": "x"}, -1),
        ({"x": "x + y + r*sin(x)", "y": "y + r*sin(x)"}, 1),
        ({"x": "1 - r*x**2 + y", "y": "-0.999999999999*x"}, 0),
        ({"x": "r*x", "y": "y/r + x**2"}, 1),
        ({"x": "r*x - x**3 - y", "y": "x", "z": "z/2"}, 0),
    ],
)
def test_which_maps_preserve_areas(formulas: dict[str, str], factor: int) -> None:
    many = many_map(own_system(formulas), "r")
    assert area_factor(many) == factor
    # A map that turns areas over keeps them after every second step.
    assert [preserves_areas(many, period) for period in (1, 2)] == [factor == 1, factor != 0]
