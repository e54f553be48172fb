"""Surveys of a range: counts known since 1973, the table of windows, and what the answer says of itself."""

from __future__ import annotations

from collections import Counter
from fractions import Fraction
from typing import Any

import pytest
from known_onsets import WINDOWS
from known_splits import crises as known_crises
from running import finish, own_map, system_of

from tinemark.onsets.engine import survey
from tinemark.onsets.one_map import one_map
from tinemark.onsets.results import (
    Criticality,
    Kind,
    Onset,
    Status,
    Step,
    SurveyFind,
    SurveyRequest,
    SurveyResult,
)
from tinemark.onsets.superstable_search import SuperstableSearch, superstable_cycles
from tinemark.systems.errors import NoOnsetFound, TinemarkError
from tinemark.systems.system import System

SUPERSTABLE = {2: 1, 3: 1, 4: 2, 5: 3, 6: 5, 7: 9}
"""Superstable cycles of least period p of the quadratic map, doublings included: Metropolis, Stein and Stein
1973, J. Comb. Theory A 15:25 (from memory), as in check_values.md, section 4.4."""


def request(
    system: System, start: str, stop: str, most: int, digits: int = 20, kinds: frozenset[Kind] | None = None
) -> SurveyRequest:
    return SurveyRequest(
        system, system.diagram_parameter, Fraction(start), Fraction(stop), most, digits, kinds
    )


def surveyed(system: System, start: str, stop: str, most: int, **more: Any) -> SurveyResult:
    return finish(survey(request(system, start, stop, most, **more)))


def superstable(system: System, start: str, stop: str, most: int) -> SuperstableSearch:
    one = one_map(system, system.diagram_parameter)
    assert one.extent is not None
    return finish(superstable_cycles(one, Fraction(start), Fraction(stop), one.extent, most))


def encloses(onset: Onset, true: str) -> bool:
    # The table's decimals are rounded after 28: half a unit there is allowed for.
    slack = Fraction(1, 10**28)
    return Fraction(onset.lower) - slack <= Fraction(true) <= Fraction(onset.upper) + slack


@pytest.fixture(scope="module")
def logistic() -> SurveyResult:
    return surveyed(system_of("logistic"), "2.8", "4", 7)


def test_superstable_cycles_are_as_many_as_was_counted_in_1973() -> None:
    search = superstable(system_of("quadratic"), "0.1", "2", 7)
    assert search.complete
    assert search.sure_of_turning
    assert Counter(item.period for item in search.found) == SUPERSTABLE
    # The same in the logistic map's coordinates, where superstable means c = 1/2.
    assert (
        Counter(item.period for item in superstable(system_of("logistic"), "2.8", "4", 7).found)
        == SUPERSTABLE
    )


def test_superstable_parameters_are_those_of_the_tables() -> None:
    found = superstable(system_of("logistic"), "0.5", "4", 6).found
    values = [(item.period, item.r) for item in found]
    for window in WINDOWS:
        assert any(p == window.period and abs(r - float(window.superstable)) < 1e-12 for p, r in values)
    # s_0 = 2, s_1 = 1 + sqrt(5), exact; s_2: check_values.md, section 4.2 (R 55).
    for period, true in ((1, 2.0), (2, 1 + 5**0.5), (4, 3.498561699327702)):
        assert any(p == period and abs(r - true) < 1e-12 for p, r in values)
    assert len(found) == 1 + 1 + 1 + 2 + 3 + 5


def test_every_flip_and_fold_up_to_period_seven_is_found_and_proved(logistic) -> None:
    crises = Kind.CRISIS
    assert all((onset.status is Status.PROVED) is (onset.kind is not crises) for onset in logistic.onsets)
    flips = Counter(onset.period_before for onset in logistic.onsets if onset.kind is Kind.FLIP)
    folds = Counter(onset.period_after for onset in logistic.onsets if onset.kind is Kind.FOLD)
    # Each superstable cycle's stretch ends in one flip; windows that are no doublings open with a fold.
    assert flips == SUPERSTABLE | {1: 1}
    assert folds == {3: 1, 4: 1, 5: 3, 6: 4, 7: 9}
    values = [onset.value_fraction for onset in logistic.onsets]
    assert values == sorted(values)
    assert logistic.message.startswith("22 flips, 41 crises and 18 folds of periods up to 7")
    assert "all 21 superstable cycles" in logistic.message


def test_every_window_of_a_survey_has_the_crisis_that_ends_it(logistic) -> None:
    crises = [onset for onset in logistic.onsets if onset.kind is Kind.CRISIS]
    assert {onset.status for onset in crises} == {Status.ESTIMATED}
    # A window of period n that opens with a fold ends on a cycle of n points, on which its bands, two for
    # each, have merged before. The whole one ends at 4; four bands are two before, and so on.
    folds = Counter({1: 1, 3: 1, 4: 1, 5: 3, 6: 4, 7: 9})
    assert Counter(onset.period_before for onset in crises) == folds + folds + Counter({2: 1, 4: 1, 6: 1})
    assert crises[-1].value_fraction == 4
    for split in known_crises():
        if split.system.title == system_of("logistic").title:
            (one,) = [o for o in crises if abs(o.value_fraction - split.value) < Fraction(1, 10**15)]
            assert one.period_before == split.period
    assert "crises were looked for in doubles" in logistic.message
    alone = surveyed(system_of("logistic"), "3.6", "3.9", 3, kinds=frozenset({Kind.CRISIS}))
    assert [onset.period_before for onset in alone.onsets] == [1, 3, 3]
    assert alone.message.startswith("3 crises of periods up to 3")
    # Several turning points: 3 sqrt(3)/2, exact.
    cubic = surveyed(system_of("cubic"), "2.3", "2.7", 3, kinds=frozenset({Kind.CRISIS})).onsets
    assert any(abs(o.value_fraction**2 - Fraction(27, 4)) < Fraction(1, 10**15) for o in cubic)


def test_no_bands_merge_where_the_critical_orbit_lands_too_late() -> None:
    """f^4(c) is the fixed point at 3.9277… too, though not from the mirror image: no bands merge there."""
    found = surveyed(system_of("logistic"), "3.92", "3.935", 2, kinds=frozenset({Kind.CRISIS}))
    assert found.onsets == ()


def test_all_windows_of_the_table_are_enclosed(logistic) -> None:
    for window in WINDOWS:
        fold = [o for o in logistic.onsets if o.kind is Kind.FOLD and o.period_after == window.period]
        flip = [o for o in logistic.onsets if o.kind is Kind.FLIP and o.period_before == window.period]
        assert sum(encloses(onset, window.fold) for onset in fold) == 1
        assert sum(encloses(onset, window.flip) for onset in flip) == 1


def test_finds_come_one_by_one_with_progress_and_the_job_can_be_dropped() -> None:
    job = survey(request(system_of("logistic"), "2.8", "4", 4))
    shares, finds = [], []
    while True:
        try:
            item = next(job)
        except StopIteration as done:
            result: SurveyResult = done.value
            break
        if isinstance(item, SurveyFind):
            finds.append(item.onset)
        elif item.share is not None:
            shares.append(item.share)
    assert sorted(finds, key=lambda onset: onset.value_fraction) == list(result.onsets)
    assert len(shares) > 20
    assert all(0 <= share <= 1 for share in shares)
    assert max(shares) > 0.8
    again = survey(request(system_of("logistic"), "2.8", "4", 4))
    assert isinstance(next(again), Step)
    again.close()


def test_kinds_and_digits_that_were_asked_for() -> None:
    result = surveyed(system_of("logistic"), "2.8", "4", 3, digits=40, kinds=frozenset({Kind.FOLD}))
    (fold,) = result.onsets
    # 1 + 2 sqrt(2), exact.
    assert fold.value.startswith("3.828427124746190097603377448419396157139")
    assert fold.digits == 40
    assert result.message.startswith("1 fold of periods up to 3")
    both = surveyed(system_of("logistic"), "3.8", "3.83", 3, kinds=frozenset({Kind.FOLD, Kind.CRISIS}))
    assert [onset.kind for onset in both.onsets] == [Kind.FOLD]
    assert "not looked for" not in both.message
    wave = surveyed(
        system_of("logistic"), "3.8", "3.83", 3, kinds=frozenset({Kind.FOLD, Kind.NEIMARK_SACKER})
    )
    assert "not looked for in such a survey: Neimark-Sacker" in wave.message


def test_a_range_that_cuts_a_window_still_gives_the_onset_inside() -> None:
    # The window of period 3 with its fold outside, and outside too the superstable parameter.
    result = surveyed(system_of("logistic"), "3.84", "3.845", 3)
    assert [(o.kind, o.period_before) for o in result.onsets] == [(Kind.FLIP, 3)]
    # Its mirror image: the fold inside, the rest outside.
    result = surveyed(system_of("logistic"), "3.825", "3.83", 3)
    assert [(o.kind, o.period_after) for o in result.onsets] == [(Kind.FOLD, 3)]


def test_stretches_that_never_become_superstable_are_found_by_settled_orbits() -> None:
    result = surveyed(own_map("-0.4*x - x**3 + r"), "-1.2", "1.2", 1)
    # The map has no turning point. Flips where -0.4 - 3 x^2 = -1: x = -+sqrt(0.2), r = 1.4 x + x^3.
    x = 0.2**0.5
    expected = [-(1.4 * x + x**3), 1.4 * x + x**3]
    assert [float(o.value_fraction) for o in result.onsets] == pytest.approx(expected, abs=1e-15)
    assert {o.kind for o in result.onsets} == {Kind.FLIP}
    assert (
        "no cycle of these periods through turning points with x from -1 to 1 is superstable"
        in result.message
    )
    assert "gave 1 more stretch" in result.message


def test_two_turning_points_and_branches_that_cross() -> None:
    result = surveyed(system_of("cubic"), "0.5", "2.3", 2)
    # r x (1 - x^2): pitchfork at 1, flip at 2, next at sqrt(5) (exact; mirrored ones lie at the same values).
    assert [o.kind for o in result.onsets] == [Kind.PITCHFORK, Kind.FLIP, Kind.FLIP]
    for onset, square in zip(result.onsets, (1, 4, 5), strict=True):
        assert Fraction(onset.lower) ** 2 <= square <= Fraction(onset.upper) ** 2
    transcritical = surveyed(system_of("logistic"), "0.5", "2.9", 2)
    assert [(o.kind, o.value_fraction) for o in transcritical.onsets] == [(Kind.TRANSCRITICAL, 1)]


def test_a_map_that_switches_is_not_called_complete() -> None:
    result = surveyed(system_of("restitution"), "330", "400", 2)
    # Alternans of the restitution curve in closed form: T = A - tau + tau ln(B/tau).
    assert [float(o.value_fraction) for o in result.onsets] == pytest.approx(
        [352.1034037197618273], abs=1e-12
    )
    assert "others may be missing" in result.message


def test_a_jump_that_the_derivatives_do_not_show_is_not_leapt_over() -> None:
    # floor has derivative zero on both sides of its jumps: only the surface itself tells of the one at r = 3.
    found = superstable(own_map("r*x*(1 - x) + 0.001*floor(r)", low="0", high="1"), "2.8", "3.9", 3)
    assert not found.complete
    assert any(low < 3 < high for low, high in found.unknown) or any(
        low < 3 < high for _, low, high in found.undecided
    )


def test_a_cycle_with_two_turning_points_counts_once() -> None:
    # -r sin(x) at r = pi/2 takes its turning points pi/2 and -pi/2 to each other: one cycle (exact).
    found = superstable(own_map("-r*sin(x)", low="-4", high="4"), "1", "2", 2).found
    assert [(item.period, item.r) for item in found] == [(2, pytest.approx(1.5707963267948966, abs=1e-12))]
    # r sin(x) at r = pi/2 keeps each of them: two steady states.
    mirrored = superstable(own_map("r*sin(x)", low="-4", high="4"), "1", "2", 1).found
    assert [(item.period, item.r) for item in mirrored] == [
        (1, pytest.approx(1.5707963267948966, abs=1e-12))
    ] * 2


def test_border_collisions_are_listed_and_not_taken_for_flips() -> None:
    # Slopes -0.6 and -1.4: the fixed point r / 1.6 or r / 2.4 meets the border at r = 0 (exact).
    system = own_map("-0.6*x + r if x < 0 else -1.4*x + r", low="-2", high="2")
    (onset,) = surveyed(system, "-1", "1.1", 2).onsets
    assert onset.kind is Kind.BORDER_COLLISION
    assert Fraction(onset.lower) <= 0 <= Fraction(onset.upper)
    cut = own_map("r*x*(1 - x) if x < 0.9 else 0.1*x", low="0", high="1", start="0.2")
    found = [(o.kind, o.period_before) for o in surveyed(cut, "2.8", "4", 2).onsets]
    assert found == [(Kind.FLIP, 1), (Kind.FLIP, 2), (Kind.BORDER_COLLISION, 2)]


def test_a_jump_is_told_with_the_fold_that_bounds_it() -> None:
    # The 2-cycle x -> -x of -r x - x^3 + x^5 has r = 1 - x^2 + x^4: it turns back at 3/4 (exact).
    result = surveyed(own_map("-r*x - x**3 + x**5", low="-1.4", high="1.4"), "0.6", "1.05", 1)
    (flip,) = result.onsets
    assert (flip.kind, flip.criticality) == (Kind.FLIP, Criticality.SUBCRITICAL)
    assert "jump" in flip.consequence
    assert "0.75" in flip.consequence
    result = surveyed(own_map("-r*x - x**3 + x**5", low="-1.4", high="1.4"), "0.6", "0.99", 2)
    (fold,) = result.onsets
    assert (fold.kind, fold.period_after) == (Kind.FOLD, 2)
    assert Fraction(fold.lower) <= Fraction(3, 4) <= Fraction(fold.upper)


def test_several_states() -> None:
    henon = surveyed(system_of("henon"), "0.1", "1.04", 4)
    flips = [o for o in henon.onsets if o.kind is Kind.FLIP]
    # 3(1-b)^2/4, (5-6b+5b^2)/4 at b = 0.3 (exact), and check_values.md, section 5 (R 30).
    for onset, true in zip(flips, ("0.3675", "0.9125", "1.025855405073781052882979050884"), strict=True):
        assert encloses(onset, true)
    assert "others may be missing" in henon.message
    wave = surveyed(system_of("delayed_logistic"), "1.8", "2.1", 1)
    assert [(o.kind, float(o.value_fraction)) for o in wave.onsets] == [(Kind.NEIMARK_SACKER, 2.0)]


def test_what_cannot_be_surveyed_is_refused_in_words() -> None:
    system = system_of("logistic")
    with pytest.raises(NoOnsetFound, match="range is empty"):
        surveyed(system, "3", "3", 2)
    with pytest.raises(NoOnsetFound, match="too narrow"):
        surveyed(system, "3.5", "3.500000000001", 2)
    for most in (0, 65):
        with pytest.raises(TinemarkError, match="cannot be asked for"):
            surveyed(system, "3", "4", most)
    with pytest.raises(NoOnsetFound, match="none is looked for"):
        surveyed(system, "3", "4", 2, kinds=frozenset({Kind.NEIMARK_SACKER}))
    with pytest.raises(NoOnsetFound, match="none is looked for"):
        surveyed(system_of("henon"), "1", "1.2", 2, kinds=frozenset({Kind.CRISIS}))
    with pytest.raises(TinemarkError, match="digits"):
        surveyed(system, "3", "4", 2, digits=251)


def test_an_empty_answer_is_an_answer() -> None:
    result = surveyed(system_of("logistic"), "3.1", "3.3", 3)
    assert result.onsets == ()
    assert result.message.startswith("no onset of periods up to 3 between r = 3.1 and 3.3")
