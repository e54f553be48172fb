"""Clicks on one-state maps: the onset nearest on screen, deep views, and views with none."""

from __future__ import annotations

from fractions import Fraction

import pytest
from known_onsets import ladder
from running import click, finish, own_map, system_of

from tinemark.onsets.engine import refine
from tinemark.onsets.results import Criticality, Kind, RefineRequest, Status, Step
from tinemark.systems.errors import NoOnsetFound

LOGISTIC = ladder("logistic").onsets


def test_the_split_clicked_is_chosen_not_the_bigger_one() -> None:
    """Two views that show several splits: the click decides which."""
    system = system_of("logistic")
    eight = click(system, "3.5650", "0.2", "0.5", "1").onsets[0]
    assert (eight.period_before, eight.period_after) == (8, 16)
    four = click(system, "3.5450", "0.2", "0.36", "1").onsets[0]
    assert (four.period_before, four.period_after) == (4, 8)
    first = click(system, "3.02", "1.2", "0.66", "1").onsets[0]
    assert first.period_before == 1


def test_the_shown_state_is_the_one_clicked() -> None:
    """The cycle point shown is the one nearest to the click, to its full digits."""
    system = system_of("logistic")
    # The 2-cycle at r = 1 + sqrt(6) has two points; each is shown when it is clicked.
    low, high = (click(system, "3.45", "0.2", observed, "1").onsets[0] for observed in ("0.44", "0.85"))
    assert low.value == high.value
    assert low.states[0][1].startswith("0.4399601690018")
    assert high.states[0][1].startswith("0.8499377795547")


def test_observed_formula_places_the_click() -> None:
    """Distances are measured in the observed quantity, whatever formula it is."""
    system = system_of("logistic").with_diagram("r", "100*x + r")
    onset = click(system, "3.45", "0.2", "47.4", "100").onsets[0]
    assert onset.states[0][1].startswith("0.43996")


def test_two_close_candidates_are_both_returned() -> None:
    """Half-way between two levels, no choice is made for the user."""
    middle = (Fraction(LOGISTIC[4]) + Fraction(LOGISTIC[5])) / 2
    result = click(system_of("logistic"), middle, "0.3")
    assert [onset.period_before for onset in sorted(result.onsets, key=lambda o: o.value_fraction)] == [
        16,
        32,
    ]
    assert "second" in result.message


@pytest.mark.parametrize("depth", [12, 15, 20, 40])
@pytest.mark.parametrize("level", [1, 3, 6])
def test_deep_view_of_a_known_split(level: int, depth: int) -> None:
    """Where doubles cannot tell columns apart a click still refines, to as many digits as it takes."""
    truth = Fraction(LOGISTIC[level - 1])
    width = Fraction(1, 10**depth)
    onset = click(system_of("logistic"), truth + width / 50, width).onsets[0]
    assert onset.status is Status.PROVED
    assert onset.period_before == 2 ** (level - 1)
    assert abs(onset.value_fraction - truth) < width / 1000
    assert Fraction(onset.upper) - Fraction(onset.lower) < width / 1000


def test_deep_view_high_on_the_cascade() -> None:
    """A level that settling orbits in doubles cannot reach is climbed to by the cascade's own ratios."""
    truth = Fraction(LOGISTIC[11])
    onset = click(system_of("logistic"), truth - Fraction(1, 10**16), Fraction(1, 10**14)).onsets[0]
    assert (onset.period_before, onset.status) == (2048, Status.PROVED)
    assert abs(onset.value_fraction - truth) < Fraction(1, 10**20)


def test_deep_view_of_a_fold() -> None:
    """1 + sqrt(8) in a view of width 1e-18."""
    near = Fraction("3.82842712474619009760337744841939615713934375075")
    onset = click(system_of("logistic"), near, Fraction(1, 10**18)).onsets[0]
    assert (onset.kind, onset.period_after, onset.status) == (Kind.FOLD, 3, Status.PROVED)
    assert (Fraction(onset.lower) - 1) ** 2 < 8 < (Fraction(onset.upper) - 1) ** 2


@pytest.mark.parametrize(
    ("system", "near", "width"),
    [("logistic", "3.2", "0.1"), ("logistic", "2.5", "0.5"), ("logistic", "3.2", "1e-16")],
)
def test_nothing_in_reach(system: str, near: str, width: str) -> None:
    """No onset: the words say where was looked, how far, and at what."""
    with pytest.raises(NoOnsetFound) as caught:
        click(system_of(system), near, width)
    text = str(caught.value)
    assert f"r = {near}" in text
    assert "no flip and no fold" in text
    assert "period" in text
    assert "widen the view" in text


def test_escaping_orbits_are_named() -> None:
    """Where everything escapes the words say so."""
    with pytest.raises(NoOnsetFound, match="all orbits escaped"):
        click(own_map("r*x*(1 - x)", low="0"), "7", "0.5")


def test_view_without_width() -> None:
    """A degenerate view is refused in words."""
    with pytest.raises(NoOnsetFound, match="no width"):
        click(system_of("logistic"), "3", "0")


@pytest.mark.parametrize(
    ("unit", "rate"), [("1e9", "1"), ("1e-9", "1"), ("1", "1e-9"), ("1", "1e9"), ("1e12", "1e-12")]
)
def test_units_and_missing_ranges(unit: str, rate: str) -> None:
    """A map without a range for its state, in any units of state and parameter, is clicked like any other."""
    start, value = (f"{share * float(size):.3e}" for share, size in ((0.3, unit), (3.2, rate)))
    system = own_map(f"(r/{rate})*x*(1 - x/{unit})", start=start, low=None, value=value)
    near, width = Fraction("3.46") * Fraction(rate), Fraction("0.3") * Fraction(rate)
    onset = click(system, near, width).onsets[0]
    assert (onset.kind, onset.period_before, onset.status) == (Kind.FLIP, 2, Status.PROVED)
    low, high = (Fraction(end) / Fraction(rate) - 1 for end in (onset.lower, onset.upper))
    assert low**2 < 6 < high**2


def test_state_far_from_zero() -> None:
    """The logistic map moved to a state of 1e6 keeps its onsets, and their proofs."""
    system = own_map(
        "1000000 + r*(x - 1000000)*(1 - (x - 1000000))", start="1000000.4", low="1000000", high="1000001"
    )
    onset = click(system, "3.46", "0.3").onsets[0]
    assert (onset.period_before, onset.status) == (2, Status.PROVED)
    assert (Fraction(onset.lower) - 1) ** 2 < 6 < (Fraction(onset.upper) - 1) ** 2


def test_mirror_image_clicked_is_shown() -> None:
    """In the odd cubic the same split is on both sides of zero; the one clicked is shown."""
    system = system_of("cubic")
    up, down = (click(system, "2.24", "0.2", observed, "2").onsets[0] for observed in ("0.85", "-0.85"))
    assert up.value == down.value
    assert float(up.states[0][1]) == pytest.approx(-float(down.states[0][1]))
    assert float(up.states[0][1]) == pytest.approx(0.8507, abs=1e-3)


def test_view_without_height() -> None:
    """A height of zero counts as none."""
    assert click(system_of("logistic"), "3.02", "0.2", "0.66", "0").onsets[0].period_before == 1


def test_subcritical_flip_by_a_click() -> None:
    """A flip that jumps is found from its stable side and called subcritical (1/4 - 1 by hand)."""
    onset = click(own_map("-r*x + x**2/2 - x**3"), "1.004", "0.5").onsets[0]
    assert (onset.kind, onset.criticality, onset.status) == (
        Kind.FLIP,
        Criticality.SUBCRITICAL,
        Status.PROVED,
    )
    assert Fraction(onset.lower) < 1 < Fraction(onset.upper)


def test_pitchfork_is_no_fold() -> None:
    """A click on the pitchfork of a symmetric map finds it, and no fold."""
    (onset,) = click(own_map("r*x - x**3"), "1.001", "0.1").onsets
    assert onset.kind is Kind.PITCHFORK


def test_steps_come_often_and_carry_words() -> None:
    """A click can be dropped between any two of its steps."""
    request = RefineRequest(system_of("logistic"), "r", Fraction("3.9"), Fraction("0.1"))
    job = refine(request)
    steps = [next(job) for _ in range(5)]
    assert all(isinstance(step, Step) and step.text for step in steps)
    job.close()
    assert finish(refine(request)).onsets
