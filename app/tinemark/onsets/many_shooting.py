"""The defining equations of an onset, linearised along a cycle and solved without forming a large matrix.

Unknowns are all p cycle points, q critical vectors at each of them, the parameter and, for a
Neimark-Sacker point, the cosine c and sine s of its angle:

    f(x_i, r) = x_(i+1),   f_x(x_i, r) v_i = v_(i+1),   v_p = -v_0 (flip), v_0 (fold), and for two vectors
    u_p = c u_0 - s w_0,   w_p = s u_0 + c w_0,   c^2 + s^2 = 1;   v_0 normalised by linear equations.

Shifts of points and vectors are written in frames Q_i that a QR factorisation carries along the cycle
(Lohner, Enclosing the solutions of ordinary initial and boundary value problems, 1987): in them every
step of the linear recurrences is upper triangular but for rounding, so that balls are carried through
them without wrapping. The recurrences are condensed to the first point (Stoer and Bulirsch, Introduction to
Numerical Analysis, 7.3.5); all costs grow in proportion to the period.
"""

from __future__ import annotations

from collections.abc import Callable, Generator, Sequence
from dataclasses import dataclass
from time import perf_counter
from typing import Any

import numpy as np
from flint import arb, arb_mat

from tinemark.onsets.ball_orbits import precision
from tinemark.onsets.many_map import Floats, ManyMap, evaluators_along
from tinemark.onsets.results import Kind, Step

CHUNK = 32
"""Most cycle points between two chances to cancel …"""
SLICE_S = 0.02
"""… and seconds after which there is one."""


@dataclass(frozen=True)
class Place:
    """Values of the unknowns: exact balls at a middle, or boxes around it.

    Attributes
    ----------
    points
        p lists of n balls.
    vectors
        For each point its q critical vectors of n balls.
    r
        The parameter.
    angle
        Cosine and sine at a Neimark-Sacker point; None otherwise.
    """

    points: list[list[Any]]
    vectors: list[list[list[Any]]]
    r: Any
    angle: tuple[Any, Any] | None

    @property
    def period(self) -> int:
        """Number of points."""
        return len(self.points)

    @property
    def width(self) -> int:
        """Number of critical vectors at each point."""
        return len(self.vectors[0])


@dataclass(frozen=True)
class Frames:
    """Bases Q_0 ... Q_p of exact balls, the last one for the return to the first point, and inverses."""

    bases: list[Any]
    inverses: list[Any]


@dataclass(frozen=True)
class Local:
    """The map's derivatives along a cycle, in frames.

    Attributes
    ----------
    gaps, gaps_v
        f(x_i) - x_(i+1), and A_i v_i - v_(i+1) for each vector, where the next are those of the place.
    turn, slope
        A_i, and the derivative of f in r.
    bend, bend_r
        Derivatives of A_i v in the states and in r, for each vector.
    """

    gaps: list[Any]
    gaps_v: list[list[Any]]
    turn: list[Any]
    slope: list[Any]
    bend: list[list[Any]]
    bend_r: list[list[Any]]


def in_turn(count: int, bits: int, text: str, work: Callable[[int], None]) -> Generator[Step, None, None]:
    """Call `work(place)` for all places, in slices with a chance to cancel between them."""
    done = 0
    while done < count:
        begun = perf_counter()
        with precision(bits):
            for place in range(done, min(done + CHUNK, count)):
                work(place)
                done += 1
                if perf_counter() - begun > SLICE_S:
                    break
        yield Step(text)


def _prepared(many: ManyMap, place: Place, width: int, bits: int, text: str) -> Generator[Step, None, None]:
    """Have a map that takes long prepare what it will be asked at each point along its first vectors."""
    for at, each in enumerate(many.along(place.period)):
        prepare = each.own_preparation()
        if prepare is not None:
            yield from prepare(place.points[at], place.r, place.vectors[at][:width], bits, text)


def column(values: Sequence[Any]) -> Any:
    """A column matrix."""
    return arb_mat(len(values), 1, list(values))


def entries(matrix: Any) -> list[Any]:
    """The entries of a column."""
    return [matrix[i, 0] for i in range(matrix.nrows())]


def frames_along(
    many: ManyMap, middle: Place, scales: Floats, bits: int, text: str
) -> Generator[Step, None, Frames]:
    """Frames in which the derivatives along the cycle are upper triangular up to rounding of doubles."""
    n = many.size
    along = evaluators_along(many, middle.period)
    sizes = np.exp2(np.round(np.log2(scales)))  # powers of two: scaling rounds nothing
    basis = np.eye(n)
    bases: list[Any] = []

    def keep() -> None:
        bases.append(arb_mat(n, n, [float(value) for value in (sizes[:, None] * basis).ravel()]))

    def advance(place: int) -> None:
        nonlocal basis
        values = along[place].critical(*middle.points[place], middle.r, *middle.vectors[place][0])
        matrix = np.array([float(value) for value in values[n : n + n * n]]).reshape(n, n)
        moved = matrix * (sizes / sizes[:, None]) @ basis
        if not np.isfinite(moved).all():
            raise ArithmeticError("the derivative along the cycle is not finite")
        basis = np.linalg.qr(moved)[0]
        keep()

    keep()
    yield from _prepared(many, middle, 1, bits, text)
    yield from in_turn(middle.period, bits, text, advance)
    with precision(bits):
        return Frames(bases, [basis.inv() for basis in bases])


def local_at(
    many: ManyMap,
    kind: Kind,
    place: Place,
    frames: Frames,
    bits: int,
    text: str,
    check: Callable[[int, Sequence[Any], Any], None] | None = None,
) -> Generator[Step, None, Local]:
    """Residuals and derivatives of the defining equations, enclosed on the balls of a place."""
    n, count, width = many.size, place.period, place.width
    along = evaluators_along(many, count)
    found = Local([], [], [], [], [], [])
    with precision(bits):
        back = returned(kind, place)

    def look(at: int) -> None:
        x, after, vectors_after = place.points[at], place.points[(at + 1) % count], back
        if at + 1 < count:
            vectors_after = place.vectors[at + 1]
        if check is not None:
            check(at, x, place.r)
        basis, inverse = frames.bases[at], frames.inverses[at + 1]
        gaps_v, bends, bends_r = [], [], []
        for which in range(width):
            vector = place.vectors[at][which]
            values = along[at].critical(*x, place.r, *vector)
            jacobian = arb_mat(n, n, list(values[n : n + n * n]))
            rest = values[n + n * n :]
            moved = jacobian * column(vector)
            gaps_v.append(inverse * (moved - column(vectors_after[which])))
            bends.append(inverse * arb_mat(n, n, list(rest[n : n + n * n])) * basis)
            bends_r.append(inverse * column(rest[n + n * n :]))
        found.gaps.append(inverse * (column(values[:n]) - column(after)))
        found.gaps_v.append(gaps_v)
        found.turn.append(inverse * jacobian * basis)
        found.slope.append(inverse * column(rest[:n]))
        found.bend.append(bends)
        found.bend_r.append(bends_r)

    yield from _prepared(many, place, width, bits, text)
    yield from in_turn(count, bits, text, look)
    return found


def returned(kind: Kind, place: Place) -> list[list[Any]]:
    """What the critical vectors must have become after one period."""
    first = place.vectors[0]
    if place.angle is None:
        sign = -1 if kind is Kind.FLIP else 1
        return [[sign * value for value in first[0]]]
    (c, s), (u, w) = place.angle, first
    return [
        [c * a - s * b for a, b in zip(u, w, strict=True)],
        [s * a + c * b for a, b in zip(u, w, strict=True)],
    ]


def closing_blocks(kind: Kind, place: Place, frames: Frames) -> tuple[list[list[Any]], list[list[Any]]]:
    """How the vectors' return depends on those at the first point and on (c, s), in frames.

    Returns
    -------
    blocks, columns
        `blocks[i][j]` (n, n): vector i on return by shifts of vector j; `columns[i]`: by shifts of c and s.
    """
    link = frames.inverses[-1] * frames.bases[0]
    if place.angle is None:
        return [[-link if kind is Kind.FLIP else link]], [[]]
    c, s = place.angle
    u, w = (frames.inverses[-1] * column(vector) for vector in place.vectors[0])
    return [[link * c, link * -s], [link * s, link * c]], [[u, -w], [w, u]]


@dataclass(frozen=True)
class Shift:
    """Shifts of all unknowns: points and vectors in frames, the parameter, and the angle's pair."""

    points: list[Any]
    vectors: list[list[Any]]
    r: Any
    angle: list[Any]


@dataclass(frozen=True)
class Right:
    """A right-hand side: for the points', the vectors' and the circle's equations (those of the norm: 0)."""

    points: list[Any]
    vectors: list[list[Any]]
    circle: Any


class Condensed:
    """The linearised equations at a middle, condensed to the first point; solves for any right-hand side.

    The matrix is the exact derivative at the middle: the balls that stand for it enclose it, and solutions
    enclose all solutions of right-hand sides within their balls.
    """

    def __init__(self, kind: Kind, middle: Place, frames: Frames, local: Local) -> None:
        self.kind, self.middle, self.frames, self.local = kind, middle, frames, local
        self.blocks: list[Any] = []  # (n, n + 1): shift of point i by those of the first point and of r
        self.blocks_v: list[list[Any]] = []
        self.matrix: Any = None

    def condense(self, bits: int, text: str) -> Generator[Step, None, None]:
        """Carry the homogeneous equations round the cycle and close them.

        Raises
        ------
        ZeroDivisionError
            The closing matrix is singular as far as can be seen.
        """
        yield from self.carry(bits, text)
        with precision(bits):
            self.matrix = self._closing()
            self.inverse = self.matrix.inv()

    def carry(self, bits: int, text: str) -> Generator[Step, None, None]:
        """Carry the homogeneous equations round the cycle."""
        n, width, local = self.frames.bases[0].nrows(), self.middle.width, self.local
        with precision(bits):
            now = arb_mat(n, n + 1, [int(i == j) for i in range(n) for j in range(n + 1)])
            now_v = [arb_mat(n, n + 1) for _ in range(width)]
        self.blocks.append(now)
        self.blocks_v.append(now_v)

        def advance(at: int) -> None:
            nonlocal now, now_v
            turn = local.turn[at]
            now_v = [
                turn * v + bend * now + padded(n, bend_r)
                for v, bend, bend_r in zip(now_v, local.bend[at], local.bend_r[at], strict=True)
            ]
            now = turn * now + padded(n, local.slope[at])
            self.blocks.append(now)
            self.blocks_v.append(now_v)

        yield from in_turn(self.middle.period, bits, text, advance)

    def _closing(self) -> Any:
        kind, middle, frames = self.kind, self.middle, self.frames
        n, width = frames.bases[0].nrows(), middle.width
        extra = 0 if middle.angle is None else 2
        size = (1 + width) * n + 1 + extra
        at_r = (1 + width) * n
        matrix = [[arb(0)] * size for _ in range(size)]
        link = frames.inverses[-1] * frames.bases[0]
        last, last_v = self.blocks[-1], self.blocks_v[-1]
        blocks, columns = closing_blocks(kind, middle, frames)
        for i in range(n):
            for j in range(n):
                matrix[i][j] = last[i, j] - link[i, j]
            matrix[i][at_r] = last[i, n]
            for which in range(width):
                row = matrix[(1 + which) * n + i]
                for j in range(n):
                    row[j] = last_v[which][i, j]
                    for other in range(width):
                        row[(1 + other) * n + j] = -blocks[which][other][i, j]
                    row[(1 + which) * n + j] += last[i, j]
                row[at_r] = last_v[which][i, n]
                for place, entry in enumerate(columns[which]):
                    row[at_r + 1 + place] = -entry[i, 0]
        for place, norm in enumerate(norm_rows(middle)):
            for which, part in enumerate(norm):
                product = arb_mat(1, n, list(part)) * frames.bases[0]
                for j in range(n):
                    matrix[at_r + place][(1 + which) * n + j] = product[0, j]
        if middle.angle is not None:
            matrix[size - 1][at_r + 1], matrix[size - 1][at_r + 2] = (2 * value for value in middle.angle)
        return arb_mat(size, size, [entry for row in matrix for entry in row])

    def solve(self, right: Right, bits: int, text: str) -> Generator[Step, None, Shift]:
        """The shifts k with (derivative) k = -(right-hand side), enclosed."""
        n, width, local = self.frames.bases[0].nrows(), self.middle.width, self.local
        now, now_v = arb_mat(n, 1), [arb_mat(n, 1) for _ in range(width)]
        own, own_v = [now], [now_v]

        def advance(at: int) -> None:
            nonlocal now, now_v
            turn = local.turn[at]
            now_v = [
                turn * v + bend * now + given
                for v, bend, given in zip(now_v, local.bend[at], right.vectors[at], strict=True)
            ]
            now = turn * now + right.points[at]
            own.append(now)
            own_v.append(now_v)

        yield from in_turn(self.middle.period, bits, text, advance)
        with precision(bits):
            size = self.matrix.nrows()
            ends = [-value for part in (now, *now_v) for value in entries(part)]
            ends += [arb(0)] * (size - len(ends))
            if self.middle.angle is not None:
                ends[-1] = -right.circle
            first = entries(self.inverse * column(ends))
            parts = [column(first[k * n : k * n + n]) for k in range(1 + width)]
            r = first[(1 + width) * n]
            start = column([*entries(parts[0]), r])
        found = Shift([], [], r, first[(1 + width) * n + 1 :])

        def place_one(at: int) -> None:
            block = self.blocks[at]
            found.points.append(block * start + own[at])
            square = leading(block)
            found.vectors.append(
                [
                    square * parts[1 + which] + self.blocks_v[at][which] * start + own_v[at][which]
                    for which in range(width)
                ]
            )

        yield from in_turn(self.middle.period, bits, text, place_one)
        return found


def norm_rows(middle: Place) -> list[list[list[Any]]]:
    """Linear equations that fix the length (and the phase) of the critical vectors at the first point."""
    if middle.angle is None:
        return [[middle.vectors[0][0]]]
    u, w = middle.vectors[0]
    return [[u, w], [[-value for value in w], u]]


def leading(block: Any) -> Any:
    """The square part of a block."""
    n = block.nrows()
    return arb_mat(n, n, [block[i, j] for i in range(n) for j in range(n)])


def padded(n: int, last: Any) -> Any:
    """A column as the last one of an (n, n + 1) block."""
    values: list[Any] = []
    for i in range(n):
        values += [0] * n + [last[i, 0]]
    return arb_mat(n, n + 1, values)
