"""Crises of one-state maps against known values: estimated, named, and never proved."""

from __future__ import annotations

from dataclasses import replace
from fractions import Fraction

import pytest
from running import click, finish, system_of

from tinemark.onsets.proofs import NotProved
from tinemark.onsets.results import Kind, Status
from tinemark.onsets.verification import verify_onset


@pytest.mark.parametrize(
    ("system", "near", "width", "value", "cycle", "words"),
    [
        # f(f(1/2)) = 0 at r = 4 exactly, where 0 is an unstable fixed point.
        ("logistic", "3.999", "0.1", "4", 1, "boundary crisis"),
        # Ends of windows of period 3, 4 and 5, recomputed to 27 digits (check values, section 4.4); the
        # condition is by Grebogi, Ott & Yorke 1982, PRL 48:1507 (from memory).
        (
            "logistic",
            "3.857",
            "0.01",
            "3.85680065247776482189058051",
            3,
            "interior crisis: the window of period 3",
        ),
        ("logistic", "3.9616", "0.0005", "3.96159552339497476672310273", 4, "interior crisis"),
        ("logistic", "3.7447", "0.003", "3.74471033348969346311562748", 5, "interior crisis"),
        # Band merging at the root of r^3 - 2 r^2 - 4 r - 8, and the next one (check values, section 4.3).
        (
            "logistic",
            "3.679",
            "0.05",
            "3.6785735104283222651037051293065732",
            1,
            "band merging: 2 chaotic bands",
        ),
        ("logistic", "3.5926", "0.005", "3.5925721841069786491021528020446585", 2, "become 2"),
        # 3 sqrt(3)/2: the odd cubic's turning point is sent to 1, and that to 0; mirror images merge.
        ("cubic", "2.598", "0.1", "2.59807621135331594029116951225880", 1, "unstable fixed point"),
    ],
)
def test_crisis_is_found_and_named(
    system: str, near: str, width: str, value: str, cycle: int, words: str
) -> None:
    """The value lies in the printed interval, 20 digits wide, and is called estimated, with the reason."""
    onset = click(system_of(system), near, width).onsets[0]
    assert (onset.kind, onset.status) == (Kind.CRISIS, Status.ESTIMATED)
    assert Fraction(onset.lower) <= Fraction(value) + Fraction(1, 10**24)
    assert Fraction(value) <= Fraction(onset.upper) + Fraction(1, 10**24)
    assert Fraction(onset.upper) - Fraction(onset.lower) < Fraction(1, 10**19)
    assert onset.period_before == cycle
    assert words in onset.consequence
    assert "no proof" in onset.reason
    with pytest.raises(NotProved):
        finish(verify_onset(system_of(system), replace(onset, status=Status.PROVED, reason="")))


def test_crisis_in_a_deep_view() -> None:
    """The end of the period-3 window in a view of width 1e-18."""
    value = Fraction("3.85680065247776482189058051")
    onset = click(system_of("logistic"), value, Fraction(1, 10**18)).onsets[0]
    assert onset.kind is Kind.CRISIS
    assert abs(onset.value_fraction - value) < Fraction(1, 10**24)


def test_splits_come_before_crises() -> None:
    """A split that is aimed at is not hidden by a crisis near by."""
    result = click(system_of("logistic"), "3.8415", "0.05", "0.5", "1")
    assert result.onsets[0].kind is Kind.FLIP
    assert (result.onsets[0].period_before, result.onsets[0].period_after) == (3, 6)
