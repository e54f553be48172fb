"""Branches of a view: against closed forms, published onsets, and a polyline's own promise to be smooth."""

from __future__ import annotations

from fractions import Fraction

import numpy as np
import pytest
from known_onsets import WINDOWS
from running import finish, own_map, system_of

from tinemark.onsets import branch_survey
from tinemark.onsets.engine import branches
from tinemark.onsets.results import BranchRequest, BranchResult, Kind, Step
from tinemark.systems.errors import NoOnsetFound, TinemarkError
from tinemark.systems.system import System
from tinemark.systems.system_file import read_system_text

PIXEL = 1 / 800


def request(system: System, view: tuple[str, str, str, str], most: int = 8) -> BranchRequest:
    left, right, bottom, top = map(Fraction, view)
    return BranchRequest(system, system.diagram_parameter, system.observe, left, right, bottom, top, most)


def followed(system: System, view: tuple[str, str, str, str], most: int = 8) -> BranchResult:
    return finish(branches(request(system, view, most)))


def onsets(result: BranchResult, view: tuple[str, str, str, str], kind: Kind, period: int) -> list[float]:
    left, right = float(Fraction(view[0])), float(Fraction(view[1]))
    return [left + share * (right - left) for k, p, share, _ in result.passed if k is kind and p == period]


LOGISTIC = ("2.8", "4", "0", "1")


@pytest.fixture(scope="module")
def logistic() -> BranchResult:
    return followed(system_of("logistic"), LOGISTIC)


def test_the_steady_state_and_the_two_cycle_have_their_closed_forms(logistic) -> None:
    seen = set()
    for piece in logistic.pieces:
        if piece.period > 2:
            continue
        r = 2.8 + 1.2 * np.array(piece.parameter)
        inside = (r >= 2.8) & (r <= 4)
        points = np.sort(np.array(piece.observed), axis=0)
        if piece.period == 1:
            if np.allclose(points, 0, atol=1e-9):
                continue
            assert np.allclose(points[0], 1 - 1 / r, atol=1e-9)
            multiplier = 2 - r
        else:
            # (r + 1 -+ sqrt((r - 3)(r + 1))) / 2r; near the flip the root takes the square root of an error.
            root = np.sqrt(np.maximum((r - 3) * (r + 1), 0))
            assert np.allclose(points, [(r + 1 - root) / 2 / r, (r + 1 + root) / 2 / r], atol=2e-4)
            multiplier = 4 + 2 * r - r * r
        got = np.array(piece.multipliers)
        assert np.allclose(got[inside, 0], multiplier[inside], atol=1e-4)
        assert np.all(got[:, 1] == 0)
        assert np.all(np.abs(got[1:-1, 0]) <= 1) == piece.stable
        seen.add((piece.period, piece.stable))
    assert seen == {(1, True), (1, False), (2, True), (2, False)}


def test_a_polyline_strays_less_than_a_pixel_from_its_curve(logistic) -> None:
    checked = 0
    for piece in logistic.pieces:
        if piece.period != 2:
            continue
        r = 2.8 + 1.2 * np.array(piece.parameter)
        points = np.sort(np.array(piece.observed), axis=0)
        for share in (0.25, 0.5, 0.75):
            r_between = r[:-1] + share * np.diff(r)
            x = points[:, :-1] + share * np.diff(points, axis=1)
            # The curve as a function of x, which has no square root: r from f(f(x)) = x, x != f(x).
            for row in x:
                # 2-cycle: r^2 x^2 - r(r + 1) x + (r + 1) = 0, its residual over its slope in x is the miss.
                residual = r_between**2 * row**2 - r_between * (r_between + 1) * row + r_between + 1
                slope_x = np.abs(2 * r_between**2 * row - r_between * (r_between + 1))
                slope_r = np.abs(2 * r_between * row**2 - (2 * r_between + 1) * row + 1)
                miss = np.abs(residual) / np.hypot(slope_x, slope_r * 1.2 / 1.6)
                assert np.max(miss) < PIXEL
                checked += len(miss)
    assert checked > 60


def test_onsets_are_passed_where_the_table_of_windows_has_them(logistic) -> None:
    # check_values.md, section 4.4 (recomputed to 28 digits; the table's idea: May 1976, from memory).
    for window in WINDOWS:
        if window.period < 5 or window.fold.startswith("3.738"):
            folds = onsets(logistic, LOGISTIC, Kind.FOLD, window.period)
            flips = onsets(logistic, LOGISTIC, Kind.FLIP, window.period)
            assert min(abs(value - float(window.fold)) for value in folds) < 1e-6
            assert min(abs(value - float(window.flip)) for value in flips) < 1e-6
    assert onsets(logistic, LOGISTIC, Kind.FLIP, 1) == pytest.approx([3], abs=1e-6)
    assert onsets(logistic, LOGISTIC, Kind.FLIP, 2) == pytest.approx([1 + 6**0.5], abs=1e-6)
    assert f"{len(logistic.passed)} onsets" in logistic.message


def test_a_branch_goes_round_its_fold(logistic) -> None:
    pieces = [piece for piece in logistic.pieces if piece.period == 3]
    assert {piece.stable for piece in pieces} == {True, False}
    # Pieces of one branch share their ends, so that what is drawn has no gaps.
    ends = [
        (piece.parameter[place], *(c[place] for c in piece.observed)) for piece in pieces for place in (0, -1)
    ]
    shared = sum(any(a is not b and a == b for b in ends) for a in ends)
    assert shared == 4  # the fold and the flip, each an end of two pieces
    fold = (1 + 8**0.5 - 2.8) / 1.2
    for piece in pieces:
        assert min(piece.parameter) > fold - 1e-9
        assert len(piece.observed) == 3
        assert all(len(curve) == len(piece.parameter) == len(piece.multipliers) for curve in piece.observed)


def test_an_isolated_ring_of_cycles_is_drawn_whole() -> None:
    view = ("-1", "0.6", "-1", "1.1")
    result = followed(system_of("gaussian", (("alpha", "6.2"),)), view, 5)
    # Steady state of exp(-alpha x^2) + beta: flips in closed form, check_values.md, section 5 (R 30).
    flips = onsets(result, view, Kind.FLIP, 1)
    expected = [-0.872644902717710037710046, 0.414417060746122423374133]
    assert flips == pytest.approx([expected[0], expected[1]], abs=1e-6) or flips == pytest.approx(
        [-0.872644902710037710046443489329, expected[1]], abs=1e-6
    )
    # The five-cycle lives between two folds: it appears at one and ends at the other.
    folds = onsets(result, view, Kind.FOLD, 5)
    assert len(folds) == 2
    assert len(onsets(result, view, Kind.FLIP, 5)) == 2


def test_several_states_henon() -> None:
    view = ("0.1", "1.2", "-1.5", "1.5")
    result = followed(system_of("henon"), view, 4)
    # Hénon at b = 0.3: flips 3(1-b)^2/4 and (5-6b+5b^2)/4 (check_values.md, section 5; exact).
    assert onsets(result, view, Kind.FLIP, 1) == pytest.approx([0.3675], abs=1e-5)
    assert onsets(result, view, Kind.FLIP, 2) == pytest.approx([0.9125], abs=1e-5)
    assert onsets(result, view, Kind.FLIP, 4) == pytest.approx([1.0258554050737810], abs=1e-5)
    for piece in result.pieces:
        if piece.period == 1:
            a = 0.1 + 1.1 * np.array(piece.parameter)
            x = -1.5 + 3 * np.array(piece.observed[0])
            assert np.allclose(a * x**2 + 0.7 * x - 1, 0, atol=1e-8)


def test_several_states_a_pair_leaves_the_circle() -> None:
    view = ("1.7", "2.1", "0", "1")
    result = followed(system_of("delayed_logistic"), view, 1)
    # Neimark-Sacker of the delayed logistic at r = 2, multipliers exp(+-i pi/3) (exact).
    assert onsets(result, view, Kind.NEIMARK_SACKER, 1) == pytest.approx([2], abs=1e-6)
    stable = [piece for piece in result.pieces if piece.stable]
    assert abs(complex(*stable[0].multipliers[-1])) == pytest.approx(1, abs=1e-6)
    assert abs(stable[0].multipliers[-1][1]) == pytest.approx(np.sin(np.pi / 3), abs=1e-6)


def test_branches_that_cross_are_told_from_folds() -> None:
    view = ("0.5", "1.5", "-1", "1")
    crossing = followed(own_map("r*x*(1 - x)", low="-2", high="2", start="0.3"), view, 1)
    assert [(kind, period) for kind, period, _, _ in crossing.passed] == [(Kind.TRANSCRITICAL, 1)]
    assert onsets(crossing, view, Kind.TRANSCRITICAL, 1) == pytest.approx([1], abs=1e-6)
    fork = followed(own_map("r*x - x**3", low="-2", high="2", start="0.3"), view, 1)
    assert {(kind, period) for kind, period, _, _ in fork.passed} == {(Kind.PITCHFORK, 1)}
    assert onsets(fork, view, Kind.PITCHFORK, 1) == pytest.approx([1] * len(fork.passed), abs=1e-6)


STANDARD = """
title = "area-preserving"
kind = "map"
[states.x]
start = "0.1"
range = ["-2", "2"]
[states.p]
start = "0.1"
range = ["-2", "2"]
[parameters.K]
value = "6"
[next]
x = "x + p + K*sin(x)"
p = "p + K*sin(x)"
[diagram]
parameter = "K"
observe = "p"
"""


def test_where_areas_are_preserved_a_pitchfork_is_told_by_its_symmetry() -> None:
    view = ("5", "7", "-4", "4")
    result = followed(read_system_text(STANDARD), view, 2)
    # Chirikov 1979, Lichtenberg and Lieberman (from memory): the 2-cycle's symmetry breaks at 2 pi, and the
    # asymmetric one flips at 2 sqrt(1 + pi^2); check_values.md, section 5 (exact, R 28).
    assert onsets(result, view, Kind.PITCHFORK, 2)[0] == pytest.approx(2 * np.pi, abs=1e-5)
    flips = onsets(result, view, Kind.FLIP, 2)
    assert len(flips) > 0
    assert flips == pytest.approx([2 * np.sqrt(1 + np.pi**2)] * len(flips), abs=1e-5)


def test_unstable_cycles_of_a_deep_view_are_those_the_settled_ones_split_from() -> None:
    view = ("3.569", "3.5698", "0.4", "0.6")
    result = followed(system_of("logistic"), view, 8)
    # Orbits settle on 32 and more points here; the branches of 8 and 4 run on through the view, unstable.
    assert {(piece.period, piece.stable) for piece in result.pieces} >= {(8, False)}


def test_steps_come_often_and_the_job_can_be_dropped() -> None:
    job = branches(request(system_of("logistic"), LOGISTIC))
    steps = [next(job) for _ in range(5)]
    assert all(isinstance(step, Step) for step in steps)
    job.close()
    assert len(list(branches(request(system_of("logistic"), LOGISTIC)))) > 40


def test_a_crowded_view_ends_at_its_bound_and_says_so(monkeypatch, logistic) -> None:
    monkeypatch.setattr(branch_survey, "MOST_BRANCHES", 3)
    result = followed(system_of("logistic"), LOGISTIC)
    assert 0 < len(result.pieces) < len(logistic.pieces)
    assert "more than can be shown" in result.message
    assert "more than can be shown" not in logistic.message


def test_views_that_cannot_be_followed_are_refused_in_words() -> None:
    deep = ("3.5699456718709449", "3.56994567187094490001", "0", "1")
    with pytest.raises(NoOnsetFound, match="too narrow"):
        followed(system_of("logistic"), deep)
    with pytest.raises(NoOnsetFound, match="no extent"):
        followed(system_of("logistic"), ("3", "3", "0", "1"))
    with pytest.raises(TinemarkError, match="longest period"):
        followed(system_of("logistic"), LOGISTIC, 0)


def test_nothing_in_view_is_said() -> None:
    result = followed(system_of("logistic"), ("2.8", "3.4", "5", "6"))
    assert result.pieces == ()
    assert "no cycle" in result.message
