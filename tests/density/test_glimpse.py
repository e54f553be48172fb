"""First looks: like the picture they stand for, bounded beforehand, and none where they cannot be."""

from __future__ import annotations

from dataclasses import replace
from fractions import Fraction

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from hypothesis.extra.numpy import arrays

from tinemark.density import glimpse, renderer, tone_kernels
from tinemark.density.glimpse import Glimpses, Pace
from tinemark.density.request import PictureRequest, SweepRule, View
from tinemark.density.tone import TONES, coloured, even, shares_of
from tinemark.systems.library import builtin_system

SHADES = np.arange(256, dtype=np.uint32)
FAST = Pace(1e-9, 1e-9)
COLUMNS, ROWS = 301, 160


def request(left: str, right: str, bottom: str = "0", top: str = "1", **changes) -> PictureRequest:
    view = View(Fraction(left), Fraction(right), Fraction(bottom), Fraction(top))
    made = PictureRequest(builtin_system("logistic"), "r", "x", view, COLUMNS, ROWS, transient_steps=300)
    return replace(made, **changes)


def drawn(asked: PictureRequest, steps: int = 4096):
    drawing = renderer.create(asked)
    *_, field = renderer.progressive(drawing, steps, threads=1)
    return drawing, field


def seen_after(asked: PictureRequest) -> Glimpses:
    glimpses = Glimpses()
    glimpses.learn(drawn(asked)[0])
    glimpses.rehearse()
    # Whatever the machine does at this moment: the tests below are not about speed.
    glimpses._pace = FAST
    return glimpses


@pytest.fixture(scope="module")
def glimpses() -> Glimpses:
    return seen_after(request("2.8", "4"))


def averaged(shades: np.ndarray, side: int = 20) -> np.ndarray:
    rows, columns = (size // side * side for size in shades.shape)
    cells = shades[:rows, :columns].astype(float)
    return cells.reshape(rows // side, side, columns // side, side).mean(axis=(1, 3))


@pytest.mark.parametrize("tone", TONES)
@pytest.mark.parametrize("box", [("3.5", "4", "0.1", "0.9"), ("2.4", "4.2", "-0.2", "1.2")])
def test_a_look_is_a_coarse_version_of_the_picture_as_bright_as_it(glimpses, tone, box) -> None:
    asked = request(*box)
    look = glimpses.look(asked, tone, SHADES)
    _, field = drawn(asked, 8192)
    picture = coloured(field.counts[::-1], tone, SHADES)
    assert look.shape == (ROWS, COLUMNS + 1)
    look = look[:, :COLUMNS]
    one, other = averaged(look), averaged(picture)
    # Shades from 0 to 255, over places of 20 cells a side.
    assert abs(one - other).mean() < 11
    assert abs(one.mean() - other.mean()) < 9


def test_a_stable_cycle_is_seen_where_it_is_to_the_cell(glimpses) -> None:
    asked = request("3.1", "3.3", "0.4", "0.9")
    look = glimpses.look(asked, "log", SHADES)[:, :COLUMNS]
    _, field = drawn(asked)
    picture = field.counts[::-1] > 0
    # Every second column is drawn; the branches rise by less than a cell a column.
    for column in range(4, COLUMNS - 4, 40):
        found, wanted = np.flatnonzero(look[:, column]), np.flatnonzero(picture[:, column])
        assert len(found) == len(wanted) == 2
        assert abs(found - wanted).max() <= 1


def test_a_part_outside_the_old_view_begins_as_a_picture_does() -> None:
    look = seen_after(request("3.9", "4")).look(request("2.9", "4"), "log", SHADES)
    # x = 1 - 1/r at r = 2.95.
    column = look[:, round(COLUMNS * 0.05 / 1.1)]
    assert abs(np.flatnonzero(column) - (1 - (1 - 1 / 2.95)) * ROWS).max() < 2


def test_columns_that_have_escaped_begin_anew() -> None:
    old = request("3.5", "4.5")
    look = seen_after(old).look(request("3.9", "4.4"), "log", SHADES)
    assert look[:, : COLUMNS // 6].any()
    assert not look[:, COLUMNS // 4 :].any()


@pytest.mark.parametrize("rule", [SweepRule.FORWARD, SweepRule.SEVERAL])
def test_other_sweeps_are_seen_too(rule) -> None:
    starts = 3 if rule is SweepRule.SEVERAL else 1
    old = request("2.8", "4", rule=rule, starts=starts)
    asked = replace(old, view=request("3.3", "3.9").view)
    look = seen_after(old).look(asked, "log", SHADES)
    picture = coloured(drawn(asked, 8192)[1].counts[::-1], "log", SHADES)
    assert abs(averaged(look[:, :COLUMNS]) - averaged(picture)).mean() < 6


def test_no_look_before_a_picture_nor_at_anything_else(glimpses) -> None:
    asked = request("3.5", "4")
    assert Glimpses().look(asked, "log", SHADES) is None
    other = replace(asked, system=builtin_system("cubic"))
    assert glimpses.look(other, "log", SHADES) is None
    assert glimpses.look(replace(asked, observe="1 - x"), "log", SHADES) is None
    assert glimpses.look(replace(asked, transient_steps=7), "log", SHADES) is None
    unsettled = Glimpses()
    unsettled.learn(renderer.create(asked))
    unsettled.rehearse()
    assert unsettled.look(asked, "log", SHADES) is None


def test_no_look_where_doubles_end(glimpses) -> None:
    width = Fraction(1, 10**14)
    left = Fraction("3.7")
    asked = request("3", "4")
    assert glimpses.look(replace(asked, view=View(left, left + width, *(0, 1))), "log", SHADES) is None
    huge = View(Fraction(0), Fraction(10) ** 400, Fraction(0), Fraction(1))
    assert glimpses.look(replace(asked, view=huge), "log", SHADES) is None


def test_a_slow_system_is_seen_coarser_and_a_very_slow_one_not_at_all(glimpses) -> None:
    asked = request("3.5", "4")
    steps = glimpse.drawn_columns(asked) * (glimpse.SETTLING_STEPS + glimpse.COUNTED_STEPS)
    one_and_a_half = 1.5 * glimpse.LONGEST_S / steps
    slower = Glimpses()
    slower._ends = glimpses._ends
    slower._pace = Pace(one_and_a_half, 0.0)
    assert slower.look(asked, "log", SHADES).shape == (ROWS // 2, 2 * -(-COLUMNS // 4))
    slower._pace = Pace(one_and_a_half, 0.0)
    assert slower.look(replace(asked, view=request("2", "4").view), "log", SHADES) is not None
    slower._pace = Pace(10 * one_and_a_half, 0.0)
    assert slower.look(asked, "log", SHADES) is None
    # The pace is forgotten, measured anew with the next picture, and looks are had again.
    assert slower._pace is None
    slower.rehearse()
    assert slower._pace is not None


def test_one_slow_look_does_not_bar_the_next() -> None:
    assert Pace(1.0, 1.0).after(Pace(100.0, 0.5)) == Pace(1.2, 0.5)


def test_the_pixels_of_a_look_outlast_the_next_one(glimpses) -> None:
    first = glimpses.look(request("3.5", "4"), "log", SHADES)
    kept = first.copy()
    second = glimpses.look(request("2.9", "3.1"), "log", SHADES)
    assert np.array_equal(first, kept)
    assert not np.array_equal(first, second)


COUNTS = arrays(np.uint32, st.tuples(st.integers(1, 11), st.integers(1, 11)), elements=st.integers(0, 9))


def slowly_evened(counts: np.ndarray) -> np.ndarray:
    """The slow, obvious version."""
    side, few, scale = tone_kernels.EVEN_SIDE, tone_kernels.EVEN_BELOW, tone_kernels.EVEN_SCALE
    result = counts.astype(np.int64) * scale
    for i in range(0, counts.shape[0], side):
        for j in range(0, counts.shape[1], side):
            square = counts[i : i + side, j : j + side].astype(np.int64)
            low = square < few
            if low.any():
                result[i : i + side, j : j + side][low] = -(-int(square[low].sum()) * scale // int(low.sum()))
    return result


@given(COUNTS)
def test_evened_counts_are_those_of_the_slow_version(counts: np.ndarray) -> None:
    assert np.array_equal(even(counts, 100), slowly_evened(counts))
    assert even(counts, 10**6) is counts


@given(COUNTS)
def test_standing_columns_upright_evens_and_tones_like_the_slow_version(counts: np.ndarray) -> None:
    columns, rows = counts.shape
    around = np.full((columns, rows + 2), 3, np.uint32)
    around[:, 1:-1] = counts
    shares = shares_of(columns, rows)
    highest = tone_kernels.shared_out(around, 1, shares)
    wanted = slowly_evened(counts)
    assert highest == wanted.max()
    entries = np.zeros((rows, 2 * columns), np.uint32)
    tone_kernels.upright(around, shares, np.arange(highest + 1, dtype=np.uint32), entries)
    assert np.array_equal(entries, np.repeat(wanted.T[::-1], 2, axis=1))
