"""Flips and folds of maps of several states to many digits, with an honest error estimate.

Unknowns are all p cycle points, the critical vector at each of them and the parameter:

    f(x_i, r) = x_(i+1),   f_x(x_i, r) v_i = v_(i+1),   v_p = -v_0 (flip) or v_0 (fold),   <l, v_0> = 1.

Newton's method on midpoints of balls; the cyclic banded system is condensed to the first point, so a step
costs a number of operations in proportion to p.
"""

from __future__ import annotations

import math
from collections.abc import Generator, Sequence
from dataclasses import dataclass
from fractions import Fraction
from typing import Any

import numpy as np
from flint import arb, arb_mat

from tinemark.onsets.ball_orbits import ball_of, precision
from tinemark.onsets.many_map import Floats, ManyMap, ball_evaluators
from tinemark.onsets.results import Kind, Step

MOST_STEPS = 60
CHUNK = 64
"""Cycle points between two chances to cancel."""
GUARD_BITS = 48


class NotFound(Exception):
    """Newton's method did not come to an onset; says why."""


@dataclass(frozen=True)
class Polished:
    """A solution of the defining system at one precision.

    Attributes
    ----------
    points, vectors
        Cycle points and critical vectors: p lists of n exact balls.
    r
        The parameter.
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

    points: list[list[Any]]
    vectors: list[list[Any]]
    r: Any
    monodromy: Any
    slope: list[Any]
    turn: Any
    turn_r: list[Any]
    last_step: float
    bits: int


def polish(
    many: ManyMap,
    kind: Kind,
    points: Sequence[Sequence[Any]],
    vector: Sequence[Any],
    r: Any,
    bits: int,
    scales: Floats,
    reach: float,
) -> Generator[Step, None, Polished]:
    """Newton's method from a rough place.

    Parameters
    ----------
    points, vector, r
        Rough cycle points, rough critical vector at the first one, rough parameter (doubles or balls).
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
    with precision(bits):
        x = [[arb(value).mid() for value in point] for point in points]
        rr = arb(r).mid()
        start = float(rr)
        v = _carried(many, x, rr, [arb(float(value)) for value in vector])
    normal = [arb(float(value)) for value in np.asarray([float(value) for value in vector])]
    length = float(sum(float(value) ** 2 for value in normal))
    normal = [value / length for value in normal]
    previous = math.inf
    text = f"polishing a {kind.value} of period {len(x)}"
    for _ in range(MOST_STEPS):
        parts = yield from _newton_parts(many, kind, x, v, rr, bits, text)
        first, first_v, shift_r = _solved(parts, kind, normal, v[0], bits)
        shift_x, shift_v = yield from _moves(parts, first, first_v, bits, text)
        with precision(bits):
            step = abs(float(shift_r))
            size = max(
                max(abs(float(value)) / scale for value, scale in zip(row, scales, strict=True))
                for row in shift_x
            )
            if not (math.isfinite(step) and math.isfinite(size)):
                raise NotFound("the orbit left the domain of the formula")
            x = [_added(row, shift) for row, shift in zip(x, shift_x, strict=True)]
            v = [_added(row, shift) for row, shift in zip(v, shift_v, strict=True)]
            rr = (rr + shift_r).mid()
            if abs(float(rr) - start) > reach:
                raise NotFound("Newton's method left the neighbourhood")
            floor = 2.0 ** (GUARD_BITS / 2 - bits) * max(abs(float(rr)), 1e-30)
            converged = step <= floor or (step >= previous / 4 and previous < 2.0 ** (-bits // 2))
        if converged:
            return _polished(parts, x, v, rr, step, bits)
        previous = step
    raise NotFound("Newton's method did not converge")


def _polished(
    parts: _Parts, x: list[list[Any]], v: list[list[Any]], r: Any, step: float, bits: int
) -> Polished:
    with precision(bits):
        monodromy, slope = _split(parts.blocks[-1])
        turn, turn_r = _split(parts.tangents[-1])
    rounding = 2.0 ** (4 - bits) * max(abs(float(r)), 1e-30)
    return Polished(x, v, r, monodromy, slope, turn, turn_r, max(step, rounding), bits)


def _split(block: Any) -> tuple[Any, list[Any]]:
    n = block.nrows()
    return (
        arb_mat(n, n, [block[i, j] for i in range(n) for j in range(n)]),
        [block[i, n] for i in range(n)],
    )


@dataclass(frozen=True)
class _Parts:
    blocks: list[Any]  # p + 1 matrices (n, n + 2): shift of x_i in terms of (dx_0, dr, 1)
    tangents: list[Any]  # p + 1 matrices (n, n + 2): the same for v_i, besides blocks @ dv_0


def _newton_parts(
    many: ManyMap, kind: Kind, x: list[list[Any]], v: list[list[Any]], r: Any, bits: int, text: str
) -> Generator[Step, None, _Parts]:
    n, count = many.size, len(x)
    evaluate = ball_evaluators(many).critical
    sign = -1 if kind is Kind.FLIP else 1
    with precision(bits):
        block = arb_mat(n, n + 2, [1 if i == j else 0 for i in range(n) for j in range(n + 2)])
        tangent = arb_mat(n, n + 2)
    blocks, tangents = [block], [tangent]
    for place in range(count):
        with precision(bits):
            values = evaluate(*x[place], r, *v[place])
            image, rest = values[:n], values[n:]
            jacobian = arb_mat(n, n, list(rest[: n * n]))
            slope, rest = rest[n * n : n * n + n], rest[n * n + n :]
            bend, bend_r = arb_mat(n, n, list(rest[: n * n])), rest[n * n :]
            following = x[(place + 1) % count]
            target = v[place + 1] if place + 1 < count else [sign * value for value in v[0]]
            carried = jacobian * arb_mat(n, 1, v[place])
            added = _columns(n, slope, [image[i] - following[i] for i in range(n)])
            added_v = _columns(n, bend_r, [carried[i, 0] - target[i] for i in range(n)])
            tangents.append((jacobian * tangents[-1] + bend * blocks[-1] + added_v).mid())
            blocks.append((jacobian * blocks[-1] + added).mid())
        if place % CHUNK == CHUNK - 1:
            yield Step(text)
    yield Step(text)
    return _Parts(blocks, tangents)


def _columns(n: int, slope: Sequence[Any], residual: Sequence[Any]) -> Any:
    entries: list[Any] = []
    for i in range(n):
        entries += [0] * n + [slope[i], residual[i]]
    return arb_mat(n, n + 2, entries)


def _solved(
    parts: _Parts, kind: Kind, normal: Sequence[Any], v0: Sequence[Any], bits: int
) -> tuple[Any, Any, Any]:
    """Shifts of the first point (with the parameter's and 1), the first vector and the parameter."""
    with precision(bits):
        return _condensed_solution(parts, kind, normal, v0)


def _condensed_solution(
    parts: _Parts, kind: Kind, normal: Sequence[Any], v0: Sequence[Any]
) -> tuple[Any, Any, Any]:
    n = parts.blocks[0].nrows()
    sign = -1 if kind is Kind.FLIP else 1
    last, last_v = parts.blocks[-1], parts.tangents[-1]
    size = 2 * n + 1
    matrix = [[arb(0)] * size for _ in range(size)]
    right = [arb(0)] * size
    for i in range(n):
        for j in range(n):
            same = 1 if i == j else 0
            matrix[i][j] = last[i, j] - same
            matrix[n + i][j] = last_v[i, j]
            matrix[n + i][n + j] = last[i, j] - sign * same
        matrix[i][2 * n] = last[i, n]
        matrix[n + i][2 * n] = last_v[i, n]
        right[i], right[n + i] = -last[i, n + 1], -last_v[i, n + 1]
        matrix[2 * n][n + i] = normal[i]
    right[2 * n] = 1 - sum((normal[i] * v0[i] for i in range(n)), arb(0))
    try:
        flat = arb_mat(size, size, [entry for row in matrix for entry in row]).mid()
        shift = flat.solve(arb_mat(size, 1, right).mid(), algorithm="approx").mid()
    except (ZeroDivisionError, ValueError) as error:
        raise NotFound("the defining equations are singular here") from error
    first = arb_mat(n + 2, 1, [shift[i, 0] for i in range(n)] + [shift[2 * n, 0], arb(1)])
    first_v = arb_mat(n, 1, [shift[n + i, 0] for i in range(n)])
    return first, first_v, shift[2 * n, 0]


def _moves(
    parts: _Parts, first: Any, first_v: Any, bits: int, text: str
) -> Generator[Step, None, tuple[list[list[Any]], list[list[Any]]]]:
    """Shifts of all points and vectors from those of the first."""
    n = parts.blocks[0].nrows()
    moves, moves_v = [], []
    for place, (block, tangent) in enumerate(zip(parts.blocks[:-1], parts.tangents[:-1], strict=True)):
        with precision(bits):
            move = block * first
            square = arb_mat(n, n, [block[i, j] for i in range(n) for j in range(n)])
            move_v = square * first_v + tangent * first
            moves.append([move[i, 0] for i in range(n)])
            moves_v.append([move_v[i, 0] for i in range(n)])
        if place % CHUNK == CHUNK - 1:
            yield Step(text)
    return moves, moves_v


def _carried(many: ManyMap, x: list[list[Any]], r: Any, vector: list[Any]) -> list[list[Any]]:
    n = many.size
    evaluate = ball_evaluators(many).critical
    vectors = [vector]
    for point in x[:-1]:
        values = evaluate(*point, r, *vectors[-1])
        moved = arb_mat(n, n, list(values[n : n + n * n])) * arb_mat(n, 1, vectors[-1])
        vectors.append([moved[i, 0].mid() for i in range(n)])
    return vectors


def _added(row: Sequence[Any], shift: Sequence[Any]) -> list[Any]:
    return [(a + b).mid() for a, b in zip(row, shift, strict=True)]


def working_bits(places: int, period: int) -> int:
    """Precision for the digits wanted, with room for what a long cycle and a Newton step lose."""
    return math.ceil(max(places, 12) * math.log2(10)) + GUARD_BITS + 24 + 4 * period.bit_length()


def as_balls(values: Sequence[Fraction], bits: int) -> list[Any]:
    """Rationals as balls at a precision."""
    with precision(bits):
        return [ball_of(value) for value in values]
