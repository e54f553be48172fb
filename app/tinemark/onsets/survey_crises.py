"""Crises of a survey: where windows end and bands merge, as the stretches of stable cycles foretell it.

Within a window of period n the map's n-th iterate is a smaller copy of a whole one-hump map. So where its
cycle is superstable and where it flips tell about where the window ends: for a quadratic maximum the end lies
8/3 as far from the superstable parameter as the flip (fold -1/4, superstable 0, flip 3/4, end 2), and two
bands merge to one 2.058 times as far (at 1.5437). What is foretold is solved for and its bands are checked,
as for a click (`crises`).
"""

from __future__ import annotations

from collections.abc import Generator, Sequence
from dataclasses import dataclass

import numpy as np

from tinemark.onsets.branch_places import Passed, Place
from tinemark.onsets.branch_survey import Branch
from tinemark.onsets.crises import Landing, crises_in_view, landing_near
from tinemark.onsets.float_map import FloatMap
from tinemark.onsets.results import Step

FACTORS = {1: (8 / 3, 2.2, 3.3, 1.8, 4.5), 2: (2.058, 1.71, 1.9, 2.3)}
"""Where the window's bands end (1), or two for each merge (2), as distances beyond the superstable parameter,
the flip's being 1. The first holds in a window of a quadratic maximum, the second in its doubled copy."""
VIEWS = 3
"""Parts of the range that are looked through for crises of windows that it cuts."""
SAME = 1e-9
"""Share of the range within which two crises are one."""


@dataclass(frozen=True)
class _Window:
    """A stretch of stable cycles: period, superstable parameter, flip, and the point near a turning point."""

    period: int
    centre: float
    flip: float
    x: float


def crises_of_windows(
    cycles: FloatMap, stretches: Sequence[Branch], low: float, high: float, most: int
) -> Generator[Step, None, list[Landing]]:
    """Crises of a range whose unstable cycle has a period of at most `most`.

    Parameters
    ----------
    stretches
        The stable stretches known in the range.
    """
    width = high - low
    found: list[Landing] = []

    def take(landing: Landing) -> None:
        inside = low - SAME * width <= landing.r <= high + SAME * width
        if inside and all(abs(landing.r - other.r) > SAME * width for other in found):
            found.append(landing)

    for branch in stretches:
        window = _window_of(cycles, branch)
        if window is None:
            continue
        for copies, factors in FACTORS.items():
            for factor in factors:
                landing = _end_of(cycles, window, copies * window.period, factor)
                if landing is not None:
                    take(landing)
                    break
        yield Step("looking for crises where windows end")
    for place in range(VIEWS):
        middle = low + (place + 0.5) * width / VIEWS
        for landing in crises_in_view(cycles, middle, width / VIEWS, min(most, LONGEST_UNFORETOLD)):
            take(landing)
        yield Step("looking for crises of windows that the range cuts")
    return sorted(found, key=lambda landing: landing.r)


LONGEST_UNFORETOLD = 8
"""Bands of the crises that are looked for without a window to foretell them."""


def _window_of(cycles: FloatMap, branch: Branch) -> _Window | None:
    """Where a stretch is superstable and where it flips, by its multipliers; None where one lies outside."""
    flips = [branch.places[event.at] for event in branch.events if event.passed is Passed.FLIP]
    if not flips:
        return None
    flip = flips[0]
    places = sorted(branch.places, key=lambda place: place.r)
    values = np.array([place.multipliers[0].real for place in places])
    signs = np.flatnonzero(np.diff(np.sign(values)))
    between = [int(at) for at in signs if abs(values[at]) < 1 and abs(values[at + 1]) < 1]
    if not between:
        return None
    before, after = places[between[0]], places[between[0] + 1]
    share = values[between[0]] / (values[between[0]] - values[between[0] + 1])
    centre = before.r + share * (after.r - before.r)
    x = _nearest_turning(cycles, before)
    return None if x is None else _Window(branch.period, float(centre), flip.r, x)


def _nearest_turning(cycles: FloatMap, place: Place) -> float | None:
    points = place.points[:, 0]
    turnings = cycles.critical_points(place.r)
    if not turnings:
        return None
    return float(min(turnings, key=lambda turning: float(np.abs(points - turning).min())))


def _end_of(cycles: FloatMap, window: _Window, bands: int, factor: float) -> Landing | None:
    size = abs(window.flip - window.centre)
    r = window.centre + factor * (window.flip - window.centre)
    landing = landing_near(cycles, window.x, r, bands, 2 * size)
    if landing is None or (landing.r - window.centre) * (window.flip - window.centre) < 0:
        return None
    return landing
