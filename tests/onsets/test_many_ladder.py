"""Ladders of maps of several states, against recomputed onsets."""

from __future__ import annotations

from collections.abc import Iterator
from fractions import Fraction
from itertools import pairwise

import numpy as np
import pytest
from long_ladders import LONG_LADDERS
from running import finish, system_of

from tinemark.onsets.many_cycles import Cycle, condensed, least_period, multipliers, newton, same_cycle
from tinemark.onsets.many_engine import ladder_many
from tinemark.onsets.many_map import float_many_map, many_map
from tinemark.onsets.results import Criticality, LadderLevel, LadderRequest, LadderResult, Status
from tinemark.onsets.scaling import points_of, scaling
from tinemark.systems.errors import NoOnsetFound

ONSETS = {ladder.name: ladder for ladder in LONG_LADDERS}


def ladder(
    name: str,
    parameter: str,
    start: str,
    stop: str,
    levels: int,
    values: tuple[tuple[str, str], ...] = (),
    **more: int,
) -> LadderResult:
    request = LadderRequest(
        system_of(name, values), parameter, Fraction(start), Fraction(stop), levels=levels, **more
    )
    return finish(ladder_many(request))


def assert_holds(
    result: LadderResult,
    onsets: tuple[str, ...],
    levels: int,
    digits: int = 20,
    status: Status = Status.PROVED,
) -> None:
    assert [item.level for item in result.levels] == list(range(1, levels + 1))
    for item, text in zip(result.levels, onsets, strict=False):
        onset, known = item.onset, Fraction(text)
        cut = Fraction(1, 10 ** len(text.partition(".")[2])) if "." in text else 0
        assert Fraction(onset.lower) - cut <= known <= Fraction(onset.upper) + cut
        assert onset.half_width < abs(known) / 10 ** (digits - 1)
        assert onset.period_before == result.base_period * 2 ** (item.level - 1)
        assert onset.period_after == 2 * onset.period_before
        assert onset.status is status


def test_henon_ten_levels() -> None:
    """b = 0.3 (Derrida, Gervois and Pomeau 1979, from memory; recomputed to 30 digits)."""
    result = ladder("henon", "a", "0.2", "1.3", 10)
    assert_holds(result, ONSETS["henon"].onsets, 10)
    assert all(item.onset.criticality is Criticality.SUPERCRITICAL for item in result.levels)
    found = scaling(points_of(result.levels))
    assert found.verdict.name == "quadratic maximum"
    assert found.limit is not None
    assert found.limit.lower <= Fraction("1.05804904934053") <= found.limit.upper


def test_conservative_seven_levels() -> None:
    """b = -1 (Greene, MacKay, Vivaldi and Feigenbaum 1981; recomputed to 28 digits)."""
    result = ladder("henon", "a", "2.9", "4.3", 7, (("b", "-1"),))
    assert_holds(result, ONSETS["conservative"].onsets, 7)
    assert all("both multipliers exactly -1" in dict(item.onset.evidence) for item in result.levels)
    assert all(item.onset.criticality is Criticality.SUPERCRITICAL for item in result.levels)
    assert scaling(points_of(result.levels)).verdict.name == "conservative"


def test_a_nearly_conservative_ladder_gives_no_early_verdict() -> None:
    """At b = -0.9 the ratios begin at 8.21, 8.32 and reach 4.669 only later: four levels tell nothing."""
    result = ladder("henon", "a", "2.6", "3.95", 10, (("b", "-0.9"),))
    assert Fraction(result.levels[0].onset.lower) <= 3 * Fraction("1.9") ** 2 / 4
    points = points_of(result.levels)
    early = scaling(points[:4])
    assert early.verdict.name == "undecided"
    assert early.levels[0].ratio is not None
    assert early.levels[0].ratio.value.startswith("8.21")
    assert scaling(points).verdict.name == "quadratic maximum"


def test_two_patches_follow_the_logistic_ladder() -> None:
    """In step, the patches split at the logistic onsets whatever the exchange (Fujisaka and Yamada 1983)."""
    for exchange in ("0.1", "0.25"):
        result = ladder("two_patch", "r", "2.8", "3.7", 5, (("e", exchange),))
        assert_holds(result, ONSETS["logistic"].onsets, 5)


def test_two_flips_close_together_are_told_apart() -> None:
    """With e = 0.02 the steady state flips in step at 3 and out of step at 2 + 1/(1 - 2 e) (both exact)."""
    for start in ("2.7", "2.9", "2.5"):
        result = ladder("two_patch", "r", start, "4", 4, (("e", "0.02"),))
        assert_holds(result, ONSETS["logistic"].onsets, 4)


def test_a_ladder_from_a_window() -> None:
    """The window of period 3 of the logistic map, two patches in step (recomputed)."""
    result = ladder("two_patch", "r", "3.835", "3.85", 3, base_period=3)
    assert_holds(result, ONSETS["window of period 3"].onsets, 3)


def test_forty_digits() -> None:
    result = ladder("henon", "a", "0.2", "1.3", 4, digits=40)
    assert_holds(result, ONSETS["henon"].onsets, 4, 30)
    assert all(item.onset.half_width < Fraction(1, 10**38) for item in result.levels)


def test_a_ladder_downwards() -> None:
    """With -a for a Hénon's map falls instead of rising; the levels are the same with the other sign."""
    from tinemark.systems.system_file import read_system_text

    system = read_system_text(
        'title = "mirrored"\nkind = "map"\n[states.x]\nstart = "0.1"\n[states.y]\nstart = "0.1"\n'
        '[parameters.m]\nvalue = "-1"\n[next]\nx = "1 + m*x**2 + y"\ny = "0.3*x"\n'
        '[diagram]\nparameter = "m"\nobserve = "x"\n'
    )
    result = finish(ladder_many(LadderRequest(system, "m", Fraction("-0.2"), Fraction("-1.3"), levels=4)))
    for item, text in zip(result.levels, ONSETS["henon"].onsets, strict=False):
        assert Fraction(item.onset.lower) <= -Fraction(text) <= Fraction(item.onset.upper)


def test_a_sweep_that_ends_early_says_so() -> None:
    result = ladder("henon", "a", "0.2", "0.95", 6)
    assert len(result.levels) == 2
    assert "0.95" in result.message
    with pytest.raises(NoOnsetFound, match="shows no flip"):
        ladder("henon", "a", "0.1", "0.3", 3)


def test_a_cycle_that_begins_to_rotate_is_not_a_ladder() -> None:
    """The delayed logistic map's Neimark-Sacker onset at r = 2 (Maynard Smith 1968, from memory)."""
    with pytest.raises(NoOnsetFound, match=r"Neimark-Sacker onset near r = 2\b"):
        ladder("delayed_logistic", "r", "1.8", "2.2", 3)


def test_no_cycle_of_the_base_period() -> None:
    with pytest.raises(NoOnsetFound, match="no cycle of period 5"):
        ladder("henon", "a", "0.2", "0.3", 3, base_period=5)


def test_levels_come_as_they_are_found() -> None:
    request = LadderRequest(system_of("henon"), "a", Fraction("0.2"), Fraction("1.3"), levels=3)
    heard: Iterator[object] = ladder_many(request)
    kinds = [type(item).__name__ for item in heard]
    places = [place for place, kind in enumerate(kinds) if kind == LadderLevel.__name__]
    assert len(places) == 3
    assert all(later - earlier > 3 for earlier, later in pairwise(places))


def test_condensing_agrees_with_products_one_by_one() -> None:
    float_map = float_many_map(many_map(system_of("henon"), "a"))
    points = np.random.default_rng(4).uniform(-1, 1, (11, 2))
    parts = condensed(float_map, points, 0.9)
    linear = float_map.linearised(points, 0.9)
    product, shift = np.eye(2), np.zeros(2)
    for place in range(11):
        assert np.allclose(parts.blocks[place, :, :2], product)
        assert np.allclose(parts.blocks[place, :, 2], shift)
        product, shift = (
            linear.jacobian[place] @ product,
            linear.jacobian[place] @ shift + linear.slope[place],
        )
    assert np.allclose(parts.monodromy, product)


def test_cycles_and_their_multipliers() -> None:
    """Hénon's 2-cycle: multipliers have product b^2 and sum 4((1 - b)^2 - a) + 2b (standard)."""
    float_map = float_many_map(many_map(system_of("henon"), "a"))
    scales = float_map.scales(0.6)
    guess = Cycle(np.array([[1.1, -0.1], [-0.1, 0.33]]), 0.6)
    cycle = newton(float_map, guess, scales)
    assert cycle is not None
    assert least_period(cycle.points, scales) == 2
    assert same_cycle(cycle, Cycle(cycle.points[::-1].copy(), 0.6), scales)
    values = multipliers(float_map, cycle)
    assert np.prod(values) == pytest.approx(0.09)
    assert sum(values) == pytest.approx(4 * (0.49 - 0.6) + 0.6)
    twice = Cycle(np.tile(cycle.points, (3, 1)), 0.6)
    assert least_period(twice.points, scales) == 2
