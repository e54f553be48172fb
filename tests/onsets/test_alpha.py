"""Alpha of ladders from their superstable cycles, against published values and superstable parameters.

Alpha of order 2: Briggs 1991, OEIS A006891; of the other orders as in the class values, recomputed twice.
"""

from __future__ import annotations

from collections.abc import Generator
from fractions import Fraction
from typing import Any

import pytest
from known_onsets import LADDERS, KnownLadder
from running import climb, finish, own_map, system_of
from test_orders import class_of, levels_of, map_of_order

from tinemark.onsets.alpha import LEAST_LEVELS, AlphaResult, alpha_of_distances, alpha_of_ladder
from tinemark.onsets.ladder_points import Estimate
from tinemark.onsets.results import LadderResult, Step
from tinemark.onsets.scaling import points_of, scaling
from tinemark.systems.system import System

LEVELS = 12


def alpha_of(system: System, result: LadderResult, count: int = LEVELS) -> AlphaResult:
    """Alpha of the first levels of a ladder."""
    return finish(alpha_of_ladder(system, system.diagram_parameter, result.levels[:count]))


def followed(known: KnownLadder) -> tuple[System, LadderResult]:
    """A known ladder, climbed."""
    system = system_of(known.system, known.values)
    return system, climb(system, known.start, known.stop, levels=LEVELS, digits=25)


def assert_predictions_hold(result: LadderResult) -> None:
    """From four levels on, the next three onsets are predicted; each proved later lies where it should."""
    for count in range(4, len(result.levels)):
        predictions = scaling(points_of(result.levels[:count])).predictions
        assert [item.level for item in predictions] == [count + 1, count + 2, count + 3]
        for prediction in predictions:
            if prediction.level <= len(result.levels):
                later = result.levels[prediction.level - 1].onset
                assert prediction.onset.lower <= Fraction(later.lower)
                assert Fraction(later.upper) <= prediction.onset.upper


@pytest.mark.parametrize("known", LADDERS, ids=lambda known: known.name)
def test_alpha_and_delta_from_twelve_levels(known: KnownLadder) -> None:
    """Both intervals hold the published values; ten digits of alpha for a quadratic maximum.

    Only the flatter Gaussian comes short of them: near its bubbles, where the cascade takes longer to settle.
    """
    system, result = followed(known)
    found = alpha_of(system, result)
    order = 4 if known.name == "quartic" else 2
    truth = class_of(order)
    assert found.order == order
    assert found.estimate is not None
    assert found.estimate.lower <= Fraction(truth.alpha) <= found.estimate.upper
    scaled = scaling(points_of(result.levels))
    assert scaled.delta is not None
    assert scaled.delta.lower <= truth.delta_fraction <= scaled.delta.upper
    assert scaled.verdict.name == truth.name
    assert_predictions_hold(result)
    if order == 2:
        limit = Fraction(5, 10**9) if known.name == "Gaussian 4.9" else Fraction(5, 10**10)
        assert found.estimate.uncertainty_fraction < limit


def test_ten_digits_of_both_from_twelve_levels_of_the_logistic_map() -> None:
    """And they are those published: 2.502907875095892822, 4.669201609102990671."""
    system, result = followed(LADDERS[0])
    found, scaled = alpha_of(system, result), scaling(points_of(result.levels))
    assert found.estimate is not None
    assert scaled.delta is not None
    assert abs(found.estimate.value_fraction - Fraction("2.502907875095892822")) < Fraction(1, 10**11)
    assert found.estimate.uncertainty_fraction < Fraction(1, 10**10)
    assert abs(scaled.delta.value_fraction - Fraction("4.669201609102990671")) < Fraction(1, 10**10)
    assert scaled.delta.uncertainty_fraction < Fraction(1, 10**10)


@pytest.mark.parametrize("order", [3, 4, 5, 6, 7, 8])
@pytest.mark.parametrize("count", [5, 9, 12])
def test_alpha_of_orders_three_to_eight(order: int, count: int) -> None:
    """Whatever the number of levels, the interval holds alpha; with twelve it tells the orders apart."""
    system, truth = map_of_order(order), Fraction(class_of(order).alpha)
    found = finish(alpha_of_ladder(system, "r", levels_of(order, 12)[:count]))
    assert found.estimate is not None
    assert found.order == order
    assert found.estimate.lower <= truth <= found.estimate.upper
    if count == 12:
        assert found.estimate.uncertainty_fraction < Fraction(1, 10**6)


def test_superstable_parameters_of_the_logistic_map() -> None:
    """Period 2 at 1 + sqrt(5); each lies between the flips that begin and end its cycle."""
    system, result = followed(LADDERS[0])
    found = alpha_of(system, result)
    assert [period for period, _ in found.superstable] == [2**n for n in range(1, LEVELS + 1)]
    assert abs((found.superstable[0][1] - 1) ** 2 - 5) < Fraction(1, 10**20)
    flips = [item.onset.value_fraction for item in result.levels]
    for place, (_, value) in enumerate(found.superstable[:-1]):
        assert flips[place] < value < flips[place + 1]
    assert flips[-1] < found.superstable[-1][1]


def test_superstable_parameters_of_order_five() -> None:
    """Solved for apart by the secant method on f^p(0) = 0, 40 digits, with mpmath and no code of ours."""
    found = finish(alpha_of_ladder(map_of_order(5), "r", levels_of(5, 12)[:6]))
    known = ("1", "1.558834308816740165726956", "1.635068924796083740504808", "1.644283090853060748224814")
    for (_, value), text in zip(found.superstable, known, strict=False):
        assert abs(value - Fraction(text)) < Fraction(1, 10**20)


def test_alpha_of_a_window() -> None:
    """A ladder of base period 3: the same number."""
    system = system_of("logistic")
    result = climb(system, "3.83", "3.85", base=3, levels=9, digits=25)
    found = alpha_of(system, result)
    assert_predictions_hold(result)
    assert found.estimate is not None
    assert [period for period, _ in found.superstable[:3]] == [6, 12, 24]
    assert found.estimate.lower <= Fraction("2.502907875095892822") <= found.estimate.upper
    assert found.estimate.uncertainty_fraction < Fraction(1, 10**5)


def test_alpha_of_a_descending_ladder() -> None:
    system = system_of("gaussian")
    result = climb(system, "1", "-0.7", levels=LEVELS, digits=25)
    found = alpha_of(system, result)
    assert_predictions_hold(result)
    assert found.estimate is not None
    assert found.estimate.lower <= Fraction("2.502907875095892822") <= found.estimate.upper
    assert found.estimate.uncertainty_fraction < Fraction(1, 10**8)


def test_too_few_levels_and_many_states_are_said() -> None:
    system = system_of("logistic")
    result = climb(system, "2.8", "4", levels=LEAST_LEVELS - 1)
    few = alpha_of(system, result)
    assert few.estimate is None
    assert f"at least {LEAST_LEVELS}" in few.reason
    # A run that does not begin with the first level has no gap to look in.
    assert finish(alpha_of_ladder(system, "r", result.levels[1:])).estimate is None
    henon = finish(alpha_of_ladder(system_of("henon"), "a", result.levels))
    assert henon.estimate is None
    assert "one state" in henon.reason


def test_a_ladder_of_another_map_is_refused() -> None:
    """The flips of the logistic map do not hold superstable cycles of a map without a turning point there."""
    levels = climb(system_of("logistic"), "2.8", "4", levels=6).levels
    found = finish(alpha_of_ladder(own_map("r*x", low="0"), "r", levels))
    assert found.estimate is None
    assert "turning point" in found.reason


def test_distances_that_say_nothing() -> None:
    same = [Fraction(1)] * 8
    assert alpha_of_distances(same, same, None)[1] is None
    assert alpha_of_distances([Fraction(0)] * 8, same, None)[1] is None
    # Straight pieces meeting in a corner: distances scale alike before and after the fold.
    corner = [Fraction(1, 2**n) for n in range(8)]
    order, estimate, reason = alpha_of_distances(corner, corner, None)
    assert (order, estimate) == (1, None)
    assert "smooth" in reason


def test_alpha_needs_no_delta() -> None:
    """Geometric distances: alpha comes out with delta unknown, and is not lost with one that misleads."""
    near = [Fraction(5, 2) ** -n * (1 + Fraction(1, 6) ** n) for n in range(10)]
    later = [value**2 for value in near]
    for delta in (None, Estimate("4.5", "0.4", "95 % coverage")):
        order, estimate, _ = alpha_of_distances(near, later, delta)
        assert order == 2
        assert estimate is not None
        assert estimate.lower <= Fraction(5, 2) <= estimate.upper


def test_steps_come_between() -> None:
    """The work can be shown and dropped at any step."""
    system, result = followed(LADDERS[0])
    job: Generator[Step, None, Any] = alpha_of_ladder(system, "r", result.levels)
    first = next(job)
    assert "superstable" in first.text
    job.close()
