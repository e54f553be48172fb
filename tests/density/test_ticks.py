"""Ticks at any depth."""

from __future__ import annotations

from fractions import Fraction

import pytest
from hypothesis import given
from hypothesis import strategies as st

from tinemark.density.ticks import LONGEST_LABEL, Ticks, decade, ticks

AXES = st.tuples(
    st.fractions(-1000, 1000, max_denominator=10**6),
    st.integers(1, 10**6),
    st.integers(-60, 12),
    st.integers(2, 20),
)


@given(AXES)
def test_ticks_are_exact_distinct_in_order_and_few(axis: tuple[Fraction, int, int, int]) -> None:
    low, digits, power, count = axis
    high = low + digits * Fraction(10) ** power
    found = ticks(low, high, count)
    assert len(found.positions) == len(found.labels) <= count
    assert list(found.positions) == sorted(set(found.positions))
    assert all(low <= position <= high for position in found.positions)
    assert len(set(found.labels)) == len(found.labels)
    offset = Fraction(found.offset) if found.offset else Fraction(0)
    for position, label in zip(found.positions, found.labels, strict=True):
        assert offset + Fraction(label) == position
    if found.offset:
        assert max(map(len, found.labels), default=0) <= LONGEST_LABEL
    # Steps are even, and as small as the count allows: more than a fifth of the room is used.
    assert len({b - a for a, b in zip(found.positions, found.positions[1:], strict=False)}) <= 1
    assert len(found.positions) + 1 >= count / 2.5


def test_ticks_of_familiar_axes() -> None:
    assert ticks(Fraction("2.8"), Fraction(4), 7).labels == ("2.8", "3.0", "3.2", "3.4", "3.6", "3.8", "4.0")
    assert ticks(Fraction(-1), Fraction(1), 5).labels == ("-1.0", "-0.5", "0.0", "0.5", "1.0")
    deep = ticks(Fraction("3.56994567187094490"), Fraction("3.56994567187094491"), 3)
    assert deep == Ticks(
        "3.5699456718709449",
        tuple(Fraction("3.56994567187094490") + k * Fraction("5e-18") for k in range(3)),
        ("0", "5e-18", "10e-18"),
    )


def test_decades_are_exact() -> None:
    for k in (-400, -19, -1, 0, 1, 25):
        ten = Fraction(10) ** k
        assert decade(ten) == k
        assert decade(ten * Fraction(999999, 1000000)) == k - 1
        assert decade(ten * Fraction(99999, 10000)) == k


def test_an_axis_without_extent_is_refused() -> None:
    with pytest.raises(ValueError, match="low < high"):
        ticks(Fraction(1), Fraction(1), 5)
