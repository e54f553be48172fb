"""Cycles of maps of several states in doubles: multiple shooting with all points as unknowns.

The linear systems are cyclic and banded. They are condensed to the first point (Stoer and Bulirsch,
Introduction to Numerical Analysis, 7.3.5), which costs a number of operations in proportion to the period.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from tinemark.onsets.cycle_map import CycleMap, Floats, Linear
from tinemark.onsets.many_map import ESCAPED

MOST_STEPS = 14
SETTLED = 1e-11
"""A cycle counts as found when a Newton step moves no point by more than this share of the state's scale."""
WORST_SETTLED = 1e-8
SAME_POINT = 1e-5
"""Points of a cycle closer than this share of the scale are one point."""


@dataclass(frozen=True)
class Cycle:
    """A cycle in doubles: points of shape (p, n) in the order of the orbit, and the parameter."""

    points: Floats
    r: float

    @property
    def period(self) -> int:
        """Number of points."""
        return len(self.points)


@dataclass(frozen=True)
class Condensed:
    """Shifts of all points as linear functions of the shift of the first one and of the parameter.

    Attributes
    ----------
    blocks
        (p, n, n + 2): shift of point i = blocks[i] @ (first shift, parameter shift, 1).
    closing
        (n, n + 2): the same for the point after the last.
    """

    blocks: Floats
    closing: Floats

    @property
    def monodromy(self) -> Floats:
        """Derivative of f^p at the first point."""
        n = len(self.closing)
        return self.closing[:, :n]


def condensed(float_map: CycleMap, points: Floats, r: float) -> Condensed:
    """Condense the linearised shooting equations of a cycle; not finite where an orbit escapes."""
    with np.errstate(over="ignore", invalid="ignore"):
        return condense(float_map.linearised(points, r), points)


def condense(linear: Linear, points: Floats) -> Condensed:
    """Condense the shooting equations that the linearised map gives at the points of a cycle."""
    count, n = points.shape
    residual = linear.image - np.concatenate((points[1:], points[:1]))
    # Affine maps of (shift, parameter shift, 1), then all their products from the left by doubling
    # (Hillis and Steele 1986): far fewer calls than one product a point.
    steps = np.zeros((count + 1, n + 2, n + 2))
    steps[0] = np.eye(n + 2)
    steps[1:, :n, :n] = linear.jacobian
    steps[1:, :n, n] = linear.slope
    steps[1:, :n, n + 1] = residual
    steps[1:, n, n] = steps[1:, n + 1, n + 1] = 1.0
    reach = 1
    while reach <= count:
        steps[reach:] = steps[reach:] @ steps[:-reach]
        reach *= 2
    return Condensed(steps[:count, :n], steps[count, :n])


def multipliers(float_map: CycleMap, cycle: Cycle) -> list[complex]:
    """Eigenvalues of the derivative of f^p, largest first; none where it is not finite."""
    return eigenvalues(condensed(float_map, cycle.points, cycle.r).monodromy)


def eigenvalues(matrix: Floats) -> list[complex]:
    """Eigenvalues, largest first; none where the matrix is not finite."""
    if not np.isfinite(matrix).all():
        return []
    return sorted((complex(value) for value in np.linalg.eigvals(matrix)), key=abs, reverse=True)


def newton(
    float_map: CycleMap,
    guess: Cycle,
    scales: Floats,
    *,
    along: Floats | None = None,
    along_r: float = 0.0,
    target: float = 0.0,
) -> Cycle | None:
    """Newton's method for a cycle.

    Parameters
    ----------
    along, along_r, target
        With `along` (p, n) the parameter is free, and the equation
        sum(along * points) + along_r * r = target closes the system. Without it the parameter stays.

    Returns
    -------
    Cycle or None
        None where the method does not converge.
    """
    points, r = guess.points.copy(), guess.r
    n = points.shape[1]
    last = np.inf
    for _ in range(MOST_STEPS):
        parts = condensed(float_map, points, r)
        if not np.isfinite(parts.closing).all():
            return None
        system = np.zeros((n + 1, n + 1))
        right = np.zeros(n + 1)
        system[:n] = parts.closing[:, : n + 1]
        system[:n, :n] -= np.eye(n)
        right[:n] = -parts.closing[:, n + 1]
        if along is None:
            system[n, n] = 1.0
        else:
            row = np.einsum("ij,ijk->k", along, parts.blocks)
            system[n] = row[: n + 1]
            system[n, n] += along_r
            right[n] = target - float(np.sum(along * points)) - along_r * r - row[n + 1]
        try:
            shift = np.linalg.solve(system, right)
        except np.linalg.LinAlgError:
            return None
        moves = parts.blocks @ np.append(shift, 1.0)
        points = points + moves
        r = r + float(shift[n])
        size = float(np.max(np.abs(moves) / scales))
        if not np.isfinite(size) or size > 1e6:
            return None
        if size < SETTLED or (size < WORST_SETTLED and size > last / 2):
            return Cycle(points, r)
        last = size
    return None


def tangent(parts: Condensed, scales: Floats, width: float) -> tuple[Floats, float]:
    """Unit tangent of a branch of cycles: (p, n) shifts and the parameter's shift, in scaled length.

    The length is hypot(dr / width, root mean square over points of dx / scales).
    """
    n = len(scales)
    matrix = parts.closing[:, : n + 1].copy()
    matrix[:, :n] -= np.eye(n)
    # Columns in scaled units, so that the null vector found is the well-scaled one.
    weights = np.append(scales, width)
    null = np.linalg.svd(matrix * weights)[2][-1] * weights
    moves = parts.blocks[:, :, : n + 1] @ null
    length = np.hypot(null[n] / width, np.sqrt(np.mean(np.sum((moves / scales) ** 2, axis=1))))
    return moves / length, float(null[n] / length)


def least_period(points: Floats, scales: Floats, tolerance: float = SAME_POINT) -> int:
    """Least period of a cycle: the smallest divisor after which the first point comes back."""
    count = len(points)
    for period in range(1, count // 2 + 1):
        if count % period:
            continue
        # The first point decides in nearly all cases; only where it comes back are all compared.
        if (np.abs(points[period] - points[0]) >= tolerance * scales).any():
            continue
        if np.all(np.abs(points[period:] - points[:-period]) < tolerance * scales):
            return period
    return count


def same_cycle(a: Cycle, b: Cycle, scales: Floats, tolerance: float = SAME_POINT) -> bool:
    """Whether two cycles at the same parameter have the same points."""
    if a.period != b.period:
        return False
    gaps = np.max(np.abs(b.points - a.points[0]) / scales, axis=1)
    shift = int(np.argmin(gaps))
    return bool(np.all(np.abs(np.roll(b.points, -shift, 0) - a.points) < tolerance * scales))


def orbit_ends(
    float_map: CycleMap, states: Floats, rs: Floats, transient: int, kept: int
) -> tuple[Floats, Floats]:
    """Run orbits; gives the last `kept` states (kept, n, lanes) of those that stayed finite, and their rs."""
    for place in range(transient):
        states = float_map.step(states, rs)
        if place % 64 == 63:
            inside = np.all(np.abs(states) < ESCAPED, axis=0)
            if not inside.all():
                states, rs = states[:, inside], rs[inside]
            if states.shape[1] == 0:
                return np.empty((kept, float_map.size, 0)), rs
    history = np.empty((kept, *states.shape))
    for place in range(kept):
        history[place] = states
        states = float_map.step(states, rs)
    inside = np.all(np.abs(history) < ESCAPED, axis=(0, 1))
    return history[:, :, inside], rs[inside]


def returns(history: Floats, scales: Floats, tolerances: Sequence[float]) -> list[list[int]]:
    """Candidate periods of each lane: the first return within each tolerance, sharpest first."""
    gaps = np.max(np.abs(history[-2::-1] - history[-1]) / scales[:, None], axis=1)
    found: list[list[int]] = []
    for lane in range(gaps.shape[1]):
        periods: list[int] = []
        for tolerance in tolerances:
            hits = np.flatnonzero(gaps[:, lane] < tolerance)
            if len(hits) and int(hits[0]) + 1 not in periods:
                periods.append(int(hits[0]) + 1)
        found.append(periods)
    return found
