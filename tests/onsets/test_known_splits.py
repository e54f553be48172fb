"""The collection of known splits holds what it says: cycles that close, with the multiplier of their kind."""

from __future__ import annotations

import math
from typing import Any

import pytest
from known_splits import MULTIPLIERS, SOURCES, Split, all_splits

NEAR = 1e-6
"""Cycle points are doubles, and at a fold or flip of high period the cycle is found to half of them."""


def _after(split: Split, state: tuple[float, ...], count: int) -> tuple[Any, ...]:
    for _ in range(count):
        state = split.formula(state, float(split.value), math)
    return state


@pytest.mark.parametrize("split", all_splits(), ids=lambda split: f"{split.kind}-{split.period}")
def test_points_are_distinct_and_in_the_range_shown(split: Split) -> None:
    assert len(split.points) == (0 if split.kind == "crisis" else split.period)
    assert len(set(split.points)) == len(split.points)
    assert all(split.low <= point <= split.high for point in split.points)
    assert split.size > 0


@pytest.mark.parametrize(
    "split",
    [
        split
        for split in all_splits()
        if len(split.system.states) == 1 and split.points and split.period <= 64
    ],
    ids=lambda split: f"{split.kind}-{split.period}",
)
def test_cycles_of_one_state_close_with_their_multiplier(split: Split) -> None:
    """Closed to half of the digits; the multiplier by differences, except where a surface is touched."""
    x = split.points[0]
    assert _after(split, (x,), split.period)[0] == pytest.approx(
        x, abs=1e-3 if split.kind == "fold" else NEAR
    )
    if split.kind == "border collision":
        assert split.surface is not None
        assert split.surface((x,), float(split.value)) == 0
        return
    step = 1e-7
    ahead, behind = (_after(split, (x + sign * step,), split.period)[0] for sign in (1, -1))
    assert (ahead - behind) / (2 * step) == pytest.approx(MULTIPLIERS[split.kind], abs=0.1)


def test_every_source_and_kind_is_there() -> None:
    splits = all_splits()
    assert sum(len(list(source())) for source in SOURCES) == len(splits)
    assert {split.group for split in splits} == {"one state", "other kinds", "many states"}
    assert {split.kind for split in splits} >= {*MULTIPLIERS, "border collision", "Neimark-Sacker", "crisis"}
