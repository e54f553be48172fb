"""The window on equations: samples instead of steps, more digits of a row, and the waveform of a probe."""

from __future__ import annotations

from dataclasses import replace
from fractions import Fraction

import numpy as np
import pytest
from shell_window import FakeDesks, flip, window_on

from tinemark.document import ledger as ledgers
from tinemark.document.session import budget_steps
from tinemark.equations.accuracy import Accuracy
from tinemark.onsets.results import Kind, RefineResult, SharpenRequest, Status
from tinemark.systems.errors import NoOnsetFound
from tinemark.systems.library import builtin_system
from tinemark.window.probe_panel import ProbePanel
from tinemark.work.jobs import Cancelled, Failed, Finished
from tinemark.work.pictures import PictureMeasured
from tinemark.work.probe import ProbeOrbit
from tinemark.work.waveform import Waveform

ROUGH = replace(
    flip("2.8324450279", half="1e-10", status=Status.ESTIMATED),
    parameter="c",
    digits=11,
    reason="integrated in double precision",
    states=(("x", "-4.1"), ("y", "0"), ("z", "0.03")),
)


@pytest.fixture
def desks():
    return FakeDesks()


@pytest.fixture
def window(qtbot, tmp_path, desks):
    with window_on(tmp_path / "memory", "rossler", make=desks.make) as made:
        qtbot.waitUntil(lambda: made.onsets.refinery is not None)
        place = ledgers.place_of(made.keeper.system, "c")
        ledger, row = ledgers.add(made.keeper.session.ledger, ROUGH, place)
        made.keeper.set_ledger("pick an onset", ledger)
        made.rows.select(row)
        yield made


def test_a_picture_of_equations_is_asked_and_told_in_samples(window, desks, qtbot):
    qtbot.waitUntil(lambda: bool(desks.pictures.asked))
    assert desks.pictures.asked[-1].accuracy is Accuracy.PICTURE
    desks.pictures.answer()
    qtbot.waitUntil(lambda: "samples drawn" in window.status.steps.text())
    request = desks.pictures.asked[-1]
    window.bridge.on_event(PictureMeasured(len(desks.pictures.asked), request, 3e-7))
    words = window.settings_panel.accuracy_words
    qtbot.waitUntil(lambda: "3 parts in 10 million" in words.text())
    window.keeper.set_picture(replace(window.keeper.session.picture, accuracy=Accuracy.BENCH))
    qtbot.waitUntil(lambda: desks.pictures.asked[-1].accuracy is Accuracy.BENCH)
    assert budget_steps("standard", window.keeper.system) < budget_steps(
        "standard", builtin_system("logistic")
    )


def test_more_digits_are_asked_for_and_take_the_place_of_the_row(window, desks, qtbot):
    panel, (row,) = window.ledger_panel, window.keeper.session.ledger.rows
    assert not panel.digits_button.isHidden()
    panel.digits_button.click()
    request = desks.refinery.asked[-1]
    assert isinstance(request, SharpenRequest)
    assert request.onset == ROUGH and request.digits == 20
    assert window.status.cancel.isVisibleTo(window) and "20 digits" in window.status.words.words
    value = "2.83244502786226740651"
    sharp = replace(
        flip(value, half="1e-20"), parameter="c", states=ROUGH.states, lower=value, upper=value, reason=""
    )
    number = len(desks.refinery.asked)
    window.bridge.on_event(Finished(number, request, RefineResult((sharp,), "")))
    qtbot.waitUntil(lambda: window.keeper.session.ledger.row(row.id).onset.value == value)
    assert "Proved" in window.status.words.words
    # A proved row has nothing left to ask for.
    assert panel.digits_button.isHidden()
    assert not window.actions_by_name["more_digits"].isEnabled()


def test_a_row_keeps_its_digits_where_no_more_are_found(window, desks, qtbot):
    window.actions_by_name["more_digits"].trigger()
    request, number = desks.refinery.asked[-1], len(desks.refinery.asked)
    window.bridge.on_event(Failed(number, request, NoOnsetFound("no more digits were found: it is stiff")))
    qtbot.waitUntil(lambda: "it is stiff" in window.status.words.words)
    assert window.keeper.session.ledger.rows[0].onset == ROUGH
    window.actions_by_name["more_digits"].trigger()
    number = len(desks.refinery.asked)
    window.cancel()
    assert desks.refinery.cancelled[-1] == number
    window.bridge.on_event(Cancelled(number, request))
    qtbot.waitUntil(lambda: window.status.words.words == "Cancelled.")
    assert window.keeper.session.ledger.rows[0].onset == ROUGH


def test_rows_of_maps_and_of_other_kinds_have_no_more_digits(qtbot, tmp_path, desks):
    with window_on(tmp_path / "memory", make=desks.make) as window:
        place = ledgers.place_of(window.keeper.system, "r")
        ledger, row = ledgers.add(window.keeper.session.ledger, flip("3", status=Status.ESTIMATED), place)
        window.keeper.set_ledger("pick an onset", ledger)
        window.rows.select(row)
        assert window.ledger_panel.digits_button.isHidden()
        assert not window.rows.can_have_digits(window.keeper.session.ledger.row(row))


def test_only_kinds_that_can_be_sharpened_are(window):
    place = ledgers.place_of(window.keeper.system, "c")
    pitchfork = replace(ROUGH, kind=Kind.PITCHFORK, value="3", lower="2.9999", upper="3.0001")
    ledger, row = ledgers.add(window.keeper.session.ledger, pitchfork, place)
    window.keeper.set_ledger("pick an onset", ledger)
    assert not window.rows.can_have_digits(window.keeper.session.ledger.row(row))


def test_the_probe_of_equations_draws_the_waveform_and_its_samples(qtbot):
    panel = ProbePanel()
    qtbot.addWidget(panel)
    panel.resize(900, 260)
    panel.show()
    times = np.arange(1.0, 101.0)
    samples = np.cos(np.pi * np.arange(100))
    states = np.stack([samples, samples], axis=1)
    at = np.linspace(88.0, 100.0, 500)
    wave = Waveform(at, np.cos(np.pi * at), 87, times[87:])
    orbit = ProbeOrbit(Fraction(3), states, samples, None, times, wave)
    panel.show_orbit(orbit, parameter="c", observe="x")
    assert panel.wave.isVisible() and not panel.series.isVisible()
    line, points = panel.wave.plotItem.listDataItems()
    assert np.array_equal(line.xData, at)
    assert np.array_equal(points.xData, times[87:])
    assert np.array_equal(points.yData, samples[87:])
    assert panel.words.words == "Settled to period 2."
    # From the start the samples are what there is.
    panel.part.setCurrentIndex(panel.part.findData("early"))
    assert panel.series.isVisible() and not panel.wave.isVisible()
    assert "sample" in panel.part.itemText(2)
    # A map has steps again.
    panel.part.setCurrentIndex(0)
    panel.show_orbit(ProbeOrbit(Fraction(3), states[:, :1], samples, None), parameter="r", observe="x")
    assert panel.series.isVisible() and not panel.wave.isVisible()
    assert "step" in panel.part.itemText(2)
