"""Onsets of driven and free-running equations: check values, exact cases, and an independent integrator."""

from __future__ import annotations

import sys
from fractions import Fraction

import flow_problems
import numpy as np
import pytest
from flow_problems import Cascade, carried
from running import finish

from tinemark.onsets.engine import branches, ladder, refine, survey
from tinemark.onsets.flow_map import FINEST, FlowMap, Level
from tinemark.onsets.flow_onset import settle_flow
from tinemark.onsets.flow_polish import solve_onset
from tinemark.onsets.many_cycles import Cycle, newton
from tinemark.onsets.results import (
    BranchRequest,
    Criticality,
    Kind,
    LadderRequest,
    Onset,
    RefineRequest,
    Status,
    SurveyRequest,
)
from tinemark.systems.system import System


def ladder_of(cascade: Cascade, levels: int) -> tuple[Onset, ...]:
    """The levels of a cascade's ladder."""
    parameter = cascade.system.diagram_parameter
    start, stop = Fraction(cascade.start), Fraction(cascade.stop)
    result = finish(ladder(LadderRequest(cascade.system, parameter, start, stop, 1, levels)))
    return tuple(level.onset for level in result.levels)


def click(system: System, near: str, width: str, kinds: frozenset[Kind] | None = None) -> Onset:
    """The onset nearest to a click."""
    request = RefineRequest(
        system, system.diagram_parameter, Fraction(near), Fraction(width), digits=14, kinds=kinds
    )
    return finish(refine(request)).onsets[0]


@pytest.mark.parametrize("name", ["pendulum", "duffing", "roessler"])
def test_cascade_against_check_values(name: str) -> None:
    cascade: Cascade = getattr(flow_problems, name)()
    onsets = ladder_of(cascade, len(cascade.levels))
    assert len(onsets) == len(cascade.levels)
    for level, (onset, value) in enumerate(zip(onsets, cascade.levels, strict=True)):
        assert (onset.period_before, onset.period_after) == (2**level, 2 ** (level + 1))
        apart = abs(onset.value_fraction - Fraction(str(value)))
        assert apart <= onset.half_width + Fraction(1, 10**12)
        assert apart < 2e-11
        assert onset.status is Status.ESTIMATED
        assert onset.reason
        assert onset.criticality is Criticality.SUPERCRITICAL
        assert Fraction(onset.lower) <= onset.value_fraction <= Fraction(onset.upper)
        # The last digit printed is off by at most one.
        places = len(onset.value.partition(".")[2])
        assert onset.half_width <= Fraction(1, 10) ** places
        assert places >= 11
        assert {item.name for item in onset.sensitivities} <= set(cascade.system.parameter_names)
    if name == "pendulum":
        for onset, printed in zip(onsets, flow_problems.TAYLOR_TABLE, strict=False):
            assert abs(onset.value_fraction - Fraction(printed)) <= Fraction(1, 10000)


@pytest.mark.parametrize("name", ["pendulum", "duffing"])
def test_printed_cycle_flips_for_another_integrator(name: str) -> None:
    cascade: Cascade = getattr(flow_problems, name)()
    onset = click(cascade.system, f"{cascade.levels[1]:.4f}", "0.004")
    assert onset.kind is Kind.FLIP
    state = np.array([float(text) for _, text in onset.states])
    onward = carried(cascade.system, float(onset.value_fraction), state, onset.period_before)
    assert np.max(np.abs(onward.image - state)) < 1e-10
    values = np.linalg.eigvals(onward.jacobian)
    assert np.min(np.abs(values + 1)) < 1e-9


def test_heyoka_agrees() -> None:
    if not sys.platform.startswith("linux"):
        pytest.skip("heyoka is a test requirement on Linux only")
    pytest.importorskip("heyoka")
    from heyoka_flips import flip_of

    for name, level in (("pendulum", 0), ("duffing", 1), ("roessler", 0)):
        cascade: Cascade = getattr(flow_problems, name)()
        onset = click(cascade.system, f"{cascade.levels[level]:.4f}", "0.01", frozenset({Kind.FLIP}))
        state = np.array([float(text) for _, text in onset.states])
        value = flip_of(cascade.system, state, float(onset.value_fraction), onset.period_before)
        assert abs(value - float(onset.value_fraction)) < 1e-10


def test_symmetry_breaks_before_the_pendulum_flips() -> None:
    cascade = flow_problems.pendulum()
    request = LadderRequest(cascade.system, "g", Fraction("0.98"), Fraction("1.084"), 1, 2)
    result = finish(ladder(request))
    assert [round(float(level.onset.value), 9) for level in result.levels] == [1.066372862, 1.079313906]
    (pitchfork,) = result.besides
    assert pitchfork.kind is Kind.PITCHFORK
    assert pitchfork.criticality is Criticality.SUPERCRITICAL
    assert "phi(t + T/2) = -phi(t)" in pitchfork.consequence
    assert "passed the pitchfork" in result.message
    # The symmetry holds for every damping, and for no constant torque.
    assert {item.name for item in pitchfork.sensitivities} <= {"w0", "b"}
    again = click(cascade.system, "1.0045", "0.02")
    assert {item.name for item in again.sensitivities} == {"w0", "b"}
    assert again.kind is Kind.PITCHFORK
    assert again.value[:12] == pitchfork.value[:12]
    state = np.array([float(text) for _, text in again.states])
    onward = carried(cascade.system, float(again.value_fraction), state, 1)
    assert np.max(np.abs(onward.image - state)) < 1e-9
    assert np.min(np.abs(np.linalg.eigvals(onward.jacobian) - 1)) < 1e-8


def test_halving_the_tolerance_moves_nothing_beyond_the_error() -> None:
    cascade = flow_problems.duffing()
    flow = FlowMap(cascade.system, "F")
    scales = flow.scales(0.265)
    state = np.array([[1.0], [0.0]])
    for _ in range(200):
        state = flow.step(state, 0.265)
    rough = newton(flow, Cycle(state.T.copy(), 0.265), scales)
    assert rough is not None
    onset = finish(settle_flow(flow, Kind.FLIP, rough, 20, scales, 0.05)).onset
    for level in (Level(8, 1e-13), Level(8, 5e-14), Level(8, 2.5e-14), FINEST):
        value = finish(solve_onset(flow.at(level), Kind.FLIP, rough, scales, 0.05)).cycle.r
        assert abs(Fraction(value) - onset.value_fraction) <= onset.half_width + Fraction(1, 10**16)


def test_sensitivities_of_the_pendulum_against_solving_again() -> None:
    cascade = flow_problems.pendulum()
    onset = click(cascade.system, "1.0664", "0.01")
    moves = {item.name: float(item.derivative) for item in onset.sensitivities}
    assert set(moves) == {"w0", "b", "torque"}
    for name in ("w0", "b"):
        value = cascade.system.parameter(name).value.fraction
        step = value / 20000
        ends = []
        for sign in (-1, 1):
            moved = cascade.system.with_value(name, str(float(value + sign * step)))
            near = onset.value_fraction + sign * step * Fraction(moves[name])
            ends.append(click(moved, f"{float(near):.6f}", "0.01").value_fraction)
        assert moves[name] == pytest.approx(float((ends[1] - ends[0]) / (2 * step)), rel=1e-5)


def test_survey_and_branches_of_the_pendulum() -> None:
    cascade = flow_problems.pendulum()
    found = finish(survey(SurveyRequest(cascade.system, "g", Fraction("1.06"), Fraction("1.082"), 2, 12)))
    flips = {o.period_before: float(o.value_fraction) for o in found.onsets if o.kind is Kind.FLIP}
    assert abs(flips[1] - cascade.levels[0]) < 1e-11
    assert abs(flips[2] - cascade.levels[1]) < 1e-11
    view = [Fraction(text) for text in ("1.06", "1.082", "-4", "4")]
    drawn = finish(branches(BranchRequest(cascade.system, "g", "phi", *view, max_period=2)))
    passed = [(kind, period, across) for kind, period, across, _ in drawn.passed]
    assert any(
        kind is Kind.FLIP and period == 1 and abs(1.06 + 0.022 * across - cascade.levels[0]) < 1e-6
        for kind, period, across in passed
    )
