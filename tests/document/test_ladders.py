"""Grouping in ladders, with onsets of real systems in every order."""

from __future__ import annotations

import dataclasses
import random
from collections.abc import Sequence
from fractions import Fraction
from itertools import combinations

import onset_samples as known
import pytest
from hypothesis import given
from hypothesis import strategies as st

from tinemark.document.ladders import grouped
from tinemark.document.rounding import decimal_text
from tinemark.document.row import Row, row_id
from tinemark.onsets.results import Kind, Onset, Status


def rows_of(onsets: Sequence[Onset]) -> list[Row]:
    return [
        Row(row_id(n), onset, known.PLACE.system_key, known.PLACE.fixed) for n, onset in enumerate(onsets, 1)
    ]


def ladders(onsets: Sequence[Onset]) -> set[tuple[int, tuple[tuple[int, str], ...]]]:
    """Each ladder as its base period, and its levels with their values."""
    found: dict[str, list[tuple[int, str]]] = {}
    bases: dict[str, int] = {}
    for row in grouped(rows_of(onsets)):
        if row.ladder:
            assert row.level is not None
            assert row.base_period is not None
            assert bases.setdefault(row.ladder, row.base_period) == row.base_period
            found.setdefault(row.ladder, []).append((row.level, row.onset.value))
    return {(bases[name], tuple(sorted(levels))) for name, levels in found.items()}


def ladder(base: int, values: Sequence[str], first: int = 1) -> tuple[int, tuple[tuple[int, str], ...]]:
    return base, tuple(enumerate(values, first))


CASCADES = {
    "logistic": known.LOGISTIC,
    "gaussian 6.2 rising": known.GAUSSIAN_RISING,
    "gaussian 4.9 rising": known.GAUSSIAN_RISING_49,
    "gaussian 6.2 falling": known.GAUSSIAN_FALLING,
    "hassell": known.HASSELL,
    "quartic": known.QUARTIC,
    "henon": known.HENON,
    "conservative": known.CONSERVATIVE_HENON,
}


@pytest.mark.parametrize("name", CASCADES)
def test_every_choice_of_levels_is_one_ladder(name: str) -> None:
    onsets = known.flips(CASCADES[name])[:6]
    for count in range(1, len(onsets) + 1):
        for chosen in combinations(onsets, count):
            expected = tuple((o.period_before.bit_length(), o.value) for o in chosen)
            assert ladders(chosen) == {(1, expected)}


def test_out_of_order_with_a_level_missing() -> None:
    onsets = known.flips(known.LOGISTIC)
    del onsets[2]
    random.Random(2).shuffle(onsets)
    ((base, levels),) = ladders(onsets)
    assert base == 1
    assert [level for level, _ in levels] == [1, 2, 4, 5, 6, 7, 8, 9]


def test_both_ends_of_the_gaussian_are_two_ladders() -> None:
    both = known.flips(known.GAUSSIAN_RISING) + known.flips(known.GAUSSIAN_FALLING)
    expected = {ladder(1, known.GAUSSIAN_RISING), ladder(1, known.GAUSSIAN_FALLING)}
    for seed in range(5):
        random.Random(seed).shuffle(both)
        assert ladders(both) == expected


@given(st.data())
def test_both_ends_with_holes(data: st.DataObject) -> None:
    """At least three levels of each end, any others missing: still the same two ladders."""
    levels = st.sets(st.integers(0, 4), min_size=3)
    rising = sorted(data.draw(levels))
    falling = sorted(data.draw(levels))
    both = [known.flip(known.GAUSSIAN_RISING[n], 1 << n) for n in rising]
    both += [known.flip(known.GAUSSIAN_FALLING[n], 1 << n) for n in falling]
    assert ladders(data.draw(st.permutations(both))) == {
        (1, tuple((n + 1, known.GAUSSIAN_RISING[n]) for n in rising)),
        (1, tuple((n + 1, known.GAUSSIAN_FALLING[n]) for n in falling)),
    }


def everything_logistic() -> list[Onset]:
    onsets = known.flips(known.LOGISTIC)
    for period, fold_at, values in known.WINDOWS:
        onsets += [known.fold(fold_at, period), *known.flips(values, period)]
    return onsets


def test_the_better_continuation_wins_over_the_nearer_row() -> None:
    # Two coupled logistic maps split in step at r = 3 and out of step at r = 3.25: both are flips 1 -> 2, and
    # the later one is nearer to the second flip of the cascade in step.
    onsets = [known.flip("3.25", 1), *known.flips(known.LOGISTIC[:5])]
    for seed in range(4):
        random.Random(seed).shuffle(onsets)
        assert ladders(onsets) == {ladder(1, known.LOGISTIC[:5]), ladder(1, ("3.25",))}
    # The same at the other end: a stray flip of the fifth level's periods before the true one.
    stray = known.flip("3.5660", 16)
    assert ladders([stray, *onsets]) == {
        ladder(1, known.LOGISTIC[:5]),
        ladder(1, ("3.25",)),
        ladder(1, ("3.5660",), first=5),
    }


def test_windows_are_told_apart_by_position() -> None:
    expected = {ladder(1, known.LOGISTIC)}
    expected |= {ladder(period, (fold_at, *values), first=0) for period, fold_at, values in known.WINDOWS}
    onsets = everything_logistic()
    for seed in range(4):
        random.Random(seed).shuffle(onsets)
        assert ladders(onsets) == expected


def test_windows_without_their_folds() -> None:
    onsets = [onset for onset in everything_logistic() if onset.kind is not Kind.FOLD]
    expected = {ladder(1, known.LOGISTIC)}
    for period, _, values in known.WINDOWS:
        # Without its fold a window of period 6 cannot be told from the second level of period 3.
        expected.add(ladder(3, values, first=2) if period == 6 else ladder(period, values))
    assert ladders(onsets) == expected


def test_first_flips_of_windows_are_ladders_of_their_own() -> None:
    firsts = [known.flip(values[0], period) for period, _, values in known.WINDOWS if period == 5]
    assert ladders(firsts) == {ladder(5, (onset.value,)) for onset in firsts}


def test_an_onset_of_another_family_between_two_flips_parts_them() -> None:
    # First flip of one period-5 window and second of another, with the period-3 fold in between.
    first, second = known.WINDOWS[1][2][0], known.WINDOWS[2][2][1]
    pair = [known.flip(first, 5), known.flip(second, 10)]
    assert ladders(pair) == {(5, ((1, first), (2, second)))}
    assert ladders([*pair, known.fold(known.WINDOWS[0][1], 3)]) == {
        (5, ((1, first),)),
        (5, ((2, second),)),
    }


def test_a_fold_alone_or_far_off_heads_nothing() -> None:
    period, fold_at, _ = known.WINDOWS[1]
    assert ladders([known.fold(fold_at, period)]) == set()
    other = known.flips(known.WINDOWS[3][2], 5)
    assert ladders([known.fold(fold_at, period), *other]) == {ladder(5, known.WINDOWS[3][2])}


def test_the_henon_ladder_begins_at_its_fold() -> None:
    # a = -(1-b)^2/4 opens period 1 at b = 0.3; its distance to the first flip is less than the first gap.
    onsets = [known.fold(known.HENON_FOLD, 1), *known.flips(known.HENON)]
    assert ladders(onsets) == {ladder(1, (known.HENON_FOLD, *known.HENON), first=0)}


def test_a_stated_base_period_is_respected() -> None:
    rows = rows_of(known.flips(known.WINDOWS[4][2], 6))
    stated = [Row(r.id, r.onset, r.system_key, r.fixed, stated_base=6) for r in rows]
    assert {row.level for row in grouped(rows)} == {2, 3, 4, 5}
    assert {row.level for row in grouped(stated)} == {1, 2, 3, 4}
    assert {row.base_period for row in grouped(stated)} == {6}
    # One stated row carries its ladder.
    mixed = [stated[0], *rows[1:]]
    assert {row.base_period for row in grouped(mixed)} == {6}


def test_values_read_by_eye_join_and_give_way() -> None:
    onsets = known.flips(known.LOGISTIC[:4])
    onsets += known.flips(("3.5688", "3.5697"), 16, width="1e-4", status=Status.READ_BY_EYE)  # type: ignore[arg-type]
    assert [level for level, _ in next(iter(ladders(onsets)))[1]] == [1, 2, 3, 4, 5, 6]
    # A reading of a level that is proved already stands beside the ladder, not in it.
    onsets = [
        known.flip("3.5440", 4, width="1e-6", status=Status.READ_BY_EYE),
        *known.flips(known.LOGISTIC[:5]),
    ]
    assert ladder(1, known.LOGISTIC[:5]) in ladders(onsets)


def test_readings_too_coarse_to_shrink_still_join() -> None:
    # Half a pixel of 2e-4 covers gaps 6 and 7 of the logistic ladder.
    coarse = ("3.5687", "3.5698", "3.5697")
    onsets = known.flips(known.LOGISTIC[:4])
    onsets += known.flips(coarse, 16, width="2e-4", status=Status.READ_BY_EYE)  # type: ignore[arg-type]
    assert len(ladders(onsets)) == 1


def test_measured_onsets_make_a_ladder_of_their_own() -> None:
    model = known.flips(known.LOGISTIC[:4])
    bench = known.flips(("3.01", "3.46", "3.55"), width="0.01", status=Status.MEASURED)  # type: ignore[arg-type]
    expected = {ladder(1, known.LOGISTIC[:4]), ladder(1, ("3.01", "3.46", "3.55"))}
    assert ladders(model + bench) == expected
    assert ladders(bench[1:] + model[:1]) == {ladder(1, known.LOGISTIC[:1]), ladder(1, ("3.46", "3.55"), 2)}


def test_other_places_are_other_ladders() -> None:
    rows = rows_of(known.flips(known.HENON))
    other = [Row(row_id(row.number + 50), row.onset, row.system_key, (("b", "0.3"),)) for row in rows]
    names = {row.id: row.ladder for row in grouped([*rows, *other])}
    assert {names[row.id] for row in rows} == {"L1"}
    assert {names[row.id] for row in other} == {"L51"}


def test_unknown_kinds_and_periods_stand_alone() -> None:
    unknown = known.onset(Kind.UNKNOWN, "3.2", 0, 0, "0.01", Status.READ_BY_EYE)
    tripling = known.onset(Kind.FLIP, "3.2", 1, 3, "0.01", Status.ESTIMATED)
    assert ladders([unknown, tripling]) == set()


@given(st.permutations(everything_logistic()[:24]), st.integers(0, 24))
def test_grouping_forgets_order_and_history(onsets: list[Onset], cut: int) -> None:
    rows = rows_of(onsets)
    whole = {row.id: (row.ladder, row.level, row.base_period) for row in grouped(rows)}
    again = {
        row.id: (row.ladder, row.level, row.base_period)
        for row in grouped([*grouped(rows[:cut]), *rows[cut:]][::-1])
    }
    assert again == whole
    assert ladders(onsets) == ladders(sorted(onsets, key=lambda onset: onset.value_fraction))


@st.composite
def made_up_cascades(draw: st.DrawFn) -> list[tuple[str, ...]]:
    """Up to four cascades of one base period, each with its own rate and direction, spans apart."""
    found = []
    start = Fraction(draw(st.integers(-50, 50)))
    for _ in range(draw(st.integers(1, 4))):
        rate = Fraction(draw(st.integers(25, 136)), 10)
        first = Fraction(draw(st.integers(1, 500)), 100)
        gaps = [first / rate**n for n in range(draw(st.integers(2, 6)))]
        values = [sum(gaps[:n], Fraction(0)) for n in range(len(gaps) + 1)]
        if draw(st.booleans()):
            values = [values[-1] - value for value in values]
        start += max(values) * draw(st.integers(1, 3))
        found.append(tuple(decimal_text(start + value, 30) for value in values))
        start += 2 * max(values)
    return found


@given(made_up_cascades(), st.randoms(use_true_random=False))
def test_made_up_cascades_are_told_apart(cascades: list[tuple[str, ...]], shuffler: random.Random) -> None:
    onsets = [onset for values in cascades for onset in known.flips(values, width="1e-25")]
    shuffler.shuffle(onsets)
    assert ladders(onsets) == {ladder(1, values) for values in cascades}


def with_speed(onset: Onset, speed: str) -> Onset:
    """The onset with what its proof says of how fast the multiplier passes -1."""
    return dataclasses.replace(onset, evidence=(("crosses -1 with speed", speed),))


# Speeds of the logistic map's flips as its proofs print them: at 3 the multiplier is 2 - r, at 1 + sqrt(6)
# it is 4 + 2 r - r^2; in windows -2 over the stretch's extent.
LOGISTIC_TWO = (
    with_speed(known.flip("3", 1), "-1.00000"),
    with_speed(known.flip("3.449489742783", 2), "-4.89898"),
)
WINDOW_OF_FIVE = (
    with_speed(known.flip("3.741120756632", 5), "-342.8"),
    with_speed(known.flip("3.742569902", 10), "-1600"),
)
OTHER_WINDOW_OF_FIVE = (
    with_speed(known.flip("3.906107428138", 5), "-1878"),
    with_speed(known.flip("3.906373363224", 10), "-8100"),
)


def test_two_lone_flips_join_where_the_first_foretells_the_second() -> None:
    for pair in (LOGISTIC_TWO, WINDOW_OF_FIVE, OTHER_WINDOW_OF_FIVE):
        for onsets in (pair, pair[::-1]):
            assert ladders(onsets) == {ladder(pair[0].period_before, [onset.value for onset in pair])}
    # In many states the speed comes with its unit; a level between may be missing.
    henon = with_speed(known.flip("0.3675", 1), "-1.09890 per unit of a")
    assert ladders([henon, known.flip("0.9125", 2)]) == {ladder(1, ["0.3675", "0.9125"])}
    assert ladders([henon, known.flip("1.02585540507", 4)]) == {(1, ((1, "0.3675"), (3, "1.02585540507")))}


def test_two_lone_flips_of_different_windows_make_two_ladders() -> None:
    """The first flip of one window of period 5 and the second of another: too far for the first's speed."""
    stray = [WINDOW_OF_FIVE[0], OTHER_WINDOW_OF_FIVE[1]]
    assert len(ladders(stray)) == 2
    assert len(ladders(stray[::-1])) == 2
    # The rows that belong to them bring all together rightly.
    whole = [*stray, WINDOW_OF_FIVE[1], OTHER_WINDOW_OF_FIVE[0]]
    assert ladders(whole) == {
        ladder(5, [onset.value for onset in pair]) for pair in (WINDOW_OF_FIVE, OTHER_WINDOW_OF_FIVE)
    }


def test_two_lone_flips_on_the_wrong_side_make_two_ladders() -> None:
    """Both ends of a bubble: a cascade that rises and one that falls do not go on in each other."""
    rising, falling = with_speed(known.flip("3", 1), "-1.0"), with_speed(known.flip("3.4", 2), "4.9")
    assert len(ladders([rising, falling])) == 2
    assert len(ladders([with_speed(known.flip("3.5", 1), "-1.0"), known.flip("3.2", 2)])) == 2
    assert len(ladders([known.flip("3.5", 1), with_speed(known.flip("3.2", 2), "-4.9")])) == 2
    # Nothing is known of the speed of what was read by eye: order and place alone decide, as before.
    eye = [known.flip("3", 1, width="0.01"), known.flip("3.45", 2, width="0.01")]
    assert len(ladders(eye)) == 1


def test_levels_that_were_followed_stay_one_ladder_whatever_the_speeds_say() -> None:
    """A first gap may be out of all proportion, where the parameter enters the formula unevenly."""
    onsets = (with_speed(known.flip("3", 1), "-100"), with_speed(known.flip("3.449489742783", 2), "-4.89898"))
    assert len(ladders(onsets)) == 2
    followed = [dataclasses.replace(row, stated_base=1) for row in rows_of(onsets)]
    assert {row.ladder for row in grouped(followed)} == {"L1"}
