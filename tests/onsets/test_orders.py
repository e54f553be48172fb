"""Cascades of maps whose maximum is of order 3 to 8: levels, class by its rate, and what comes next.

The rates of odd orders are negative tests as well: those widely quoted for 3 and 5 belong to no cascade.
"""

from __future__ import annotations

from fractions import Fraction
from functools import cache

import pytest
from running import climb, own_map

from tinemark.onsets.class_values import CLASSES, CascadeClass
from tinemark.onsets.results import LadderLevel, Status
from tinemark.onsets.scaling import points_of, scaling
from tinemark.systems.system import System

ORDERS = (3, 4, 5, 6, 7, 8)
LEVELS = 12
QUOTED_WRONGLY = {3: Fraction("5.96796870377745104099"), 5: Fraction("8.3494991320")}
"""Found in many places; they follow from leaving out the absolute value (see the class values)."""


def map_of_order(order: int, *, by_power: bool = False) -> System:
    """1 - r*abs(x)**order; even orders also without the absolute value."""
    power = f"x**{order}" if by_power else f"abs(x)**{order}"
    return own_map(f"1 - r*{power}", start="0.3")


@cache
def levels_of(order: int, count: int, by_power: bool = False) -> tuple[LadderLevel, ...]:
    """The first levels of the cascade, followed once for all tests."""
    return climb(map_of_order(order, by_power=by_power), "0.1", "2", levels=count, digits=25).levels


def class_of(order: int) -> CascadeClass:
    """The class of an order."""
    return next(item for item in CLASSES if item.order == order)


@pytest.mark.parametrize("order", ORDERS)
def test_all_levels_belong_to_one_cascade(order: int) -> None:
    """The first flip in closed form (fixed point z/(z + 1)), then gaps that shrink as one cascade's."""
    levels = levels_of(order, LEVELS)
    assert [item.level for item in levels] == list(range(1, LEVELS + 1))
    assert {item.onset.status for item in levels} == {Status.PROVED}
    first = Fraction(order + 1, order) ** (order - 1) / order
    assert Fraction(levels[0].onset.lower) <= first <= Fraction(levels[0].onset.upper)
    values = [item.onset.value_fraction for item in levels]
    ratios = [(b - a) / (c - b) for a, b, c in zip(values, values[1:], values[2:], strict=False)]
    # The first gaps of flat maxima are long; from then on no ratio strays from the class by much.
    rate = class_of(order).delta_fraction
    assert all(abs(ratio / rate - 1) < Fraction(1, 10) for ratio in ratios[2:])


@pytest.mark.parametrize("order", [4, 6])
def test_even_orders_are_the_same_with_and_without_the_absolute_value(order: int) -> None:
    with_it = [item.onset.value for item in levels_of(order, LEVELS)]
    assert [item.onset.value for item in levels_of(order, LEVELS, by_power=True)] == with_it


def test_a_flat_maximum_does_not_throw_the_ladder_into_another_window() -> None:
    """Order 5: the superstable parameters of periods 4 to 32, solved for apart, separate the flips.

    Secant method on f^p(0) = 0 in 40 digits, with mpmath and no code of ours.
    """
    superstable = ("1", "1.558834308816740", "1.635068924796083", "1.644283090853060", "1.645384238772404")
    flips = [item.onset.value_fraction for item in levels_of(5, LEVELS)]
    for place, text in enumerate(superstable):
        assert flips[place] < Fraction(text) < flips[place + 1]


@pytest.mark.parametrize("order", ORDERS)
@pytest.mark.parametrize("count", range(1, LEVELS + 1))
def test_class_and_next_onsets(order: int, count: int) -> None:
    """No verdict from fewer than four levels, none that is wrong, and predictions that hold."""
    levels = levels_of(order, LEVELS)
    found = scaling(points_of(levels[:count]))
    known = class_of(order)
    if count < 4:
        assert found.verdict.name == "undecided"
        return
    assert found.verdict.name in (known.name, "undecided")
    assert found.delta is None or known.lies_within(found.delta.lower, found.delta.upper)
    for prediction in found.predictions:
        if prediction.level <= LEVELS:
            later = levels[prediction.level - 1].onset
            assert prediction.onset.lower <= Fraction(later.lower)
            assert Fraction(later.upper) <= prediction.onset.upper
    if count >= 10:
        assert found.verdict.name == known.name
        assert len(found.predictions) == 3


@pytest.mark.parametrize("order", sorted(QUOTED_WRONGLY))
def test_rates_in_circulation_are_excluded(order: int) -> None:
    """The measured delta holds the recomputed value and is far from the quoted one."""
    found = scaling(points_of(levels_of(order, LEVELS)))
    assert found.delta is not None
    assert not found.delta.lower <= QUOTED_WRONGLY[order] <= found.delta.upper
    assert all(abs(item.delta_fraction - QUOTED_WRONGLY[order]) > Fraction(1, 1000) for item in CLASSES)
