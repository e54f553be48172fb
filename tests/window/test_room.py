"""Room for the diagram in a narrow window, and numbers that fit their columns."""

from __future__ import annotations

from fractions import Fraction

import pytest
from shell_window import FakeDesks, window_on

from tinemark.document.estimates import Estimate
from tinemark.window.ledger_lines import derived_text


@pytest.fixture
def window(tmp_path, qtbot):
    with window_on(tmp_path, make=FakeDesks().make) as shown:
        qtbot.waitUntil(lambda: shown.pictures.desk is not None)
        yield shown


def share(window) -> float:
    return window.diagram.width() / window.width()


@pytest.mark.parametrize("card", ["system", "picture"])
def test_diagram_keeps_its_share_when_the_drawer_opens(window, qtbot, card):
    assert share(window) >= 0.6
    window.panels.set_open(card, True)
    qtbot.waitUntil(lambda: window.diagram.isVisible() and share(window) >= 0.6)
    assert window.panels.is_open(card) and not window.panels.is_open("ledger")
    # From one card to the other the ledger stays folded; after the last it is back.
    other = {"system": "picture", "picture": "system"}[card]
    window.panels.set_open(other, True)
    assert not window.panels.is_open("ledger")
    window.panels.set_open(other, False)
    assert window.panels.is_open("ledger")


def test_ledger_that_is_asked_for_folds_the_drawer(window):
    window.panels.set_open("system", True)
    window.panels.set_open("ledger", True)
    assert window.panels.is_open("ledger") and not window.panels.is_open("system")
    window.panels.set_open("ledger", False)
    window.panels.set_open("system", True)
    window.panels.set_open("system", False)
    assert not window.panels.is_open("ledger"), "it was folded by hand"


def test_ledger_that_gave_way_is_remembered_as_open(window):
    window.panels.set_open("system", True)
    window.panels.keep(window.width())
    assert window.memory.flag("ledger", False)


@pytest.mark.parametrize(
    ("value", "uncertainty", "shown"),
    [
        ("4.053320551906946117368", "1e-20", "4.053\u2009320\u20096"),
        ("26.3233862926909608844", "1e-20", "26.323\u2009386"),
        ("-0.0000652219961", "1e-18", "\u22120.000\u2009065\u2009221\u2009996"),
        ("0", "0", "0.000\u2009000\u20090"),
    ],
)
def test_a_well_known_number_is_rounded_to_what_fits(value, uncertainty, shown):
    found = derived_text(Estimate(Fraction(value), Fraction(uncertainty), enclosed=True))
    assert found == shown


def test_a_number_known_less_well_carries_its_uncertainty():
    assert "(" in derived_text(Estimate(Fraction("4.67"), Fraction("0.068")))
