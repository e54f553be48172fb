"""Onsets of maps of several states to many digits: Newton's method on the defining equations.

The equations and unknowns are those of `many_shooting`: all cycle points, the critical vectors at
each of them, the parameter and, for a Neimark-Sacker point, its angle. Steps are taken on midpoints of balls;
one costs a number of operations in proportion to the period.
"""

from __future__ import annotations

import math
from collections.abc import Generator, Sequence
from dataclasses import dataclass
from typing import Any

from flint import arb, arb_mat

from tinemark.onsets.ball_orbits import precision
from tinemark.onsets.many_map import Floats, ManyMap, evaluators_along
from tinemark.onsets.many_shooting import (
    Condensed,
    Frames,
    Place,
    Right,
    Shift,
    entries,
    frames_along,
    leading,
    local_at,
)
from tinemark.onsets.results import Kind, Step

MOST_STEPS = 60
GUARD_BITS = 48


class NotFound(Exception):
    """Newton's method did not come to an onset; says why."""


@dataclass(frozen=True)
class Polished:
    """A solution of the defining equations at one precision.

    Attributes
    ----------
    place
        The solution, exact balls.
    monodromy
        Derivative of f^p at the first point (n, n), as a ball matrix of midpoints.
    slope
        Derivative of f^p in the parameter at the first point (n).
    turn, turn_r
        Derivative of (monodromy times critical vector) in the first point (n, n) and in r (n).
    last_step
        Size of the last Newton step in the parameter: residual times condition, and no less than rounding.
    bits
        Precision it was computed at.
    """

    place: Place
    monodromy: Any
    slope: list[Any]
    turn: Any
    turn_r: list[Any]
    last_step: float
    bits: int

    @property
    def points(self) -> list[list[Any]]:
        """Cycle points: p lists of n exact balls."""
        return self.place.points

    @property
    def vectors(self) -> list[list[Any]]:
        """The (first) critical vector at each point: p lists of n exact balls."""
        return [vectors[0] for vectors in self.place.vectors]

    @property
    def r(self) -> Any:
        """The parameter, an exact ball."""
        return self.place.r


def rough_place(
    many: ManyMap,
    points: Sequence[Sequence[Any]],
    vectors: Sequence[Sequence[float]],
    r: Any,
    angle: tuple[float, float] | None,
    bits: int,
) -> Place:
    """A place from rough cycle points and the rough critical vectors at the first of them, carried along."""
    n = many.size
    along = evaluators_along(many, len(points))
    with precision(bits):
        x = [[arb(value).mid() for value in point] for point in points]
        rr = arb(r).mid()
        length = math.sqrt(sum(float(value) ** 2 for vector in vectors for value in vector))
        now = [[arb(float(value) / length) for value in vector] for vector in vectors]
        carried = [now]
        for point, evaluators in zip(x[:-1], along, strict=False):
            following = []
            for vector in now:
                values = evaluators.critical(*point, rr, *vector)
                moved = arb_mat(n, n, list(values[n : n + n * n])) * arb_mat(n, 1, vector)
                following.append([value.mid() for value in entries(moved)])
            now = following
            carried.append(now)
        pair = None if angle is None else (arb(angle[0]), arb(angle[1]))
    return Place(x, carried, rr, pair)


def polish(
    many: ManyMap, kind: Kind, start: Place, bits: int, scales: Floats, reach: float
) -> Generator[Step, None, Polished]:
    """Newton's method from a rough place.

    Parameters
    ----------
    start
        Exact balls near the solution.
    bits
        Working precision.
    scales
        Length typical of each state.
    reach
        How far the parameter may move from the rough one.

    Raises
    ------
    NotFound
        No convergence, or the parameter left its reach.
    """
    place, begun = start, float(start.r)
    previous = math.inf
    text = f"polishing a {kind.value} of period {start.period}"
    try:
        frames = yield from frames_along(many, start, scales, bits, text)
    except ArithmeticError as error:
        raise NotFound("the orbit left the domain of the formula") from error
    for _ in range(MOST_STEPS):
        condensed, shift = yield from _newton_shift(many, kind, place, frames, bits, text)
        with precision(bits):
            step = abs(float(shift.r.mid()))
            size = max(
                max(abs(float(value.mid())) / scale for value, scale in zip(row, scales, strict=True))
                for row in _in_states(frames, shift)
            )
            if not (math.isfinite(step) and math.isfinite(size)):
                raise NotFound("the orbit left the domain of the formula")
            place = _shifted(place, frames, shift)
            if abs(float(place.r) - begun) > reach:
                raise NotFound("Newton's method left the neighbourhood")
            floor = 2.0 ** (GUARD_BITS / 2 - bits) * max(abs(float(place.r)), 1e-30)
            converged = step <= floor or (step >= previous / 4 and previous < 2.0 ** (-bits // 2))
        if converged:
            return _polished(condensed, place, step, bits)
        previous = step
    raise NotFound("Newton's method did not converge")


def _newton_shift(
    many: ManyMap, kind: Kind, place: Place, frames: Frames, bits: int, text: str
) -> Generator[Step, None, tuple[Condensed, Shift]]:
    local = yield from local_at(many, kind, place, frames, bits, text)
    condensed = Condensed(kind, place, frames, local)
    try:
        yield from condensed.condense(bits, text)
    except (ZeroDivisionError, ValueError) as error:
        raise NotFound("the defining equations are singular here") from error
    with precision(bits):
        circle = arb(0)
        if place.angle is not None:
            circle = place.angle[0] ** 2 + place.angle[1] ** 2 - 1
    shift = yield from condensed.solve(Right(local.gaps, local.gaps_v, circle), bits, text)
    return condensed, shift


def _in_states(frames: Frames, shift: Shift) -> list[list[Any]]:
    return [entries(basis * part) for basis, part in zip(frames.bases, shift.points, strict=False)]


def _shifted(place: Place, frames: Frames, shift: Shift) -> Place:
    points, vectors = [], []
    for at, basis in enumerate(frames.bases[:-1]):
        points.append(_added(place.points[at], basis * shift.points[at]))
        vectors.append(
            [
                _added(vector, basis * part)
                for vector, part in zip(place.vectors[at], shift.vectors[at], strict=True)
            ]
        )
    angle = None
    if place.angle is not None:
        c, s = ((value + part).mid() for value, part in zip(place.angle, shift.angle, strict=True))
        angle = (c, s)
    return Place(points, vectors, (place.r + shift.r).mid(), angle)


def _added(row: Sequence[Any], shift: Any) -> list[Any]:
    return [(a + b).mid() for a, b in zip(row, entries(shift), strict=True)]


def _polished(condensed: Condensed, place: Place, step: float, bits: int) -> Polished:
    frames = condensed.frames
    n = frames.bases[0].nrows()
    with precision(bits):
        basis, inverse = frames.bases[-1], frames.inverses[0]

        def parts(block: Any) -> tuple[Any, list[Any]]:
            last = basis * arb_mat(n, 1, [block[i, n] for i in range(n)])
            return (basis * leading(block) * inverse).mid(), [value.mid() for value in entries(last)]

        monodromy, slope = parts(condensed.blocks[-1])
        turn, turn_r = parts(condensed.blocks_v[-1][0])
    rounding = 2.0 ** (4 - bits) * max(abs(float(place.r)), 1e-30)
    return Polished(place, monodromy, slope, turn, turn_r, max(step, rounding), bits)


def working_bits(places: int, period: int) -> int:
    """Precision for the digits wanted, with room for what a long cycle and a Newton step lose."""
    return math.ceil(max(places, 12) * math.log2(10)) + GUARD_BITS + 24 + 4 * period.bit_length()
