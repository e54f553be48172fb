"""The system card for systems of equations: rates, sample and a change of kind."""

from __future__ import annotations

import pytest
from pytestqt.qtbot import QtBot

from tinemark.systems.system_file import read_system_text
from tinemark.window.draft_edits import renamed, with_kind
from tinemark.window.system_card import SystemCard
from tinemark.window.system_draft import check_text

TANK = """# a tank, invented
title = "Tank"
kind  = "map"
notes = "kept"   # why it is here

[states.n]
start = 0.50    # half full
range = ["0", "4"]

[parameters.r]
value = "2.3"   # nominal

[next]
n = "r*n*(1 - n)"
"""

DRIVEN = """title = "Shaken tank"
kind = "driven"

[states.n]
start = "0.5"

[parameters.r]
value = "2.3"

[parameters.w]
value = "2"

[rate]
n = "-r*n + cos(w*t)"

[sample]
every = "2*pi/w"   # the drive
"""


def test_the_fields_of_a_driven_system_show_its_rates_and_strobe(qtbot: QtBot) -> None:
    card = SystemCard()
    qtbot.addWidget(card)
    card.show_system(DRIVEN)
    card.show()
    assert card.fields.editor("rate.n").text() == "-r*n + cos(w*t)"
    every = card.fields.editor("sample.every")
    assert every.text() == "2*pi/w"
    every.setText("2*pi/x")
    every.textEdited.emit("2*pi/x")
    card.check_now()
    assert "neither" in card.fields.error_text("sample.every")


def test_another_kind_moves_the_formulas_and_asks_for_what_it_lacks(qtbot: QtBot) -> None:
    card = SystemCard()
    qtbot.addWidget(card)
    card.show_system(TANK)
    card.show()
    with qtbot.waitSignal(card.system_edited):
        card.fields.kind_asked.emit("flow")
    system = read_system_text(card.current_text)
    assert system.kind == "flow"
    assert system.sample is not None and system.sample.crosses == "n"
    assert "# half full" in card.current_text
    assert card.fields.editor("sample.crosses").text() == "n"
    with qtbot.waitSignal(card.system_edited):
        card.fields.kind_asked.emit("map")
    assert read_system_text(card.current_text) == read_system_text(TANK)


@pytest.mark.parametrize("kind", ["map", "driven", "flow"])
def test_every_kind_can_be_made_of_every_other(kind: str) -> None:
    for text in (TANK, DRIVEN, with_kind(TANK, "flow")):
        if "t)" in text and kind != "driven":
            continue  # a formula with t stays as it is, and its field says why it cannot
        assert read_system_text(with_kind(text, kind)).kind == kind
    inline = 'kind = "map"\nnext = {x = "a*x"}\n[states.x]\nstart = "1"\n[parameters.a]\nvalue = "1"\n'
    assert read_system_text('title = "t"\n' + with_kind(inline, kind)).kind == kind


def test_renaming_reaches_the_sample() -> None:
    assert 'every = "2*pi/speed"' in renamed(DRIVEN, "parameters", "w", "speed")
    assert 'crosses = "m"' in renamed(with_kind(TANK, "flow"), "states", "n", "m")


def test_every_mistake_of_a_driven_system_is_found_at_once() -> None:
    text = DRIVEN.replace("-r*n", "-q*n").replace("2*pi/w", "2*pi/t").replace('"2.3"', '"2,3"')
    _, troubles = check_text(text)
    assert {trouble.key for trouble in troubles} == {"rate.n", "sample.every", "parameters.r.value"}
