"""What a ladder's onsets say together: limits, deltas, classes and predictions against known cascades."""

from __future__ import annotations

import random
from decimal import getcontext
from fractions import Fraction
from itertools import pairwise

import pytest
from long_ladders import LONG_LADDERS, LongLadder

from tinemark.onsets.class_values import CLASSES, CascadeClass, class_named
from tinemark.onsets.ladder_points import ENCLOSURE, STANDARD, Estimate, estimate
from tinemark.onsets.results import Status
from tinemark.onsets.scaling import LadderPoint, Scaling, class_verdict, scaling

TINY = Fraction(1, 10**26)
BY_NAME = {ladder.name: ladder for ladder in LONG_LADDERS}


def points(
    values: list[Fraction] | tuple[str, ...],
    half: Fraction = TINY,
    status: Status = Status.PROVED,
    first: int = 1,
) -> tuple[LadderPoint, ...]:
    exact = [Fraction(value) for value in values]
    return tuple(
        LadderPoint(first + place, value, value - half, value + half, status)
        for place, value in enumerate(exact)
    )


def class_of(ladder: LongLadder) -> CascadeClass:
    return next(item for item in CLASSES if item.order == ladder.order)


def holds(found: Estimate, text: str) -> bool:
    """Whether an interval holds a number known to the digits of its text."""
    slack = Fraction(1, 10 ** len(text.partition(".")[2]))
    return found.lower - slack <= Fraction(text) <= found.upper + slack


def cases() -> list[object]:
    return [
        pytest.param(ladder, count, id=f"{ladder.name}-{count}")
        for ladder in LONG_LADDERS
        for count in range(4, min(len(ladder.onsets), 12) + 1)
    ]


@pytest.mark.parametrize("ladder", LONG_LADDERS, ids=lambda ladder: ladder.name)
def test_the_table_agrees_with_the_published_limits(ladder: LongLadder) -> None:
    unit = Fraction(1, 10 ** len(ladder.published.partition(".")[2]))
    assert abs(Fraction(ladder.limit) - Fraction(ladder.published)) <= unit


@pytest.mark.parametrize(("ladder", "count"), cases())
def test_limit_delta_and_next_onsets_lie_in_their_intervals(ladder: LongLadder, count: int) -> None:
    found = scaling(points(ladder.onsets[:count]))
    known = class_of(ladder)
    assert found.limit is not None
    assert found.delta is not None
    assert holds(found.limit, ladder.limit)
    assert known.lies_within(found.delta.lower, found.delta.upper)
    assert [item.level for item in found.predictions] == [count + 1, count + 2, count + 3]
    for prediction in found.predictions:
        if prediction.level <= len(ladder.onsets):
            assert holds(prediction.onset, ladder.onsets[prediction.level - 1])
    assert found.verdict.name in (known.name, "undecided")
    if found.class_limit is not None:
        assert holds(found.class_limit, ladder.limit)


@pytest.mark.parametrize("ladder", LONG_LADDERS, ids=lambda ladder: ladder.name)
def test_every_ladder_is_told_by_nine_levels(ladder: LongLadder) -> None:
    found = scaling(points(ladder.onsets[:9]))
    assert found.verdict.name == class_of(ladder).name
    assert found.verdict.consistent is True


@pytest.mark.parametrize("name", ["logistic", "sine", "odd cubic", "window of period 3", "henon"])
def test_four_levels_tell_a_well_behaved_ladder(name: str) -> None:
    assert scaling(points(BY_NAME[name].onsets[:4])).verdict.name == "quadratic maximum"


def test_twelve_levels_give_ten_digits_of_delta_and_a_tight_limit() -> None:
    """Delta: A006890 (Briggs 1991)."""
    found = scaling(points(BY_NAME["logistic"].onsets[:12]))
    assert found.delta is not None
    assert found.limit is not None
    assert found.delta.uncertainty_fraction < Fraction(1, 10**10)
    assert abs(found.delta.value_fraction - Fraction("4.669201609102990671853")) < Fraction(1, 10**10)
    assert found.limit.uncertainty_fraction < Fraction(1, 10**17)
    assert found.class_limit is not None
    assert found.class_limit.uncertainty_fraction < found.limit.uncertainty_fraction


@pytest.mark.parametrize(
    "ladder",
    [ladder for ladder in LONG_LADDERS if ladder.order and len(ladder.onsets) >= 12],
    ids=lambda ladder: ladder.name,
)
def test_twelve_levels_of_every_quadratic_ladder_give_ten_digits_of_delta(ladder: LongLadder) -> None:
    """The flatter Gaussian begins among bubbles and comes a little short; a quartic maximum is slower."""
    found = scaling(points(ladder.onsets[:12])).delta
    assert found is not None
    power = {"gaussian 4.9": 19, "quartic": 17}.get(ladder.name, 20)
    # In half powers of ten: 10, 9.5 or 8.5 digits.
    assert found.uncertainty_fraction**2 < 5 * Fraction(1, 10**power)
    assert abs(found.value_fraction - Fraction(class_of(ladder).delta)) <= found.uncertainty_fraction


def test_known_rates_of_a_class_do_not_make_its_delta() -> None:
    """Ratios that go to 4.7 or do not settle are not drawn to the quadratic class by its rates."""
    onsets, gap = [Fraction(1)], Fraction(1)
    for level in range(11):
        onsets.append(onsets[-1] + gap)
        gap /= Fraction("4.7") + Fraction(-1, 9) ** level
    for count in range(4, 13):
        found = scaling(points(onsets[:count])).delta
        assert found is None or found.lower <= Fraction("4.7") <= found.upper
    assert found is not None
    assert found.uncertainty_fraction < Fraction(1, 10**5)


def test_intervals_shrink_with_the_levels() -> None:
    widths = []
    for count in (4, 6, 8, 10, 12):
        found = scaling(points(BY_NAME["ricker"].onsets[:count]))
        assert found.limit is not None
        widths.append(found.limit.uncertainty_fraction)
    assert all(later < earlier / 10 for earlier, later in pairwise(widths))


def test_a_descending_ladder_is_the_mirror_image() -> None:
    rising = scaling(points(BY_NAME["sine"].onsets[:8]))
    mirrored = [-Fraction(value) for value in BY_NAME["sine"].onsets[:8]]
    falling = scaling(points(mirrored))
    assert rising.limit is not None
    assert falling.limit is not None
    assert falling.limit.value_fraction == -rising.limit.value_fraction
    assert falling.limit.uncertainty == rising.limit.uncertainty
    assert falling.delta == rising.delta
    assert falling.levels[0].gap is not None
    assert falling.levels[0].gap.value_fraction < 0
    assert falling.levels[0].ratio == rising.levels[0].ratio


def test_few_levels_give_no_limit_and_say_why() -> None:
    for count in (0, 1, 2):
        found = scaling(points(BY_NAME["logistic"].onsets[:count]))
        assert found.limit is None
        assert "at least three" in found.limit_reason
        assert found.delta is None
        assert found.verdict.name == "undecided"
        assert found.predictions == ()
    three = scaling(points(BY_NAME["logistic"].onsets[:3]))
    assert three.limit is not None
    assert holds(three.limit, BY_NAME["logistic"].limit)
    assert three.delta is None
    assert "two" in three.delta_reason
    assert holds(three.predictions[0].onset, BY_NAME["logistic"].onsets[3])
    assert three.verdict.name == "undecided"


def test_gaps_that_grow_give_no_limit() -> None:
    """Hassell's map at b = 3 starts with the ratios 0.27 and 1.40 (recomputed)."""
    found = scaling(points([Fraction(1), Fraction(2), Fraction(6), Fraction(9)]))
    assert found.limit is None
    assert "shrink" in found.limit_reason
    assert found.verdict.name == "undecided"
    assert "shrink" in found.verdict.sentence


def test_levels_at_even_distances_are_no_cascade() -> None:
    """Six levels whose gaps do not shrink are enough to say so; fewer are not."""
    even = [Fraction(n) for n in range(6)]
    found = scaling(points(even))
    assert (found.verdict.name, found.verdict.consistent) == ("none", False)
    assert "not a doubling cascade" in found.verdict.sentence
    assert scaling(points(even[:5])).verdict.name == "undecided"


def test_steady_ratios_of_no_class_are_said_to_be_none() -> None:
    values = [Fraction(5) - Fraction(1, 3) ** n for n in range(8)]
    found = scaling(points(values))
    assert found.verdict.name == "none"
    assert found.verdict.consistent is False
    assert "not a doubling cascade" in found.verdict.sentence
    assert found.limit is not None
    assert holds(found.limit, "5.0")


@pytest.mark.parametrize(
    ("centre", "half", "levels", "name"),
    [
        ("4.67", "0.1", 3, "undecided"),
        ("4.67", "0.1", 4, "quadratic maximum"),
        ("6.5", "1", 6, "undecided"),
        ("8.5", "0.3", 6, "undecided"),
        ("8.72", "0.05", 6, "conservative"),
        ("7.28", "0.05", 6, "quartic maximum"),
        ("4.0", "1.5", 6, "undecided"),
        ("5.968", "0.01", 8, "none"),
        ("8.3495", "0.0005", 8, "none"),
        ("12.34", "0.05", 8, "order-10 maximum"),
        ("12.34", "0.4", 8, "undecided"),
        ("11.6", "0.05", 8, "undecided"),
        ("5.3", "0.5", 8, "undecided"),
    ],
)
def test_verdicts(centre: str, half: str, levels: int, name: str) -> None:
    """The rates 5.96797 and 8.34950 quoted for orders 3 and 5 belong to no cascade (recomputed)."""
    verdict = class_verdict(Estimate(centre, half, "95 % coverage"), levels)
    assert verdict.name == name
    assert verdict.consistent == {"none": False, "undecided": None}.get(name, True)
    assert verdict.sentence.startswith(name)


def test_class_values() -> None:
    """Orders 3 and 5 as recomputed twice; the conservative value by Greene et al. 1981."""
    deltas = {item.name: item.delta for item in CLASSES}
    assert deltas["order-3 maximum"].startswith("6.0846890742621")
    assert deltas["order-5 maximum"].startswith("8.3443847487309")
    assert deltas["quadratic maximum"].startswith("4.66920160910299067185320382046620161725")
    assert "821578" not in deltas["quadratic maximum"]
    assert deltas["conservative"].startswith("8.7210972")
    assert [item.delta_fraction for item in CLASSES] == sorted(item.delta_fraction for item in CLASSES)
    alpha = class_named("quadratic maximum")
    assert alpha is not None
    assert alpha.alpha.startswith("2.502907875095892822283902873218215786")
    assert class_named("none") is None


def test_readings_by_eye_say_how_little_is_known() -> None:
    """Half a pixel of a view 0.8 wide: the first gaps are known, the class is not."""
    half = Fraction(8, 10) / 1280 / 2
    seen = [Fraction(round(Fraction(value) / half), 1) * half for value in BY_NAME["logistic"].onsets[:4]]
    found = scaling(points(seen, half, Status.READ_BY_EYE))
    assert found.limit is not None
    assert holds(found.limit, BY_NAME["logistic"].limit)
    assert found.limit.uncertainty_fraction > Fraction(1, 10**4)
    assert found.verdict.name in ("undecided", "quadratic maximum")
    blurred = scaling(points(seen, 40 * half, Status.READ_BY_EYE))
    assert blurred.verdict.name == "undecided"
    assert blurred.limit is None or blurred.limit.uncertainty_fraction > Fraction(1, 100)


def test_levels_closer_than_their_uncertainty_are_left_out() -> None:
    values = points(BY_NAME["logistic"].onsets[:8], Fraction(1, 10**3), Status.MEASURED)
    found = scaling(values)
    assert found.levels[-3].ratio is None
    assert "not larger than its own uncertainty" in found.levels[-3].ratio_reason
    assert found.used_levels[-1] < 8
    assert found.limit is not None
    assert holds(found.limit, BY_NAME["logistic"].limit)


def test_measured_ladders_are_covered_as_often_as_they_claim() -> None:
    """Noise of 2e-5 on the first five onsets of the logistic map, 200 times: at least 95 % coverage."""
    noise = random.Random(20250301)
    half = Fraction(4, 10**5)
    limits = deltas = following = 0
    for _ in range(200):
        values = [
            Fraction(value) + Fraction(noise.gauss(0, 2e-5)) for value in BY_NAME["logistic"].onsets[:5]
        ]
        found = scaling(points(values, half, Status.MEASURED))
        assert found.limit is not None
        assert found.delta is not None
        limits += holds(found.limit, BY_NAME["logistic"].limit)
        deltas += found.delta.lower <= CLASSES[0].delta_fraction <= found.delta.upper
        following += holds(found.predictions[0].onset, BY_NAME["logistic"].onsets[5])
    assert min(limits, deltas, following) >= 190


def test_a_missing_level_splits_the_ladder() -> None:
    values = points(BY_NAME["logistic"].onsets[:9])
    found = scaling(values[:2] + values[3:])
    assert found.used_levels == (4, 5, 6, 7, 8, 9)
    assert found.limit is not None
    assert holds(found.limit, BY_NAME["logistic"].limit)
    assert [item.level for item in found.levels] == list(range(1, 10))
    assert found.levels[0].gap is not None
    assert found.levels[0].ratio_reason == "level 3 is missing"
    assert found.levels[1].gap_reason == "level 3 is missing"
    assert found.levels[2].gap_reason == "level 3 is missing"
    assert found.levels[7].ratio_reason == "needs level 10, which is not known yet"


def test_order_of_the_points_does_not_matter() -> None:
    values = points(BY_NAME["ricker"].onsets[:6])
    assert scaling(values[::-1]) == scaling(values)


def test_levels_given_twice_or_below_one_are_refused() -> None:
    values = points(BY_NAME["ricker"].onsets[:3])
    with pytest.raises(ValueError, match="level 2 is given twice"):
        scaling((*values, values[1]))
    with pytest.raises(ValueError, match="count from 1"):
        scaling(points(BY_NAME["ricker"].onsets[:3], first=0))
    with pytest.raises(ValueError, match="outside its own interval"):
        LadderPoint(1, Fraction(2), Fraction(0), Fraction(1), Status.PROVED)


def test_the_callers_decimal_context_is_left_alone() -> None:
    before = getcontext().prec
    scaling(points(BY_NAME["logistic"].onsets[:12]))
    assert getcontext().prec == before


def test_equal_onsets_to_all_digits_do_not_break() -> None:
    values = [Fraction(value) for value in BY_NAME["logistic"].onsets[:4]]
    found = scaling(points([*values, values[-1]], Fraction(0)))
    assert isinstance(found, Scaling)
    assert found.levels[3].ratio_reason.startswith("needs level 6")
    assert found.levels[2].ratio is None


@pytest.mark.parametrize(
    ("value", "u", "text", "shown"),
    [
        ("3.14159265", "0.0123", "3.142", "0.013"),
        ("3.14159265", "0.0996", "3.14", "0.11"),
        ("-123456", "5600", "-123500", "5700"),
        ("0.000012345", "0.00000011", "0.00001234", "0.00000012"),
        ("7", "0", "7", "0"),
    ],
)
def test_estimates_are_rounded_so_that_nothing_is_lost(value: str, u: str, text: str, shown: str) -> None:
    rounded = estimate(Fraction(value), Fraction(u), STANDARD)
    low, high = Fraction(value) - Fraction(u), Fraction(value) + Fraction(u)
    assert rounded.value_fraction - rounded.uncertainty_fraction <= low
    assert rounded.value_fraction + rounded.uncertainty_fraction >= high
    assert (rounded.value, rounded.uncertainty) == (text, shown)
    assert estimate(Fraction(1, 3), Fraction(0), ENCLOSURE).uncertainty_fraction > 0
