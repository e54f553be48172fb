"""Ladders of one-state maps: published values enclosed, directions, base periods, ends."""

from __future__ import annotations

from fractions import Fraction

import pytest
from known_onsets import LADDERS, KnownLadder, ladder
from running import climb, finish, own_map, system_of

from tinemark.onsets import engine
from tinemark.onsets.ladder import LONGEST_PERIOD
from tinemark.onsets.results import Criticality, Kind, LadderLevel, LadderRequest, Status, Step
from tinemark.systems.errors import NoOnsetFound, TinemarkError


def _unit(text: str) -> Fraction:
    """One unit of the last decimal: known values are truncated there."""
    return Fraction(1, 10 ** len(text.partition(".")[2]))


@pytest.mark.parametrize("known", LADDERS, ids=lambda known: known.name)
def test_known_ladder_is_enclosed(known: KnownLadder) -> None:
    """Every level is proved, to the digits asked for, around the known value."""
    count = min(len(known.onsets), 12)
    result = climb(system_of(known.system, known.values), known.start, known.stop, levels=count, digits=25)
    assert [level.level for level in result.levels] == list(range(1, count + 1))
    assert result.message == ""
    for number, (level, text) in enumerate(zip(result.levels, known.onsets, strict=False)):
        onset = level.onset
        assert onset.status is Status.PROVED
        assert onset.kind is Kind.FLIP
        assert onset.criticality is Criticality.SUPERCRITICAL
        assert (onset.period_before, onset.period_after) == (2**number, 2 ** (number + 1))
        lower, upper = Fraction(onset.lower), Fraction(onset.upper)
        assert upper - lower < abs(lower) / 10**25
        slack = _unit(text)
        assert lower - slack <= Fraction(text) <= upper + slack


def test_fifty_digits_of_the_logistic_ladder() -> None:
    """The published 50 digits of levels 1 to 10 come out, and lie inside the proved intervals."""
    known = ladder("logistic")
    result = climb(system_of("logistic"), "2.8", "4", levels=10, digits=50)
    for level, text in zip(result.levels, known.onsets, strict=False):
        onset = level.onset
        assert onset.status is Status.PROVED
        assert abs(onset.value_fraction - Fraction(text)) <= _unit(text)
        assert Fraction(onset.upper) - Fraction(onset.lower) < Fraction(1, 10**49)


def test_sixteen_levels() -> None:
    """Cycles of 32768 points, proved to 25 digits, inside the published values."""
    result = climb(system_of("logistic"), "2.8", "4", levels=16, digits=25)
    assert len(result.levels) == 16
    for level, text in zip(result.levels, ladder("logistic").onsets, strict=False):
        onset = level.onset
        assert onset.status is Status.PROVED
        assert Fraction(onset.lower) - _unit(text) <= Fraction(text) <= Fraction(onset.upper) + _unit(text)
        assert Fraction(onset.upper) - Fraction(onset.lower) < Fraction(1, 10**25)


def test_gaps_get_digits_of_their_own() -> None:
    """Few digits asked for: high levels carry as many as it takes to tell them apart."""
    levels = climb(system_of("logistic"), "2.8", "4", levels=11, digits=5).levels
    values = [level.onset.value_fraction for level in levels]
    ratios = [(b - a) / (c - b) for a, b, c in zip(values, values[1:], values[2:], strict=False)]
    # Published delta_k of the logistic ladder: ... 4.669201442152, 4.669201572481.
    assert abs(ratios[-1] - Fraction("4.669201572481")) < Fraction(1, 10**5)


def test_descending_ladder() -> None:
    """From the other end of the Gaussian map the ladder runs down, and its gaps too."""
    result = climb(system_of("gaussian"), "1", "-0.7", levels=6, digits=20)
    values = [level.onset.value_fraction for level in result.levels]
    assert len(values) == 6
    assert values == sorted(values, reverse=True)
    # Closed form by Lambert's W, as in the table of known onsets.
    assert abs(values[0] - Fraction("0.414417060746122423374133291881")) < Fraction(1, 10**20)
    ratios = [(b - a) / (c - b) for a, b, c in zip(values, values[1:], values[2:], strict=False)]
    assert abs(float(ratios[-1]) - 4.6692) < 0.05


def test_ladder_inside_a_window() -> None:
    """Base period 3, within the window and from far outside it."""
    inside = climb(system_of("logistic"), "3.83", "3.85", base=3, levels=7)
    outside = climb(system_of("logistic"), "2.8", "4", base=3, levels=7)
    assert inside.levels == outside.levels
    assert inside.base_period == 3
    assert [level.onset.period_before for level in inside.levels] == [3 * 2**n for n in range(7)]
    # Root of the polynomial of the period-3 flip, check table of windows.
    first = inside.levels[0].onset
    assert abs(first.value_fraction - Fraction("3.8414990075435078463107024438")) < Fraction(1, 10**20)
    # Accumulation of the window at 3.849433681161919.
    assert Fraction("3.84943") < inside.levels[-1].onset.value_fraction < Fraction("3.849433681161919")


def test_ladder_ends_at_stop_and_says_so() -> None:
    """Levels beyond the range are not reported, and the reason is given."""
    result = climb(system_of("logistic"), "2.8", "3.55", levels=8)
    assert [level.level for level in result.levels] == [1, 2, 3]
    assert "3.55" in result.message
    assert "level 3" in result.message


def test_bubble_has_one_level() -> None:
    """A flat Gaussian doubles once and merges again: there is no second level."""
    result = climb(system_of("gaussian", (("alpha", "3"),)), "-1", "1", levels=4)
    assert len(result.levels) == 1
    assert "level 1" in result.message


def test_no_first_level() -> None:
    """No flip of the base period in the range: says what was seen and what to do."""
    with pytest.raises(NoOnsetFound) as caught:
        climb(system_of("logistic"), "3.2", "3.4", levels=4)
    text = str(caught.value)
    assert "period 1" in text
    assert "periods 2" in text
    assert "start before" in text
    assert "either end" in text


def test_no_stable_cycle_is_claimed_of_the_tent_map() -> None:
    """Narrow chaotic bands come back nearly to where they were, but every slope is mu > 1."""
    with pytest.raises(NoOnsetFound, match="no stable cycle was seen"):
        climb(system_of("tent"), "1.05", "2", levels=3)


@pytest.mark.parametrize(
    "change", [{"base_period": 0}, {"levels": 0}, {"digits": 0}, {"digits": 100000}], ids=str
)
def test_senseless_requests_are_refused(change: dict[str, int]) -> None:
    """Numbers outside their range end in a clear error."""
    fields: dict[str, int] = {"base_period": 1, "levels": 3, "digits": 20} | change
    request = LadderRequest(system_of("logistic"), "r", Fraction(2), Fraction(4), **fields)
    with pytest.raises(TinemarkError):
        finish(engine.ladder(request))


def test_levels_are_yielded_as_they_are_found() -> None:
    """Each level comes between steps, before the ladder is finished, and steps carry words."""
    request = LadderRequest(system_of("logistic"), "r", Fraction("2.8"), Fraction(4), 1, 4, 20)
    items = list(engine.ladder(request))
    found = [item for item in items if isinstance(item, LadderLevel)]
    assert [level.level for level in found] == [1, 2, 3, 4]
    steps = [item for item in items if isinstance(item, Step)]
    assert all(step.text for step in steps)
    assert items.index(found[0]) < items.index(found[1]) - 1


@pytest.mark.parametrize(
    ("start", "stop", "words"), [("3", "3", "empty"), ("3", "3.0000000000000001", "too narrow")]
)
def test_ranges_without_room(start: str, stop: str, words: str) -> None:
    """Empty and far too narrow ranges are refused in words."""
    with pytest.raises(NoOnsetFound, match=words):
        climb(system_of("logistic"), start, stop)


@pytest.mark.parametrize("formula", ["r", "0.5", "x", "r*x", "exp(exp(r*x))"])
def test_maps_without_a_cascade(formula: str) -> None:
    """Constant, straight and escaping maps end in words, not in a long search."""
    with pytest.raises(NoOnsetFound):
        climb(own_map(formula), "0.5", "1.5", levels=3)


def test_a_deep_ladder_can_be_dropped_at_any_step() -> None:
    """Twenty levels may be asked for; within a long level there are steps, and none is left behind."""
    request = LadderRequest(system_of("logistic"), "r", Fraction("2.8"), Fraction(4), 1, 20, 25)
    job = engine.ladder(request)
    steps, level = 0, 0
    for item in job:
        if isinstance(item, LadderLevel):
            level, steps = item.level, 0
        elif level == 15:
            steps += 1
            if steps == 5:
                job.close()
    assert (level, steps) == (15, 5)


def test_longest_period_holds_twenty_levels_of_any_window_up_to_sixteen() -> None:
    assert LONGEST_PERIOD >= 16 * 2**20
