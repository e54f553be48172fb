"""Pictures of equations against the return map, multipliers and published onsets."""

from __future__ import annotations

from dataclasses import replace
from fractions import Fraction

import numpy as np
import pytest
from tests.equations.equation_texts import DUFFING, ROESSLER, made

from tinemark.density.renderer import StopFlag, append, create, progressive, snapshot
from tinemark.density.request import PictureRequest, SweepRule, View
from tinemark.density.strobe_kernels import picture_error
from tinemark.density.strobe_preview import COARSENESS
from tinemark.equations.return_map import FloatReturnMap

DRIVEN = made(DUFFING, **{'parameter = "w"': 'parameter = "F"'})
FLOW = made(ROESSLER)


def request(system, left, right, bottom, top, columns, rows=100, **more):
    view = View(*(Fraction(end) for end in (left, right, bottom, top)))
    parameter = system.diagram_parameter
    return PictureRequest(system, parameter, system.observe, view, columns, rows, **more)


def driven(columns=70, **more):
    return request(DRIVEN, "0.26", "0.295", "0", "2", columns, **more)


def flow(columns=70, **more):
    return request(FLOW, "2.5", "4.15", "-9", "-1", columns, **more)


@pytest.mark.parametrize(("asked", "settled"), [(driven(), 0.285), (flow(), 3.8)], ids=["driven", "flow"])
def test_samples_are_those_of_the_return_map(asked, settled):
    """Where orbits settle: the samples, their periods and exponents are those of the tight map."""
    drawing = create(replace(asked, transient_steps=896))
    append(drawing, 512)
    field = snapshot(drawing)
    assert picture_error(asked) < 1e-6
    map_ = FloatReturnMap(asked.system, asked.parameter, 1e-13)
    # Two stretches of the sweep, of period 1 and 2, well away from where they meet.
    onset = 0.265581786056 if asked.system is DRIVEN else 2.832445027862
    for period, wanted in ((1, drawing.swept < onset * 0.985), (2, (drawing.swept > onset * 1.03))):
        columns = np.flatnonzero(wanted & (drawing.swept < settled))
        assert columns.size >= 2
        assert (field.period[columns] == period).all()
        points = drawing.states[0][:, columns]
        after = points
        multipliers = np.ones((columns.size, 1, 1)) * np.eye(map_.size)
        for _ in range(period):
            found = map_.linearised(after.T.copy(), drawing.swept[columns])
            multipliers = found.jacobian @ multipliers
            after = found.image.T
        assert np.abs(after - points).max() < 3e-6
        largest = np.log(np.abs(np.linalg.eigvals(multipliers)).max(axis=1)) / period
        assert field.lyapunov[columns] == pytest.approx(largest, abs=0.02)


def test_equal_steps_and_own_steps_give_the_same_samples():
    drawing = create(driven())
    drawn = drawing.kernels.advance.__self__
    assert drawn.setting.steps.pieces > 0
    lone = replace(drawn.setting, steps=replace(drawn.setting.steps, pieces=0))
    noted = [np.empty((64, 2, 3)) for _ in range(2)]
    for setting, room in zip((drawn.setting, lone), noted, strict=True):
        replace(drawn, setting=setting).trace(drawing.states[0], drawing.swept, drawing.fixed, 0, 64, room)
    # Three samples on, each may have added 1e-6 of what the orbits then drew apart.
    assert noted[0] == pytest.approx(noted[1], abs=1e-4)
    assert not np.array_equal(noted[0], noted[1])


@pytest.mark.parametrize("asked", [driven(), flow()], ids=["driven", "flow"])
def test_a_picture_does_not_depend_on_how_it_was_divided(asked):
    whole, parts = create(asked), create(asked)
    append(whole, 512)
    for _ in range(4):
        append(parts, 128)
    assert np.array_equal(whole.counts, parts.counts)
    assert np.array_equal(whole.states, parts.states)
    assert int(whole.counts.sum()) == 512 * asked.columns


def test_a_stopped_pass_leaves_columns_as_they_were():
    drawing = create(driven())
    before = drawing.states.copy()
    stop = StopFlag()
    stop.set()
    append(drawing, 128, stop)
    assert np.array_equal(drawing.states, before)
    assert int(drawing.counts.sum()) == 0


@pytest.mark.parametrize("rule", [SweepRule.FORWARD, SweepRule.BACKWARD])
def test_carried_sweeps_settle_where_fresh_ones_do(rule):
    asked = driven(8, transient_steps=150)
    carried, fresh = create(replace(asked, rule=rule)), create(asked)
    append(carried, 128)
    append(fresh, 128)
    # Below the first onset there is one cycle of the well: both settle on it.
    assert carried.states[0][:, 0] == pytest.approx(fresh.states[0][:, 0], abs=1e-6)


def test_an_orbit_that_is_lost_is_shown_so():
    drawing = create(replace(flow(3), transient_steps=0))
    drawing.states[0][:, 0] = 1e18  # beyond every bound
    append(drawing, 128)
    field = snapshot(drawing)
    assert field.escaped.tolist()[0] is True
    assert field.escaped.tolist()[2] is False
    assert np.isnan(field.lyapunov[0])
    assert np.isfinite(field.lyapunov[2])
    assert int(field.counts[:, 0].sum()) == 0
    assert int(field.counts[:, 2].sum()) == 128


def test_a_coarse_picture_comes_first():
    asked = driven(40 * COARSENESS, transient_steps=200)
    fields = list(progressive(asked, 256, threads=1))
    assert fields[0].steps == 40 * 128
    assert fields[0].counts.shape == fields[-1].counts.shape
    assert fields[-1].steps == 320 * 256
    wide = fields[0].counts.reshape(100, 40, COARSENESS)
    assert (wide == wide[:, :, :1]).all()


def test_waiting_for_the_compiler_can_be_given_up():
    from tinemark.density.strobe_compiling import Compiling
    from tinemark.density.strobe_source import strobe_source
    from tinemark.equations.motion import motion
    from tinemark.equations.tableau import Method, tableau

    what = motion(DRIVEN, "F")
    compiling = Compiling(strobe_source(what, tableau(Method.EIGHT), False), what)
    stop = StopFlag()
    stop.set()
    assert compiling.module(stop.cell) is None or compiling.module(stop.cell).run is not None
    assert compiling.module(StopFlag().cell).run is not None
    broken = Compiling("raise ValueError('no module')", what)
    with pytest.raises(ValueError, match="no module"):
        broken.module(StopFlag().cell)


def test_exponents_of_rates_that_jump_are_not_known():
    """A tangent carried through a jump would lack what the jump does to it (Aizerman & Gantmakher 1958)."""
    switched = DUFFING.replace("F*cos(w*t)", "(F if cos(w*t) > 0 else -F)")
    assert switched != DUFFING
    asked = request(made(switched, **{'parameter = "w"': 'parameter = "F"'}), "0.1", "0.15", "0", "2", 16)
    drawing = create(replace(asked, transient_steps=64))
    append(drawing, 512)
    field = snapshot(drawing)
    assert np.isnan(field.lyapunov).all()
    # What does not need the tangent is as ever.
    assert (field.period == 1).all() and not field.escaped.any()
