"""Dense formulas of many states: the algebra comes in steps, so that a job can be dropped between them."""

from __future__ import annotations

from fractions import Fraction

import pytest
from running import finish
from test_many_exact import own_system

from tinemark.onsets.engine import refine
from tinemark.onsets.many_jets import jet_evaluators
from tinemark.onsets.many_map import ball_evaluators, float_many_map, many_map
from tinemark.onsets.many_preparation import worked_out
from tinemark.onsets.results import RefineRequest
from tinemark.systems import derivatives
from tinemark.systems.system import System


def dense(size: int) -> System:
    """Every state depends on every other one, by other functions each."""
    names = "xyuvws"[:size]
    formulas = {}
    for place, name in enumerate(names):
        own = f"r*{name}*(1 - {name})" if place == 0 else f"0.3*{name}"
        parts = [f"0.0{place + 1}*sin({a} + 0.{k + 1}*{name})*exp(-{a}**2)" for k, a in enumerate(names)]
        formulas[name] = " + ".join([own, *parts])
    return own_system(formulas, "0", "1", "0.3")


def test_nothing_is_left_to_work_out_afterwards(monkeypatch: pytest.MonkeyPatch) -> None:
    many = many_map(dense(3), "r")
    steps = list(worked_out(many, 3))
    # 3 formulas of 4 first, 9 second and 10 third derivatives, but for those of what is zero.
    assert len(steps) > 3 * 13
    assert all(step.share is not None and 0 < step.share <= 1 for step in steps)
    asked = derivatives.derivative.cache_info().misses
    float_many_map(many)
    ball_evaluators(many)
    jet_evaluators(many)
    assert derivatives.derivative.cache_info().misses == asked
    assert list(worked_out(many, 3)) == []


def test_a_click_can_be_dropped_while_derivatives_are_worked_out() -> None:
    system = dense(5)
    request = RefineRequest(system, "r", Fraction("2.9"), Fraction(1))
    job = refine(request)
    seen = [next(job).text for _ in range(8)]
    assert any("first derivatives" in text for text in seen)
    job.close()
    # What was dropped is taken up again from the start.
    assert any("first derivatives" in step.text for step in worked_out(many_map(system, "r"), 1))
    assert finish(worked_out(many_map(system, "r"), 1)) is None
