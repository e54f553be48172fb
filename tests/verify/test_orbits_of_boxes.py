"""Boxes carried along cycles of several states hold every orbit that begins in them, with its derivatives."""

from __future__ import annotations

import random
from fractions import Fraction

import pytest
from mpmath import mp

from tinemark.verify import intervals as iv
from tinemark.verify.border_following import check_periods
from tinemark.verify.claims import Refused, Undecided
from tinemark.verify.formula import parse
from tinemark.verify.frames import inverse, product, turned, unit
from tinemark.verify.many_cycles import ManyStates, carried
from tinemark.verify.one_state import hull

BITS = 120
HENON = ("1 - r*x**2 + y", "3*x/10")
TURNING = ("r*x*(1 - 7*y/10 - 3*z/10)", "x", "y + x*z/9")


def map_of(*formulas: str) -> ManyStates:
    states = ("x", "y", "z")[: len(formulas)]
    return ManyStates(tuple(parse(text, (*states, "r"), {}) for text in formulas), states, "r")


def by_hand(formulas: tuple[str, ...], point: list[Fraction], r: Fraction, steps: int) -> list[Fraction]:
    for _ in range(steps):
        names = dict(zip("xyz", point, strict=False)) | {"r": r}
        point = [Fraction(eval(text, names)) for text in formulas]
    return point


@pytest.mark.parametrize(("formulas", "steps"), [(HENON, 7), (TURNING, 6)])
def test_orbits_and_slopes_lie_inside(formulas: tuple[str, ...], steps: int) -> None:
    """Against exact rationals: orbits from places in the box, and difference quotients between them."""
    generator = random.Random(1969)
    many, size = map_of(*formulas), len(formulas)
    middle = [Fraction(1, 3), Fraction(1, 7), Fraction(2, 5)][:size]
    half, r, half_r = Fraction(1, 10**6), Fraction(1, 2), Fraction(1, 10**6)
    box = [hull((side - half, side + half), BITS) for side in middle]
    end = carried(many, box, hull((r - half_r, r + half_r), BITS), steps, BITS, second=True)
    for _ in range(4):
        at = [side + half * generator.randint(-8, 8) / 8 for side in middle]
        there = r + half_r * generator.randint(-8, 8) / 8
        image = by_hand(formulas, at, there, steps)
        for side, value in zip(end.x, image, strict=True):
            low, high = iv.ends(side)
            assert low <= value <= high
        step = half / 1000
        for column in range(size):
            # The box is far wider than the step, so the mean slope is taken at a point of it.
            aside = [side - step * (place == column) for place, side in enumerate(middle)]
            beyond = [side + step * (place == column) for place, side in enumerate(middle)]
            ends = [by_hand(formulas, each, there, steps) for each in (aside, beyond)]
            for place in range(size):
                low, high = iv.ends(end.first[column][place])
                assert low <= (ends[1][place] - ends[0][place]) / (2 * step) <= high


def test_a_long_cycle_does_not_blow_a_box_up() -> None:
    """Drawn upright, a box widens by what the coefficients' sizes say, about 2^0.8 a step on this cycle."""
    many = map_of(*HENON)
    point, r = [Fraction(1, 10), Fraction(1, 10)], Fraction("1.05")
    for _ in range(300):
        x, y = (float(side) for side in point)
        point = [Fraction(1 - 1.05 * x * x + y), Fraction(3 * x / 10)]
    half = Fraction(1, 2**90)
    box = [hull((side - half, side + half), BITS) for side in point]
    end = carried(many, box, hull((r, r), BITS), 200, BITS)
    widths = [high - low for low, high in map(iv.ends, end.x)]
    assert max(widths) < Fraction(1, 2**70)


def test_frames_have_enclosed_inverses() -> None:
    generator = random.Random(1987)
    for size in (2, 3, 6):
        rows = [
            [iv.of_fraction(Fraction(generator.randint(-99, 99), 13), BITS) for _ in range(size)]
            for _ in range(size)
        ]
        frame = turned(rows)
        assert frame is not None
        whole = product(frame, inverse(frame, BITS), BITS)
        for row, exact in zip(whole, unit(size), strict=True):
            for entry, (one, _) in zip(row, exact, strict=True):
                low, high = iv.ends(entry)
                assert low <= iv.to_fraction(one) <= high
                assert high - low < Fraction(1, 2**100)


def test_directions_of_a_singular_matrix_are_made_up() -> None:
    one, zero = iv.of_whole(1), iv.of_whole(0)
    frame = turned([[one, one], [one, one]])
    assert frame is not None
    determinant = iv.sub(iv.mul(frame[0][0], frame[1][1], BITS), iv.mul(frame[0][1], frame[1][0], BITS), BITS)
    assert abs(abs(float(mp.make_mpf(determinant[0]))) - 1) < 1e-12
    assert turned([[zero, zero], [zero, zero]]) is None


def number(value: str) -> iv.Interval:
    exact = Fraction(value)
    return hull((exact - Fraction(1, 10**20), exact + Fraction(1, 10**20)), BITS)


@pytest.mark.parametrize(
    ("a", "b", "before", "after"),
    [
        # Regions of the border-collision normal form of one state (check values, section 5).
        ("0.5", "0.9", 1, 1),
        ("0.5", "-1.9", 1, 2),
        ("-0.5", "-1.9", 1, 2),
        ("0.5", "-2.5", 1, 0),
        ("0.5", "-3.5", 1, 3),
        ("0.9", "-3", 1, 0),
        ("-0.9", "-3", 1, 0),
        ("0.5", "1.5", 0, 1),
        ("2", "0.5", 0, 1),
        ("-1.9", "0.5", 1, 2),
        ("2", "-2", 0, 1),
        ("-2", "-3", 1, 1),
        ("0.3", "-20", 1, 4),
    ],
)
def test_what_follows_a_border_collision(a: str, b: str, before: int, after: int) -> None:
    check_periods(number(a), number(b), 1, (before, after), BITS)
    check_periods(number(a), number(b), 3, (3 * before, 3 * after), BITS)
    for wrong in ((1, after + 1), (1 - before, after)):
        with pytest.raises(Refused):
            check_periods(number(a), number(b), 1, wrong, BITS)


@pytest.mark.parametrize(("a", "b"), [("0.5", "-3"), ("0.5", "-2"), ("1", "0.5"), ("0.5", "-4")])
def test_edges_between_outcomes_are_not_called(a: str, b: str) -> None:
    with pytest.raises(Undecided):
        check_periods(number(a), number(b), 1, (1, 1), BITS)
