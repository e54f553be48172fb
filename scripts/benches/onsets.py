"""Onsets: the 16-level ladder, and 200 random clicks against onsets known from elsewhere.

The clicks are judged by tests/onsets/known_splits.py, as in the bench of all kinds.
"""

from __future__ import annotations

import time
from collections.abc import Iterator
from fractions import Fraction
from typing import Any

from benches.clicks import click_figures, random_clicks
from benches.measuring import Figure, at_least, at_most

LEVELS = 16
LADDER_DIGITS = 25
CLICKS = 200
SEED = 20240607
MOST_SECONDS = 0.3


def figures() -> Iterator[Figure]:
    """The onset bench's figures."""
    yield from _ladder_figures()
    yield from _click_figures()


def _finish(job: Any) -> Any:
    while True:
        try:
            next(job)
        except StopIteration as done:
            return done.value


def _ladder_figures() -> Iterator[Figure]:
    import flint  # noqa: F401  imports are not part of the figure
    import known_onsets
    import numba  # noqa: F401
    import sympy  # noqa: F401

    from tinemark.onsets.engine import ladder
    from tinemark.onsets.results import LadderRequest, Status
    from tinemark.systems.library import builtin_system

    known = known_onsets.ladder("logistic")
    system = builtin_system("logistic")
    request = LadderRequest(system, "r", Fraction("2.8"), Fraction(4), 1, LEVELS, LADDER_DIGITS)
    # The first run of a system compiles its float loops or reads them from the cache; both count.
    before = time.process_time()
    result = _finish(ladder(request))
    first = time.process_time() - before
    before = time.process_time()
    result = _finish(ladder(request))
    again = time.process_time() - before
    right = 0
    for level, text in zip(result.levels, known.onsets, strict=False):
        onset = level.onset
        truth = Fraction(text)
        unit = Fraction(1, 10 ** len(text.partition(".")[2]))
        encloses = Fraction(onset.lower) <= truth + unit and truth <= Fraction(onset.upper)
        narrow = Fraction(onset.upper) - Fraction(onset.lower) < truth / 10**LADDER_DIGITS
        right += onset.status is Status.PROVED and encloses and narrow
    name = f"{LEVELS}-level logistic ladder, {LADDER_DIGITS} digits"
    yield at_least(f"{name}: levels proved and right", right, LEVELS)
    yield at_most(f"{name}: process seconds, first run", first, 3.0)
    yield at_most(f"{name}: process seconds, warm", again, 3.0)


def _click_figures() -> Iterator[Figure]:
    clicks = tuple(random_clicks(CLICKS, SEED, {"one state": 1.0}))
    yield from click_figures(clicks, "flips and folds of one-state maps", MOST_SECONDS)
