"""The probe against plain arithmetic."""

from __future__ import annotations

import queue
from fractions import Fraction

import numpy as np
import pytest

from tinemark.systems.errors import SystemFileError, TinemarkError
from tinemark.systems.library import builtin_system
from tinemark.systems.system_file import read_system_text
from tinemark.work.probe import MAX_STEPS, ProbeDesk, ProbeFailed, ProbeReady, ProbeRequest, request_probe

OWN = """
title = "t"
kind = "map"
[states.x]
start = "{start}"
[parameters.r]
value = "2"
[next]
x = "{formula}"
[diagram]
parameter = "r"
observe = "{observe}"
"""


def own(formula: str, observe: str = "x", start: str = "0.5"):
    return read_system_text(OWN.format(formula=formula, observe=observe, start=start))


def test_a_logistic_orbit_step_by_step(logistic) -> None:
    orbit = request_probe(logistic, "r", Fraction("3.2"), 50)
    x = float(logistic.states[0].start)
    for row in range(50):
        x = 3.2 * x * (1 - x)
        assert orbit.states[row, 0] == pytest.approx(x, rel=1e-12)
    assert orbit.parameter_value == Fraction("3.2")
    assert not orbit.escaped
    assert np.array_equal(orbit.observed, orbit.states[:, 0])


def test_the_curve_is_the_map_over_range_and_orbit(logistic) -> None:
    orbit = request_probe(logistic, "r", Fraction(4), 30)
    xs, ys = orbit.map_curve
    assert np.allclose(ys, 4 * xs * (1 - xs))
    assert xs[0] <= orbit.states.min()
    assert xs[-1] >= orbit.states.max()


def test_several_states_have_no_curve() -> None:
    henon = builtin_system("henon")
    orbit = request_probe(
        henon, henon.diagram_parameter, henon.parameter(henon.diagram_parameter).value.fraction, 20
    )
    assert orbit.map_curve is None
    assert orbit.states.shape == (20, 2)


def test_an_escaping_orbit_is_nan_from_there_on() -> None:
    orbit = request_probe(own("r*x*x + 10", observe="3"), "r", Fraction(2), 40)
    assert orbit.escaped
    lost = np.isnan(orbit.states[:, 0])
    first = int(np.argmax(lost))
    assert 0 < first < 20
    assert lost[first:].all()
    assert not lost[:first].any()
    assert np.isnan(orbit.observed[first:]).all()
    assert (orbit.observed[:first] == 3).all()


@pytest.mark.parametrize(
    "formula", ["log(0 - x*x)", "1/(x - 0.5)", "sqrt(0 - 1 - x)", "exp(exp(exp(20*x + 9)))"]
)
def test_an_undefined_orbit_is_no_error(formula: str) -> None:
    orbit = request_probe(own(formula), "r", Fraction(2), 10)
    assert orbit.escaped
    assert np.isnan(orbit.states[0]).all()


def test_piecewise_formulas_take_the_piece_in_force() -> None:
    orbit = request_probe(own("r*x if x < 0.5 else r*(1 - x)", start="0.3"), "r", Fraction("1.5"), 3)
    assert orbit.states[:, 0] == pytest.approx([0.45, 0.675, 0.4875])
    xs, ys = orbit.map_curve
    assert np.allclose(ys, np.where(xs < 0.5, 1.5 * xs, 1.5 * (1 - xs)))


def test_bad_requests_say_so(logistic) -> None:
    with pytest.raises(SystemFileError, match="there is no parameter"):
        request_probe(logistic, "q", Fraction(1), 10)
    for steps in (0, -1, MAX_STEPS + 1):
        with pytest.raises(TinemarkError, match="steps"):
            request_probe(logistic, "r", Fraction(1), steps)


def test_the_desk_answers_the_newest(logistic) -> None:
    heard: queue.Queue[ProbeReady | ProbeFailed] = queue.Queue()
    desk = ProbeDesk(heard.put)
    try:
        requests = [ProbeRequest(logistic, "r", Fraction(n, 100), 5000) for n in range(300, 340)]
        last = [desk.request(request) for request in requests][-1]
        while (event := heard.get(timeout=60)).id != last:
            assert isinstance(event, ProbeReady)
        assert event.request == requests[-1]
        assert event.orbit.parameter_value == Fraction(339, 100)
        bad = desk.request(ProbeRequest(logistic, "nothing", Fraction(1)))
        event = heard.get(timeout=60)
        assert isinstance(event, ProbeFailed)
        assert event.id == bad
    finally:
        desk.close()
