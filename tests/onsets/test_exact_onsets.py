"""Onsets that can be written down exactly, found by a click and enclosed by a proof."""

from __future__ import annotations

from collections.abc import Callable
from fractions import Fraction

import pytest
from known_onsets import GAUSSIAN_UPPER_FLIPS, RICKER_PERIOD_3_FOLD, WINDOWS, KnownWindow, ladder
from running import click, system_of

from tinemark.onsets.results import Criticality, Kind, Onset, Status


def _between(onset: Onset, polynomial: Callable[[Fraction], Fraction]) -> bool:
    """Whether a root of a polynomial lies in the onset's interval: the signs at its ends differ."""
    return polynomial(Fraction(onset.lower)) * polynomial(Fraction(onset.upper)) < 0


def _narrow(onset: Onset, digits: int) -> bool:
    width = Fraction(onset.upper) - Fraction(onset.lower)
    return 0 < width < abs(onset.value_fraction) / 10**digits


@pytest.mark.parametrize(
    ("name", "near", "period", "polynomial"),
    [
        # Logistic: fixed point 2 - r = -1; 2-cycle 4 + 2r - r^2 = -1, so r = 1 + sqrt(6).
        ("logistic", "3.02", 1, lambda r: r - 3),
        ("logistic", "3.46", 2, lambda r: (r - 1) ** 2 - 6),
        # Level 3: OEIS A086181.
        (
            "logistic",
            "3.545",
            4,
            lambda r: (
                r**12
                - 12 * r**11
                + 48 * r**10
                - 40 * r**9
                - 193 * r**8
                + 392 * r**7
                + 44 * r**6
                + 8 * r**5
                - 977 * r**4
                - 604 * r**3
                + 2108 * r**2
                + 4913
            ),
        ),
        ("ricker", "1.99", 1, lambda r: r - 2),
        ("cubic", "2.01", 1, lambda r: r - 2),
        ("cubic", "2.24", 2, lambda r: r**2 - 5),
        ("cubic_hump", "5.3", 1, lambda r: 3 * r - 16),
        ("quadratic", "0.76", 1, lambda a: 4 * a - 3),
        ("quadratic", "1.26", 2, lambda a: 4 * a - 5),
        ("quartic", "0.49", 1, lambda a: 256 * a - 125),
        ("hassell", "11.4", 1, lambda r: r - Fraction("11.390625")),
    ],
)
def test_flip_is_enclosed(
    name: str, near: str, period: int, polynomial: Callable[[Fraction], Fraction]
) -> None:
    """The proved interval of a flip holds the exact root."""
    onset = click(system_of(name), near, "0.1" if name != "hassell" else "1", digits=30).onsets[0]
    assert onset.kind is Kind.FLIP
    assert (onset.period_before, onset.period_after) == (period, 2 * period)
    assert onset.status is Status.PROVED
    assert onset.criticality is Criticality.SUPERCRITICAL
    assert _between(onset, polynomial)
    assert _narrow(onset, 30)
    assert Fraction(onset.lower) <= onset.value_fraction <= Fraction(onset.upper)


@pytest.mark.parametrize(
    ("name", "near", "polynomial"),
    [
        # The period-3 window opens at 1 + 2 sqrt(2), in the other coordinate at 7/4 (May 1976).
        ("logistic", "3.8282", lambda r: (r - 1) ** 2 - 8),
        ("quadratic", "1.7501", lambda a: 4 * a - 7),
    ],
)
def test_fold_is_enclosed(name: str, near: str, polynomial: Callable[[Fraction], Fraction]) -> None:
    """The proved interval of the fold that opens period 3 holds the exact root."""
    onset = click(system_of(name), near, "0.02", digits=30).onsets[0]
    assert (onset.kind, onset.period_before, onset.period_after) == (Kind.FOLD, 0, 3)
    assert onset.status is Status.PROVED
    assert onset.criticality is Criticality.NOT_APPLICABLE
    assert _between(onset, polynomial)
    assert _narrow(onset, 30)


@pytest.mark.parametrize("window", WINDOWS, ids=lambda window: f"{window.period}-{window.fold[:7]}")
def test_windows_of_the_logistic_map(window: KnownWindow) -> None:
    """Every window up to period 6: its fold and its first flip, each from a click beside it."""
    system = system_of("logistic")
    size = Fraction(window.flip) - Fraction(window.fold)
    for text, kind in ((window.fold, Kind.FOLD), (window.flip, Kind.FLIP)):
        truth = Fraction(text)
        onset = click(system, truth + size / 40, 4 * size, digits=25).onsets[0]
        assert onset.kind is kind
        assert onset.status is Status.PROVED
        assert max(onset.period_before, onset.period_after) in (
            window.period,
            2 * window.period,
        )
        assert abs(onset.value_fraction - truth) < Fraction(1, 10**26)


def test_fold_of_the_ricker_map() -> None:
    """The window of period 3 of the Ricker map opens where it is known to."""
    onset = click(system_of("ricker"), "3.1025", "0.01", digits=25).onsets[0]
    assert (onset.kind, onset.period_after, onset.status) == (Kind.FOLD, 3, Status.PROVED)
    assert abs(onset.value_fraction - Fraction(RICKER_PERIOD_3_FOLD)) < Fraction(1, 10**26)


@pytest.mark.parametrize(("alpha", "truth"), GAUSSIAN_UPPER_FLIPS)
def test_both_ends_of_the_gaussian_map(alpha: str, truth: str) -> None:
    """The fixed point flips at both ends of its unstable range."""
    system = system_of("gaussian", (("alpha", alpha),))
    upper = click(system, "0.42", "0.5", digits=25).onsets[0]
    lower_truth = ladder("Gaussian 6.2" if alpha == "6.2" else "Gaussian 4.9").onsets[0]
    lower = click(system, Fraction(lower_truth) + Fraction(1, 100), "0.5", digits=25).onsets[0]
    for onset, text in ((upper, truth), (lower, lower_truth)):
        assert (onset.kind, onset.period_before, onset.status) == (Kind.FLIP, 1, Status.PROVED)
        assert abs(onset.value_fraction - Fraction(text)) < Fraction(1, 10**26)
