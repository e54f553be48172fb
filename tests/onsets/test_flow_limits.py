"""What equations do not allow is recognised and said, with what to try."""

from __future__ import annotations

from fractions import Fraction

import flow_problems
import numpy as np
import pytest
from flow_problems import equations
from running import finish

from tinemark.onsets.engine import branches, ladder, refine, survey
from tinemark.onsets.flow_limits import first_samples, shorter_repeat, why_no_cycle
from tinemark.onsets.flow_map import FlowMap
from tinemark.onsets.flow_search import settled_orbits, starts
from tinemark.onsets.flow_symmetry import Rates, symmetries, symmetry_words, true_period
from tinemark.onsets.results import BranchRequest, Kind, LadderRequest, RefineRequest, Step, SurveyRequest
from tinemark.systems.errors import NoOnsetFound
from tinemark.systems.system import System


def click(system: System, near: str, width: str = "0.1") -> RefineRequest:
    """A click on a system's own diagram."""
    return RefineRequest(system, system.diagram_parameter, Fraction(near), Fraction(width))


def driven(rate: str, every: str) -> System:
    """A driven system of one state."""
    return equations("driven", {"x": rate}, {"r": "1", "w": "3"}, f'every = "{every}"', ("0.3",), "2")


@pytest.mark.parametrize(
    ("rate", "every", "words", "advice"),
    [
        ("-x + r*cos(t)", "1", "do not repeat after the strobe period", "two drives need a common one"),
        ("-x + r*cos(w*t) + cos(sqrt(2)*w*t)", "2*pi/w", "do not repeat", "make sample.every"),
        ("-x + r*cos(w*t)", "pi/w", "repeat only after 2 strobe periods", "2*(pi/w)"),
        ("-x + r*cos(w*t)", "4*pi/w/3", "repeat after 3/2 strobe periods", "3*(4*pi/w/3)/2"),
        ("-x + r*cos(w*t)", "0*w", "the strobe period is 0", "above zero"),
        ("-x + r*t", "1", "do not repeat", "make sample.every"),
    ],
)
def test_strobes_that_do_not_fit(rate: str, every: str, words: str, advice: str) -> None:
    system = driven(rate, every)
    with pytest.raises(NoOnsetFound) as raised:
        finish(refine(click(system, "1")))
    assert words in str(raised.value)
    assert advice in str(raised.value)
    for job in (
        ladder(LadderRequest(system, "r", Fraction(1), Fraction(2))),
        survey(SurveyRequest(system, "r", Fraction(1), Fraction(2), 2)),
        branches(BranchRequest(system, "r", "x", Fraction(1), Fraction(2), Fraction(-1), Fraction(1))),
    ):
        with pytest.raises(NoOnsetFound, match="strobe period"):
            finish(job)


def test_a_strobe_of_several_drive_periods_is_told() -> None:
    assert "repeat 2 times" in shorter_repeat(driven("-x + r*cos(w*t)", "4*pi/w"), "r", 1.0)
    assert shorter_repeat(driven("-x + r*cos(w*t)", "2*pi/w"), "r", 1.0) == ""
    assert true_period(Rates(driven("-x + abs(sin(w*t)) + r", "2*pi/w"), "r", 1.0)) == Fraction(1, 2)


@pytest.mark.parametrize(("every", "share"), [("2*pi/w", "1"), ("3*pi/w", "2/3"), ("4*pi/w", "1/2")])
def test_a_drive_is_seen_beside_rates_that_are_huge(every: str, share: str) -> None:
    for rate in ("r*cos(w*t) - exp(60*x)", "r*cos(w*t) - 1e10*(x - 3)", "-x + (r if cos(w*t) > 0.97 else 0)"):
        assert true_period(Rates(driven(rate, every), "r", 1.0)) == Fraction(share), rate


def test_symmetries() -> None:
    system = flow_problems.pendulum().system
    found = list(symmetries(system, "g", 1.0))
    assert [(item.signs, item.later) for item in found] == [((-1, -1), Fraction(1, 2))]
    words = "phi(t + T/2) = -phi(t), omega(t + T/2) = -omega(t), T the strobe period"
    assert symmetry_words(system, found[0]) == words
    assert not list(symmetries(system.with_value("torque", "0.1"), "g", 1.0))
    rates = {"x": "10*(y - x)", "y": "r*x - y - x*z", "z": "x*y - 2*z"}
    lorenz = equations("flow", rates, {"r": "20"}, 'crosses = "z - r + 1"', ("1", "1", "20"), "40")
    (only,) = symmetries(lorenz, "r", 20.0)
    assert symmetry_words(lorenz, only) == "x -> -x, y -> -y"


def test_orbits_that_escape() -> None:
    system = driven("x**2 + 4 + r*cos(w*t)", "2*pi/w")
    with pytest.raises(NoOnsetFound, match="leaves every bound") as raised:
        finish(refine(click(system, "1")))
    assert "try another start" in str(raised.value)


def test_the_empty_side_of_a_fold_is_looked_past() -> None:
    flow = FlowMap(driven("r - x**2", "1"), "r")
    with pytest.raises(NoOnsetFound, match="leaves every bound"):
        finish(first_samples(flow, -1.0))
    finish(first_samples(flow, -1.0, 4.0))


def test_rates_without_a_value_are_told_from_stiff_ones() -> None:
    flow = FlowMap(driven("log(x)*r - 2", "1"), "r")
    with pytest.raises(NoOnsetFound, match="the rates have no value") as raised:
        finish(first_samples(flow, 1.0))
    assert "try another start" in str(raised.value)
    rates = {"x": "-y + r*log(-1 - y**2)", "y": "x"}
    flow = FlowMap(equations("flow", rates, {"r": "1"}, 'crosses = "y"', ("1", "-1"), "2"), "r")
    with pytest.raises(NoOnsetFound, match="the rates have no value"):
        finish(first_samples(flow, 1.0))


def test_a_branch_that_comes_to_rest_on_the_section() -> None:
    rates = {"x": "r*x - y - x*(x**2 + y**2)", "y": "x + r*y - y*(x**2 + y**2)"}
    system = equations("flow", rates, {"r": "0.25"}, 'crosses = "y"', ("0.5", "0.1"), "1")
    with pytest.raises(NoOnsetFound, match="comes to rest on the section"):
        finish(refine(click(system, "0.02", "0.2")))


def test_rates_too_fast_to_follow() -> None:
    system = flow_problems.pendulum().system.with_value("w0", "3000000")
    with pytest.raises(NoOnsetFound, match="stiff"):
        finish(refine(click(system, "1")))


def test_a_section_never_crossed() -> None:
    system = flow_problems.roessler().system.with_value("level", "1000")
    with pytest.raises(NoOnsetFound, match="section") as raised:
        finish(refine(click(system, "2.8", "0.5")))
    assert "try another section" in str(raised.value)


def test_an_angle_that_turns_on_and_on() -> None:
    system = flow_problems.pendulum().system.with_value("torque", "400")
    with pytest.raises(NoOnsetFound, match="grows by") as raised:
        finish(refine(click(system, "1", "0.01")))
    assert "sine and cosine" in str(raised.value)


@pytest.mark.parametrize(
    ("damping", "amplitude", "words"), [("0", "0.01", "quasi-periodic"), ("0.3", "0.4", "chaos")]
)
def test_what_orbits_do_instead(damping: str, amplitude: str, words: str) -> None:
    flow = FlowMap(flow_problems.duffing().system.with_value("d", damping), "F")
    value = float(amplitude)
    history, _ = finish(settled_orbits(flow, starts(flow, 0), np.array([value]), 100, 129, "settling"))
    assert words in finish(why_no_cycle(flow, history, value, flow.scales(value)))


def test_kinds_that_equations_are_not_searched_for() -> None:
    system = flow_problems.duffing().system
    request = RefineRequest(system, "F", Fraction("0.26"), Fraction("0.1"), kinds=frozenset({Kind.CRISIS}))
    with pytest.raises(NoOnsetFound, match="ask for"):
        finish(refine(request))


def test_a_job_may_be_dropped_at_any_step() -> None:
    job = refine(click(flow_problems.duffing().system, "0.2656"))
    steps = [next(job) for _ in range(30)]
    assert all(isinstance(step, Step) for step in steps)
    job.close()
