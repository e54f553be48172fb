"""Period of a settled orbit, told from a stretch of it."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from tinemark.systems.native import jit

LARGEST_PERIOD = 64
TRACE_STEPS = 6 * LARGEST_PERIOD + 1
"""Steps that the test beside a flip needs at the largest period."""

RETURN_TOLERANCE = 1e-11
"""A stretch repeats where it returns to itself within this share of the state's size: rounding, some
thousand times magnified by a slowly settling cycle, stays below it, and two branches of a split
come apart by it within 1e-22 of the onset, where no double parameter falls."""


@jit
def find_periods(noted: NDArray[np.float64], period: NDArray[np.int32]) -> None:
    """Period of each noted stretch of an orbit; 0 where it does not repeat.

    A stretch that repeats to rounding has the period found by comparison. Beside a flip an orbit
    settles so slowly that it never does within any reasonable number of steps. There the distance e
    between x(n) and x(n + p) changes sign from period to period, and 1/e**2 follows a straight recurrence
    b' = m*b + q with m the inverse squared multiplier (the flip's normal form, whose second iterate
    is a Bernoulli equation): m > 1 is an orbit on its way to a cycle of period p, m < 1 one on its way
    to a cycle of twice the period.

    Parameters
    ----------
    noted
        float64, shape (columns, states, steps).
    period
        int32, shape (columns,); overwritten.
    """
    columns, states, steps = noted.shape
    for c in range(columns):
        period[c] = 0
        size = np.zeros(states)
        usable = True
        for i in range(states):
            for s in range(steps):
                value = abs(noted[c, i, s])
                if not value < np.inf:
                    usable = False
                size[i] = max(size[i], value)
        if not usable:
            continue
        for p in range(1, LARGEST_PERIOD + 1):
            if _repeats(noted[c], size, p):
                period[c] = p
                break
        if period[c] == 0:
            period[c] = _beside_a_flip(noted[c], size)


@jit
def _repeats(stretch: NDArray[np.float64], size: NDArray[np.float64], p: int) -> bool:
    states, steps = stretch.shape
    # The last p steps against the p before: every point of the cycle once.
    for back in range(1, p + 1):
        for i in range(states):
            now, before = stretch[i, steps - back], stretch[i, steps - back - p]
            if not abs(now - before) <= RETURN_TOLERANCE * size[i]:
                return False
    # Twice more, so that a passing near-return of a wandering orbit is not taken for a cycle.
    for back in range(p + 1, max(3 * p, 16) + 1):
        for i in range(states):
            now, before = stretch[i, steps - back], stretch[i, steps - back - p]
            if not abs(now - before) <= 16.0 * RETURN_TOLERANCE * size[i]:
                return False
    return True


@jit
def _beside_a_flip(stretch: NDArray[np.float64], size: NDArray[np.float64]) -> int:
    states, steps = stretch.shape
    for p in range(1, LARGEST_PERIOD + 1):
        last = steps - 1 - p
        lead, largest = 0, 0.0
        for i in range(states):
            e = abs(stretch[i, last + p] - stretch[i, last]) / max(size[i], 1e-300)
            if e > largest:
                lead, largest = i, e
        if largest < 1e3 * RETURN_TOLERANCE:
            continue
        alternating = True
        for k in range(2 * p):
            e_now = stretch[lead, last + p - k] - stretch[lead, last - k]
            e_before = stretch[lead, last - k] - stretch[lead, last - k - p]
            # Sign turned, size kept to a few per cent, at every point of the cycle.
            if not abs(e_now + e_before) <= 0.05 * min(abs(e_now), abs(e_before)):
                alternating = False
                break
        if not alternating:
            continue
        # Every point of the cycle must tell the same; a slow rotation (many states) would not.
        found = _told_at(stretch[lead], last - 4 * p, p)
        for k in range(1, p):
            if _told_at(stretch[lead], last - 4 * p - k, p) != found:
                found = 0
                break
        if found > 0:
            return found
    return 0


@jit
def _told_at(orbit: NDArray[np.float64], first: int, p: int) -> int:
    b0 = 1.0 / (orbit[first + p] - orbit[first]) ** 2
    b1 = 1.0 / (orbit[first + 3 * p] - orbit[first + 2 * p]) ** 2
    b2 = 1.0 / (orbit[first + 5 * p] - orbit[first + 4 * p]) ** 2
    if abs(b1 - b0) <= 1e-9 * b0:
        return 0
    m = (b2 - b1) / (b1 - b0)
    if b1 > b0 and m > 1.0:
        return p
    if 0.0 < m < 1.0:
        settled = b0 + (b1 - b0) / (1.0 - m)
        # An orbit leaving an unstable cycle passes far from its goal; wait until it is near.
        if 0.25 * b0 < settled < 4.0 * b0:
            return 2 * p
    return 0
