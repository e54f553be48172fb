"""From exact views to doubles."""

from __future__ import annotations

import dataclasses
from fractions import Fraction

import numpy as np
from hypothesis import given
from hypothesis import strategies as st
from naive_density import map_of, picture, view

from tinemark.density.renderer import columns_distinct
from tinemark.density.request import SweepRule, View
from tinemark.density.sampling import column_parameters, row_scaling, scattered_starts

FRACTIONS = st.fractions(-10, 10, max_denominator=10**9)


@given(FRACTIONS, st.fractions(Fraction(1, 10**20), 10, max_denominator=10**24), st.integers(1, 40))
def test_columns_are_the_exact_middles_rounded_once(left: Fraction, width: Fraction, columns: int) -> None:
    where = View(left, left + width, Fraction(0), Fraction(1))
    request = picture("logistic", where, columns=columns)
    wanted = [float(left + width * Fraction(2 * j + 1, 2 * columns)) for j in range(columns)]
    assert column_parameters(request).tolist() == wanted


@given(FRACTIONS, st.fractions(Fraction(1, 10**6), 10, max_denominator=10**9))
def test_row_edges_fall_on_bin_edges(bottom: Fraction, height: Fraction) -> None:
    request = picture("logistic", View(Fraction(0), Fraction(1), bottom, bottom + height), rows=50)
    scale, offset = row_scaling(request)
    for row in range(50):
        middle = float(bottom + height * Fraction(2 * row + 1, 100))
        assert int(middle * scale + offset) == row + 1


def test_doubles_give_out_where_columns_or_rows_coincide() -> None:
    assert columns_distinct(picture("logistic", view("2.8", "4"), columns=1600))
    middle = Fraction("3.5699456718709449")
    for power, distinct in ((10, True), (12, True), (14, False), (25, False)):
        half = Fraction(1, 10**power)
        where = View(middle - half, middle + half, Fraction(0), Fraction(1))
        assert columns_distinct(picture("logistic", where, columns=1280)) is distinct, power
        across = View(Fraction("2.8"), Fraction(4), middle - half, middle + half)
        assert columns_distinct(picture("logistic", across, columns=1280, rows=800)) is distinct, power
    # Around zero doubles resolve much deeper.
    deep = View(Fraction(-1, 10**30), Fraction(1, 10**30), Fraction(0), Fraction(1))
    assert columns_distinct(picture("logistic", deep, columns=1280))
    beyond = View(Fraction(10) ** 400, Fraction(10) ** 401, Fraction(0), Fraction(1))
    assert not columns_distinct(picture("logistic", beyond))


def test_scattered_starts_fill_the_range_and_follow_the_seed() -> None:
    system = map_of("r*x", extra='range = ["-2", "3"]')
    request = picture(system, view("0", "1"), rule=SweepRule.SEVERAL, starts=200)
    starts = scattered_starts(request)
    assert starts.shape == (200, 1)
    assert starts[0, 0] == 0.4
    assert starts.min() >= -2
    assert starts.max() <= 3
    assert np.histogram(starts, 5, (-2, 3))[0].min() > 20
    assert np.array_equal(starts, scattered_starts(request))
    assert not np.array_equal(starts, scattered_starts(dataclasses.replace(request, seed=2)))
    one = scattered_starts(dataclasses.replace(request, rule=SweepRule.FRESH))
    assert one.tolist() == [[0.4]]
